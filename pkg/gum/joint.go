package gum

import (
	"fmt"

	"gonum.org/v1/gonum/mat"

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
	r := mat.NewSymDense(max(1, len(j.index)), nil)
	for i := range j.index {
		r.SetSym(i, i, 1)
	}
	for _, c := range corr {
		r.SetSym(at[c.I], at[c.J], c.R)
	}
	j.root = choleskySemi(r)
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
