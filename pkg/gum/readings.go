package gum

import (
	"errors"
	"fmt"
	"math"
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
