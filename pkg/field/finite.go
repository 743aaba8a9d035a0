package field

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/jet"
)

// PlateSite is an arrangement of finite square plates and the place whose field
// is meant.
type PlateSite int

const (
	// BalancedMidGap: equal plates at ±V/2, at mid-gap over the centre.
	BalancedMidGap PlateSite = iota
	// BalancedSurface: equal plates at ±V/2, at the centre of a plate's surface.
	BalancedSurface
	// OverEarthedPlane: a live plate over a wide earthed plane, at the plane
	// under its centre. The plane mirrors the plate, so that it behaves as a
	// balanced pair at twice the spacing.
	OverEarthedPlane
	// EqualOneEarthed: two equal plates, one earthed, earthed surroundings far
	// away, at the centre of the earthed plate.
	EqualOneEarthed
)

// String returns the name that a bench uses.
func (p PlateSite) String() string {
	switch p {
	case BalancedMidGap:
		return "balanced-mid-gap"
	case BalancedSurface:
		return "balanced-surface"
	case OverEarthedPlane:
		return "over-earthed-plane"
	case EqualOneEarthed:
		return "equal-one-earthed"
	}
	return fmt.Sprintf("PlateSite(%d)", int(p))
}

// finiteSite holds, for a site, departure = sign·4 exp(−(1 + p·W/d)) times
// exp(c₀ + c₁W/d + c₂(W/d)²), its range and its residual.
type finiteSite struct {
	sign, p   float64
	c         [3]float64
	low, high float64 // W/d
	residual  float64
}

// finiteSites: the first three by the leading exponential of the field between
// two half planes (derived by Maxwell's edge map, Treatise, art. 202), which is
// 15 to 20 % low for a square; the last fitted to SolveSquarePlates, within 1 %.
var finiteSites = map[PlateSite]finiteSite{
	BalancedMidGap:   {sign: -1, p: math.Pi, low: 2, high: math.Inf(1), residual: 0.20},
	BalancedSurface:  {sign: 1, p: math.Pi, low: 2, high: math.Inf(1), residual: 0.20},
	OverEarthedPlane: {sign: -1, p: math.Pi / 2, low: 4, high: math.Inf(1), residual: 0.20},
	EqualOneEarthed: {sign: -1, p: math.Pi / 2, c: [3]float64{-0.1297104, -0.13442916, 0.001707816},
		low: 2, high: 5, residual: 0.10},
}

// FinitePlates returns the relative departure of the field from V/d that finite
// square plates of width W (m) at spacing d (m) bring at a site, and the
// standard uncertainty that stays when it is corrected: 20 % of it for the
// formulas, 10 % for EqualOneEarthed.
//
//	BalancedMidGap    −4 exp(−(1 + πW/d))   W/d ≥ 2
//	BalancedSurface   +4 exp(−(1 + πW/d))   W/d ≥ 2
//	OverEarthedPlane  −4 exp(−(1 + πW/2d))  W/d ≥ 4
//	EqualOneEarthed   −4.3 %, −0.79 %, −0.145 % at W/d = 2, 3, 4; 2 ≤ W/d ≤ 5
//
// Outside these ranges it refuses: solve numerically (SolveSquarePlates) or
// widen the plates. Other earthed surroundings are not covered.
func FinitePlates(site PlateSite, W, d float64) (rel, u float64, err error) {
	s, ok := finiteSites[site]
	if !ok {
		return 0, 0, fmt.Errorf("finite plates: unknown site %v", site)
	}
	if err := refuse("finite plates ("+site.String()+")", positive("width", W, "m"), positive("spacing", d, "m"), atLeast("width / spacing", W/d, s.low), atMost("width / spacing", W/d, s.high)); err != nil {
		return 0, 0, err
	}
	rel = FinitePlatesJet(site, jet.Const(W), jet.Const(d)).V
	return rel, s.residual * math.Abs(rel), nil
}

// FinitePlatesJet is the departure of FinitePlates with derivatives; NaN for an
// unknown site.
func FinitePlatesJet(site PlateSite, W, d jet.Jet) jet.Jet {
	s, ok := finiteSites[site]
	if !ok {
		return jet.Const(math.NaN())
	}
	w := W.Div(d)
	return poly(w, s.c[0]-1, s.c[1]-s.p, s.c[2]).Exp().Scale(4 * s.sign)
}

// Head is what a free-body meter's head senses.
type Head int

const (
	// HemisphereCharge heads read the charge on one half of the head.
	HemisphereCharge Head = iota
	// Dipole heads read the dipole moment of the head.
	Dipole
)

// String returns the name that a bench uses.
func (h Head) String() string {
	switch h {
	case HemisphereCharge:
		return "hemisphere-charge"
	case Dipole:
		return "dipole"
	}
	return fmt.Sprintf("Head(%d)", int(h))
}

// HeadLimit is the largest head radius over plate spacing a/d served, and
// HeadResidual the part of the correction that stays as the half-width of a
// rectangular distribution (common practice, no source).
const (
	HeadLimit    = 0.2
	HeadResidual = 0.25
)

// zeta3 is Apéry's constant ζ(3).
const zeta3 = 1.2020569031595942853997381615114

// HeadImage returns the relative amount by which the images of a free-body
// meter's head in the plates raise its reading. The head is taken as a
// conducting sphere of radius a (m) at mid-gap of wide plates d (m) apart,
// without net charge: with x = 4ζ(3)(a/d)³, x for heads that sense the charge
// of a hemisphere and 1/(1 − x) − 1 for heads that sense the dipole.
// Derived (package comment, "Finite plates and heads") and within 1 % of itself
// of the full multipole solution. Refused for a/d above HeadLimit; half-width
// HeadResidual of it stays.
func HeadImage(head Head, a, d float64) (rel, half float64, err error) {
	if err := refuse("head between plates", positive("head radius", a, "m"), positive("spacing", d, "m"), atMost("head radius / spacing", a/d, HeadLimit)); err != nil {
		return 0, 0, err
	}
	if head != HemisphereCharge && head != Dipole {
		return 0, 0, fmt.Errorf("head between plates: unknown head %v; want hemisphere-charge or dipole", head)
	}
	rel = HeadImageJet(head, jet.Const(a), jet.Const(d)).V
	return rel, HeadResidual * rel, nil
}

// HeadImageJet is the correction of HeadImage with derivatives.
func HeadImageJet(head Head, a, d jet.Jet) jet.Jet {
	x := a.Div(d).Pow(3).Scale(4 * zeta3)
	if head == Dipole {
		return jet.Const(1).Sub(x).Inv().Plus(-1)
	}
	return x
}
