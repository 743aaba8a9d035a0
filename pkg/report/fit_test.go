package report

import (
	"bytes"
	"context"
	"encoding/xml"
	"errors"
	"io"
	"os"
	"regexp"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
)

func fitted(t testing.TB, change func(s *reduce.FitSettings)) *reduce.FormulaFit {
	t.Helper()
	f, err := os.Open("../../datasets/fit-example/capacitance.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	s := reduce.FitSettings{Formula: "c_s + s/(d+d0)", Response: "c", Start: map[string]float64{"c_s": 2e-12, "s": 7e-14, "d0": 1e-5}, Noise: "u_c"}
	if change != nil {
		change(&s)
	}
	r, err := reduce.FitCSV(context.Background(), f, "capacitance.csv", s)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func propagated(t testing.TB, name string, s reduce.PropagateSettings) *reduce.Propagation {
	t.Helper()
	b, err := bench.OpenBudget("../../datasets/budgets/" + name + ".toml")
	if err != nil {
		t.Fatal(err)
	}
	p, err := reduce.Propagate(context.Background(), b, s)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

var void = regexp.MustCompile(`<(meta|br)([^>]*)>`)

// wellFormed checks a page as XML, with its void elements closed for that.
func wellFormed(t testing.TB, page []byte) {
	t.Helper()
	d := xml.NewDecoder(bytes.NewReader(void.ReplaceAll(bytes.TrimPrefix(page, []byte("<!DOCTYPE html>")), []byte("<$1$2/>"))))
	for {
		_, err := d.Token()
		if errors.Is(err, io.EOF) {
			return
		}
		if err != nil {
			t.Fatalf("the page is not well formed: %v", err)
		}
	}
}

func TestFitReport(t *testing.T) {
	var b bytes.Buffer
	if err := FitText(&b, fitted(t, nil)); err != nil {
		t.Fatal(err)
	}
	golden(t, "fit.txt", b.Bytes())
	b.Reset()
	everything := fitted(t, func(s *reduce.FitSettings) {
		s.Profile, s.Robust, s.Bootstrap = true, true, 100
		s.PredictorNoise, s.EffectiveVariance = map[string]string{"d": "0.1 um"}, true
		s.Bounds = map[string][2]float64{"c_s": {0, 3e-12}}
		s.Priors = map[string]reduce.Prior{"d0": {Value: 11e-6, U: 2e-6}}
	})
	if err := FitText(&b, everything); err != nil {
		t.Fatal(err)
	}
	golden(t, "fit-everything.txt", b.Bytes())
	b.Reset()
	held := fitted(t, func(s *reduce.FitSettings) {
		s.Noise, s.Fixed = "", []string{"d0"}
		s.Bounds = map[string][2]float64{"c_s": {0, 2e-12}}
	})
	if err := FitText(&b, held); err != nil {
		t.Fatal(err)
	}
	golden(t, "fit-held.txt", b.Bytes())
	b.Reset()
	if err := FitHTML(&b, everything); err != nil {
		t.Fatal(err)
	}
	wellFormed(t, b.Bytes())
	if n := strings.Count(b.String(), "<svg"); n != 2 {
		t.Errorf("%d figures in the page, not 2", n)
	}
	sheet := FitSheet(everything, true)
	if !strings.Contains(sheet.HTML(), "<svg") || !strings.Contains(sheet.String(), "Second opinion") {
		t.Error("the sheet is not whole")
	}
}

func TestPropagationReport(t *testing.T) {
	for name, s := range map[string]reduce.PropagateSettings{
		"plate-field":     {Trials: 20000},
		"impedance":       {Trials: 20000},
		"comparison-loss": {Trials: 20000},
		"end-gauge":       {LawOnly: true, SecondOrder: true},
	} {
		p := propagated(t, name, s)
		var b bytes.Buffer
		if err := PropagationText(&b, p); err != nil {
			t.Fatal(err)
		}
		golden(t, "propagate-"+name+".txt", b.Bytes())
		b.Reset()
		if err := PropagationHTML(&b, p); err != nil {
			t.Fatal(err)
		}
		wellFormed(t, b.Bytes())
		want := len(p.Record.Outputs) // shares
		if !s.LawOnly {
			want *= 2
			if len(p.Record.Outputs) > 1 {
				want++
			}
		}
		if n := strings.Count(b.String(), "<svg"); n != want {
			t.Errorf("%s: %d figures in the page, not %d", name, n, want)
		}
	}
}

// TestHostileNames: what comes from a file is escaped.
func TestHostileNames(t *testing.T) {
	p := propagated(t, "plate-permittivity", reduce.PropagateSettings{Trials: 1000})
	p.Record.Title = "<script>alert(1)</script>"
	p.Record.Warnings = append(p.Record.Warnings, "a & <b>\x1b[31m")
	p.Record.Outputs[0].Law.Budget[0].Source = "</td><script>"
	var b bytes.Buffer
	if err := PropagationHTML(&b, p); err != nil {
		t.Fatal(err)
	}
	wellFormed(t, b.Bytes())
	if strings.Contains(b.String(), "<script") {
		t.Error("a script came through")
	}
	b.Reset()
	if err := PropagationText(&b, p); err != nil {
		t.Fatal(err)
	}
	if strings.Contains(b.String(), "\x1b") {
		t.Error("an escape sequence came through")
	}
}
