package lab

import (
	"encoding/json"
	"math"
	"strings"

	"gonum.org/v1/gonum/stat/distuv"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
	"example.org/guardring/pkg/si"
)

// PropagateSettings say how to propagate: Seed, Trials, Adaptive, LawOnly,
// SecondOrder, Probability, Digits. The zero settings are the defaults.
type PropagateSettings = reduce.PropagateSettings

// Propagation is an uncertainty budget worked out by the law of propagation and
// by Monte Carlo. In a cell it shows every output by both, and the budget of the
// first.
type Propagation struct {
	Propagation *reduce.Propagation
	Budgets     *bench.Budget // what the file says

	measurands []reduce.Measurand
	sheet      *report.Sheet
	json       json.RawMessage
}

// Propagate states the uncertainty of every output of a budget file, by the law
// and by Monte Carlo. Settings may follow.
//
//	lab.Propagate("budget.toml", lab.PropagateSettings{Trials: 200000})
func Propagate(path string, settings ...PropagateSettings) *Propagation {
	var s PropagateSettings
	if len(settings) > 1 {
		failf("settings are given twice")
	}
	if len(settings) == 1 {
		s = settings[0]
	}
	b, err := bench.OpenBudget(path)
	fail(err)
	r, err := reduce.Propagate(cell.Context(), b, s)
	fail(err)
	p := &Propagation{Propagation: r, Budgets: b}
	for i := range r.Record.Outputs {
		p.measurands = append(p.measurands, asMeasurand(&r.Record.Outputs[i]))
	}
	p.sheet = p.layOut()
	p.json, err = json.Marshal(&r.Record)
	fail(err)
	return p
}

// asMeasurand is an output of a budget as tables and figures of results take it:
// by the law, or by Monte Carlo alone where the law can't be applied.
func asMeasurand(o *reduce.BudgetResult) reduce.Measurand {
	m := reduce.Measurand{Name: o.Name, Doc: o.Formula, Unit: o.Unit, MonteCarlo: o.MonteCarlo}
	if l := o.Law; l != nil {
		m.Value, m.U, m.DOF, m.K, m.Probability, m.Interval = l.Value, l.U, l.DOF, l.K, l.Probability, l.Interval
		for i := range l.Budget {
			m.Budget = append(m.Budget, l.Budget[i].BudgetLine)
		}
		return m
	}
	nan := reduce.Number(math.NaN())
	m.Value, m.U, m.DOF, m.K, m.Interval = nan, nan, nan, nan, [2]reduce.Number{nan, nan}
	return m
}

// String returns the text form.
func (p *Propagation) String() string { return p.sheet.String() }

// SimpleRender gives the forms that a notebook can show, the record among them.
func (p *Propagation) SimpleRender() map[string]any {
	forms := p.sheet.SimpleRender()
	forms[ResultMIME] = p.json
	return forms
}

// Record is the propagation as it is written and compared.
func (p *Propagation) Record() *reduce.PropagationRecord { return &p.Propagation.Record }

// index finds an output by name, the first without one.
func (p *Propagation) index(name []string) int {
	if len(name) > 1 {
		failf("%d names are given; one is due", len(name))
	}
	if len(p.measurands) == 0 {
		failf("the budget has no output")
	}
	if len(name) == 0 || name[0] == "" {
		return 0
	}
	var known []string
	for i := range p.measurands {
		if p.measurands[i].Name == name[0] {
			return i
		}
		known = append(known, p.measurands[i].Name)
	}
	fail(unknown("output", name[0], known))
	return 0
}

// Value is the value of an output by the law, SI; without a name, of the first.
func (p *Propagation) Value(name ...string) float64 {
	return float64(p.measurands[p.index(name)].Value)
}

// U is the standard uncertainty of an output by the law, SI; without a name, of
// the first.
func (p *Propagation) U(name ...string) float64 { return float64(p.measurands[p.index(name)].U) }

// Budget is the uncertainty budget of an output; without a name, of the first.
func (p *Propagation) Budget(name ...string) *report.Table {
	m := &p.measurands[p.index(name)]
	if len(m.Budget) == 0 {
		failf("%s has no budget: %v", m.Name, p.Propagation.Result.Outputs[p.index(name)].LawError)
	}
	t := report.Budget(m)
	t.Caption = "Uncertainty budget of the " + report.Words(m.Name)
	return t
}

// Shares draws what each input contributes to the variance of an output; without
// a name, of the first.
func (p *Propagation) Shares(name ...string) *figure.Figure {
	m := p.measurands[p.index(name)]
	d := &figure.Data{Record: &reduce.Record{Title: p.Propagation.Record.Title, Measurands: []reduce.Measurand{m}}}
	return figureOf(d.Shares(m.Name))
}

// Histogram draws the Monte Carlo values of an output with their coverage
// interval beside the distribution that the law assumes; without a name, of the
// first.
func (p *Propagation) Histogram(name ...string) *figure.Figure {
	i := p.index(name)
	o := &p.Propagation.Result.Outputs[i]
	if o.MonteCarlo == nil {
		failf("there are no trials: the budget was propagated by the law only")
	}
	return figureOf(p.histogram(o, p.Propagation.Record.Outputs[i].StatedUnit))
}

// histogram makes the figure. Densities are times the standard uncertainty, so
// that they have no unit.
func (p *Propagation) histogram(o *gum.OutputResult, symbol string) (*figure.Figure, error) {
	unit, err := si.ParseUnit(symbol)
	if err != nil {
		return nil, err
	}
	mc := o.MonteCarlo
	h := &mc.Histogram
	scale := mc.U
	if o.Law != nil {
		scale = o.Law.U
	}
	x, y, most := steps(h, float64(mc.Trials-mc.Undefined), scale)
	plot := figure.Plot{Name: "histogram-" + o.Name, Title: "Distribution of " + report.Words(o.Name), From: p.Propagation.Record.Title,
		Caption: "Monte Carlo values as a histogram, their coverage interval as a band, and the distribution that the law of propagation assumes.",
		X:       figure.Axis{Name: report.Words(o.Name), Unit: unit}, Y: figure.Axis{Name: "probability density × standard uncertainty", Unit: si.MustUnit("1"), Zero: true},
		Series: []figure.Series{{Name: "Monte Carlo", X: x, Y: y, Line: true}},
		Bands: []figure.Band{{Name: strings.ReplaceAll(si.Percent(mc.Probability), " ", "\u00a0") + " of the trials", X: mc.Interval[:], Low: []float64{0, 0},
			High: []float64{1.05 * most, 1.05 * most}}}}
	if l := o.Law; l != nil && l.U > 0 {
		plot.Series = append(plot.Series, lawCurve(l, x[0], x[len(x)-1]))
	}
	return plot.Draw()
}

// mostBins is how many bins of a histogram are drawn.
const mostBins = 80

// steps is the outline of a histogram of n trials as densities times scale, its
// bins joined until at most mostBins are left, and the highest density.
func steps(h *gum.Histogram, n, scale float64) (x, y []float64, most float64) {
	join := max(1, (len(h.Counts)+mostBins-1)/mostBins)
	x, y = append(x, h.Low), append(y, 0)
	for k := 0; k < len(h.Counts); k += join {
		end := min(k+join, len(h.Counts))
		sum := int64(0)
		for _, c := range h.Counts[k:end] {
			sum += c
		}
		d := float64(sum) / (n * h.Width * float64(end-k)) * scale
		x = append(x, h.Low+float64(k)*h.Width, h.Low+float64(end)*h.Width)
		y = append(y, d, d)
		most = max(most, d)
	}
	return append(x, x[len(x)-1]), append(y, 0), most
}

// lawCurve is the density of the law, times u: a t scaled by u with the effective
// degrees of freedom (JCGM 100 annex G), normal when they are infinite.
func lawCurve(l *gum.Law, from, to float64) figure.Series {
	density := distuv.UnitNormal.Prob
	if !math.IsInf(l.DOF, 0) && !math.IsNaN(l.DOF) {
		density = distuv.StudentsT{Mu: 0, Sigma: 1, Nu: l.DOF}.Prob
	}
	const points = 241
	s := figure.Series{Name: "law of propagation", Line: true}
	for i := range points {
		x := from + (to-from)*float64(i)/(points-1)
		s.X = append(s.X, x)
		s.Y = append(s.Y, density((x-l.Value)/l.U))
	}
	return s
}

// Pairs draws the outputs against each other with the ellipse of their joint
// coverage region.
func (p *Propagation) Pairs() *figure.Figure {
	r := p.Propagation.Result
	if len(r.Outputs) < 2 {
		failf("the budget has one output; nothing to draw it against")
	}
	var axes []figure.Axis
	var value []float64
	for i := range r.Outputs {
		u, err := si.ParseUnit(p.Propagation.Record.Outputs[i].StatedUnit)
		fail(err)
		axes = append(axes, figure.Axis{Name: report.Words(r.Outputs[i].Name), Unit: u})
		v := math.NaN()
		switch o := &r.Outputs[i]; {
		case o.MonteCarlo != nil:
			v = o.MonteCarlo.Value
		case o.Law != nil:
			v = o.Law.Value
		}
		value = append(value, v)
	}
	return figureOf(figure.Pairs("pairs", "Outputs against each other", p.Propagation.Record.Title, axes, r.Points, value, r.Covariance, r.Probability))
}

// layOut makes the sheet that a cell shows.
func (p *Propagation) layOut() *report.Sheet {
	rec := &p.Propagation.Record
	s := report.New(rec.Title, "uncertainty budget")
	var stated []reduce.Measurand
	for i := range p.measurands {
		if len(p.measurands[i].Budget) > 0 {
			stated = append(stated, p.measurands[i])
		}
	}
	s.Results(stated)
	if len(rec.Warnings) > 0 {
		s.Head("Warnings").Notice(rec.Warnings...)
	}
	s.Head("By the law and by Monte Carlo").Table(p.both())
	for i := range p.measurands {
		if len(p.measurands[i].Budget) > 0 {
			s.Head("Uncertainty budget of the " + report.Words(p.measurands[i].Name)).Table(report.Budget(&p.measurands[i]))
			break
		}
	}
	return s
}

// both is the table of every output by the law and by Monte Carlo.
func (p *Propagation) both() *report.Table {
	t := &report.Table{Columns: []report.Column{{Name: "output"}, {Name: "by"}, {Name: "value", Align: report.Decimal}, {Name: "u", Align: report.Decimal},
		{Name: "from", Align: report.Decimal}, {Name: "to", Align: report.Decimal}, {Name: "unit", Close: true}, {Name: "k", Align: report.Decimal}, {Name: "verdict", Most: 40}}}
	one := si.MustUnit("1")
	for i := range p.measurands {
		m := &p.measurands[i]
		size := float64(m.Value)
		if mc := m.MonteCarlo; mc != nil && math.IsNaN(size) {
			size = float64(mc.Value)
		}
		unit, name := report.Unit(size, m.Unit)
		row := func(by string, value, u, low, high reduce.Number, k, verdict string) {
			v, du := report.Measured(float64(value), float64(u), unit)
			lo, _ := report.Measured(float64(low), float64(u), unit)
			hi, _ := report.Measured(float64(high), float64(u), unit)
			t.Rows = append(t.Rows, []string{report.Words(m.Name), by, v, du, lo, hi, name, k, verdict})
		}
		if len(m.Budget) > 0 {
			row("law", m.Value, m.U, m.Interval[0], m.Interval[1], report.In(float64(m.K), one, 3), "")
		}
		if mc := m.MonteCarlo; mc != nil {
			verdict := "confirms the law"
			switch {
			case len(m.Budget) == 0:
				verdict = "the law can't be applied"
			case !mc.Agrees:
				verdict = "does NOT confirm the law"
			}
			row("Monte Carlo", mc.Value, mc.U, mc.Interval[0], mc.Interval[1], "", verdict)
		}
	}
	return t
}
