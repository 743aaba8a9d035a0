package lsq

import (
	"context"
	"fmt"
)

// repeat is a search at the frozen weights of a result, for diagnostics that
// fit again with something changed.
type repeat struct {
	p Problem
	w whitener
	s search
}

// repeat prepares a search for readings y with the given free parameters.
// factors, when not nil, multiply the square roots of the weights.
func (r *Result) repeat(y []float64, free []int, factors []float64) (*repeat, error) {
	if factors != nil && !r.white.diagonal() {
		return nil, fmt.Errorf("lsq: the readings are correlated; they can't be weighed one by one")
	}
	a := &repeat{p: *r.problem, w: *r.white}
	a.w.sum = append([]float64(nil), r.white.sum...)
	a.w.t = append([]float64(nil), r.white.t...)
	if factors != nil {
		a.w.w = make([]float64, len(y))
		copy(a.w.w, r.white.w)
		for i, f := range factors {
			a.w.w[i] *= f
		}
	}
	a.s.init(&a.p, y, free, &a.w)
	a.s.tol, a.s.maxIter = 1e-9, 500
	return a, nil
}

// run searches from start.
func (a *repeat) run(ctx context.Context, start []float64) error {
	a.s.iterations = 0
	if err := a.s.begin(start); err != nil {
		return err
	}
	if a.s.q == 0 {
		a.s.status = Converged
		return nil
	}
	if err := a.s.run(ctx); err != nil {
		return err
	}
	if a.s.status != Converged {
		return fmt.Errorf("lsq: a repeated fit did not converge: %s", a.s.reason)
	}
	return nil
}
