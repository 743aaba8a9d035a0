package gum

import (
	"errors"
	"fmt"
	"math"
	"strings"
)

// FromReadings is the Type A evaluation of repeated independent readings (JCGM
// 100:2008 4.2): the mean, the standard deviation of the mean, n − 1 degrees of
// freedom. Monte Carlo draws it from the scaled t of JCGM 101:2008 6.4.9. Fewer
// than two readings, numbers that are not finite, or readings without any scatter
// give an error.
func FromReadings(x []float64) (Distribution, error) {
	mean, sd, err := meanSD(x)
	if err != nil {
		return Distribution{}, err
	}
	n := float64(len(x))
	return Distribution{Shape: ShapeNormal, Value: mean, U: sd / math.Sqrt(n), DOF: n - 1}, nil
}

func meanSD(x []float64) (mean, sd float64, err error) {
	if len(x) < 2 {
		return 0, 0, fmt.Errorf("%d readings: a Type A evaluation needs two or more", len(x))
	}
	for i, v := range x {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return 0, 0, fmt.Errorf("reading %d is %v: it must be finite", i+1, v)
		}
	}
	n := float64(len(x))
	for _, v := range x {
		mean += v / n
	}
	var sum, ss float64
	for _, v := range x {
		sum += v - mean
		ss += (v - mean) * (v - mean)
	}
	mean += sum / n
	ss -= sum * sum / n
	if !(ss > 0) {
		return 0, 0, errors.New("the readings are all equal: their scatter says nothing; state the resolution as a rectangular distribution instead")
	}
	return mean, math.Sqrt(ss / (n - 1)), nil
}

// JointReadings is the Type A evaluation of several quantities read together n
// times (JCGM 100:2008 5.2.3, JCGM 102:2011 5.3.2): columns[k] holds the readings of
// names[k]. For the law each input has the standard deviation of its mean with n − 1
// degrees of freedom, and pairs the correlations of the means; Monte Carlo draws all
// N from the multivariate t of JCGM 102:2011 5.3.2 with n − N degrees of freedom,
// whose scale is larger by √((n−1)/(n−N)). The inputs share a Block; groups and units
// are left to fill in. n must exceed N.
func JointReadings(names []string, columns [][]float64) (inputs []Input, pairs []Pair, err error) {
	k := len(names)
	if k == 0 || len(columns) != k {
		return nil, nil, fmt.Errorf("%d names for %d columns of readings", k, len(columns))
	}
	n := len(columns[0])
	if n <= k {
		return nil, nil, fmt.Errorf("%d joint readings of %d quantities: more readings than quantities are needed (JCGM 102:2011 5.3.2)", n, k)
	}
	block := "readings of " + strings.Join(names, ", ")
	sd := make([]float64, k)
	for j, c := range columns {
		if len(c) != n {
			return nil, nil, fmt.Errorf("%s has %d readings and %s has %d: joint readings come together", names[j], len(c), names[0], n)
		}
		d, err := FromReadings(c)
		if err != nil {
			return nil, nil, fmt.Errorf("%s: %w", names[j], err)
		}
		sd[j] = d.U * math.Sqrt(float64(n))
		d.drawDOF = float64(n - k)
		d.drawScale = d.U * math.Sqrt(float64(n-1)/float64(n-k))
		inputs = append(inputs, Input{Name: names[j], Dist: d, Block: block})
		for i := range j {
			var s float64
			for r := range c {
				s += (c[r] - d.Value) * (columns[i][r] - inputs[i].Dist.Value)
			}
			r := s / float64(n-1) / (sd[i] * sd[j])
			pairs = append(pairs, Pair{A: names[i], B: names[j], R: math.Max(-1, math.Min(1, r))})
		}
	}
	return inputs, pairs, nil
}
