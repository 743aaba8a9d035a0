package replay

import (
	"fmt"
	"math"
	"strings"
	"testing"
)

// TestWordsOf: numbers in the forms of GUM 7.2.2 and those that only look like
// numbers.
func TestWordsOf(t *testing.T) {
	for _, c := range []struct {
		in   string
		want string // value/u of each number
	}{
		{"permittivity = 8.8595(39) pF/m", "8.8595/0.0039"},
		{"8.8595 pF/m ± 0.0079 pF/m (k = 2.03, p = 95.45 %)", "8.8595 0.0079 2.03 95.45"},
		{"100.021 47(35) g", "100.021 47/35"}, // digits in groups are read apart
		{"−1.81, reading 37.", "-1.81 37"},
		{"F = 3.0e-05 N, +0.07 u", "3e-05 0.07"},
		{"1.5 × 10⁻¹² F and 2(1)×10³", "1.5e-12 2000/1000"},
		{"record 2026-03-04 at 10:15:00 of go1.26.8 and v0.17.0, 0.1.0", ""},
		{"L-2025-1190 h1:Ol/a6VHY06N+5gPfewswymoRb5ZcKDXWVaVegcx4hbI= f0effb87aa105ed4", ""},
		{"─── 12 ───│7│", "12 7"},
		{"x1=-2;3m .5", "-2 0.5"},
		{"", ""},
	} {
		var got []string
		for _, w := range wordsOf(c.in) {
			if !w.num {
				continue
			}
			s := fmt.Sprint(w.value)
			if w.u > 0 {
				s += fmt.Sprintf("/%.6g", w.u)
			}
			got = append(got, s)
		}
		if s := strings.Join(got, " "); s != c.want {
			t.Errorf("%q: numbers %q, want %q", c.in, s, c.want)
		}
	}
}

func compared(t *testing.T, tolerance float64, run func(c *Comparison)) *Comparison {
	t.Helper()
	c, err := newComparison("x", tolerance)
	if err != nil {
		t.Fatal(err)
	}
	run(c)
	return c
}

func TestPrinted(t *testing.T) {
	const stored = "Result\n  permittivity   8.8595(39) pF/m\n  zero           15.1 µm\nend"
	for _, c := range []struct {
		name, now                    string
		tolerance                    float64
		identical, within, different int
		first                        string // of the differences: name, stored, now, in u
	}{
		{"the same", stored, 0, 3, 0, 0, ""},
		{"wider column", strings.ReplaceAll(stored, "  ", "     "), 0, 3, 0, 0, ""},
		{"changed number", strings.Replace(stored, "8.8595(39)", "8.8634(39)", 1), 0, 1, 0, 1, "permittivity|8.8595(39)|8.8634(39)|+1.00"},
		{"within half an u", strings.Replace(stored, "8.8595(39)", "8.8597(39)", 1), 0.1, 2, 1, 0, "permittivity|8.8595(39)|8.8597(39)|+0.05"},
		{"changed u", strings.Replace(stored, "(39)", "(40)", 1), 0, 1, 0, 1, "permittivity|8.8595(39)|8.8595(40)|"},
		{"changed word", strings.Replace(stored, "zero", "offset", 1), 0, 1, 0, 1, "line 3|zero           15.1 µm|offset           15.1 µm|"},
		{"a line more", strings.Replace(stored, "end", "p = 0.36\nend", 1), 0, 2, 0, 1, "line 4|(nothing)|p = 0.36|"},
		{"a line less", strings.Replace(stored, "  zero           15.1 µm\n", "", 1), 0, 1, 0, 1, "line 3|zero           15.1 µm|(nothing)|"},
	} {
		got := compared(t, c.tolerance, func(x *Comparison) { x.printed("cell", stored, c.now, 0) })
		if got.Identical != c.identical || got.Within != c.within || got.Different != c.different {
			t.Errorf("%s: %d identical, %d within, %d different; want %d, %d, %d: %+v", c.name, got.Identical, got.Within, got.Different, c.identical, c.within, c.different, got.Differences)
		}
		if c.first == "" {
			continue
		}
		if len(got.Differences) != 1 {
			t.Errorf("%s: %+v", c.name, got.Differences)
			continue
		}
		d := got.Differences[0]
		in := ""
		if d.InU != nil {
			in = fmt.Sprintf("%+.2f", *d.InU)
		}
		if s := strings.Join([]string{d.Name, d.Stored, d.Now, in}, "|"); s != c.first {
			t.Errorf("%s: %q, want %q", c.name, s, c.first)
		}
	}
}

// TestVersionsAreNotes: another build of the tool is told, and is no difference.
func TestVersionsAreNotes(t *testing.T) {
	sum := func(letter string) string { return "h1:" + strings.Repeat(letter, 43) + "=" }
	a := "guardring 0.1.0\nGo go1.26.8 for linux/amd64\nx.org/a v1.0.0 " + sum("a") + "\n"
	b := "guardring 0.2.0\nGo go1.27 for linux/arm64\nx.org/a v1.1.0 " + sum("b") + "\nx.org/b v0.1.0 " + sum("c") + "\n"
	c := compared(t, 0, func(c *Comparison) { c.printed("cell", a, b, 0) })
	if c.Different != 0 || len(c.Notes) != 4 {
		t.Errorf("%d different, notes %q", c.Different, c.Notes)
	}
	cells := strings.NewReplacer(" ", "</td><td>")
	c = compared(t, 0, func(c *Comparison) { c.printed("cell, text/html", cells.Replace(a), cells.Replace(b), 0) })
	if c.Different != 0 || len(c.Notes) != 0 {
		t.Errorf("%+v, notes %q", c.Differences, c.Notes)
	}
}

func TestRecords(t *testing.T) {
	const stored = `{"format":1,"guardring":"0.1.0","run":{"seed":0},"inputs":[{"file":"bench.toml","sha256":"aa"}],
"fit":{"parameters":[{"name":"offset","value":1e-6,"u":1e-6,"u_total":2e-6}],"covariance":[[4,0],[0,9]],"p_value":null},
"measurands":[{"name":"permittivity","value":8.8e-12,"u":4e-15,"interval":[8.7e-12,8.9e-12],"monte_carlo":{"delta":1e-18,"agrees":true}}],"warnings":["a"]}`
	a, err := parseRecord([]byte(stored))
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		old, with string
		tolerance float64
		want      string // name, in u, within
	}{
		{`"value":8.8e-12`, `"value":8.802e-12`, 0, "measurands.permittivity.value|+0.500|false"},
		{`"value":8.8e-12`, `"value":8.800004e-12`, 0.01, "measurands.permittivity.value|+0.001|true"},
		{`[8.7e-12,`, `[8.704e-12,`, 0, "measurands.permittivity.interval[1]|+1.000|false"},
		{`"value":1e-6,"u":1e-6`, `"value":3e-6,"u":1e-6`, 0, "fit.parameters.offset.value|+1.000|false"},
		{`"value":1e-6,"u":1e-6`, `"value":1.0000000000001e-6,"u":1e-6`, 0, "fit.parameters.offset.value|+0.000|true"},
		{`[4,0]`, `[4,1e-12]`, 0, "fit.covariance[1][2]||true"},
		{`[4,0]`, `[4,1e-6]`, 0, "fit.covariance[1][2]||false"},
		{`"p_value":null`, `"p_value":0.5`, 0, "fit.p_value||false"},
		{`"delta":1e-18`, `"delta":2e-18`, 0, "measurands.permittivity.monte_carlo.delta|+0.000|false"},
		{`"agrees":true`, `"agrees":false`, 0, "measurands.permittivity.monte_carlo.agrees||false"},
		{`"seed":0`, `"seed":7`, 0, "run.seed||false"},
		{`"sha256":"aa"`, `"sha256":"ab"`, 0, "inputs.bench.toml.sha256||false"},
		{`["a"]`, `["a","b"]`, 0, "warnings[2]||false"},
		{`,"warnings":["a"]`, ``, 0, "warnings||false"},
		{`"guardring":"0.1.0"`, `"guardring":"0.2.0"`, 0, ""},
	} {
		if strings.Count(stored, c.old) != 1 {
			t.Fatalf("%s stands %d times", c.old, strings.Count(stored, c.old))
		}
		b, err := parseRecord([]byte(strings.Replace(stored, c.old, c.with, 1)))
		if err != nil {
			t.Fatal(err)
		}
		got := compared(t, c.tolerance, func(x *Comparison) { x.records("", a, b) })
		var all []string
		for _, d := range got.Differences {
			in := ""
			if d.InU != nil {
				in = fmt.Sprintf("%+.3f", *d.InU)
			}
			all = append(all, fmt.Sprintf("%s|%s|%v", d.Name, in, d.Within))
		}
		if s := strings.Join(all, "; "); s != c.want {
			t.Errorf("%s → %s: %q, want %q", c.old, c.with, s, c.want)
		}
	}
}

func TestBadTolerance(t *testing.T) {
	for _, x := range []float64{-1, math.NaN(), math.Inf(1)} {
		if _, err := newComparison("x", x); err == nil {
			t.Errorf("tolerance %g is taken", x)
		}
	}
}
