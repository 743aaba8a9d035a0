package lab

import (
	"bytes"
	"encoding/json"
	"errors"
	"image/png"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/go-gota/gota/dataframe"
	"github.com/go-gota/gota/series"
	"gonum.org/v1/gonum/mat"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
)

const (
	datasets = "../../datasets"
	disc     = datasets + "/attracted-disc"
)

const budget = datasets + "/plate-field-budget/budget.toml"

// springFit is a fit whose answer is known: the data lie on a straight line with
// the given noise.
var springFit = FitSettings{Formula: "k*x + f0", Response: "f", Start: map[string]float64{"k": 10, "f0": 0}, Noise: "0.002 N"}

func springData(t *testing.T) dataframe.DataFrame {
	t.Helper()
	x := []float64{0, 10, 20, 30, 40, 50}
	f := []float64{101, 348, 603, 849, 1099, 1352}
	return dataframe.New(series.New(x, series.Float, "x/mm"), series.New(f, series.Float, "f/mN"))
}

// renders are the values of the package that a cell can end in.
type renders interface {
	String() string
	SimpleRender() map[string]any
}

// failure runs f and returns the error that ends the cell.
func failure(t *testing.T, f func()) (err error) {
	t.Helper()
	defer func() {
		switch p := recover().(type) {
		case nil:
			t.Fatal("no failure")
		case cell.Failure:
			err = p.Err
		default:
			panic(p)
		}
	}()
	f()
	return nil
}

func text(t *testing.T, forms map[string]any, mime string) string {
	t.Helper()
	s, ok := forms[mime].(string)
	if !ok || strings.TrimSpace(s) == "" {
		t.Fatalf("no form %s", mime)
	}
	return s
}

// everything is one of each value that a cell can end in.
func everything(t *testing.T) (tables, figures map[string]renders) {
	t.Helper()
	b := Open(disc)
	r := Reduce(b, Settings{Trials: 200})
	quick := Settings{LawOnly: true}
	meter := Reduce(datasets+"/field-meter", Settings{Trials: 100})
	p := Propagate(budget, PropagateSettings{Trials: 20000})
	d := Plan(b)
	k := Compare(r.Named("A"), Reduce(datasets+"/plate-charge", quick).Named("B"), CompareSettings{Measurand: "vacuum_permittivity"})
	f := Fit(springData(t), springFit)
	c := Certify(meter)
	stray := StrayField(datasets + "/strayfield/strayfield.toml")
	return map[string]renders{
			"bench": b, "readings": b.Readings(), "quantities": b.Quantities(), "result": r, "budget": r.Budget(),
			"budget of": r.Budget("relative_permittivity"), "parameters": r.Parameters(), "correlations": r.Correlations(),
			"corrections": r.Corrections(), "diagnosis": r.Diagnosis(), "warnings": r.Warnings(), "exclusions": r.Exclusions(),
			"rows": r.Rows(), "provenance": Provenance(r, p, f), "series": meter.Series(), "frame": Table(b.Frame()), "first rows": Table(r.Frame(), 3),
			"propagation": p, "output": p.Budget("factor"), "warnings of a budget": p.Warnings(), "plan": d, "budget of a plan": d.Budget(),
			"comparison": k, "pairs": k.Pairs(), "shared": k.Shared(), "formula": f, "parameters of a formula": f.Parameters(),
			"correlations of a formula": f.Correlations(), "diagnosis of a formula": f.Diagnosis(), "stray field": stray, "certificate": c, "points": c.Points("as-left, 20 kV/m"),
		}, map[string]renders{
			"fit": r.Fit(), "residuals": r.Residuals(), "order": r.Order(), "quantiles": r.Quantiles(), "shares": r.Shares(), "histogram": r.Histogram(),
			"curve": meter.Curve(), "second curve": meter.Curve(2), "design": d.Figure(), "agreement": k.Figure(), "density": p.Histogram(), "budget shares": p.Shares("factor"),
			"outputs": p.Pairs(), "field lines": stray.Figure(), "formula": f.Curve(), "residuals of a formula": f.Residuals(),
		}
}

func TestForms(t *testing.T) {
	tables, figures := everything(t)
	for name, v := range tables {
		forms := v.SimpleRender()
		if text(t, forms, "text/plain") != v.String() {
			t.Errorf("%s: the plain form is not String", name)
		}
		for _, line := range strings.Split(v.String(), "\n") {
			if strings.TrimRight(line, " ") != line {
				t.Errorf("%s: blanks at the end of %q", name, line)
			}
		}
		html := text(t, forms, "text/html")
		if strings.Count(html, "<div") != strings.Count(html, "</div>") || strings.Count(html, "<td") != strings.Count(html, "</td>") {
			t.Errorf("%s: the HTML does not close what it opens", name)
		}
		text(t, forms, "text/latex")
	}
	for name, v := range figures {
		forms := v.SimpleRender()
		if text(t, forms, "text/plain") != v.String() {
			t.Errorf("%s: the plain form is not String", name)
		}
		svg := text(t, forms, "image/svg+xml")
		if html := text(t, forms, "text/html"); !strings.HasPrefix(svg, "<svg ") || !strings.Contains(html, svg) && !strings.Contains(html, "<img ") {
			t.Errorf("%s: no SVG, or no drawing in the HTML", name)
		}
		raw, ok := forms["image/png"].([]byte)
		if !ok {
			t.Fatalf("%s: no PNG", name)
		}
		if _, err := png.Decode(bytes.NewReader(raw)); err != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// Making a value again gives the same bytes; of the pictures one is enough, since
// all are made alike.
func TestDeterministic(t *testing.T) {
	forms := func() string {
		tables, figures := everything(t)
		all := map[string]any{"picture": figures["residuals"].SimpleRender()}
		for name, v := range tables {
			all[name] = v.SimpleRender()
		}
		for name, v := range figures {
			f, ok := v.(*figure.Figure)
			if !ok {
				t.Fatalf("%s is a %T", name, v)
			}
			all["figure "+name] = f.SVG()
		}
		data, err := json.Marshal(all)
		if err != nil {
			t.Fatal(err)
		}
		return string(data)
	}
	first, second := forms(), forms()
	if first != second {
		t.Error("the second time gives other bytes")
	}
}

func TestRecordForm(t *testing.T) {
	r := Reduce(disc, Settings{LawOnly: true, Rows: true})
	raw, ok := r.SimpleRender()[ResultMIME].(json.RawMessage)
	if !ok {
		t.Fatal("no record")
	}
	var rec reduce.Record
	if err := json.Unmarshal(raw, &rec); err != nil {
		t.Fatal(err)
	}
	if rec.Format != 1 || len(rec.Inputs) != 2 || len(rec.Rows) != 72 || float64(rec.Measurands[0].Value) != r.Value() {
		t.Errorf("record: format %d, %d inputs, %d rows", rec.Format, len(rec.Inputs), len(rec.Rows))
	}
}

// The cautions stand once: with the bench when there is one, else with the
// result.
func TestCautionsOnce(t *testing.T) {
	const caution = "High voltage."
	b := Open(disc)
	if n := strings.Count(b.String(), caution); n != 1 {
		t.Errorf("the bench cautions %d times", n)
	}
	if n := strings.Count(Reduce(b, Settings{LawOnly: true}).String(), caution); n != 0 {
		t.Errorf("the result of a bench that has cautioned cautions %d times", n)
	}
	if n := strings.Count(Reduce(disc, Settings{LawOnly: true}).String(), caution); n != 1 {
		t.Errorf("the result of a folder cautions %d times", n)
	}
}

// Every dataset goes to a frame and to a matrix and comes back with the same bits.
func TestRoundTrips(t *testing.T) {
	dirs, err := filepath.Glob(datasets + "/*/bench.toml")
	if err != nil || len(dirs) == 0 {
		t.Fatal(dirs, err)
	}
	for _, file := range dirs {
		dir := filepath.Dir(file)
		t.Run(filepath.Base(dir), func(t *testing.T) {
			d, err := bench.Open(dir)
			if err != nil {
				t.Skip("other tests hold the datasets:", err)
			}
			b := &Bench{Bench: d}
			data, err := frameCSV(d, b.Frame())
			if err != nil {
				t.Fatal(err)
			}
			again, err := bench.OpenReadings(dir, "frame", data)
			if err != nil {
				t.Fatal(err)
			}
			sameReadings(t, d, again)
			m := b.Matrix()
			if rows, cols := m.Dims(); rows != d.Rows.N || cols != len(d.Channels) {
				t.Errorf("the matrix is %d × %d", rows, cols)
			}
		})
	}
	b := Open(disc)
	sameReadings(t, b.Bench, b.WithMatrix(b.Matrix()).Bench)
}

func sameReadings(t *testing.T, a, b *bench.Bench) {
	t.Helper()
	if a.Rows.N != b.Rows.N {
		t.Fatalf("%d records became %d", a.Rows.N, b.Rows.N)
	}
	for k := range a.Channels {
		for i, x := range a.Channels[k].Readings {
			if y := b.Channels[k].Readings[i]; math.Float64bits(x) != math.Float64bits(y) {
				t.Fatalf("channel %s, record %d: %v became %v", a.Channels[k].Name, i+1, x, y)
			}
		}
	}
	for i := range a.Rows.N {
		if a.Rows.Kind[i] != b.Rows.Kind[i] || a.Rows.Excluded[i] != b.Rows.Excluded[i] || a.Rows.Reason(i) != b.Rows.Reason(i) {
			t.Fatalf("record %d: kind or exclusion changed", i+1)
		}
		if x, y := a.Rows.Time[i], b.Rows.Time[i]; math.Float64bits(x) != math.Float64bits(y) {
			t.Fatalf("record %d: time %v became %v", i+1, x, y)
		}
		for _, role := range labelRoles {
			if a.Rows.Label(role, i) != b.Rows.Label(role, i) {
				t.Fatalf("record %d: %s changed", i+1, role)
			}
		}
	}
}

// A frame of a file's own numbers is the file's numbers, digit for digit.
func TestFrameHasTheFilesDigits(t *testing.T) {
	df, own := Open(disc).Frame(), ReadFrame(disc+"/readings.csv")
	if got, want := strings.Join(df.Names(), " "), strings.Join(own.Names(), " "); got != want {
		t.Fatalf("columns %q, in the file %q", got, want)
	}
	for _, name := range own.Names() {
		if own.Col(name).Type() != series.Float || df.Col(name).Type() != series.Float {
			continue
		}
		x, y := df.Col(name).Float(), own.Col(name).Float()
		for i := range x {
			if x[i] != y[i] {
				t.Fatalf("%s, record %d: %v, in the file %v", name, i+1, x[i], y[i])
			}
		}
	}
}

func TestResultFrame(t *testing.T) {
	r := Reduce(disc, Settings{LawOnly: true})
	df := r.Frame()
	if got := strings.Join(df.Names(), " "); got != "record line excluded voltage/V gap/m mass/kg fitted/kg u/kg residual/kg standardised leverage studentised" {
		t.Errorf("columns %q", got)
	}
	x := df.Col("residual/kg").Float()
	for i := range x {
		if x[i] != r.Result.Rows.Residual[i] {
			t.Fatalf("row %d: %v is not %v", i, x[i], r.Result.Rows.Residual[i])
		}
	}
}

// A verb that can't do its work says what the command would say.
func TestFailures(t *testing.T) {
	b := Open(disc)
	r := Reduce(b, Settings{LawOnly: true})
	empty := t.TempDir()
	short := b.Frame().Drop("gap/mm")
	wrong := b.Frame().Rename("gap/V", "gap/mm")
	inch := b.Frame().Rename("gap/furlong", "gap/mm")
	words := b.Frame().Mutate(series.New(make([]string, b.Bench.Rows.N), series.String, "gap/mm"))
	zero := b.Frame()
	gaps := zero.Col("gap/mm").Float()
	gaps[4] = 0
	zero = zero.Mutate(series.New(gaps, series.Float, "gap/mm"))
	for _, c := range []struct {
		name string
		do   func()
		want []string
	}{
		{"no folder", func() { Open("nowhere") }, []string{"nowhere", "no such folder"}},
		{"no bench", func() { Open(empty) }, []string{"bench.toml"}},
		{"nothing to reduce", func() { Reduce(17) }, []string{"int", "*lab.Bench"}},
		{"nil bench", func() { Reduce((*Bench)(nil)) }, []string{"nil", "lab.Open"}},
		{"nil result", func() { Reduce((*Result)(nil)) }, []string{"no bench"}},
		{"two settings", func() { Reduce(b, Settings{}, Settings{}) }, []string{"twice"}},
		{"odd setting", func() { Reduce(b, 7) }, []string{"int", "settings"}},
		{"a bench too many", func() { Reduce(b, b) }, []string{"second bench"}},
		{"frame alone", func() { Reduce(b.Frame()) }, []string{"lab.Reduce(frame, bench)"}},
		{"missing column", func() { Reduce(short, b) }, []string{"frame:", "channel gap", `"gap/mm"`, "there are: t/s"}},
		{"wrong dimension", func() { Reduce(wrong, b) }, []string{`column "gap/V"`}},
		{"unknown unit", func() { Reduce(inch, b) }, []string{"furlong"}},
		{"words for numbers", func() { Reduce(words, b) }, []string{`column "gap/mm"`, "numbers are due"}},
		{"zero gap", func() { WithFrame(b, zero) }, []string{"frame:6", "above zero"}},
		{"broken frame", func() { WithFrame(b, dataframe.DataFrame{Err: errors.New("spoilt")}) }, []string{"spoilt"}},
		{"matrix of another shape", func() { b.WithMatrix(mat.NewDense(2, 2, nil)) }, []string{"2 × 2", "voltage, gap, mass"}},
		{"no matrix", func() { b.WithMatrix(nil) }, []string{"nil"}},
		{"measurand", func() { r.Budget("permitivity") }, []string{`"permitivity"`, `did you mean "permittivity"?`}},
		{"two measurands", func() { r.Value("a", "b") }, []string{"2 names"}},
		{"parameter", func() { r.Estimate("x") }, []string{"gap_offset"}},
		{"row", func() { r.Exclude(700, "x") }, []string{"700"}},
		{"no reason", func() { b.Exclude(3, "") }, []string{"reason"}},
		{"histogram of the law", func() { r.Histogram() }, []string{"trials"}},
		{"no file", func() { ReadFrame("nothing.csv") }, []string{"nothing.csv"}},
		{"no budget", func() { Propagate("nothing.toml") }, []string{"nothing.toml"}},
		{"settings twice", func() { Propagate(budget, PropagateSettings{}, PropagateSettings{}) }, []string{"twice"}},
		{"output", func() { Propagate(budget, PropagateSettings{LawOnly: true}).Budget("feild") }, []string{`did you mean "field"?`}},
		{"density of the law", func() { Propagate(budget, PropagateSettings{LawOnly: true}).Histogram() }, []string{"trials"}},
		{"plan of nothing", func() { Plan("nowhere") }, []string{"nowhere"}},
		{"plan of a number", func() { Plan(3) }, []string{"int"}},
		{"comparison of one", func() { Compare(r) }, []string{"two"}},
		{"comparison of a number", func() { Compare(r, 2) }, []string{"int"}},
		{"comparison of no record", func() { Compare(r, disc+"/bench.toml") }, []string{"bench.toml", "no record"}},
		{"comparison with nil", func() { Compare(r, (*Result)(nil)) }, []string{"result 2 is nil"}},
		{"fit of a number", func() { Fit(1, springFit) }, []string{"int"}},
		{"fit without a formula", func() { Fit(springData(t), FitSettings{}) }, []string{"ormula"}},
		{"fit of no file", func() { Fit("nothing.csv", springFit) }, []string{"nothing.csv"}},
		{"certificate without an order", func() { Certify(r) }, []string{"work."}},
		{"certificate of a number", func() { Certify(1) }, []string{"int"}},
		{"no fixtures", func() { StrayField("nothing.toml") }, []string{"nothing.toml"}},
		{"no curves", func() { r.Curve() }, []string{"attracted-disc", "point by point"}},
		{"name of a file", func() { r.Save("result.doc") }, []string{".json, .html, .md, .tex or .txt"}},
		{"provenance of a number", func() { Provenance(r, 3) }, []string{"int"}},
		{"provenance of nothing", func() { Provenance(nil) }, []string{"nil"}},
	} {
		err := failure(t, c.do)
		for _, w := range c.want {
			if !strings.Contains(err.Error(), w) {
				t.Errorf("%s: %q does not say %q", c.name, err, w)
			}
		}
		if strings.Contains(err.Error(), "goroutine") || strings.Contains(err.Error(), "%!") {
			t.Errorf("%s: %q", c.name, err)
		}
	}
}

// A failing verb in a notebook ends the cell; what the host does not return from
// is never passed.
func TestFailEndsTheCell(t *testing.T) {
	var got error
	type ended struct{}
	restore := cell.SetHost(&cell.Host{Fail: func(err error) { got = err; panic(ended{}) }})
	defer restore()
	func() {
		defer func() {
			if _, ok := recover().(ended); !ok {
				t.Error("the cell went on")
			}
		}()
		Open("nowhere")
	}()
	if got == nil || !strings.Contains(got.Error(), "nowhere") {
		t.Errorf("the host was told %v", got)
	}
}

// A weighted straight line has its solution in closed form (computed
// independently).
func TestFit(t *testing.T) {
	f := Fit(springData(t), springFit)
	// Least squares of the six points by hand: slope Σ(x−x̄)(f−f̄)/Σ(x−x̄)², u = 2 mN/√Σ(x−x̄)².
	if k := f.Value("k"); math.Abs(k-25.0114285714) > 1e-8 {
		t.Errorf("k = %.10f", k)
	}
	if u := f.U("k"); math.Abs(u-2e-3/math.Sqrt(1.75e-3)) > 1e-9 {
		t.Errorf("u(k) = %.10f", u)
	}
	path := filepath.Join(t.TempDir(), "spring.csv")
	if err := os.WriteFile(path, []byte("x/mm,f/mN\n0,101\n10,348\n20,603\n30,849\n40,1099\n50,1352\n"), 0o666); err != nil {
		t.Fatal(err)
	}
	if g := Fit(path, springFit); g.Value("k") != f.Value("k") || g.U("f0") != f.U("f0") {
		t.Error("the file and the frame give other numbers")
	}
}

// A design's uncertainty is that of the run that followed it (property: the
// prediction uses the same settings and no reading).
func TestPlan(t *testing.T) {
	d, r := Plan(disc), Reduce(disc, Settings{LawOnly: true})
	if ratio := d.U() / r.U(); math.Abs(ratio-1) > 0.05 {
		t.Errorf("predicted over found %g", ratio)
	}
}

// One-sided effects are where the law and Monte Carlo part: the mean of the field
// rises by Δ²/9d² of it for a half-difference uniform within ±Δ (derived:
// ⟨Δ²⟩ = Δ²/3, and the field rises by a third of the square over d²).
func TestPropagate(t *testing.T) {
	p := Propagate(budget, PropagateSettings{Trials: 200000})
	m := p.Record().Outputs[0].MonteCarlo
	want := math.Pow(0.9e-3/20.01355555e-3, 2) / 9
	if got := float64(m.Value)/p.Value() - 1; math.Abs(got-want) > 4*p.U()/p.Value()/math.Sqrt(200000)+1e-7 {
		t.Errorf("the mean rises by %.3e, expected %.3e", got, want)
	}
	if m.Agrees {
		t.Error("the law is confirmed where it can't hold")
	}
}

func TestSave(t *testing.T) {
	r := Reduce(disc, Settings{LawOnly: true})
	dir := t.TempDir()
	for ext, want := range map[string]string{".json": "\"permittivity\"", ".html": "<!DOCTYPE html>", ".md": "permittivity", ".tex": "\\documentclass", ".txt": "permittivity"} {
		path := r.Save(filepath.Join(dir, "result"+ext))
		data, err := os.ReadFile(path)
		if err != nil || !strings.Contains(string(data), want) {
			t.Errorf("%s: %v, or does not hold %q", ext, err, want)
		}
	}
	// A record that was saved is compared as the result is.
	other := Reduce(datasets+"/attracted-disc-unguarded", Settings{LawOnly: true})
	a, b := Compare(r, other), Compare(filepath.Join(dir, "result.json"), other)
	if a.Agreement.Mean.Value != b.Agreement.Mean.Value {
		t.Error("the saved record compares differently")
	}
	c := Certify(Reduce(datasets+"/field-meter", Settings{LawOnly: true}))
	for ext, want := range map[string]string{".html": "<!DOCTYPE html>", ".pdf": "%PDF-", ".xml": "digitalCalibrationCertificate"} {
		path := c.Save(filepath.Join(dir, "certificate"+ext))
		data, err := os.ReadFile(path)
		if err != nil || !strings.Contains(string(data), want) {
			t.Errorf("%s: %v, or does not hold %q", ext, err, want)
		}
		if err := failure(t, func() { c.Save(path) }); !strings.Contains(err.Error(), "never overwritten") {
			t.Error(err)
		}
	}
}

func TestNamed(t *testing.T) {
	r := Reduce(disc, Settings{LawOnly: true})
	n := r.Named("Laboratory A")
	if n.Record().Title != "Laboratory A" || r.Record().Title == "Laboratory A" || n.Value() != r.Value() {
		t.Error("another name is more than that")
	}
}

func TestReadFrame(t *testing.T) {
	path := filepath.Join(t.TempDir(), "x.csv")
	if err := os.WriteFile(path, []byte("a/V;note;n\n0.1;up;\n1e-300;;3\n"), 0o666); err != nil {
		t.Fatal(err)
	}
	df := ReadFrame(path)
	a, n := df.Col("a/V").Float(), df.Col("n").Float()
	if a[0] != 0.1 || a[1] != 1e-300 || !math.IsNaN(n[0]) || n[1] != 3 || df.Col("note").Type() != series.String {
		t.Error(df)
	}
}

// TestNamesOfFormula: correlations are told under the names of the formula, an
// underscore in them kept.
func TestNamesOfFormula(t *testing.T) {
	s := springFit
	s.Formula, s.Start = "k*x + f_0", map[string]float64{"k": 10, "f_0": 0}
	if text := Fit(springData(t), s).Correlations().String(); !strings.Contains(text, "f_0") {
		t.Errorf("the correlations do not name f_0:\n%s", text)
	}
}
