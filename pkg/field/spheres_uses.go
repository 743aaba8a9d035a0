package field

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/jet"
)

// SphereContactForce returns the repulsion (N) of two spheres of radii a and b
// (m) in contact at the common potential V (V) in permittivity eps (F/m), the
// limit of SphereForcePotentials at zero gap (Kelvin 1853; Lekner 2012; derived
// for unequal radii by expanding the near-contact form of the package comment
// to first order in the gap). (4 ln2 − 1)/24 · 4πεV² for equal radii.
func SphereContactForce(eps, a, b, V float64) (float64, error) {
	if err := refuse("spheres in contact", positive("permittivity", eps, "F/m"), positive("first radius", a, "m"), positive("second radius", b, "m"), finite("potential", V, "V")); err != nil {
		return 0, err
	}
	// Σ = C_aa + 2C_ab + C_bb = φΨ(x) + φu²(x² − x)/6 + O(u⁴), φ = f/u, x = α/u,
	// Ψ(x) = −ψ(x) − ψ(1 − x) − 2γ; x = x0 + x2 u², du²/dg = 2(a + b)/ab.
	s := a + b
	x0 := b / s
	x2 := a * b * (a - b) / (6 * s * s * s)
	psi := -digamma(x0) - digamma(a/s) - 2*eulerGamma
	psi1 := hurwitz(2, a/s) - hurwitz(2, x0)
	slope := a*(x2+x0*x0*x0/6)*psi + a*x0*psi1*x2 - a*x0*x0*(a/s)/6
	return 4 * math.Pi * eps * V * V * slope * s / (a * b), nil
}

// SphereContactCharges returns the charges (C) of two spheres of radii a and b
// (m) in contact at the potential V (V):
// q_a = −4πεV (ab/(a+b)) [γ + ψ(b/(a+b))] and b likewise (Maxwell, Treatise,
// art. 175; Lekner 2012).
func SphereContactCharges(eps, a, b, V float64) (qa, qb float64, err error) {
	if err := refuse("spheres in contact", positive("permittivity", eps, "F/m"), positive("first radius", a, "m"), positive("second radius", b, "m"), finite("potential", V, "V")); err != nil {
		return 0, 0, err
	}
	k := -4 * math.Pi * eps * V * a * b / (a + b)
	return k * (eulerGamma + digamma(b/(a+b))), k * (eulerGamma + digamma(a/(a+b))), nil
}

// SpherePlaneForce returns the force (N, negative: attraction) between a sphere
// of radius a (m) at potential V (V) and an earthed plane gap (m) from its
// surface: the sphere and its mirror image at opposite potential, whose gap is
// 2·gap. Exact for a plane wide against the height.
func SpherePlaneForce(eps, a, gap, V float64) (float64, error) {
	if err := spheresChecks(eps, a, a, gap); err != nil {
		return 0, err
	}
	if err := refuse("sphere and plane", finite("potential", V, "V")); err != nil {
		return 0, err
	}
	return SpherePlaneForceJet(jet.Const(eps), jet.Const(a), jet.Const(gap), jet.Const(V)).V, nil
}

// SpherePlaneForceJet is SpherePlaneForce with derivatives.
func SpherePlaneForceJet(eps, a, gap, V jet.Jet) jet.Jet {
	_, w := pairJets(a, a, gap.Scale(2))
	return eps.Scale(2 * math.Pi).Mul(w[0].Add(w[2]).Sub(w[1].Scale(2))).Mul(V.Sqr())
}

// SpherePlaneChargeForce is SpherePlaneForce for an isolated sphere of charge q
// (C).
func SpherePlaneChargeForce(eps, a, gap, q float64) (float64, error) {
	if err := spheresChecks(eps, a, a, gap); err != nil {
		return 0, err
	}
	if err := refuse("sphere and plane", finite("charge", q, "C")); err != nil {
		return 0, err
	}
	return SpherePlaneChargeForceJet(jet.Const(eps), jet.Const(a), jet.Const(gap), jet.Const(q)).V, nil
}

// SpherePlaneChargeForceJet is SpherePlaneChargeForce with derivatives.
func SpherePlaneChargeForceJet(eps, a, gap, q jet.Jet) jet.Jet {
	return SphereForceChargesJet(eps, a, a, gap.Scale(2), q, q.Neg())
}

// SpherePlaneCapacitance returns the capacitance (F) of a sphere of radius a
// (m) whose surface is gap (m) from an earthed plane: C_aa − C_ab of the sphere
// and its image.
func SpherePlaneCapacitance(eps, a, gap float64) (float64, error) {
	if err := spheresChecks(eps, a, a, gap); err != nil {
		return 0, err
	}
	return SpherePlaneCapacitanceJet(jet.Const(eps), jet.Const(a), jet.Const(gap)).V, nil
}

// SpherePlaneCapacitanceJet is SpherePlaneCapacitance with derivatives.
func SpherePlaneCapacitanceJet(eps, a, gap jet.Jet) jet.Jet {
	c, _ := pairJets(a, a, gap.Scale(2))
	return eps.Scale(4 * math.Pi).Mul(c[0].Sub(c[1]))
}

// SphereCharge returns the charge q = 4πε a V (C) of a lone sphere of radius a
// (m) at potential V (V).
func SphereCharge(eps, a, V float64) (float64, error) {
	if err := refuse("lone sphere", positive("permittivity", eps, "F/m"), positive("radius", a, "m"), finite("potential", V, "V")); err != nil {
		return 0, err
	}
	return 4 * math.Pi * eps * a * V, nil
}

// SphereChargeJet is SphereCharge with derivatives.
func SphereChargeJet(eps, a, V jet.Jet) jet.Jet { return eps.Mul(a).Mul(V).Scale(4 * math.Pi) }

// SphereField returns the radial field V a/r² (V/m) at r (m) from the centre of
// a lone sphere of radius a (m) at potential V (V): that of a point charge.
func SphereField(a, V, r float64) (float64, error) {
	if err := refuse("field of a sphere", positive("radius", a, "m"), finite("potential", V, "V"), positive("distance", r, "m"),
		that("distance", r, "m", r >= a, "no less than the radius: the field inside is zero")); err != nil {
		return 0, err
	}
	return V * a / (r * r), nil
}

// SphereFieldJet is SphereField with derivatives.
func SphereFieldJet(a, V, r jet.Jet) jet.Jet { return V.Mul(a).Div(r.Sqr()) }

// PointForce returns q1 q2/(4πε r²) (N, repulsion positive) for point charges
// (C) at distance r (m). Coulomb 1785.
func PointForce(eps, q1, q2, r float64) (float64, error) {
	if err := refuse("point charges", positive("permittivity", eps, "F/m"), finite("first charge", q1, "C"), finite("second charge", q2, "C"), positive("distance", r, "m")); err != nil {
		return 0, err
	}
	return q1 * q2 / (4 * math.Pi * eps * r * r), nil
}

// PointForceJet is PointForce with derivatives.
func PointForceJet(eps, q1, q2, r jet.Jet) jet.Jet {
	return q1.Mul(q2).Div(eps.Mul(r.Sqr())).Scale(1 / (4 * math.Pi))
}

// PowerForceJet is PointForceJet with a free exponent n in place of 2, as a test
// of the law: q1 q2/(4πε r0²) (r/r0)⁻ⁿ. r0 (m) is a fixed reference distance
// within the readings; it only sets what the amplitude means.
func PowerForceJet(eps, q1, q2, r, n jet.Jet, r0 float64) jet.Jet {
	return q1.Mul(q2).Div(eps).Mul(r.Scale(1 / r0).Log().Mul(n).Neg().Exp()).Scale(1 / (4 * math.Pi * r0 * r0))
}

// Leak returns the charge q0 exp(−t/tau) (C) left after t (s) of leakage with
// time constant tau (s); +Inf is no leakage.
func Leak(q0, t, tau float64) float64 { return q0 * math.Exp(-t/tau) }

// LeakJet is Leak with derivatives; rate is 1/tau (1/s), 0 for no leakage.
func LeakJet(q0, t, rate jet.Jet) jet.Jet { return q0.Mul(t.Mul(rate).Neg().Exp()) }

// LeakForce returns the factor exp(−t/τ1 − t/τ2) by which the force of two
// leaking charges falls; with equal constants it falls with τ/2.
func LeakForce(t, tau1, tau2 float64) float64 { return math.Exp(-t/tau1 - t/tau2) }

// TorsionForce returns the force (N) that a torsion balance shows at angle
// theta (rad): κ(θ − θ₀) = F L cos ψ, with torsion constant kappa (N m/rad),
// rest angle theta0 (rad), arm arm (m) and cosPsi of TorsionGeometry.
func TorsionForce(kappa, theta, theta0, arm, cosPsi float64) (float64, error) {
	if err := refuse("torsion balance", positive("torsion constant", kappa, "N m/rad"), finite("angle", theta, "rad"), finite("rest angle", theta0, "rad"), positive("arm", arm, "m"),
		within("cosine of the angle between force and path", cosPsi, "1", 1e-3, 1)); err != nil {
		return 0, err
	}
	return kappa * (theta - theta0) / (arm * cosPsi), nil
}

// TorsionForceJet is TorsionForce with derivatives.
func TorsionForceJet(kappa, theta, theta0, arm, cosPsi jet.Jet) jet.Jet {
	return kappa.Mul(theta.Sub(theta0)).Div(arm.Mul(cosPsi))
}

// TorsionGeometry returns the true centre distance r (m) and cos ψ, the cosine
// of the angle between the line of centres and the path of the moving sphere,
// when a torsion arm (m) has turned by phi (rad, positive away from the fixed
// sphere) from the place where the distance was r0 (m) and the angle psi0
// (rad). Deflection lengthens r in repulsion and shortens it in attraction; a
// nulled balance has phi = 0. Derived: plane geometry.
func TorsionGeometry(r0, psi0, arm, phi float64) (r, cosPsi float64, err error) {
	if err := refuse("torsion geometry", positive("distance", r0, "m"), positive("arm", arm, "m"),
		within("angle at rest", psi0, "rad", -1.5, 1.5), within("deflection", phi, "rad", -1.5, 1.5)); err != nil {
		return 0, 0, err
	}
	jr, jc := TorsionGeometryJet(jet.Const(r0), jet.Const(psi0), jet.Const(arm), jet.Const(phi))
	return jr.V, jc.V, nil
}

// TorsionGeometryJet is TorsionGeometry with derivatives.
func TorsionGeometryJet(r0, psi0, arm, phi jet.Jet) (r, cosPsi jet.Jet) {
	// from the fixed to the moving centre, along the arm and along the path at rest
	half := phi.Scale(0.5).Sin()
	x := r0.Mul(psi0.Sin()).Sub(arm.Mul(half.Sqr()).Scale(2)) // arm(cos φ − 1) = −2 arm sin²(φ/2)
	y := r0.Mul(psi0.Cos()).Add(arm.Mul(phi.Sin()))
	r = x.Sqr().Add(y.Sqr()).Sqrt()
	return r, y.Mul(phi.Cos()).Sub(x.Mul(phi.Sin())).Div(r)
}

// SphereForceChargesSlope returns SphereForceCharges times 4πε and its
// derivative by the gap, without refusals: what a fit of the distance needs,
// row by row, at a tenth of the cost of the jets.
func SphereForceChargesSlope(a, b, gap, qa, qb float64) (f, slope float64) {
	z := pairSecond(a, b, gap)
	c, w, w1 := &z.c, &z.w, &z.w1
	sa, sb := c[0]+c[1], c[2]+c[1]
	i := 1 / (sa*sb - c[1]*(sa+sb))
	va := (c[2]*qa - c[1]*qb) * i
	vb := (c[0]*qb - c[1]*qa) * i
	dv := (sb*qa - sa*qb) * i
	f = 0.5 * ((w[0]+w[1])*va*va + (w[2]+w[1])*vb*vb - w[1]*dv*dv)
	// V' = −C⁻¹ W V at fixed charge
	ra, rb := (w[0]+w[1])*va-w[1]*dv, (w[2]+w[1])*vb+w[1]*dv
	da := -(c[2]*ra - c[1]*rb) * i
	db := -(c[0]*rb - c[1]*ra) * i
	slope = 0.5*((w1[0]+w1[1])*va*va+(w1[2]+w1[1])*vb*vb-w1[1]*dv*dv) + ra*da + rb*db
	return f, slope
}

// SphereForcePotentialsSlope is SphereForceChargesSlope for fixed potentials:
// SphereForcePotentials over 4πε and its derivative by the gap.
func SphereForcePotentialsSlope(a, b, gap, Va, Vb float64) (f, slope float64) {
	z := pairSecond(a, b, gap)
	w, w1 := &z.w, &z.w1
	return 0.5 * (w[0]*Va*Va + 2*w[1]*Va*Vb + w[2]*Vb*Vb), 0.5 * (w1[0]*Va*Va + 2*w1[1]*Va*Vb + w1[2]*Vb*Vb)
}

// SphereForcesCharges fills dst with SphereForceCharges at every gap (m) of
// gaps, for two spheres of radii a and b with charges qa and qb. dst must be as
// long as gaps; it is untouched when an argument is refused.
func SphereForcesCharges(dst []float64, eps, a, b float64, gaps []float64, qa, qb float64) error {
	if len(dst) != len(gaps) {
		return fmt.Errorf("sphere pair: %d places for the forces of %d gaps", len(dst), len(gaps))
	}
	if err := refuse("sphere pair", finite("first charge", qa, "C"), finite("second charge", qb, "C")); err != nil {
		return err
	}
	for _, g := range gaps {
		if !(g > 0) || math.IsInf(g, 0) {
			return spheresChecks(eps, a, b, g)
		}
	}
	if err := spheresChecks(eps, a, b, 1); err != nil {
		return err
	}
	k := 1 / (4 * math.Pi * eps)
	if a == b {
		k /= a * a
		for i, g := range gaps {
			dst[i] = k * equalForce(g/a, qa, qb)
		}
		return nil
	}
	for i, g := range gaps {
		c, w := pairFirst(a, b, g)
		dst[i] = k * chargeForce(&c, &w, qa, qb)
	}
	return nil
}
