package assess

import (
	"math"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// below returns Pr(T ≤ x) for a standard normal T, or Student's t when dof is
// finite. Both tails keep their relative accuracy; the upper one is below(−x).
func below(x, dof float64) float64 {
	if dof > 1e8 { // t and normal differ by less than 1e-9, in the tail by x⁴/4dof of it
		return 0.5 * math.Erfc(-x/math.Sqrt2)
	}
	if math.IsInf(x, 0) {
		if x > 0 {
			return 1
		}
		return 0
	}
	if dof < 1e-300 { // half of it may be 0: nothing within reach
		return 0.5
	}
	tail := 0.5 * mathext.RegIncBeta(dof/2, 0.5, dof/(dof+x*x))
	if x > 0 {
		return 1 - tail
	}
	return tail
}

// between returns Pr(a ≤ T ≤ b), from the tails when both ends lie on one side
// so that small probabilities keep their digits.
func between(a, b, dof float64) float64 {
	switch {
	case a >= b:
		return 0
	case a > 0:
		return below(-a, dof) - below(-b, dof)
	case b < 0:
		return below(b, dof) - below(a, dof)
	}
	return 1 - below(a, dof) - below(-b, dof)
}

// outside returns Pr(T < a or T > b), a ≤ b.
func outside(a, b, dof float64) float64 { return below(a, dof) + below(-b, dof) }

// quantile returns x with Pr(T ≤ x) = p, 0 < p < 1.
func quantile(p, dof float64) float64 {
	if p > 0.5 {
		return -quantile(1-p, dof)
	}
	if dof > 1e8 {
		return distuv.UnitNormal.Quantile(p)
	}
	// Student's tails are heavier: the quantile lies beyond the normal one.
	// gonum's inverse fails for p below about 1e-8, so the tail is bisected.
	if p == 0.5 {
		return 0
	}
	inner := -distuv.UnitNormal.Quantile(p)
	outer := 2 * inner
	for below(-outer, dof) > p {
		inner, outer = outer, 2*outer
	}
	return -bisect(func(x float64) bool { return below(-x, dof) > p }, inner, outer)
}

// twoSided returns the probability of |T| larger than |x|.
func twoSided(x, dof float64) float64 { return 2 * below(-math.Abs(x), dof) }

// chiTail returns Pr(χ²(dof) > x).
func chiTail(x float64, dof int) float64 {
	return distuv.ChiSquared{K: float64(dof)}.Survival(x)
}
