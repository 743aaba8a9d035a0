package kernel

import (
	"encoding/json"
	"reflect"
	"strings"
	"testing"
	"testing/fstest"

	"example.org/guardring/pkg/kernel/docindex"
)

func TestTrailingOperand(t *testing.T) {
	for s, want := range map[string]string{
		"a":                        "a",
		"x := a.b":                 "a.b",
		"f(a.b":                    "a.b",
		"a.b(1, \")\").c[2]":       "a.b(1, \")\").c[2]",
		"1 + (a)":                  "(a)",
		"a . b":                    "a . b",
		"return a.b":               "a.b",
		"if f(x)":                  "f(x)",
		"\"µ\" + µ.ring":           "µ.ring",
		"a.b.(T)":                  "a.b.(T)",
		")":                        "",
		"1.5":                      "",
		"":                         "",
		"func() int { return 1 }(": "",
		"a +":                      "",
		"p[i][j]":                  "p[i][j]",
		"m[\"a]\"].x":              "m[\"a]\"].x",
	} {
		if got := trailingOperand(s); got != want {
			t.Errorf("%q ends in %q, want %q", s, got, want)
		}
	}
}

func TestByteOffset(t *testing.T) {
	const s = "µ±a"
	for points, want := range map[int]int{-1: 0, 0: 0, 1: 2, 2: 4, 3: 5, 9: 5} {
		if got := byteOffset(s, points); got != want {
			t.Errorf("%d code points are %d bytes, want %d", points, got, want)
		}
	}
}

func TestComplete(t *testing.T) {
	f := newFake()
	f.names = []Name{{Name: "volume"}, {Name: "voltage", Kind: "var", Type: "float64"}, {Name: "voltage"}}
	f.described = map[string]*Description{"µ.ring": {Members: []Name{{Name: "Width"}, {Name: "Gap"}}}}
	for code, want := range map[string][]string{
		"x := vo":          {"voltage", "volume"},
		"ra":               {"range"},
		"\"±±\" + µ.ring.": {"Gap", "Width"},
		"µ.ring.W":         {"Width"},
		"µ.ring.\n\tG":     {"Gap"},
		"// vo":            nil,
		"\"vo":             nil,
		"f(x...":           nil,
		"µ.ring()":         nil,
		"unknown.W":        nil,
		"":                 nil,
	} {
		var got []string
		matches, start, end := Complete(f, code, 1000)
		for _, m := range matches {
			got = append(got, m.Text)
		}
		if !reflect.DeepEqual(got, want) || start > end || end != len([]rune(code)) {
			t.Errorf("%q: %q from %d to %d, want %q", code, got, start, end, want)
		}
	}
	matches, _, _ := Complete(f, "volta", 5)
	if len(matches) != 1 || matches[0].Type != "float64" || matches[0].Kind != "var" {
		t.Errorf("%+v", matches)
	}
}

func TestIsCompleteText(t *testing.T) {
	for code, want := range map[string][2]string{
		"x":           {"complete", ""},
		"x…":          {"incomplete", ""},
		"x!":          {"invalid", ""},
		"f(":          {"incomplete", "\t"},
		"f({[":        {"incomplete", "\t\t\t"},
		"f)":          {"invalid", ""},
		"f(]":         {"invalid", ""},
		"`a":          {"incomplete", ""},
		"/* a":        {"incomplete", ""},
		"\"a":         {"invalid", ""},
		"'a":          {"invalid", ""},
		"// a (":      {"complete", ""},
		"x // \"":     {"complete", ""},
		"f( // (":     {"incomplete", "\t"},
		"\"(\" // ok": {"complete", ""},
		" \n ":        {"complete", ""},
	} {
		status, indent := IsComplete(newFake(), code)
		if status != want[0] || indent != want[1] {
			t.Errorf("%q is %s with indent %q, want %q", code, status, indent, want)
		}
	}
}

func TestInspectText(t *testing.T) {
	pkg := docindex.Package{Path: "lab/ring", Name: "ring", Doc: "Package ring guards.", Entries: map[string]docindex.Entry{
		"Guard":       {Kind: "func", Decl: "func Guard(gap float64) error", Doc: "Guard sets the gap.\n\n\tcode <here>"},
		"Ring":        {Kind: "type", Decl: "type Ring struct{ Gap float64 }", Doc: "Ring is a ring."},
		"Ring.Set":    {Kind: "method", Decl: "func (Ring) Set()", From: "lab/ring.Base"},
		"Base.Set":    {Kind: "method", Decl: "func (Base) Set()", Doc: "Set sets."},
		"Ring.Absent": {Kind: "method", Decl: "func (Ring) Absent()", From: "lab/none.Base"},
	}}
	data, err := json.Marshal(pkg)
	if err != nil {
		t.Fatal(err)
	}
	docs := docindex.New(fstest.MapFS{docindex.FileName("lab/ring"): {Data: data}})
	f := newFake()
	f.described = map[string]*Description{
		"ring":       {Kind: "package", Type: "lab/ring", Path: "lab/ring", Members: []Name{{Name: "Guard", Kind: "func"}}},
		"ring.Guard": {Kind: "func", Type: "func(float64) error", Path: "lab/ring", Symbol: "Guard"},
		"r":          {Kind: "var", Type: "ring.Ring", Path: "lab/ring", Symbol: "Ring", Members: []Name{{Name: "Set", Kind: "method", Type: "func()"}}},
		"r.Set":      {Kind: "method", Type: "func()", Path: "lab/ring", Symbol: "Ring.Set"},
		"own":        {Kind: "func", Type: "func(int) int"},
	}
	f.values = map[string]string{"r": "{Gap:3}"}
	for _, c := range []struct {
		code   string
		cursor int
		detail int
		want   []string
	}{
		{"ring.Guard(1)", 8, 0, []string{"func Guard(gap float64) error", "Guard sets the gap."}},
		{"ring.Guard(1, ", 14, 0, []string{"func Guard(gap float64) error"}},
		{"µ + ring.Guard()", 16, 0, []string{"func Guard"}},
		{"ring", 1, 1, []string{"package ring", "guards", "func Guard"}},
		{"r", 1, 0, []string{"var r ring.Ring", "Ring is a ring."}},
		{"r", 1, 1, []string{"Now: {Gap:3}", "method Set", "type Ring struct"}},
		{"r.Set", 5, 0, []string{"func (Ring) Set()", "Set sets.", "Promoted from lab/ring.Base"}},
		{"own", 3, 0, []string{"func own(int) int"}},
	} {
		forms, ok := Inspect(f, docs, c.code, c.cursor, c.detail)
		text, _ := forms["text/plain"].(string)
		for _, w := range c.want {
			if !ok || !strings.Contains(text, w) {
				t.Errorf("%q at %d: %q lacks %q", c.code, c.cursor, text, w)
			}
		}
		if h, _ := forms["text/html"].(string); strings.Contains(h, "<here>") {
			t.Errorf("%q: HTML with what the documentation says left raw", c.code)
		}
	}
	for _, code := range []string{"", "unknown", "// ring", "1 + "} {
		if forms, ok := Inspect(f, docs, code, len(code), 0); ok {
			t.Errorf("%q: %v", code, forms)
		}
	}
}

func TestProgressForms(t *testing.T) {
	var shown []string
	b := &bar{show: func(forms map[string]any, update bool) {
		s, _ := forms["text/plain"].(string)
		if update {
			s = "↻ " + s
		}
		shown = append(shown, s)
	}}
	for i := int64(1); i <= 1000; i++ {
		b.report(progress("trials", i, 1000))
	}
	b.report(progress("trials", 5, 1000)) // late from another goroutine
	b.finish()
	if len(shown) < 2 || shown[0] != "trials: 1 of 1000 (0 %)" || shown[len(shown)-1] != "↻ trials: 1000 of 1000 (100 %)" || len(shown) > 20 {
		t.Errorf("%q", shown)
	}
	b.finish()
	if n := len(shown); shown[n-1] != "↻ trials: 1000 of 1000 (100 %)" {
		t.Errorf("%q", shown[n-1])
	}
	if got := progressForms(progress("a<b", 3, 0))["text/html"].(string); !strings.Contains(got, "a&lt;b: 3") {
		t.Error(got)
	}
	if got := progressForms(progress("", 30, 20))["text/plain"]; got != "working: 20 of 20 (100 %)" {
		t.Error(got)
	}
}
