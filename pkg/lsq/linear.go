package lsq

import (
	"context"
	"fmt"
	"math"
)

// wideWork is the number of multiplications up to which a linear model is
// solved wholly in extended precision: about a tenth of a second.
const wideWork = 4_000_000

// refine improves the solution of a model that is linear in its parameters.
// The search has found it in double precision, where the relative error grows
// as the square of the condition number times the residual. Ill-conditioned
// problems of moderate size are solved again by Householder QR in extended
// precision; large ones by corrections whose right-hand side is gathered in
// extended precision (corrected seminormal equations; Björck, Numerical Methods
// for Least Squares Problems, section 6.6.5).
func (f *fitter) refine(ctx context.Context) error {
	s := &f.search
	if s.status == Stalled && s.reason != "" && !finite(s.chi2) {
		return nil
	}
	n := len(s.y)
	cond := s.roughCondition()
	if (cond < 10 && f.p.powers == nil) || math.IsInf(cond, 0) {
		s.settleLinear(cond)
		return nil
	}
	if err := ctx.Err(); err != nil {
		return fmt.Errorf("lsq: fit cancelled: %w", err)
	}
	large := float64(n)*float64(s.q*s.q) > wideWork
	if s.numeric || (large && !s.white.diagonal()) {
		s.settleLinear(cond)
		return nil
	}
	// the model at zero: its value is then free of rounding for the usual
	// models, and the solution is θ itself rather than a correction
	origin := append([]float64(nil), s.theta...)
	for _, j := range s.free {
		origin[j] = 0
	}
	s.evaluations++
	if err := f.p.Eval(origin, s.ftrial, s.jtrial); err != nil || notFinite(s.ftrial) >= 0 || !s.sameColumns() {
		copy(origin, s.theta)
		if err := s.call(origin, s.ftrial, s.jtrial, s.ctrial); err != nil {
			return fmt.Errorf("lsq: the model can't be evaluated: %w", err)
		}
	}
	if large {
		return f.correct(ctx, origin)
	}
	rows := n
	for _, j := range f.free {
		if s.priorW[j] > 0 {
			rows++
		}
	}
	cols := make([][]wide, s.q)
	for k := range cols {
		cols[k] = make([]wide, rows)
	}
	rhs := make([]wide, rows)
	if s.white.diagonal() {
		if f.p.powers != nil {
			f.p.powers(cols)
		} else {
			for k, c := range s.ctrial {
				for i, v := range c {
					cols[k][i] = wide{v, 0}
				}
			}
		}
		for i, w := range s.white.w {
			for k := range cols {
				cols[k][i] = cols[k][i].mul(wide{w, 0})
			}
			rhs[i] = twoSum(s.y[i], -s.ftrial[i]).mul(wide{w, 0})
		}
	} else {
		s.residual(s.ftrial)
		for i, v := range s.wres {
			rhs[i] = wide{v, 0}
		}
		for k, c := range s.ctrial {
			copy(s.wcols[k], c)
			s.white.apply(s.wcols[k])
			for i, v := range s.wcols[k] {
				cols[k][i] = wide{v, 0}
			}
		}
	}
	at := n
	for k, j := range f.free {
		if w := s.priorW[j]; w > 0 {
			cols[k][at] = wide{w, 0}
			rhs[at] = twoSum(s.priorV[j], -origin[j]).mul(wide{w, 0})
			at++
		}
	}
	e, err := solveWide(ctx, cols, rhs)
	if err != nil {
		return fmt.Errorf("lsq: fit cancelled: %w", err)
	}
	if e == nil {
		s.settleLinear(cond)
		return nil
	}
	for k := range e.r {
		norm := 0.0
		for _, v := range e.r[k] {
			norm = math.Hypot(norm, v.hi)
		}
		if math.Abs(e.r[k][k].hi) <= 3e-15*norm { // below the rounding of the columns themselves
			s.settleLinear(cond)
			return nil
		}
	}
	for k, j := range f.free {
		s.trial[j] = wide{origin[j], 0}.add(e.theta[k]).float()
		if !finite(s.trial[j]) || (s.lo != nil && (s.trial[j] < s.lo[k] || s.trial[j] > s.hi[k])) {
			s.settleLinear(cond)
			return nil
		}
	}
	copy(s.theta, s.trial)
	if err := s.call(s.theta, s.f, s.jac, s.cols); err != nil {
		return fmt.Errorf("lsq: the model can't be evaluated at the solution: %w", err)
	}
	s.reduce(&s.now, s.theta, s.f, s.cols)
	ld := s.q + 1
	for k := range e.r {
		for i, v := range e.r[k] {
			s.now.r[k*ld+i] = v.float()
		}
	}
	s.chi2 = e.chi2
	f.exact = e
	s.status, s.reason = Converged, "the model is linear; solved directly in extended precision"
	return nil
}

func (s *search) settleLinear(cond float64) {
	if s.status == Converged && cond < 1e12 {
		s.reason = "the model is linear; solved directly"
	}
}

// correct improves the solution of a large linear problem of independent
// readings: residuals and their products with the derivatives are summed in
// extended precision, and the correction solves RᵀRδ = Jᵀr with the triangle
// that is there. The model's values and derivatives at origin stand in the trial
// arrays.
func (f *fitter) correct(ctx context.Context, origin []float64) error {
	s := &f.search
	theta := make([]wide, s.q)
	for k, j := range s.free {
		theta[k] = twoSum(s.theta[j], -origin[j])
	}
	sums := make([]wide, s.q)
	step := make([]float64, s.q)
	before := math.Inf(1)
	for round := 0; round < 5; round++ {
		clear(sums)
		for i, w := range s.white.w {
			if i&0xfff == 0 {
				if err := ctx.Err(); err != nil {
					return fmt.Errorf("lsq: fit cancelled: %w", err)
				}
			}
			r := twoSum(s.y[i], -s.ftrial[i])
			for k, c := range s.ctrial {
				r = r.sub(theta[k].mul(wide{c[i], 0}))
			}
			r = r.mul(twoProd(w, w))
			for k, c := range s.ctrial {
				sums[k] = sums[k].add(r.mul(wide{c[i], 0}))
			}
		}
		for k, j := range s.free {
			if w := s.priorW[j]; w > 0 {
				r := twoSum(s.priorV[j], -origin[j]).sub(theta[k])
				sums[k] = sums[k].add(r.mul(twoProd(w, w)))
			}
			step[k] = sums[k].float()
		}
		if !solveUpperT(s.q, s.q+1, s.now.r, step) || !solveUpper(s.q, s.q+1, s.now.r, step) {
			return nil
		}
		size := scaledNorm(s.d, step)
		if !(size < before) {
			break
		}
		before = size
		for k := range theta {
			theta[k] = theta[k].add(wide{step[k], 0})
		}
	}
	for k, j := range s.free {
		s.theta[j] = wide{origin[j], 0}.add(theta[k]).float()
		if s.lo != nil {
			s.theta[j] = math.Min(math.Max(s.theta[j], s.lo[k]), s.hi[k])
		}
	}
	if err := s.call(s.theta, s.f, s.jac, s.cols); err != nil {
		return fmt.Errorf("lsq: the model can't be evaluated at the solution: %w", err)
	}
	s.reduce(&s.now, s.theta, s.f, s.cols)
	s.chi2 = s.now.chi2()
	s.status, s.reason = Converged, "the model is linear; solved directly and corrected in extended precision"
	return nil
}

// roughCondition estimates the condition number of the column-scaled triangle.
func (s *search) roughCondition() float64 {
	worst := 1.0
	for k := 0; k < s.q; k++ {
		c := columnNorm(k, s.q+1, s.now.r)
		d := math.Abs(s.now.r[k*(s.q+1)+k])
		if d == 0 {
			return math.Inf(1)
		}
		worst = math.Max(worst, c/d)
	}
	return worst
}
