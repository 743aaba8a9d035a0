package certificate

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"html"
	"io"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"github.com/beevik/etree"

	"example.org/guardring/pkg/si"
)

// text takes the tags off a page.
func text(page string) string {
	page = page[strings.Index(page, "<body>"):]
	page = regexp.MustCompile(`(?s)<svg.*?</svg>`).ReplaceAllString(page, "")
	page = strings.ReplaceAll(page, "<br>", " ")
	return html.UnescapeString(regexp.MustCompile(`<[^>]*>`).ReplaceAllString(page, "|"))
}

// TestFormsAgree: the numbers of the record, rounded by package si, stand in the
// HTML and the XML form; .ci/certificate holds all three forms to the record with
// a program of its own.
func TestFormsAgree(t *testing.T) {
	r := result(t, "field-meter")
	c := made(t, r)
	page := text(written(t, c, (*Certificate).HTML))
	doc := etree.NewDocument()
	if err := doc.ReadFromString(written(t, c, (*Certificate).XML)); err != nil {
		t.Fatal(err)
	}
	n := 0
	for _, m := range r.Record.Measurands {
		if !strings.HasPrefix(m.Name, "correction_factor") && !strings.HasPrefix(m.Name, "shift of") {
			continue
		}
		n++
		v, u := si.Round(float64(m.Value), float64(m.K*m.U))
		k := fmt.Sprintf("%.2f", float64(m.K))
		if want := "|" + v + "||" + u + "||" + k + "|"; !strings.Contains(page, want) {
			t.Errorf("HTML has no row %q", want)
		}
		found := false
		for _, real := range doc.FindElements("//si:real") {
			e := real.FindElement(".//si:valueExpandedMU")
			found = found || e != nil && real.SelectElement("si:value").Text() == v && e.Text() == u && real.FindElement(".//si:coverageFactor").Text() == k
		}
		if !found {
			t.Errorf("XML has no %s = %s ± %s, k = %s", m.Name, v, u, k)
		}
	}
	if n != 6 {
		t.Errorf("%d results were looked at; want 6", n)
	}
	for i, l := range doc.FindElements("//dcc:list") {
		for _, e := range l.FindElements(".//si:valueXMLList") {
			if got, want := len(strings.Fields(e.Text())), len(r.Record.Series[i].Points); got != want {
				t.Errorf("a list of series %d has %d values; want %d", i, got, want)
			}
		}
	}
}

// TestSameBytes: every form is the same each time.
func TestSameBytes(t *testing.T) {
	for name, form := range forms {
		a := written(t, made(t, result(t, "field-meter")), form)
		b := written(t, made(t, result(t, "field-meter")), form)
		if a != b {
			t.Errorf("%s: two runs differ", name)
		}
	}
}

// TestPages: page x of y and the identification on each, one end mark.
func TestPages(t *testing.T) {
	for _, name := range []string{"field-meter", "field-meter-50hz"} {
		c := made(t, result(t, name))
		page := text(written(t, c, (*Certificate).HTML))
		n := c.Pages()
		for i := range n {
			if want := fmt.Sprintf("Page %d of %d", i+1, n); strings.Count(page, want) != 1 {
				t.Errorf("%s: %q does not stand once", name, want)
			}
		}
		if got := strings.Count(page, "Certificate "+c.Identification); got != n {
			t.Errorf("%s: the identification stands at the head of %d of %d pages", name, got, n)
		}
		if strings.Count(page, "End of certificate "+c.Identification) != 1 {
			t.Errorf("%s: no end mark", name)
		}
		for i, p := range c.pages() {
			h := 0.0
			for _, a := range p {
				h += a.height
			}
			if h > bodyBottom-bodyTop || len(p) == 0 {
				t.Errorf("%s: page %d is %.1f points high; %.1f fit", name, i+1, h, bodyBottom-bodyTop)
			}
			if a := p[len(p)-1]; a.of.kind == heading || a.row == headerRow {
				t.Errorf("%s: page %d ends with %v", name, i+1, a.cells)
			}
		}
	}
}

// TestEscapes: names with the metacharacters of HTML and XML come out as they
// went in, and run nothing.
func TestEscapes(t *testing.T) {
	const nasty = `A&B <script>alert("1")</script> 'q' ]]> -- &lt; \ %s` + "\u202e\x00\ttail"
	shown := one(nasty)
	r := result(t, "field-meter")
	b := r.Bench
	b.Client.Name, b.Item.Model, b.Work.Laboratory, b.Work.Certificate = nasty, nasty, nasty, `ID"<&>'7`
	b.Work.Deviations = []string{nasty}
	b.Instruments[0].Serial = nasty
	b.Limits.Source = nasty
	c := made(t, r)
	page := written(t, c, (*Certificate).HTML)
	if strings.Contains(page, "<script") || strings.ContainsRune(page, '\u202e') {
		t.Error("HTML holds what was to be escaped")
	}
	if !strings.Contains(text(page), "alert(\"1\")") {
		t.Error("HTML lost a part of the name")
	}
	doc := etree.NewDocument()
	if err := doc.ReadFromString(written(t, c, (*Certificate).XML)); err != nil {
		t.Fatalf("XML: %v", err)
	}
	if got := doc.FindElement("//dcc:item/dcc:model").Text(); got != shown {
		t.Errorf("XML: model %q; want %q", got, shown)
	}
	if got := doc.FindElement("//dcc:customer/dcc:name/dcc:content").Text(); got != shown {
		t.Errorf("XML: client %q; want %q", got, shown)
	}
	for name, form := range forms {
		id, err := Identify([]byte(written(t, c, form)))
		if err != nil || id != `ID"<&>'7` {
			t.Errorf("%s: identification %q, %v", name, id, err)
		}
	}
}

// TestPDFFonts: a character that the fonts lack is refused, not left out.
func TestPDFFonts(t *testing.T) {
	r := result(t, "field-meter")
	r.Bench.Client.Name = "客 (invented)"
	c := made(t, r)
	if err := c.PDF(io.Discard); err == nil || !strings.Contains(err.Error(), "U+5BA2") {
		t.Errorf("error %v; want one that names the character", err)
	}
	if !strings.Contains(written(t, c, (*Certificate).HTML), "客") {
		t.Error("HTML lost the name")
	}
}

// TestAmendment: a new identification, the reason, and the SHA-256 of what is
// replaced.
func TestAmendment(t *testing.T) {
	old := map[string]string{}
	for name, form := range forms {
		old[name] = written(t, made(t, result(t, "field-meter")), form)
	}
	for name := range forms {
		r := result(t, "field-meter")
		r.Bench.Work.Replaces, r.Bench.Work.Reason = "old", "serial number corrected"
		s := Settings{Replaced: []Replaced{{File: "c." + name, Data: []byte(old[name])}}}
		if _, err := New(r, s); err == nil || !strings.Contains(err.Error(), "takes a new one") {
			t.Errorf("%s: the old identification was taken again: %v", name, err)
		}
		r.Bench.Work.Certificate = "DEMO-2026-0042-A"
		c, err := New(r, s)
		if err != nil {
			t.Fatal(err)
		}
		sum := sha256.Sum256([]byte(old[name]))
		hash := hex.EncodeToString(sum[:])
		for _, form := range []string{"html", "xml"} {
			got := strings.ReplaceAll(written(t, c, forms[form]), "<br>", "")
			for _, want := range []string{hash, "DEMO-2026-0042<", "serial number corrected"} {
				if !strings.Contains(got, want) {
					t.Errorf("%s replaced: %s lacks %q", name, form, want)
				}
			}
		}
	}
	// Without --replace the file is found beside the bench.
	r := result(t, "field-meter")
	r.Bench.Dir = t.TempDir()
	r.Bench.Work.Replaces, r.Bench.Work.Reason, r.Bench.Work.Certificate = "old.xml", "reason", "NEW"
	if _, err := New(r, Settings{}); err == nil || !strings.Contains(err.Error(), "work.replaces") {
		t.Errorf("a missing file: %v", err)
	}
	if err := os.WriteFile(filepath.Join(r.Bench.Dir, "old.xml"), []byte(old["xml"]), 0o644); err != nil {
		t.Fatal(err)
	}
	if c := made(t, r); c.Amendment.Replaces != "DEMO-2026-0042" {
		t.Errorf("replaces %q", c.Amendment.Replaces)
	}
	// A file that is no certificate is not replaced.
	if _, err := New(r, Settings{Replaced: []Replaced{{File: "x.html", Data: []byte("<html>")}}}); err == nil {
		t.Error("any file was replaced")
	}
	// An existing certificate without an amendment in the bench.
	if _, err := New(result(t, "field-meter"), Settings{Replaced: []Replaced{{File: "c.xml", Data: []byte(old["xml"])}}}); err == nil ||
		!strings.Contains(err.Error(), "work.reason") {
		t.Errorf("replaced without a reason: %v", err)
	}
}

// TestGolden holds the content of the printed forms, without figures.
func TestGolden(t *testing.T) {
	for _, name := range []string{"field-meter", "field-meter-50hz"} {
		c := made(t, result(t, name))
		c.Inputs = nil
		got := outline(c)
		path := filepath.Join("testdata", name+".txt")
		want, err := os.ReadFile(path)
		if err != nil || string(want) != got {
			if err := os.WriteFile(path+".got", []byte(got), 0o644); err != nil {
				t.Fatal(err)
			}
			t.Errorf("%s differs from %s.got", path, path)
		}
	}
}

// outline is the certificate as lines.
func outline(c *Certificate) string {
	var b strings.Builder
	for _, x := range c.sheet() {
		switch x.kind {
		case masthead:
			fmt.Fprintf(&b, "%s\n%s\n%s\n%s\n", c.Laboratory.Name, c.Laboratory.Address, c.Title, c.Identification)
		case heading:
			fmt.Fprintf(&b, "\n== %s\n", x.text)
		case facts:
			for _, f := range x.facts {
				fmt.Fprintf(&b, "%s: %s\n", f.Label, f.Text)
			}
		case para, end:
			b.WriteString(x.text + "\n")
		case notices:
			for _, s := range x.lines {
				b.WriteString("- " + s + "\n")
			}
		case table:
			for _, col := range x.table.columns {
				fmt.Fprintf(&b, "| %s %s ", col.name, col.unit)
			}
			b.WriteString("\n")
			for _, row := range x.table.rows {
				b.WriteString("| " + strings.Join(row, " | ") + "\n")
			}
		case drawing:
			b.WriteString("[" + x.fig.Title + "]\n")
		}
	}
	return b.String()
}

// TestOtherDefinition: as response, everything is the inverse.
func TestOtherDefinition(t *testing.T) {
	r := result(t, "field-meter-50hz")
	factor := made(t, r)
	r.Bench.Report.Definition = "response"
	r.Bench.Limits = nil
	c := made(t, r)
	for i := range c.Results {
		for j := range c.Results[i].Points {
			a, b := &factor.Results[i].Points[j].Value, &c.Results[i].Points[j].Value
			if d := a.value*b.value - 1; d > 1e-12 || d < -1e-12 {
				t.Errorf("%v is not the inverse of %v", b.value, a.value)
			}
			if d := (b.expanded/b.value)/(a.expanded/a.value) - 1; d > 1e-9 || d < -1e-9 {
				t.Errorf("relative U %v and %v differ", a.expanded/a.value, b.expanded/b.value)
			}
		}
	}
	written(t, c, (*Certificate).HTML)

	// The shift by adjustment is the record's, which is that of the factor.
	r = result(t, "field-meter")
	r.Bench.Report.Definition = "response"
	r.Bench.Limits = nil
	if c := made(t, r); len(c.Shifts) != 2 || c.Shifts[0].Name != "correction factor, 2 kV/m" {
		t.Errorf("shifts %+v; want two of the correction factor", c.Shifts)
	}
}

// TestOtherKind: a bench without series states all its measurands, with the same
// gate less what only field meters need.
func TestOtherKind(t *testing.T) {
	r := result(t, "attracted-disc")
	meter := result(t, "field-meter").Bench
	b := r.Bench
	b.Client, b.Item, b.Work, b.Instruments = meter.Client, meter.Item, meter.Work, meter.Instruments
	b.Work.Adjusted = false
	b.Environment = meter.Environment
	c := made(t, r)
	if len(c.Results) != len(r.Record.Measurands) {
		t.Errorf("%d results; the record has %d measurands", len(c.Results), len(r.Record.Measurands))
	}
	m := &r.Record.Measurands[0]
	_, unit := si.Prefixed(float64(m.Value), si.MustUnit(m.Unit))
	v, u := si.Round(unit.FromSI(float64(m.Value)), unit.DeltaFromSI(float64(m.K*m.U)))
	page := text(written(t, c, (*Certificate).HTML))
	if want := "|" + v + "||" + u + "||" + unit.Unicode() + "|"; !strings.Contains(page, want) {
		t.Errorf("HTML has no row %q", want)
	}
	if doc := written(t, c, (*Certificate).XML); !strings.Contains(doc, `<si:unit>\pico\farad\metre\tothe{-1}</si:unit>`) {
		t.Error("XML does not state the permittivity in D-SI words")
	}
	written(t, c, (*Certificate).PDF)
}
