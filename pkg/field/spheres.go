package field

import (
	"math"

	"example.org/guardring/pkg/jet"
)

// pairOrder2 holds, per 4πε and so in metres, the capacity coefficients of two
// spheres (c: aa, ab, bb) and their derivatives by the gap (w), each with
// gradient and Hessian in radii and gap.
type pairOrder2 struct{ c, w [3]order2 }

// pair evaluates the coefficients (Maxwell, Treatise, arts. 173–175; Smythe,
// Static and Dynamic Electricity, 3rd ed., 5.08; Lekner, Proc. R. Soc. A 468
// (2012) 2829) in the form of the package comment,
//
//	C_aa = 4πε [a + f S(α + u, u)],  C_bb = 4πε [b + f S(β + u, u)],
//	C_ab = −4πε [ab/c + f S(2u, u)],  a sinh α = b sinh β = f,  u = α + β,
//
// the first term of each sum standing apart, so that far off the derivatives do
// not come out as small differences.
func pair(a, b, gap float64) (z pairOrder2) {
	g := variable(2, gap)
	ga := linear(gap+2*a, 2, 0, 1)
	gb := linear(gap+2*b, 0, 2, 1)
	gab := linear(gap+2*(a+b), 2, 2, 1)
	c := linear(a+b+gap, 1, 1, 1)
	va, vb := variable(0, a), variable(1, b)

	// f = √[g(g+2a)(g+2b)(g+2a+2b)]/2c
	p, pb := g.mul(&ga), gb.mul(&gab)
	p = p.mul(&pb)
	root := p.sqrt()
	ic := c.inv()
	f := root.mul(&ic)
	f = f.scale(0.5)
	// f_g = f(½Σ1/(…) − 1/c)
	r0, r1, r2, r3 := g.inv(), ga.inv(), gb.inv(), gab.inv()
	sum := r0.add(&r1)
	sum = sum.add(&r2)
	sum = sum.add(&r3)
	sum = sum.scale(0.5)
	nic := ic.scale(-1)
	sum = sum.add(&nic)
	fg := f.mul(&sum)
	// α = asinh(f/a), α_g = f_g/√(a² + f²)
	alpha, alphaG := poleAngle(&f, &fg, &va)
	beta, betaG := poleAngle(&f, &fg, &vb)
	u := alpha.add(&beta)
	uG := alphaG.add(&betaG)

	q := math.Exp(-u.v)
	for i, x := range [2]struct{ r, t, tG *order2 }{{&va, &alpha, &alphaG}, {&vb, &beta, &betaG}} {
		t, tG := x.t.add(&u), x.tG.add(&uG)
		s := sumSinh(t.v, u.v, math.Exp(-t.v), q)
		S := chain2(&t, &u, s.s, s.a, s.u, s.aa, s.au, s.uu)
		Sa := chain2(&t, &u, s.a, s.aa, s.au, s.aaa, s.aau, s.auu)
		Su := chain2(&t, &u, s.u, s.au, s.uu, s.aau, s.auu, s.uuu)
		d := f.mul(&S)
		z.c[2*i] = d.add(x.r)
		d1, d2 := Sa.mul(&tG), Su.mul(&uG)
		d1 = d1.add(&d2)
		d1 = f.mul(&d1)
		d2 = fg.mul(&S)
		z.w[2*i] = d1.add(&d2)
	}
	line := sumSinh(2*u.v, u.v, q*q, q)
	s, s1, s2, s3 := line.along()
	S, S1 := u.chain(s, s1, s2), u.chain(s1, s2, s3)
	h := va.mul(&vb)
	h = h.mul(&ic) // ab/c
	m := f.mul(&S)
	m = m.add(&h)
	z.c[1] = m.scale(-1)
	d1 := S1.mul(&uG)
	d1 = f.mul(&d1)
	d2 := fg.mul(&S)
	d1 = d1.add(&d2)
	h = h.mul(&nic)
	d1 = d1.add(&h)
	z.w[1] = d1.scale(-1)
	return z
}

// poleAngle returns asinh(f/r) and its derivative by the gap.
func poleAngle(f, fg, r *order2) (t, tG order2) {
	ir := r.inv()
	x := f.mul(&ir)
	t = x.asinh()
	f2, r2 := f.mul(f), r.mul(r)
	h := f2.add(&r2)
	h = h.sqrt()
	h = h.inv()
	return t, fg.mul(&h)
}

// lift makes a jet of one coefficient.
func (x *order2) lift(lengths []jet.Jet) jet.Jet {
	h := [9]float64{x.h[0], x.h[1], x.h[2], x.h[1], x.h[3], x.h[4], x.h[2], x.h[4], x.h[5]}
	return jet.ChainN(lengths, x.v, x.g[:], h[:])
}

// pairJets returns capacity coefficients and their gap derivatives per 4πε.
func pairJets(a, b, gap jet.Jet) (c, w [3]jet.Jet) {
	if a.IsConst() && b.IsConst() && gap.IsConst() {
		cv, wv := pairFirst(a.V, b.V, gap.V)
		for i := range cv {
			c[i], w[i] = jet.Const(cv[i]), jet.Const(wv[i])
		}
		return c, w
	}
	z := pair(a.V, b.V, gap.V)
	l := []jet.Jet{a, b, gap}
	for i := range c {
		c[i], w[i] = z.c[i].lift(l), z.w[i].lift(l)
	}
	return c, w
}

func spheresChecks(eps, a, b, gap float64) error {
	return refuse("sphere pair", positive("permittivity", eps, "F/m"), positive("first radius", a, "m"), positive("second radius", b, "m"),
		that("gap (centre distance less radii)", gap, "m", gap > 0 && !math.IsInf(gap, 0), "more than 0: the spheres must not touch or overlap"))
}

// SphereCapacities returns the capacity coefficients (F) of two conducting
// spheres of radii a and b (m) whose surfaces are gap (m) apart, gap = c − a − b
// for centres at c, far from everything else, in permittivity eps (F/m):
// Q_a = C_aa V_a + C_ab V_b, Q_b = C_ab V_a + C_bb V_b. C_ab is negative.
//
// Exact (Maxwell, Treatise, arts. 173–175; Lekner 2012); relative accuracy of
// each coefficient 1e-14 at any gap and ratio of radii.
func SphereCapacities(eps, a, b, gap float64) (caa, cab, cbb float64, err error) {
	if err := spheresChecks(eps, a, b, gap); err != nil {
		return 0, 0, 0, err
	}
	c, _ := pairFirst(a, b, gap)
	k := 4 * math.Pi * eps
	return k * c[0], k * c[1], k * c[2], nil
}

// SphereCapacitiesJet is SphereCapacities with derivatives.
func SphereCapacitiesJet(eps, a, b, gap jet.Jet) (caa, cab, cbb jet.Jet) {
	c, _ := pairJets(a, b, gap)
	k := eps.Scale(4 * math.Pi)
	return k.Mul(c[0]), k.Mul(c[1]), k.Mul(c[2])
}

// SphereForcePotentials returns the force (N, repulsion positive) between two
// conducting spheres held at potentials Va and Vb (V):
// F = ½ Σ V_i V_j dC_ij/dc. Connected spheres have Va = Vb. Geometry as
// SphereCapacities. Accuracy 1e-14 of Σ|terms|: close in, the like-potential
// force is a small difference of terms that grow as 1/gap; at contact use
// SphereContactForce.
func SphereForcePotentials(eps, a, b, gap, Va, Vb float64) (float64, error) {
	if err := spheresChecks(eps, a, b, gap); err != nil {
		return 0, err
	}
	if err := refuse("sphere pair", finite("first potential", Va, "V"), finite("second potential", Vb, "V")); err != nil {
		return 0, err
	}
	_, w := pairFirst(a, b, gap)
	return 2 * math.Pi * eps * (w[0]*Va*Va + 2*w[1]*Va*Vb + w[2]*Vb*Vb), nil
}

// SphereForcePotentialsJet is SphereForcePotentials with derivatives.
func SphereForcePotentialsJet(eps, a, b, gap, Va, Vb jet.Jet) jet.Jet {
	_, w := pairJets(a, b, gap)
	return eps.Scale(2 * math.Pi).Mul(quadratic(w, Va, Vb))
}

// quadratic returns w_aa x² + 2 w_ab x y + w_bb y².
func quadratic(w [3]jet.Jet, x, y jet.Jet) jet.Jet {
	return w[0].Mul(x.Sqr()).Add(w[1].Scale(2).Mul(x.Mul(y))).Add(w[2].Mul(y.Sqr()))
}

// SphereForceCharges returns the force (N, repulsion positive) between two
// isolated conducting spheres with charges qa and qb (C):
// F = −½ Σ Q_i Q_j dP_ij/dc, P = C⁻¹. Geometry and accuracy as
// SphereForcePotentials. Like charges on spheres of unequal size can attract:
// no sign is assumed. Far apart, equal radii: F = (q_a q_b/c² − 2a³(q_a² +
// q_b²)/c⁵)/4πε.
func SphereForceCharges(eps, a, b, gap, qa, qb float64) (float64, error) {
	if err := spheresChecks(eps, a, b, gap); err != nil {
		return 0, err
	}
	if err := refuse("sphere pair", finite("first charge", qa, "C"), finite("second charge", qb, "C")); err != nil {
		return 0, err
	}
	c, w := pairFirst(a, b, gap)
	return chargeForce(&c, &w, qa, qb) / (4 * math.Pi * eps), nil
}

// SphereForceChargesJet is SphereForceCharges with derivatives.
func SphereForceChargesJet(eps, a, b, gap, qa, qb jet.Jet) jet.Jet {
	c, w := pairJets(a, b, gap)
	// as chargeForce
	sa, sb := c[0].Add(c[1]), c[2].Add(c[1])
	det := sa.Mul(sb).Sub(c[1].Mul(sa.Add(sb)))
	va := c[2].Mul(qa).Sub(c[1].Mul(qb))
	vb := c[0].Mul(qb).Sub(c[1].Mul(qa))
	dv := sb.Mul(qa).Sub(sa.Mul(qb))
	f := w[0].Add(w[1]).Mul(va.Sqr()).Add(w[2].Add(w[1]).Mul(vb.Sqr())).Sub(w[1].Mul(dv.Sqr()))
	return f.Div(det.Sqr().Mul(eps)).Scale(1 / (8 * math.Pi))
}

// SphereForceMixed returns the force (N, repulsion positive) between an
// isolated sphere of charge qa (C) and one held at potential Vb (V), 0 for an
// earthed one. Geometry and accuracy as SphereForcePotentials.
func SphereForceMixed(eps, a, b, gap, qa, Vb float64) (float64, error) {
	if err := spheresChecks(eps, a, b, gap); err != nil {
		return 0, err
	}
	if err := refuse("sphere pair", finite("charge", qa, "C"), finite("potential", Vb, "V")); err != nil {
		return 0, err
	}
	return SphereForceMixedJet(jet.Const(eps), jet.Const(a), jet.Const(b), jet.Const(gap), jet.Const(qa), jet.Const(Vb)).V, nil
}

// SphereForceMixedJet is SphereForceMixed with derivatives.
func SphereForceMixedJet(eps, a, b, gap, qa, Vb jet.Jet) jet.Jet {
	c, w := pairJets(a, b, gap)
	k := eps.Scale(4 * math.Pi)
	va := qa.Div(k).Sub(c[1].Mul(Vb)).Div(c[0])
	return k.Mul(quadratic(w, va, Vb)).Scale(0.5)
}
