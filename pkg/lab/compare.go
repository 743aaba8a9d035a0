package lab

import (
	"encoding/json"
	"fmt"
	"os"
	"strings"

	"example.org/guardring/pkg/assess"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
	"example.org/guardring/pkg/si"
)

// CompareSettings say how to compare: Measurand, Shared, Independent, Subset. The
// zero settings are the defaults.
type CompareSettings = assess.AgreementSettings

// Comparison says whether several results of one quantity agree. In a cell it
// shows the results, their weighted mean with its consistency, and the degrees of
// equivalence.
type Comparison struct {
	Agreement *assess.Agreement

	doc   string
	sheet *report.Sheet
}

// Named returns the result under another title, for comparisons of laboratories
// that named theirs alike.
func (r *Result) Named(title string) *Result {
	x := *r.Result
	x.Record.Title = title
	return laidOut(&x, r.told)
}

// Compare says whether results of one quantity agree. A result is a *Result, or
// the file of a record that `guardring reduce --json` has written; CompareSettings
// may stand among them.
//
//	lab.Compare(a.Named("Laboratory A"), b.Named("Laboratory B"), "c/result.json")
func Compare(results ...any) *Comparison {
	var s CompareSettings
	stated := false
	var records []*reduce.Record
	for _, x := range results {
		switch x := x.(type) {
		case CompareSettings:
			if stated {
				failf("settings are given twice")
			}
			s, stated = x, true
		case *Result:
			if x == nil || x.Result == nil {
				failf("result %d is nil", len(records)+1)
			}
			records = append(records, x.Record())
		case string:
			r, err := readRecord(x)
			fail(err)
			records = append(records, r)
		default:
			failf("a value of type %T can't be compared: a *lab.Result or the file of a record is due", x)
		}
	}
	a, err := assess.Compare(cell.Context(), records, s)
	fail(err)
	c := &Comparison{Agreement: a, doc: docOf(records[0], s.Measurand)}
	c.sheet = c.layOut()
	return c
}

// readRecord reads a record from its file.
func readRecord(path string) (*reduce.Record, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	r := &reduce.Record{}
	if err := json.Unmarshal(data, r); err != nil {
		return nil, fmt.Errorf("%s: no record of a reduction: %w", path, err)
	}
	if r.Format != 1 || len(r.Measurands) == 0 {
		return nil, fmt.Errorf("%s: no record of a reduction of format 1 with a measurand", path)
	}
	return r, nil
}

// docOf says what a measurand is.
func docOf(r *reduce.Record, name string) string {
	for i := range r.Measurands {
		if m := &r.Measurands[i]; name == "" || m.Name == name {
			return report.Words(m.Name)
		}
	}
	return report.Words(name)
}

// String returns the text form.
func (c *Comparison) String() string { return c.sheet.String() }

// SimpleRender gives the forms that a notebook can show.
func (c *Comparison) SimpleRender() map[string]any { return c.sheet.SimpleRender() }

// unit is the unit in which people read the results.
func (c *Comparison) unit() (si.Unit, string) {
	return report.Unit(c.Agreement.Mean.Value, c.Agreement.Mean.Results[0].Unit)
}

// Figure draws the results with their expanded uncertainties, the reference value
// and its own.
func (c *Comparison) Figure() *figure.Figure {
	m := c.Agreement.Mean
	unit, _ := c.unit()
	p := figure.Plot{Name: "comparison", Title: "Agreement of " + c.doc,
		Caption: "Results with their expanded uncertainties (k of each, 2 where not stated); the line is the weighted mean, the band its expanded uncertainty (k = 2).",
		Y:       figure.Axis{Name: c.doc, Unit: unit}}
	s := figure.Series{}
	for i, r := range m.Results {
		p.X.Labels = append(p.X.Labels, r.Name)
		s.X, s.Y, s.UY = append(s.X, float64(i+1)), append(s.Y, r.Value), append(s.UY, r.Expanded())
	}
	p.Series = []figure.Series{s}
	n := float64(len(m.Results))
	p.Levels = []figure.Level{{Name: "weighted mean", At: m.Value}}
	p.Bands = []figure.Band{{Name: "its expanded uncertainty", X: []float64{0.5, n + 0.5}, Low: []float64{m.Value - 2*m.U, m.Value - 2*m.U},
		High: []float64{m.Value + 2*m.U, m.Value + 2*m.U}}}
	return figureOf(p.Draw())
}

// Pairs is the table of E_n of each pair of results.
func (c *Comparison) Pairs() *report.Table {
	d := c.Agreement.Degrees
	t := &report.Table{Caption: "E_n of each pair, row minus column", Columns: []report.Column{{Name: "", Most: 40}}}
	for _, r := range c.Agreement.Mean.Results {
		t.Columns = append(t.Columns, report.Column{Name: report.Words(r.Name), Align: report.Decimal})
	}
	for i, r := range c.Agreement.Mean.Results {
		row := []string{report.Words(r.Name)}
		for j := range c.Agreement.Mean.Results {
			if i == j {
				row = append(row, "")
				continue
			}
			row = append(row, signed(d.Bilateral[i][j].En))
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

// Shared is the table of inputs whose error several results share.
func (c *Comparison) Shared() *report.Sheet {
	a := c.Agreement.Shared
	if a == nil || len(a.Inputs) == 0 {
		return report.New("", "").Say("The results share no input: no instrument, certificate or value stands in more than one budget.")
	}
	t := &report.Table{Columns: []report.Column{{Name: "input"}, {Name: "source", Most: 50}, {Name: "results", Most: 50}, {Name: "share of each variance", Unit: "%"}}}
	for _, in := range a.Inputs {
		var who, share []string
		for k, i := range in.Records {
			who = append(who, a.Results[i].Name)
			share = append(share, report.Number(100*in.Share[k], 2))
		}
		t.Rows = append(t.Rows, []string{report.Words(in.Input), in.Source, strings.Join(who, ", "), strings.Join(share, ", ")})
	}
	return report.New("", "").Table(t)
}

func signed(x float64) string {
	return strings.ReplaceAll(fmt.Sprintf("%+.2f", x), "-", "−")
}

// layOut makes the sheet that a cell shows.
func (c *Comparison) layOut() *report.Sheet {
	a := c.Agreement
	m := a.Mean
	unit, name := c.unit()
	verdict := "The results do not agree."
	if a.Agrees {
		verdict = "The results agree."
	}
	s := report.New("Agreement of "+c.doc, fmt.Sprintf("%d results", len(m.Results)))
	s.Say(verdict)
	var warnings []string
	for _, w := range a.Warnings {
		warnings = append(warnings, w.Error())
	}
	s.Notice(warnings...)
	t := &report.Table{Columns: []report.Column{{Name: "result", Most: 44}, {Name: "value", Unit: name, Align: report.Decimal}, {Name: "u", Unit: name, Align: report.Decimal},
		{Name: "weight", Unit: "%", Align: report.Decimal}, {Name: "difference", Unit: name, Align: report.Decimal}, {Name: "its 2u", Unit: name, Align: report.Decimal}, {Name: "E_n", Align: report.Decimal}}}
	for i, r := range m.Results {
		d := a.Degrees.Unilateral[i]
		v, u := stated(r.Value, r.U, r.Unit, unit)
		diff, _ := stated(d.D, d.U, r.Unit, unit)
		_, twice := stated(0, 2*d.U, r.Unit, unit)
		t.Rows = append(t.Rows, []string{report.Words(r.Name), v, u, strings.ReplaceAll(fmt.Sprintf("%.1f", 100*m.Weights[i]), "-", "−"), diff, twice, signed(d.En)})
	}
	v, u := stated(m.Value, m.U, m.Results[0].Unit, unit)
	t.Rows = append(t.Rows, []string{"weighted mean", v, u, "", "", "", ""})
	t.Sum = 1
	s.Table(t)
	s.Fact("chi-squared", fmt.Sprintf("%s with %d degrees of freedom, p = %s", report.Number(m.ChiSquared, 3), m.DOF, report.Number(m.PValue, 2)))
	s.Fact("Birge ratio", report.Number(m.BirgeRatio, 3)+" (nothing has been rescaled by it)")
	consistent := "consistent"
	if !m.Consistent {
		consistent = "NOT consistent"
	}
	s.Fact("test at "+report.Plain(100*m.Level, 2)+" %", consistent)
	if a.Subset != nil {
		var out []string
		for _, i := range a.Subset.Excluded {
			out = append(out, m.Results[i].Name)
		}
		if len(out) > 0 {
			sv, su := stated(a.Subset.Mean.Value, a.Subset.Mean.U, m.Results[0].Unit, unit)
			s.Fact("largest consistent subset", fmt.Sprintf("without %s: %s ± %s %s", strings.Join(out, ", "), sv, su, name))
		}
	}
	if r := a.Robust; r != nil {
		rv, ru := stated(r.Mean, r.U, m.Results[0].Unit, unit)
		s.Fact("robust mean", strings.TrimSpace(fmt.Sprintf("%s ± %s %s", rv, ru, name)))
	}
	return s
}

// stated rounds a value and its standard uncertainty, given in the unit named by
// symbol, in a display unit.
func stated(value, u float64, symbol string, unit si.Unit) (string, string) {
	from, err := si.ParseUnit(symbol)
	if err != nil {
		return report.Plain(value, 6), report.Plain(u, 2)
	}
	return report.Measured(from.ToSI(value), from.DeltaToSI(u), unit)
}
