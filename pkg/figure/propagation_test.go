package figure

import (
	"bytes"
	"context"
	"encoding/xml"
	"errors"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
)

// wholeFigure checks an SVG as XML.
func wholeFigure(t testing.TB, f *Figure) {
	t.Helper()
	var b bytes.Buffer
	if err := f.WriteSVG(&b); err != nil {
		t.Fatal(err)
	}
	d := xml.NewDecoder(&b)
	for {
		_, err := d.Token()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatalf("%s: %v", f.Name, err)
		}
	}
	if strings.Contains(f.SVG(), "NaN") || strings.Contains(f.SVG(), "Inf") {
		t.Errorf("%s holds a place that is no number", f.Name)
	}
	if f.Title == "" || f.Caption == "" || f.Summary == "" {
		t.Errorf("%s: title %q, caption %q, summary %q", f.Name, f.Title, f.Caption, f.Summary)
	}
}

func budget(t testing.TB, text string, s reduce.PropagateSettings) *reduce.Propagation {
	t.Helper()
	path := filepath.Join(t.TempDir(), "budget.toml")
	if err := os.WriteFile(path, []byte("format = 1\n"+text), 0o666); err != nil {
		t.Fatal(err)
	}
	b, err := bench.OpenBudget(path)
	if err != nil {
		t.Fatal(err)
	}
	p, err := reduce.Propagate(context.Background(), b, s)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

const twoOfThree = `
[inputs.a]
value = "1 V"
u = "0.1 V"
[inputs.b_1]
value = "2 V"
u = "0.2 V"
dof = 5
[outputs.sum]
formula = "a + b_1"
unit = "mV"
[outputs.ratio]
formula = "a/b_1"
`

func TestBudgetFigures(t *testing.T) {
	p := budget(t, twoOfThree, reduce.PropagateSettings{Trials: 5000})
	all, err := AllOfBudget(p)
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, f := range all {
		wholeFigure(t, f)
		names = append(names, f.Name)
	}
	if got := strings.Join(names, " "); got != "density-sum shares-sum density-ratio shares-ratio joint" {
		t.Errorf("figures %s", got)
	}
	if s := all[0].SVG(); !strings.Contains(s, "law: t with ν = ") || !strings.Contains(s, "Monte Carlo, shortest, 95.45 %") {
		t.Error("the density does not tell its law and its shortest interval")
	}
	if s := all[1].SVG(); !strings.Contains(s, "b_1") {
		t.Error("the shares don't name the input as the formula does")
	}
	if s := all[4].SVG(); !strings.Contains(s, "ellipse, 95.4") || !strings.Contains(s, "rectangle, 95.4") || !strings.Contains(s, "r = ") {
		t.Error("the joint distribution lacks regions or correlation")
	}
	// The same trials give the same bytes.
	again, err := Joint(budget(t, twoOfThree, reduce.PropagateSettings{Trials: 5000}))
	if err != nil {
		t.Fatal(err)
	}
	if again.SVG() != all[4].SVG() {
		t.Error("the joint distribution differs from run to run")
	}
}

// TestBudgetFiguresOfLittle: what is not there is not drawn, and an error says why.
func TestBudgetFiguresOfLittle(t *testing.T) {
	law := budget(t, twoOfThree, reduce.PropagateSettings{LawOnly: true})
	if all, err := AllOfBudget(law); err != nil || len(all) != 2 {
		t.Errorf("of the law alone %d figures, %v", len(all), err)
	}
	if _, err := Density(law, ""); err == nil || !strings.Contains(err.Error(), "no Monte Carlo trials") {
		t.Errorf("density without trials: %v", err)
	}
	if _, err := Density(law, "summ"); err == nil || !strings.Contains(err.Error(), `did you mean "sum"`) {
		t.Errorf("density of an unknown output: %v", err)
	}
	if _, err := Joint(law); err == nil {
		t.Error("a joint distribution without trials")
	}
	constant := budget(t, "[inputs.a]\nvalue = 1\nu = 1\n[outputs.y]\nformula = \"0*a + 3\"\n", reduce.PropagateSettings{Trials: 1000})
	if all, err := AllOfBudget(constant); err != nil || len(all) != 0 {
		t.Errorf("of a constant %d figures, %v", len(all), err)
	}
	// A t without mean: Monte Carlo alone.
	wild := budget(t, "[inputs.a]\nvalue = \"1 V\"\nu = \"1 V\"\nshape = \"t\"\ndof = 1\n[outputs.y]\nformula = \"a\"\n", reduce.PropagateSettings{Trials: 2000})
	all, err := AllOfBudget(wild)
	if err != nil || len(all) != 1 {
		t.Fatalf("of a t with one degree of freedom %d figures, %v", len(all), err)
	}
	wholeFigure(t, all[0])
}

func TestCurve(t *testing.T) {
	fit := func(csv string, s reduce.FitSettings) *reduce.FormulaFit {
		t.Helper()
		f, err := reduce.FitCSV(context.Background(), strings.NewReader(csv), "readings.csv", s)
		if err != nil {
			t.Fatal(err)
		}
		return f
	}
	raw, err := os.ReadFile("../../datasets/fit-example/capacitance.csv")
	if err != nil {
		t.Fatal(err)
	}
	gap := reduce.FitSettings{Formula: "c_s + s/(d+d0)", Response: "c", Start: map[string]float64{"c_s": 2e-12, "s": 7e-14, "d0": 1e-5},
		Noise: "1 pF", PredictorNoise: map[string]string{"d": "5 um"}}
	pole := "x,y\n1,-1.1\n2,-2.05\n2.9,-9.8\n3.1,10.2\n4,1\n5,0.5\n"
	for name, f := range map[string]*reduce.FormulaFit{
		"both axes":      fit(string(raw), gap),
		"pole":           fit(pole, reduce.FitSettings{Formula: "a/(x - b)", Response: "y", Start: map[string]float64{"a": 1, "b": 3}}),
		"no predictor":   fit(pole, reduce.FitSettings{Formula: "a", Response: "y", Start: map[string]float64{"a": 1}}),
		"all at one":     fit("x,y\n1,2\n1,3\n1,4\n", reduce.FitSettings{Formula: "a*x", Response: "y", Start: map[string]float64{"a": 1}}),
		"two predictors": fit("x,z,y\n1,2,3.1\n2,1,3\n3,3,6.1\n4,1,5\n", reduce.FitSettings{Formula: "a*x + b*z", Response: "y", Start: map[string]float64{"a": 1, "b": 1}}),
		"singular":       fit(pole, reduce.FitSettings{Formula: "a + b", Response: "y", Start: map[string]float64{"a": 1, "b": 3}}),
		"one reading":    fit("x,y\n1,2\n", reduce.FitSettings{Formula: "a*x", Response: "y", Start: map[string]float64{"a": 1}}),
	} {
		all, err := AllOfFit(f)
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		for _, g := range all {
			wholeFigure(t, g)
		}
		switch s := all[0].SVG(); {
		case name == "both axes" && !strings.Contains(s, "±2 standard uncertainties of the formula"):
			t.Error("the band is not in the key")
		case name == "pole" && !strings.Contains(s, "fitted formula"):
			t.Error("there is no curve")
		}
	}
}
