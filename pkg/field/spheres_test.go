package field_test

import (
	"fmt"
	"math"
	"testing"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

const fourPi = 4 * math.Pi

// unit is the permittivity for which 4πε = 1.
const unit = 1 / fourPi

// Two spheres of 19 mm radius, 10 nC each, 60 mm between centres: induction
// takes 8 % from the force of two points.
func ExampleSphereForceCharges() {
	f, err := field.SphereForceCharges(si.Eps0, 0.019, 0.019, 0.060-2*0.019, 10e-9, 10e-9)
	if err != nil {
		panic(err)
	}
	points := 1e-16 / (4 * math.Pi * si.Eps0 * 0.060 * 0.060)
	fmt.Printf("%.1f µN, %.4f of two points\n", f*1e6, f/points)
	_, err = field.SphereForceCharges(si.Eps0, 0.019, 0.019, -0.001, 10e-9, 10e-9)
	fmt.Println(err)
	// Output:
	// 217.3 µN, 0.8703 of two points
	// sphere pair: gap (centre distance less radii) is -0.001 m; want more than 0: the spheres must not touch or overlap
}

// TestTwoSpheres: Maxwell arts. 173–175, Lekner 2012; values computed
// independently with 30 digits and by multipoles.
func TestTwoSpheres(t *testing.T) {
	for _, r := range loadRefs(t, "two_spheres") {
		switch r.ID {
		case "spheres-contact":
			tol := num(t, r.Tolerance, "rel")
			near(t, "contact f_V", must(t)(field.SphereContactForce(unit, 1, 1, 1)), num(t, r.Expected, "f_V_value"), tol, 0)
			qa, qb, err := field.SphereContactCharges(unit, 1, 1, 1)
			if err != nil {
				t.Fatal(err)
			}
			near(t, "contact charge", qa, math.Ln2, tol, 0)
			fq := must(t)(field.SphereContactForce(unit, 1, 1, 1)) / (qa * qb)
			near(t, "contact f_Q", fq, num(t, r.Expected, "f_Q_value"), tol, 0)
			near(t, "contact ratio", 4*fq, num(t, r.Expected, "ratio_to_coulomb"), tol, 0)
		case "spheres-far-field":
			c := num(t, r.Inputs, "c_over_a")
			f := must(t)(field.SphereForceCharges(unit, 1, 1, c-2, 1, 1)) * c * c
			near(t, r.ID, f, num(t, r.Expected, "leading"), 0, num(t, r.Tolerance, "abs"))
			near(t, r.ID, f, num(t, r.Expected, "exact"), 1e-10, 0)
		default:
			if _, unequal := r.Inputs["b"]; unequal {
				a, b, c := num(t, r.Inputs, "a"), num(t, r.Inputs, "b"), num(t, r.Inputs, "c")
				tol := num(t, r.Tolerance, "rel")
				want := nums(t, r.Expected, "force")
				for i, p := range r.Inputs["potentials"].([]any) {
					va, vb := p.([]any)[0].(float64), p.([]any)[1].(float64)
					near(t, name("%s %g,%g", r.ID, va, vb), must(t)(field.SphereForcePotentials(unit, a, b, c-a-b, va, vb)), want[i], tol, 0)
				}
				caa, cab, cbb, err := field.SphereCapacities(unit, a, b, c-a-b)
				if err != nil {
					t.Fatal(err)
				}
				k := nums(t, r.Expected, "caa_cab_cbb")
				near(t, r.ID+" caa", caa, k[0], tol, 0)
				near(t, r.ID+" cab", cab, k[1], tol, 0)
				near(t, r.ID+" cbb", cbb, k[2], tol, 0)
				continue
			}
			c := num(t, r.Inputs, "c_over_a")
			gap := c - 2
			tol := num(t, r.Tolerance, "rel")
			v := func(va, vb float64) float64 { return must(t)(field.SphereForcePotentials(unit, 1, 1, gap, va, vb)) }
			opposite := num(t, r.Expected, "opposite_potential")
			near(t, r.ID+" same", v(1, 1), num(t, r.Expected, "same_potential"), tol, 1e-13*math.Abs(opposite))
			near(t, r.ID+" opposite", v(1, -1), opposite, tol, 0)
			near(t, r.ID+" earthed", v(1, 0), num(t, r.Expected, "one_grounded"), tol, 0)
			near(t, r.ID+" plane", must(t)(field.SpherePlaneForce(unit, 1, gap/2, 1)), opposite, tol, 0)
			caa, cab, cbb, err := field.SphereCapacities(unit, 1, 1, gap)
			if err != nil {
				t.Fatal(err)
			}
			near(t, r.ID+" caa", caa, num(t, r.Expected, "caa_over_4pieps0a"), tol, 0)
			near(t, r.ID+" cbb", cbb, caa, 1e-15, 0)
			near(t, r.ID+" cab", cab, num(t, r.Expected, "cab_over_4pieps0a"), tol, 0)
			q := func(qa, qb float64) float64 {
				return math.Abs(must(t)(field.SphereForceCharges(unit, 1, 1, gap, qa, qb))) * c * c
			}
			near(t, r.ID+" equal charges", q(1, 1), num(t, r.Expected, "equal_charge_F_over_coulomb"), tol, 1e-13*math.Abs(opposite))
			near(t, r.ID+" opposite charges", q(1, -1), num(t, r.Expected, "opposite_charge_F_over_coulomb"), tol, 0)
		}
	}
}

// directPair sums the published series (Maxwell arts. 173–175) and their
// derivatives by centre distance term by term: the check on the accelerated sums.
func directPair(a, b, gap float64) (c, w [3]float64) {
	d := a + b + gap
	u := 2 * math.Asinh(math.Sqrt(gap*(2*(a+b)+gap)/(4*a*b)))
	sh, ch := math.Sinh(u), math.Cosh(u)
	du := d / (a * b * sh)
	for n := 0.0; n < 40+60/u; n++ {
		term := func(p, q float64) (v, dv float64) {
			if n == 0 {
				return p, 0
			}
			den := p*math.Sinh(n*u) + q*math.Sinh((n+1)*u)
			dd := p*n*math.Cosh(n*u) + q*(n+1)*math.Cosh((n+1)*u)
			if math.IsInf(den, 0) {
				return 0, 0
			}
			return p * q * sh / den, p * q * (ch/den - sh/den/den*dd)
		}
		v, dv := term(a, b)
		c[0] += v
		w[0] += dv * du
		v, dv = term(b, a)
		c[2] += v
		w[2] += dv * du
		if n >= 1 {
			s := math.Sinh(n * u)
			if !math.IsInf(s, 0) {
				c[1] -= a * b / d * sh / s
				w[1] -= a*b/d*(ch/s-sh*n/s/s*math.Cosh(n*u))*du - a*b/(d*d)*sh/s
			}
		}
	}
	return c, w
}

// TestPairDigits: fixed-charge forces and coefficients summed with 50 digits
// from the published series (computed independently). The bound on the force
// is relative to Σ|terms|, of the order of 1/gap.
func TestPairDigits(t *testing.T) {
	for _, c := range []struct{ b, gap, qb, force, caa, cab, cbb float64 }{
		{1, 1e-3, 0.5, -1.31113184403827608, 2.7091522103968345, -2.0159311817267652, 2.7091522103968345},
		{2.5, 1e-3, 0.5, -8.95654494134245898, 3.438154108850716, -3.0073403531163408, 5.2275333396210076},
		{1, 0.05, 0.5, 0.00783930269131996141, 1.7454319471224129, -1.0486162225956218, 1.7454319471224129},
		{1, 298, 0.5, 5.55555452673193086e-6, 1.0000111113580316, -0.0033333703716049794, 1.0000111113580316},
		{2.5, 0.3, 0.5, -0.0860568317648953406, 1.5041471770203751, -1.0383757272601308, 3.253745775726229},
		{0.001, 0.0005, 0.5, -33704.7248708168622, 1.0015305665878281, -0.0015326745538247203, 0.0015347865015793952},
		{1, 1e-5, 1, 0.153724732322564059, 3.859992882006128, -3.1668449628685238, 3.859992882006128},
		{1, 1e-6, 1, 0.15372539257771022, 4.4356333987183081, -3.7424861443005091, 4.4356333987183081},
	} {
		caa, cab, cbb, err := field.SphereCapacities(unit, 1, c.b, c.gap)
		if err != nil {
			t.Fatal(err)
		}
		at := name("at b = %g, gap %g", c.b, c.gap)
		near(t, "caa "+at, caa, c.caa, 2e-15, 0)
		near(t, "cab "+at, cab, c.cab, 2e-15, 0)
		near(t, "cbb "+at, cbb, c.cbb, 2e-15, 0)
		f := must(t)(field.SphereForceCharges(unit, 1, c.b, c.gap, 1, c.qb))
		near(t, "force "+at, f, c.force, 2e-14, 2e-15/c.gap)
		dst := []float64{0}
		if err := field.SphereForcesCharges(dst, unit, 1, c.b, []float64{c.gap}, 1, c.qb); err != nil {
			t.Fatal(err)
		}
		near(t, "batch force "+at, dst[0], c.force, 2e-14, 2e-15/c.gap)
	}
}

func TestPairAgainstDirectSeries(t *testing.T) {
	for _, b := range []float64{1, 0.5, 2, 7, 0.03} {
		for _, gap := range []float64{1e-3, 0.0222, 0.0226, 0.1, 1, 10, 300} {
			c, w := directPair(1, b, gap)
			caa, cab, cbb, err := field.SphereCapacities(unit, 1, b, gap)
			if err != nil {
				t.Fatal(err)
			}
			for i, v := range []float64{caa, cab, cbb} {
				near(t, name("C%d at b = %g, gap %g", i, b, gap), v, c[i], 2e-13, 0)
			}
			for _, v := range [][2]float64{{1, 0}, {0, 1}, {1, 1}, {1, -1}, {2, 0.3}} {
				want := 0.5 * (w[0]*v[0]*v[0] + 2*w[1]*v[0]*v[1] + w[2]*v[1]*v[1])
				size := 0.5 * (math.Abs(w[0]*v[0]*v[0]) + 2*math.Abs(w[1]*v[0]*v[1]) + math.Abs(w[2]*v[1]*v[1]))
				near(t, name("force %v at b = %g, gap %g", v, b, gap), must(t)(field.SphereForcePotentials(unit, 1, b, gap, v[0], v[1])), want, 0, 1e-12*size)
			}
		}
	}
}

// TestSphereJets: values as without derivatives, derivatives against central
// differences, on both sides of the join of the two expansions.
func TestSphereJets(t *testing.T) {
	for _, x := range [][]float64{{1, 1.3, 1e-4}, {1, 1, 0.02}, {1, 1, 0.03}, {1, 2, 0.5}, {2, 0.3, 0.8}, {1, 1, 8}, {0.02, 0.015, 0.3}} {
		x = append([]float64{unit}, x...)
		x = append(x, 1.1, -0.7)
		s := scales(x)
		s[3] = math.Min(s[3], 0.3) // the gap
		for i, f := range []func(x []jet.Jet) jet.Jet{
			func(x []jet.Jet) jet.Jet { c, _, _ := field.SphereCapacitiesJet(x[0], x[1], x[2], x[3]); return c },
			func(x []jet.Jet) jet.Jet { _, c, _ := field.SphereCapacitiesJet(x[0], x[1], x[2], x[3]); return c },
			func(x []jet.Jet) jet.Jet { _, _, c := field.SphereCapacitiesJet(x[0], x[1], x[2], x[3]); return c },
			func(x []jet.Jet) jet.Jet {
				return field.SphereForcePotentialsJet(x[0], x[1], x[2], x[3], x[4], x[5])
			},
			func(x []jet.Jet) jet.Jet { return field.SphereForceChargesJet(x[0], x[1], x[2], x[3], x[4], x[5]) },
			func(x []jet.Jet) jet.Jet { return field.SphereForceMixedJet(x[0], x[1], x[2], x[3], x[4], x[5]) },
			func(x []jet.Jet) jet.Jet { return field.SpherePlaneForceJet(x[0], x[1], x[3], x[4]) },
		} {
			checkDerivatives(t, name("sphere function %d at %v", i, x), f, x, s, 2e-8)
		}
	}
}

// TestPairJoin: the two expansions agree where they meet, to third order.
func TestPairJoin(t *testing.T) {
	// u = 0.3 for equal radii at gap = 4 sinh²(u/2) − ... : bracket it closely
	g0 := 2*math.Cosh(0.15) - 2
	at := func(gap float64) [4]float64 {
		s := jet.NewSpace(1, 1)
		f := field.SphereForcePotentialsJet(jet.Const(unit), jet.Const(1), jet.Const(1), s.Var(0, gap), jet.Const(1), jet.Const(-0.4))
		c, _, _ := field.SphereCapacitiesJet(jet.Const(unit), jet.Const(1), jet.Const(1), s.Var(0, gap))
		return [4]float64{c.V, f.V, f.Grad(0), f.Hess(0, 0)}
	}
	lo, hi := at(g0*(1-1e-13)), at(g0*(1+1e-13))
	for i := range lo {
		near(t, name("order %d across the join", i), hi[i], lo[i], 3e-12, 0)
	}
}

// TestSphereProperties: exchange of the spheres, far limit, third law through
// the shared energy, energy derivative, induction factors of practice.
func TestSphereProperties(t *testing.T) {
	m := must(t)
	for _, c := range [][]float64{{1, 2, 0.01, 1, -2}, {1, 0.2, 0.7, 3, 1}, {1, 1, 4, 1, 0.5}} {
		a, b, g, p, q := c[0], c[1], c[2], c[3], c[4]
		near(t, "exchange, potentials", m(field.SphereForcePotentials(unit, a, b, g, p, q)), m(field.SphereForcePotentials(unit, b, a, g, q, p)), 1e-13, 1e-13)
		near(t, "exchange, charges", m(field.SphereForceCharges(unit, a, b, g, p, q)), m(field.SphereForceCharges(unit, b, a, g, q, p)), 1e-13, 1e-13)
		// force is minus the derivative of the energy at fixed charge, plus that at fixed potential
		s := jet.NewSpace(1, 1)
		caa, cab, cbb := field.SphereCapacitiesJet(jet.Const(unit), jet.Const(a), jet.Const(b), s.Var(0, g))
		wq := cbb.Scale(p * p).Sub(cab.Scale(2 * p * q)).Add(caa.Scale(q * q)).Div(caa.Mul(cbb).Sub(cab.Sqr())).Scale(0.5)
		near(t, "energy at fixed charge", m(field.SphereForceCharges(unit, a, b, g, p, q)), -wq.Grad(0), 1e-11, 0)
		wv := caa.Scale(p * p).Add(cab.Scale(2 * p * q)).Add(cbb.Scale(q * q)).Scale(0.5)
		near(t, "energy at fixed potential", m(field.SphereForcePotentials(unit, a, b, g, p, q)), wv.Grad(0), 1e-11, 0)
		// the same state by charges, by potentials and mixed
		qa, qb := caa.V*p+cab.V*q, cab.V*p+cbb.V*q
		want := m(field.SphereForcePotentials(unit, a, b, g, p, q))
		near(t, "same state by charges", m(field.SphereForceCharges(unit, a, b, g, qa, qb)), want, 1e-12, 1e-12)
		near(t, "same state, mixed", m(field.SphereForceMixed(unit, a, b, g, qa, q)), want, 1e-12, 1e-12)
	}
	// far: two points, and the leading induction term
	for _, c := range []float64{100, 1000} {
		f := m(field.SphereForceCharges(unit, 1, 1, c-2, 2, -1))
		near(t, name("far at %g", c), f, -2/(c*c)-2*5/math.Pow(c, 5), 1e-8, 0)
	}
	// halving the distance quadruples a Coulomb force (common practice, no source)
	near(t, "halving", m(field.SphereForceCharges(unit, 1, 1, 5e4-2, 1, 1))/m(field.SphereForceCharges(unit, 1, 1, 1e5-2, 1, 1)), 4, 1e-12, 0)
	// a small charge near a large like-charged sphere is attracted
	if f := m(field.SphereForceCharges(unit, 1, 0.2, 0.01, 1, 0.01)); f >= 0 {
		t.Errorf("unequal like charges close in: force %g, want attraction", f)
	}
}

// TestSphereContact: the pair approaches its contact limits (Maxwell; Lekner 2012).
func TestSphereContact(t *testing.T) {
	for _, b := range []float64{1, 2, 0.25} {
		f0 := must(t)(field.SphereContactForce(unit, 1, b, 1))
		g := 1e-5
		f := must(t)(field.SphereForcePotentials(unit, 1, b, g, 1, 1))
		near(t, name("contact force, b = %g", b), f, f0, 3*g, 3e-11/g)
		qa, qb, err := field.SphereContactCharges(unit, 1, b, 1)
		if err != nil {
			t.Fatal(err)
		}
		caa, cab, cbb, err := field.SphereCapacities(unit, 1, b, 1e-9)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "contact charge a", caa+cab, qa, 1e-8, 0)
		near(t, "contact charge b", cbb+cab, qb, 1e-8, 0)
	}
	qa, qb, err := field.SphereContactCharges(unit, 1, 1, 3)
	if err != nil || math.Abs(qa-qb) > 1e-15 {
		t.Errorf("equal spheres in contact hold %g and %g, %v", qa, qb, err)
	}
}

func TestSphereBatch(t *testing.T) {
	gaps := []float64{1e-6, 0.001, 0.0225, 0.0226, 0.1, 1, 18, 1e4}
	for _, b := range []float64{1, 2.5} {
		dst := make([]float64, len(gaps))
		if err := field.SphereForcesCharges(dst, unit, 1, b, gaps, 1, 0.5); err != nil {
			t.Fatal(err)
		}
		for i, g := range gaps {
			want := must(t)(field.SphereForceCharges(unit, 1, b, g, 1, 0.5))
			// relative to Σ|terms|: the force of the same potentials with opposite signs
			caa, cab, cbb, err := field.SphereCapacities(unit, 1, b, g)
			if err != nil {
				t.Fatal(err)
			}
			det := caa*cbb - cab*cab
			terms := must(t)(field.SphereForcePotentials(unit, 1, b, g, (cbb-cab*0.5)/det, (cab-caa*0.5)/det))
			near(t, name("batch at %g", g), dst[i], want, 1e-13, 1e-13*math.Abs(terms))
		}
	}
	if err := field.SphereForcesCharges(make([]float64, 2), unit, 1, 1, []float64{1, -1}, 1, 1); err == nil {
		t.Error("an overlapping pair passed")
	}
	if err := field.SphereForcesCharges(make([]float64, 1), unit, 1, 1, []float64{1, 2}, 1, 1); err == nil {
		t.Error("a short destination passed")
	}
	// forces at given gaps with their gap derivative, against the jets, relative to
	// that of the same potentials alone where they nearly cancel
	for _, b := range []float64{0.1, 0.75, 1, 2, 30} {
		for _, g := range gaps {
			s := jet.NewSpace(1, 0)
			at := func(qa, qb float64) jet.Jet {
				return field.SphereForceChargesJet(jet.Const(unit), jet.Const(1), jet.Const(b), s.Var(0, g), jet.Const(qa), jet.Const(qb))
			}
			f, df := field.SphereForceChargesSlope(1, b, g, 1, 0.5)
			j, like := at(1, 0.5), at(1, -0.5)
			near(t, name("slope value at %g, radius %g", g, b), f, j.V, 1e-12, 1e-12*math.Abs(like.V))
			near(t, name("slope at %g, radius %g", g, b), df, j.Grad(0), 1e-11, 1e-11*math.Abs(like.Grad(0)))
		}
	}
}

// TestTorsion: lengthened in repulsion, shortened in attraction, nothing when nulled.
func TestTorsion(t *testing.T) {
	r, c, err := field.TorsionGeometry(0.05, 0, 0.1, 0)
	if err != nil || r != 0.05 || c != 1 {
		t.Errorf("nulled: r = %g, cos ψ = %g, %v", r, c, err)
	}
	out, _, _ := field.TorsionGeometry(0.05, 0, 0.1, 0.02)
	in, _, _ := field.TorsionGeometry(0.05, 0, 0.1, -0.02)
	if out <= 0.05 || in >= 0.05 {
		t.Errorf("deflected outwards %g, inwards %g, undeflected 0.05", out, in)
	}
	near(t, "small deflection", out, 0.05+0.1*0.02, 1e-3, 0)
	f := must(t)(field.TorsionForce(1e-6, 0.02, 0, 0.1, 1))
	near(t, "torsion force", f, 2e-7, 1e-15, 0)
	checkDerivatives(t, "torsion distance", func(x []jet.Jet) jet.Jet { r, _ := field.TorsionGeometryJet(x[0], x[1], x[2], x[3]); return r },
		[]float64{0.05, 0.1, 0.1, 0.03}, []float64{0.05, 0.3, 0.1, 0.3}, 1e-8)
	checkDerivatives(t, "torsion angle", func(x []jet.Jet) jet.Jet { _, c := field.TorsionGeometryJet(x[0], x[1], x[2], x[3]); return c },
		[]float64{0.05, 0.1, 0.1, 0.03}, []float64{0.05, 0.3, 0.1, 0.3}, 1e-8)
	// moment of the force about the axis, from the geometry itself
	r, c, _ = field.TorsionGeometry(0.05, 0.2, 0.1, 0.1)
	mx, my := 0.1*math.Cos(0.1), 0.1*math.Sin(0.1)
	fx, fy := 0.1-0.05*math.Sin(0.2), -0.05*math.Cos(0.2)
	near(t, "distance", r, math.Hypot(mx-fx, my-fy), 1e-14, 0)
	near(t, "moment arm", 0.1*c, (mx*(my-fy)-my*(mx-fx))/r, 1e-14, 0)
}

// TestCalibratedSphere: outside a charged sphere the field is that of a point
// charge (common practice, no source).
func TestCalibratedSphere(t *testing.T) {
	q := must(t)(field.SphereCharge(si.Eps0, 0.05, 1000))
	e := must(t)(field.SphereField(0.05, 1000, 0.3))
	near(t, "field", e, q/(fourPi*si.Eps0*0.09), 1e-14, 0)
	near(t, "surface field", must(t)(field.SphereField(0.05, 1000, 0.05)), 1000/0.05, 1e-14, 0)
	if _, err := field.SphereField(0.05, 1000, 0.04); err == nil {
		t.Error("a point inside the sphere passed")
	}
	near(t, "charge after one time constant", field.Leak(2e-9, 100, 100), 2e-9/math.E, 1e-15, 0)
	// 60 s at τ = 20 min: 5 % of charge, 9.5 % of a force (practice)
	near(t, "leak", 1-field.Leak(1, 60, 1200), 0.05, 0, 2e-3)
	near(t, "force leak", 1-field.LeakForce(60, 1200, 1200), 0.095, 0, 5e-4)
}

func linearGaps(n int) []float64 {
	g := make([]float64, n)
	for i := range g {
		g[i] = 0.01 + (20-2.01)*float64(i)/float64(n-1)
	}
	return g
}

func nearGaps(n int) []float64 {
	g := make([]float64, n)
	for i := range g {
		g[i] = 0.01 * math.Pow(1800, float64(i)/float64(n-1))
	}
	return g
}

// BenchmarkSpherePair computes the force of two equal spheres of given charges
// at 10,000 distances; one operation is the whole grid.
func BenchmarkSpherePair(b *testing.B) {
	for _, grid := range []struct {
		name string
		gaps []float64
	}{{"linear", linearGaps(10000)}, {"near", nearGaps(10000)}} {
		b.Run(grid.name, func(b *testing.B) {
			dst := make([]float64, len(grid.gaps))
			for b.Loop() {
				if err := field.SphereForcesCharges(dst, unit, 1, 1, grid.gaps, 1, 0.5); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(dst)), "ns/force")
		})
	}
}

func BenchmarkSphereUnequal(b *testing.B) {
	gaps := linearGaps(10000)
	dst := make([]float64, len(gaps))
	for b.Loop() {
		if err := field.SphereForcesCharges(dst, unit, 1, 2, gaps, 1, 0.5); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(dst)), "ns/force")
}

// BenchmarkSphereSlope is one force with its gap derivative, as a fit asks.
func BenchmarkSphereSlope(b *testing.B) {
	for _, gap := range []float64{0.01, 0.7} {
		b.Run(name("gap %g", gap), func(b *testing.B) {
			for b.Loop() {
				field.SphereForceChargesSlope(1, 1.2, gap, 1, 0.5)
			}
		})
	}
}

func BenchmarkSphereJet(b *testing.B) {
	s := jet.NewSpace(5, 5)
	for b.Loop() {
		s.Reset()
		x := [5]jet.Jet{}
		for i, v := range []float64{1, 1.2, 0.7, 1, 0.5} {
			x[i] = s.Var(i, v)
		}
		field.SphereForceChargesJet(jet.Const(unit), x[0], x[1], x[2], x[3], x[4])
	}
}
