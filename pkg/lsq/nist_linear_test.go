package lsq

import (
	"context"
	"encoding/json"
	"math"
	"os"
	"strings"
	"testing"
)

func readJSON(t testing.TB, name string, to any) {
	t.Helper()
	raw, err := os.ReadFile("../../testdata/refs/" + name)
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(raw, to); err != nil {
		t.Fatalf("%s: %v", name, err)
	}
}

type linearData struct {
	Y []float64
	X [][]float64
}

// linearSets reads the number tables of the NIST StRD linear sets.
func linearSets(t testing.TB) map[string]linearData {
	t.Helper()
	raw := map[string]json.RawMessage{}
	readJSON(t, "nist_linear_data.json", &raw)
	delete(raw, "source")
	out := map[string]linearData{}
	for name, r := range raw {
		var d linearData
		if err := json.Unmarshal(r, &d); err != nil {
			t.Fatal(err)
		}
		out[name] = d
	}
	return out
}

// design gives the columns of the model of each set.
func design(name string, d linearData) (cols [][]float64, degree int) {
	n := len(d.Y)
	power := map[string][2]int{"Norris": {0, 1}, "Pontius": {0, 2}, "NoInt1": {1, 1}, "Wampler1": {0, 5}, "Wampler3": {0, 5}, "Wampler5": {0, 5}, "Filip": {0, 10}}
	if r, ok := power[name]; ok {
		for k := r[0]; k <= r[1]; k++ {
			c := make([]float64, n)
			for i := range c {
				c[i] = 1
				for q := 0; q < k; q++ {
					c[i] *= d.X[i][0]
				}
			}
			cols = append(cols, c)
		}
		degree = r[1]
		if r[0] != 0 {
			degree = -1
		}
		return cols, degree
	}
	one := make([]float64, n) // Longley: a constant and six predictors
	for i := range one {
		one[i] = 1
	}
	cols = append(cols, one)
	for k := range d.X[0] {
		c := make([]float64, n)
		for i := range c {
			c[i] = d.X[i][k]
		}
		cols = append(cols, c)
	}
	return cols, -1
}

func linearProblem(cols [][]float64, y []float64, stated bool) *Problem {
	p := &Problem{Y: y, Linear: stated, Parameters: make([]Parameter, len(cols))}
	p.Eval = func(b, f []float64, jac [][]float64) error {
		clear(f)
		for k, c := range cols {
			for i, v := range c {
				f[i] += b[k] * v
			}
			if jac != nil {
				copy(jac[k], c)
			}
		}
		return nil
	}
	return p
}

// TestNISTLinear holds the linear sets to their certified values, printed to 15
// digits, whether the model says that it is linear or is recognised.
func TestNISTLinear(t *testing.T) {
	var refs []struct {
		ID       string
		Expected struct {
			Params, SD []float64
			RSS        float64
			ResidualSD float64 `json:"residual_sd"`
			DOF        int
		}
	}
	readJSON(t, "nist_lls.json", &refs)
	sets := linearSets(t)
	if len(refs) != 8 {
		t.Fatalf("%d sets", len(refs))
	}
	t.Logf("%-9s %-12s %7s %7s %7s %10s %s", "set", "way", "params", "sd", "RSS", "condition", "reason")
	for _, ref := range refs {
		name := strings.TrimPrefix(ref.ID, "nist-lls-")
		d := sets[name]
		cols, degree := design(name, d)
		want := ref.Expected
		check := func(way string, r *Result, err error, least float64) {
			if err != nil {
				t.Errorf("%s %s: %v", name, way, err)
				return
			}
			dp, ds, dr := worst(r.Values, want.Params), worst(r.U, want.SD), digits(r.RSS, want.RSS)
			t.Logf("%-9s %-12s %7.1f %7.1f %7.1f %10.2g %s", name, way, dp, ds, dr, r.Condition, r.Reason)
			if r.Status != Converged || math.Min(dp, math.Min(ds, dr)) < least || r.DOF != want.DOF {
				t.Errorf("%s %s: %s, dof %d, %.1f digits of the parameters, %.1f of the standard deviations, %.1f of RSS", name, way, r.Status, r.DOF, dp, ds, dr)
			}
		}
		for _, stated := range []bool{true, false} {
			r, err := Fit(context.Background(), linearProblem(cols, d.Y, stated), Settings{})
			least := 12.0
			if name == "Filip" {
				least = 7 // the powers themselves are rounded to double precision
			}
			way := "recognised"
			if stated {
				way = "stated"
			}
			check(way, r, err, least)
		}
		if degree >= 0 {
			x := make([]float64, len(d.Y))
			for i := range x {
				x[i] = d.X[i][0]
			}
			r, err := Polynomial(context.Background(), x, d.Y, nil, degree, Settings{})
			check("polynomial", r, err, 12)
		}
	}
}

// TestNISTUnivariate holds the univariate sets to their certified values.
func TestNISTUnivariate(t *testing.T) {
	var refs []struct {
		ID       string
		Expected struct {
			Mean, SD float64
			Lag1     float64 `json:"lag1_autocorrelation"`
		}
		Tolerance struct {
			Mean float64 `json:"mean_rel"`
			SD   float64 `json:"sd_rel"`
			Lag1 float64 `json:"autocorr_rel"`
		}
	}
	readJSON(t, "nist_univariate.json", &refs)
	raw := map[string]json.RawMessage{}
	readJSON(t, "nist_univariate_data.json", &raw)
	if len(refs) != 9 {
		t.Fatalf("%d sets", len(refs))
	}
	t.Logf("%-9s %6s %6s %6s", "set", "mean", "sd", "lag 1")
	for _, ref := range refs {
		name := strings.TrimPrefix(ref.ID, "nist-univ-")
		var y []float64
		if err := json.Unmarshal(raw[name], &y); err != nil {
			t.Fatal(name, err)
		}
		s, err := Summarise(y)
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%-9s %6.1f %6.1f %6.1f", name, digits(s.Mean, ref.Expected.Mean), digits(s.SD, ref.Expected.SD), digits(s.Autocorrelation, ref.Expected.Lag1))
		near(t, name+" mean", s.Mean, ref.Expected.Mean, ref.Tolerance.Mean)
		near(t, name+" sd", s.SD, ref.Expected.SD, ref.Tolerance.SD)
		near(t, name+" lag-1", s.Autocorrelation, ref.Expected.Lag1, ref.Tolerance.Lag1)
	}
}

// Wampler1 repeated until it is too large for extended precision throughout: the
// corrections recover the digits (the set's y is an exact polynomial).
func TestLargeLinear(t *testing.T) {
	d := linearSets(t)["Wampler1"]
	var x, y []float64
	for k := 0; k < 6000; k++ {
		for i := range d.Y {
			x, y = append(x, d.X[i][0]), append(y, d.Y[i])
		}
	}
	cols := make([][]float64, 6)
	for k := range cols {
		cols[k] = make([]float64, len(x))
		for i, v := range x {
			cols[k][i] = math.Pow(v, float64(k))
		}
	}
	r := fit(t, linearProblem(cols, y, true))
	for _, v := range r.Values {
		near(t, "value", v, 1, 1e-13)
	}
	if !strings.Contains(r.Reason, "corrected") {
		t.Errorf("%s", r.Reason)
	}
}
