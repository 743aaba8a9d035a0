package model_test

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/si"
)

const fourPiEps = 4 * math.Pi * si.Eps0

// reference reads an array of published or independently computed values.
func reference[T any](t *testing.T, name string) []T {
	t.Helper()
	data, err := os.ReadFile(filepath.Join("..", "..", "testdata", "refs", name))
	if err != nil {
		t.Fatal(err)
	}
	var all []json.RawMessage
	if err := json.Unmarshal(data, &all); err != nil {
		t.Fatal(err)
	}
	var out []T
	for _, raw := range all {
		var v T
		if err := json.Unmarshal(raw, &v); err == nil {
			out = append(out, v)
		}
	}
	return out
}

// pair is a bench of two spheres in vacuum.
func pair(t *testing.T, connection string, columns map[string][]float64) *job {
	return bench(t, "sphere-pair", columns).option("connection", connection).on("induction").with("permittivity", si.Eps0).with("radius_1", 0.02).with("radius_2", 0.02)
}

// TestSpherePair compares the predictions with the forces of two equal spheres in
// testdata/refs/two_spheres.json, computed independently (Maxwell, Treatise, arts.
// 173–175; Lekner 2012), and those of a sphere over a plane with the force at
// opposite potentials at twice its height.
func TestSpherePair(t *testing.T) {
	type item struct {
		ID     string
		Inputs struct {
			C float64 `json:"c_over_a"`
		}
		Expected struct {
			Same     float64 `json:"same_potential"`
			Opposite float64 `json:"opposite_potential"`
			Earthed  float64 `json:"one_grounded"`
			Like     float64 `json:"equal_charge_F_over_coulomb"`
			Unlike   float64 `json:"opposite_charge_F_over_coulomb"`
		}
	}
	const a, v, q = 0.02, 3e3, 5e-9
	seen := 0
	for _, it := range reference[item](t, "two_spheres.json") {
		if !strings.HasPrefix(it.ID, "spheres-equal-c") {
			continue
		}
		seen++
		r, e := it.Inputs.C*a, it.Expected
		unit := fourPiEps * v * v
		// The distance is stated as one double: near contact the gap keeps fewer
		// digits than the series, and the largest force takes the sum of the others.
		rel := 1e-8 + 4e-16/(it.Inputs.C-2)
		at := func(v1, v2 float64) float64 {
			return pair(t, "connected", map[string][]float64{"distance": {r}, "voltage_1": {v1}, "voltage_2": {v2}, "force": nil}).predict(0)
		}
		near(t, it.ID+" joined", pair(t, "connected", map[string][]float64{"distance": {r}, "voltage_1": {v}, "force": nil}).predict(0), unit*e.Same, rel*math.Abs(e.Opposite/e.Same))
		near(t, it.ID+" opposite", at(v, -v), unit*e.Opposite, rel)
		near(t, it.ID+" one earthed", at(v, 0), unit*e.Earthed, rel)
		coulomb := q * q / (fourPiEps * r * r)
		charged := func(q2 float64) float64 {
			return pair(t, "isolated", map[string][]float64{"distance": {r}, "charge_1": {q}, "charge_2": {q2}, "force": nil}).predict(0)
		}
		near(t, it.ID+" like charges", charged(q), coulomb*e.Like, rel*math.Max(1, math.Abs(e.Unlike/e.Like)))
		near(t, it.ID+" unlike charges", charged(-q), -coulomb*e.Unlike, rel)
		plane := bench(t, "sphere-plane", map[string][]float64{"gap": {r/2 - a}, "voltage": {v}, "force": nil}).option("connection", "connected").
			with("permittivity", si.Eps0).with("radius", a)
		near(t, it.ID+" plane", plane.predict(0), -unit*e.Opposite, rel)
	}
	if seen < 6 {
		t.Fatalf("only %d published cases found", seen)
	}
}

// TestUnguardedDisc compares the attraction with the exact solution of Love (1949)
// in testdata/refs/disc_capacitor.json, computed independently.
func TestUnguardedDisc(t *testing.T) {
	type item struct {
		ID       string
		Inputs   struct{ Kappa float64 }
		Expected struct {
			Force *float64 `json:"force_over_ideal"`
		}
	}
	const r, v = 0.06, 4e3
	seen := 0
	disc := func(d float64, drive string) *job {
		return bench(t, "attracted-disc", map[string][]float64{"gap": {d}, "voltage": {v}, "force": nil}).option("electrodes", "unguarded").option("drive.kind", drive).
			on("edge").with("permittivity", si.Eps0).with("disc_radius", r)
	}
	for _, it := range reference[item](t, "disc_capacitor.json") {
		if it.Expected.Force == nil {
			continue
		}
		seen++
		d := it.Inputs.Kappa * r
		ideal := 0.5 * si.Eps0 * math.Pi * r * r * v * v / (d * d)
		near(t, it.ID, disc(d, "balanced").predict(0), ideal**it.Expected.Force, 1e-8)
		near(t, it.ID+" one side earthed", disc(d, "one-side-earthed").predict(0), must(t)(field.DiscForce(field.OneSideEarthed, si.Eps0, r, d, v)), 1e-12)
		if disc(d, "one-side-earthed").predict(0) >= disc(d, "balanced").predict(0) {
			t.Errorf("%s: one side earthed does not lower the force", it.ID)
		}
	}
	if seen < 3 {
		t.Fatalf("only %d published cases found", seen)
	}
}

func points(t *testing.T, distance, q1, q2 []float64) *job {
	return bench(t, "coulomb-point", map[string][]float64{"distance": distance, "charge_1": q1, "charge_2": q2, "force": nil}).with("permittivity", si.Eps0)
}

// TestCoulombPoint holds the law to facts of the trade (common practice, no
// source), and its induced part to the exact series of package field.
func TestCoulombPoint(t *testing.T) {
	j := points(t, []float64{0.1, 0.2}, []float64{4e-9, 4e-9}, []float64{3e-9, 3e-9})
	near(t, "half the distance, four times the force", j.predict(0), 4*j.predict(1), 1e-14)
	// k_e is 9.0e9 N m²/C² to two figures.
	near(t, "two charges of 1 nC at 10 cm", points(t, []float64{0.1}, []float64{1e-9}, []float64{1e-9}).predict(0), 9.0e9*1e-18/0.01, 2e-3)

	free := points(t, []float64{0.1, 0.15}, []float64{4e-9, 4e-9}, []float64{3e-9, 3e-9}).with("exponent", 2.1).with("reference_distance", 0.1)
	near(t, "strength at the reference distance", free.predict(0), j.predict(0), 1e-14)
	near(t, "exponent", math.Log(free.predict(0)/free.predict(1))/math.Log(1.5), 2.1, 1e-12)

	leaking := func(elapsed float64) float64 {
		j := points(t, []float64{0.1}, []float64{4e-9}, []float64{3e-9}).on("leakage").with("corrections.leakage.time_constant", 1200)
		return j.predict(0, elapsed)
	}
	// 60 s at 20 min lose 5 % of a charge and 9.5 % of a force (common practice).
	near(t, "leakage", leaking(60)/leaking(0), math.Exp(-2*60./1200), 1e-14)

	for _, c := range []struct{ a, b, r, q1, q2 float64 }{
		{0.01, 0.01, 0.05, 4e-9, 4e-9}, {0.01, 0.01, 0.05, 4e-9, -4e-9}, {0.01, 0.01, 0.08, 4e-9, 1e-9},
		{0.01, 0.004, 0.05, 4e-9, 6e-9}, {0.01, 0.004, 0.05, 1e-9, -6e-9}, {0.01, 0.01, 0.2, 4e-9, 4e-9},
	} {
		exact := must(t)(field.SphereForceCharges(si.Eps0, c.a, c.b, c.r-c.a-c.b, c.q1, c.q2))
		at := func() *job { return points(t, []float64{c.r}, []float64{c.q1}, []float64{c.q2}) }
		plain := at().predict(0)
		images := at().on("induction").with("corrections.induction.radius_1", c.a).with("corrections.induction.radius_2", c.b).predict(0)
		if math.Abs(images-exact) > 0.1*math.Abs(plain-exact) {
			t.Errorf("%+v: single images give %.6g N of the exact %.6g N (points: %.6g N)", c, images, exact, plain)
		}
	}
}

// TestTorsion holds a deflecting balance to its own equation of equilibrium in the
// geometry of package field, and a nulled one to the force at rest.
func TestTorsion(t *testing.T) {
	const kappa, arm, line, a, b = 2e-3, 0.12, 0.03, 0.02, 0.015
	for _, q2 := range []float64{8e-9, -5e-9} {
		j := func(mode string) *job {
			return pair(t, "isolated", map[string][]float64{"distance": {0.06}, "charge_1": {11e-9}, "charge_2": {q2}, "angle": nil}).option("torsion", mode).
				with("radius_2", b).with("torsion_constant", kappa).with("arm", arm).with("line_angle", line).with("rest_angle", 0.002)
		}
		phi := j("deflecting").predict(0) - 0.002
		r, cos, err := field.TorsionGeometry(0.06, line, arm, phi)
		if err != nil {
			t.Fatal(err)
		}
		f := must(t)(field.SphereForceCharges(si.Eps0, a, b, r-a-b, 11e-9, q2))
		near(t, "torque of a deflected arm", kappa*phi, f*arm*cos, 1e-12)
		if (phi > 0) != (q2 > 0) || (r > 0.06) != (q2 > 0) {
			t.Errorf("charges 11 nC and %g C: the arm turns by %g rad to %g m", q2, phi, r)
		}
		f = must(t)(field.SphereForceCharges(si.Eps0, a, b, 0.06-a-b, 11e-9, q2))
		near(t, "nulled", j("nulled").predict(0)-0.002, f*arm*math.Cos(line)/kappa, 1e-12)
	}
}

// TestSphereField compares the reading of a head with the charge that a point
// charge induces on one half of a conducting sphere, integrated over the image
// solution (Maxwell, Treatise, arts. 157–160; Jackson, Classical Electrodynamics,
// 3rd ed., equation (2.5)), and the floor with the field of charge and image.
func TestSphereField(t *testing.T) {
	const a, r, v = 0.1, 0.4, 1e4
	lone := func() *job {
		return bench(t, "sphere-field", map[string][]float64{"distance": {r}, "voltage": {v}, "indication": nil}).with("response", 1).with("radius", a)
	}
	near(t, "lone sphere", lone().predict(0), v*a/(r*r), 1e-14)

	// σ ∝ (r² − b²)/(r² + b² − 2rb cos θ)^(3/2): the charge of the half near the
	// charge less that of the other, over the same for a uniform field of the
	// strength at the centre.
	const b = 0.08
	const n = 20000
	var halves float64
	for i := range n {
		c := -1 + 2*(float64(i)+0.5)/n
		halves += math.Copysign(1, c) * (r*r - b*b) / math.Pow(r*r+b*b-2*r*b*c, 1.5) * 2 / n
	}
	uniform := 3 * b / (r * r) // ∫|3cos θ| d cos θ over both halves, times b/r² for the same charge
	head := lone().on("head").with("corrections.head.radius", b).predict(0)
	near(t, "hemisphere", head/(v*a/(r*r)), halves/uniform, 1e-4)

	const h = 1.2
	c := must(t)(field.SpherePlaneCapacitance(si.Eps0, a, h-a))
	scene := &field.Scene{Eps: si.Eps0, Sources: []field.Source{field.SphereSource("sphere", c*v, field.Vec{0, 0, h}, a)},
		Plane: &field.Plane{Normal: field.Vec{0, 0, 1}}}
	e, err := scene.Field(field.Vec{r, 0, h})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "floor", lone().on("floor").with("corrections.floor.height", h).predict(0), e[0], 1e-12)
}

// TestSphereCharge: a known charge predicts the force that finds it.
func TestSphereCharge(t *testing.T) {
	x := map[string][]float64{"distance": {0.05, 0.07, 0.1}, "force": nil}
	for _, share := range []bool{true, false} {
		j := bench(t, "sphere-charge", x).on("induction").with("radius_1", 0.015).with("radius_2", 0.012).with("charge_1", 6e-9)
		if !share {
			j.with("charge_2", -4e-9)
		}
		m := j.model()
		y := []float64{j.predict(0), j.predict(1), j.predict(2)}
		start, err := m.Start(j.q, []int{j.k.Scalar("charge_1")}, j.x(m), y)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "start of the charge", start[0], 6e-9, 0.3)
		if share {
			near(t, "force of a shared charge", y[2], must(t)(field.SphereForceCharges(si.Eps0, 0.015, 0.012, 0.073, 6e-9, 6e-9)), 1e-12)
		}
	}
}

// TestForceHazards holds what the cautions say to the charge and energy of spheres
// at a known potential or charge: q = 4πεaV alone, U = ½ΣqV.
func TestForceHazards(t *testing.T) {
	field := bench(t, "sphere-field", map[string][]float64{"distance": {0.4}, "voltage": {-1e4}, "indication": nil}).with("radius", 0.1)
	h := field.model().Hazard(field.q, field.x(field.model()))
	near(t, "voltage", h.Voltage, 1e4, 1e-12)
	near(t, "charge", h.Charge, fourPiEps*0.1*1e4, 1e-12)
	near(t, "energy", h.Energy, 0.5*fourPiEps*0.1*1e8, 1e-12)
	near(t, "surface field", h.Field, 1e5, 1e-12)

	plane := bench(t, "sphere-plane", map[string][]float64{"gap": {0.004, 0.04}, "voltage": {5e3, 8e3}, "force": nil}).option("connection", "connected").with("radius", 0.025)
	h = plane.model().Hazard(plane.q, plane.x(plane.model()))
	near(t, "voltage over a plane", h.Voltage, 8e3, 1e-12)

	// Far apart two spheres hold what they hold alone.
	far := pair(t, "connected", map[string][]float64{"distance": {50}, "voltage_1": {5e3}, "voltage_2": {-4e3}, "force": nil})
	h = far.model().Hazard(far.q, far.x(far.model()))
	near(t, "voltage between spheres", h.Voltage, 9e3, 1e-12)
	near(t, "energy of spheres", h.Energy, 0.5*fourPiEps*0.02*(25e6+16e6), 2e-3)
	point := points(t, []float64{0.2}, []float64{4e-9}, []float64{-3e-9}).on("induction").with("corrections.induction.radius_1", 0.01).with("corrections.induction.radius_2", 0.02)
	h = point.model().Hazard(point.q, point.x(point.model()))
	near(t, "charge of small bodies", h.Charge, 4e-9, 1e-12)
	near(t, "energy of small bodies", h.Energy, 0.5*(16e-18/0.01+9e-18/0.02)/fourPiEps, 1e-12)
}

func TestForcesRefuse(t *testing.T) {
	v := map[string][]float64{"distance": {0.05, 0.06}, "voltage_1": {3e3, 3e3}, "force": nil}
	q := map[string][]float64{"distance": {0.05, 0.06}, "charge_1": {4e-9, 4e-9}, "charge_2": {3e-9, 3e-9}, "force": nil}
	refuses(t, "overlap", pair(t, "connected", v).with("radius_2", 0.035).check(1e-4, 1e-4), "overlap", "farther apart", "55 mm")
	refuses(t, "overlap by the zero of the scale", pair(t, "connected", v).with("distance_offset", -0.011).check(1e-4, 1e-4), "overlap")
	refuses(t, "charges of connected spheres", pair(t, "connected", map[string][]float64{"distance": {0.05}, "voltage_1": {1e3}, "charge_1": {1e-9}, "force": nil}).check(1e-4), "charge_1", `"isolated"`)
	refuses(t, "potential of isolated spheres", pair(t, "isolated", v).check(1e-4, 1e-4), "voltage_1", `"connected"`)
	refuses(t, "no potential", pair(t, "connected", map[string][]float64{"distance": {0.05}, "force": nil}).check(1e-4), "voltage_1")
	refuses(t, "no charge", pair(t, "isolated", map[string][]float64{"distance": {0.05}, "charge_1": {1e-9}, "force": nil}).check(1e-4), "charge_2")
	refuses(t, "charge twice", pair(t, "isolated", q).with("charge_1", 1e-9).check(1e-4, 1e-4), "one of the two")
	refuses(t, "leaking potentials", pair(t, "connected", v).on("leakage").with("corrections.leakage.time_constant", 100).check(1e-4, 1e-4), "corrections.leakage")
	like := pair(t, "isolated", q)
	refuses(t, "attraction of like charges", like.check(like.predict(0), -like.predict(1)), "like sign")
	joined := pair(t, "connected", v)
	refuses(t, "attraction at one potential", joined.check(joined.predict(0), -joined.predict(1)), "3000 V")
	refuses(t, "deflection of a force", pair(t, "isolated", q).option("torsion", "deflecting").check(1e-4, 1e-4), "angle")
	refuses(t, "angle without a torsion constant", pair(t, "isolated", map[string][]float64{"distance": {0.05}, "charge_1": {4e-9}, "charge_2": {3e-9}, "angle": nil}).check(0.01), "torsion_constant")
	soft := pair(t, "isolated", map[string][]float64{"distance": {0.05}, "charge_1": {20e-9}, "charge_2": {-20e-9}, "angle": nil}).option("torsion", "deflecting").with("torsion_constant", 1e-4).with("arm", 0.1)
	refuses(t, "an arm pulled in", soft.check(-0.1), "stiffer")

	p := points(t, []float64{0.05, 0.06}, []float64{4e-9, 4e-9}, []float64{3e-9, 3e-9})
	refuses(t, "within five radii", points(t, []float64{0.05, 0.06}, []float64{4e-9, 4e-9}, []float64{3e-9, 3e-9}).on("induction").
		with("corrections.induction.radius_1", 0.011).with("corrections.induction.radius_2", 0.01).check(p.predict(0), p.predict(1)), "sphere-pair", "5 radii (5 × 11 mm = 55 mm)")
	refuses(t, "distance below zero", points(t, []float64{0.05}, []float64{4e-9}, []float64{3e-9}).with("distance_offset", -0.06).check(1e-4), "above zero")
	refuses(t, "unlike charges that repel", points(t, []float64{0.05, 0.06, 0.07}, []float64{4e-9, 4e-9, 4e-9}, []float64{3e-9, 3e-9, -3e-9}).check(p.predict(0), p.predict(1), 5e-5), "unlike sign", "force 50 µN:")
	refuses(t, "exponent without a distance", points(t, []float64{0.05}, []float64{4e-9}, []float64{3e-9}).with("exponent", 2.01).check(1e-4), "reference_distance")
	refuses(t, "distance of the exponent", points(t, []float64{0.05, 0.06}, []float64{4e-9, 4e-9}, []float64{3e-9, 3e-9}).with("exponent", 2).with("reference_distance", 0.2).check(p.predict(0), p.predict(1)), "outside the distances")
	refuses(t, "a body without charge", bench(t, "coulomb-point", map[string][]float64{"distance": {0.05}, "charge_1": {4e-9}, "force": nil}).with("charge_2", 0).check(1e-4), "zero")
	refuses(t, "time before the charge", bench(t, "coulomb-point", map[string][]float64{"distance": {0.05}, "charge_1": {4e-9}, "charge_2": {4e-9}, "elapsed": {-3}, "force": nil}).
		on("leakage").with("permittivity", si.Eps0).with("corrections.leakage.time_constant", 100).check(1e-4), "before")

	plane := func(gap float64) *job {
		return bench(t, "sphere-plane", map[string][]float64{"gap": {gap}, "voltage": {3e3}, "force": nil}).option("connection", "connected").with("permittivity", si.Eps0).with("radius", 0.02)
	}
	refuses(t, "sphere in the plane", plane(0.005).with("gap_offset", -0.006).check(1e-4), "above zero")
	refuses(t, "charge of a connected sphere", plane(0.005).with("charge", 1e-9).check(1e-4), `"isolated"`)
	refuses(t, "contact potential of an isolated sphere", bench(t, "sphere-plane", map[string][]float64{"gap": {0.01}, "force": nil}).option("connection", "isolated").
		with("radius", 0.02).with("charge", 1e-9).with("contact_potential", 0.1).check(1e-5), "contact_potential")

	meter := func(r float64) *job {
		return bench(t, "sphere-field", map[string][]float64{"distance": {r}, "voltage": {3e3}, "indication": nil}).with("radius", 0.1)
	}
	refuses(t, "inside the sphere", meter(0.09).check(1e3), "inside the sphere")
	refuses(t, "a wide head", meter(0.2).on("head").with("corrections.head.radius", 0.07).check(1e3), "farther")
	refuses(t, "a floor too near", meter(0.2).on("floor").with("corrections.floor.height", 0.25).check(1e3), "radii")
	refuses(t, "a head that needs no correction", meter(0.3).on("head").option("corrections.head.sensing", "dipole").check(1e3), "use = false")

	disc := func() *job {
		return bench(t, "attracted-disc", map[string][]float64{"gap": {5e-3}, "voltage": {3e3}, "force": nil}).with("permittivity", si.Eps0).with("disc_radius", 0.05)
	}
	refuses(t, "guard gap of unguarded discs", disc().option("electrodes", "unguarded").on("edge", "guard_gap").check(1e-3), "use = false")
	refuses(t, "edge of a guarded disc", disc().with("guard_gap", 5e-4).on("edge").check(1e-3), "unguarded")
	refuses(t, "guarded disc without a guard gap", disc().on("guard_gap").check(1e-3), "guard_gap")
}

// TestForceBlocks compares the fast predictions with the jets, values and
// derivatives, for benches with every correction on.
func TestForceBlocks(t *testing.T) {
	q := func(response string) map[string][]float64 {
		return map[string][]float64{"distance": {0.055, 0.09}, "charge_1": {11e-9, 9e-9}, "charge_2": {-8e-9, 7e-9}, response: nil}
	}
	torsion := func(j *job) *job {
		return j.with("torsion_constant", 2e-3).with("arm", 0.12).with("line_angle", 0.03).with("rest_angle", 0.002).with("distance_offset", 3e-4)
	}
	leaking := func(j *job) *job { return j.on("leakage", "air").with("corrections.leakage.time_constant", 900) }
	free := func(j *job) *job {
		return j.on("induction").with("corrections.induction.radius_1", 0.01).with("corrections.induction.radius_2", 0.008).with("corrections.induction.model", 0.04).
			with("exponent", 2.03).with("reference_distance", 0.08)
	}
	mass := func(j *job) *job { return j.on("balance").with("environment.gravity", 9.81) }
	jobs := map[string]*job{
		"points, mass":       mass(free(leaking(bench(t, "coulomb-point", q("mass")).with("permittivity", si.Eps0)))),
		"points, nulled":     torsion(free(leaking(bench(t, "coulomb-point", q("angle")).with("permittivity", si.Eps0)))),
		"points, deflecting": torsion(free(leaking(bench(t, "coulomb-point", q("angle")).with("permittivity", si.Eps0)))).option("torsion", "deflecting"),
		"pair, deflecting":   torsion(leaking(pair(t, "isolated", q("angle")))).option("torsion", "deflecting"),
		"pair, nulled":       torsion(leaking(pair(t, "isolated", q("angle")))),
		"pair, no induction": leaking(bench(t, "sphere-pair", q("force")).option("connection", "isolated").with("permittivity", si.Eps0).with("radius_1", 0.02).with("radius_2", 0.01)),
		"connected":          pair(t, "connected", map[string][]float64{"distance": {0.055, 0.09}, "voltage_1": {3e3, -2e3}, "voltage_2": {2e3, 4e3}, "force": nil}).with("radius_2", 0.03),
		"joined, deflecting": torsion(pair(t, "connected", map[string][]float64{"distance": {0.055, 0.09}, "voltage_1": {3e3, -2e3}, "angle": nil}).with("radius_2", 0.03)).option("torsion", "deflecting"),
		"charge, shared": torsion(leaking(bench(t, "sphere-charge", map[string][]float64{"distance": {0.055, 0.09}, "angle": nil}).on("induction").
			with("radius_1", 0.02).with("radius_2", 0.015).with("charge_1", 8e-9).with("charge_ratio", 0.9))),
		"charge, other known": torsion(leaking(bench(t, "sphere-charge", map[string][]float64{"distance": {0.055, 0.09}, "charge_2": {-5e-9, 6e-9}, "angle": nil}).on("induction").
			with("radius_1", 0.02).with("radius_2", 0.015).with("charge_1", 8e-9))).option("torsion", "deflecting"),
		"plane": mass(bench(t, "sphere-plane", map[string][]float64{"gap": {0.005, 0.03}, "voltage": {3e3, -4e3}, "mass": nil}).option("connection", "connected").
			with("permittivity", si.Eps0).with("radius", 0.02).with("gap_offset", 1e-5).with("contact_potential", 0.4)),
		"plane, isolated": leaking(bench(t, "sphere-plane", map[string][]float64{"gap": {0.005, 0.03}, "charge": {8e-9, -9e-9}, "force": nil}).option("connection", "isolated").
			with("permittivity", si.Eps0).with("radius", 0.02).with("gap_offset", 1e-5)),
		"field of a sphere": bench(t, "sphere-field", map[string][]float64{"distance": {0.3, 0.5}, "voltage": {3e3, -9e3}, "indication": nil}).on("floor", "head").
			with("response", 1.02).with("radius", 0.1).with("corrections.floor.height", 1.5).with("corrections.floor.model", 0.1).with("corrections.head.radius", 0.05).
			with("corrections.head.model", -0.1).with("zero_offset", 20).with("distance_offset", 1e-3).with("contact_potential", 0.5),
		"unguarded disc": mass(bench(t, "attracted-disc", map[string][]float64{"gap": {0.004, 0.02}, "voltage": {3e3, -9e3}, "mass": nil}).option("electrodes", "unguarded").
			option("drive.kind", "one-side-earthed").on("edge", "wedge").with("permittivity", si.Eps0).with("disc_radius", 0.06).with("corrections.edge.model", -0.02).
			with("corrections.wedge.half_difference", 1e-10).with("gap_offset", 1e-5).with("contact_potential", 0.4)),
	}
	for name, j := range jobs {
		m := j.model()
		x := j.x(m)
		if m.TimeDependent {
			x = append(x, []float64{30, 200})
		}
		tried := 0
		for n := range j.q {
			f, jac := make([]float64, 2), [][]float64{make([]float64, 2)}
			if !m.Block(j.q, x, 0, 2, []int{n}, f, jac) {
				continue
			}
			tried++
			for i := range f {
				want := seeded(j, m, x, n, i)
				near(t, name, f[i], want.V, 1e-12)
				if math.Abs(jac[0][i]-want.Grad(0)) > 1e-11*math.Abs(want.Grad(0)) {
					t.Errorf("%s: derivative by %s: block %g, jets %g", name, j.k.Scalars[n].Key(), jac[0][i], want.Grad(0))
				}
			}
		}
		if tried < 2 {
			t.Errorf("%s: the block gives %d derivatives", name, tried)
		}
	}
}

// seeded is the prediction of row i by jets with scalar n as the seed.
func seeded(j *job, m *model.Model, x [][]float64, n, i int) jet.Jet {
	space := jet.NewSpace(1, 0)
	q, xj := make([]jet.Jet, len(j.q)), make([]jet.Jet, len(x))
	for k, v := range j.q {
		q[k] = jet.Const(v)
	}
	q[n] = space.Var(0, j.q[n])
	for p := range x {
		xj[p] = jet.Const(x[p][i])
	}
	return m.Row(q, xj)
}

// TestTorsionSecondDerivatives holds the second derivatives of an implicit
// equilibrium to differences of its first ones.
func TestTorsionSecondDerivatives(t *testing.T) {
	j := pair(t, "isolated", map[string][]float64{"distance": {0.055}, "charge_1": {11e-9}, "charge_2": {-8e-9}, "angle": nil}).option("torsion", "deflecting").
		with("torsion_constant", 2e-3).with("arm", 0.12).with("line_angle", 0.03)
	m := j.model()
	keys := []string{"permittivity", "distance_offset", "torsion_constant", "arm", "line_angle", "radius_1"}
	first := func(by string, h float64) []float64 {
		space := jet.NewSpace(len(keys), 0)
		q := make([]jet.Jet, len(j.q))
		for k, v := range j.q {
			q[k] = jet.Const(v)
		}
		for n, key := range keys {
			v := j.q[j.k.Scalar(key)]
			if key == by {
				v += h
			}
			q[j.k.Scalar(key)] = space.Var(n, v)
		}
		f := m.Row(q, []jet.Jet{jet.Const(0.055), jet.Const(11e-9), jet.Const(-8e-9)})
		g := make([]float64, len(keys))
		f.Gradient(g)
		return g
	}
	space := jet.NewSpace(len(keys), len(keys))
	q := make([]jet.Jet, len(j.q))
	for k, v := range j.q {
		q[k] = jet.Const(v)
	}
	for n, key := range keys {
		q[j.k.Scalar(key)] = space.Var(n, j.q[j.k.Scalar(key)])
	}
	f := m.Row(q, []jet.Jet{jet.Const(0.055), jet.Const(11e-9), jet.Const(-8e-9)})
	for a, key := range keys {
		at := j.q[j.k.Scalar(key)]
		if at == 0 {
			at = 0.05
		}
		h := 1e-5 * at
		lo, hi := first(key, -h), first(key, h)
		for b := range keys {
			want := (hi[b] - lo[b]) / (2 * h)
			if d := math.Abs(f.Hess(a, b) - want); d > 1e-6*math.Abs(want)+1e-9*math.Abs(f.Grad(b)/at) {
				t.Errorf("∂²/∂%s∂%s: jets %g, differences %g", key, keys[b], f.Hess(a, b), want)
			}
		}
	}
}
