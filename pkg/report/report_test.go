package report

import (
	"bytes"
	"encoding/xml"
	"flag"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"runtime"
	"strings"
	"testing"

	"example.org/guardring/pkg/reduce"
)

var update = flag.Bool("update", false, "rewrite the golden files")

var forms = []struct {
	name  string
	write func(io.Writer, *reduce.Record) error
}{
	{"report.txt", TextRecord}, {"report.html", HTMLRecord}, {"report.md", MarkdownRecord}, {"report.tex", LaTeXRecord},
}

// golden compares with a file in testdata; what was made instead is left beside
// it as .got.
func golden(t *testing.T, name string, got []byte) {
	t.Helper()
	path := filepath.Join("testdata", name)
	if *update {
		if err := os.WriteFile(path, got, 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	want, err := os.ReadFile(path)
	if err != nil {
		t.Fatalf("%v; make it with go test -run %s -update", err, t.Name())
	}
	if bytes.Equal(got, want) {
		return
	}
	if err := os.WriteFile(path+".got", got, 0o644); err != nil {
		t.Fatal(err)
	}
	line := 1
	for i := range min(len(got), len(want)) {
		if got[i] != want[i] {
			break
		}
		if got[i] == '\n' {
			line++
		}
	}
	t.Errorf("%s differs from line %d on; see %s.got", path, line, path)
}

func render(t testing.TB, f func(io.Writer, *reduce.Record) error, rec *reduce.Record) string {
	t.Helper()
	var b bytes.Buffer
	if err := f(&b, rec); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// figures cuts the drawings out of a page: package figure checks them.
var figures = regexp.MustCompile(`(?s)<svg.*?</svg>`)

func TestForms(t *testing.T) {
	for _, f := range forms {
		t.Run(f.name, func(t *testing.T) {
			s := render(t, f.write, fixture(t))
			if f.name == "report.html" {
				if n := len(figures.FindAllString(s, -1)); n != 2 {
					t.Errorf("the page has %d figures; the fit and the residuals make two", n)
				}
				s = figures.ReplaceAllString(s, "<svg/>")
			}
			golden(t, f.name, []byte(s))
		})
	}
}

func TestSameBytes(t *testing.T) {
	for _, f := range forms {
		var first string
		for _, cores := range []int{1, 2, 2} {
			before := runtime.GOMAXPROCS(cores)
			s := render(t, f.write, fixture(t))
			runtime.GOMAXPROCS(before)
			if first == "" {
				first = s
			} else if s != first {
				t.Errorf("%s: bytes differ between runs", f.name)
			}
		}
	}
}

// What practice.md section 7 wants told stands in every form.
func TestEverythingIsTold(t *testing.T) {
	rec := fixture(t)
	plain := strings.NewReplacer("$-$", "−", "{-}", "-", "~", " ", "\u00a0", " ", `\textquotesingle{}`, "'", "&#39;", "'", `\`, "",
		`$\mu$`, "µ", `$\pm$`, "±", "▌ ", "", "$", "")
	blanks := regexp.MustCompile(`\s+`)
	for _, f := range forms {
		s := blanks.ReplaceAllString(plain.Replace(render(t, f.write, rec)), " ")
		for _, want := range []string{
			"8.8690(52) pF/m", "8.869 pF/m ± 0.010 pF/m (k = 2.01, p = 95.45 %)", // result, expanded
			"4.7 mJ (limit 350 mJ)", "940 nC (limit 50 µC)", "1.7 MV/m", "local codes and licensed practice prevail", // cautions
			"8.81", "0.0 ± 8.0", "0.0031", "0.0052", // start, prior, u
			"0.929", "−0.005", "−0.001", // all correlations
			"79.88 with 69 degrees of freedom, p = 0.17", "Birge ratio", "1.08",
			"force area", "410", "62", "ppm", "off",
			"guard gap", "38.2", "rectangular", "−0.00016", "3.2",
			"JCGM 101 clause 8", "confirms the law",
			"Durbin–Watson", "leakage", "It has not been applied",
			"spark noted in the log", "9b2e7c61a05d4f38b1c6e2f7a89d0c35e4f61b7a2d8c90e3f5a6b7c8d9e0f112",
			"seed 0", "guardring 0.1.0",
			rec.Warnings[0], rec.Warnings[1],
		} {
			if f.name == "report.tex" {
				s = strings.ReplaceAll(s, "Durbin--Watson", "Durbin–Watson")
			}
			if !strings.Contains(s, want) {
				t.Errorf("%s does not say %q", f.name, want)
			}
		}
		if n := strings.Count(s, "licensed practice prevail"); n != 1 {
			t.Errorf("%s gives the cautions %d times", f.name, n)
		}
	}
}

func TestTextWidth(t *testing.T) {
	for i, line := range strings.Split(render(t, TextRecord, fixture(t)), "\n") {
		if n := cells(line); n > columns {
			t.Errorf("line %d is %d columns wide: %s", i+1, n, line)
		}
		if strings.TrimRight(line, " ") != line {
			t.Errorf("line %d ends in blanks", i+1)
		}
	}
}

// hostile puts s wherever a text comes from outside.
func hostile(t testing.TB, s string) *reduce.Record {
	rec := fixture(t)
	rec.Title, rec.Model, rec.Guardring = s, s, s
	rec.Warnings = []string{s}
	rec.Run.Command = s
	rec.Run.Options = map[string]string{s: s}
	for i := range rec.Inputs {
		rec.Inputs[i].File, rec.Inputs[i].SHA256 = s, s
	}
	for i := range rec.Exclusions {
		rec.Exclusions[i].File, rec.Exclusions[i].Reason = s, s
	}
	for i := range rec.Corrections {
		rec.Corrections[i].Name, rec.Corrections[i].Doc, rec.Corrections[i].Unit = s, s, s
	}
	for i := range rec.Fit.Parameters {
		rec.Fit.Parameters[i].Name, rec.Fit.Parameters[i].Unit = s, s
	}
	rec.Fit.Reason, rec.Fit.Method, rec.Fit.ResponseUnit = s, s, s
	for i := range rec.Measurands {
		m := &rec.Measurands[i]
		m.Name, m.Doc, m.Unit = s, s, s
		for k := range m.Budget {
			m.Budget[k].Input, m.Budget[k].Group, m.Budget[k].Unit, m.Budget[k].Shape, m.Budget[k].Source = s, s, s, s, s
		}
	}
	for i := range rec.Diagnosis.Tests {
		rec.Diagnosis.Tests[i].Name, rec.Diagnosis.Tests[i].Doc = s, s
	}
	for i := range rec.Diagnosis.Causes {
		rec.Diagnosis.Causes[i].Name, rec.Diagnosis.Causes[i].Doc = s, s
	}
	return rec
}

func TestHostileText(t *testing.T) {
	attacks := []string{
		`<script>alert(1)</script>`, `"><img src=x onerror=alert(1)>`, `]]>`, `</style><script>`, `--><!--`, `&lt;b&gt;`, `' onload='x`,
		`\input{/etc/passwd}`, `\end{document}`, `^^5cinput{x}`, `$\write18{x}$`, `%`, `{`, `}`, `a & b # c _ d ~ e ^ f`,
		`=cmd()`, `[x](javascript:alert(1))`, "![](http://example.org/x)", "`code`", "| a | b |", "# heading", "1. item", "- item",
		"line\nbreak\r\n\tand \x1b[31mred\x07", "\xff\xfe broken", "\u202eright to left", strings.Repeat("long ", 300), strings.Repeat("w", 5000),
	}
	for _, a := range attacks {
		rec := hostile(t, a)
		h := render(t, HTMLRecord, rec)
		checkHTML(t, a, h)
		x := render(t, TextRecord, rec)
		if strings.ContainsAny(x, "\x1b\x07\r\t\u202e") {
			t.Errorf("text carries control characters of %q", a)
		}
		l := render(t, LaTeXRecord, rec)
		if strings.Contains(l, `\input`) || strings.Contains(l, `\write`) || strings.Contains(l, "^^") || strings.Count(l, `\end{document}`) != 1 {
			t.Errorf("LaTeX passes on %q", a)
		}
		if n := braces(l); n != 0 {
			t.Errorf("LaTeX braces are %d out of balance for %q", n, a)
		}
		m := render(t, MarkdownRecord, rec)
		if strings.Contains(m, "<script") || strings.Contains(m, "<img") || regexp.MustCompile(`[^\\]\]\(`).MatchString(m) || regexp.MustCompile(`[^\\]!\[`).MatchString(m) {
			t.Errorf("Markdown passes on %q", a)
		}
	}
}

// checkHTML reads a page as strict XML after closing its void elements: only
// elements of ours may appear.
func checkHTML(t *testing.T, attack, page string) {
	t.Helper()
	page = strings.Replace(page, "<!DOCTYPE html>", "", 1)
	page = regexp.MustCompile(`<(meta [^>]*|br)>`).ReplaceAllString(page, "<$1/>")
	page = regexp.MustCompile(`(?s)<style>.*?</style>`).ReplaceAllString(page, "")
	known := map[string]bool{}
	for _, n := range strings.Fields("html head meta title style body main header h1 p aside strong section h2 div dl dt dd small b br ul li table caption thead tbody tr th td span figure figcaption svg path text tspan") {
		known[n] = true
	}
	d := xml.NewDecoder(strings.NewReader(page))
	for {
		tok, err := d.Token()
		if err == io.EOF {
			return
		}
		if err != nil {
			t.Errorf("page with %q is broken: %v", attack, err)
			return
		}
		if e, ok := tok.(xml.StartElement); ok {
			if !known[e.Name.Local] {
				t.Errorf("page with %q has an element <%s>", attack, e.Name.Local)
			}
			for _, a := range e.Attr {
				if strings.HasPrefix(strings.ToLower(a.Name.Local), "on") {
					t.Errorf("page with %q has an attribute %s", attack, a.Name.Local)
				}
			}
		}
	}
}

// braces counts opening less closing braces that LaTeX would see.
func braces(s string) int {
	s = strings.NewReplacer(`\\`, "", `\{`, "", `\}`, "").Replace(s)
	return strings.Count(s, "{") - strings.Count(s, "}")
}

// A record with next to nothing in it is reported, not refused.
func TestSparseRecords(t *testing.T) {
	nan := reduce.Number(math.NaN())
	singular := fixture(t)
	singular.Fit.Status, singular.Fit.Reason = "singular", "gap_offset and permittivity can't be told apart"
	singular.Measurands = nil
	for i := range singular.Fit.Parameters {
		singular.Fit.Parameters[i].U, singular.Fit.Parameters[i].UTotal = nan, nan
		for k := range singular.Fit.Covariance[i] {
			singular.Fit.Covariance[i][k] = nan
		}
	}
	singular.Fit.PValue, singular.Fit.BirgeRatio, singular.Fit.ChiSquared = nan, nan, nan
	law := fixture(t)
	law.Run.Trials = 0
	for i := range law.Measurands {
		law.Measurands[i].MonteCarlo = nil
	}
	scaled := fixture(t)
	scaled.Fit.ScaledByResiduals, scaled.Fit.PValue = true, nan
	over := fixture(t)
	over.Hazard.Energy, over.Hazard.Charge, over.Hazard.Field = 0.45, 6e-5, 2.9e6
	for _, c := range []struct {
		name string
		rec  *reduce.Record
		want []string
	}{
		{"empty", &reduce.Record{}, []string{"No measurand is stated"}},
		{"singular", singular, []string{"can't be told apart", "unknown", "the warnings say which"}},
		{"law", law, []string{"rests on the law of propagation alone", "law only"}},
		{"scaled", scaled, []string{"The noise of the readings was not stated"}},
		{"over", over, []string{"The stored energy, 450 mJ, exceeds the limit of 350 mJ.", "The charge, 60 µC, exceeds the limit of 50 µC.", "near the breakdown of the gas"}},
	} {
		for _, f := range forms {
			s := render(t, f.write, c.rec)
			if strings.Contains(s, "NaN") {
				t.Errorf("%s, %s: a NaN is shown", c.name, f.name)
			}
			if f.name != "report.txt" {
				continue
			}
			flat := regexp.MustCompile(`[\s▌]+`).ReplaceAllString(s, " ")
			for _, w := range c.want {
				if !strings.Contains(flat, w) {
					t.Errorf("%s: the text does not say %q:\n%s", c.name, w, s)
				}
			}
		}
	}
}

func TestWriteErrorsAreReturned(t *testing.T) {
	for _, f := range forms {
		if err := f.write(broken{}, fixture(t)); err == nil {
			t.Errorf("%s: a failed write went unnoticed", f.name)
		}
	}
}

type broken struct{}

func (broken) Write([]byte) (int, error) { return 0, fmt.Errorf("disk full") }

func BenchmarkHTML(b *testing.B) {
	rec := fixture(b)
	for b.Loop() {
		if err := HTMLRecord(io.Discard, rec); err != nil {
			b.Fatal(err)
		}
	}
}

// FuzzEscapes puts any text wherever text comes from outside: the page stays a
// page of our elements, LaTeX keeps its braces, the text form its lines.
func FuzzEscapes(f *testing.F) {
	for _, s := range []string{"<script>", `\input{x}`, "]]>", "=cmd()", "a|b", "\x1b[0m", "\xff", "日本", "1×10⁻³ µΩ·m²"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		if len(s) > 200 {
			return
		}
		rec := hostile(t, s)
		rec.Rows = nil // package figure has its own checks
		checkHTML(t, s, render(t, HTMLRecord, rec))
		l := render(t, LaTeXRecord, rec)
		if braces(l) != 0 || strings.Count(l, `\end{document}`) != 1 {
			t.Errorf("LaTeX is broken by %q", s)
		}
		x := render(t, TextRecord, rec)
		for _, r := range x {
			if r < 0x20 && r != '\n' || r == 0x7f {
				t.Errorf("text has a control character for %q", s)
			}
		}
	})
}
