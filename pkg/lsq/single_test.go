package lsq

import (
	"context"
	"math"
	"testing"

	"example.org/guardring/pkg/random"
)

// A search over very many correlated readings keeps one set of derivatives; it
// must find what the ordinary search finds, with everything that is said about
// the rows.
func TestManyCorrelatedReadings(t *testing.T) {
	const n = singleRows
	u, y := make([]float64, n), make([]float64, n)
	g := &Effects{Columns: 12, Start: []int32{0}}
	src := random.New(7, "single", 0)
	at := func(b0, b1, b2, x float64) float64 { return b0 + b1*math.Exp(-b2*x) }
	for i := range y {
		x := float64(i) / n
		u[i] = 0.1 + 0.05*x
		g.Column = append(g.Column, int32(i%10), 10, 11)
		g.Load = append(g.Load, 0.02, 0.03, 0.01*x)
		g.Start = append(g.Start, int32(len(g.Load)))
		y[i] = at(1, 2, 3, x) + u[i]*src.Normal()
	}
	problem := func() *Problem {
		p := &Problem{Y: y, U: append([]float64(nil), u...), Parameters: []Parameter{{Start: 0.5}, {Start: 1}, {Start: 2}, {Start: 0.01, Prior: &Prior{U: 0.1}},
			{Start: 0, Prior: &Prior{U: 0.1}}, {Start: 0, Prior: &Prior{U: 0.1}}, {Start: 0, Prior: &Prior{U: 0.1}}, {Start: 0, Prior: &Prior{U: 0.1}}}}
		p.Effects = &Effects{Columns: g.Columns, Start: g.Start, Column: g.Column, Load: append([]float64(nil), g.Load...)}
		p.Eval = func(b, f []float64, jac [][]float64) error {
			for i := range f {
				x := float64(i) / n
				e := math.Exp(-b[2] * x)
				f[i] = b[0] + b[1]*e
				if jac != nil {
					jac[0][i], jac[1][i], jac[2][i] = 1, e, -b[1]*x*e
				}
				z := x
				for j := 3; j < len(b); j++ {
					s := math.Sin(float64(j) * z * 5)
					f[i] += b[j] * s
					if jac != nil {
						jac[j][i] = s
					}
				}
			}
			return nil
		}
		// the noise grows a little with the fitted value, so that weights move
		p.Reweight = func(b, f, uu []float64, e *Effects) error {
			for i := range uu {
				uu[i] = u[i] * (1 + 0.01*math.Abs(f[i]))
			}
			copy(e.Load, g.Load)
			return nil
		}
		return p
	}
	p := problem()
	p.Scratch = true
	got, err := Fit(context.Background(), p, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	defer func(k int) { singleFrom = k }(singleFrom)
	singleFrom = math.MaxInt
	want, err := Fit(context.Background(), problem(), Settings{})
	if err != nil {
		t.Fatal(err)
	}
	if got.Status != Converged || want.Status != Converged {
		t.Fatalf("%v, %v", got.Status, want.Status)
	}
	near := func(what string, a, b []float64, tol float64) {
		t.Helper()
		for i := range a {
			if !(math.Abs(a[i]-b[i]) <= tol*(1e-3+math.Abs(b[i]))) {
				t.Fatalf("%s[%d]: %v with one set of derivatives, %v with three", what, i, a[i], b[i])
			}
		}
	}
	near("values", got.Values, want.Values, 1e-9)
	near("u", got.U, want.U, 1e-9)
	near("fitted", got.Fitted, want.Fitted, 1e-9)
	near("residuals", got.Residuals, want.Residuals, 1e-7)
	near("standardised", got.Standardised, want.Standardised, 1e-6)
	near("leverage", got.Leverage, want.Leverage, 1e-6)
	near("weights", got.Weights, want.Weights, 1e-9)
	for k, c := range got.Jacobian() {
		near("jacobian", c, want.Jacobian()[k], 1e-7)
	}
	near("chi-squared", []float64{got.ChiSquared}, []float64{want.ChiSquared}, 1e-10)
}
