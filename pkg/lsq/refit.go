package lsq

import (
	"context"
	"fmt"
	"math"
)

// Refitter repeats a fit for other readings of the same size with the weights
// frozen at those of the Result it came from: the inner loop of a Monte Carlo
// check or a bootstrap. It is for one goroutine; make one for each. After the
// first call it allocates nothing unless a refit needs the full search.
type Refitter struct {
	r       *Result
	white   whitener
	fold    fold
	theta   []float64
	f, rhs  []float64
	jac     [][]float64
	cols    [][]float64
	wcols   [][]float64
	x       []float64
	prior   []float64 // 1/u of each free parameter, 0 without
	bounded bool
	always  bool // the Gauss–Newton iteration does not apply
	search  *search
	problem Problem
}

// NewRefitter returns a Refitter with the weights and bounds of r. Its bounds,
// fixed parameters and prior uncertainties are those of the problem.
func (r *Result) NewRefitter() *Refitter {
	n, np, q := len(r.Fitted), len(r.Values), len(r.Free)
	w := &Refitter{r: r, problem: *r.problem}
	w.white = *r.white
	w.white.sum = append([]float64(nil), r.white.sum...)
	w.white.t = append([]float64(nil), r.white.t...)
	w.fold.init(q, n)
	slab := make([]float64, (2+q)*n+np+2*q)
	take := func(k int) []float64 {
		v := slab[:k:k]
		slab = slab[k:]
		return v
	}
	w.theta, w.x, w.prior, w.f, w.rhs = take(np), take(q), take(q), take(n), take(n)
	w.jac, w.cols = make([][]float64, np), make([][]float64, q)
	for k, j := range r.Free {
		w.cols[k] = take(n)
		w.jac[j] = w.cols[k]
		w.prior[k] = r.priorW[j]
		p := &r.problem.Parameters[j]
		w.bounded = w.bounded || p.Lower != nil || p.Upper != nil
	}
	if !w.white.diagonal() {
		w.wcols = make([][]float64, q)
		slab := make([]float64, n*q)
		for k := range w.wcols {
			w.wcols[k] = slab[k*n : k*n+n]
		}
	}
	w.always = r.problem.Numeric || len(r.AtBound) > 0 || r.Status != Converged
	return w
}

// Fit estimates the parameters for readings y.
//
// priors holds this trial's pseudo-observation of every parameter of the
// problem (entries of parameters without a prior or fixed are not looked at);
// nil means the stated values. eval has the meaning of Problem.Eval (with
// derivatives only in the columns of free parameters, those of the others are
// nil); nil means the problem's own. theta holds the start of all parameters
// on entry, best the estimates of the Result, and the estimates on return;
// fixed parameters are used as they stand in it, so that a trial may draw them.
//
// Gauss–Newton steps are taken until the error left is below 1e-9 of the
// parameters' uncertainties; if chi-squared rises or a bound is crossed the
// full search of Fit takes over. On error theta is as it was.
func (w *Refitter) Fit(y []float64, priors []float64, eval func(theta, f []float64, jac [][]float64) error, theta []float64) (iterations int, err error) {
	n, np, q := len(w.f), len(w.theta), len(w.cols)
	if len(y) != n || len(theta) != np || (priors != nil && len(priors) != np) {
		return 0, fmt.Errorf("lsq: refit of %d readings and %d parameters was given %d, %d and %d pseudo-observations", n, np, len(y), len(theta), len(priors))
	}
	if eval == nil {
		eval = w.r.problem.Eval
	}
	if w.always {
		return w.full(y, priors, eval, theta)
	}
	copy(w.theta, theta)
	before, last := math.Inf(1), math.Inf(1)
	scale := 1.0
	if w.r.ScaledByResiduals && w.r.scale > 0 {
		scale = w.r.scale
	}
	ld := q + 1
	for i := 1; i <= 50; i++ {
		if err := eval(w.theta, w.f, w.jac); err != nil {
			return w.full(y, priors, eval, theta)
		}
		w.reduce(y, priors)
		chi2 := w.fold.chi2()
		if !(chi2 <= last*(1+1e-9)+1e-9*scale) {
			return w.full(y, priors, eval, theta)
		}
		last = chi2
		b := w.fold.r[q*ld : q*ld+q]
		length := 0.0
		for _, v := range b {
			length += v * v
		}
		length = math.Sqrt(length / scale) // in units of the uncertainties
		copy(w.x, b)
		if !solveUpper(q, ld, w.fold.r, w.x) {
			return w.full(y, priors, eval, theta)
		}
		for k, j := range w.r.Free {
			w.theta[j] += w.x[k]
		}
		if w.bounded && w.outside() {
			return w.full(y, priors, eval, theta)
		}
		if length == 0 {
			copy(theta, w.theta)
			return i, nil
		}
		rate := length / before
		if i == 1 {
			rate = 1e-2 // not known yet; the second step tells
		}
		if rate < 0.5 && length*rate <= 1e-9*(1-rate) || length <= 1e-12 {
			copy(theta, w.theta)
			return i, nil
		}
		if length > before && length > 1e-6 {
			return w.full(y, priors, eval, theta)
		}
		before = length
	}
	return w.full(y, priors, eval, theta)
}

// reduce folds the whitened derivatives and residuals at w.theta.
func (w *Refitter) reduce(y, priors []float64) {
	t := &w.fold
	t.reset()
	for k, p := range w.prior {
		if p > 0 {
			j := w.r.Free[k]
			v := w.problem.Parameters[j].Prior.Value
			if priors != nil {
				v = priors[j]
			}
			t.diagonal(k, p, p*(v-w.theta[j]))
		}
	}
	if w.white.diagonal() {
		t.weighted(w.white.w, y, w.f, w.cols)
		return
	}
	for i, v := range y {
		w.rhs[i] = v - w.f[i]
	}
	w.white.apply(w.rhs)
	for k, c := range w.cols {
		copy(w.wcols[k], c)
		w.white.apply(w.wcols[k])
	}
	t.columns(w.wcols, w.rhs)
}

func (w *Refitter) outside() bool {
	for _, j := range w.r.Free {
		p := &w.problem.Parameters[j]
		if (p.Lower != nil && w.theta[j] < *p.Lower) || (p.Upper != nil && w.theta[j] > *p.Upper) {
			return true
		}
	}
	return false
}

// full runs the search of Fit from theta.
func (w *Refitter) full(y, priors []float64, eval func(theta, f []float64, jac [][]float64) error, theta []float64) (int, error) {
	if w.search == nil {
		w.search = &search{}
		w.search.init(&w.problem, y, w.r.Free, &w.white)
		w.search.tol, w.search.maxIter = 1e-9, 500
	}
	s := w.search
	s.y, s.eval, s.iterations = y, eval, 0
	for _, j := range w.r.Free {
		if s.priorW[j] > 0 {
			s.priorV[j] = w.problem.Parameters[j].Prior.Value
			if priors != nil {
				s.priorV[j] = priors[j]
			}
		}
	}
	if err := s.begin(theta); err != nil {
		return 0, err
	}
	if err := s.run(context.Background()); err != nil {
		return s.iterations, err
	}
	if s.status != Converged {
		return s.iterations, fmt.Errorf("lsq: refit did not converge: %s", s.reason)
	}
	copy(theta, s.theta)
	return s.iterations, nil
}
