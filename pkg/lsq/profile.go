package lsq

import (
	"context"
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Profile is an interval of one parameter from the profile likelihood.
type Profile struct {
	Lower, Upper float64 // parameter's unit; infinite when chi-squared never rises enough on that side
	AtLower      bool    // the interval ends at the parameter's lower bound
	AtUpper      bool    // the interval ends at its upper bound
	Fits         int     // fits made
}

// Profile finds the interval of parameter j at coverage probability p (such as
// 0.9545) from the profile of chi-squared: the values at which the minimum over
// all other parameters exceeds the overall minimum by the quantile of
// chi-squared with one degree of freedom, or, with unknown uncertainties, by s²
// times that of F(1, ν) (Bates and Watts, Nonlinear Regression Analysis and Its
// Applications (1988), section 6.1). Weights are frozen at those of r. For a
// model linear in its parameters it is the usual symmetric interval. A profile
// that meets a chi-squared below that of r is an error: r is not the minimum.
func (r *Result) Profile(ctx context.Context, j int, p float64) (*Profile, error) {
	if !(p > 0 && p < 1) {
		return nil, fmt.Errorf("lsq: coverage probability %v must lie between 0 and 1", p)
	}
	if r.Status != Converged {
		return nil, fmt.Errorf("lsq: the fit is %s; a profile needs a converged fit", r.Status)
	}
	var free []int
	found := false
	for _, k := range r.Free {
		if k == j {
			found = true
		} else {
			free = append(free, k)
		}
	}
	if !found || math.IsNaN(r.U[j]) {
		return nil, fmt.Errorf("lsq: parameter %d is not free, or its uncertainty unknown; it has no profile", j)
	}
	quantile := distuv.ChiSquared{K: 1}.Quantile(p)
	if r.ScaledByResiduals {
		quantile = r.scale * distuv.F{D1: 1, D2: float64(r.DOF)}.Quantile(p)
	}
	a, err := r.repeat(r.problem.Y, free, nil)
	if err != nil {
		return nil, err
	}
	if pr := r.problem.Parameters[j].Prior; pr != nil { // held now, but its prior still counts
		a.s.priorW[j], a.s.priorV[j] = 0, math.NaN()
	}
	out := &Profile{}
	want := math.Sqrt(quantile)
	par := &r.problem.Parameters[j]
	theta := append([]float64(nil), r.Values...)
	var lower error // a better minimum
	root := func(at float64, from []float64) (float64, []float64, error) {
		start := append([]float64(nil), from...)
		start[j] = at
		if err := a.run(ctx, start); err != nil {
			return 0, nil, err
		}
		out.Fits++
		chi2 := a.s.chi2
		if par.Prior != nil {
			d := (at - par.Prior.Value) / par.Prior.U
			chi2 += d * d
		}
		if chi2 < r.ChiSquared-1e-3*quantile {
			lower = fmt.Errorf("lsq: with %s at %v chi-squared is %.6g, below the %.6g of the result, which is not the minimum: start the fit there", r.problem.name(j), at, chi2, r.ChiSquared)
			return 0, nil, lower
		}
		return math.Sqrt(math.Max(0, chi2-r.ChiSquared)), append([]float64(nil), a.s.theta...), nil
	}
	side := func(sign float64, bound *float64) (float64, bool, error) {
		at, z := r.Values[j], 0.0 // a point inside, and its root of the rise of chi-squared
		from := theta
		step := want * r.U[j] / math.Sqrt(r.scale)
		lowX, lowZ := at, z
		for i := 0; i < 60; i++ {
			next, clipped := at+sign*step, false
			if bound != nil && sign*(next-*bound) >= 0 {
				next, clipped = *bound, true
			}
			zn, th, err := root(next, from)
			if ctx.Err() != nil || lower != nil {
				return 0, false, err
			}
			if err != nil { // too far: come nearer
				step *= 0.5
				if step < 1e-10*r.U[j] {
					return 0, false, err
				}
				continue
			}
			if zn >= want {
				// bracketed: regula falsi with bisection on the nearly straight root
				hiX, hiZ := next, zn
				for k := 0; k < 60; k++ {
					x := lowX + (hiX-lowX)*(want-lowZ)/(hiZ-lowZ)
					if k%4 == 3 {
						x = 0.5 * (lowX + hiX)
					}
					zx, tx, err := root(x, from)
					if err != nil {
						return 0, false, err
					}
					if math.Abs(zx-want) <= 1e-8*want || math.Abs(hiX-lowX) <= 1e-12*math.Abs(hiX-r.Values[j]) {
						return x, false, nil
					}
					if zx < want {
						lowX, lowZ, from = x, zx, tx
					} else {
						hiX, hiZ = x, zx
					}
				}
				return 0.5 * (lowX + hiX), false, nil
			}
			if clipped {
				return *bound, true, nil
			}
			lowX, lowZ, from, at = next, zn, th, next
			if zn > 0 {
				step = math.Min(2*step, math.Max(0.1*step, 1.2*(want-zn)*math.Abs(next-r.Values[j])/zn))
			} else {
				step *= 2
			}
		}
		return math.Inf(int(sign)), false, nil
	}
	if out.Lower, out.AtLower, err = side(-1, par.Lower); err != nil {
		return nil, err
	}
	if out.Upper, out.AtUpper, err = side(1, par.Upper); err != nil {
		return nil, err
	}
	return out, nil
}
