package model_test

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/si"
)

// job is one bench of a kind, put together by a test.
type job struct {
	t       *testing.T
	k       *model.Kind
	s       *model.Setup
	q       []float64
	columns map[string][]float64
}

// bench starts a job: channels by name with their true values, row by row.
func bench(t *testing.T, kind string, columns map[string][]float64) *job {
	t.Helper()
	k, err := model.Lookup(kind)
	if err != nil {
		t.Fatal(err)
	}
	j := &job{t: t, k: k, columns: columns, q: make([]float64, len(k.Scalars)),
		s: &model.Setup{Channels: map[string]bool{}, On: map[string]bool{}, Options: map[string]string{}, Given: map[string]bool{}}}
	for name := range columns {
		if k.Channel(name) < 0 {
			t.Fatalf("%s has no channel %s", kind, name)
		}
		j.s.Channels[name] = true
	}
	for i, s := range k.Scalars {
		j.q[i] = s.Default.Value
	}
	for _, o := range k.Options {
		j.s.Options[o.Key] = o.Default
	}
	return j
}

// with states scalars, in SI.
func (j *job) with(key string, v float64) *job {
	i := j.k.Scalar(key)
	if i < 0 {
		j.t.Fatalf("%s has no scalar %s", j.k.Name, key)
	}
	j.q[i] = v
	j.s.Given[key] = true
	return j
}

// on switches corrections on.
func (j *job) on(names ...string) *job {
	for _, n := range names {
		j.s.On[n] = true
	}
	return j
}

func (j *job) option(key, v string) *job {
	j.s.Options[key] = v
	return j
}

func (j *job) prepare() (*model.Model, error) {
	j.s.Scalars = j.q
	return j.k.Prepare(j.k, j.s)
}

func (j *job) model() *model.Model {
	j.t.Helper()
	m, err := j.prepare()
	if err != nil {
		j.t.Fatal(err)
	}
	return m
}

// x are the predictors in the model's order; time, if it is wanted, from "time".
func (j *job) x(m *model.Model) [][]float64 {
	var x [][]float64
	for _, name := range m.Predictors {
		x = append(x, j.columns[name])
	}
	return x
}

// predict is the prediction of row i with any more predictors (the time) behind.
func (j *job) predict(i int, more ...float64) float64 {
	j.t.Helper()
	m := j.model()
	q := make([]jet.Jet, len(j.q))
	for n, v := range j.q {
		q[n] = jet.Const(v)
	}
	var x []jet.Jet
	for _, c := range j.x(m) {
		x = append(x, jet.Const(c[i]))
	}
	for _, v := range more {
		x = append(x, jet.Const(v))
	}
	return m.Row(q, x).V
}

// check runs Prepare and, if that passes, Check with readings y.
func (j *job) check(y ...float64) error {
	m, err := j.prepare()
	if err != nil {
		return err
	}
	_, err = m.Check(j.q, j.x(m), y)
	return err
}

func near(t *testing.T, what string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Abs(want)) {
		t.Errorf("%s: got %.12g, want %.12g (to %g)", what, got, want, rel)
	}
}

func must(t *testing.T) func(float64, error) float64 {
	return func(v float64, err error) float64 {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
}

func refuses(t *testing.T, what string, err error, words ...string) {
	t.Helper()
	if err == nil {
		t.Errorf("%s: not refused", what)
		return
	}
	for _, w := range words {
		if !strings.Contains(err.Error(), w) {
			t.Errorf("%s: %q does not say %q", what, err, w)
		}
	}
}

func plates(t *testing.T) *job {
	return bench(t, "plate-charge", map[string][]float64{"voltage": {1000, -1000}, "gap": {5e-3, 5e-3}, "hold": {60, 60}, "charge": nil}).
		with("permittivity", 8.86e-12).with("disc_radius", 0.05).with("guard_gap", 5e-4)
}

// TestPlateCharge compares the prediction with the guarded disc of package field,
// and its area with the deep-slot value that refs hold (computed).
func TestPlateCharge(t *testing.T) {
	j := plates(t).on("guard_gap").with("contact_potential", 0.3).with("gap_offset", 2e-5).with("stray_capacitance", 3e-13)
	want := must(t)(field.GuardedDiscCharge(8.86e-12, 0.05, 0.0505, 3e-13, 1000, 0.3, 5e-3, 2e-5))
	near(t, "charge", j.predict(0), want, 1e-14)
	area := plates(t).on("guard_gap").predict(0) / (8.86e-12 * 1000 / 5e-3)
	mid := math.Pi * 0.05025 * 0.05025
	if got := area/mid - 1; math.Abs(got+1.31e-4) > 1e-6 {
		t.Errorf("area of the guarded disc over that to mid-gap, less one: %g, want -1.31e-4 (refs, computed)", got)
	}
	c := bench(t, "plate-charge", map[string][]float64{"gap": {5e-3}, "capacitance": nil}).on("guard_gap").
		with("permittivity", 8.86e-12).with("disc_radius", 0.05).with("guard_gap", 5e-4).with("stray_capacitance", 3e-13)
	near(t, "capacitance", c.predict(0), plates(t).on("guard_gap").with("stray_capacitance", 3e-13).predict(0)/1000, 1e-14)
}

// TestElectrometer integrates dQ/dt = i − Q/τ (fourth-order Runge–Kutta) and
// compares.
func TestElectrometer(t *testing.T) {
	q0 := plates(t).predict(0)
	const tau, current, hold, injected = 250.0, 3e-12, 60.0, 2e-12
	y, h := q0+injected, hold/4000
	rate := func(q float64) float64 { return current - q/tau }
	for range 4000 {
		a := rate(y)
		b := rate(y + h/2*a)
		c := rate(y + h/2*b)
		d := rate(y + h*c)
		y += h / 6 * (a + 2*b + 2*c + d)
	}
	got := plates(t).on("leakage", "offset_current", "injection").with("corrections.leakage.time_constant", tau).
		with("corrections.offset_current.current", current).with("corrections.injection.charge", injected).predict(0)
	near(t, "charge after the hold time", got, y, 1e-12)
	got = plates(t).on("leakage", "offset_current").with("corrections.leakage.time_constant", 1e9).
		with("corrections.offset_current.current", current).predict(0)
	near(t, "without leakage charge and current add", got, q0*(1-hold/1e9)+current*hold*(1-hold/2e9), 1e-13)
}

func TestPlateChargeRefuses(t *testing.T) {
	q := 1.4e-8
	refuses(t, "charge without voltage", bench(t, "plate-charge", map[string][]float64{"gap": {5e-3}, "charge": nil}).check(q), "channels.voltage", "capacitance")
	refuses(t, "leakage without hold time", bench(t, "plate-charge", map[string][]float64{"gap": {5e-3}, "voltage": {1e3}, "charge": nil}).on("leakage").check(q), "channels.hold")
	refuses(t, "current with a capacitance", bench(t, "plate-charge", map[string][]float64{"gap": {5e-3}, "capacitance": nil}).on("offset_current").check(1e-11), "switch it off")
	refuses(t, "contact potential of a capacitance", bench(t, "plate-charge", map[string][]float64{"gap": {5e-3}, "capacitance": nil}).with("contact_potential", 0.1).check(1e-11), "leave it out")
	refuses(t, "blank and injection", plates(t).on("blank", "injection").check(q, -q), "switch one of the two off")
	refuses(t, "gap too small for its guard", plates(t).on("guard_gap").with("guard_gap", 2e-3).check(q, -q), "5 × guard_gap")
	refuses(t, "gap below zero", plates(t).with("gap_offset", -6e-3).check(q, -q), "above zero")
	refuses(t, "tilted plates", plates(t).on("wedge").with("corrections.wedge.half_difference", 1e-6).check(q, -q), "tenth")
	j := plates(t)
	j.columns["hold"] = []float64{60, -1}
	refuses(t, "time before the step", j.check(q, -q), "below zero")
	m := plates(t).model()
	_, err := m.Start(plates(t).q, []int{0}, plates(t).x(m), []float64{-q, q})
	refuses(t, "charge of the wrong sign", err, "sign")
}

func sheet(t *testing.T) *job {
	return bench(t, "dielectric-sample", map[string][]float64{"gap": {6e-3, 6e-3}, "thickness": {4e-3, 0}, "capacitance": nil}).
		with("sample_relative_permittivity", 2.3).with("disc_radius", 0.04).with("guard_gap", 3e-4)
}

// TestDielectricSample compares with capacitors in series, with the empty gap,
// and with the table of effective widths of ASTM D150 and D257 (from memory).
func TestDielectricSample(t *testing.T) {
	e0, area := si.Eps0, math.Pi*0.04*0.04
	near(t, "series", sheet(t).predict(0), must(t)(field.SheetCapacitance(e0, area, 6e-3, 4e-3, 2.3, 1)), 1e-14)
	air := must(t)(field.AirPermittivity(293.15, 101325, 0.5))
	near(t, "series, in air", sheet(t).on("air").predict(0), must(t)(field.SheetCapacitance(e0, area, 6e-3, 4e-3, 2.3, air)), 1e-14)
	empty := must(t)(field.GuardedDiscCharge(e0*air, 0.04, 0.0403, 0, 1, 0, 6e-3, 0))
	near(t, "no sheet", sheet(t).on("air", "guard_gap").predict(1), empty, 1e-14)
	near(t, "sheet of air", sheet(t).on("air", "guard_gap").with("sample_relative_permittivity", air).predict(0), empty, 1e-14)

	data, err := os.ReadFile(filepath.Join("..", "..", "testdata", "refs", "guard_ring.json"))
	if err != nil {
		t.Fatal(err)
	}
	var refs []struct {
		ID       string
		Inputs   struct{ G_over_t []float64 }
		Expected struct{ B []float64 }
	}
	if err := json.Unmarshal(data, &refs); err != nil {
		t.Fatal(err)
	}
	seen := 0
	for _, r := range refs {
		if r.ID != "guard-B-table" {
			continue
		}
		for i, ratio := range r.Inputs.G_over_t {
			const d, g = 0.05, 1e-3
			j := bench(t, "dielectric-sample", map[string][]float64{"thickness": {g / ratio}, "capacitance": nil}).option("electrodes", "contact").on("guard_gap").
				with("sample_relative_permittivity", 2.3).with("disc_radius", d/2).with("guard_gap", g)
			w := d + r.Expected.B[i]*g
			near(t, "electrodes on the sheet", j.predict(0), e0*2.3*math.Pi/4*w*w*ratio/g, 1e-9)
			seen++
		}
	}
	if seen == 0 {
		t.Error("refs hold no table of effective widths")
	}
}

func TestDielectricSampleRefuses(t *testing.T) {
	c := []float64{sheet(t).predict(0), sheet(t).predict(1)}
	if err := sheet(t).check(c...); err != nil {
		t.Errorf("a good bench is refused: %v", err)
	}
	j := sheet(t)
	j.columns["thickness"] = []float64{6.1e-3, 0}
	refuses(t, "gap thinner than the sample", j.check(c...), "thinner than the sample")
	j = sheet(t)
	j.columns["thickness"] = []float64{0, 0}
	refuses(t, "no sheet anywhere", j.check(c[1], c[1]), "no reading has a sheet")
	j = sheet(t)
	j.columns["thickness"] = []float64{-1e-3, 0}
	refuses(t, "negative thickness", j.check(c...), "below zero")
	refuses(t, "thickness twice", sheet(t).with("sample_thickness", 4e-3).check(c...), "one of the two")
	refuses(t, "no thickness", bench(t, "dielectric-sample", map[string][]float64{"gap": {6e-3}, "capacitance": nil}).check(c[0]), "sample_thickness")
	refuses(t, "no gap", bench(t, "dielectric-sample", map[string][]float64{"thickness": {4e-3}, "capacitance": nil}).check(c[0]), "channels.gap")
	refuses(t, "gap with electrodes on the sheet", sheet(t).option("electrodes", "contact").check(c...), "film_thickness")
	refuses(t, "film between plates", sheet(t).with("film_thickness", 1e-6).check(c...), "gap less thickness")
	refuses(t, "less than vacuum", sheet(t).check(0.5*c[0], c[1]), "vacuum")
	refuses(t, "wrong sign", sheet(t).check(-c[0], -c[1]), "sign")
}

func sphere(t *testing.T, height float64) *job {
	return bench(t, "charge-in-field", map[string][]float64{"voltage": {3000, -3000}, "gap": {0.06, 0.06}, "height": {height, height}, "force": nil}).with("charge", 2e-9)
}

// TestChargeInField compares with the field's own formulas, off the mid-plane too,
// and the loss of charge with its definition.
func TestChargeInField(t *testing.T) {
	near(t, "qE", sphere(t, 0.03).predict(0), 2e-9*3000/0.06, 1e-14)
	image := must(t)(field.PlateImageForce(si.Eps0, 2e-9, 0.02, 0.06))
	near(t, "with images", sphere(t, 0.02).on("image").predict(1), -2e-9*3000/0.06+image, 1e-14)
	if !(image < 0) {
		t.Error("the nearer plate must attract the body")
	}
	lost := sphere(t, 0.03).on("leakage").with("corrections.leakage.time_constant", 600).predict(0, 60)
	near(t, "leakage", lost, 2e-9*3000/0.06*math.Exp(-0.1), 1e-14)
	back := bench(t, "field-from-charge", map[string][]float64{"voltage": {3000}, "force": nil}).with("field_per_volt", 1/0.06).with("charge", 2e-9)
	near(t, "the other way round", back.predict(0), 2e-9*3000/0.06, 1e-14)
}

// TestSphereBetweenPlates solves for a charged conducting sphere between plates by
// charges on its axis, whose images in both plates are summed, and compares its
// force with the first-order factor.
func TestSphereBetweenPlates(t *testing.T) {
	for _, ratio := range []float64{0.05, 0.1, 0.15} {
		want := sphereForce(t, ratio)
		j := sphere(t, 0.03).on("body").with("corrections.body.radius", ratio*0.06)
		got := j.predict(0) / (2e-9 * 3000 / 0.06)
		t.Logf("a/d = %g: force over qE %.6f, solved %.6f", ratio, got, want)
		if math.Abs(got-want) > 0.02*(want-1) {
			t.Errorf("a/d = %g: force over qE is %.6f, a numerical solution gives %.6f", ratio, got, want)
		}
	}
}

// sphereForce is the force over qE of a sphere of radius a at the middle of a gap
// 1, in units of 4πε = 1.
func sphereForce(t *testing.T, a float64) float64 {
	const sources, points = 9, 60
	// series sums term(0) … over images n = ±1, ±2, …, of alternating sign, with
	// repeated averages of the partial sums.
	series := func(term func(n int) float64) float64 {
		var s []float64
		sum := 0.0
		for n := 1; n <= 60; n++ {
			sum += term(n) + term(-n)
			s = append(s, sum)
		}
		for len(s) > 30 {
			for i := range s[:len(s)-1] {
				s[i] = (s[i] + s[i+1]) / 2
			}
			s = s[:len(s)-1]
		}
		return s[len(s)-1]
	}
	image := func(n int, z0 float64) (z, sign float64) {
		sign = 1 - 2*float64(n&1)
		return float64(n) + sign*z0, sign
	}
	z0 := make([]float64, sources)
	for j := range z0 {
		z0[j] = 0.7 * a * math.Cos(math.Pi*(float64(j)+0.5)/sources)
	}
	// Unknown charges and potential; E = 1 along z; one row fixes the charge to a.
	charge := a
	m, b := mat.NewDense(points+1, sources+1, nil), mat.NewVecDense(points+1, nil)
	for i := range points {
		c := math.Cos(math.Pi * (float64(i) + 0.5) / points)
		z, rho := a*c, a*math.Sqrt(1-c*c)
		for j := range sources {
			v := 1/math.Hypot(rho, z-z0[j]) + series(func(n int) float64 {
				zi, sign := image(n, z0[j])
				return sign / math.Hypot(rho, z-zi)
			})
			m.Set(i, j, v)
		}
		m.Set(i, sources, -1)
		b.SetVec(i, z)
	}
	const weight = 1e6
	for j := range sources {
		m.Set(points, j, weight)
	}
	b.SetVec(points, weight*charge)
	var q mat.VecDense
	if err := q.SolveVec(m, b); err != nil {
		t.Fatal(err)
	}
	force := 0.0
	for j := range sources {
		e := 1.0
		for k := range sources {
			e += q.AtVec(k) * series(func(n int) float64 {
				zi, sign := image(n, z0[k])
				d := z0[j] - zi
				return sign * d / math.Abs(d*d*d)
			})
		}
		force += q.AtVec(j) * e
	}
	return force / charge
}

func TestChargeInFieldRefuses(t *testing.T) {
	f := 1e-4
	refuses(t, "off the mid-plane without images", sphere(t, 0.012).check(f, -f), "corrections.image")
	if err := sphere(t, 0.03005).check(f, -f); err != nil {
		t.Errorf("a body near the mid-plane is refused: %v", err)
	}
	refuses(t, "outside the plates", sphere(t, 0.07).on("image").check(f, -f), "between the plates")
	refuses(t, "sphere too large", sphere(t, 0.03).on("body").with("corrections.body.radius", 0.01).check(f, -f), "more than 0.15 of the gap")
	m := sphere(t, 0.03).model()
	_, err := m.Start(sphere(t, 0.03).q, []int{0}, sphere(t, 0.03).x(m), []float64{0, 0})
	refuses(t, "no force", err, "no force at any voltage")
	refuses(t, "weighing without gravity", bench(t, "charge-in-field", map[string][]float64{"voltage": {3e3}, "gap": {0.06}, "mass": nil}).check(f), "environment.gravity")
	refuses(t, "field without charge", bench(t, "field-from-charge", map[string][]float64{"voltage": {3e3}, "force": nil}).check(f), "quantities.charge")
	refuses(t, "images without gap", bench(t, "field-from-charge", map[string][]float64{"voltage": {3e3}, "force": nil}).with("charge", 1e-9).on("image").check(f), "channels.gap")
}

func beam(t *testing.T, response string) *job {
	return bench(t, "beam-deflection", map[string][]float64{"voltage": {150, -150}, response: nil}).
		with("field_per_volt", 50).with("plate_length", 0.06).with("accelerating_voltage", 2000)
}

// TestBeamDeflection compares with the parabola y = EL²/4U of a slow beam, common
// practice, no source, and with the equations of motion of a fast one integrated
// numerically.
func TestBeamDeflection(t *testing.T) {
	e := 150.0 * 50
	near(t, "parabola", beam(t, "displacement").predict(0), e*0.06*0.06/(4*2000), 1e-14)
	near(t, "slope", math.Tan(beam(t, "angle").predict(0)), e*0.06/(2*2000), 1e-14)
	near(t, "slow, relativistic", beam(t, "displacement").on("relativity").option("particle", "proton").predict(0), e*0.06*0.06/(4*2000), 1e-5)

	// dp/dt = eE with p = γmv, in units of m = c = e = 1: energies in rest
	// energies, 300 keV electrons in 20 MV/m.
	const rest = 510998.95069
	u, field, length := 3e5/rest, 2e7/rest, 0.1
	px := math.Sqrt(u * (u + 2))
	py, x, y := 0.0, 0.0, 0.0
	const h = 1e-5
	for x < length {
		step := h
		gamma := func(p float64) float64 { return math.Sqrt(1 + px*px + p*p) }
		if left := (length - x) * gamma(py) / px; left < step {
			step = left
			if step < 1e-14 {
				break
			}
		}
		mid := py + field*step/2
		end := py + field*step
		// Simpson's rule over the step, the momentum being linear in time.
		x += step / 6 * px * (1/gamma(py) + 4/gamma(mid) + 1/gamma(end))
		y += step / 6 * (py/gamma(py) + 4*mid/gamma(mid) + end/gamma(end))
		py = end
	}
	fast := beam(t, "displacement").on("relativity").with("field_per_volt", 2e7/150).with("accelerating_voltage", 3e5).with("plate_length", 0.1)
	near(t, "fast beam", fast.predict(0), y, 1e-7)
	angle := bench(t, "beam-deflection", map[string][]float64{"voltage": {150}, "angle": nil}).on("relativity").with("field_per_volt", 2e7/150).with("accelerating_voltage", 3e5).with("plate_length", 0.1)
	near(t, "slope of the fast beam", math.Tan(angle.predict(0)), py/px, 1e-7)
}

// TestBeamExit integrates slow electrons through a field whose ends are smooth,
// E(x) on the axis with the potential continued off it to the order needed to keep
// energy, and compares slope and displacement behind the plates with those of a
// field that ends at once and has the same integral.
func TestBeamExit(t *testing.T) {
	const u, e0, half, width = 2000.0, 7500.0, 0.03, 0.004
	// Units in which the kinetic energy is v²/2 = U, the force the field.
	g := func(x float64) (e, e1, e2 float64) {
		for _, s := range []float64{1, -1} {
			th := math.Tanh((s*x + half) / width)
			sech := 1 - th*th
			e += e0 / 2 * th
			e1 += s * e0 / 2 * sech / width
			e2 -= e0 * th * sech / (width * width)
		}
		return e, e1, e2
	}
	// φ = −[E y − E″y³/6], forces −∇φ.
	rate := func(s [4]float64) [4]float64 {
		e, e1, e2 := g(s[0])
		const step = 1e-5
		_, _, up := g(s[0] + step)
		_, _, down := g(s[0] - step)
		e3 := (up - down) / (2 * step)
		y := s[1]
		return [4]float64{s[2], s[3], e1*y - e3*y*y*y/6, e - e2*y*y/2}
	}
	s := [4]float64{-0.12, 0, math.Sqrt(2 * u), 0}
	h := 2e-5 / s[2]
	add := func(a, b [4]float64, f float64) [4]float64 {
		for i := range a {
			a[i] += f * b[i]
		}
		return a
	}
	for s[0] < 0.12 {
		a := rate(s)
		b := rate(add(s, a, h/2))
		c := rate(add(s, b, h/2))
		d := rate(add(s, c, h))
		for i := range s {
			s[i] += h / 6 * (a[i] + 2*b[i] + 2*c[i] + d[i])
		}
	}
	slope := s[3] / s[2]
	// ∫E dx = 2·half·E₀ for these ends: the effective length is that of the plates.
	j := func(response string) *job {
		return bench(t, "beam-deflection", map[string][]float64{"voltage": {150}, response: nil}).
			with("field_per_volt", 50).with("plate_length", 2*half).with("accelerating_voltage", u)
	}
	near(t, "slope behind the plates", math.Tan(j("angle").predict(0)), slope, 3e-4)
	drift := s[0] - half
	got := j("displacement").with("drift_length", drift).predict(0)
	near(t, "displacement behind the plates", got, s[1], 1e-3)
	// The same field told as shorter plates with an excess of 10 mm.
	told := bench(t, "beam-deflection", map[string][]float64{"voltage": {150}, "displacement": nil}).on("fringe").
		with("field_per_volt", 50).with("plate_length", 2*half-0.01).with("accelerating_voltage", u).with("corrections.fringe.length", 0.01).with("drift_length", drift+0.005)
	near(t, "effective length", told.predict(0), got, 1e-14)
}

func TestBeamDeflectionRefuses(t *testing.T) {
	y := beam(t, "displacement").predict(0)
	if err := beam(t, "displacement").on("relativity").check(y, -y); err != nil {
		t.Errorf("a good bench is refused: %v", err)
	}
	refuses(t, "one side earthed", beam(t, "displacement").option("drive.kind", "one-side-earthed").check(y, -y), "balanced")
	refuses(t, "deflection the wrong way", beam(t, "displacement").on("relativity").check(-y, y), "gain of -1")
	refuses(t, "relativity left out", beam(t, "displacement").check(y, -y), "corrections.relativity")
	refuses(t, "too steep", beam(t, "displacement").on("relativity").check(5*y, -5*y), "slope")
	refuses(t, "into the plate", beam(t, "displacement").on("relativity").with("plate_gap", 0.008).check(y, -y), "too near")
	refuses(t, "ion without rest energy", beam(t, "displacement").option("particle", "ion").check(y, -y), "rest_energy")
	refuses(t, "no energy", bench(t, "beam-deflection", map[string][]float64{"voltage": {150}, "angle": nil}).with("plate_length", 0.06).check(0.1), "accelerating_voltage")
	refuses(t, "drift of an angle", beam(t, "angle").with("drift_length", 0.1).check(0.1, -0.1), "leave it out")
}

// TestBlocks compares the fast predictions with the jets, value and derivatives,
// for benches with every correction on.
func TestBlocks(t *testing.T) {
	charged := []string{"guard_gap", "wedge", "coplanarity", "air", "leakage", "offset_current", "injection"}
	electrometer := func(j *job) *job {
		return j.with("corrections.leakage.time_constant", 250).with("corrections.offset_current.current", 3e-12).with("corrections.injection.charge", 2e-12).
			with("contact_potential", 0.4).with("stray_capacitance", 2e-13).with("electric_constant", si.Eps0).with("corrections.guard_gap.model", 1e-4)
	}
	tilted := func(j *job) *job {
		return j.with("gap_offset", 1e-5).with("corrections.wedge.half_difference", 1e-10).with("corrections.coplanarity.step", 2e-6).with("corrections.coplanarity.edge", 0.5)
	}
	contact := bench(t, "dielectric-sample", map[string][]float64{"voltage": {500, -700}, "thickness": {2e-3, 1e-3}, "hold": {5, 30}, "charge": nil}).
		option("electrodes", "contact").with("sample_relative_permittivity", 3.1).with("disc_radius", 0.025).with("guard_gap", 1e-3).with("film_thickness", 3e-6)
	laid := sheet(t)
	laid.columns = map[string][]float64{"voltage": {500, -700}, "gap": {6e-3, 3e-3}, "thickness": {4e-3, 1e-3}, "hold": {5, 30}, "charge": nil}
	laid.s.Channels = map[string]bool{"voltage": true, "gap": true, "thickness": true, "hold": true, "charge": true}
	jobs := map[string]*job{
		"plate-charge":      tilted(electrometer(plates(t))).on(charged...),
		"sheet, spaced":     tilted(electrometer(laid)).on(charged...),
		"sheet, contact":    electrometer(contact).on("guard_gap", "air", "leakage", "offset_current", "injection"),
		"charge-in-field":   sphere(t, 0.028).on("image", "body", "leakage").with("corrections.image.height_offset", 5e-4).with("corrections.body.radius", 3e-3).with("corrections.leakage.time_constant", 900).with("contact_potential", 0.7).with("gap_offset", 1e-4),
		"charge, mid-plane": bench(t, "charge-in-field", map[string][]float64{"voltage": {3e3, -2e3}, "gap": {0.06, 0.08}, "mass": nil}).on("image", "balance").with("charge", 2e-9).with("corrections.image.height_offset", 5e-4).with("environment.latitude", 0.9).with("environment.height", 200),
		"field-from-charge": bench(t, "field-from-charge", map[string][]float64{"voltage": {3e3, -2e3}, "gap": {0.06, 0.08}, "charge": {2e-9, -1e-9}, "force": nil}).on("image", "body").with("field_per_volt", 14).with("corrections.image.height_offset", 5e-4).with("corrections.body.radius", 3e-3),
		"beam, screen":      beam(t, "displacement").on("relativity", "fringe").with("corrections.fringe.length", 0.01).with("drift_length", 0.2).with("contact_potential", 0.3),
		"beam, angle":       beam(t, "angle").on("relativity").with("contact_potential", 0.3),
		"beam, slow":        beam(t, "displacement").with("contact_potential", 0.3),
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
				space := jet.NewSpace(1, 0)
				q, xj := make([]jet.Jet, len(j.q)), make([]jet.Jet, len(x))
				for k, v := range j.q {
					q[k] = jet.Const(v)
				}
				q[n] = space.Var(0, j.q[n])
				for p := range x {
					xj[p] = jet.Const(x[p][i])
				}
				want := m.Row(q, xj)
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
