package gum_test

import (
	"context"
	"testing"

	"example.org/guardring/pkg/formula"
	"example.org/guardring/pkg/gum"
)

// compiled makes an output from a formula.
func compiled(t testing.TB, name, source string, inputs []gum.Input) gum.Output {
	t.Helper()
	var vars []string
	for _, in := range inputs {
		vars = append(vars, in.Name)
	}
	p, err := formula.Compile(source, vars)
	if err != nil {
		t.Fatal(err)
	}
	return gum.Output{Name: name, Formula: source, New: func() gum.Evaluator {
		w := p.Workspace()
		return gum.Evaluator{Block: w.Block, Gradient: w.Gradient, Hessian: w.Hessian}
	}}
}

// permittivity is the budget of an attracted-disc measurement whose Monte Carlo
// is the project's yardstick: invented numbers, one input of each usual shape.
func permittivity(t testing.TB) *gum.Model {
	in := []gum.Input{
		{Name: "F", Unit: "N", Dist: gum.Normal(10.53e-3, 10e-6)},
		{Name: "d", Unit: "m", Dist: gum.Rectangular(2.000e-3, 20e-6)},
		{Name: "d0", Unit: "m", Dist: gum.StudentT(50e-6, 5e-6, 9)},
		{Name: "A", Unit: "m2", Dist: gum.Normal(1.000e-2, 5e-6)},
		{Name: "V", Unit: "V", Dist: gum.Normal(1000.0, 0.5)},
		{Name: "V0", Unit: "V", Dist: gum.Arcsine(1.0, 2.0)},
	}
	return &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "eps", "2*F*pow(d+d0, 2)/(A*pow(V-V0, 2))", in)}}
}

// BenchmarkMonteCarlo times the whole answer: mean, standard uncertainty, both
// coverage intervals, for the permittivity budget.
func BenchmarkMonteCarlo(b *testing.B) {
	for _, c := range []struct {
		name   string
		trials int64
	}{{"permittivity/1e6", 1e6}, {"permittivity/1e7", 1e7}} {
		b.Run(c.name, func(b *testing.B) {
			m := permittivity(b)
			for b.Loop() {
				if _, err := gum.Propagate(context.Background(), m, gum.Settings{Trials: c.trials, Probability: 0.95}); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(c.trials), "ns/trial")
		})
	}
}
