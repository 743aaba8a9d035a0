package field

import (
	"math"

	"example.org/guardring/pkg/jet"
)

// UniformField returns the field (V/m) between parallel plates at voltage V
// (V) with contact potential Vc (V) and spacing d + delta (m), delta being the
// zero of the spacing scale: E = (V − Vc)/(d + δ). Away from the edges of large
// parallel plates the field is uniform and perpendicular to them.
func UniformField(V, Vc, d, delta float64) (float64, error) {
	if err := plateChecks("uniform field", V, Vc, d, delta); err != nil {
		return 0, err
	}
	return (V - Vc) / (d + delta), nil
}

// UniformFieldJet is UniformField with derivatives.
func UniformFieldJet(V, Vc, d, delta jet.Jet) jet.Jet { return V.Sub(Vc).Div(d.Add(delta)) }

func plateChecks(formula string, V, Vc, d, delta float64) error {
	return refuse(formula, finite("voltage", V, "V"), finite("contact potential", Vc, "V"),
		positive("spacing with its zero", d+delta, "m"))
}

// PlateForce returns the attraction (N, positive) on an area AF (m²) of a plate
// in permittivity eps (F/m): F = ½ ε A_F (V − Vc)²/(d + δ)². For a guarded disc
// AF is GuardedForceArea at spacing d + δ. Maxwell, Treatise, arts. 216–218.
func PlateForce(eps, AF, V, Vc, d, delta float64) (float64, error) {
	if err := plateChecks("force on a plate", V, Vc, d, delta); err != nil {
		return 0, err
	}
	if err := refuse("force on a plate", positive("permittivity", eps, "F/m"), positive("force area", AF, "m²")); err != nil {
		return 0, err
	}
	e := (V - Vc) / (d + delta)
	return 0.5 * eps * AF * e * e, nil
}

// PlateForceJet is PlateForce with derivatives.
func PlateForceJet(eps, AF, V, Vc, d, delta jet.Jet) jet.Jet {
	return eps.Mul(AF).Mul(UniformFieldJet(V, Vc, d, delta).Sqr()).Scale(0.5)
}

// PlateCharge returns the charge (C) on an area AQ (m²) of a plate in
// permittivity eps (F/m), with stray capacitance Cs (F) to the live plate:
// Q = ε A_Q (V − Vc)/(d + δ) + C_s V. For a guarded disc AQ is
// GuardedChargeArea at spacing d + δ.
func PlateCharge(eps, AQ, Cs, V, Vc, d, delta float64) (float64, error) {
	if err := plateChecks("charge of a plate", V, Vc, d, delta); err != nil {
		return 0, err
	}
	if err := refuse("charge of a plate", positive("permittivity", eps, "F/m"), positive("charge area", AQ, "m²"), finite("stray capacitance", Cs, "F")); err != nil {
		return 0, err
	}
	return eps*AQ*(V-Vc)/(d+delta) + Cs*V, nil
}

// PlateChargeJet is PlateCharge with derivatives.
func PlateChargeJet(eps, AQ, Cs, V, Vc, d, delta jet.Jet) jet.Jet {
	return eps.Mul(AQ).Mul(UniformFieldJet(V, Vc, d, delta)).Add(Cs.Mul(V))
}

// GuardedDiscForce returns the attraction (N) of a guarded disc: PlateForce
// with the force area of a disc of radius R in a guard of inner radius Rg (m)
// at the true spacing d + δ.
func GuardedDiscForce(eps, R, Rg, V, Vc, d, delta float64) (float64, error) {
	a, err := GuardedForceArea(R, Rg, d+delta)
	if err != nil {
		return 0, err
	}
	return PlateForce(eps, a, V, Vc, d, delta)
}

// GuardedDiscForceJet is GuardedDiscForce with derivatives.
func GuardedDiscForceJet(eps, R, Rg, V, Vc, d, delta jet.Jet) jet.Jet {
	return PlateForceJet(eps, GuardedForceAreaJet(R, Rg, d.Add(delta)), V, Vc, d, delta)
}

// GuardedDiscCharge returns the charge (C) of a guarded disc: PlateCharge with
// the charge area at the true spacing d + δ.
func GuardedDiscCharge(eps, R, Rg, Cs, V, Vc, d, delta float64) (float64, error) {
	a, err := GuardedChargeArea(R, Rg, d+delta)
	if err != nil {
		return 0, err
	}
	return PlateCharge(eps, a, Cs, V, Vc, d, delta)
}

// GuardedDiscChargeJet is GuardedDiscCharge with derivatives.
func GuardedDiscChargeJet(eps, R, Rg, Cs, V, Vc, d, delta jet.Jet) jet.Jet {
	return PlateChargeJet(eps, GuardedChargeAreaJet(R, Rg, d.Add(delta)), Cs, V, Vc, d, delta)
}

// SheetCapacitance returns the capacitance (F) of an area A (m²) at spacing d
// (m) with a dielectric sheet of thickness t (m) and relative permittivity epsr
// in it, the rest of the gap having relative permittivity epsAir:
// C = ε₀ A/((d − t)/ε_air + t/ε_r); eps0 in F/m. Field normal to the sheet,
// edges guarded. Derived: capacitors in series.
func SheetCapacitance(eps0, A, d, t, epsr, epsAir float64) (float64, error) {
	if err := refuse("dielectric sheet", positive("electric constant", eps0, "F/m"), positive("area", A, "m²"), positive("spacing", d, "m"), notNegative("sheet thickness", t, "m"),
		positive("relative permittivity of the sheet", epsr, "1"), positive("relative permittivity of the gap", epsAir, "1"),
		that("sheet thickness", t, "m", t <= d, "no more than the spacing: the sheet lies in the gap")); err != nil {
		return 0, err
	}
	return eps0 * A / ((d-t)/epsAir + t/epsr), nil
}

// SheetCapacitanceJet is SheetCapacitance with derivatives.
func SheetCapacitanceJet(eps0, A, d, t, epsr, epsAir jet.Jet) jet.Jet {
	return eps0.Mul(A).Div(d.Sub(t).Div(epsAir).Add(t.Div(epsr)))
}

// StoredEnergy returns ½CV² (J) for a capacitance C (F) at V (V).
func StoredEnergy(C, V float64) float64 { return 0.5 * C * V * V }

// StoredEnergyJet is StoredEnergy with derivatives.
func StoredEnergyJet(C, V jet.Jet) jet.Jet { return C.Mul(V.Sqr()).Scale(0.5) }

// FieldForce returns the force (N, along the field) on a charge q (C) in a
// uniform field E (V/m), F = qE. The body must be small against its distance
// from the plates; off the mid-plane add PlateImageForce.
func FieldForce(q, E float64) float64 { return q * E }

// FieldForceJet is FieldForce with derivatives.
func FieldForceJet(q, E jet.Jet) jet.Jet { return q.Mul(E) }

// PlateImageForce returns the force (N, positive towards the plate at z = d) on
// a point charge q (C) at height z (m) between earthed planes at 0 and d (m) in
// permittivity eps (F/m):
//
//	F = q²/(16πε d²) [ζ(2, 1 − z/d) − ζ(2, z/d)]
//
// ζ(2, x) being Hurwitz's, the trigamma function. Derived: the images of equal
// sign lie symmetrically at 2nd from the charge and cancel; those of opposite
// sign at 2z + 2nd remain. 0 at the mid-plane, where the equilibrium is
// unstable.
func PlateImageForce(eps, q, z, d float64) (float64, error) {
	if err := refuse("image force between plates", positive("permittivity", eps, "F/m"), finite("charge", q, "C"), positive("spacing", d, "m"),
		that("height", z, "m", z > 0 && z < d, "more than 0 and less than the spacing")); err != nil {
		return 0, err
	}
	return PlateImageForceJet(jet.Const(eps), jet.Const(q), jet.Const(z), jet.Const(d)).V, nil
}

// PlateImageForceJet is PlateImageForce with derivatives.
func PlateImageForceJet(eps, q, z, d jet.Jet) jet.Jet {
	x := z.Div(d)
	v := x.V
	g := x.Chain(hurwitz(2, 1-v)-hurwitz(2, v), 2*hurwitz(3, 1-v)+2*hurwitz(3, v), 6*hurwitz(4, 1-v)-6*hurwitz(4, v))
	return q.Sqr().Mul(g).Div(eps.Mul(d.Sqr())).Scale(1 / (16 * math.Pi))
}

// imageNear is how many of the nearest images on either side are summed one by
// one; the others make a power series about the mid-plane.
const imageNear = 2

// imageSeries holds 2(k+1) ζ(k+2, imageNear + ½) for k = 1, 3, 5 …: with
// w = z/d − ½, Σ_n [(n+½−w)⁻² − (n+½+w)⁻²] over n ≥ imageNear is their sum with
// w^k (the binomial series; derived). |w| < ½ makes each term 1/25 of the last.
var imageSeries = func() (c [12]float64) {
	for i := range c {
		k := float64(2*i + 1)
		c[i] = 2 * (k + 1) * hurwitz(k+2, imageNear+0.5)
	}
	return c
}()

// PlateImageForceSlope returns PlateImageForce for unit charge (N/C²) and its
// derivative by the height (N/(C² m)), without refusals: what a fit needs, row by
// row, at a small part of the cost of the jets.
func PlateImageForceSlope(eps, z, d float64) (f, slope float64) {
	w := z/d - 0.5
	w2 := w * w
	for i := len(imageSeries) - 1; i >= 0; i-- {
		f = f*w2 + imageSeries[i]
		slope = slope*w2 + float64(2*i+1)*imageSeries[i]
	}
	f *= w
	for n := 0.5; n < imageNear; n++ {
		a, b := 1/(n-w), 1/(n+w)
		f += a*a - b*b
		slope += 2 * (a*a*a + b*b*b)
	}
	s := 1 / (16 * math.Pi * eps * d * d)
	return s * f, s / d * slope
}
