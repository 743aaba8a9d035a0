package plan

import (
	"context"
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/reduce"
)

// Prediction is what a design would give, before anything is measured.
type Prediction struct {
	Title     string           `json:"title"`
	Model     string           `json:"model"`
	Measurand reduce.Measurand `json:"measurand"` // the first of the bench, as the design stands
	Hazard    reduce.Hazard    `json:"hazard"`
	Scenarios []Scenario       `json:"scenarios"`
	Warnings  []string         `json:"warnings"`
}

// Scenario is a change of the design and what it would do.
type Scenario struct {
	Name   string        `json:"name"`
	Change string        `json:"change"` // what is changed
	Factor float64       `json:"factor"` // by what factor
	U      reduce.Number `json:"u"`      // standard uncertainty of the measurand, SI
	Ratio  reduce.Number `json:"ratio"`  // to the design as it stands
	Energy reduce.Number `json:"energy"` // J, stored at the highest setting
	Margin reduce.Number `json:"margin"` // breakdown field over field; null when unknown
	// Refused says why the model or the laboratory's limits do not admit it.
	Refused string `json:"refused,omitempty"`
}

// Predict states what uncertainty the design of a bench gives: its settings, with
// responses as the truth would give them without any noise, are reduced by the
// law. Then it changes one thing at a time: more readings of every setting, more
// settings, each predictor scaled, each of the main inputs known twice as well.
//
// More readings at a setting average noise and resolution; more settings also
// average what a setting shares; neither touches what all readings share.
func Predict(ctx context.Context, b *bench.Bench, t *Truth) (*Prediction, error) {
	base, err := predict(ctx, b, t)
	if err != nil {
		return nil, err
	}
	if len(base.Measurands) == 0 {
		return nil, fmt.Errorf("%s: the design does not determine the measurand: %v", b.Dir, base.Warnings)
	}
	p := &Prediction{Title: base.Title, Model: base.Model, Measurand: base.Measurands[0], Hazard: base.Hazard, Warnings: base.Warnings}
	u0 := float64(base.Measurands[0].U)
	scenarios := scenarios(b, &p.Measurand)
	for i, s := range scenarios {
		cell.Report(ctx, "plan", int64(i), int64(len(scenarios)))
		out := Scenario{Name: s.name, Change: s.change, Factor: s.factor, U: reduce.Number(math.NaN()), Ratio: reduce.Number(math.NaN()), Energy: reduce.Number(math.NaN()), Margin: reduce.Number(math.NaN())}
		r, err := predict(ctx, s.b, t)
		switch {
		case ctx.Err() != nil:
			return nil, ctx.Err()
		case err != nil:
			// it is the change that is refused, not the files
			truth := filepath.Join(b.Dir, TruthFile)
			out.Refused = strings.NewReplacer("with the truth of "+truth+": ", "", truth+": ", "", b.Dir+"/bench.toml: ", "").Replace(err.Error())
		case len(r.Measurands) == 0:
			out.Refused = "the measurand is no longer determined"
		default:
			out.U = r.Measurands[0].U
			out.Ratio = reduce.Number(float64(out.U) / u0)
			out.Energy = r.Hazard.Energy
			if r.Hazard.Field > 0 && r.Hazard.Breakdown > 0 {
				out.Margin = r.Hazard.Breakdown / r.Hazard.Field
			}
			switch {
			case out.Margin < 1:
				out.Refused = "the field is above the breakdown of air"
			case r.Hazard.EnergyLimit > 0 && r.Hazard.Energy > r.Hazard.EnergyLimit:
				out.Refused = "the stored energy is above the laboratory's limit"
			case r.Hazard.ChargeLimit > 0 && r.Hazard.Charge > r.Hazard.ChargeLimit:
				out.Refused = "the stored charge is above the laboratory's limit"
			}
		}
		p.Scenarios = append(p.Scenarios, out)
	}
	cell.Report(ctx, "plan", int64(len(scenarios)), int64(len(scenarios)))
	return p, nil
}

// predict reduces a bench whose responses are what the truth gives without noise.
func predict(ctx context.Context, b *bench.Bench, t *Truth) (*reduce.Record, error) {
	quiet := *b
	quiet.Channels = append([]bench.Channel(nil), b.Channels...)
	still := quiet
	still.Channels = append([]bench.Channel(nil), b.Channels...)
	for i := range still.Channels {
		ch := &still.Channels[i]
		ch.Noise, ch.RelativeNoise, ch.Resolution, ch.Grouped = 0, 0, 0, nil
	}
	clean := *t
	clean.Faults, clean.Defects = nil, nil
	y, err := Simulate(&still, &clean, 0)
	if err != nil {
		return nil, err
	}
	quiet.Channels[responseChannel(b)].Readings = y
	r, err := reduce.Run(ctx, &quiet, reduce.Settings{LawOnly: true, Command: "plan"})
	if err != nil {
		return nil, err
	}
	// Residuals without noise say nothing; what is said of the bench and its settings
	// stands.
	c, err := reduce.Check(&quiet)
	if err != nil {
		return nil, err
	}
	r.Record.Warnings = nil
	for _, w := range c.Warnings {
		r.Record.Warnings = append(r.Record.Warnings, w.Error())
	}
	return &r.Record, nil
}

// variant is a named change of a bench.
type variant struct {
	name   string
	change string
	factor float64
	b      *bench.Bench
}

// scenarios lists the changes worth looking at.
func scenarios(b *bench.Bench, m *reduce.Measurand) []variant {
	var out []variant
	add := func(name, what string, factor float64, change func(b *bench.Bench)) {
		c := *b
		c.Channels = append([]bench.Channel(nil), b.Channels...)
		c.Scalars = append([]bench.Scalar(nil), b.Scalars...)
		c.Instruments = append([]bench.Instrument(nil), b.Instruments...)
		for i := range c.Instruments {
			c.Instruments[i].Allowances = append([]bench.Allowance(nil), b.Instruments[i].Allowances...)
		}
		for i := range c.Channels {
			c.Channels[i].Grouped = append([]bench.Grouped(nil), b.Channels[i].Grouped...)
		}
		change(&c)
		out = append(out, variant{name, what, factor, &c})
	}
	average := func(b *bench.Bench, n float64, settings bool) {
		for i := range b.Channels {
			ch := &b.Channels[i]
			ch.Noise /= math.Sqrt(n)
			ch.RelativeNoise /= math.Sqrt(n)
			if ch.ResolutionPer != "setting" || settings {
				ch.Resolution /= math.Sqrt(n)
			}
			for g := range ch.Grouped {
				if settings {
					ch.Grouped[g].U /= math.Sqrt(n)
					ch.Grouped[g].Relative /= math.Sqrt(n)
				}
			}
		}
	}
	for _, n := range []float64{2, 4} {
		add(fmt.Sprintf("%.0f times the readings at each setting", n), "readings at each setting", n, func(b *bench.Bench) { average(b, n, false) })
	}
	for _, n := range []float64{2, 4} {
		add(fmt.Sprintf("%.0f times the settings", n), "settings", n, func(b *bench.Bench) { average(b, n, true) })
	}
	for i := range b.Channels {
		name, scaled := b.Channels[i].Name, []int{i}
		// A body's height is one within the gap: another gap keeps its share of it.
		switch height, gap := channelNamed(b, "height"), channelNamed(b, "gap"); {
		case i == responseChannel(b), i == height && gap >= 0:
			continue
		case i == gap && height >= 0:
			name, scaled = "gap and height", append(scaled, height)
		}
		for _, f := range []float64{0.5, 0.8, 1.25, 2} {
			add(fmt.Sprintf("%g times the %s", f, name), b.Channels[i].Name, f, func(b *bench.Bench) {
				for _, i := range scaled {
					ch := &b.Channels[i]
					ch.Readings = append([]float64(nil), ch.Readings...)
					for r := range ch.Readings {
						ch.Readings[r] *= f
					}
				}
			})
		}
	}
	// The inputs that carry most of the variance, each known twice as well.
	budget := append([]reduce.BudgetLine(nil), m.Budget...)
	for range min(5, len(budget)) {
		best := -1
		for i := range budget {
			if budget[i].Input != "" && (best < 0 || budget[i].Share > budget[best].Share) {
				best = i
			}
		}
		if best < 0 || budget[best].Share < 0.01 {
			break
		}
		name := budget[best].Input
		budget[best].Input = ""
		halve := halver(b, name)
		if halve != nil {
			add(name+" known twice as well", name, 0.5, halve)
		}
	}
	return out
}

// channelNamed returns the place of a channel, or −1.
func channelNamed(b *bench.Bench, name string) int {
	return slices.IndexFunc(b.Channels, func(c bench.Channel) bool { return c.Name == name })
}

// halver returns the change that halves the uncertainty of an input of the
// budget, or nil when the budget line is no input by itself.
func halver(b *bench.Bench, name string) func(b *bench.Bench) {
	half := func(d *gum.Distribution) {
		d.U /= 2
		d.Half /= 2
		d.D /= 2
	}
	for i := range b.Scalars {
		if b.Scalars[i].Name == name {
			return func(b *bench.Bench) { half(&b.Scalars[i].Dist) }
		}
		if b.Scalars[i].Name+" (squared)" == name {
			return func(b *bench.Bench) { half(&b.Scalars[i].Dist) }
		}
	}
	for i := range b.Channels {
		ch := &b.Channels[i]
		switch name {
		case "channels." + ch.Name + ".gain":
			return func(b *bench.Bench) { half(&b.Channels[i].Gain) }
		case "channels." + ch.Name + ".offset":
			return func(b *bench.Bench) { half(&b.Channels[i].Offset) }
		case ch.Name + " noise":
			return func(b *bench.Bench) {
				b.Channels[i].Noise /= 2
				b.Channels[i].RelativeNoise /= 2
			}
		case ch.Name + " resolution":
			return func(b *bench.Bench) { b.Channels[i].Resolution /= 2 }
		}
		for g := range ch.Grouped {
			if name == ch.Name+" per "+ch.Grouped[g].By {
				return func(b *bench.Bench) {
					b.Channels[i].Grouped[g].U /= 2
					b.Channels[i].Grouped[g].Relative /= 2
				}
			}
		}
	}
	for i := range b.Instruments {
		for k := range b.Instruments[i].Allowances {
			if b.Instruments[i].Allowances[k].Name == name {
				return func(b *bench.Bench) { half(&b.Instruments[i].Allowances[k].Dist) }
			}
		}
	}
	return nil
}
