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
