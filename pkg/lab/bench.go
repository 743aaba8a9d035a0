package lab

import (
	"fmt"
	"math"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
	"example.org/guardring/pkg/si"
)

// firstReadings is how many records a bench shows at first.
const firstReadings = 8

// Bench is a dataset that has been opened and checked. In a cell it shows what
// is measured and how, the cautions of the bench, and its first readings.
type Bench struct {
	Bench *bench.Bench // everything the dataset says, in SI
	Check *reduce.Summary

	sheet *report.Sheet
}

// Open reads and checks the dataset in folder dir: bench.toml and the readings
// it names.
func Open(dir string) *Bench {
	b, err := bench.Open(dir)
	fail(err)
	return newBench(b)
}

// newBench checks a bench and lays out what it shows.
func newBench(b *bench.Bench) *Bench {
	s, err := reduce.Check(b)
	fail(err)
	out := &Bench{Bench: b, Check: s}
	out.sheet = out.layOut()
	return out
}

// String returns the text form.
func (b *Bench) String() string { return b.sheet.String() }

// SimpleRender gives the forms that a notebook can show.
func (b *Bench) SimpleRender() map[string]any { return b.sheet.SimpleRender() }

// Readings is the table of all records as they stand in the files, with the
// lines they stand in.
func (b *Bench) Readings() *report.Table { return b.records(0) }

// Quantities is the table of everything the bench states besides its readings.
func (b *Bench) Quantities() *report.Table {
	t := &report.Table{Caption: "Quantities of the bench", Columns: []report.Column{{Name: "quantity"}, {Name: "value", Align: report.Decimal},
		{Name: "u", Align: report.Decimal}, {Name: "unit", Close: true}, {Name: "shape"}, {Name: "dof", Align: report.Right}, {Name: "from", Most: 44}}}
	row := func(name string, value, u, dof float64, unit si.Unit, shape, from string) {
		v, du := report.Measured(value, u, unit)
		d := ""
		if u > 0 && !math.IsInf(dof, 1) {
			d = report.Plain(dof, 3)
		}
		if u == 0 {
			shape = "exact"
		}
		t.Rows = append(t.Rows, []string{name, v, du, unitName(unit), shape, d, from})
	}
	for i := range b.Bench.Scalars {
		s := &b.Bench.Scalars[i]
		if !s.Given {
			continue
		}
		from := s.Source
		if from == "" && s.Instrument != "" {
			from = b.instrument(s.Instrument)
		}
		if s.Adjust {
			if !s.HasPrior {
				t.Rows = append(t.Rows, []string{report.Words(s.Name), "", "", unitName(s.Unit), "", "", "estimated from the readings"})
				continue
			}
			from = strings.TrimPrefix(from+"; estimated, with this known before", "; ")
		}
		row(report.Words(s.Name), s.Dist.Value, s.Dist.U, s.Dist.DOF, s.Unit, s.Dist.Shape, from)
	}
	for i := range b.Bench.Channels {
		c := &b.Bench.Channels[i]
		if c.HasGain {
			row(c.Name+" gain", c.Gain.Value, c.Gain.U, c.Gain.DOF, si.Unit{Symbol: "1", Factor: 1}, c.Gain.Shape, c.GainSource)
		}
		if c.HasOffset {
			row(c.Name+" offset", c.Offset.Value, c.Offset.U, c.Offset.DOF, c.Unit, c.Offset.Shape, c.OffsetSource)
		}
	}
	for i := range b.Bench.Instruments {
		for _, a := range b.Bench.Instruments[i].Allowances {
			row(report.Words(a.Name), a.Dist.Value, a.Dist.U, a.Dist.DOF, a.Unit, a.Dist.Shape, a.Source)
		}
	}
	return t
}

// Value is the stated value of a quantity of the bench, SI.
func (b *Bench) Value(name string) float64 { return b.scalar(name).Dist.Value }

// U is the stated standard uncertainty of a quantity of the bench, SI.
func (b *Bench) U(name string) float64 { return b.scalar(name).Dist.U }

func (b *Bench) scalar(name string) *bench.Scalar {
	var known []string
	for i := range b.Bench.Scalars {
		s := &b.Bench.Scalars[i]
		if s.Name == name {
			return s
		}
		known = append(known, s.Name)
	}
	fail(unknown("quantity", name, known))
	return nil
}

// instrument tells an instrument of the bench by its certificate.
func (b *Bench) instrument(name string) string {
	for i := range b.Bench.Instruments {
		if in := &b.Bench.Instruments[i]; in.Name == name {
			if in.Certificate != "" {
				return name + ", certificate " + in.Certificate
			}
			return name
		}
	}
	return name
}

// Exclude returns the bench without data record row, counted from 1 over all
// files, for the given reason; the bench itself does not change.
func (b *Bench) Exclude(row int, reason string) *Bench {
	x, err := b.Bench.Exclude(row, reason)
	fail(err)
	return newBench(x)
}

// layOut makes the sheet that a cell shows.
func (b *Bench) layOut() *report.Sheet {
	d := b.Bench
	s := report.New(d.Title, report.Words(d.Kind.Name)+" · "+strings.ReplaceAll(d.Method, "-", " "))
	s.Cautions(&b.Check.Hazard)
	for _, w := range b.Check.Warnings {
		s.Notice(w.Error())
	}
	for _, in := range d.Inputs {
		if in.Rows == 0 {
			continue
		}
		text := fmt.Sprintf("%s: %d data records", in.File, in.Rows)
		if in.Excluded > 0 {
			text += fmt.Sprintf(", %d left out", in.Excluded)
		}
		s.Fact("readings", text)
	}
	s.Fact("in the fit", fmt.Sprintf("%d readings", b.Check.Rows))
	if len(b.Check.Estimated) > 0 {
		names := make([]string, len(b.Check.Estimated))
		for i, n := range b.Check.Estimated {
			names[i] = report.Words(n)
		}
		s.Fact("estimated", strings.Join(names, ", "))
	}
	var on []string
	for i := range d.Kind.Corrections {
		if c := &d.Kind.Corrections[i]; d.Corrections[c.Name] {
			on = append(on, report.Words(c.Name))
		}
	}
	if len(on) > 0 {
		s.Fact("corrections", strings.Join(on, ", "))
	}
	return s.Table(b.records(firstReadings))
}

// records is a table of the first most records, all when most is 0.
func (b *Bench) records(most int) *report.Table {
	r := &b.Bench.Rows
	n := r.N
	if most > 0 && most < n {
		n = most
	}
	t := &report.Table{Columns: []report.Column{{Name: "record", Align: report.Right}, {Name: "line", Align: report.Right}}}
	if n < r.N {
		t.Caption = fmt.Sprintf("The first %d of %d data records", n, r.N)
	}
	if len(r.Files) > 1 {
		t.Columns = append(t.Columns, report.Column{Name: "file", Most: 24})
	}
	if r.HasTime {
		t.Columns = append(t.Columns, report.Column{Name: "time", Unit: "s", Align: report.Decimal})
	}
	kinds, left := false, false
	for i := range n {
		kinds = kinds || r.Kind[i] != bench.Reading
		left = left || r.Excluded[i]
	}
	if kinds {
		t.Columns = append(t.Columns, report.Column{Name: "kind"})
	}
	var roles []string
	for _, role := range labelRoles {
		if r.Labels[role] != nil {
			roles = append(roles, role)
			t.Columns = append(t.Columns, report.Column{Name: role, Most: 16})
		}
	}
	for i := range b.Bench.Channels {
		c := &b.Bench.Channels[i]
		t.Columns = append(t.Columns, report.Column{Name: report.Words(c.Name), Unit: unitName(c.Unit), Align: report.Decimal})
	}
	if left {
		t.Columns = append(t.Columns, report.Column{Name: "left out", Most: 40})
	}
	for i := range n {
		file, line := r.Place(i)
		row := []string{fmt.Sprint(i + 1), fmt.Sprint(line)}
		if len(r.Files) > 1 {
			row = append(row, file)
		}
		if r.HasTime {
			row = append(row, report.Plain(r.Time[i], 10))
		}
		if kinds {
			row = append(row, r.Kind[i].String())
		}
		for _, role := range roles {
			row = append(row, r.Label(role, i))
		}
		for k := range b.Bench.Channels {
			c := &b.Bench.Channels[k]
			row = append(row, shownReading(c, i))
		}
		if left {
			row = append(row, r.Reason(i))
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

// labelRoles are the row columns of words, in the order in which tables and
// frames hold them.
var labelRoles = []string{"setting", "polarity", "direction", "mount", "range", "phase", "quality"}

// shownReading is a reading in the unit of its column, as the file has it.
func shownReading(c *bench.Channel, i int) string {
	x := c.Readings[i]
	if math.IsNaN(x) {
		return ""
	}
	return strings.ReplaceAll(si.Exact(inUnit(c.Unit, x)), "-", "−")
}

// unitName is a unit as tables show it; nothing for pure numbers.
func unitName(u si.Unit) string {
	if t := u.String(); t != "1" {
		return t
	}
	return ""
}
