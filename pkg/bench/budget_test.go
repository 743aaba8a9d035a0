package bench

import (
	"context"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/gum"
)

// goodBudget is the field between plates, with invented numbers.
const goodBudget = `format = 1
title = "Field between plates"

[inputs.v]
value = "10 kV"
relative_u = "0.01 %"
dof = 50
group = "source"
source = "divider certificate"

[inputs.d]
readings = [100.02, 99.98, 100.00, 100.04]
unit = "mm"
group = "geometry"

[inputs.v_c]
file = "repeats.csv"
column = "v_c/mV"
unit = "mV"

[outputs.field]
formula = "(v - v_c)/d"
unit = "kV/m"

[[correlations]]
between = ["v", "v_c"]
r = 0.2

[report]
coverage = "95 %"
`

const goodRepeats = "n,v_c/mV\n1,100\n2,120\n3,\n4,110\n"

func openBudget(t testing.TB, edits ...string) (*Budget, error) {
	t.Helper()
	text := goodBudget
	for i := 0; i < len(edits); i += 2 {
		if !strings.Contains(text, edits[i]) {
			t.Fatalf("budget of the tests does not contain %q", edits[i])
		}
		text = strings.Replace(text, edits[i], edits[i+1], 1)
	}
	return OpenBudget(filepath.Join(dataset(t, map[string]string{"budget.toml": text, "repeats.csv": goodRepeats}), "budget.toml"))
}

func TestOpenBudget(t *testing.T) {
	b, err := openBudget(t)
	if err != nil {
		t.Fatal(err)
	}
	if b.Title != "Field between plates" || b.Coverage != 0.95 || len(b.Inputs) != 2 || b.Inputs[1].Rows != 4 || b.File != "budget.toml" {
		t.Errorf("%+v", b)
	}
	v, d, c := b.Quantities[0], b.Quantities[1], b.Quantities[2]
	if v.Name != "v" || v.Dist.U != 1 || v.Dist.DOF != 50 || v.Group != "source" || v.Unit.Symbol != "kV" {
		t.Errorf("v %+v", v)
	}
	// Four readings by hand: mean 100.01, s² = (0.01²+0.03²+0.01²+0.03²)/3 mm².
	if !near(d.Dist.Value, 0.10001, 1e-12) || !near(d.Dist.U, math.Sqrt(0.002/3/4)*1e-3, 1e-9) || d.Dist.DOF != 3 || d.Unit.Symbol != "mm" {
		t.Errorf("d %+v", d)
	}
	if !near(c.Dist.Value, 0.11, 1e-12) || !near(c.Dist.U, 0.01/math.Sqrt(3), 1e-9) || c.Dist.DOF != 2 || c.Source != "mean of 3 readings, repeats.csv column v_c/mV" {
		t.Errorf("v_c %+v", c)
	}
	if len(b.Warnings) != 1 || !strings.Contains(b.Warnings[0].Error(), `1 reading of column "v_c/mV" without a value left out`) {
		t.Errorf("warnings %v", b.Warnings)
	}
	if len(b.Model.Inputs) != 3 || b.Model.Inputs[1].Group != "geometry" || len(b.Model.Correlations) != 1 || b.Model.Outputs[0].Name != "field" {
		t.Errorf("model %+v", b.Model)
	}
	// The model evaluates what the formula says.
	e := b.Model.Outputs[0].New()
	out := []float64{0}
	e.Block([][]float64{{10e3}, {0.1}, {0.5}}, out)
	g := make([]float64, 3)
	y := e.Gradient([]float64{10e3, 0.1, 0.5}, g)
	if !near(out[0], 99995, 1e-12) || !near(y, 99995, 1e-12) || !near(g[0], 10, 1e-12) || !near(g[1], -999950, 1e-12) || !near(g[2], -10, 1e-12) {
		t.Errorf("block %v, gradient %v %v", out, y, g)
	}
	r, err := gum.Propagate(context.Background(), b.Model, gum.Settings{LawOnly: true, Probability: b.Coverage})
	if err != nil {
		t.Fatal(err)
	}
	if len(r.Outputs) != 1 || r.Outputs[0].Law == nil || !near(r.Outputs[0].Law.Value, (10e3-0.11)/0.10001, 1e-12) {
		t.Errorf("propagated %+v", r.Outputs)
	}
}

func TestBudgetErrors(t *testing.T) {
	for _, c := range []struct{ old, new, want string }{
		{`format = 1`, `format = 3`, `format 3 is not known to this version`},
		{`[inputs.v]`, `[inputs.pi]`, `inputs.pi: `},
		{`[inputs.v]`, `[inputs."v 1"]`, `inputs."v 1": `},
		{`[inputs.v]`, `[inputs.func]`, `inputs.func: `},
		{`[inputs.v]`, `[input.v]`, `input: the key is not known; did you mean inputs?`},
		{`relative_u = "0.01 %"`, `u = "0.01 mm"`, `"0.01 mm" is a length; a voltage is due (for example kV)`},
		{`relative_u = "0.01 %"`, `realtive_u = "0.01 %"`, `did you mean relative_u?`},
		{`relative_u = "0.01 %"`, "u = \"1 V\"\nadjust = true", `inputs.v.adjust: the key is not known`},
		{`relative_u = "0.01 %"`, "u = \"1 V\"\nunit = \"V\"", `unit goes with readings or with file and column`},
		{`value = "10 kV"`, ``, `an uncertainty stands without a value`},
		{`readings = [100.02, 99.98, 100.00, 100.04]`, `readings = [100.02]`, `a Type A evaluation needs two readings or more`},
		{`readings = [100.02, 99.98, 100.00, 100.04]`, `readings = [100.02, inf]`, `inf is not a finite number`},
		{`file = "repeats.csv"`, `file = "repeat.csv"`, `inputs.v_c.file: repeat.csv: there is no such file in `},
		{`file = "repeats.csv"`, `file = "../repeats.csv"`, `must lie in the folder`},
		{`file = "repeats.csv"`, "file = \"repeats.csv\"\nu = \"1 V\"", `u does not go with file and column`},
		{`file = "repeats.csv"`, "file = \"repeats.csv\"\nsha256 = \"" + strings.Repeat("1", 64) + `"`, `the pin does not match`},
		{`file = "repeats.csv"`, ``, `inputs.v_c.file: is missing`},
		{`column = "v_c/mV"`, `column = "vc/mV"`, `inputs.v_c.column: repeats.csv: there is no column "vc/mV"; did you mean v_c/mV?`},
		{"column = \"v_c/mV\"\nunit = \"mV\"", `column = "v_c/mV"`, `inputs.v_c.unit: is missing`},
		{`formula = "(v - v_c)/d"`, `formula = "(v - vc)/d"`, `outputs.field.formula: formula "(v - vc)/d": column 6: `},
		{`formula = "(v - v_c)/d"`, `formula = "(v - d)/d"`, `outputs.field.formula: formula "(v - d)/d": column `},
		{`formula = "(v - v_c)/d"`, `formula = "v**2"`, `pow(`},
		{`formula = "(v - v_c)/d"`, ``, `outputs.field.formula: is missing`},
		{`unit = "kV/m"`, `unit = "kV"`, `outputs.field.unit: "kV" is a voltage; the formula gives an electric field (for example V/m)`},
		{`unit = "kV/m"`, `unit = "kV/m/s"`, `a second solidus`},
		{`coverage = "95 %"`, `coverage = 2e-308`, `report.coverage: 2e-308 is no coverage probability`},
		{`between = ["v", "v_c"]`, `between = ["v", "vc"]`, `input "vc" is not known; did you mean `},
		{`r = 0.2`, `r = -1.01`, `those lie from -1 to 1`},
		{"[outputs.field]\nformula = \"(v - v_c)/d\"\nunit = \"kV/m\"", ``, `outputs: is missing`},
	} {
		b, err := openBudget(t, c.old, c.new)
		if b != nil {
			t.Errorf("%q → %q: a budget was returned", c.old, c.new)
		}
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%q → %q:\n got %v\nwant …%s…", c.old, c.new, err, c.want)
		}
	}
	_, err := OpenBudget(t.TempDir() + string(filepath.Separator))
	wantError(t, err, "name a budget file")
	_, err = OpenBudget(filepath.Join(t.TempDir(), "none.toml"))
	wantError(t, err, "none.toml", "there is no such file")
}

func TestBudgetWarnings(t *testing.T) {
	b, err := openBudget(t, `formula = "(v - v_c)/d"`, `formula = "v/d"`, `unit = "kV/m"`, ``)
	if err != nil {
		t.Fatal(err)
	}
	if len(b.Warnings) != 2 || !strings.Contains(b.Warnings[1].Error(), "inputs.v_c: no output uses this input") {
		t.Errorf("warnings %v", b.Warnings)
	}
	if b.Outputs[0].Unit.Symbol != "V/m" {
		t.Errorf("unit %q where none is stated", b.Outputs[0].Unit.Symbol)
	}
}

// TestReadTogether is the worked example of simultaneous resistance and
// reactance: JCGM 100:2008 H.2, readings of table H.2, results of table H.4
// (published).
func TestReadTogether(t *testing.T) {
	dir := dataset(t, map[string]string{"h2.toml": `format = 1
[inputs.V]
readings = [5.007, 4.994, 5.005, 4.990, 4.999]
unit = "V"
together = "run"
[inputs.I]
file = "run.csv"
column = "I/mA"
unit = "mA"
together = "run"
[inputs.phi]
readings = ["1.0456", "1.0438", "1.0468", "1.0428", "1.0433"]
together = "run"
[outputs.R]
formula = "V/I*cos(phi)"
unit = "ohm"
[outputs.X]
formula = "V/I*sin(phi)"
unit = "ohm"
`, "run.csv": "I/mA\n19.663\n19.639\n19.640\n19.685\n19.678\n"})
	b, err := OpenBudget(filepath.Join(dir, "h2.toml"))
	if err != nil {
		t.Fatal(err)
	}
	r, err := gum.Propagate(context.Background(), b.Model, gum.Settings{LawOnly: true})
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []struct{ value, u float64 }{{127.732, 0.071}, {219.847, 0.295}} {
		l := r.Outputs[i].Law
		if l == nil || math.Abs(l.Value-want.value) > 0.0005 || math.Abs(l.U-want.u) > 0.001 { // 0.2956 computed
			t.Errorf("%s: %+v, want %v", r.Outputs[i].Name, l, want)
		}
	}
	if got := r.Correlation[0][1]; math.Abs(got+0.588) > 0.0005 {
		t.Errorf("r(R, X) = %v, want -0.588", got)
	}
	for _, c := range []struct{ old, new, want string }{
		{`readings = ["1.0456", "1.0438", "1.0468", "1.0428", "1.0433"]`, `readings = ["1.0456", "1.0438"]`, `joint readings come together`},
		{`readings = ["1.0456", "1.0438", "1.0468", "1.0428", "1.0433"]`, `value = 1.04`, `inputs.phi.together: only inputs with readings`},
		{`[outputs.R]`, "[[correlations]]\nbetween = [\"V\", \"I\"]\nr = 0.1\n[outputs.R]", `V and I were read together; their correlation follows from the readings`},
		{`together = "run"`, `together = "walk"`, `inputs.V.together: no other input was read together`},
	} {
		text, err := os.ReadFile(filepath.Join(dir, "h2.toml"))
		if err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(filepath.Join(dir, "bad.toml"), []byte(strings.Replace(string(text), c.old, c.new, 1)), 0o644); err != nil {
			t.Fatal(err)
		}
		if _, err := OpenBudget(filepath.Join(dir, "bad.toml")); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%q: %v, want %q", c.new, err, c.want)
		}
	}
}
