package reduce_test

import (
	"context"
	"math"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/lsq"
	"example.org/guardring/pkg/reduce"
)

// TestErrorsInVariables compares the reduction with the general estimator for
// errors in variables (pkg/lsq, itself held to published cases) on a bench without
// shared errors: parameters, their uncertainties and chi-squared.
func TestErrorsInVariables(t *testing.T) {
	w := openWorld(t, "attracted-disc")
	b := *w.b
	b.Method = "errors-in-variables"
	b.Corrections = map[string]bool{"guard_gap": true, "balance": true}
	b.Channels = append([]bench.Channel(nil), w.b.Channels...)
	var volt, gap, mass *bench.Channel
	for i := range b.Channels {
		switch ch := &b.Channels[i]; ch.Name {
		case "voltage":
			volt = ch
			ch.Noise, ch.RelativeNoise = 2, 4e-4
		case "gap":
			gap = ch
			ch.Noise, ch.Grouped = 4e-6, nil
		case "mass":
			mass = ch
		}
	}
	r, err := reduce.Run(context.Background(), &b, reduce.Settings{LawOnly: true})
	if err != nil {
		t.Fatal(err)
	}
	if got := r.Record.Fit.Method; got != "errors-in-variables" {
		t.Errorf("the record says method %q", got)
	}

	stated := make([]float64, len(b.Scalars))
	for i := range stated {
		stated[i] = b.Scalars[i].Dist.Value
	}
	m, err := w.truth.Model(&b, stated)
	if err != nil {
		t.Fatal(err)
	}
	eps, vc, off := b.Kind.Scalar("permittivity"), b.Kind.Scalar("contact_potential"), b.Kind.Scalar("gap_offset")
	var x [2][]float64
	var u [2][]float64
	var y, uy []float64
	for i := range b.Rows.N {
		if b.Rows.Kind[i] != bench.Reading || b.Rows.Excluded[i] {
			continue
		}
		x[0], x[1] = append(x[0], volt.Readings[i]), append(x[1], gap.Readings[i])
		y = append(y, mass.Readings[i])
		quad := func(ch *bench.Channel) float64 {
			r := ch.Readings[i]
			return math.Sqrt(ch.Noise*ch.Noise + ch.RelativeNoise*r*ch.RelativeNoise*r + ch.Resolution*ch.Resolution/12)
		}
		u[0], u[1], uy = append(u[0], quad(volt)), append(u[1], quad(gap)), append(uy, quad(mass))
	}
	space := jet.NewSpace(5, 0)
	p := &lsq.EIVProblem{
		Parameters: []lsq.Parameter{{Name: "permittivity", Start: 8.85e-12}, {Name: "contact_potential"},
			{Name: "gap_offset", Prior: &lsq.Prior{Value: 12e-6, U: 8e-6}}},
		X: x[:], Y: y, UX: u[:], UY: uy,
		Eval: func(theta []float64, x [][]float64, f []float64, jac, dx [][]float64) error {
			q := make([]jet.Jet, len(stated))
			for i := range f {
				space.Reset()
				for k, v := range stated {
					q[k] = jet.Const(v)
				}
				for k, at := range []int{eps, vc, off} {
					q[at] = space.Var(k, theta[k])
				}
				r := m.Row(q, []jet.Jet{space.Var(3, x[0][i]), space.Var(4, x[1][i])})
				f[i] = r.V
				for k := range jac {
					jac[k][i] = r.Grad(k)
				}
				for k := range dx {
					dx[k][i] = r.Grad(3 + k)
				}
			}
			return nil
		},
	}
	e, err := lsq.FitEIV(context.Background(), p, lsq.Settings{})
	if err != nil {
		t.Fatal(err)
	}
	for k, par := range r.Record.Fit.Parameters {
		if d := math.Abs(float64(par.Value)-e.Values[k]) / e.U[k]; d > 1e-5 {
			t.Errorf("%s = %g, the general estimator gives %g (%.1g u apart)", par.Name, par.Value, e.Values[k], d)
		}
		if d := math.Abs(float64(par.U)/e.U[k] - 1); d > 1e-3 {
			t.Errorf("u(%s) = %g, the general estimator gives %g", par.Name, par.U, e.U[k])
		}
	}
	if d := math.Abs(float64(r.Record.Fit.ChiSquared)/e.ChiSquared - 1); d > 1e-6 {
		t.Errorf("chi-squared %g, the general estimator gives %g", r.Record.Fit.ChiSquared, e.ChiSquared)
	}
}
