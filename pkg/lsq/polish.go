package lsq

import (
	"context"
	"fmt"
	"math"
)

// refresh moves the points of an errors-in-variables fit to their places at the
// present parameters. The objective is known only to the linearisation at the
// points' present places; unless these have settled, values at two different
// parameters can't be compared.
func (s *search) refresh() bool {
	for i := 0; i < 5; i++ {
		copy(s.trial, s.theta)
		if err := s.call(s.trial, s.ftrial, s.jtrial, s.ctrial); err != nil {
			s.lastEvalErr = err
			return false
		}
		s.reduce(&s.next, s.trial, s.ftrial, s.ctrial)
		if !s.goodTriangle() {
			return false
		}
		before := s.chi2
		s.accept()
		if math.Abs(s.chi2-before) <= 1e-6*s.chi2 {
			break
		}
	}
	return true
}

// polish takes Gauss–Newton steps until the error left in the parameters,
// judged from how fast the steps shrink, meets the tolerance, or rounding stops
// them from shrinking.
func (s *search) polish(ctx context.Context, norm float64) error {
	ld := s.q + 1
	grown := 0
	for i := 0; ; i++ {
		if err := ctx.Err(); err != nil {
			return fmt.Errorf("lsq: fit cancelled: %w", err)
		}
		// s.x holds the step and s.trial the point it leads to
		err := s.call(s.trial, s.ftrial, s.jtrial, s.ctrial)
		if err != nil {
			s.lastEvalErr = err
			s.finish("the model can't be evaluated beside the best point: " + err.Error())
			return nil
		}
		s.reduce(&s.next, s.trial, s.ftrial, s.ctrial)
		chi2 := s.next.chi2()
		settled := true
		if s.eiv != nil { // the points move too: see refresh
			settled = math.Abs(chi2-s.chi2) <= 1e-9*s.chi2
		}
		if !s.goodTriangle() || !(chi2 <= s.chi2*(1+1e5*s.noise()) || s.eiv != nil) {
			s.finish("Gauss–Newton steps no longer lower chi-squared")
			return nil
		}
		small := settled
		sd := math.Sqrt(s.chi2 / float64(len(s.y)))
		before := norm
		s.accept()
		s.step(s.now.r, ld, s.now.r[s.q*ld:s.q*ld+s.q], math.Inf(1))
		norm = scaledNorm(s.d, s.x)
		rate := norm / before
		left := 1.0 // of the error after the next step, as a multiple of it
		if rate < 0.5 {
			left = rate / (1 - rate)
		}
		for k, j := range s.free {
			scale := math.Abs(s.theta[j]) + sd/s.d[k]
			if x := math.Abs(s.x[k]); x*left > s.tol*scale || x > staleLimit*scale {
				small = false
			}
		}
		if small || norm == 0 {
			if err := s.last(); err != nil {
				return err
			}
			s.status, s.reason = Converged, "the remaining step is below the tolerance"
			return nil
		}
		s.iterations++
		if rate >= 0.95 && settled {
			grown++
		}
		if grown >= 3 || i >= 200 {
			s.finish("rounding stops the steps from shrinking")
			return nil
		}
		s.aim()
	}
}

// silent reports that the readings no longer respond to free parameter k, whose
// column has the length c: the column has shrunk to nothing, and even a change of
// the parameter by its own size moves the model by less than a millionth of the
// residuals.
func (s *search) silent(k int, c float64) bool {
	return c < 1e-7*s.d[k] && c*math.Abs(s.theta[s.free[k]]) < 1e-6*math.Sqrt(s.chi2/float64(len(s.y)))
}

// staleLimit bounds the last step: the Jacobian and with it the covariance are
// those of the point before it.
const staleLimit = 3e-9

// last takes the last step without another evaluation: what it leaves out of the
// model's values is of the order of its square, below their rounding.
func (s *search) last() error {
	if err := s.restore(); err != nil {
		return fmt.Errorf("lsq: the model can't be evaluated: %w", err)
	}
	s.aim()
	for k, c := range s.cols {
		x := s.trial[s.free[k]] - s.theta[s.free[k]]
		if x == 0 {
			continue
		}
		f := s.f[:len(c)]
		for i, a := range c {
			f[i] += a * x
		}
	}
	if s.eiv != nil {
		s.eiv.settle()
	}
	copy(s.theta, s.trial)
	return nil
}

// aim sets the trial point to the present one plus the step, kept within the
// bounds in spite of rounding.
func (s *search) aim() {
	for k, j := range s.free {
		t := s.theta[j] + s.x[k]
		if s.lo != nil {
			t = math.Min(math.Max(t, s.lo[k]), s.hi[k])
		}
		s.trial[j] = t
	}
}

// accept makes the trial point the current one.
func (s *search) accept() {
	s.theta, s.trial = s.trial, s.theta
	copy(s.trial, s.theta)
	if s.eiv != nil {
		s.eiv.accept()
	}
	s.f, s.ftrial = s.ftrial, s.f
	s.jac, s.jtrial = s.jtrial, s.jac
	s.cols, s.ctrial = s.ctrial, s.cols
	s.now.r, s.next.r = s.next.r, s.now.r
	s.now.rest = s.next.rest
	s.chi2 = s.now.chi2()
	s.collapsed = false
	for k := range s.d {
		c := columnNorm(k, s.q+1, s.now.r)
		s.collapsed = s.collapsed || s.silent(k, c)
		s.d[k] = math.Max(s.d[k], c)
	}
}

func (s *search) goodTriangle() bool {
	return s.next.finite()
}

func (s *search) scaledSize() float64 {
	t := 0.0
	for k, j := range s.free {
		t = math.Hypot(t, s.d[k]*s.theta[j])
	}
	return t + math.Sqrt(s.chi2)*1e-3
}

// sameColumns reports whether the derivatives at the trial point are those at
// the current one to rounding.
func (s *search) sameColumns() bool {
	for k, c := range s.cols {
		d := s.ctrial[k]
		for i, v := range c {
			if math.Abs(v-d[i]) > 4e-16*math.Abs(v) {
				return false
			}
		}
	}
	return true
}

// finish ends a search that can go no further: it is converged when the
// residuals are orthogonal to the columns of the Jacobian as far as rounding
// lets one tell.
func (s *search) finish(why string) {
	ld := s.q + 1
	b := s.now.r[s.q*ld : s.q*ld+s.q]
	total := math.Sqrt(s.chi2)
	worst := 0.0
	for k := 0; k < s.q; k++ {
		if s.held != nil && s.held[k] {
			continue
		}
		g := 0.0
		for i, c := range s.now.r[k*ld : k*ld+k+1] {
			g += c * b[i]
		}
		if c := columnNorm(k, ld, s.now.r); c > 0 && total > 0 {
			worst = math.Max(worst, math.Abs(g)/c/total)
		}
	}
	if worst <= math.Max(1e-7, 1e3*4e-16*s.size/total) && !s.collapsed {
		s.status = Converged
		s.reason = why + ", and the residuals are orthogonal to the derivatives"
		return
	}
	s.status = Stalled
	s.reason = why
	if s.lastEvalErr != nil {
		s.reason += ": " + s.lastEvalErr.Error()
	}
}
