package gum

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/random"
)

// A Joint draws several inputs together, with their correlations: normals from
// the multivariate normal, other shapes by a Gaussian copula, in which the stated
// coefficient is that of the underlying normals. It may be shared by goroutines.
type Joint struct {
	d     []Distribution
	index []int       // the correlated inputs
	root  [][]float64 // lower triangle of the factor of their correlation matrix
}

// NewJoint prepares the drawing of d with the given correlations. It returns an
// error for a distribution that can't be drawn from and for coefficients that no
// quantities can have.
func NewJoint(d []Distribution, corr []Correlation) (*Joint, error) {
	names := make([]string, len(d))
	for i := range d {
		names[i] = fmt.Sprintf("input %d", i+1)
		if err := d[i].Check(); err != nil {
			return nil, err
		}
	}
	if err := checkPairs(corr, names); err != nil {
		return nil, err
	}
	j := &Joint{d: append([]Distribution(nil), d...)}
	at := map[int]int{}
	for _, c := range corr {
		for _, k := range []int{c.I, c.J} {
			if _, ok := at[k]; !ok {
				at[k] = len(j.index)
				j.index = append(j.index, k)
			}
		}
	}
	n := len(j.index)
	r := make([][]float64, n)
	for i := range r {
		r[i] = make([]float64, n)
		r[i][i] = 1
	}
	for _, c := range corr {
		a, b := at[c.I], at[c.J]
		r[a][b], r[b][a] = c.R, c.R
	}
	// Cholesky factor of a matrix that may be singular: a vanishing pivot is a
	// quantity that the earlier ones determine.
	j.root = make([][]float64, n)
	for i := range r {
		j.root[i] = make([]float64, i+1)
		for k := 0; k <= i; k++ {
			s := r[i][k]
			for m := range k {
				s -= j.root[i][m] * j.root[k][m]
			}
			switch {
			case k == i:
				j.root[i][i] = math.Sqrt(math.Max(s, 0))
			case j.root[k][k] > 1e-8:
				j.root[i][k] = s / j.root[k][k]
			}
		}
	}
	return j, nil
}

// Sample draws all inputs once into dst, in the order given to NewJoint.
func (j *Joint) Sample(src *random.Source, dst []float64) {
	for i := range j.d {
		dst[i] = j.d[i].Sample(src)
	}
	if len(j.index) == 0 {
		return
	}
	var small [16]float64
	z := small[:0]
	for range j.index {
		z = append(z, src.Normal())
	}
	for i := len(z) - 1; i >= 0; i-- {
		var s float64
		for k, c := range j.root[i] {
			s += c * z[k]
		}
		dst[j.index[i]] = j.d[j.index[i]].quantileNormal(s)
	}
}
