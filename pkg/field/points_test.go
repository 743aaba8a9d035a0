package field_test

import (
	"fmt"
	"math"
	"testing"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// Two equal charges on insulating fixtures 0.4 m apart: the field vanishes
// midway, and a free charge would not stay there.
func ExampleScene_Zeros() {
	s := field.Scene{Eps: si.Eps0, Sources: []field.Source{
		field.PointSource("left", 5e-9, field.Vec{-0.2, 0, 0}),
		field.PointSource("right", 5e-9, field.Vec{0.2, 0, 0}),
	}}
	zeros, err := s.Zeros(field.Vec{-0.3, -0.1, -0.1}, field.Vec{0.3, 0.1, 0.1}, 0)
	if err != nil {
		panic(err)
	}
	for _, z := range zeros {
		fmt.Printf("%.4f %.1f V, %.0f V/m per m, stable: %v %v %v\n", math.Abs(z.At[0]), z.Phi, z.Slope(), z.Stable(0), z.Stable(1), z.Stable(2))
	}
	// Output: 0.0000 449.4 V, 22469 V/m per m, stable: true false false
}

func scenes() map[string]*field.Scene {
	plane := &field.Plane{Point: field.Vec{0, 0, -0.5}, Normal: field.Vec{0, 0.1, 2}}
	return map[string]*field.Scene{
		"points": {Eps: si.Eps0, Sources: []field.Source{field.PointSource("a", 3e-9, field.Vec{0.1, 0, 0.2}), field.PointSource("b", -2e-9, field.Vec{-0.3, 0.1, 0})}},
		"edge":   {Eps: si.Eps0, Sources: []field.Source{field.EdgeSource("rim", 4e-9, field.Vec{-0.2, -0.2, 0}, field.Vec{0.3, 0.2, 0.1}), field.SphereSource("ball", -1e-9, field.Vec{0, 0.4, 0}, 0.05)}},
		"plane":  {Eps: si.Eps0, Plane: plane, Sources: []field.Source{field.PointSource("a", 3e-9, field.Vec{0.1, 0, 0.2}), field.EdgeSource("rim", 4e-9, field.Vec{-0.2, -0.2, 0}, field.Vec{0.3, 0.2, 0.1})}},
	}
}

// TestSceneField: the field is minus the gradient of the potential, its own
// gradient is that of the field, symmetric and without trace (Gauss and
// Faraday away from charge).
func TestSceneField(t *testing.T) {
	for label, s := range scenes() {
		for _, p := range []field.Vec{{0.3, 0.4, 0.5}, {-0.05, 0.2, 0.3}, {0.6, -0.4, 0.05}} {
			_, E, J, err := s.At(p)
			if err != nil {
				t.Fatal(err)
			}
			const h = 1e-5
			for i := range 3 {
				up, down := p, p
				up[i] += h
				down[i] -= h
				vu, eu, _, err1 := s.At(up)
				vd, ed, _, err2 := s.At(down)
				if err1 != nil || err2 != nil {
					t.Fatal(err1, err2)
				}
				size := math.Sqrt(E[0]*E[0] + E[1]*E[1] + E[2]*E[2])
				near(t, name("%s E%d at %v", label, i, p), E[i], -(vu-vd)/(2*h), 0, 1e-6*size)
				for j := range 3 {
					near(t, name("%s J%d%d at %v", label, j, i, p), J[j][i], (eu[j]-ed[j])/(2*h), 0, 1e-5*size)
					near(t, name("%s symmetry %d%d", label, i, j), J[i][j], J[j][i], 1e-10, 1e-10*size)
				}
			}
			near(t, label+" trace", J[0][0]+J[1][1]+J[2][2], 0, 0, 1e-10*(math.Abs(J[0][0])+math.Abs(J[1][1])+math.Abs(J[2][2])))
		}
	}
}

// TestContributions: the parts add to the field, and each follows its source
// (central differences).
func TestContributions(t *testing.T) {
	p := field.Vec{0.3, 0.4, 0.5}
	for label, s := range scenes() {
		parts, err := s.Contributions(p)
		if err != nil {
			t.Fatal(err)
		}
		E, err := s.Field(p)
		if err != nil {
			t.Fatal(err)
		}
		size := math.Sqrt(E[0]*E[0] + E[1]*E[1] + E[2]*E[2])
		for i := range 3 {
			total := 0.0
			for _, c := range parts {
				total += c.Field[i]
			}
			near(t, label+" sum", total, E[i], 0, 1e-12*size)
		}
		const h = 1e-5
		for k := range s.Sources {
			for j := range 3 {
				moved := func(by float64) field.Vec {
					m := *s
					m.Sources = append([]field.Source(nil), s.Sources...)
					m.Sources[k].From[j] += by
					m.Sources[k].To[j] += by
					e, err := m.Field(p)
					if err != nil {
						t.Fatal(err)
					}
					return e
				}
				up, down := moved(h), moved(-h)
				for i := range 3 {
					near(t, name("%s source %d, E%d by place %d", label, k, i, j), parts[k].BySource[i][j], (up[i]-down[i])/(2*h), 0, 1e-5*size)
				}
			}
		}
	}
}

// TestGauss: the flux through a closed sphere is the charge within over ε.
func TestGauss(t *testing.T) {
	s := scenes()["edge"]
	const n = 60
	var flux float64
	for i := range n {
		// midpoints in cos θ converge slowly but surely for a smooth field; Gauss–Legendre is not needed
		c := -1 + (2*float64(i)+1)/n
		w := 2. / n
		for j := range n {
			ph := 2 * math.Pi * (float64(j) + 0.5) / n
			u := field.Vec{math.Sqrt(1-c*c) * math.Cos(ph), math.Sqrt(1-c*c) * math.Sin(ph), c}
			e, err := s.Field(field.Vec{2 * u[0], 2 * u[1], 2 * u[2]})
			if err != nil {
				t.Fatal(err)
			}
			flux += w * 2 * math.Pi / n * 4 * (e[0]*u[0] + e[1]*u[1] + e[2]*u[2])
		}
	}
	near(t, "flux", flux, 3e-9/si.Eps0, 2e-4, 0)
}

// TestEdge: far off an edge is a point; at its side a long one has the field
// λ/2πεr of an infinite line; a short one is exactly a point.
func TestEdge(t *testing.T) {
	s := field.Scene{Eps: si.Eps0, Sources: []field.Source{field.EdgeSource("rim", 1e-9, field.Vec{0, 0, -50}, field.Vec{0, 0, 50})}}
	e, err := s.Field(field.Vec{0.1, 0, 0})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "long line", e[0], 1e-11/(2*math.Pi*si.Eps0*0.1), 1e-5, 0)
	e, err = s.Field(field.Vec{0, 1e5, 0})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "far", e[1], 1e-9/(fourPi*si.Eps0*1e10), 1e-6, 0)
}

// TestEarthedPlane: the potential vanishes on it and the field is normal to it
// (common practice, no source); the induced charge balances the source's field
// on the axis as an image at twice the height.
func TestEarthedPlane(t *testing.T) {
	s := scenes()["plane"]
	n := field.Vec{0, 0.1 / math.Hypot(0.1, 2), 2 / math.Hypot(0.1, 2)}
	for _, p := range []field.Vec{{0.1, 0.2, 0}, {-2, 1, 0}} {
		// drop the point onto the plane
		h := (p[1])*n[1] + (p[2]+0.5)*n[2]
		q := field.Vec{p[0] - h*n[0], p[1] - h*n[1] + 1e-15, p[2] - h*n[2] + 1e-13}
		phi, E, _, err := s.At(q)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "potential on the plane", phi, 0, 0, 1e-8)
		en := E[0]*n[0] + E[1]*n[1] + E[2]*n[2]
		for i := range 3 {
			near(t, "tangential field", E[i]-en*n[i], 0, 0, 1e-8*math.Abs(en))
		}
	}
	for _, p := range []field.Vec{{0, 0, -1}, {0.1, 0, 0.2}, {math.NaN(), 0, 0}} {
		if _, err := s.Field(p); err == nil {
			t.Errorf("a field at %v", p)
		}
	}
	s.Sources = append(s.Sources, field.PointSource("below", 1e-9, field.Vec{0, 0, -0.6}))
	if _, err := s.Field(field.Vec{0, 0, 1}); err == nil {
		t.Error("a source behind the plane passed")
	}
}

// TestZeros: unequal charges q and 4q vanish at a third of the way; unlike ones
// outside the smaller; midway between like charges the zero is unstable
// (common practice, no source).
func TestZeros(t *testing.T) {
	scene := func(q float64) *field.Scene {
		return &field.Scene{Eps: si.Eps0, Sources: []field.Source{field.PointSource("a", q, field.Vec{0, 0, 0}), field.PointSource("b", 4e-9, field.Vec{0.3, 0, 0})}}
	}
	lo, hi := field.Vec{-0.5, -0.2, -0.2}, field.Vec{0.5, 0.2, 0.2}
	for _, c := range []struct{ q, x float64 }{{1e-9, 0.1}, {-1e-9, -0.3}} {
		zeros, err := scene(c.q).Zeros(lo, hi, 9)
		if err != nil {
			t.Fatal(err)
		}
		if len(zeros) != 1 {
			t.Fatalf("q = %g: %d zeros, want 1: %v", c.q, len(zeros), zeros)
		}
		near(t, "place", zeros[0].At[0], c.x, 1e-8, 0)
		var unstable bool
		for i := range 3 {
			unstable = unstable || !zeros[0].Stable(i)
		}
		if !unstable {
			t.Errorf("zero at %v is stable in every direction", zeros[0].At)
		}
		g := zeros[0].Gradient
		near(t, "trace", g[0]+g[1]+g[2], 0, 0, 1e-9*zeros[0].Slope())
	}
	zeros, err := (&field.Scene{Eps: si.Eps0, Sources: []field.Source{field.PointSource("a", 1e-9, field.Vec{})}}).Zeros(field.Vec{0.1, 0.1, 0.1}, field.Vec{1, 1, 1}, 5)
	if err != nil || len(zeros) != 0 {
		t.Errorf("a lone charge has zeros %v, %v", zeros, err)
	}
}

// TestFieldLines: lines leave positive charge and end on negative, or on the
// plane (common practice, no source). For two charges on the axis every line
// keeps Σ q cos θ (derived: flux between lines).
func TestFieldLines(t *testing.T) {
	s := &field.Scene{Eps: si.Eps0, Sources: []field.Source{field.SphereSource("plus", 2e-9, field.Vec{0, 0, 0}, 0.01), field.SphereSource("minus", -2e-9, field.Vec{0.4, 0, 0}, 0.01)}}
	lo, hi := field.Vec{-3, -3, -3}, field.Vec{3, 3, 3}
	invariant := func(p field.Vec) float64 {
		a := p[0] / math.Hypot(p[0], math.Hypot(p[1], p[2]))
		b := (p[0] - 0.4) / math.Hypot(p[0]-0.4, math.Hypot(p[1], p[2]))
		return 2e-9*a - 2e-9*b
	}
	for _, th := range []float64{0.3, 1, 1.8, 2.2} {
		start := field.Vec{0.01 * math.Cos(th), 0.01 * math.Sin(th), 0}
		l, err := s.Line(start, true, lo, hi, field.LineSettings{})
		if err != nil {
			t.Fatal(err)
		}
		if l.End != field.OnSource || l.Source != "minus" {
			t.Errorf("line at %g ended %v %s", th, l.End, l.Source)
		}
		want := invariant(start)
		for _, p := range l.Points {
			if math.Abs(invariant(p)-want) > 2e-5*2e-9 {
				t.Errorf("line at %g strays at %v: %g, started with %g", th, p, invariant(p), want)
				break
			}
		}
		back, err := s.Line(l.Points[len(l.Points)-1], false, lo, hi, field.LineSettings{})
		if err != nil {
			t.Fatal(err)
		}
		if back.End != field.OnSource || back.Source != "plus" {
			t.Errorf("line back from %g ended %v %s", th, back.End, back.Source)
		}
	}
	// from a charge over a plane to the plane, at right angles
	p := &field.Scene{Eps: si.Eps0, Plane: &field.Plane{Normal: field.Vec{0, 0, 1}}, Sources: []field.Source{field.SphereSource("plus", 1e-9, field.Vec{0, 0, 0.3}, 0.01)}}
	l, err := p.Line(field.Vec{0.01, 0, 0.3}, true, lo, hi, field.LineSettings{})
	if err != nil {
		t.Fatal(err)
	}
	m := len(l.Points)
	if l.End != field.OnPlane || math.Abs(l.Points[m-1][2]) > 1e-9 {
		t.Errorf("line over a plane ended %v at %v", l.End, l.Points[m-1])
	}
	// a lone charge: straight out of the box; between like charges: into the zero or out
	lone := &field.Scene{Eps: si.Eps0, Sources: []field.Source{field.PointSource("plus", 1e-9, field.Vec{})}}
	l, err = lone.Line(field.Vec{0.1, 0.1, 0}, true, lo, hi, field.LineSettings{})
	if err != nil || l.End != field.LeftBox {
		t.Errorf("lone charge: %v %v", l, err)
	}
	end := l.Points[len(l.Points)-1]
	near(t, "straight", end[1], end[0], 1e-9, 0)
	like := &field.Scene{Eps: si.Eps0, Sources: []field.Source{field.PointSource("a", 1e-9, field.Vec{-0.2, 0, 0}), field.PointSource("b", 1e-9, field.Vec{0.2, 0, 0})}}
	l, err = like.Line(field.Vec{-0.1, 0, 0}, true, lo, hi, field.LineSettings{})
	if err != nil || l.End != field.AtZero {
		t.Errorf("between like charges the line ended %v, %v", l.End, err)
	}
	if _, err := like.Line(field.Vec{9, 0, 0}, true, lo, hi, field.LineSettings{}); err == nil {
		t.Error("a start outside the box passed")
	}
}

func TestPointJets(t *testing.T) {
	x := []float64{8.85e-12, 2e-9, 0.1, -0.2, 0.3, 0.5, 0.4, -0.1}
	s := scales(x)
	for i := 2; i < len(s); i++ {
		s[i] = 0.3
	}
	for k := range 3 {
		checkDerivatives(t, name("point field %d", k), func(x []jet.Jet) jet.Jet {
			return field.PointFieldJet(x[0], x[1], [3]jet.Jet(x[2:5]), [3]jet.Jet(x[5:8]))[k]
		}, x, s, 1e-7)
	}
	sc := field.Scene{Eps: x[0], Sources: []field.Source{field.PointSource("", x[1], field.Vec(x[2:5]))}}
	e, err := sc.Field(field.Vec(x[5:8]))
	if err != nil {
		t.Fatal(err)
	}
	c := make([]jet.Jet, 8)
	for i := range c {
		c[i] = jet.Const(x[i])
	}
	j := field.PointFieldJet(c[0], c[1], [3]jet.Jet(c[2:5]), [3]jet.Jet(c[5:8]))
	for i := range e {
		near(t, "point field", e[i], j[i].V, 1e-14, 0)
	}
}

// TestBeam: the slow limit y = qEL²/4T, tan θ = qEL/2T, the fast one against a
// step-by-step integration of the equations of motion.
func TestBeam(t *testing.T) {
	const me = 8.1871057e-14 // J, an electron's rest energy to the digits a test needs
	q, E, L := si.ElementaryCharge, 2e4, 0.05
	y, th, err := field.BeamDeflection(q, E, L, 2000*q, 1e-4)
	if err != nil {
		t.Fatal(err)
	}
	x := q * E * L / (2 * 2000 * q)
	near(t, "slow tan θ", math.Tan(th), x, 1e-9, 0)
	near(t, "slow y", y, x*L/2, 1e-9, 0)
	T := 30e3 * q
	y, th, err = field.BeamDeflection(q, E, L, T, me)
	if err != nil {
		t.Fatal(err)
	}
	// momentum in units of energy, time as length: exact kinematics, midpoint steps
	const n = 20000
	pz := math.Sqrt(T * (T + 2*me))
	var py, yy, z float64
	dt := L / n * 3
	for z < L {
		mid := py + q*E*dt/2
		w := math.Sqrt(me*me + pz*pz + mid*mid)
		dz := pz / w * dt
		f := math.Min(1, (L-z)/dz)
		yy += f * mid / w * dt
		py += f * q * E * dt
		z += f * dz
		if f < 1 {
			break
		}
	}
	near(t, "fast y", y, yy, 1e-6, 0)
	near(t, "fast θ", math.Tan(th), py/pz, 1e-6, 0)
	if _, _, err := field.BeamDeflection(q, 1e8, L, T, me); err == nil {
		t.Error("a beam driven into the plate passed")
	}
	in := []float64{q, E, L, T, me}
	checkDerivatives(t, "beam y", func(x []jet.Jet) jet.Jet { y, _ := field.BeamDeflectionJet(x[0], x[1], x[2], x[3], x[4]); return y }, in, scales(in), 1e-7)
	checkDerivatives(t, "beam θ", func(x []jet.Jet) jet.Jet { _, th := field.BeamDeflectionJet(x[0], x[1], x[2], x[3], x[4]); return th }, in, scales(in), 1e-7)
}

// TestMaterials: von Hippel and handbooks, values from memory; Malmberg and
// Maryott (1956), polynomial from memory.
func TestMaterials(t *testing.T) {
	seen := 0
	for _, r := range loadRefs(t, "materials") {
		if m, ok := r.Inputs["material"].(string); ok {
			for _, e := range field.Materials() {
				if e.Name == m {
					seen++
					span := nums(t, r.Expected, "range")
					if e.EpsR != num(t, r.Expected, "eps_r") || e.Low != span[0] || e.High != span[1] {
						t.Errorf("%s: %+v, want %v in %v", m, e, r.Expected["eps_r"], span)
					}
				}
			}
			continue
		}
		e := must(t)(field.WaterPermittivity(num(t, r.Inputs, "t_C") + 273.15))
		near(t, r.ID, e, num(t, r.Expected, "eps_r"), num(t, r.Tolerance, "formula_rel"), 0)
	}
	if seen != len(field.Materials()) {
		t.Errorf("%d of %d materials have a reference", seen, len(field.Materials()))
	}
	for _, c := range []struct {
		eps, u float64
		ok     bool
	}{{2.05, 0.01, true}, {2.3, 0.15, true}, {2.3, 0.01, false}, {1.7, 0.1, false}} {
		if ok, note, err := field.CheckMaterial("ptfe", c.eps, c.u); err != nil || ok != c.ok || note == "" {
			t.Errorf("PTFE %g(%g): %v, %q, %v", c.eps, c.u, ok, note, err)
		}
	}
	for _, bad := range [][2]float64{{math.NaN(), 0.1}, {2.1, math.NaN()}, {math.Inf(1), 0.1}, {2.1, -0.1}} {
		if ok, note, err := field.CheckMaterial("PTFE", bad[0], bad[1]); ok || note != "" || err == nil {
			t.Errorf("permittivity %v ± %v passed: %v, %q", bad[0], bad[1], ok, note)
		}
	}
	scene := field.Scene{Eps: 8.85e-12, Sources: []field.Source{field.SphereSource("ball", 1e-9, field.Vec{}, math.NaN())}}
	if _, err := scene.Field(field.Vec{1, 0, 0}); err == nil {
		t.Error("a sphere whose radius is not a number passed")
	}
	if _, _, err := field.CheckMaterial("unobtainium", 1, 1); err == nil {
		t.Error("an unknown material passed")
	}
}

// TestCommonPractice: k_e is 9.0e9 N m²/C² to two figures (no source).
func TestCommonPractice(t *testing.T) {
	f := must(t)(field.PointForce(si.Eps0, 1, 1, 1))
	if r := math.Round(f/1e8) / 10; r != 9.0 {
		t.Errorf("k_e to two figures is %ge9", r)
	}
	s := jet.NewSpace(2, 2)
	v := field.PowerForceJet(jet.Const(si.Eps0), jet.Const(1e-9), jet.Const(2e-9), s.Var(0, 0.1), s.Var(1, 2), 0.07)
	near(t, "exponent 2 is Coulomb's law", v.V, must(t)(field.PointForce(si.Eps0, 1e-9, 2e-9, 0.1)), 1e-14, 0)
	near(t, "by exponent", v.Grad(1), -v.V*math.Log(0.1/0.07), 1e-13, 0)
	x := []float64{8.85e-12, 1e-9, 2e-9, 0.1, 1.9}
	checkDerivatives(t, "power law", func(x []jet.Jet) jet.Jet { return field.PowerForceJet(x[0], x[1], x[2], x[3], x[4], 0.07) }, x, scales(x), 1e-7)
}
