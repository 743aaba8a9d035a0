package field

import (
	"math"

	"example.org/guardring/pkg/jet"
)

// SlotMinimum is the least ratio of plate spacing D to guard gap g for which
// the deep-slot correction is offered.
const SlotMinimum = 5.0

// SlotLength returns the deep-slot length α = g/2π (m) of a guard gap
// g = Rg − R (m): the half-gap loss of flux on either side of a slot much
// deeper than it is wide is that of a plane shortened by g·α/2(D+α). Derived
// by the conformal map of a plane with an infinitely deep slot (package
// comment, "Guard gap"); valid for a spacing of 5 g or more.
func SlotLength(R, Rg float64) float64 { return (Rg - R) / (2 * math.Pi) }

// SlotLengthBound returns Maxwell's length α = g ln2/π (m) for the guard gap
// g = Rg − R (m). It bounds the true one from above (Maxwell, A Treatise on
// Electricity and Magnetism, 3rd ed., art. 201) and is for printing beside
// SlotLength, not for reducing.
func SlotLengthBound(R, Rg float64) float64 { return (Rg - R) * math.Ln2 / math.Pi }

func guardChecks(formula string, R, Rg, D float64) error {
	if err := refuse(formula, positive("disc radius", R, "m"), positive("guard inner radius", Rg, "m"), positive("spacing", D, "m"),
		that("guard inner radius less disc radius", Rg-R, "m", Rg >= R, "0 or more: the guard surrounds the disc")); err != nil {
		return err
	}
	if Rg > R {
		return refuse(formula, atLeast("spacing / guard gap", D/(Rg-R), SlotMinimum))
	}
	return nil
}

// GuardedChargeArea returns the effective area A_Q (m²) with which a guarded
// disc of radius R (m) in a guard of inner radius Rg (m), at spacing D (m) from
// the opposite plate, collects charge: Q = ε A_Q V/D.
//
//	A_Q = ½π[R² + Rg² − (Rg² − R²) α/(D+α)],  α = (Rg − R)/2π
//
// The form is Maxwell's (Treatise, art. 201) with the deep-slot α of
// SlotLength. Accuracy 5e-5 relative at R/g = 100; spacing at least 5 guard
// gaps, guard flush with the disc and at its potential.
func GuardedChargeArea(R, Rg, D float64) (float64, error) {
	if err := guardChecks("guarded disc charge area", R, Rg, D); err != nil {
		return 0, err
	}
	return GuardedChargeAreaJet(jet.Const(R), jet.Const(Rg), jet.Const(D)).V, nil
}

// GuardedChargeAreaJet is GuardedChargeArea with derivatives and without the
// refusals.
func GuardedChargeAreaJet(R, Rg, D jet.Jet) jet.Jet {
	alpha := Rg.Sub(R).Scale(1 / (2 * math.Pi))
	r2, g2 := R.Sqr(), Rg.Sqr()
	return r2.Add(g2).Sub(g2.Sub(r2).Mul(alpha.Div(D.Add(alpha)))).Scale(math.Pi / 2)
}

// GuardedForceArea returns the effective area A_F (m²) with which a guarded
// disc is pulled: F = ½ ε A_F V²/D². Arguments, validity and accuracy as
// GuardedChargeArea.
//
//	A_F = ½π[R² + Rg² − (Rg² − R²) α(2D+α)/(D+α)²]
//
// Derived from F = −½V² d(ε A_Q/D)/dD; it is not the charge area.
func GuardedForceArea(R, Rg, D float64) (float64, error) {
	if err := guardChecks("guarded disc force area", R, Rg, D); err != nil {
		return 0, err
	}
	return GuardedForceAreaJet(jet.Const(R), jet.Const(Rg), jet.Const(D)).V, nil
}

// GuardedForceAreaJet is GuardedForceArea with derivatives and without the
// refusals.
func GuardedForceAreaJet(R, Rg, D jet.Jet) jet.Jet {
	alpha := Rg.Sub(R).Scale(1 / (2 * math.Pi))
	r2, g2 := R.Sqr(), Rg.Sqr()
	sum := D.Add(alpha)
	w := alpha.Mul(sum.Add(D)).Div(sum.Sqr())
	return r2.Add(g2).Sub(g2.Sub(r2).Mul(w)).Scale(math.Pi / 2)
}

// SlotAreaUncertainty is the relative standard uncertainty that the deep-slot
// model leaves on either effective area of a disc with R/g near 100.
const SlotAreaUncertainty = 5e-5

// CoplanarityForce returns the factor on the force when the disc stands proud
// of its guard by h (m, negative when sunk) at spacing D (m) between the guard
// plane and the opposite plate: (1 − h/D)⁻², which is 1 + 2h/D to first order.
// The disc edge adds a term of either sign, of the order of CoplanarityEdge,
// that stays as uncertainty. Refused for |h|/D above 0.05. Derived.
func CoplanarityForce(h, D float64) (float64, error) {
	if err := coplanarityChecks(h, D); err != nil {
		return 0, err
	}
	return CoplanarityForceJet(jet.Const(h), jet.Const(D)).V, nil
}

// CoplanarityForceJet is CoplanarityForce with derivatives.
func CoplanarityForceJet(h, D jet.Jet) jet.Jet { return CoplanarityChargeJet(h, D).Sqr() }

// CoplanarityCharge returns the factor on the charge when the disc stands proud
// of its guard by h (m): (1 − h/D)⁻¹. See CoplanarityForce.
func CoplanarityCharge(h, D float64) (float64, error) {
	if err := coplanarityChecks(h, D); err != nil {
		return 0, err
	}
	return CoplanarityChargeJet(jet.Const(h), jet.Const(D)).V, nil
}

// CoplanarityChargeJet is CoplanarityCharge with derivatives.
func CoplanarityChargeJet(h, D jet.Jet) jet.Jet { return D.Div(D.Sub(h)) }

func coplanarityChecks(h, D float64) error {
	return refuse("coplanarity", positive("spacing", D, "m"), finite("height of the disc above its guard", h, "m"),
		atMost("height / spacing", math.Abs(h)/D, 0.05))
}

// CoplanarityEdge returns 2|h|/R, the order of the edge's share of a
// coplanarity error h (m) on the force or charge of a disc of radius R (m).
// Take it as the half-width of a rectangular distribution about 0. Derived as
// an order of magnitude: a step h around the circumference.
func CoplanarityEdge(h, R float64) (float64, error) {
	if err := refuse("coplanarity", positive("disc radius", R, "m"), finite("height of the disc above its guard", h, "m")); err != nil {
		return 0, err
	}
	return 2 * math.Abs(h) / R, nil
}

// GuardedElectrodeB returns B, the fraction of the guard gap g (m) that belongs
// to the guarded electrode when thin coplanar electrodes lie on a sheet of
// thickness t (m):
//
//	B = 1 − (4t/πg) ln cosh(πg/4t)
//
// ASTM D150 and D257, effective area of guarded electrodes (formula from
// memory).
func GuardedElectrodeB(g, t float64) (float64, error) {
	if err := refuse("guarded electrode", positive("guard gap", g, "m"), positive("sheet thickness", t, "m")); err != nil {
		return 0, err
	}
	return GuardedElectrodeBJet(jet.Const(g), jet.Const(t)).V, nil
}

// GuardedElectrodeBJet is GuardedElectrodeB with derivatives.
func GuardedElectrodeBJet(g, t jet.Jet) jet.Jet {
	x := g.Div(t).Scale(math.Pi / 4)
	// y(x) = 1 − ln cosh(x)/x and its derivatives; ln cosh x = x + log1p(e^−2x) − ln 2.
	v := x.V
	if v < 0.05 {
		v2 := v * v // series of ln cosh x = x²/2 − x⁴/12 + x⁶/45 − 17x⁸/2520
		return x.Chain(
			1-v*(1./2-v2*(1./12-v2*(1./45-v2*17/2520))),
			-(1./2 - v2*(3./12-v2*(5./45-v2*7*17/2520))),
			v*(6./12-v2*(20./45-v2*42*17/2520)))
	}
	l := v + math.Log1p(math.Exp(-2*v)) - math.Ln2
	th := math.Tanh(v)
	sech2 := 1 - th*th
	return x.Chain(1-l/v, -th/v+l/(v*v), -sech2/v+2*th/(v*v)-2*l/(v*v*v))
}

// GuardedElectrodeArea returns the effective area (m²) ¼π(D1 + B g)² of a
// guarded disc electrode of diameter D1 (m) on a sheet; B and g (m) as in
// GuardedElectrodeB. ASTM D150 and D257 (from memory).
func GuardedElectrodeArea(D1, g, t float64) (float64, error) {
	if err := refuse("guarded electrode", positive("electrode diameter", D1, "m"), positive("guard gap", g, "m"), positive("sheet thickness", t, "m")); err != nil {
		return 0, err
	}
	return GuardedElectrodeAreaJet(jet.Const(D1), jet.Const(g), jet.Const(t)).V, nil
}

// GuardedElectrodeAreaJet is GuardedElectrodeArea with derivatives.
func GuardedElectrodeAreaJet(D1, g, t jet.Jet) jet.Jet {
	return D1.Add(GuardedElectrodeBJet(g, t).Mul(g)).Sqr().Scale(math.Pi / 4)
}
