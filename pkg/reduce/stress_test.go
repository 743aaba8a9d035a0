package reduce_test

import (
	"bytes"
	"context"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"runtime"
	"slices"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
)

// sheet is a dataset as text, to be changed and reduced: what is expected of the
// changed one follows from what a bench is (derived).
type sheet struct {
	name string
	toml string
	head []string
	rows [][]string
}

var excludeTable = regexp.MustCompile(`(?m)^\[\[exclude\]\]\n(?:[a-z].*\n?)*`)

// openSheet reads a dataset; rows that it excludes are left out altogether, so
// that rows can be moved about.
func openSheet(t testing.TB, name string) *sheet {
	t.Helper()
	dir := filepath.Join("..", "..", "datasets", name)
	toml, err := os.ReadFile(filepath.Join(dir, "bench.toml"))
	if err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(filepath.Join(dir, "readings.csv"))
	if err != nil {
		t.Fatal(err)
	}
	all, err := csv.NewReader(strings.NewReader(string(data))).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	s := &sheet{name: name, toml: string(toml), head: all[0]}
	out := map[int]bool{}
	for _, m := range regexp.MustCompile(`(?m)^row\s*=\s*(\d+)`).FindAllStringSubmatch(s.toml, -1) {
		n, err := strconv.Atoi(m[1])
		if err != nil {
			t.Fatal(err)
		}
		out[n] = true
	}
	s.toml = excludeTable.ReplaceAllString(s.toml, "")
	for i, r := range all[1:] {
		if !out[i+1] {
			s.rows = append(s.rows, r)
		}
	}
	return s
}

func (s *sheet) clone() *sheet {
	c := *s
	c.head = slices.Clone(s.head)
	c.rows = make([][]string, len(s.rows))
	for i, r := range s.rows {
		c.rows[i] = slices.Clone(r)
	}
	return &c
}

// column finds a column of the readings.
func (s *sheet) column(t testing.TB, header string) int {
	t.Helper()
	i := slices.Index(s.head, header)
	if i < 0 {
		t.Fatalf("%s has no column %s", s.name, header)
	}
	return i
}

// reduce writes the sheet into dir and reduces it by the law.
func (s *sheet) reduce(dir string) (*reduce.Result, error) {
	var b strings.Builder
	w := csv.NewWriter(&b)
	if err := w.Write(s.head); err != nil {
		return nil, err
	}
	if err := w.WriteAll(s.rows); err != nil {
		return nil, err
	}
	for name, text := range map[string]string{"bench.toml": s.toml, "readings.csv": b.String()} {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
			return nil, err
		}
	}
	open, err := bench.Open(dir)
	if err != nil {
		return nil, err
	}
	return reduce.Run(context.Background(), open, reduce.Settings{LawOnly: true})
}

func (s *sheet) mustReduce(t testing.TB) *reduce.Record {
	t.Helper()
	r, err := s.reduce(t.TempDir())
	if err != nil {
		t.Fatalf("%s: %v", s.name, err)
	}
	return &r.Record
}

// same compares values in units of their uncertainty, and uncertainties.
func same(t *testing.T, what string, got, want *reduce.Record, tolerance float64) {
	t.Helper()
	if len(got.Measurands) != len(want.Measurands) || len(want.Measurands) == 0 {
		t.Fatalf("%s: %d measurands, want %d", what, len(got.Measurands), len(want.Measurands))
	}
	near := func(name string, v, u, v0, u0 reduce.Number) {
		t.Helper()
		if d := math.Abs(float64(v-v0)) / float64(u0); !(d <= tolerance) {
			t.Errorf("%s: %s %v, want %v: %.2g u away", what, name, v, v0, d)
		}
		if d := math.Abs(float64(u/u0) - 1); !(d <= tolerance) {
			t.Errorf("%s: u(%s) %v, want %v", what, name, u, u0)
		}
	}
	for i, m := range got.Measurands {
		near(m.Name, m.Value, m.U, want.Measurands[i].Value, want.Measurands[i].U)
	}
	for i, p := range got.Fit.Parameters {
		near(p.Name, p.Value, p.U, want.Fit.Parameters[i].Value, want.Fit.Parameters[i].U)
	}
}

// rescale multiplies a column by a power of ten as text, so that no digit changes.
func (s *sheet) rescale(t testing.TB, header string, power int) {
	c := s.column(t, header)
	for _, r := range s.rows {
		if r[c] != "" {
			r[c] += "e" + strconv.Itoa(power)
		}
	}
}

// The unit of a column is a matter of writing: the same readings in units that
// differ by twelve and more powers of ten give the same result.
func TestUnitsDoNotMatter(t *testing.T) {
	base := openSheet(t, "attracted-disc")
	want := base.mustReduce(t)
	for _, c := range []struct {
		header, unit, to string
		power            int // of ten, by which the numbers grow
	}{
		{"V/kV", "kV", "nV", 12}, {"V/kV", "kV", "PV", -12}, {"V/kV", "kV", "V", 3},
		{"gap/mm", "mm", "fm", 12}, {"gap/mm", "mm", "Gm", -12}, {"gap/mm", "mm", "um", 3},
		{"m/g", "g", "pg", 12}, {"m/g", "g", "Tg", -12}, {"m/g", "g", "mg", 3},
	} {
		s := base.clone()
		s.rescale(t, c.header, c.power)
		old := regexp.MustCompile(`(column\s*= "` + c.header + `"\s*\nunit\s*= )"` + c.unit + `"`)
		if !old.MatchString(s.toml) {
			t.Fatalf("no unit of %s in bench.toml", c.header)
		}
		s.toml = old.ReplaceAllString(s.toml, `${1}"`+c.to+`"`)
		same(t, c.header+" in "+c.to, s.mustReduce(t), want, 1e-6)
	}
}

// Readings carry their times: the order in which they are written down does not
// matter for what they say of the parameters.
func TestOrderDoesNotMatter(t *testing.T) {
	for _, name := range []string{"attracted-disc", "sphere-plane", "coulomb-point"} {
		base := openSheet(t, name)
		want := base.mustReduce(t)
		for _, step := range []int{7, 11} {
			s := base.clone()
			n := len(s.rows)
			for n%step == 0 {
				step += 2
			}
			for i := range s.rows {
				s.rows[i] = base.rows[(i*step+3)%n]
			}
			if gcd(step, n) != 1 {
				t.Fatalf("%d and %d: no permutation", step, n)
			}
			same(t, fmt.Sprintf("%s, every row %d on", name, step), s.mustReduce(t), want, 1e-6)
		}
		s := base.clone()
		slices.Reverse(s.rows)
		same(t, name+", reversed", s.mustReduce(t), want, 1e-6)
	}
}

func gcd(a, b int) int {
	for b != 0 {
		a, b = b, a%b
	}
	return a
}

// Every reading twice: noise averages out by √2 and nothing else does. Without
// priors and groups, whose weight against the noise would change, this is exact.
func TestTwiceTheReadings(t *testing.T) {
	base := openSheet(t, "attracted-disc")
	for old, with := range map[string]string{
		"grouped    = [{ by = \"setting\", u = \"2 um\", dof = 24 }]\n":                                "noise = \"2 um\"\n",
		"method = \"interpolate\"":                                                                     "method = \"mean\"",
		"adjust = true           # from the readings, with the gauge-block check as prior knowledge\n": "",
	} {
		if strings.Count(base.toml, old) != 1 {
			t.Fatalf("%q does not stand once in bench.toml", old)
		}
		base.toml = strings.Replace(base.toml, old, with, 1)
	}
	want := base.mustReduce(t)
	s := base.clone()
	s.rows = nil
	for _, r := range base.rows {
		s.rows = append(s.rows, r, r)
	}
	got := s.mustReduce(t)
	m, m0 := got.Measurands[0], want.Measurands[0]
	if d := math.Abs(float64(m.Value-m0.Value)) / float64(m0.U); d > 1e-6 {
		t.Errorf("the estimate moves by %.2g u", d)
	}
	if m.U > m0.U*(1+1e-9) {
		t.Errorf("more readings make u grow: %v, was %v", m.U, m0.U)
	}
	line := func(r *reduce.Record, input string) float64 {
		for _, b := range r.Measurands[0].Budget {
			if b.Input == input {
				return float64(b.Contribution)
			}
		}
		t.Fatalf("no line %s", input)
		return 0
	}
	for _, c := range []struct {
		input string
		ratio float64
	}{
		{"mass noise", 1 / math.Sqrt2}, {"voltage noise", 1 / math.Sqrt2}, {"gap noise", 1 / math.Sqrt2}, {"mass zero", 1 / math.Sqrt2},
		{"mass resolution", 1 / math.Sqrt2}, {"disc_radius", 1}, {"channels.voltage.gain", 1}, {"gap_offset", 1},
	} {
		if r := line(got, c.input) / line(want, c.input); !(math.Abs(r/c.ratio-1) <= 1e-6) {
			t.Errorf("%s: the contribution changes by a factor %.4f, want %.4f", c.input, r, c.ratio)
		}
	}
}

// The force goes with (V + φ)²: with all voltages reversed the permittivity stays
// and the contact potential changes its sign.
func TestPolaritySwapped(t *testing.T) {
	base := openSheet(t, "attracted-disc")
	want := base.mustReduce(t)
	s := base.clone()
	v, p := s.column(t, "V/kV"), s.column(t, "polarity")
	for _, r := range s.rows {
		if strings.HasPrefix(r[v], "-") {
			r[v] = r[v][1:]
		} else {
			r[v] = "-" + r[v] // −0 among them
		}
		r[p] = map[string]string{"+": "-", "-": "+", "": ""}[r[p]]
	}
	got := s.mustReduce(t)
	for i := range got.Fit.Parameters {
		p, p0 := &got.Fit.Parameters[i], &want.Fit.Parameters[i]
		if p.Name == "contact_potential" {
			if p0.Value == 0 {
				t.Fatal("no contact potential to change its sign")
			}
			p.Value = -p.Value
		}
	}
	same(t, "polarity", got, want, 1e-6)
}

// nasty are numbers that a file may hold.
var nasty = []string{"0", "-0", "5e-324", "-5e-324", "2.2250738585072014e-308", "1e-300", "1e300", "-1e300", "1.7976931348623157e308", "1e308", "-1e308",
	"1e999", "-1e999", "Inf", "-Inf", "NaN", "", "1e-12", "1e12", "-1", "1", "1e15", "-1e15", "0.1"}

// Whatever stands in a cell, the readings are refused with their place, or every
// uncertainty reported is positive and finite, or a warning says why it is not.
func TestNastyReadings(t *testing.T) {
	var sheets []*sheet
	for _, name := range []string{"attracted-disc", "sphere-plane", "coulomb-point", "plate-charge"} {
		sheets = append(sheets, openSheet(t, name))
	}
	dir := t.TempDir()
	rapid.Check(t, func(t *rapid.T) {
		s := rapid.SampledFrom(sheets).Draw(t, "dataset").clone()
		for range rapid.IntRange(1, 4).Draw(t, "cells") {
			r := rapid.IntRange(0, len(s.rows)-1).Draw(t, "row")
			c := rapid.IntRange(0, len(s.head)-1).Draw(t, "column")
			v := rapid.SampledFrom(nasty).Draw(t, "value")
			if rapid.IntRange(0, 9).Draw(t, "all") == 0 {
				for i := range s.rows {
					s.rows[i][c] = v
				}
			} else {
				s.rows[r][c] = v
			}
		}
		sound(t, s, dir)
	})
}

// nastyQuantity finds the numbers with units in a bench file.
var nastyQuantity = regexp.MustCompile(`"-?[0-9.]+( [^"]*)?"`)

// The same of the numbers in bench.toml.
func TestNastyQuantities(t *testing.T) {
	var sheets []*sheet
	for _, name := range []string{"attracted-disc", "sphere-plane", "coulomb-point", "plate-charge"} {
		sheets = append(sheets, openSheet(t, name))
	}
	dir := t.TempDir()
	rapid.Check(t, func(t *rapid.T) {
		s := rapid.SampledFrom(sheets).Draw(t, "dataset").clone()
		at := nastyQuantity.FindAllStringSubmatchIndex(s.toml, -1)
		i := at[rapid.IntRange(0, len(at)-1).Draw(t, "which")]
		unit := ""
		if i[2] >= 0 {
			unit = s.toml[i[2]:i[3]]
		}
		v := rapid.SampledFrom(nasty).Draw(t, "value")
		s.toml = s.toml[:i[0]] + `"` + v + unit + `"` + s.toml[i[1]:]
		sound(t, s, dir)
	})
}

// sound reduces s and checks what is reported of it.
func sound(t *rapid.T, s *sheet, dir string) {
	r, err := s.reduce(dir)
	if err != nil {
		if len(err.Error()) < 10 {
			t.Fatalf("%s: %q says nothing", s.name, err)
		}
		return
	}
	rec := &r.Record
	good := func(u reduce.Number) bool { return u > 0 && !math.IsInf(float64(u), 0) }
	for _, m := range rec.Measurands {
		switch {
		case len(rec.Warnings) > 0 && !good(m.U):
		case !good(m.U):
			t.Fatalf("%s: u(%s) = %v without a word", s.name, m.Name, m.U)
		case math.IsNaN(float64(m.Value)) || math.IsInf(float64(m.Value), 0):
			t.Fatalf("%s: %s = %v with u = %v", s.name, m.Name, m.Value, m.U)
		case m.K > 1e-6 && m.Interval[0] >= m.Interval[1]: // a coverage of next to nothing has no width
			t.Fatalf("%s: %s: interval %v", s.name, m.Name, m.Interval)
		}
		for _, b := range m.Budget {
			if !(b.Contribution >= 0) || math.IsInf(float64(b.Contribution), 0) {
				if len(rec.Warnings) == 0 {
					t.Fatalf("%s: %s: contribution of %s %v", s.name, m.Name, b.Input, b.Contribution)
				}
			}
		}
	}
	for _, p := range rec.Fit.Parameters {
		if !good(p.U) && len(rec.Warnings) == 0 {
			t.Fatalf("%s: u(%s) = %v without a word", s.name, p.Name, p.U)
		}
	}
	if rec.Fit.Status != "converged" && len(rec.Warnings) == 0 {
		t.Fatalf("%s: the fit is %s without a warning", s.name, rec.Fit.Status)
	}
}

// The record has the same bytes on one core as on several, with more rows than one
// core takes at a time.
func TestCoresDoNotMatter(t *testing.T) {
	base := openSheet(t, "attracted-disc")
	base.toml = strings.Replace(base.toml, `method = "interpolate"`, `method = "linear"`, 1)
	s := base.clone()
	s.rows = nil
	c := s.column(t, "t/s")
	for i := range 10_000 {
		r := slices.Clone(base.rows[i%len(base.rows)])
		r[c] = strconv.Itoa(40 * i)
		s.rows = append(s.rows, r)
	}
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(0))
	var first []byte
	for _, cores := range []int{1, 2, 3} {
		runtime.GOMAXPROCS(cores)
		text, err := json.Marshal(s.mustReduce(t))
		if err != nil {
			t.Fatal(err)
		}
		if first == nil {
			first = text
		} else if !bytes.Equal(first, text) {
			t.Errorf("the record differs between one core and %d", cores)
		}
	}
}
