package lsq

import (
	"context"
	"fmt"
	"math"
)

// search is one run of the trust-region Levenberg–Marquardt method (Moré,
// Numerical Analysis, Springer LNM 630 (1978) 105) on whitened residuals with
// frozen weights. Parameters are scaled by the largest length so far of their
// columns of the Jacobian, so that no unit of a parameter or of the readings
// matters.
type search struct {
	p        *Problem
	y        []float64
	white    *whitener
	free     []int
	q        int
	lo, hi   []float64 // bounds of the free parameters; nil: none anywhere
	tol      float64
	maxIter  int
	numeric  bool
	priorV   []float64 // prior value, one per parameter; NaN: none
	priorW   []float64 // 1/u of the prior
	hasPrior bool

	eval func(theta, f []float64, jac [][]float64) error

	theta, trial  []float64
	f, ftrial     []float64
	jac, jtrial   [][]float64 // of all parameters, nil for fixed ones
	cols, ctrial  [][]float64 // the free columns of the same
	now, next     fold
	chi2          float64
	d, x, rx      []float64
	heads         [][]float64 // memory of jac, jtrial, cols, ctrial
	slab          []float64   // memory of what follows from n
	wcols         [][]float64 // whitened copies when the covariance is not diagonal
	wres          []float64
	trust         trust
	sub           *subspace
	eiv           *eivState // errors in variables: the linearisation of the rows moves with the search
	diff          *difference
	iterations    int
	evaluations   int
	single        bool      // cols, ctrial and wcols are one: see singleRows
	stale         bool      // that one is whitened
	block         []float64 // its memory
	linear        bool      // the derivatives did not change with the parameters
	lastEvalErr   error
	size          float64 // length of the whitened readings
	status        Status
	reason        string
	held          []bool // free parameters at a bound and pushed outwards
	collapsed     bool   // a column of the Jacobian has become negligible
	checkedLinear bool
}

// call evaluates the model and, when jac is not nil, its derivatives.
func (s *search) call(theta, f []float64, jac, cols [][]float64) error {
	s.evaluations++
	if s.eiv != nil {
		return s.eiv.call(theta, f, jac, cols)
	}
	if s.numeric {
		if err := s.eval(theta, f, nil); err != nil {
			return err
		}
		if jac == nil {
			return nil
		}
		return s.diff.columns(theta, f, cols)
	}
	return s.eval(theta, f, jac)
}

// reduce folds whitened derivatives and residuals at theta into t.
func (s *search) reduce(t *fold, theta, f []float64, cols [][]float64) {
	t.reset()
	if s.hasPrior {
		for k, j := range s.free {
			if w := s.priorW[j]; w > 0 {
				t.diagonal(k, w, w*(s.priorV[j]-theta[j]))
			}
		}
	}
	if s.eiv != nil {
		t.weighted(s.eiv.weights(f), s.y, f, cols)
		return
	}
	if s.white.diagonal() {
		t.weighted(s.white.w, s.y, f, cols)
		return
	}
	s.residual(f)
	s.stale = s.single
	for k, c := range cols {
		copy(s.wcols[k], c)
		s.white.apply(s.wcols[k])
	}
	t.columns(s.wcols, s.wres)
}

func (s *search) residual(f []float64) {
	for i, y := range s.y {
		s.wres[i] = y - f[i]
	}
	s.white.apply(s.wres)
}

// chiSquared is the objective at theta with model values f.
func (s *search) chiSquared(theta, f []float64) float64 {
	sum := 0.0
	if s.white.diagonal() {
		w, y := s.white.w, s.y
		var a, b float64
		i := 0
		for ; i+1 < len(w); i += 2 {
			r := w[i] * (y[i] - f[i])
			q := w[i+1] * (y[i+1] - f[i+1])
			a += r * r
			b += q * q
		}
		if i < len(w) {
			r := w[i] * (y[i] - f[i])
			a += r * r
		}
		sum = a + b
	} else {
		s.residual(f)
		for _, r := range s.wres {
			sum += r * r
		}
	}
	if s.hasPrior {
		for _, j := range s.free {
			if w := s.priorW[j]; w > 0 {
				r := w * (s.priorV[j] - theta[j])
				sum += r * r
			}
		}
	}
	return sum
}

// begin evaluates the model at the start.
func (s *search) begin(start []float64) error {
	copy(s.theta, start)
	copy(s.trial, start)
	s.status, s.reason, s.collapsed = Stalled, "", false
	if err := s.call(s.theta, s.f, s.jac, s.cols); err != nil {
		return fmt.Errorf("lsq: the model can't be evaluated at the start: %w", err)
	}
	s.reduce(&s.now, s.theta, s.f, s.cols)
	s.chi2 = s.now.chi2()
	if !finite(s.chi2) || !s.now.finite() {
		if i := notFinite(s.f); i >= 0 {
			return fmt.Errorf("lsq: the model is %v for reading %d at the start; choose another start", s.f[i], i+1)
		}
		if err := s.restore(); err != nil {
			return fmt.Errorf("lsq: the model can't be evaluated at the start: %w", err)
		}
		for k, c := range s.cols {
			if i := notFinite(c); i >= 0 {
				return fmt.Errorf("lsq: the derivative with respect to %s is %v for reading %d at the start; choose another start", s.p.name(s.free[k]), c[i], i+1)
			}
		}
		return fmt.Errorf("lsq: chi-squared overflows at the start; choose a start nearer to the readings")
	}
	s.size = s.length()
	for k := range s.d {
		s.d[k] = columnNorm(k, s.q+1, s.now.r)
		if !finite(s.d[k]) {
			return fmt.Errorf("lsq: the derivatives with respect to %s overflow at the start; choose another start", s.p.name(s.free[k]))
		}
		if s.d[k] == 0 {
			s.d[k] = 1
		}
	}
	return nil
}

// notFinite is the index of the first element that is not finite, −1 for none.
func notFinite(v []float64) int {
	var a, b, c, d float64 // 0·x is NaN exactly when x is not finite
	i := 0
	for ; i+3 < len(v); i += 4 {
		a += v[i] * 0
		b += v[i+1] * 0
		c += v[i+2] * 0
		d += v[i+3] * 0
	}
	for ; i < len(v); i++ {
		a += v[i] * 0
	}
	if a+b+c+d == 0 {
		return -1
	}
	for i, x := range v {
		if !finite(x) {
			return i
		}
	}
	return -1
}

// length is the length of the weighted readings, which sets how small a
// chi-squared can be resolved.
func (s *search) length() float64 {
	if s.white.diagonal() {
		var a, b float64
		w, y := s.white.w, s.y[:len(s.white.w)]
		i := 0
		for ; i+1 < len(w); i += 2 {
			p, q := w[i]*y[i], w[i+1]*y[i+1]
			a += p * p
			b += q * q
		}
		if i < len(w) {
			a += w[i] * y[i] * w[i] * y[i]
		}
		return math.Sqrt(a + b)
	}
	sum := 0.0
	for i, y := range s.y {
		sum += y * y / s.white.variance(i)
	}
	return math.Sqrt(sum)
}

// noise is the relative rounding error of chi2.
func (s *search) noise() float64 {
	if s.chi2 == 0 {
		return math.Inf(1)
	}
	return 1e-14 + 4e-16*s.size/math.Sqrt(s.chi2)
}

// run searches from the start that begin was given.
func (s *search) run(ctx context.Context) error {
	const small = 1e-4 // least accepted ratio of actual to predicted reduction, Moré 1978
	ld := s.q + 1
	r := func() []float64 { return s.now.r }
	b := func() []float64 { return s.now.r[s.q*ld : s.q*ld+s.q] }
	delta := 0.0
	for k, j := range s.free {
		delta = math.Hypot(delta, s.d[k]*s.theta[j])
	}
	if delta = 100 * delta; delta == 0 {
		delta = 100
	}
	s.trust.lambda = 0
	first, rejected, stuck := true, 0, 0
	jointly := true
	for {
		if err := ctx.Err(); err != nil {
			return fmt.Errorf("lsq: fit cancelled: %w", err)
		}
		if s.iterations >= s.maxIter {
			s.status, s.reason = IterationLimit, fmt.Sprintf("no convergence in %d iterations", s.maxIter)
			return nil
		}
		if s.chi2 == 0 {
			s.status, s.reason = Converged, "the model meets every reading exactly"
			return nil
		}
		s.iterations++
		gauss := s.step(r(), ld, b(), delta)
		norm := scaledNorm(s.d, s.x)
		mulUpper(s.q, ld, r(), s.x, s.rx)
		pred, lin := 0.0, 0.0
		for k, v := range s.rx {
			pred += v * (2*b()[k] - v)
			lin += v * v
		}
		pred /= s.chi2
		noise := s.noise()
		if first {
			delta, first = math.Min(delta, norm), false
		}
		s.aim()
		if norm == 0 {
			s.finish("no step lowers chi-squared")
			return nil
		}
		if gauss && pred <= 1e4*noise {
			// Differences of chi-squared no longer resolve the minimum: go on
			// by Gauss–Newton steps alone while they shrink.
			return s.polish(ctx, norm)
		}
		withJac := jointly
		var jac, cols [][]float64
		if withJac {
			jac, cols = s.jtrial, s.ctrial
		}
		chi2 := math.Inf(1)
		err := s.call(s.trial, s.ftrial, jac, cols)
		s.lastEvalErr = err
		if err == nil {
			if withJac {
				s.reduce(&s.next, s.trial, s.ftrial, s.ctrial)
				chi2 = s.next.chi2()
			} else {
				chi2 = s.chiSquared(s.trial, s.ftrial)
			}
			if math.IsNaN(chi2) {
				chi2 = math.Inf(1)
			}
		}
		act := -1.0
		if chi2 < 100*s.chi2 {
			act = 1 - chi2/s.chi2
		}
		ratio := 0.0
		if pred > 0 {
			ratio = act / pred
		}
		// the slope of chi-squared along the step, relative to chi-squared, halved
		slope := -(lin/s.chi2 + s.trust.lambda*norm*norm/s.chi2)
		switch {
		case ratio <= 0.25:
			shrink := 0.5
			if act < 0 {
				shrink = 0.5 * slope / (slope + 0.5*act)
			}
			if 0.1*math.Sqrt(chi2) >= math.Sqrt(s.chi2) || shrink < 0.1 || math.IsNaN(shrink) {
				shrink = 0.1
			}
			delta = shrink * math.Min(delta, norm/0.1)
			s.trust.lambda /= shrink
		case s.trust.lambda == 0 || ratio >= 0.75:
			delta = norm / 0.5
			s.trust.lambda *= 0.5
		}
		if ratio < small {
			rejected++
			jointly = s.eiv != nil
			if s.eiv != nil && !s.refresh() {
				s.finish("the points can't be projected onto the curve")
				return nil
			}
			if delta <= 1e-16*s.scaledSize() || rejected > 60 {
				s.finish("no step lowers chi-squared")
				return nil
			}
			continue
		}
		if !withJac {
			if err := s.call(s.trial, s.ftrial, s.jtrial, s.ctrial); err != nil {
				s.lastEvalErr = err
				s.finish("the derivatives can't be evaluated: " + err.Error())
				return nil
			}
			s.reduce(&s.next, s.trial, s.ftrial, s.ctrial)
		}
		if !s.goodTriangle() {
			// values are finite but derivatives are not: treat as out of the domain
			rejected++
			delta = 0.1 * math.Min(delta, norm)
			jointly = s.eiv != nil
			if rejected > 60 {
				s.finish("the derivatives are not finite near the best point")
				return nil
			}
			continue
		}
		rejected = 0
		jointly = ratio > 0.5 || s.eiv != nil
		if !s.checkedLinear {
			s.checkedLinear = true
			s.linear = !s.single && !s.numeric && s.eiv == nil && s.sameColumns()
		}
		s.accept()
		if act <= 1e3*noise && pred <= 1e3*noise {
			stuck++
			if stuck >= 20 {
				s.finish("chi-squared no longer changes")
				return nil
			}
		} else {
			stuck = 0
		}
	}
}

// step sets s.x to the step within delta that respects the bounds.
func (s *search) step(r []float64, ld int, b []float64, delta float64) (gauss bool) {
	if s.sub == nil {
		return s.trust.step(s.q, ld, r, b, s.d, delta, s.x)
	}
	return s.bounded(r, ld, b, delta)
}
