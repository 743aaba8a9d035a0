package lsq

import (
	"context"
	"math"
	"strings"
	"testing"

	"example.org/guardring/pkg/random"
	"gonum.org/v1/gonum/mat"
)

// bentLine is readings of 1 + 2x + curve·x² at x = 0, 0.25 …, noise 0.1, with
// columns 1, x, x² for linearProblem.
func bentLine(n int, curve float64) (cols [][]float64, y []float64) {
	src := random.New(21, "bent line", 0)
	cols = [][]float64{make([]float64, n), make([]float64, n), make([]float64, n)}
	y = make([]float64, n)
	for i := range y {
		x := 0.25 * float64(i)
		cols[0][i], cols[1][i], cols[2][i] = 1, x, x*x
		y[i] = 1 + 2*x + curve*x*x + 0.1*src.Normal()
	}
	return cols, y
}

func constant(n int, v float64) []float64 {
	x := make([]float64, n)
	fill(x, v)
	return x
}

// A parameter that a tight prior gives is no parameter of the fit: the residuals
// and their test are those of the fit with it fixed.
func TestDurbinWatsonPrior(t *testing.T) {
	cols, y := bentLine(20, 0)
	p := linearProblem(cols, y, true)
	p.U = constant(20, 0.1)
	for _, j := range []int{1, 2} {
		p.Parameters[j].Prior = &Prior{Value: []float64{0, 2, 0}[j], U: 1e-9}
	}
	a, err := fit(t, p).DurbinWatson()
	if err != nil {
		t.Fatal(err)
	}
	for i, x := range cols[1] {
		y[i] -= 2 * x
	}
	q := linearProblem(cols[:1], y, true)
	q.U = p.U
	b, err := fit(t, q).DurbinWatson()
	if err != nil {
		t.Fatal(err)
	}
	near(t, "d", a.Statistic, b.Statistic, 1e-6)
	near(t, "p", a.PValue, b.PValue, 1e-5)
}

// With the values of priors resampled like readings, the replicates scatter by
// the uncertainty of the fit, whether a prior or the readings decide.
func TestBootstrapPrior(t *testing.T) {
	cols, y := bentLine(40, 0)
	p := linearProblem(cols[:2], y, true)
	p.U = constant(40, 0.1)
	p.Parameters[1].Prior = &Prior{Value: 2.0005, U: 1e-3}
	r := fit(t, p)
	for _, pairs := range []bool{false, true} {
		b, err := r.Bootstrap(context.Background(), BootstrapSettings{Pairs: pairs, Replicates: 1000, Seed: 5})
		if err != nil {
			t.Fatal(err)
		}
		near(t, "u of the slope", b.U[1], r.U[1], 0.1) // the prior's nearly alone: the scatter of 1000 is known to 2 %
		near(t, "u of the intercept", b.U[0], r.U[0]*r.BirgeRatio, 0.25)
	}
}

// Replicates that resolution makes equal say nothing about the scatter.
func TestLackOfFitWithoutScatter(t *testing.T) {
	one, x := constant(12, 1), make([]float64, 12)
	group, y := make([]int, 12), make([]float64, 12)
	for i := range x {
		group[i] = i / 3
		x[i] = float64(group[i])
		y[i] = []float64{0.1, 1.1, 1.9, 3.2}[group[i]]
	}
	if l, err := fit(t, linearProblem([][]float64{one, x}, y, true)).LackOfFit(group); l != nil || err == nil || !strings.Contains(err.Error(), "all equal") {
		t.Errorf("%+v, %v", l, err)
	}
	if p := fTail(math.Inf(1), 2, 3); p != 0 {
		t.Errorf("F = ∞ has probability %v, want 0", p)
	}
}

// The noise found beside a prior makes chi-squared its degrees of freedom, also
// when a parameter is held at a bound.
func TestNoiseAtBound(t *testing.T) {
	cols, y := bentLine(30, 0)
	low := 0.5 // of the curvature, which is 0
	p := linearProblem(cols, y, true)
	p.Parameters[1].Prior = &Prior{Value: 0, U: 1}
	p.Parameters[2].Lower, p.Parameters[2].Start = &low, 1
	r := fit(t, p)
	if len(r.AtBound) != 1 || r.DOF != 30+1-2 {
		t.Fatalf("at bound %v, %d degrees of freedom", r.AtBound, r.DOF)
	}
	near(t, "chi-squared", r.ChiSquared, float64(r.DOF), 1e-8)
}

// AICc with noise found beside effects: minus twice the logarithm of the likelihood
// by the dense covariance; the right model has the smaller one.
func TestAICcNoiseFound(t *testing.T) {
	const n = 40
	cols, y := bentLine(n, 0.3)
	e := &Effects{Columns: 3, Start: []int32{0}}
	for i := range n { // two disjoint halves, and one overlapping them
		e.Column = append(e.Column, int32(i*2/n))
		e.Load = append(e.Load, 0.05)
		if i%3 == 0 {
			e.Column = append(e.Column, 2)
			e.Load = append(e.Load, 0.02)
		}
		e.Start = append(e.Start, int32(len(e.Column)))
	}
	var aicc []float64
	for k := 2; k <= 3; k++ {
		p := linearProblem(cols[:k], y, true)
		p.Effects = e
		r := fit(t, p)
		cov := mat.NewSymDense(n, nil)
		g := mat.NewDense(n, 3, nil)
		for i := range n {
			for c := e.Start[i]; c < e.Start[i+1]; c++ {
				g.Set(i, int(e.Column[c]), e.Load[c])
			}
		}
		cov.SymOuterK(1, g)
		for i := range n {
			cov.SetSym(i, i, 1/r.Weights[i])
		}
		var chol mat.Cholesky
		if !chol.Factorize(cov) {
			t.Fatal("the covariance is not positive definite")
		}
		rv := mat.NewVecDense(n, r.Residuals)
		var x mat.VecDense
		if err := chol.SolveVecTo(&x, rv); err != nil {
			t.Fatal(err)
		}
		q := float64(k + 1)
		want := chol.LogDet() + mat.Dot(rv, &x) - n + 2*q + 2*q*(q+1)/(n-q-1)
		near(t, "AICc", r.AICc(), want, 1e-8)
		aicc = append(aicc, r.AICc())
	}
	if !(aicc[1] < aicc[0]-20) {
		t.Errorf("AICc %v of the line and %v of the parabola that made the readings", aicc[0], aicc[1])
	}
}
