package figure

import (
	"bytes"
	"encoding/xml"
	"flag"
	"fmt"
	"image/png"
	"io"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"testing"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

var update = flag.Bool("update", false, "rewrite the golden files")

// outline lists what a figure draws without the exact strokes: every text with
// its place to the point, and for every pen how many pieces it draws.
func outline(f *Figure) string {
	var b strings.Builder
	w, h := f.Size()
	fmt.Fprintf(&b, "%s %.0f × %.0f\n%s\n%s\n%s\n", f.Name, w, h, f.Title, f.Caption, f.Summary)
	var pens []pen
	pieces := map[pen]int{}
	for _, o := range f.c.ops {
		if l := o.text; l != nil {
			fmt.Fprintf(&b, "%4.0f %4.0f %s\n", l.x, l.y, l.s)
			continue
		}
		if _, ok := pieces[o.pen]; !ok {
			pens = append(pens, o.pen)
		}
		for _, s := range o.path {
			if s.verb == 'M' || s.verb == 'O' {
				pieces[o.pen]++
			}
		}
	}
	for _, p := range pens {
		fmt.Fprintf(&b, "%d of stroke %q fill %q width %g dash %q\n", pieces[p], p.stroke, p.fill, p.width, p.dash)
	}
	return b.String()
}

func TestOutlines(t *testing.T) {
	all, err := fixture(t).All()
	if err != nil {
		t.Fatal(err)
	}
	names := map[string]bool{}
	for _, f := range all {
		if names[f.Name] {
			t.Errorf("two figures are named %s", f.Name)
		}
		names[f.Name] = true
		path := filepath.Join("testdata", f.Name+".outline")
		got := outline(f)
		if *update {
			if err := os.WriteFile(path, []byte(got), 0o644); err != nil {
				t.Fatal(err)
			}
			continue
		}
		want, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		if got != string(want) {
			if err := os.WriteFile(path+".got", []byte(got), 0o644); err != nil {
				t.Fatal(err)
			}
			t.Errorf("%s differs; see %s.got", path, path)
		}
	}
}

func TestSameBytes(t *testing.T) {
	form := func() []string {
		all, err := fixture(t).All()
		if err != nil {
			t.Fatal(err)
		}
		var out []string
		for _, f := range all[:2] {
			var s, p, d bytes.Buffer
			for _, err := range []error{f.WriteSVG(&s), f.WritePNG(&p, 50), f.WritePDF(&d)} {
				if err != nil {
					t.Fatal(err)
				}
			}
			out = append(out, s.String(), p.String(), d.String())
		}
		return out
	}
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(1))
	first := form()
	runtime.GOMAXPROCS(2)
	second := form()
	for i := range first {
		if first[i] != second[i] {
			t.Errorf("form %d differs between runs", i)
		}
	}
}

// wellFormed reads an SVG strictly and returns its texts.
func wellFormed(t *testing.T, svg string) []string {
	t.Helper()
	d := xml.NewDecoder(strings.NewReader(svg))
	var texts []string
	depth := 0
	for {
		tok, err := d.Token()
		if err == io.EOF {
			return texts
		}
		if err != nil {
			t.Fatalf("broken SVG: %v", err)
		}
		switch e := tok.(type) {
		case xml.StartElement:
			switch e.Name.Local {
			case "svg", "path", "tspan":
			case "text":
				texts = append(texts, "")
				depth = 1
			default:
				t.Fatalf("an element <%s>", e.Name.Local)
			}
			for _, a := range e.Attr {
				if strings.HasPrefix(a.Name.Local, "on") || a.Name.Local == "href" || a.Name.Local == "id" {
					t.Fatalf("an attribute %s", a.Name.Local)
				}
			}
		case xml.EndElement:
			if e.Name.Local == "text" {
				depth = 0
			}
		case xml.CharData:
			if depth == 1 {
				texts[len(texts)-1] += string(e)
			}
		}
	}
}

func TestHostileText(t *testing.T) {
	for _, a := range []string{`<script>alert(1)</script>`, `]]>`, `" onload="x`, `' onload='x`, "&amp;&bogus;", "\x00\x1b[31m\x07", "\xff\xfe",
		"\u202eevil", "a\nb", strings.Repeat("w", 3000), strings.Repeat("many words ", 500)} {
		d := fixture(t)
		d.Record.Title = a
		for i := range d.Record.Exclusions {
			d.Record.Exclusions[i].Reason = a
		}
		m := &d.Record.Measurands[0]
		m.Name = a
		for i := range m.Budget {
			m.Budget[i].Input, m.Budget[i].Group = a, a
		}
		d.Rows.PredictorNames[1] = a
		d.Rows.ResponseName = a
		for i := range d.Groups {
			d.Groups[i] += a
		}
		all, err := d.All()
		if err != nil {
			t.Fatal(err)
		}
		for _, f := range all {
			wellFormed(t, f.SVG())
			for _, o := range f.c.ops {
				l := o.text
				if l == nil || l.turn != 0 {
					continue
				}
				w := width(l.s, l.size, l.bold)
				if left, right := l.x-l.anchor*w, l.x+(1-l.anchor)*w; left < -1 || right > f.c.w+1 {
					t.Errorf("%s: %.40q runs from %.0f to %.0f of %.0f", f.Name, l.s, left, right, f.c.w)
				}
			}
		}
		if err := all[0].WritePDF(io.Discard); err != nil {
			t.Errorf("PDF with %.20q: %v", a, err)
		}
	}
}

func TestForms(t *testing.T) {
	f, err := fixture(t).Residuals()
	if err != nil {
		t.Fatal(err)
	}
	forms := f.SimpleRender()
	svg, ok := forms["image/svg+xml"].(string)
	if !ok || !strings.HasPrefix(svg, "<svg ") {
		t.Error("no SVG form")
	}
	raw, ok := forms["image/png"].([]byte)
	if !ok {
		t.Fatal("no PNG form")
	}
	img, err := png.Decode(bytes.NewReader(raw))
	if err != nil {
		t.Fatal(err)
	}
	w, h := f.Size()
	if b := img.Bounds(); math.Abs(float64(b.Dx())-w*screenDPI/72) > 1 || math.Abs(float64(b.Dy())-h*screenDPI/72) > 1 {
		t.Errorf("PNG is %v for %g × %g points", b, w, h)
	}
	// The drawing is there: the blue of the markers, and paper around it.
	blues := 0
	for y := range img.Bounds().Dy() {
		for x := range img.Bounds().Dx() {
			r, g, b, _ := img.At(x, y).RGBA()
			if r>>8 < 40 && g>>8 > 80 && g>>8 < 150 && b>>8 > 150 {
				blues++
			}
		}
	}
	if blues < 500 || blues > 20000 {
		t.Errorf("%d blue pixels", blues)
	}
	if s, ok := forms["text/plain"].(string); !ok || !strings.Contains(s, "72 readings, 71 in the fit") {
		t.Errorf("text form is %q", s)
	}
	for _, dpi := range []int{0, -1, 35, 1201} {
		if err := f.WritePNG(io.Discard, dpi); err == nil {
			t.Errorf("%d dots per inch were taken", dpi)
		}
	}
	if err := f.WriteSVG(full{}); err == nil {
		t.Error("a failed write went unnoticed")
	}
	if err := f.WritePDF(full{}); err == nil {
		t.Error("a failed write of the PDF went unnoticed")
	}
}

type full struct{}

func (full) Write([]byte) (int, error) { return 0, fmt.Errorf("disk full") }

func TestAxes(t *testing.T) {
	labels := func(a Axis, v ...float64) (string, string) {
		var s spanner
		for _, x := range v {
			s.add(x)
		}
		sc, err := newScale(a, s, 5)
		if err != nil {
			return "", err.Error()
		}
		var out []string
		for _, t := range sc.ticks {
			if !t.minor {
				out = append(out, t.label)
			}
		}
		return sc.title, strings.Join(out, " ")
	}
	for _, c := range []struct {
		axis  Axis
		data  []float64
		title string
		ticks string
	}{
		// SI Brochure 9th ed., section 5.4.1: quantity divided by unit.
		{Axis{Name: "E", Unit: si.MustUnit("V/m")}, []float64{0, 50000}, "E / (kV m⁻¹)", "0 10 20 30 40 50"},
		{Axis{Name: "V", Unit: si.MustUnit("kV")}, []float64{-10000, 10000}, "V / kV", "−10 −5 0 5 10"},
		{Axis{Name: "count"}, []float64{0, 4}, "count", "0 1 2 3 4"},
		{Axis{Name: "ε", Unit: si.MustUnit("F/m")}, []float64{8.8541e-12, 8.8545e-12}, "ε / (pF m⁻¹)", "8.8541 8.8542 8.8543 8.8544 8.8545"},
		{Axis{Name: "d", Unit: si.MustUnit("m"), Log: true}, []float64{0.004, 0.012}, "d / mm", "4 5 6 8 10"},
		{Axis{Name: "d", Unit: si.MustUnit("m"), Log: true}, []float64{0.010, 0.012}, "d / mm", "10.0 10.5 11.0 11.5 12.0"},
		{Axis{Name: "R", Unit: si.MustUnit("Ohm"), Log: true}, []float64{1e3, 1e12}, "R / MΩ", "10⁻² 10⁰ 10² 10⁴ 10⁶"},
		{Axis{Name: "x", Log: true}, []float64{0, 1}, "", "figure: x is 0, which a logarithmic axis can't show: leave out values that are not above zero, or use a linear axis"},
		{Axis{Name: "x", Log: true}, []float64{-2, 1}, "", "figure: x is -2, which a logarithmic axis can't show: leave out values that are not above zero, or use a linear axis"},
		{Axis{Name: "x"}, nil, "", "figure: nothing to draw: x has no finite value"},
		{Axis{Name: "x"}, []float64{math.NaN(), math.Inf(1)}, "", "figure: nothing to draw: x has no finite value"},
		{Axis{Name: "x"}, []float64{-1e308, 1e308}, "", "figure: x runs from -1e+308 to 1e+308, too far for an axis"},
	} {
		title, ticks := labels(c.axis, c.data...)
		if title != c.title || ticks != c.ticks {
			t.Errorf("%+v over %v: %q, %q; want %q, %q", c.axis, c.data, title, ticks, c.title, c.ticks)
		}
	}
}

func TestThinning(t *testing.T) {
	const n = 100000
	x, y := make([]float64, n), make([]float64, n)
	for i := range x {
		x[i] = float64(i)
		y[i] = math.Sin(float64(i) * float64(i))
	}
	y[71234] = 9
	hollow := make([]bool, n)
	hollow[500] = true
	y[500] = 0.01
	p := Plot{X: Axis{Name: "i"}, Y: Axis{Name: "y"}, Series: []Series{{X: x, Y: y, Hollow: hollow}}}
	f, err := p.Draw()
	if err != nil {
		t.Fatal(err)
	}
	said := false
	for _, s := range wellFormed(t, f.SVG()) {
		said = said || strings.Contains(s, "of 100\u2009000 points drawn")
	}
	if !said {
		t.Error("the figure does not say that it was thinned")
	}
	if len(f.SVG()) > 400000 {
		t.Errorf("%d bytes of SVG", len(f.SVG()))
	}
	xs, err := newScale(Axis{}, spanner{lo: 0, hi: n - 1, n: n}, 5)
	if err != nil {
		t.Fatal(err)
	}
	ys := again(xs)
	xs.from, xs.to = 0, 400
	keep := thin(x, y, xs, ys, hollow, thinAbove)
	found := map[int]bool{}
	for i, k := range keep {
		found[k] = true
		if i > 0 && keep[i-1] >= k {
			t.Fatal("the order is lost")
		}
	}
	if !found[71234] || !found[500] {
		t.Error("an outlier or a marked point is lost")
	}
	// What is kept has the range of what was given, in every column of the page.
	for c := range 400 {
		all, some := spanner{}, spanner{}
		for i := range x {
			if int(2*math.Abs(xs.pos(x[i])-xs.from))/2 == c {
				all.add(y[i])
				if found[i] {
					some.add(y[i])
				}
			}
		}
		if all.lo != some.lo || all.hi != some.hi {
			t.Fatalf("column %d spans %g to %g, drawn %g to %g", c, all.lo, all.hi, some.lo, some.hi)
		}
	}
	few := thin(x[:thinAbove], y[:thinAbove], xs, ys, nil, thinAbove)
	if len(few) != thinAbove {
		t.Errorf("%d of %d points kept where none need go", len(few), thinAbove)
	}
}

// Legends cover no data: keys stand above the panels, and no marker or bar
// reaches above the highest panel.
func TestKeysCoverNothing(t *testing.T) {
	f, err := fixture(t).Fit()
	if err != nil {
		t.Fatal(err)
	}
	lowestKey, title := 0.0, math.Inf(1)
	for _, o := range f.c.ops {
		if o.text != nil && strings.HasPrefix(o.text.s, "gap ") {
			lowestKey = math.Max(lowestKey, o.text.y)
		}
		if o.text != nil && strings.HasPrefix(o.text.s, "force / ") {
			title = o.text.y
		}
	}
	if lowestKey == 0 || lowestKey >= title {
		t.Fatalf("keys down to %g, axis title at %g", lowestKey, title)
	}
	for _, o := range f.c.ops {
		if o.text != nil || o.pen.fill == paper && len(o.path) == 5 && o.path[0].x == 0 {
			continue
		}
		for _, s := range o.path {
			if s.y > lowestKey+1 && s.y < title-labelSize {
				t.Errorf("something is drawn at %g, between the key and the panel", s.y)
			}
		}
	}
}

func TestErrorBars(t *testing.T) {
	p := Plot{X: Axis{Name: "x"}, Y: Axis{Name: "y"}, Series: []Series{{X: []float64{1, 2}, Y: []float64{1, 2}, UX: []float64{0.3, 0.3}, UY: []float64{0.2, 0}}}}
	f, err := p.Draw()
	if err != nil {
		t.Fatal(err)
	}
	across, down := 0, 0
	for _, o := range f.c.ops {
		if o.pen != (pen{stroke: blue, width: 0.7}) {
			continue
		}
		for i := 1; i < len(o.path); i++ {
			a, b := o.path[i-1], o.path[i]
			if b.verb == 'L' && math.Abs(b.x-a.x) > 10 {
				across++
			}
			if b.verb == 'L' && math.Abs(b.y-a.y) > 10 {
				down++
			}
		}
	}
	if across != 2 || down != 1 {
		t.Errorf("%d bars across and %d down; want 2 and 1", across, down)
	}
}

func TestStrangeData(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, v := range [][]float64{{0}, {1}, {math.Copysign(0, -1), 0}, {5e-324, 1e-323}, {1e307, 1.0000001e307}, {1, nan, inf, 2}, {1e15, 1e15 + 1}, {-1e-300, 1e-300},
		{1, 1 + 1e-15}, {1e-30, 1e30}, {0, 1e308}} {
		for _, log := range []bool{false, true} {
			x := make([]float64, len(v))
			for i := range x {
				x[i] = float64(i + 1)
			}
			p := Plot{X: Axis{Name: "x", Unit: si.MustUnit("m")}, Y: Axis{Name: "y", Unit: si.MustUnit("V/m"), Log: log}, Series: []Series{{X: x, Y: v, Line: true, Points: true}}}
			f, err := p.Draw()
			if err != nil {
				if f != nil {
					t.Errorf("%v: a figure beside an error", v)
				}
				if !strings.HasPrefix(err.Error(), "figure: y ") {
					t.Errorf("%v: %v", v, err)
				}
				continue
			}
			if s := f.SVG(); strings.Contains(s, "NaN") || strings.Contains(s, "Inf") {
				t.Errorf("%v, log %v: not a number in the drawing", v, log)
			}
		}
	}
	for name, p := range map[string]Plot{
		"lengths": {Series: []Series{{X: []float64{1}, Y: []float64{1, 2}}}},
		"bars":    {Series: []Series{{X: []float64{1}, Y: []float64{1}, UY: []float64{1, 2}}}},
		"band":    {Bands: []Band{{X: []float64{1}}}},
		"nothing": {},
	} {
		if _, err := p.Draw(); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}

func TestBadRecords(t *testing.T) {
	if _, err := (&Data{}).Fit(); err == nil {
		t.Error("a fit of nothing was drawn")
	}
	rec := *fixture(t).Record
	rec.Rows = nil
	if _, err := FromRecord(&rec).Residuals(); err == nil || !strings.Contains(err.Error(), "--rows") {
		t.Errorf("a record without rows gives %v", err)
	}
	d := fixture(t)
	if _, err := d.Shares("permitivity"); err == nil || !strings.Contains(err.Error(), `did you mean "permittivity"`) {
		t.Errorf("a wrong measurand gives %v", err)
	}
	d.Trials = nil
	if _, err := d.Histogram(""); err == nil || !strings.Contains(err.Error(), "no Monte Carlo trials") {
		t.Errorf("law only gives %v", err)
	}
	d = fixture(t)
	d.Rows.Fitted = d.Rows.Fitted[:5]
	if _, err := d.Fit(); err == nil {
		t.Error("rows that are not whole were drawn")
	}
	// Everything excluded, nothing known of the rest.
	d = fixture(t)
	for i := range d.Rows.Excluded {
		d.Rows.Excluded[i] = true
		d.Rows.Standardised[i], d.Rows.Leverage[i] = math.NaN(), math.NaN()
	}
	if _, err := d.Residuals(); err == nil {
		t.Error("residuals were drawn that are all unknown")
	}
	d = fixture(t)
	d.Record.Measurands[0].Budget[0].Share = reduce.Number(math.NaN())
	if _, err := d.Shares(""); err == nil {
		t.Error("an unknown share was drawn")
	}
}

// The line between fitted values follows the law that they obey.
func TestGuide(t *testing.T) {
	s := &scale{lo: -10, hi: 10, to: 100}
	square := func(x float64) float64 { return 3 * (x - 0.1) * (x - 0.1) }
	inverse := func(x float64) float64 { return 7 / (x * x) }
	for _, c := range []struct {
		x []float64
		f func(float64) float64
	}{{[]float64{-10, -7, -4, 4, 7, 10}, square}, {[]float64{4, 6, 8, 12}, inverse}} {
		var y []float64
		for _, x := range c.x {
			y = append(y, c.f(x))
		}
		gx, gy, ok := guide(c.x, y, make([]bool, len(c.x)), s)
		if !ok {
			t.Fatal("no line")
		}
		for i := range gx {
			if math.Abs(gy[i]-c.f(gx[i])) > 1e-6*(math.Abs(c.f(gx[i]))+1) {
				t.Errorf("at %g the line is at %g, want %g", gx[i], gy[i], c.f(gx[i]))
			}
		}
	}
	// Values that x alone does not tell apart get no line.
	if _, _, ok := guide([]float64{1, 1, 2, 2}, []float64{1, 5, 2, 9}, make([]bool, 4), s); ok {
		t.Error("a line through a cloud")
	}
}

// Ellipses hold the stated share of a normal distribution: r² is −2 ln(1 − p)
// for two degrees of freedom, 5.99 at 95 % (chi-squared tables, common practice).
func TestPairs(t *testing.T) {
	axes := []Axis{{Name: "a"}, {Name: "b"}}
	f, err := Pairs("pairs", "Pairs", "", axes, nil, []float64{0, 0}, [][]float64{{1, 0}, {0, 1}}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	wellFormed(t, f.SVG())
	for _, bad := range [][][]float64{{{1, 0}}, {{0, 0}, {0, 1}}, {{math.NaN(), 0}, {0, 1}}, {{1}, {0, 1}}} {
		if _, err := Pairs("", "", "", axes, nil, []float64{0, 0}, bad, 0.95); err == nil {
			t.Errorf("covariance %v was drawn", bad)
		}
	}
}

func ExamplePlot() {
	kVm := si.MustUnit("kV/m")
	p := Plot{
		Title:  "Correction factor",
		X:      Axis{Name: "E", Unit: kVm},
		Y:      Axis{Name: "correction factor"},
		Series: []Series{{X: []float64{5e3, 10e3, 20e3}, Y: []float64{1.016, 1.015, 1.017}, UY: []float64{0.003, 0.003, 0.003}}},
	}
	f, err := p.Draw()
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(f, len(f.SVG()) > 1000)
	// Output: Correction factor true
}

func BenchmarkResiduals(b *testing.B) {
	d := fixture(b)
	for b.Loop() {
		f, err := d.Residuals()
		if err != nil {
			b.Fatal(err)
		}
		_ = f.SVG()
	}
}

// Of many readings in a rhythm, enough of each kind are looked at to find the
// lines they lie on.
func TestLinesOfManyReadings(t *testing.T) {
	d := fixture(t)
	r := d.Rows
	grow := func(v []float64) []float64 {
		out := make([]float64, 0, 500*len(v))
		for range 500 {
			out = append(out, v...)
		}
		return out
	}
	for c := range r.Predictors {
		r.Predictors[c] = grow(r.Predictors[c])
	}
	r.Response, r.Fitted, r.U, r.Residual = grow(r.Response), grow(r.Fitted), grow(r.U), grow(r.Residual)
	r.Standardised, r.Leverage, r.Studentised = grow(r.Standardised), grow(r.Leverage), grow(r.Studentised)
	r.N = len(r.Response)
	r.Excluded = make([]bool, r.N)
	d.Number, d.Groups = nil, nil
	v := d.choose()
	if v.x != 0 || len(v.series) != 4 || v.joined != 4 {
		t.Fatalf("axis %d with %d series, %d of them lines", v.x, len(v.series), v.joined)
	}
	for _, s := range v.series {
		rows := sparse(s.rows)
		x, y, ok := guide(pick(r.Predictors[0], rows), pick(r.Fitted, rows), make([]bool, len(rows)), &scale{})
		if !ok {
			t.Fatalf("no line for %s", s.name)
		}
		if low, high := slices.Min(x), slices.Max(x); high < 5.9e3 || low > -5.9e3 || math.Abs(y[0]-y[len(y)-1]) > 0.02*y[0] {
			t.Errorf("%s: a line from %g to %g, %g to %g", s.name, low, high, y[0], y[len(y)-1])
		}
	}
}

func TestWordsOfKeys(t *testing.T) {
	for key, want := range map[string]string{
		"channels.voltage.gain": "voltage gain", "contact_potential": "contact potential", "corrections.offset_current.current": "offset current",
		"corrections.image.height_offset": "image height offset", "vacuum_coulomb_constant": "vacuum Coulomb constant", "coulomb_constant": "Coulomb constant",
	} {
		if got := Words(key); got != want {
			t.Errorf("%s: %q, want %q", key, got, want)
		}
	}
}

// A reading left out that lies beyond the panel carries its residual, and fitted
// values that no line can join are dashes.
func TestFitTellsWhatItLeavesOut(t *testing.T) {
	d := fixture(t)
	rows := *d.Rows
	rows.Standardised = append([]float64(nil), rows.Standardised...)
	rows.Excluded = append([]bool(nil), rows.Excluded...)
	rows.Fitted = append([]float64(nil), rows.Fitted...)
	rows.Standardised[3], rows.Excluded[3] = 21.83, true
	for i := range rows.Fitted {
		rows.Fitted[i] *= 1 + 0.1*float64(i*7%11)
	}
	rows.Predictors, rows.PredictorNames = rows.Predictors[:1], rows.PredictorNames[:1]
	d.Rows, d.Groups = &rows, nil
	f, err := d.Fit()
	if err != nil {
		t.Fatal(err)
	}
	svg := f.SVG()
	for _, want := range []string{"1 (21.8)", "fitted values"} {
		if !strings.Contains(svg, want) {
			t.Errorf("no %q in the figure", want)
		}
	}
}
