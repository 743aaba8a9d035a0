package gum

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// The coverage probabilities that are taken: k of a normal goes from 0.67, the
// probable error of old, to 4.9. Below, an interval covers less than it leaves
// out; above, neither trials nor the normal shape of the tails vouch for it
// (common practice, no source).
const (
	MinCoverage = 0.5
	MaxCoverage = 0.999999
)

// DefaultCoverage is the coverage probability where nobody says another: k = 2 for a
// normal distribution.
const DefaultCoverage = 0.9545

// CheckCoverage returns an error when p is no coverage probability from
// MinCoverage to MaxCoverage.
func CheckCoverage(p float64) error {
	if !(p >= MinCoverage && p <= MaxCoverage) {
		return fmt.Errorf("coverage probability %v must lie between 0.5 and 0.999999; 0.9545 or 0.95 is usual", p)
	}
	return nil
}

// CoverageFactor returns the k for which ±k covers the probability p under
// Student's t (JCGM 100:2008 table G.2). Fractional dof of 1 or more are truncated
// to an integer (JCGM 100:2008 G.4.1); infinite or NaN dof give the factor of a
// normal. p must lie in (0, 1) and dof be positive; otherwise the result is NaN. It
// is +Inf where it overflows: a hundredth of a degree of freedom and less.
func CoverageFactor(p, dof float64) float64 {
	if !(p > 0 && p < 1) {
		return math.NaN()
	}
	if math.IsNaN(dof) {
		dof = math.Inf(1)
	}
	if dof > 1 && dof < 1e15 {
		// 9 degrees of freedom from a quotient may come out a rounding short of 9.
		dof = math.Floor(dof * (1 + 1e-9))
	}
	return tUpper((1-p)/2, dof)
}

// TrapezoidFactor returns the coverage factor for probability p of a symmetric
// trapezoid whose top is beta times its base, in units of its standard deviation
// (EA-4/02 M:2022 S10.13, from memory; derived by integrating the density). beta 1 is
// a rectangle, 0 a triangle.
func TrapezoidFactor(p, beta float64) float64 {
	if !(p > 0 && p < 1 && beta >= 0 && beta <= 1) {
		return math.NaN()
	}
	d := Trapezoidal(0, 1, beta)
	return d.Quantile((1+p)/2) / d.U
}

// tUpper returns the t that Student's t with dof degrees of freedom exceeds with
// probability q, 0 < q ≤ 1/2.
func tUpper(q, dof float64) float64 {
	switch {
	case !(dof > 0):
		return math.NaN()
	case dof < 1e-300: // half of it may be 0
		return math.Inf(1)
	case dof >= 1e15:
		return normalUpper(q)
	case dof >= manyDOF:
		return tUpperMany(normalUpper(q), dof)
	}
	var t float64
	switch {
	case dof == 1:
		return 1 / math.Tan(math.Pi*q)
	case dof == 2:
		return (1 - 2*q) / math.Sqrt(2*q*(1-q))
	case q < 0.25:
		// Two-sided tail 2q = I_x(ν/2, 1/2), x = ν/(ν+t²).
		x := mathext.InvRegIncBeta(dof/2, 0.5, 2*q)
		t = math.Sqrt(dof * (1 - x) / x)
	default:
		y := mathext.InvRegIncBeta(0.5, dof/2, 1-2*q)
		t = math.Sqrt(dof * y / (1 - y))
	}
	// The inverse above is good to about 1e-10; two steps of Newton's method on the
	// tail probability make it exact to rounding.
	for range 2 {
		if f := tDensity(t, dof); f > 0 {
			t += (tTail(t, dof) - q) / f
		}
	}
	return t
}

// manyDOF is the number of degrees of freedom from which quantiles come from the
// expansion about the normal: the incomplete beta function loses digits there, about
// eps times the degrees of freedom.
const manyDOF = 1e5

// tUpperMany returns the t that belongs to the normal quantile x, by the expansion in
// powers of 1/dof (Abramowitz and Stegun, Handbook of Mathematical Functions, 26.7.5).
// What it leaves out is below (x²/dof)⁵.
func tUpperMany(x, dof float64) float64 {
	y, r := x*x, 1/dof
	g1 := (y + 1) / 4
	g2 := ((5*y+16)*y + 3) / 96
	g3 := (((3*y+19)*y+17)*y - 15) / 384
	g4 := ((((79*y+776)*y+1482)*y-1920)*y - 945) / 92160
	return x + x*r*(g1+r*(g2+r*(g3+r*g4)))
}

// normalUpper returns the x that a standard normal exceeds with probability q,
// 0 < q ≤ 1/2.
func normalUpper(q float64) float64 {
	if q < 1e-8 { // 1 − 2q has lost digits of q
		return -distuv.UnitNormal.Quantile(q)
	}
	return math.Sqrt2 * math.Erfcinv(2*q)
}

// tTail returns P(T > t), t ≥ 0, for fewer than manyDOF degrees of freedom.
func tTail(t, dof float64) float64 {
	x := dof / (dof + t*t)
	if x < 0.5 || t*t > 1 {
		return 0.5 * mathext.RegIncBeta(dof/2, 0.5, x)
	}
	return 0.5 - 0.5*mathext.RegIncBeta(0.5, dof/2, t*t/(dof+t*t))
}

// tDensity returns the density of Student's t.
func tDensity(t, dof float64) float64 {
	a, _ := math.Lgamma((dof + 1) / 2)
	b, _ := math.Lgamma(dof / 2)
	return math.Exp(a - b - 0.5*math.Log(dof*math.Pi) - (dof+1)/2*math.Log1p(t*t/dof))
}
