package lab

import (
	"encoding/json"
	"math"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
)

// PropagateSettings say how to propagate: Seed, Trials, Adaptive, LawOnly,
// SecondOrder, Probability, Digits. The zero settings are the defaults.
type PropagateSettings = reduce.PropagateSettings

// Propagation is an uncertainty budget worked out by the law of propagation and
// by Monte Carlo. In a cell it shows every output by both with its budget.
type Propagation struct {
	// Propagation is the result itself: its Record, and the numbers behind the
	// figures.
	Propagation *reduce.Propagation
	Budgets     *bench.Budget // what the file says

	sheet *report.Sheet
	json  json.RawMessage
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
	p := &Propagation{Propagation: r, Budgets: b, sheet: report.PropagationSheet(r, false)}
	p.json, err = json.Marshal(&r.Record)
	fail(err)
	return p
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

// output finds an output by name, the first without one.
func (p *Propagation) output(name []string) *reduce.BudgetResult {
	outputs := p.Propagation.Record.Outputs
	if len(name) > 1 {
		failf("%d names are given; one is due", len(name))
	}
	if len(name) == 0 || name[0] == "" {
		return &outputs[0] // a budget without outputs is refused when it is read
	}
	var known []string
	for i := range outputs {
		if outputs[i].Name == name[0] {
			return &outputs[i]
		}
		known = append(known, outputs[i].Name)
	}
	fail(unknown("output", name[0], known))
	return nil
}

// Value is the value of an output by the law, SI, NaN where the law can't be
// applied; without a name, of the first.
func (p *Propagation) Value(name ...string) float64 {
	if l := p.output(name).Law; l != nil {
		return float64(l.Value)
	}
	return math.NaN()
}

// U is the standard uncertainty of an output by the law, SI, NaN where the law
// can't be applied; without a name, of the first.
func (p *Propagation) U(name ...string) float64 {
	if l := p.output(name).Law; l != nil {
		return float64(l.U)
	}
	return math.NaN()
}

// Budget is the uncertainty budget of an output; without a name, of the first.
func (p *Propagation) Budget(name ...string) *report.Table {
	o := p.output(name)
	if o.Law == nil {
		failf("%s has no budget: the law can't be applied (%s)", o.Name, p.Propagation.Record.Warnings)
	}
	t := report.BudgetTable(o)
	t.Caption = "Uncertainty budget of the " + report.Words(o.Name)
	return t
}

// Warnings tells what a reader of the budget must know.
func (p *Propagation) Warnings() *report.Sheet {
	return report.Warnings(&reduce.Record{Warnings: p.Propagation.Record.Warnings})
}

// Shares draws what each input contributes to the variance of an output; without
// a name, of the first.
func (p *Propagation) Shares(name ...string) *figure.Figure {
	return figureOf(figure.BudgetShares(p.Propagation, p.output(name).Name))
}

// Histogram draws the Monte Carlo values of an output with their coverage
// interval beside the distribution that the law assumes; without a name, of the
// first.
func (p *Propagation) Histogram(name ...string) *figure.Figure {
	return figureOf(figure.Density(p.Propagation, p.output(name).Name))
}

// Pairs draws the outputs against each other with the ellipses of their joint
// coverage region.
func (p *Propagation) Pairs() *figure.Figure { return figureOf(figure.Joint(p.Propagation)) }
