package lab

import (
	"fmt"
	"sort"
	"strconv"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
)

// Design is what a planned measurement would give. In a cell it shows the
// uncertainty of the first measurand, what dominates it, and what changes of the
// design would do.
type Design struct {
	Prediction *plan.Prediction

	sheet *report.Sheet
}

// Plan says before measuring what uncertainty a design gives: the settings of a
// bench (a *Bench, or the folder of a dataset) with the truth that its
// simulation.toml states. No reading of the response is used.
func Plan(bench any) *Design {
	b, told := benchOf(bench)
	truth, err := plan.ReadTruth(b.Bench)
	fail(err)
	p, err := plan.Predict(cell.Context(), b.Bench, truth)
	fail(err)
	d := &Design{Prediction: p}
	d.sheet = d.layOut(told)
	return d
}

// String returns the text form.
func (d *Design) String() string { return d.sheet.String() }

// SimpleRender gives the forms that a notebook can show.
func (d *Design) SimpleRender() map[string]any { return d.sheet.SimpleRender() }

// Figure draws how the uncertainty follows from changes of the design.
func (d *Design) Figure() *figure.Figure { return figureOf(figure.Design(d.Prediction)) }

// Budget is the uncertainty budget of the design.
func (d *Design) Budget() *report.Table { return report.Budget(&d.Prediction.Measurand) }

// U is the standard uncertainty that the design gives, SI.
func (d *Design) U() float64 { return float64(d.Prediction.Measurand.U) }

// dominantLines is how many inputs a design names.
const dominantLines = 6

func (d *Design) layOut(told bool) *report.Sheet {
	p := d.Prediction
	s := report.New(p.Title, report.Words(p.Model)+" · before measuring")
	if !told {
		s.Cautions(&p.Hazard)
	}
	s.Results([]reduce.Measurand{p.Measurand})
	if len(p.Warnings) > 0 {
		s.Head("Warnings").Notice(p.Warnings...)
	}
	lines := append(p.Measurand.Budget[:0:0], p.Measurand.Budget...)
	sort.SliceStable(lines, func(i, j int) bool { return lines[i].Share > lines[j].Share })
	t := &report.Table{Columns: []report.Column{{Name: "input"}, {Name: "share", Align: report.Bar}, {Name: "", Unit: "%", Align: report.Decimal, Close: true}}}
	for i, l := range lines {
		if i == dominantLines {
			break
		}
		t.Rows = append(t.Rows, []string{report.Words(l.Input), strconv.FormatFloat(float64(l.Share), 'f', 6, 64),
			strconv.FormatFloat(100*float64(l.Share), 'f', 1, 64)})
	}
	s.Head("What dominates").Table(t)
	unit, _ := report.Unit(float64(p.Measurand.U), p.Measurand.Unit)
	t, notes := report.Changes(p, unit)
	s.Head("One change at a time").Table(t)
	for i, n := range notes {
		s.Say(fmt.Sprintf("(%d) %s", i+1, n))
	}
	return s
}
