package gum_test

import (
	"context"
	"fmt"
	"math"
	"strings"
	"testing"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/random"
)

func propagate(t testing.TB, m *gum.Model, s gum.Settings) *gum.Result {
	t.Helper()
	r, err := gum.Propagate(context.Background(), m, s)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// twoOutputs has two correlated outputs.
func twoOutputs(t testing.TB) *gum.Model {
	in := []gum.Input{{Name: "a", Dist: gum.Normal(1, 0.1)}, {Name: "b", Dist: gum.Normal(2, 0.1)}, {Name: "c", Dist: gum.Normal(0, 0.2)}}
	return &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "p", "a + c", in), compiled(t, "q", "b + c", in)}}
}

// TestCorrelated: correlated normals, a multivariate t and a Gaussian copula have
// the spread of their sum that theory gives.
func TestCorrelated(t *testing.T) {
	sum := func(a, b gum.Input, r float64) *gum.Result {
		in := []gum.Input{a, b}
		return propagate(t, &gum.Model{Inputs: in, Correlations: []gum.Pair{{A: "a", B: "b", R: r}},
			Outputs: []gum.Output{compiled(t, "s", "a + b", in), compiled(t, "x", "a", in), compiled(t, "y", "b", in)}}, gum.Settings{Trials: 1_000_000})
	}
	for _, r := range []float64{-1, -0.6, 0.3, 1} {
		m := sum(gum.Input{Name: "a", Dist: gum.Normal(1, 3)}, gum.Input{Name: "b", Dist: gum.Normal(2, 4)}, r)
		want := math.Sqrt(25 + 24*r)
		near(t, "u of the sum of normals", m.Outputs[0].MonteCarlo.U, want, 0.005*want)
		near(t, "law", m.Outputs[0].Law.U, want, 1e-12)
		near(t, "r", m.Correlation[1][2], r, 0.003)
		if len(m.Outputs[0].Law.Warnings) != 0 {
			t.Errorf("warnings %v", m.Outputs[0].Law.Warnings)
		}
	}
	// Rectangular under a Gaussian copula: product-moment correlation (6/π) asin(r/2) (Pearson 1907).
	m := sum(gum.Input{Name: "a", Dist: gum.Rectangular(0, 1)}, gum.Input{Name: "b", Dist: gum.Rectangular(5, 2)}, 0.7)
	near(t, "correlation of the rectangular pair", m.Correlation[1][2], 6/math.Pi*math.Asin(0.35), 0.003)
	near(t, "u of a member", m.Outputs[1].MonteCarlo.U, 1/math.Sqrt(3), 0.002)
	said := false
	for _, w := range m.Warnings {
		said = said || strings.Contains(w.Error(), "copula") && strings.Contains(w.Error(), "a, b")
	}
	if !said {
		t.Errorf("warnings %v do not name the copula and its inputs", m.Warnings)
	}
}

// TestJoint: one draw of several inputs, some correlated.
func TestJoint(t *testing.T) {
	d := []gum.Distribution{gum.Normal(1, 2), gum.Rectangular(0, 1), gum.Normal(5, 3), gum.Exactly(7), gum.Normal(0, 1)}
	j, err := gum.NewJoint(d, []gum.Correlation{{I: 0, J: 2, R: -0.8}, {I: 2, J: 4, R: 0.6}, {I: 0, J: 4, R: -0.48}})
	if err != nil {
		t.Fatal(err)
	}
	const n = 200_000
	src := random.New(12, "joint", 0)
	x := make([]float64, len(d))
	var cov [5][5]float64
	for range n {
		j.Sample(&src, x)
		for a := range x {
			for b := range x {
				cov[a][b] += (x[a] - d[a].Value) * (x[b] - d[b].Value) / n
			}
		}
	}
	r := [5][5]float64{{1, 0, -0.8, 0, -0.48}, {0, 1, 0, 0, 0}, {-0.8, 0, 1, 0, 0.6}, {}, {-0.48, 0, 0.6, 0, 1}}
	for a := range x {
		for b := range x {
			near(t, fmt.Sprintf("covariance of %d and %d", a, b), cov[a][b], r[a][b]*d[a].U*d[b].U, 0.015*d[a].U*d[b].U)
		}
	}
	if _, err := gum.NewJoint(d, []gum.Correlation{{I: 0, J: 2, R: 2}}); err == nil {
		t.Error("r = 2 is accepted")
	}
}

// TestMultivariateT: twelve joint readings, ten degrees of freedom: covariance of
// the draws is scale·ν/(ν−2), and the pair is uncorrelated yet dependent when r = 0.
func TestMultivariateT(t *testing.T) {
	d := gum.Normal(0, 1)
	d.DOF = 10
	in := []gum.Input{{Name: "a", Dist: d, Block: "run"}, {Name: "b", Dist: d, Block: "run"}}
	m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "a squared", "a*a", in), compiled(t, "b squared", "b*b", in), compiled(t, "s", "a+b", in)}}
	r := propagate(t, m, gum.Settings{Trials: 1_000_000})
	near(t, "variance of the sum", r.Outputs[2].MonteCarlo.U*r.Outputs[2].MonteCarlo.U, 2*10.0/8, 0.015)
	// Derived: with s = ν/χ², cov(a², b²) = var(s), E s = ν/(ν−2), E s² = ν²/((ν−2)(ν−4)); var(a²) = 3E s² − (E s)².
	es, es2 := 10.0/8, 100.0/48
	near(t, "correlation of squares", r.Correlation[0][1], (es2-es*es)/(3*es2-es*es), 0.02)
}

// TestModelRefuses lists bad models, and a word of each message.
func TestModelRefuses(t *testing.T) {
	in := func() []gum.Input {
		return []gum.Input{{Name: "radius", Dist: gum.Normal(1, 0.1)}, {Name: "gain", Dist: gum.Normal(1, 0.1)}, {Name: "count", Dist: gum.Exactly(3)}}
	}
	for _, c := range []struct {
		change func(m *gum.Model)
		word   string
	}{
		{func(m *gum.Model) { m.Outputs = nil }, "no outputs"},
		{func(m *gum.Model) { m.Inputs[1].Name = "radius" }, "already taken"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Normal(1, 0) }, "input radius: standard uncertainty is 0"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Normal(1, -2) }, "input radius: standard uncertainty is -2"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Normal(math.NaN(), 1) }, "input radius: value"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Rectangular(1, 0) }, "half-width"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Trapezoidal(1, 1, 1.5) }, "beta"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.CurvilinearTrapezoidal(0, 1, 0.6) }, "limits are uncertain"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Exponential(-1) }, "value is -1"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Gamma(0, 1) }, "shape parameter"},
		{func(m *gum.Model) { m.Inputs[0].Dist.Shape = "gaussian" }, "unknown shape"},
		{func(m *gum.Model) { m.Inputs[0].Dist.DOF = -1 }, "degrees of freedom"},
		{func(m *gum.Model) { m.Correlations = []gum.Pair{{A: "radius", B: "gian", R: 0.5}} }, `did you mean "gain"`},
		{func(m *gum.Model) { m.Correlations = []gum.Pair{{A: "voltage", B: "gain", R: 0.5}} }, "known are radius, gain, count"},
		{func(m *gum.Model) { m.Correlations = []gum.Pair{{A: "radius", B: "gain", R: 1.5}} }, "radius and gain is 1.5"},
		{func(m *gum.Model) { m.Correlations = []gum.Pair{{A: "radius", B: "count", R: 0.5}} }, "count is exact"},
		{func(m *gum.Model) { m.Inputs[0].Block, m.Inputs[1].Block = "b", "b"; m.Inputs[1].Dist.DOF = 4 }, "read together"},
		{func(m *gum.Model) { m.Outputs[0].New = nil }, "no formula"},
	} {
		m := &gum.Model{Inputs: in()}
		m.Outputs = []gum.Output{compiled(t, "y", "radius*gain*count", m.Inputs)}
		c.change(m)
		r, err := gum.Propagate(context.Background(), m, gum.Settings{Trials: 1000})
		if err == nil || r != nil || !strings.Contains(err.Error(), c.word) {
			t.Errorf("error %v, want one with %q", err, c.word)
		}
	}
	m := &gum.Model{Inputs: in()}
	m.Outputs = []gum.Output{compiled(t, "y", "radius*gain*count", m.Inputs)}
	for _, s := range []gum.Settings{{Probability: 1}, {Probability: -1}, {Trials: -5}, {Trials: math.MaxInt64}, {Digits: 9}, {Trials: 10}} {
		if r, err := gum.Propagate(context.Background(), m, s); err == nil || r != nil {
			t.Errorf("settings %+v are accepted", s)
		}
	}
}

// TestSecondOrderDOF: the variance of x² at x = 0 is of second order, 2u⁴ (JCGM 100:2008
// 5.1.2, note); its degrees of freedom are not those of the terms of first order.
func TestSecondOrderDOF(t *testing.T) {
	x := gum.Normal(0, 1)
	x.DOF = 3
	in := []gum.Input{{Name: "a", Dist: gum.Normal(0, 0.01)}, {Name: "x", Dist: x}}
	for _, source := range []string{"x*x", "a + x*x"} {
		l := propagateLaw(t, &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "y", source, in)}}, gum.Settings{SecondOrder: true})
		near(t, source+": u", l.U, math.Sqrt2, 1e-4)
		said := false
		for _, w := range l.Warnings {
			said = said || strings.Contains(w.Error(), "x has 3 degrees of freedom")
		}
		if !math.IsNaN(l.DOF) || !said {
			t.Errorf("%s: degrees of freedom %v with warnings %v, want NaN and a warning that names x", source, l.DOF, l.Warnings)
		}
	}
	// Known to the formula already: kept.
	in[1].Dist.Value = 0.1
	l := propagateLaw(t, &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "y", "x*x", in)}}, gum.Settings{SecondOrder: true})
	near(t, "degrees of freedom", l.DOF, 3, 1e-12)
}

// TestSmallExactInput: differences by an exact input take its size, not that of the
// unit.
func TestSmallExactInput(t *testing.T) {
	in := []gum.Input{{Name: "q", Dist: gum.Normal(1e-10, 1e-13)}, {Name: "c", Dist: gum.Exactly(2e-12)}}
	m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "v", "q/c", in)}}
	with := m.Outputs[0].New
	m.Outputs[0].New = func() gum.Evaluator { return gum.Evaluator{Block: with().Block} }
	l := propagateLaw(t, m, gum.Settings{})
	near(t, "sensitivity to the capacitance, relative", l.Budget[1].Sensitivity/(-1e-10/4e-24), 1, 1e-9)
}
