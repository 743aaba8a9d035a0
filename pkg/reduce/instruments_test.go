package reduce_test

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// small is a kind of bench for sums that can be done by hand: a response without
// predictors.
func small(unit string, row, value func(q []jet.Jet) jet.Jet, scalars ...model.Scalar) *model.Kind {
	k := &model.Kind{Name: "sum", Title: "Sum", Doc: "Invented for tests.",
		Channels: []model.Channel{{Name: "reading", Doc: "reading", Unit: si.MustUnit(unit), Role: model.Response}},
		Scalars:  scalars}
	k.Prepare = func(k *model.Kind, s *model.Setup) (*model.Model, error) {
		return &model.Model{Response: "reading",
			Row: func(q, x []jet.Jet) jet.Jet { return row(q) },
			Start: func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
				return make([]float64, len(free)), nil
			},
			Check:      func(q []float64, x [][]float64, y []float64) ([]error, error) { return nil, nil },
			Hazard:     func(q []float64, x [][]float64) model.Hazard { return model.Hazard{} },
			Measurands: []model.Measurand{{Name: "result", Unit: si.MustUnit(unit), Value: value}}}, nil
	}
	return k
}

// opened writes a bench and opens it.
func opened(t *testing.T, k *model.Kind, toml, csv string) *bench.Bench {
	t.Helper()
	dir := t.TempDir()
	for name, text := range map[string]string{"bench.toml": toml, "readings.csv": csv} {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	b, err := bench.OpenWith(k, dir)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func law(t *testing.T, b *bench.Bench) *reduce.Measurand {
	t.Helper()
	r, err := reduce.Run(context.Background(), b, reduce.Settings{LawOnly: true})
	if err != nil {
		t.Fatal(err)
	}
	if len(r.Record.Measurands) == 0 {
		t.Fatalf("nothing is stated: %v", r.Record.Warnings)
	}
	return &r.Record.Measurands[0]
}

func line(t *testing.T, m *reduce.Measurand, input string) *reduce.BudgetLine {
	t.Helper()
	for i := range m.Budget {
		if m.Budget[i].Input == input {
			return &m.Budget[i]
		}
	}
	t.Fatalf("the budget of %s has no %s: %+v", m.Name, input, m.Budget)
	return nil
}

// TestWeightOfEA402 is example S2 of EA-4/02 (a weight of 10 kg against a standard)
// as a bench: the standard's drift since its calibration, within ±15 mg and
// rectangular, follows from its table, the other terms from the quantities.
func TestWeightOfEA402(t *testing.T) {
	data, err := os.ReadFile(filepath.Join("..", "..", "testdata", "refs", "ea402.json"))
	if err != nil {
		t.Fatal(err)
	}
	var all []struct {
		ID        string
		Inputs    json.RawMessage
		Expected  json.RawMessage
		Tolerance json.RawMessage
	}
	if err := json.Unmarshal(data, &all); err != nil {
		t.Fatal(err)
	}
	var in struct {
		Standard float64 `json:"mS_g"`
		U        float64 `json:"u_mS_mg"`
		Drift    float64 `json:"dmD_rect_mg"`
		Dm       float64 `json:"dm_g"`
		UDm      float64 `json:"u_dm_mg"`
		Place    float64 `json:"dmC_rect_mg"`
		Buoyancy float64 `json:"dB_rect_mg"`
	}
	var want, within struct {
		M float64 `json:"m_g"`
		u float64
		U float64 `json:"U_mg"`
	}
	for _, c := range all {
		if c.ID != "ea-S2" {
			continue
		}
		for raw, to := range map[*json.RawMessage]any{&c.Inputs: &in, &c.Expected: &want, &c.Tolerance: &within} {
			if err := json.Unmarshal(*raw, to); err != nil {
				t.Fatal(err)
			}
		}
		// encoding/json does not tell u_mg from U_mg by case alone.
		for raw, to := range map[*json.RawMessage]*float64{&c.Expected: &want.u, &c.Tolerance: &within.u} {
			var m map[string]float64
			if err := json.Unmarshal(*raw, &m); err != nil {
				t.Fatal(err)
			}
			*to = m["u_mg"]
		}
	}
	if in.Drift == 0 || want.u == 0 {
		t.Fatal("example S2 is not among the references")
	}
	gram := si.MustUnit("g")
	quantity := func(name string) model.Scalar {
		return model.Scalar{Table: "quantities", Name: name, Doc: name, Unit: gram, Required: name != "mass", Sought: name == "mass"}
	}
	k := small("g", func(q []jet.Jet) jet.Jet { return q[0].Sub(q[1]).Sub(q[2]).Sub(q[3]) }, func(q []jet.Jet) jet.Jet { return q[0] },
		quantity("mass"), quantity("standard"), quantity("place"), quantity("buoyancy"))
	// Three differences of mean 20 mg, with the pooled standard deviation of one.
	toml := fmt.Sprintf(`format = 1
title = "Weight of 10 kg (EA-4/02 S2)"
model = "sum"
[[readings]]
file = "readings.csv"
[channels.reading]
column = "difference/g"
unit = "g"
noise = "%.9g mg"
[quantities.standard]
value = "%.9g g"
u = "%.9g mg"
instrument = "standard"
[quantities.place]
value = "0 g"
half_width = "%g mg"
shape = "rectangular"
[quantities.buoyancy]
value = "0 g"
half_width = "%g mg"
shape = "rectangular"
[instruments.standard]
calibrated = 2022-03-01
drift_per_year = "%.12g mg"
[work]
performed = 2026-03-01
`, in.UDm*math.Sqrt(3), in.Standard, in.U, in.Place, in.Buoyancy, in.Drift/4) // 1461 days are four years of 365.25
	m := law(t, opened(t, k, toml, "difference/g\n0.010\n0.030\n0.020\n"))
	drift := line(t, m, "instruments.standard.drift")
	if u := float64(drift.U) * 1e6; drift.Shape != gum.ShapeRectangular || math.Abs(u-in.Drift/math.Sqrt(3)) > 1e-9 {
		t.Errorf("drift: u = %g mg, %s; want %g mg, rectangular", u, drift.Shape, in.Drift/math.Sqrt(3))
	}
	if got := float64(m.Value) * 1e3; math.Abs(got-want.M) > 5e-4 {
		t.Errorf("mass %.6f g, want %.3f g", got, want.M)
	}
	if u, U := float64(m.U)*1e6, float64(m.K*m.U)*1e6; math.Abs(u-want.u) > within.u || math.Abs(U-want.U) > within.U {
		t.Errorf("u = %.2f mg, U = %.1f mg; want %.1f mg and %.0f mg", u, U, want.u, want.U)
	}
}

// TestOneInstrumentMovesItsValuesTogether: of two lengths from one caliper the ratio
// is free of a drift that is a part of the value, and the sum of one that is an
// amount has twice it (by hand: 100 mm and 50 mm, ±10 µm).
func TestOneInstrumentMovesItsValuesTogether(t *testing.T) {
	mm := si.MustUnit("mm")
	length := func(name string) model.Scalar {
		return model.Scalar{Table: "quantities", Name: name, Doc: name, Unit: mm, Required: true, Positive: true}
	}
	sought := model.Scalar{Table: "quantities", Name: "zero", Doc: "zero", Unit: mm, Sought: true}
	const toml = `format = 1
title = "Two lengths"
model = "sum"
[[readings]]
file = "readings.csv"
[channels.reading]
column = "y/mm"
unit = "mm"
noise = "1 um"
[quantities]
a = { value = "100 mm", instrument = "caliper" }
b = { value = "50 mm", instrument = "caliper" }
[instruments.caliper]
calibrated = 2022-03-01
drift_per_year = "LIMIT"
[work]
performed = 2026-03-01
`
	row := func(q []jet.Jet) jet.Jet { return q[0] }
	for _, c := range []struct {
		limit string
		value func(q []jet.Jet) jet.Jet
		want  float64 // contribution, SI
	}{
		{"25 ppm", func(q []jet.Jet) jet.Jet { return q[0].Add(q[1].Div(q[2])) }, 0},
		{"25 ppm", func(q []jet.Jet) jet.Jet { return q[0].Add(q[1].Add(q[2])) }, 100e-6 * 0.150 / math.Sqrt(3)},
		{"25 ppm", func(q []jet.Jet) jet.Jet { return q[0].Add(q[1].Mul(q[2])) }, 2 * 100e-6 * 0.005 / math.Sqrt(3)},
		{"2.5 um", func(q []jet.Jet) jet.Jet { return q[0].Add(q[1].Add(q[2])) }, 20e-6 / math.Sqrt(3)},
		{"2.5 um", func(q []jet.Jet) jet.Jet { return q[0].Add(q[1].Sub(q[2])) }, 0},
	} {
		b := opened(t, small("mm", row, c.value, sought, length("a"), length("b")), strings.Replace(toml, "LIMIT", c.limit, 1), "y/mm\n0.001\n-0.001\n0\n")
		m := law(t, b)
		got := 0.0
		for _, l := range m.Budget {
			if l.Input == "instruments.caliper.drift" {
				got = float64(l.Contribution)
			}
		}
		if math.Abs(got-c.want) > 1e-9*math.Abs(c.want)+1e-15 {
			t.Errorf("%s: contribution %.9g, want %.9g", c.limit, got, c.want)
		}
	}
}

// TestCorrelatedDrifts: two instruments of one make that drift alike (r = 1) are as
// one: by hand, the ratio is free of it and the product has twice it.
func TestCorrelatedDrifts(t *testing.T) {
	mm := si.MustUnit("mm")
	length := func(name string) model.Scalar {
		return model.Scalar{Table: "quantities", Name: name, Doc: name, Unit: mm, Required: true, Positive: true}
	}
	for r, want := range map[float64]float64{-1: 0, 0: math.Sqrt2, 1: 2} {
		toml := fmt.Sprintf(`format = 1
title = "Two calipers"
model = "sum"
[[readings]]
file = "readings.csv"
[channels.reading]
column = "y/mm"
unit = "mm"
noise = "1 pm"
[quantities]
a = { value = "100 mm", instrument = "first" }
b = { value = "50 mm", instrument = "second" }
[instruments.first]
calibrated = 2022-03-01
drift_per_year = "25 ppm"
[instruments.second]
calibrated = 2022-03-01
drift_per_year = "25 ppm"
[[correlations]]
between = ["instruments.first.drift", "instruments.second.drift"]
r = %g
[work]
performed = 2026-03-01
`, r)
		k := small("mm", func(q []jet.Jet) jet.Jet { return q[0] }, func(q []jet.Jet) jet.Jet { return q[0].Add(q[1].Mul(q[2])) },
			model.Scalar{Table: "quantities", Name: "zero", Doc: "zero", Unit: mm, Sought: true}, length("a"), length("b"))
		m := law(t, opened(t, k, toml, "y/mm\n0\n0\n0\n"))
		want *= 100e-6 * 0.005 / math.Sqrt(3)
		if got := float64(m.U); math.Abs(got-want) > 1e-12+1e-9*want {
			t.Errorf("r = %g: u = %g, want %g", r, got, want)
		}
	}
}

// TestAllowanceIsAGainOrOffset: a drift of an instrument that gives one channel, or
// one quantity, has the same u and the same interval as the half-width written out
// as a gain, an offset or a value. The force of the dataset has its zero taken off.
func TestAllowanceIsAGainOrOffset(t *testing.T) {
	for _, c := range []struct {
		what, instrument string
		relative         bool
		half             float64
		channel          int
	}{
		{"response, gain", "sensor", true, 3e-3, 2},
		{"response, offset", "sensor", false, 3e-7, 2}, // both polarities were read: most of it cancels
		{"predictor, gain", "electrometer", true, 3e-3, 1},
		{"predictor, offset", "electrometer", false, 1e-11, 1},
	} {
		bare := func() *bench.Bench {
			b := openWorld(t, "field-from-charge").b
			for i := range b.Channels {
				b.Channels[i].Gain.U, b.Channels[i].Gain.Shape = 0, ""
			}
			for i := range b.Instruments {
				b.Instruments[i].Allowances = nil
			}
			return b
		}
		explicit := bare()
		ch := &explicit.Channels[c.channel]
		if c.relative {
			ch.Gain = gum.Rectangular(1, c.half)
		} else {
			ch.Offset, ch.HasOffset = gum.Rectangular(0, c.half), true
		}
		drifted := bare()
		for i := range drifted.Instruments {
			if in := &drifted.Instruments[i]; in.Name == c.instrument {
				in.Allowances = []bench.Allowance{{Name: "instruments." + in.Name + ".drift", Relative: c.relative, Dist: gum.Rectangular(0, c.half), Unit: si.One}}
			}
		}
		want, got := law(t, explicit), law(t, drifted)
		if bareU := law(t, bare()).U; !(want.U > bareU*1.001) {
			t.Fatalf("%s: the half-width changes u from %g to %g only", c.what, bareU, want.U)
		}
		for n, pair := range [][2]reduce.Number{{got.Value, want.Value}, {got.U, want.U}, {got.Interval[0], want.Interval[0]}, {got.Interval[1], want.Interval[1]}} {
			if d := math.Abs(float64(pair[0] - pair[1])); d > 1e-12*math.Abs(float64(pair[1])) {
				t.Errorf("%s, number %d: %.15g as a drift, %.15g written out", c.what, n, pair[0], pair[1])
			}
		}
		// Monte Carlo draws from the same distribution, by other numbers.
		s := reduce.Settings{Trials: 20000}
		a, err := reduce.Run(context.Background(), explicit, s)
		if err != nil {
			t.Fatal(err)
		}
		b, err := reduce.Run(context.Background(), drifted, s)
		if err != nil {
			t.Fatal(err)
		}
		ma, mb := a.Record.Measurands[0].MonteCarlo, b.Record.Measurands[0].MonteCarlo
		if d := math.Abs(float64(mb.U/ma.U) - 1); d > 0.02 {
			t.Errorf("%s: Monte Carlo gives u = %g as a drift, %g written out", c.what, mb.U, ma.U)
		}
		for n := range ma.Interval {
			if d := math.Abs(float64(mb.Interval[n] - ma.Interval[n])); d > 0.1*float64(ma.U) {
				t.Errorf("%s: Monte Carlo interval %v as a drift, %v written out", c.what, mb.Interval, ma.Interval)
			}
		}
	}
}

// TestAllowanceSensitivity: the sensitivity to what one instrument may have moved by
// is the sum of those to everything that it gives (channels, a prior value, a squared
// half-difference, quantities), each by how far that moves (chain rule). And moving
// all of it by hand and reducing again gives the same but for the weights, which a new
// fit takes anew.
func TestAllowanceSensitivity(t *testing.T) {
	for _, relative := range []bool{true, false} {
		make := func() (*bench.Bench, []*bench.Scalar) {
			b := openWorld(t, "dielectric-sample").b
			var given []*bench.Scalar
			for i := range b.Scalars {
				s := &b.Scalars[i]
				switch s.Name {
				case "corrections.wedge.half_difference":
					if !relative {
						continue
					}
				case "disc_radius", "guard_gap":
				case "gap_offset":
					s.Dist.Value = 5e-6 // so that a part of it is something
				default:
					continue
				}
				s.Instrument = "caliper"
				given = append(given, s)
			}
			b.Channels[0].Instrument = "caliper" // gap; the gain of thickness names it already
			return b, given
		}
		b, given := make()
		if len(given) < 3 || b.Channels[0].Name != "gap" || !b.Channels[1].From("caliper") {
			t.Fatalf("the dataset is not what the test takes it for: %d quantities", len(given))
		}
		u := 2e-4
		if !relative {
			u = 3e-6
		}
		in := &b.Instruments[1]
		in.Allowances = []bench.Allowance{{Name: "instruments.caliper.drift", Relative: relative, Dist: gum.Rectangular(0, u), Unit: si.One}}
		for i := range 2 { // inputs of their own, too small to matter
			ch := &b.Channels[i]
			ch.HasGain, ch.Gain = true, gum.Normal(1, 1e-6)
			ch.HasOffset, ch.Offset = true, gum.Normal(0, 1e-9)
		}
		m := law(t, b)
		got := float64(line(t, m, "instruments.caliper.drift").Sensitivity)
		var sum float64
		for _, s := range given {
			switch {
			case s.Name == "corrections.wedge.half_difference":
				l := line(t, m, s.Name+" (squared)")
				sum += float64(l.Sensitivity) * 2 * float64(l.Value)
			case relative:
				sum += float64(line(t, m, s.Name).Sensitivity) * s.Dist.Value
			default:
				sum += float64(line(t, m, s.Name).Sensitivity)
			}
		}
		for _, ch := range b.Channels[:2] {
			what := ".offset"
			if relative {
				what = ".gain"
			}
			sum += float64(line(t, m, "channels."+ch.Name+what).Sensitivity)
		}
		if math.Abs(got/sum-1) > 1e-9 {
			t.Errorf("relative %v: sensitivity %.12g, the sum of those to what moves is %.12g", relative, got, sum)
		}
		at := func(e float64) float64 {
			b, given := make()
			for _, s := range given {
				if relative {
					s.Dist.Value *= 1 + e
					s.Dist.U *= 1 + e
					if s.Adjust { // the weight of a prior value stays
						s.Dist.U /= 1 + e
					}
				} else {
					s.Dist.Value += e
				}
			}
			for i := range 2 {
				ch := &b.Channels[i]
				if !ch.HasGain {
					ch.HasGain, ch.Gain = true, gum.Exactly(1)
				}
				if relative {
					ch.Gain.Value *= 1 + e
				} else {
					ch.HasOffset, ch.Offset = true, gum.Exactly(e)
				}
			}
			return float64(law(t, b).Value)
		}
		h := 2 * u
		want := (8*(at(h)-at(-h)) - (at(2*h) - at(-2*h))) / (12 * h)
		if math.Abs(got/want-1) > 0.005 {
			t.Errorf("relative %v: sensitivity %.9g, by reducing again %.9g", relative, got, want)
		}
		// The same through Monte Carlo, with a limit that tells in u.
		h = 2e-2
		if !relative {
			h = 2e-4
		}
		in.Allowances[0].Dist = gum.Rectangular(0, h)
		r, err := reduce.Run(context.Background(), b, reduce.Settings{Trials: 20000})
		if err != nil {
			t.Fatal(err)
		}
		m = &r.Record.Measurands[0]
		if share := float64(line(t, m, "instruments.caliper.drift").Share); share < 0.1 {
			t.Errorf("relative %v: the share is %g only", relative, share)
		}
		if d := math.Abs(float64(m.MonteCarlo.U/m.U) - 1); d > 0.02 {
			t.Errorf("relative %v: u = %g by the law, %g by Monte Carlo", relative, m.U, m.MonteCarlo.U)
		}
	}
}

// TestTrueDriftIsAGain: readings simulated with a true drift are those of a gain as
// much larger, and a prediction halves a drift as any other input.
func TestTrueDriftIsAGain(t *testing.T) {
	w := openWorld(t, "field-from-charge")
	with := func(more map[string]float64) []float64 {
		truth := *w.truth
		truth.Values = map[string]float64{}
		for k, v := range w.truth.Values {
			if !strings.HasPrefix(k, "instruments.") {
				truth.Values[k] = v
			}
		}
		for k, v := range more {
			truth.Values[k] = v
		}
		y, err := plan.Simulate(w.b, &truth, 4)
		if err != nil {
			t.Fatal(err)
		}
		return y
	}
	gain := w.truth.Values["channels.force.gain"]
	drifted := with(map[string]float64{"instruments.sensor.drift": 0.01, "instruments.sensor.temperature": -0.004})
	want := with(map[string]float64{"channels.force.gain": gain * 1.01 * 0.996})
	plain := with(nil)
	same := true
	for i := range want {
		if math.Abs(drifted[i]-want[i]) > 1.001*w.b.Channels[2].Resolution {
			t.Fatalf("record %d: %g with the drift, %g with the gain", i+1, drifted[i], want[i])
		}
		same = same && drifted[i] == plain[i]
	}
	if same {
		t.Error("the drift changes no reading")
	}
	p, err := plan.Predict(context.Background(), w.b, w.truth)
	if err != nil {
		t.Fatal(err)
	}
	l := line(t, &p.Measurand, "instruments.electrometer.drift")
	for _, s := range p.Scenarios {
		if s.Change != l.Input {
			continue
		}
		if want := math.Sqrt(1 - 0.75*float64(l.Share)); math.Abs(float64(s.Ratio)-want) > 1e-9 {
			t.Errorf("known twice as well: ratio %g, want %g from its share", s.Ratio, want)
		}
		return
	}
	t.Errorf("no scenario halves the drift: %+v", p.Scenarios)
}
