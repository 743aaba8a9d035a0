package lab

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/go-gota/gota/dataframe"
	"github.com/go-gota/gota/series"
	"gonum.org/v1/gonum/mat"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/report"
	"example.org/guardring/pkg/si"
)

// frameName stands for readings that came from a frame, in messages and in the
// record's inputs.
const frameName = "frame"

// Frame returns the readings of the bench as a gota frame, one row a data record:
// the row columns (time, kind, setting …), the channels and the conditions read
// with them, under the headers of the CSV and in the units of its columns.
// Numbers are exactly those of the file; missing ones are NaN.
func (b *Bench) Frame() dataframe.DataFrame {
	var cols []series.Series
	have := map[string]bool{}
	add := func(values any, t series.Type, name string) {
		if !have[name] {
			have[name] = true
			cols = append(cols, series.New(values, t, name))
		}
	}
	r := &b.Bench.Rows
	if h := r.Columns["time"]; h != "" {
		if r.Epoch.IsZero() {
			add(slices.Clone(r.Time), series.Float, h)
		} else {
			add(stamps(r), series.String, h)
		}
	}
	if h := r.Columns["kind"]; h != "" {
		words := make([]string, r.N)
		for i, k := range r.Kind {
			words[i] = k.String()
		}
		add(words, series.String, h)
	}
	for _, role := range labelRoles {
		if h := r.Columns[role]; h != "" && r.Labels[role] != nil {
			words := make([]string, r.N)
			for i := range words {
				words[i] = r.Labels[role].At(i)
			}
			add(words, series.String, h)
		}
	}
	for i := range b.Bench.Channels {
		c := &b.Bench.Channels[i]
		x := make([]float64, r.N)
		for k, v := range c.Readings {
			x[k] = inUnit(c.Unit, v)
		}
		add(x, series.Float, c.Column)
	}
	for i := range b.Bench.Ambient {
		a := &b.Bench.Ambient[i]
		add(slices.Clone(a.Readings), series.Float, a.Column)
	}
	return dataframe.New(cols...)
}

// stamps writes the times of records that have time stamps.
func stamps(r *bench.Rows) []string {
	out := make([]string, r.N)
	for i, t := range r.Time {
		if !math.IsNaN(t) {
			out[i] = r.Epoch.Add(time.Duration(math.Round(t * 1e9))).UTC().Format(time.RFC3339Nano)
		}
	}
	return out
}

// WithFrame returns a bench with the readings of a gota frame in place of those
// in its files. The bench is a *Bench or the folder of a dataset. A channel is
// found under the header that bench.toml gives it, in that unit, or as NAME/UNIT
// with any unit that fits, NAME being the channel's name or the header's; row
// columns under their header or their role. Rows keep their order; [[exclude]] of
// bench.toml counts the rows of the frame.
func WithFrame(bench any, df dataframe.DataFrame) *Bench {
	b, _ := benchOf(bench)
	return b.withFrame(df)
}

func (b *Bench) withFrame(df dataframe.DataFrame) *Bench {
	if df.Err != nil {
		failf("the frame holds an error: %v", df.Err)
	}
	text, err := frameCSV(b.Bench, df)
	fail(err)
	x, err := bench.OpenReadings(b.Bench.Dir, frameName, text)
	fail(err)
	return newBench(x)
}

// frameColumn is a column that a bench reads, and where a frame has it.
type frameColumn struct {
	header string // that bench.toml expects
	what   string // for messages
	names  []string
	unit   si.Unit
	number bool
}

// frameColumns lists what a bench reads.
func frameColumns(b *bench.Bench) []frameColumn {
	var out []frameColumn
	seen := map[string]bool{}
	add := func(c frameColumn) {
		if c.header != "" && !seen[c.header] {
			seen[c.header] = true
			out = append(out, c)
		}
	}
	for _, role := range append([]string{"time", "kind"}, labelRoles...) {
		add(frameColumn{header: b.Rows.Columns[role], what: "the row column " + role, names: []string{role}})
	}
	for i := range b.Channels {
		c := &b.Channels[i]
		add(frameColumn{c.Column, "channel " + c.Name, []string{c.Name, baseName(c.Column)}, c.Unit, true})
	}
	for i := range b.Ambient {
		a := &b.Ambient[i]
		add(frameColumn{a.Column, "a condition", []string{baseName(a.Column)}, a.Unit, true})
	}
	return out
}

// baseName is NAME of a header NAME/UNIT.
func baseName(header string) string {
	if k := strings.IndexByte(header, '/'); k > 0 {
		return header[:k]
	}
	return header
}

// unitText is UNIT of a header NAME/UNIT or NAME/(UNIT).
func unitText(header string) string {
	_, u, _ := strings.Cut(header, "/")
	if in, ok := strings.CutPrefix(u, "("); ok && strings.HasSuffix(in, ")") && strings.Count(in, "(") == 0 {
		return strings.TrimSuffix(in, ")")
	}
	return u
}

// find tells which column of a frame holds c, and the unit its header states.
func (c *frameColumn) find(names []string) (name string, unit si.Unit, err error) {
	if slices.Contains(names, c.header) {
		return c.header, c.unit, nil
	}
	for _, n := range names {
		if !c.number {
			if slices.Contains(c.names, n) {
				return n, si.Unit{}, nil
			}
			continue
		}
		if base := baseName(n); base != n && slices.Contains(c.names, base) {
			u, err := si.ParseUnit(unitText(n))
			if err != nil {
				return "", u, fmt.Errorf("%s: column %q: %w", frameName, n, err)
			}
			if err := u.CheckDim(c.unit.Dim); err != nil {
				return "", u, fmt.Errorf("%s: column %q: %w", frameName, n, err)
			}
			return n, u, nil
		}
	}
	hint := fmt.Sprintf("name it %q", c.header)
	if c.number {
		hint += fmt.Sprintf(", or %s/UNIT with a unit like %s", c.names[0], c.unit.Symbol)
	}
	if s := si.Suggest(c.header, names); s != "" {
		hint += fmt.Sprintf("; is it %q?", s)
	}
	return "", si.Unit{}, fmt.Errorf("%s: there is no column for %s; %s (there are: %s)", frameName, c.what, hint, strings.Join(names, ", "))
}

// frameCSV writes the columns of a frame that a bench reads.
func frameCSV(b *bench.Bench, df dataframe.DataFrame) ([]byte, error) {
	names := df.Names()
	for i, n := range names {
		if slices.Contains(names[:i], n) {
			return nil, fmt.Errorf("%s: two columns are named %q", frameName, n)
		}
	}
	want := frameColumns(b)
	cells := make([][]string, len(want))
	header := make([]string, len(want))
	for k := range want {
		c := &want[k]
		name, unit, err := c.find(names)
		if err != nil {
			return nil, err
		}
		header[k] = c.header
		s := df.Col(name)
		if c.number && s.Type() != series.Float && s.Type() != series.Int {
			return nil, fmt.Errorf("%s: column %q holds %ss; numbers are due", frameName, name, s.Type())
		}
		cells[k] = seriesText(s, func(x float64) float64 {
			if !c.number || unit == c.unit {
				return x
			}
			return inUnit(c.unit, unit.ToSI(x))
		})
	}
	text, err := csvOf(header, cells, df.Nrow())
	return []byte(text), err
}

// seriesText writes the elements of a series, numbers so that they parse back to
// the same bits; missing ones are empty.
func seriesText(s series.Series, convert func(float64) float64) []string {
	out := make([]string, s.Len())
	numeric := s.Type() == series.Float || s.Type() == series.Int
	for i := range out {
		e := s.Elem(i)
		switch {
		case e.IsNA():
		case numeric:
			if x := e.Float(); !math.IsNaN(x) {
				out[i] = strconv.FormatFloat(convert(x), 'g', -1, 64)
			}
		default:
			out[i] = e.String()
		}
	}
	return out
}

// Table shows a gota frame as tables of results look: the units of its headers
// NAME/UNIT in a second row, numbers aligned at the point. It shows at most rows of
// them, all without.
func Table(df dataframe.DataFrame, rows ...int) *report.Table {
	if df.Err != nil {
		failf("the frame holds an error: %v", df.Err)
	}
	n := df.Nrow()
	t := &report.Table{Columns: []report.Column{{Name: "row", Align: report.Right}}}
	if len(rows) > 1 || len(rows) == 1 && rows[0] < 0 {
		failf("one number of rows is due, not below zero")
	}
	if len(rows) == 1 && rows[0] < n {
		t.Caption = fmt.Sprintf("The first %d of %d rows", rows[0], n)
		n = rows[0]
	}
	var cells [][]string
	for _, h := range df.Names() {
		c := report.Column{Name: h}
		if base := baseName(h); base != h {
			if u, err := si.ParseUnit(unitText(h)); err == nil {
				c.Name, c.Unit = base, unitName(u)
			}
		}
		s := df.Col(h)
		if s.Type() == series.Float || s.Type() == series.Int {
			c.Align = report.Decimal
		}
		t.Columns = append(t.Columns, c)
		cells = append(cells, seriesText(s, func(x float64) float64 { return x }))
	}
	for i := range n {
		row := []string{strconv.Itoa(i + 1)}
		for k := range cells {
			x := cells[k][i]
			if t.Columns[k+1].Align == report.Decimal {
				if f, err := strconv.ParseFloat(x, 64); err == nil {
					x = report.Plain(f, 8)
				}
			}
			row = append(row, x)
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

// ReadFrame reads a CSV file into a gota frame: a column whose cells are all
// numbers, or empty, holds numbers, exactly those of the file; any other holds
// words.
func ReadFrame(path string) dataframe.DataFrame {
	df, err := readFrame(path)
	fail(err)
	return df
}

// Matrix returns the readings of the channels in SI, one row a data record and
// one column a channel, in the order of ChannelNames; missing readings are NaN.
func (b *Bench) Matrix() *mat.Dense {
	m := mat.NewDense(b.Bench.Rows.N, len(b.Bench.Channels), nil)
	for k := range b.Bench.Channels {
		m.SetCol(k, b.Bench.Channels[k].Readings)
	}
	return m
}

// ChannelNames are the names of the channels in the order of the columns of
// Matrix.
func (b *Bench) ChannelNames() []string {
	var out []string
	for i := range b.Bench.Channels {
		out = append(out, b.Bench.Channels[i].Name)
	}
	return out
}

// WithMatrix returns the bench with the readings of m, in SI, in place of its
// own: one row a data record, one column a channel as in Matrix. What the rows are
// (time, setting, kind …) stays.
func (b *Bench) WithMatrix(m mat.Matrix) *Bench {
	if m == nil {
		failf("the matrix is nil")
	}
	rows, cols := m.Dims()
	if rows != b.Bench.Rows.N || cols != len(b.Bench.Channels) {
		failf("the matrix is %d × %d; the bench has %d data records and %d channels (%s)", rows, cols, b.Bench.Rows.N,
			len(b.Bench.Channels), strings.Join(b.ChannelNames(), ", "))
	}
	df := b.Frame()
	for k := range b.Bench.Channels {
		c := &b.Bench.Channels[k]
		x := make([]float64, rows)
		for i := range x {
			x[i] = inUnit(c.Unit, m.At(i, k))
		}
		df = df.Mutate(series.New(x, series.Float, c.Column))
	}
	return b.withFrame(df)
}

// Frame returns the readings as they entered the fit as a gota frame, one row a
// reading: its data record and line, the true values of the predictors, the
// corrected response, the fitted value, the standard uncertainty, the residual and
// its diagnostics. Numbers are SI and exact; headers are NAME/UNIT.
func (r *Result) Frame() dataframe.DataFrame {
	rows := &r.Result.Rows
	units := channelUnits(r.Result.Bench)
	record, line := make([]int, rows.N), make([]int, rows.N)
	for i, k := range rows.Record {
		record[i] = k + 1
		_, line[i] = r.Result.Bench.Rows.Place(k)
	}
	head := func(name, of string) string {
		if u := units[of].Coherent(); u.Symbol != "1" {
			return name + "/" + u.ASCII()
		}
		return name
	}
	cols := []series.Series{series.New(record, series.Int, "record"), series.New(line, series.Int, "line"),
		series.New(slices.Clone(rows.Excluded), series.Bool, "excluded")}
	for k, p := range rows.PredictorNames {
		cols = append(cols, series.New(slices.Clone(rows.Predictors[k]), series.Float, head(p, p)))
	}
	y := rows.ResponseName
	for _, c := range []struct {
		name   string
		of     string
		values []float64
	}{{y, y, rows.Response}, {"fitted", y, rows.Fitted}, {"u", y, rows.U}, {"residual", y, rows.Residual},
		{"standardised", "", rows.Standardised}, {"leverage", "", rows.Leverage}, {"studentised", "", rows.Studentised}} {
		name := c.name
		if c.of != "" {
			name = head(c.name, c.of)
		}
		cols = append(cols, series.New(slices.Clone(c.values), series.Float, name))
	}
	return dataframe.New(cols...)
}
