package reduce_test

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"reflect"
	"strconv"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
)

// fitText fits a formula to a CSV text.
func fitText(t testing.TB, csv string, s reduce.FitSettings) *reduce.FormulaFit {
	t.Helper()
	f, err := reduce.FitCSV(context.Background(), strings.NewReader(csv), "readings.csv", s)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func rel(t testing.TB, what string, got reduce.Number, want, tol float64) {
	t.Helper()
	if !(math.Abs(float64(got)-want) <= tol*math.Abs(want)) {
		t.Errorf("%s is %.12g, not %.12g", what, float64(got), want)
	}
}

// nist reads a file of the NIST Statistical Reference Datasets: starts, certified
// values and standard deviations by parameter, and the data as CSV.
func nist(t testing.TB, name string) (start [2]map[string]float64, value, sd map[string]float64, csv string) {
	t.Helper()
	raw, err := os.ReadFile("../../testdata/refs/nist/" + name + ".dat")
	if err != nil {
		t.Fatal(err)
	}
	start = [2]map[string]float64{{}, {}}
	value, sd = map[string]float64{}, map[string]float64{}
	var b strings.Builder
	b.WriteString("y,x\n")
	data := false
	for _, line := range strings.Split(string(raw), "\n") {
		f := strings.Fields(line)
		switch {
		case len(f) >= 3 && f[0] == "Data:" && f[1] == "y":
			data = true
		case data && len(f) == 2:
			b.WriteString(f[0] + "," + f[1] + "\n")
		case len(f) == 6 && f[1] == "=" && strings.HasPrefix(f[0], "b"):
			var v [4]float64
			for i := range v {
				if v[i], err = strconv.ParseFloat(f[2+i], 64); err != nil {
					t.Fatal(err)
				}
			}
			start[0][f[0]], start[1][f[0]], value[f[0]], sd[f[0]] = v[0], v[1], v[2], v[3]
		}
	}
	return start, value, sd, b.String()
}

// TestFitCertified meets certified values of the NIST Statistical Reference Datasets
// (nonlinear regression, published) through formulas and CSV, from both starts:
// parameters and standard deviations to 1e-8.
func TestFitCertified(t *testing.T) {
	for name, f := range map[string]string{
		"Misra1a": "b1*(1 - exp(-b2*x))",
		"Thurber": "(b1 + b2*x + b3*x*x + b4*pow(x, 3))/(1 + b5*x + b6*x*x + b7*pow(x, 3))",
		"Rat43":   "b1/pow(1 + exp(b2 - b3*x), 1/b4)",
		"MGH10":   "b1*exp(b2/(x + b3))",
	} {
		start, value, sd, csv := nist(t, name)
		for i := range start {
			r := fitText(t, csv, reduce.FitSettings{Formula: f, Response: "y", Start: start[i]})
			if r.Record.Fit.Status != "converged" || !r.Record.Fit.ScaledByResiduals || !math.IsNaN(float64(r.Record.Fit.PValue)) {
				t.Errorf("%s from start %d: %s, scaled %t, p = %g", name, i+1, r.Record.Fit.Status, r.Record.Fit.ScaledByResiduals, float64(r.Record.Fit.PValue))
			}
			if len(r.Record.Fit.Parameters) != len(value) {
				t.Fatalf("%s: %d parameters", name, len(r.Record.Fit.Parameters))
			}
			for _, p := range r.Record.Fit.Parameters {
				rel(t, name+" "+p.Name, p.Value, value[p.Name], 1e-8)
				rel(t, name+" u of "+p.Name, p.U, sd[p.Name], 1e-8)
			}
		}
	}
}

// eivCase is an entry of testdata/refs/eiv.json.
type eivCase struct {
	ID     string
	Inputs struct {
		X, Y, UX, UY, WX, WY []float64
	}
	Expected struct {
		A, B, UA, UB, Chi2 float64
	}
}

func (c *eivCase) UnmarshalJSON(b []byte) error {
	var raw struct {
		ID               string
		Inputs, Expected map[string]json.RawMessage
	}
	if err := json.Unmarshal(b, &raw); err != nil {
		return err
	}
	c.ID = raw.ID
	for key, dst := range map[string]*[]float64{"x": &c.Inputs.X, "y": &c.Inputs.Y, "ux": &c.Inputs.UX, "uy": &c.Inputs.UY, "wx": &c.Inputs.WX, "wy": &c.Inputs.WY} {
		// Where an entry is no list, such as an exact x, it stays nil.
		if json.Unmarshal(raw.Inputs[key], dst) != nil {
			*dst = nil
		}
	}
	for key, dst := range map[string]*float64{"a": &c.Expected.A, "b": &c.Expected.B, "ua": &c.Expected.UA, "ub": &c.Expected.UB, "chi2": &c.Expected.Chi2} {
		if raw.Expected[key] != nil {
			if err := json.Unmarshal(raw.Expected[key], dst); err != nil {
				return err
			}
		}
	}
	return nil
}

// TestFitErrorsInVariables meets published straight lines with errors in both axes:
// Pearson's data with York's weights (published), and ISO/TS 28037:2010 clauses 6 and 7
// (values from memory).
func TestFitErrorsInVariables(t *testing.T) {
	raw, err := os.ReadFile("../../testdata/refs/eiv.json")
	if err != nil {
		t.Fatal(err)
	}
	var cases []eivCase
	if err := json.Unmarshal(raw, &cases); err != nil {
		t.Fatal(err)
	}
	done := 0
	for _, c := range cases {
		switch c.ID {
		case "eiv-pearson-york", "eiv-28037-cl7", "eiv-28037-cl6-equal":
		default:
			continue
		}
		done++
		var b strings.Builder
		b.WriteString("x,y,u_x,u_y\n")
		for i := range c.Inputs.X {
			ux, uy := 0.0, 0.0
			if c.Inputs.WX != nil {
				ux, uy = 1/math.Sqrt(c.Inputs.WX[i]), 1/math.Sqrt(c.Inputs.WY[i])
			} else {
				uy = c.Inputs.UY[i]
				if c.Inputs.UX != nil {
					ux = c.Inputs.UX[i]
				}
			}
			fmt.Fprintf(&b, "%v,%v,%v,%v\n", c.Inputs.X[i], c.Inputs.Y[i], ux, uy)
		}
		s := reduce.FitSettings{Formula: "a + b*x", Response: "y", Start: map[string]float64{"a": 1, "b": 1}, Noise: "u_y", PredictorNoise: map[string]string{"x": "u_x"}}
		r := fitText(t, b.String(), s)
		if r.Record.Fit.Method != "errors-in-variables" {
			t.Errorf("%s: method %s", c.ID, r.Record.Fit.Method)
		}
		tol := 1e-7
		rel(t, c.ID+" a", r.Record.Fit.Parameters[0].Value, c.Expected.A, tol)
		rel(t, c.ID+" b", r.Record.Fit.Parameters[1].Value, c.Expected.B, tol)
		rel(t, c.ID+" u(a)", r.Record.Fit.Parameters[0].U, c.Expected.UA, tol)
		rel(t, c.ID+" u(b)", r.Record.Fit.Parameters[1].U, c.Expected.UB, tol)
		if c.Expected.Chi2 != 0 {
			rel(t, c.ID+" chi-squared", r.Record.Fit.ChiSquared, c.Expected.Chi2, 1e-7)
		}
		// Effective variance is the fixed point of weighted lines with the weights
		// 1/(u_y² + b²u_x²), here in closed form.
		s.EffectiveVariance = true
		e := fitText(t, b.String(), s)
		slope := 0.0
		for range 500 {
			var w, wx, wy, wxx, wxy float64
			for i, x := range c.Inputs.X {
				ux, uy := 0.0, 0.0
				if c.Inputs.WX != nil {
					ux, uy = 1/math.Sqrt(c.Inputs.WX[i]), 1/math.Sqrt(c.Inputs.WY[i])
				} else {
					uy = c.Inputs.UY[i]
					if c.Inputs.UX != nil {
						ux = c.Inputs.UX[i]
					}
				}
				k := 1 / (uy*uy + slope*slope*ux*ux)
				w, wx, wy, wxx, wxy = w+k, wx+k*x, wy+k*c.Inputs.Y[i], wxx+k*x*x, wxy+k*x*c.Inputs.Y[i]
			}
			slope = (w*wxy - wx*wy) / (w*wxx - wx*wx)
		}
		rel(t, c.ID+" b by effective variance", e.Record.Fit.Parameters[1].Value, slope, 1e-7)
	}
	if done != 3 {
		t.Errorf("%d of 3 published lines were found", done)
	}
}

func example(t testing.TB) (string, reduce.FitSettings) {
	t.Helper()
	b, err := os.ReadFile("../../datasets/fit-example/capacitance.csv")
	if err != nil {
		t.Fatal(err)
	}
	return string(b), reduce.FitSettings{Formula: "c_s + s/(d+d0)", Response: "c", Start: map[string]float64{"c_s": 2e-12, "s": 7e-14, "d0": 1e-5}, Noise: "u_c"}
}

// TestFitUnits: headers' units reach the parameters, and the invented truth lies
// within three standard uncertainties.
func TestFitUnits(t *testing.T) {
	csv, s := example(t)
	r := fitText(t, csv, s)
	truth := map[string]float64{"c_s": 2.4e-12, "s": 7.0135e-14, "d0": 11.5e-6}
	units := map[string]string{"c_s": "F", "s": "F m", "d0": "m"}
	for _, p := range r.Record.Fit.Parameters {
		if p.Unit != units[p.Name] {
			t.Errorf("%s has unit %q, not %q", p.Name, p.Unit, units[p.Name])
		}
		if d := math.Abs(float64(p.Value)-truth[p.Name]) / float64(p.U); !(d < 3) {
			t.Errorf("%s lies %.1f u from the truth", p.Name, d)
		}
	}
	// Without units nothing is converted and nothing checked.
	bare := strings.Replace(csv, "d/mm,c/pF,u_c/pF", "d,c,u_c", 1)
	s.Start = map[string]float64{"c_s": 2, "s": 70, "d0": 0.01}
	b := fitText(t, bare, s)
	for j, scale := range []float64{1e-12, 1e-15, 1e-3} {
		p, q := b.Record.Fit.Parameters[j], r.Record.Fit.Parameters[j]
		rel(t, p.Name+" without units", p.Value*reduce.Number(scale), float64(q.Value), 1e-9)
		if p.Unit != "" {
			t.Errorf("%s has unit %q without any in the headers", p.Name, p.Unit)
		}
	}
	if b.Record.Fit.ResponseUnit != "" {
		t.Errorf("the response has unit %q", b.Record.Fit.ResponseUnit)
	}
}

// TestFitWeights: weights 1/u² give the estimates of the noise u, and uncertainties
// scaled by the Birge ratio, whatever the weights' common factor.
func TestFitWeights(t *testing.T) {
	csv, s := example(t)
	known := fitText(t, csv, s).Record.Fit
	s.Noise, s.Weights = "", "w"
	lines := strings.Split(strings.TrimSpace(csv), "\n")
	for i, l := range lines {
		if i == 0 {
			lines[i] = l + ",w"
			continue
		}
		u, err := strconv.ParseFloat(strings.Split(l, ",")[2], 64)
		if err != nil {
			t.Fatal(err)
		}
		lines[i] = fmt.Sprintf("%s,%v", l, 1e-3/(u*u))
	}
	r := fitText(t, strings.Join(lines, "\n"), s)
	if !r.Record.Fit.ScaledByResiduals || !math.IsNaN(float64(r.Record.Fit.PValue)) {
		t.Errorf("scaled %t, p = %v", r.Record.Fit.ScaledByResiduals, float64(r.Record.Fit.PValue))
	}
	for j, p := range r.Record.Fit.Parameters {
		q := known.Parameters[j]
		rel(t, p.Name, p.Value, float64(q.Value), 1e-8)
		rel(t, "u of "+p.Name, p.U, float64(q.U*known.BirgeRatio), 1e-8)
	}
}

// TestFitHeld: fixed parameters stay, bounds are kept and reported, priors count.
func TestFitHeld(t *testing.T) {
	csv, s := example(t)
	s.Fixed = []string{"d0"}
	s.Bounds = map[string][2]float64{"c_s": {0, 2.1e-12}}
	r := fitText(t, csv, s)
	if len(r.Record.Fit.Parameters) != 2 || len(r.Record.Limits) != 2 || len(r.Record.Missing) != 1 {
		t.Fatalf("parameters %v, limits %v, missing %v", r.Record.Fit.Parameters, r.Record.Limits, r.Record.Missing)
	}
	for _, l := range r.Record.Limits {
		switch l.Parameter {
		case "d0":
			if !l.Fixed || l.Value != 1e-5 {
				t.Errorf("d0 was to be held at 1e-5: %+v", l)
			}
		case "c_s":
			if !l.Reached || l.Value != 2.1e-12 {
				t.Errorf("c_s was to end at its bound: %+v", l)
			}
		}
	}
	if m := r.Record.Missing[0]; m.Parameter != "c_s" || !strings.Contains(m.Reason, "bound") {
		t.Errorf("missing: %+v", m)
	}
	// A prior much sharper than the readings pulls the estimate to itself, and needs
	// no start.
	csv, s = example(t)
	delete(s.Start, "d0")
	s.Priors = map[string]reduce.Prior{"d0": {Value: 13e-6, U: 1e-11}}
	p := fitText(t, csv, s).Record.Fit
	if math.Abs(float64(p.Parameters[2].Value)-13e-6) > 1e-10 || p.DOF != 31 {
		t.Errorf("d0 = %v with %d degrees of freedom", float64(p.Parameters[2].Value), p.DOF)
	}
}

// TestFitOpinions: profile, bootstrap and robust opinions stand beside the result
// and don't change it; a spoilt reading is flagged by its line and kept.
func TestFitOpinions(t *testing.T) {
	csv, s := example(t)
	csv = strings.Replace(csv, "0.300,227.547", "0.300,227.947", 1)
	plain := fitText(t, csv, s)
	s.Profile, s.Robust, s.Bootstrap, s.Seed = true, true, 200, 3
	r := fitText(t, csv, s)
	if !reflect.DeepEqual(plain.Record.Fit.Parameters, r.Record.Fit.Parameters) {
		t.Error("opinions changed the result")
	}
	if len(r.Record.Intervals) != 6 {
		t.Fatalf("%d intervals", len(r.Record.Intervals))
	}
	for i, v := range r.Record.Intervals {
		p := r.Record.Fit.Parameters[i%3]
		half := float64(v.Interval[1]-v.Interval[0]) / 2 / float64(p.U)
		if v.Parameter != p.Name || !(v.Interval[0] < p.Value && p.Value < v.Interval[1]) || v.Method == "profile" && math.Abs(half-2) > 0.05 {
			t.Errorf("%s interval of %s is %v, estimate %v, half-width %.2f u", v.Method, v.Parameter, v.Interval, p.Value, half)
		}
	}
	if o := r.Record.Robust; o == nil || !reflect.DeepEqual(o.Outliers, []int{2}) {
		t.Errorf("robust opinion %+v does not flag reading 2", o)
	}
	if w := strings.Join(r.Record.Warnings, "\n"); !strings.Contains(w, "reading 2 (line 3) lies") {
		t.Errorf("no warning of reading 2 in:\n%s", w)
	}
	if r.Record.Fit.Rows != 33 {
		t.Errorf("%d readings in the fit", r.Record.Fit.Rows)
	}
}

// TestFitMissing: readings without a value are left out and counted.
func TestFitMissing(t *testing.T) {
	csv, s := example(t)
	csv = strings.Replace(csv, "0.300,227.547,", "0.300,,", 1)
	r := fitText(t, csv, s)
	if r.Record.Fit.Rows != 32 || r.Record.Inputs[0].Excluded != 1 || r.Record.Inputs[0].Rows != 33 {
		t.Errorf("rows %d, input %+v", r.Record.Fit.Rows, r.Record.Inputs[0])
	}
	if !strings.Contains(strings.Join(r.Record.Warnings, " "), "1 of 33 reading is left out for a missing value") &&
		!strings.Contains(strings.Join(r.Record.Warnings, " "), "left out for a missing value") {
		t.Errorf("warnings %q", r.Record.Warnings)
	}
}

// TestFitAgain: the same table gives the same bytes.
func TestFitAgain(t *testing.T) {
	csv, s := example(t)
	s.Bootstrap, s.Rows = 50, true
	var first []byte
	for range 3 {
		b, err := json.Marshal(fitText(t, csv, s).Record)
		if err != nil {
			t.Fatal(err)
		}
		if first == nil {
			first = b
		} else if !bytes.Equal(first, b) {
			t.Fatal("the record differs from run to run")
		}
	}
}

func TestFitCancelled(t *testing.T) {
	csv, s := example(t)
	ctx, stop := context.WithCancel(context.Background())
	stop()
	if _, err := reduce.FitCSV(ctx, strings.NewReader(csv), "readings.csv", s); err == nil || !strings.Contains(err.Error(), "cancel") {
		t.Errorf("a cancelled fit gives %v", err)
	}
}

// TestFitErrors: what is wrong is told with its place and what would be right.
func TestFitErrors(t *testing.T) {
	csv, _ := example(t)
	for _, c := range []struct {
		name   string
		change func(s *reduce.FitSettings, csv *string)
		want   string
	}{
		{"formula", func(s *reduce.FitSettings, _ *string) { s.Formula = "c_s + s/(d+d0" }, `column 14`},
		{"unknown name", func(s *reduce.FitSettings, _ *string) { s.Formula = "c_s + s/(dd+d0)" }, `column 10: "dd" is not known; did you mean "d"? If it is a parameter, give it a start`},
		{"no start", func(s *reduce.FitSettings, _ *string) { delete(s.Start, "s") }, `"s" is not known`},
		{"start of another", func(s *reduce.FitSettings, _ *string) { s.Start["d_0"] = 1 }, `d_0 is no parameter of the formula; did you mean d0?`},
		{"start of a column", func(s *reduce.FitSettings, _ *string) { s.Start["d"] = 1 }, `d is a column of readings.csv, not a parameter`},
		{"response", func(s *reduce.FitSettings, _ *string) { s.Response = "C" }, `the response C is no column of readings.csv; did you mean c?`},
		{"itself", func(s *reduce.FitSettings, _ *string) { s.Formula += "+c" }, `the formula of c uses c itself`},
		{"power", func(s *reduce.FitSettings, _ *string) { s.Formula = "c_s + s/d^2 + d0" }, `use pow(x, 2)`},
		{"dimensions", func(s *reduce.FitSettings, _ *string) { s.Formula = "c_s + s*exp(d) + d0" }, `the argument of exp and a pure number differ: m and a pure number`},
		{"undefined at the start", func(s *reduce.FitSettings, _ *string) { s.Formula = "c_s + s/d0*log(-d/d0)" }, `readings.csv:2: the formula is not a number at the start`},
		{"noise column", func(s *reduce.FitSettings, _ *string) { s.Noise = "u_d" }, `no column of readings.csv and no value; did you mean u_c?`},
		{"noise unit", func(s *reduce.FitSettings, _ *string) { s.Noise = "3 mm" }, `3 mm is in mm, but c in pF`},
		{"noise of another", func(s *reduce.FitSettings, _ *string) { s.Noise = "d" }, `column d/mm: this can't be the noise: the unit of c is pF`},
		{"no noise", func(s *reduce.FitSettings, _ *string) { s.Noise = "0" }, `the noise must be above zero`},
		{"negative noise", func(s *reduce.FitSettings, csv *string) {
			*csv = strings.Replace(*csv, "227.547,0.026", "227.547,-0.026", 1)
		}, `readings.csv:3: column u_c/pF: the noise of c is -0.026; it must be above zero`},
		{"text", func(_ *reduce.FitSettings, csv *string) { *csv = strings.Replace(*csv, "227.547", "227,547x", 1) }, `readings.csv:3`},
		{"not a number", func(_ *reduce.FitSettings, csv *string) { *csv = strings.Replace(*csv, "227.547", "Inf", 1) }, `readings.csv:3: column c/pF: "Inf"`},
		{"unit", func(_ *reduce.FitSettings, csv *string) { *csv = strings.Replace(*csv, "d/mm", "d/mmm", 1) }, `readings.csv:1: column d/mmm`},
		{"two columns", func(_ *reduce.FitSettings, csv *string) { *csv = strings.Replace(*csv, "remark", "d/um", 1) }, `d is the name of two columns`},
		{"bounds", func(s *reduce.FitSettings, _ *string) { s.Bounds = map[string][2]float64{"s": {1, 2}} }, `outside its bounds 1 to 2 (--bound); move the start or the bound`},
		{"predictor noise", func(s *reduce.FitSettings, _ *string) { s.PredictorNoise = map[string]string{"D": "1 um"} }, `predictor noise: D is no column in the formula; did you mean d?`},
		{"predictor noise alone", func(s *reduce.FitSettings, _ *string) { s.Noise, s.PredictorNoise = "", map[string]string{"d": "1 um"} }, `needs the noise of the response too`},
		{"weights and noise", func(s *reduce.FitSettings, _ *string) { s.Weights = "u_c" }, `either the noise or the weights`},
		{"too few", func(_ *reduce.FitSettings, csv *string) { *csv = strings.Join(strings.SplitAfter(*csv, "\n")[:3], "") }, `3 parameters can't be estimated from 2 readings`},
		{"nothing", func(_ *reduce.FitSettings, csv *string) { *csv = "d/mm,c/pF,u_c/pF\n" }, `no data record`},
		{"empty", func(_ *reduce.FitSettings, csv *string) { *csv = "" }, `readings.csv`},
	} {
		text := csv
		_, s := example(t)
		c.change(&s, &text)
		r, err := reduce.FitCSV(context.Background(), strings.NewReader(text), "readings.csv", s)
		if err == nil || !strings.Contains(err.Error(), c.want) || r != nil {
			t.Errorf("%s: error %v does not say %q", c.name, err, c.want)
		}
	}
}

// TestFitSingular: parameters that can't be told apart are named, and the numbers
// where the search stopped are there.
func TestFitSingular(t *testing.T) {
	csv, s := example(t)
	s.Formula = "c_s + s*k/d + 0*d0"
	s.Start["k"] = 1
	r := fitText(t, csv, s)
	if r.Record.Fit.Status != "singular" || len(r.Record.Missing) == 0 {
		t.Fatalf("status %s, missing %v", r.Record.Fit.Status, r.Record.Missing)
	}
	if w := strings.Join(r.Record.Warnings, " "); !strings.Contains(w, "s and k can't be told apart") {
		t.Errorf("warnings %q", w)
	}
	for _, p := range r.Record.Fit.Parameters {
		if math.IsNaN(float64(p.Value)) {
			t.Errorf("%s is not a number", p.Name)
		}
	}
}

// FuzzFitCSV: any file and formula give a result or an error that names neither
// itself nor the program, and never an endless loop or a panic.
func FuzzFitCSV(f *testing.F) {
	f.Add("x,y\n1,2\n2,3\n4,5\n", "a + b*x")
	f.Add("d/mm,c/pF\n1,2\n2,3\n4,5\n", "a*pow(d, 2) + b")
	f.Add("x;y\n1;2\n\n\"2\";3\n", "a/(x-b)")
	f.Fuzz(func(t *testing.T, csv, formula string) {
		if len(csv) > 1000 || len(formula) > 100 {
			return
		}
		s := reduce.FitSettings{Formula: formula, Response: "y", Start: map[string]float64{"a": 1, "b": 2}, CSV: bench.CSVSettings{}}
		r, err := reduce.FitCSV(context.Background(), strings.NewReader(csv), "x.csv", s)
		if (r == nil) == (err == nil) {
			t.Fatalf("result %v with error %v", r, err)
		}
		if err == nil {
			if _, err := json.Marshal(r.Record); err != nil {
				t.Fatal(err)
			}
		}
	})
}

// ExampleFitCSV fits a straight line to three readings with stated noise.
func ExampleFitCSV() {
	csv := "t/s,q/nC,u/nC\n1,2.1,0.1\n2,3.9,0.1\n3,6.1,0.1\n"
	f, err := reduce.FitCSV(context.Background(), strings.NewReader(csv), "charge.csv", reduce.FitSettings{
		Formula: "q0 + i*t", Response: "q", Start: map[string]float64{"q0": 0, "i": 1e-9}, Noise: "u",
	})
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, p := range f.Record.Fit.Parameters {
		fmt.Printf("%s = %.3g %s, u = %.2g\n", p.Name, float64(p.Value), p.Unit, float64(p.U))
	}
	// Output:
	// q0 = 3.33e-11 C, u = 1.5e-10
	// i = 2e-09 A, u = 7.1e-11
}

// TestFitExact: residuals that vanish say nothing about the noise (derived: s² is then
// rounding alone), so that no uncertainty is stated.
func TestFitExact(t *testing.T) {
	r, err := reduce.FitCSV(context.Background(), strings.NewReader("x,y\n1,2\n2,3\n3,4\n4,5\n"), "exact.csv",
		reduce.FitSettings{Formula: "a + b*x", Response: "y", Start: map[string]float64{"a": 0, "b": 0}})
	if err != nil {
		t.Fatal(err)
	}
	for i, p := range r.Record.Fit.Parameters {
		if math.Abs(float64(p.Value)-1) > 1e-12 || !math.IsNaN(float64(p.U)) {
			t.Errorf("%s = %v with u = %v, want 1 and unknown", p.Name, p.Value, p.U)
		}
		if !strings.Contains(r.Record.Missing[i].Reason, "residuals vanish") {
			t.Errorf("reason: %s", r.Record.Missing[i].Reason)
		}
	}
	if !strings.Contains(strings.Join(r.Record.Warnings, "\n"), "the residuals vanish to rounding") {
		t.Errorf("warnings: %q", r.Record.Warnings)
	}
}
