package reduce

import (
	"fmt"
	"math"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/random"
	"example.org/guardring/pkg/si"
)

// world is a bench with its truth: an invented attracted disc whose readings
// can be made again and again.
type world struct {
	kind   *model.Kind
	b      *bench.Bench // stated values at the truth, readings at the settings
	truth  []float64    // scalars, Δ² for squared ones
	gain   map[string]float64
	offset map[string]float64
	zero   func(t float64) float64
}

// scalarOf returns the scalar of the bench with that name.
func (w *world) scalarOf(t testing.TB, name string) *bench.Scalar {
	i := w.kind.Scalar(name)
	if i < 0 {
		t.Fatalf("no scalar %s", name)
	}
	return &w.b.Scalars[i]
}

// attractedDisc lays out five gaps, each set three times, at four voltages of
// both polarities, with zeros between the settings.
func attractedDisc(t testing.TB) *world {
	k, err := model.Lookup("attracted-disc")
	if err != nil {
		t.Fatal(err)
	}
	w := &world{kind: k, gain: map[string]float64{}, offset: map[string]float64{}}
	b := &bench.Bench{Dir: "invented", Title: "invented", Kind: k, Format: 1, Coverage: 0.9545,
		Options: map[string]string{}, Corrections: map[string]bool{}, Inputs: []bench.Input{{File: "bench.toml"}, {File: "readings.csv"}},
		Safety: bench.Safety{Energy: 0.35, Charge: 50e-6}}
	for _, o := range k.Options {
		b.Options[o.Key] = o.Default
	}
	for _, c := range []string{"guard_gap", "wedge", "coplanarity", "balance", "zero"} {
		b.Corrections[c] = true
	}
	for _, s := range k.Scalars {
		b.Scalars = append(b.Scalars, bench.Scalar{Name: s.Key(), Dist: s.Default, Unit: s.Unit, Adjust: s.Sought})
	}
	w.b = b
	state := func(name string, d gum.Distribution) *bench.Scalar {
		s := w.scalarOf(t, name)
		s.Dist, s.Given = d, true
		return s
	}
	state("disc_radius", gum.Normal(50.012e-3, 1.5e-6))
	state("guard_gap", gum.Normal(0.4e-3, 5e-6))
	state("corrections.wedge.half_difference", gum.Rectangular(0, 6e-6))
	state("corrections.coplanarity.step", gum.Normal(0, 1e-6))
	state("corrections.coplanarity.edge", gum.Normal(0, 1))
	off := state("gap_offset", gum.Normal(12e-6, 8e-6))
	off.Adjust, off.HasPrior = true, true
	vc := state("contact_potential", gum.Exactly(0.35))
	vc.Adjust = true

	rows := &b.Rows
	volt := bench.Channel{Name: "voltage", Column: "V/kV", Unit: si.MustUnit("kV"), Noise: 0.3, RelativeNoise: 2e-5, NoiseDOF: math.Inf(1), Resolution: 0.1, ResolutionPer: "reading",
		Gain: gum.Normal(1, 1.2e-4), HasGain: true, Offset: gum.Normal(0, 0.05), HasOffset: true}
	gap := bench.Channel{Name: "gap", Column: "gap/mm", Unit: si.MustUnit("mm")}
	force := bench.Channel{Name: "force", Column: "F/mN", Unit: si.MustUnit("mN"), Noise: 2e-6, RelativeNoise: 1e-4, NoiseDOF: math.Inf(1), Resolution: 1e-6, ResolutionPer: "reading"}
	group := bench.Grouped{By: "setting", U: 2e-6, DOF: math.Inf(1)}
	setting := 0
	labels := &bench.Labels{Column: "gap_no"}
	add := func(kind bench.RowKind, v, d float64) {
		rows.Kind = append(rows.Kind, kind)
		rows.Time = append(rows.Time, 30*float64(rows.N))
		rows.Excluded = append(rows.Excluded, false)
		labels.Index = append(labels.Index, int32(setting))
		group.Group = append(group.Group, setting)
		volt.Readings = append(volt.Readings, v)
		gap.Readings = append(gap.Readings, d)
		force.Readings = append(force.Readings, 0)
		rows.N++
	}
	for range 3 {
		for _, d := range []float64{4e-3, 6e-3, 8e-3, 10e-3, 12e-3} {
			add(bench.Zero, 0, d)
			for _, v := range []float64{3e3, -3e3, 8e3, -8e3} {
				add(bench.Reading, v, d)
			}
			setting++
		}
	}
	add(bench.Zero, 0, 4e-3)
	group.Count = setting + 1
	gap.Grouped = []bench.Grouped{group}
	for i := range setting + 1 {
		labels.Words = append(labels.Words, fmt.Sprint(i))
	}
	rows.Labels = map[string]*bench.Labels{"setting": labels}
	rows.HasTime = true
	b.Channels = []bench.Channel{volt, gap, force}
	w.truth = make([]float64, len(k.Scalars))
	for i, s := range b.Scalars {
		w.truth[i] = s.Dist.Value
		if k.Scalars[i].Squared {
			w.truth[i], _ = squareMoments(s.Dist)
		}
	}
	w.truth[k.Scalar("permittivity")] = 8.8596e-12
	w.zero = func(t float64) float64 { return 20e-6 + 4e-9*t }
	return w
}

// quantise rounds a reading to the resolution of its channel.
func quantise(v, resolution float64) float64 {
	if resolution > 0 {
		return math.Round(v/resolution) * resolution
	}
	return v
}

// draw makes one laboratory's bench of the world: stated values scattered about
// the truth, and readings of it.
func (w *world) draw(t testing.TB, seed uint64) *bench.Bench {
	src := random.New(seed, "world", 0)
	b := *w.b
	b.Scalars = append([]bench.Scalar(nil), w.b.Scalars...)
	b.Channels = append([]bench.Channel(nil), w.b.Channels...)
	shift := func(d gum.Distribution) gum.Distribution {
		s := d
		d.Value += s.Sample(&src) - s.Value
		return d
	}
	truth := append([]float64(nil), w.truth...)
	for i := range b.Scalars {
		s := &b.Scalars[i]
		switch {
		case w.kind.Scalars[i].Squared:
			// Stated as ± half-width about zero; it is the truth that lies
			// anywhere within.
			d := s.Dist
			v := d.Sample(&src)
			truth[i] = v * v
		case s.Dist.U > 0 && (!s.Adjust || s.HasPrior):
			s.Dist = shift(s.Dist)
		}
	}
	setup := &model.Setup{Channels: map[string]bool{}, On: b.Corrections, Options: b.Options, Given: map[string]bool{}, Scalars: truth}
	for i := range b.Channels {
		setup.Channels[b.Channels[i].Name] = true
	}
	for i := range b.Scalars {
		setup.Given[b.Scalars[i].Name] = b.Scalars[i].Given
	}
	m, err := w.kind.Prepare(w.kind, setup)
	if err != nil {
		t.Fatal(err)
	}
	x := make([][]float64, len(m.Predictors))
	for i := range b.Channels {
		ch := &b.Channels[i]
		ch.Readings = append([]float64(nil), ch.Readings...)
		trueGain, trueOffset := gainOffset(ch) // the truth; what is stated scatters about it
		if ch.HasGain {
			ch.Gain = shift(ch.Gain)
		}
		if ch.HasOffset {
			ch.Offset = shift(ch.Offset)
		}
		group := map[[2]int]float64{}
		for p, name := range m.Predictors {
			if name != ch.Name {
				continue
			}
			x[p] = make([]float64, b.Rows.N)
			for r, set := range ch.Readings {
				reading := quantise(set+10*ch.Noise*(src.Float64()-0.5), ch.Resolution)
				ch.Readings[r] = reading
				e := math.Hypot(ch.Noise, ch.RelativeNoise*reading) * src.Normal()
				if ch.Resolution > 0 {
					e += ch.Resolution * (src.Float64() - 0.5)
				}
				v := trueGain*(reading+e) + trueOffset
				for g, gr := range ch.Grouped {
					key := [2]int{g, gr.Group[r]}
					if _, ok := group[key]; !ok {
						group[key] = gr.U * src.Normal()
					}
					v += group[key]
				}
				x[p][r] = v
			}
		}
	}
	q := constants(truth)
	for i := range b.Channels {
		ch := &b.Channels[i]
		if ch.Name != m.Response {
			continue
		}
		g, o := gainOffset(&w.b.Channels[i])
		for r := range ch.Readings {
			xj := make([]jet.Jet, len(x))
			for p := range x {
				xj[p] = jet.Const(x[p][r])
			}
			f := (m.Row(q, xj).V - o) / g
			u := ch.Noise
			if b.Rows.Kind[r] == bench.Reading {
				u = math.Hypot(u, ch.RelativeNoise*f)
			}
			ch.Readings[r] = quantise(f+w.zero(b.Rows.Time[r])+u*src.Normal(), ch.Resolution)
		}
	}
	return &b
}
