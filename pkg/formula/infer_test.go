package formula_test

import (
	"strings"
	"testing"

	"example.org/guardring/pkg/formula"
	"example.org/guardring/pkg/si"
)

// Expected dimensions follow from the quantities by hand.
func TestInfer(t *testing.T) {
	one, open := si.Dimensionless, si.Luminous // no formula here is about light
	for _, c := range []struct {
		src    string
		result si.Dimension
		want   []si.Dimension // of a, b, k; x is a length, t a time
	}{
		{"a + b/(x + k)", si.Capacitance, []si.Dimension{si.Capacitance, si.Capacitance.Mul(si.Length), si.Length}},
		{"a*exp(-t/b) + k", si.Voltage, []si.Dimension{si.Voltage, si.Time, si.Voltage}},
		{"a*b*x + k", si.Field, []si.Dimension{open, open, si.Field}},
		{"a*pow(x/b, k)", si.Charge, []si.Dimension{si.Charge, si.Length, one}},
		{"sqrt(a*x) + b + 0*k", si.Velocity, []si.Dimension{si.Acceleration, si.Velocity, open}},
		{"max(a, b) - k", si.Mass, []si.Dimension{si.Mass, si.Mass, si.Mass}},
		{"a*sin(b*t + k)", si.Current, []si.Dimension{si.Current, si.Frequency, one}},
		{"eps0*a/(x + b) + k", si.Capacitance, []si.Dimension{si.Area, si.Length, si.Capacitance}},
	} {
		p, err := formula.Compile(c.src, []string{"a", "b", "k", "x", "t"})
		if err != nil {
			t.Fatal(err)
		}
		got, known, err := p.Infer([]si.Dimension{{}, {}, {}, si.Length, si.Time}, []int{0, 1, 2}, c.result)
		if err != nil {
			t.Errorf("%s: %v", c.src, err)
			continue
		}
		for j, w := range c.want {
			if known[j] != (w != open) || known[j] && got[j] != w {
				t.Errorf("%s: %s has dimension %s (known: %t), not %s", c.src, p.Vars()[j], got[j], known[j], w)
			}
		}
		// What was found satisfies the check of dimensions.
		full := []si.Dimension{{}, {}, {}, si.Length, si.Time}
		copy(full, got)
		if known[0] && known[1] && known[2] {
			if d, err := p.Dimension(full); err != nil || d != c.result {
				t.Errorf("%s with what was found: %s, %v", c.src, d, err)
			}
		}
	}
}

func TestInferErrors(t *testing.T) {
	for _, c := range []struct{ src, want string }{
		{"a + x + t", `column 7: no units of a fit: the terms of this sum differ, m and s`},
		{"a*(x + t)", `column 6: the terms of this sum differ: m and s`},
		{"exp(x) + a", `column 5: the argument of exp and a pure number differ: m and a pure number`},
		{"a + a*x", `no units of a fit`},
		{"a + log(0 - x/x)", `no units of a fit: the formula and the result differ, a pure number and V, which can be neither equal nor added`},
		{"pow(x, a)", `what is raised to a power`},
	} {
		p, err := formula.Compile(c.src, []string{"a", "x", "t"})
		if err != nil {
			t.Fatal(err)
		}
		if _, _, err = p.Infer([]si.Dimension{{}, si.Length, si.Time}, []int{0}, si.Voltage); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: error %v does not say %q", c.src, err, c.want)
		}
	}
}
