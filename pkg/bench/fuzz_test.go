package bench

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"testing"

	"example.org/guardring/pkg/si"
)

// FuzzBench gives any bytes as bench.toml: there is a whole bench without an
// error, or no bench with an error of ours.
func FuzzBench(f *testing.F) {
	f.Add([]byte(goodBench))
	f.Add([]byte(strings.Replace(goodBench, dividerTable, dividerTable+"drift_per_year = \"0.002 %\"\nper_kelvin = \"5 mV/K\"\ncalibration_temperature = { value = \"23 degC\", u = \"0.3 K\" }\n[work]\nperformed = 2026-03-04\n", 1)))
	f.Add([]byte("format = 1\ntitle = \"x\"\nmodel = \"test-disc\"\nreadings = [{ file = \"readings.csv\" }]\n"))
	f.Add([]byte("format = 1\ntitle = \"x\"\nmodel = \"test-disc\"\nchannels.force = 1\nquantities = []\n"))
	f.Add([]byte("format = 1\nmodel = \"test-disc\"\n[[channels]]\n[[channels.force]]\n[exclude]\nrow = 1"))
	f.Add([]byte("\xef\xbb\xbfformat = 0x1\n'' = 1\n\"\\u0000\" = {a.b.c = 1}\n"))
	kind := testKind()
	dir := dataset(f, map[string]string{"bench.toml": "", "readings.csv": goodReadings})
	folder, err := openFolder(dir, benchFile)
	if err != nil {
		f.Fatal(err)
	}
	defer folder.root.Close()
	f.Fuzz(func(t *testing.T, data []byte) {
		b, err := folder.load(kind, dir, data, "", nil)
		if (b == nil) == (err == nil) {
			t.Fatalf("bench %v, error %v", b, err)
		}
		if err != nil {
			var e *Error
			if !errors.As(err, &e) || e.Error() == "" {
				t.Fatalf("error of type %T: %v", err, err)
			}
			return
		}
		if len(b.Scalars) != len(kind.Scalars) || b.Rows.N != 5 || len(b.Rows.Kind) != 5 || len(b.Rows.Time) != 5 || len(b.Rows.Excluded) != 5 {
			t.Fatalf("incomplete: %+v", b)
		}
		for _, s := range b.Scalars {
			if err := s.Dist.Check(); err != nil {
				t.Fatalf("%s: %v", s.Name, err)
			}
		}
		for _, c := range b.Channels {
			if len(c.Readings) != 5 || c.Gain.Check() != nil || c.Offset.Check() != nil {
				t.Fatalf("channel %+v", c)
			}
		}
		for _, in := range b.Instruments {
			for _, a := range in.Allowances {
				if err := a.Dist.Check(); err != nil {
					t.Fatalf("%s: %v", a.Name, err)
				}
			}
		}
		if _, err := b.Exclude(2, "x"); err != nil && !b.Rows.Excluded[1] {
			t.Fatal(err)
		}
	})
}

// FuzzCSV gives any bytes as a file: numbers are those of strconv.ParseFloat,
// records those of encoding/csv.
func FuzzCSV(f *testing.F) {
	f.Add([]byte(goodReadings), false)
	f.Add([]byte("a;b\n1,5;2\n"), true)
	f.Add([]byte("a\t\"b\"\r\n\"1\"\t9007199254740993\r\n"), false)
	f.Add([]byte("\xef\xbb\xbfa,b\n\n1e-400,\"2\n\"\n,0.1e+1\n"), false)
	f.Add([]byte("a,b\n1,\"2\n"), false)
	f.Add([]byte("a,b\n1\"2,3\n1\r2,3"), false)
	text, _ := messyCSV(30)
	f.Add(text, false)
	f.Fuzz(func(t *testing.T, data []byte, comma bool) {
		tab, err := ReadCSV(bytes.NewReader(data), "x.csv", CSVSettings{DecimalComma: comma, Missing: []string{"NA"}})
		if (tab == nil) == (err == nil) {
			t.Fatalf("table %v, error %v", tab, err)
		}
		// The same as words never fails where numbers did not.
		if err != nil {
			var e *Error
			if !errors.As(err, &e) || e.Error() == "" {
				t.Fatalf("error of type %T: %v", err, err)
			}
			return
		}
		if tab.N < 1 || len(tab.Number) != len(tab.Header) {
			t.Fatalf("incomplete: %+v", tab)
		}
		records := standardCSV(t, data, len(tab.Header), comma)
		if records == nil {
			return
		}
		if len(records)-1 != tab.N {
			t.Fatalf("%d records, encoding/csv has %d", tab.N, len(records)-1)
		}
		for c := range tab.Header {
			for i, x := range tab.Number[c] {
				cell := strings.Trim(records[i+1][c], " \t")
				if cell == "" || cell == "NA" {
					if !math.IsNaN(x) {
						t.Fatalf("record %d column %d: %v where nothing is", i, c, x)
					}
					continue
				}
				if comma {
					cell = strings.Replace(cell, ",", ".", 1)
				}
				want, err := strconv.ParseFloat(cell, 64)
				if err != nil || math.Float64bits(want) != math.Float64bits(x) {
					t.Fatalf("record %d column %d: %q read as %v, strconv says %v, %v", i, c, cell, x, want, err)
				}
			}
		}
	})
}

// standardCSV reads data by encoding/csv, nil where the two differ on purpose:
// carriage returns within a cell, and which separator it is; a comma that is the
// decimal sign separates nothing.
func standardCSV(t *testing.T, data []byte, columns int, decimalComma bool) [][]string {
	t.Helper()
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))
	if bytes.Contains(bytes.ReplaceAll(data, []byte("\r\n"), nil), []byte("\r")) {
		return nil
	}
	separators := ",;\t"
	if decimalComma {
		separators = ";\t"
	}
	for _, sep := range separators {
		r := csv.NewReader(bytes.NewReader(data))
		r.Comma = sep
		records, err := r.ReadAll()
		if err == nil && len(records) > 0 && len(records[0]) == columns {
			return records
		}
	}
	return nil
}

// FuzzDecimal compares numbers with strconv.ParseFloat.
func FuzzDecimal(f *testing.F) {
	for _, s := range []string{"0", "-1.5e-3", "9007199254740993", "1e400", ".5", "5.", "1e", "0x1p3", "1_0", "infinity", "1.7976931348623159e308"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		v, ok, _ := parseDecimal([]byte(s), '.')
		want, err := strconv.ParseFloat(s, 64)
		plain := s != "" && strings.Trim(s, "0123456789.eE+-") == "" && len(s) <= 4096
		if ok != (err == nil && plain) || ok && math.Float64bits(v) != math.Float64bits(want) {
			t.Fatalf("%q: %v %v, strconv says %v, %v", s, v, ok, want, err)
		}
		if v, end, ok := scanDecimal([]byte(s+";"), 0, '.'); ok {
			want, err := strconv.ParseFloat(s[:end], 64)
			if err != nil || math.Float64bits(v) != math.Float64bits(want) {
				t.Fatalf("%q: scan gives %v, strconv %v, %v", s[:end], v, want, err)
			}
		}
	})
}

// FuzzQuantity gives any text as a quantity table.
func FuzzQuantity(f *testing.F) {
	for _, s := range []string{`"50 mm"`, `{ value = "50 mm", u = "3 um", dof = 4 }`, `{ value = "5 mm", expanded = "6 um", probability = "95 %" }`,
		`{ value = "50 mm", half_width = "3 um", shape = "trapezoidal", beta = 0.5 }`, `{ readings = ["1 mm", "2 mm"] }`,
		`{ value = "1e-320 mm", relative_u = 1e-10 }`, `{ value = 1, relative_half_width = 1e300, shape = "arcsine" }`,
		`{ value = 3, shape = "gamma" }`, `{ start = "1 mm", adjust = true }`, `{ value = { x = [1, 2] } }`, `1979-05-27`} {
		f.Add(s)
	}
	mm := si.MustUnit("mm")
	f.Fuzz(func(t *testing.T, s string) {
		root, err := document("x", []byte("q = "+s))
		if err != nil || root.field("q") == nil {
			return
		}
		for _, want := range []wanted{{like: mm}, {like: si.One}, {any: true, like: si.One}} {
			r := reader{file: "x", root: root, grammar: &grammar{}}
			q, ok := r.quantity(root.field("q"), want)
			if ok != (len(r.errs.list) == 0) {
				t.Fatalf("%s: ok %v, errors %v", s, ok, r.errs.list)
			}
			if !ok {
				continue
			}
			if err := q.dist.Check(); err != nil {
				t.Fatalf("%s: %+v: %v", s, q.dist, err)
			}
			if q.hasValue && !want.any && q.unit.Dim != want.like.Dim {
				t.Fatalf("%s: unit %v", s, q.unit)
			}
		}
	})
}

// FuzzBudget gives any bytes as a budget file.
func FuzzBudget(f *testing.F) {
	f.Add([]byte(goodBudget))
	f.Add([]byte("format = 1\n[inputs]\na = 1\nb = \"2 mm\"\n[outputs.y]\nformula = \"a*b\"\nunit = \"m\"\n"))
	f.Add([]byte("format = 1\n[inputs.a]\nreadings = [1, 2]\n[outputs]\ny = 3\n"))
	f.Add([]byte("format = 1\n[outputs.y]\nformula = \"1\"\n[inputs]\n"))
	folder, err := openFolder(dataset(f, map[string]string{"budget.toml": "", "repeats.csv": goodRepeats}), "budget.toml")
	if err != nil {
		f.Fatal(err)
	}
	defer folder.root.Close()
	f.Fuzz(func(t *testing.T, data []byte) {
		b, err := folder.budget("budget.toml", data, "")
		if (b == nil) == (err == nil) {
			t.Fatalf("budget %v, error %v", b, err)
		}
		if err != nil {
			var e *Error
			if !errors.As(err, &e) || e.Error() == "" {
				t.Fatalf("error of type %T: %v", err, err)
			}
			return
		}
		if b.Model == nil || len(b.Model.Inputs) != len(b.Quantities) || len(b.Outputs) == 0 || len(b.Model.Outputs) != len(b.Outputs) {
			t.Fatalf("incomplete: %+v", b)
		}
		for _, q := range b.Quantities {
			if err := q.Dist.Check(); err != nil {
				t.Fatalf("%s: %v", q.Name, err)
			}
		}
	})
}

// TestDocumentKeepsOrder: nodes come with their places in the order of the
// file.
func TestDocumentKeepsOrder(t *testing.T) {
	root, err := document("x.toml", []byte("b = 1\n[t.u]\nz = \"µ\" # no key = 1\na = { q = [1, 2.5], p.r = true }\n[[l]]\n[[l]]\nd = 2026-03-04\n"))
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	var walk func(n *node)
	walk = func(n *node) {
		got = append(got, fmt.Sprintf("%s@%d:%d=%d:%d", n.path, n.line, n.col, n.vline, n.vcol))
		for _, k := range n.keys {
			walk(n.fields[k])
		}
		for _, e := range n.items {
			walk(e)
		}
	}
	walk(root)
	want := []string{"@1:1=0:0", "b@1:1=1:5", "t@2:2=2:2", "t.u@2:4=2:4", "t.u.z@3:1=3:5", "t.u.a@4:1=4:5", "t.u.a.q@4:7=4:7",
		"t.u.a.q[1]@4:7=4:12", "t.u.a.q[2]@4:7=4:15", "t.u.a.p@4:21=4:21", "t.u.a.p.r@4:23=4:27", "l@5:3=5:3", "l[1]@5:3=5:3", "l[2]@6:3=6:3", "l[2].d@7:1=7:5"}
	if !slices.Equal(got, want) {
		t.Errorf("got  %q\nwant %q", got, want)
	}
}
