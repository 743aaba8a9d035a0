package assess

import (
	"errors"
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// RobustSettings adjusts Algorithm A. The zero value is the default.
type RobustSettings struct {
	// Digits stops when neither the mean nor the standard deviation changes in
	// that significant figure of the standard deviation (ISO 13528:2015 C.3.1
	// has 3). 0: iterate to full precision, a change below 1e-13 of the standard
	// deviation.
	Digits int
	// Exact replaces the rounded constants of the standard, 1.483 and 1.134, by
	// the exact ones for normal data: 1/Φ⁻¹(3/4) and Huber's √(1/β) at 1.5. The
	// result is then Huber's proposal 2 (Huber 1964, Ann. Math. Statist. 35, 73).
	Exact bool
}

// Robust is a mean and standard deviation that a minority of wild values hardly
// moves.
type Robust struct {
	N          int     `json:"n"`
	Mean       float64 `json:"mean"`
	SD         float64 `json:"sd"`
	U          float64 `json:"u"`       // standard uncertainty of the mean, 1.25 SD/√n (ISO 13528:2015 7.7.3)
	Median     float64 `json:"median"`  // start of the mean
	ScaledMAD  float64 `json:"mad"`     // start of the standard deviation: 1.483 times the median |x − median|
	Limited    int     `json:"limited"` // values pulled in to Mean ± 1.5 SD at the end
	Iterations int     `json:"iterations"`
	Criterion  string  `json:"criterion"` // what stopped the iteration
	Warnings   []error `json:"-"`
}

// AlgorithmA returns the robust mean and standard deviation of ISO 13528:2015
// C.3.1 (Analytical Methods Committee 1989, Analyst 114, 1693): from the median
// and the scaled median absolute deviation,
//
//	x_i* = x_i pulled in to x* ± 1.5 s*;  x* = mean x_i*;  s* = 1.134 √(Σ(x_i* − x*)²/(n − 1))
//
// until the criterion of RobustSettings is met. x (any unit, at least 3 values)
// is not changed. When more than half the values are equal the start of s* is
// zero; the ordinary standard deviation then starts it and a warning says so.
func AlgorithmA(x []float64, s RobustSettings) (*Robust, error) {
	n := len(x)
	if n < 3 {
		return nil, fmt.Errorf("a robust mean needs at least 3 values; got %d", n)
	}
	for i, v := range x {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return nil, fmt.Errorf("value %d is %v, not a finite number", i+1, v)
		}
	}
	if s.Digits < 0 || s.Digits > 12 {
		return nil, fmt.Errorf("convergence to %d significant figures: 0 (full precision) to 12 are possible", s.Digits)
	}
	scale, factor := 1.483, 1.134
	if s.Exact {
		phi := distuv.UnitNormal
		scale = 1 / phi.Quantile(0.75)
		inside := phi.CDF(1.5) - phi.CDF(-1.5)
		factor = 1 / math.Sqrt(inside+1.5*1.5*(1-inside)-2*1.5*phi.Prob(1.5))
	}
	r := &Robust{N: n, Median: median(x)}
	away := make([]float64, n)
	for i, v := range x {
		away[i] = math.Abs(v - r.Median)
	}
	r.ScaledMAD = scale * median(away)
	r.Mean, r.SD = r.Median, r.ScaledMAD
	if r.SD == 0 {
		r.SD = stat.StdDev(x, nil)
		if r.SD == 0 {
			return nil, errors.New("all values are equal: no spread to estimate (check the resolution)")
		}
		r.Warnings = append(r.Warnings, errors.New("half the values or more are equal, so the median absolute deviation is zero; the ordinary standard deviation started the iteration"))
	}
	start := r.SD
	r.Criterion = "no change beyond 1e-13 of the standard deviation"
	if s.Digits > 0 {
		r.Criterion = fmt.Sprintf("no change in significant figure %d of the standard deviation and the same place of the mean", s.Digits)
	}
	pulled := away
	const most = 10000
	for r.Iterations = 1; r.Iterations <= most; r.Iterations++ {
		bound := 1.5 * r.SD
		r.Limited = 0
		for i, v := range x {
			pulled[i] = math.Max(r.Mean-bound, math.Min(r.Mean+bound, v)) - r.Median
			if math.Abs(v-r.Mean) > bound {
				r.Limited++
			}
		}
		mean, sd := stat.MeanStdDev(pulled, nil)
		mean, sd = mean+r.Median, factor*sd
		if sd <= 1e-12*start {
			return nil, errors.New("the robust standard deviation shrinks to zero: too many values are equal (check the resolution)")
		}
		done := math.Abs(mean-r.Mean) <= 1e-13*sd+2e-16*math.Abs(mean) && math.Abs(sd-r.SD) <= 1e-13*sd
		if s.Digits > 0 {
			place := math.Pow(10, math.Floor(math.Log10(sd))-float64(s.Digits-1))
			done = math.Round(mean/place) == math.Round(r.Mean/place) && math.Round(sd/place) == math.Round(r.SD/place)
		}
		r.Mean, r.SD = mean, sd
		if done {
			r.U = 1.25 * r.SD / math.Sqrt(float64(n))
			return r, nil
		}
	}
	return nil, fmt.Errorf("the robust mean (Algorithm A) did not converge in %d iterations (mean %v, standard deviation %v)", most, r.Mean, r.SD)
}

func median(x []float64) float64 {
	s := append([]float64(nil), x...)
	sort.Float64s(s)
	if n := len(s); n%2 == 0 {
		return s[n/2-1] + (s[n/2]-s[n/2-1])/2
	}
	return s[len(s)/2]
}
