package lab

import (
	"fmt"
	"io"
	"path/filepath"
	"strings"

	"example.org/guardring/pkg/certificate"
	"example.org/guardring/pkg/report"
	"example.org/guardring/pkg/safefile"
)

// Certificate is a calibration certificate. In a cell it shows who calibrated
// what for whom, the results with their statements of conformity, and what was
// left open; Save writes the certificate itself.
type Certificate struct {
	Certificate *certificate.Certificate

	sheet *report.Sheet
}

// Certify makes the calibration certificate of a result (or of a *Bench or the
// folder of a dataset, which are reduced first). One that would lack something is
// refused with everything that is missing.
func Certify(what any) *Certificate {
	var r *Result
	switch w := what.(type) {
	case *Result:
		if w == nil || w.Result == nil {
			failf("the result is nil")
		}
		r = w
	case *Bench, string:
		r = Reduce(w, Settings{Command: "certificate"})
	default:
		failf("a value of type %T can't be certified: a *lab.Result, a *lab.Bench or the folder of a dataset is due", what)
	}
	c, err := certificate.New(r.Result, certificate.Settings{})
	fail(err)
	out := &Certificate{Certificate: c}
	out.sheet = out.layOut()
	return out
}

// String returns the text form.
func (c *Certificate) String() string { return c.sheet.String() }

// SimpleRender gives the forms that a notebook can show.
func (c *Certificate) SimpleRender() map[string]any { return c.sheet.SimpleRender() }

// Save writes the certificate to a file in the form that the end of its name asks
// for: .html prints on A4, .pdf, .xml is the open Digital Calibration Certificate
// schema. A certificate is never overwritten. It returns the path.
func (c *Certificate) Save(path string) string {
	write := map[string]func(io.Writer) error{".html": c.Certificate.HTML, ".pdf": c.Certificate.PDF, ".xml": c.Certificate.XML}[filepath.Ext(path)]
	if write == nil {
		failf("%s: the name of a certificate ends in .html, .pdf or .xml", path)
	}
	if exists(path) {
		failf("%s exists; a certificate is never overwritten: choose another name, or make an amendment with guardring certificate --replace", path)
	}
	fail(safefile.Write(path, write))
	return path
}

// Points is the table of what is stated at every level of a result; without a
// name, of the first. Names are those of the series, such as "as-left, 20 kV/m".
func (c *Certificate) Points(name ...string) *report.Table {
	if len(name) > 1 {
		failf("%d names are given; one is due", len(name))
	}
	var known []string
	for i := range c.Certificate.Results {
		r := &c.Certificate.Results[i]
		if len(name) == 0 || name[0] == r.Name {
			return points(r)
		}
		known = append(known, r.Name)
	}
	fail(unknown("result", name[0], known))
	return nil
}

func points(r *certificate.Result) *report.Table {
	t := &report.Table{Caption: r.Name, Columns: []report.Column{{Name: r.Level.Label, Unit: unitName(r.LevelUnit), Align: report.Decimal}, {Name: "readings", Align: report.Right},
		{Name: "indication", Unit: unitName(r.Indicated), Align: report.Decimal}, {Name: r.Value.Name, Align: report.Decimal}, {Name: "U", Align: report.Decimal}, {Name: "k", Align: report.Decimal}}}
	for _, p := range r.Points {
		t.Rows = append(t.Rows, []string{minus(p.Level), fmt.Sprint(p.Readings), minus(p.Indication), minus(p.Value.Value), p.Value.Expanded, p.Value.K})
	}
	return t
}

// layOut makes the sheet that a cell shows.
func (c *Certificate) layOut() *report.Sheet {
	d := c.Certificate
	s := report.New(d.Title, "certificate "+d.Identification+" · "+fmt.Sprintf("%d pages", d.Pages()))
	for _, x := range []struct{ label, text string }{{"laboratory", d.Laboratory.Name}, {"client", d.Client.Name}, {"received", d.Received},
		{"performed", d.Performed}, {"issued", d.Issued}, {"method", d.Method}, {"procedure", d.Procedure}, {"adjustment", d.Adjustment}} {
		if x.text != "" {
			s.Fact(x.label, x.text)
		}
	}
	for _, f := range d.Item {
		s.Fact(strings.ToLower(f.Label), f.Text)
	}
	t := &report.Table{Columns: []report.Column{{Name: "result", Most: 40}, {Name: d.Definition.Label, Align: report.Decimal}, {Name: "U", Align: report.Decimal},
		{Name: "k", Align: report.Decimal}, {Name: "acceptance", Most: 30}, {Name: "verdict", Most: 30}, {Name: "probability of conformity"}}}
	for i := range d.Results {
		r := &d.Results[i]
		name := r.Name
		if name == "" {
			name = r.Value.Name
		}
		row := []string{name, minus(r.Value.Value), r.Value.Expanded, r.Value.K, "", "", ""}
		if k := r.Conformity; k != nil {
			row[4], row[5], row[6] = k.Accepted, k.Verdict, k.Probability
		}
		t.Rows = append(t.Rows, row)
	}
	s.Head("Results").Table(t)
	for i := range d.Results {
		if k := d.Results[i].Conformity; k != nil {
			s.Say("Limits " + k.Limits + ", " + k.Source + "; " + k.Rule)
			break
		}
	}
	if len(d.Observations) > 0 {
		s.Head("Observations").Notice(d.Observations...)
	}
	if len(d.Deviations) > 0 {
		s.Head("Deviations").Notice(d.Deviations...)
	}
	return s
}

// minus sets the hyphen of a number as a minus sign; the certificate itself keeps
// the hyphen, which every reader of its forms understands.
func minus(s string) string { return strings.ReplaceAll(s, "-", "−") }
