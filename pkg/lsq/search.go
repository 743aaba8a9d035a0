package lsq

import (
	"context"
	"fmt"
	"math"
	"sync"
)

// search is one run of the trust-region Levenberg–Marquardt method (Moré,
// Lecture Notes in Mathematics 630 (1978) 105) on whitened residuals with
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
	slab          *[]float64  // pooled scratch
	wcols         [][]float64 // whitened copies when the covariance is not diagonal
	wres          []float64
	trust         trust
	sub           *subspace
	eiv           *eivState // errors in variables: the linearisation of the rows moves with the search
	diff          *difference
	iterations    int
	evaluations   int
	linear        bool // the derivatives did not change with the parameters
	lastEvalErr   error
	size          float64 // length of the whitened readings
	status        Status
	reason        string
	held          []bool // free parameters at a bound and pushed outwards
	collapsed     bool   // a column of the Jacobian has become negligible
	checkedLinear bool
}

// init prepares for the readings y and the parameters of p. Scratch memory
// comes from a pool; release gives it back.
func (s *search) init(p *Problem, y []float64, free []int, white *whitener) {
	n, np, q := len(y), len(p.Parameters), len(free)
	s.p, s.y, s.free, s.q, s.white, s.eval = p, y, free, q, white, p.Eval
	m := blockRows(n)
	tri := (q + 1) * (q + 1)
	s.slab = takeSlab(2*n + 2*n*q + 4*np + 3*q + 2*tri + (q+1)*(m+1) + q*q + 3*q)
	at := 0
	take := func(k int) []float64 {
		v := (*s.slab)[at : at+k : at+k]
		at += k
		return v
	}
	s.f, s.ftrial = take(n), take(n)
	if cap(s.heads) < 2*np+2*q {
		s.heads = make([][]float64, 2*np+2*q)
	}
	heads := s.heads[:2*np+2*q]
	clear(heads)
	s.jac, s.jtrial, s.cols, s.ctrial = heads[:np:np], heads[np:2*np:2*np], heads[2*np:2*np+q:2*np+q], heads[2*np+q:]
	for k, j := range free {
		s.cols[k], s.ctrial[k] = take(n), take(n)
		s.jac[j], s.jtrial[j] = s.cols[k], s.ctrial[k]
	}
	s.theta, s.trial = take(np), take(np)
	s.priorV, s.priorW = take(np), take(np)
	s.d, s.x, s.rx = take(q), take(q), take(q)
	s.now = fold{q: q, r: take(tri), stride: m, buf: take((q + 1) * m), dots: take(q + 1)}
	s.next = fold{q: q, r: take(tri), stride: m, buf: s.now.buf, dots: s.now.dots}
	s.trust = trust{q: q, s: take(q * q), x: take(q), w: take(q), b: take(q)}
	for j := range p.Parameters {
		s.priorV[j], s.priorW[j] = math.NaN(), 0
	}
	for k, j := range free {
		q := &p.Parameters[j]
		if q.Prior != nil {
			s.priorV[j], s.priorW[j] = q.Prior.Value, 1/q.Prior.U
			s.hasPrior = true
		}
		if (q.Lower != nil || q.Upper != nil) && s.lo == nil {
			s.lo, s.hi = make([]float64, s.q), make([]float64, s.q)
			s.held = make([]bool, s.q)
			for l := range s.lo {
				s.lo[l], s.hi[l] = math.Inf(-1), math.Inf(1)
			}
			s.sub = newSubspace(s.q)
		}
		if q.Lower != nil {
			s.lo[k] = *q.Lower
		}
		if q.Upper != nil {
			s.hi[k] = *q.Upper
		}
	}
	if p.Numeric {
		s.numeric = true
		s.diff = newDifference(s)
	}
	s.prepareWhite()
}

// columns returns a copy of the free columns of the Jacobian.
func (s *search) columns() [][]float64 {
	out := make([][]float64, s.q)
	n := len(s.y)
	slab := make([]float64, n*s.q)
	for k, c := range s.cols {
		out[k] = slab[k*n : k*n+n : k*n+n]
		copy(out[k], c)
	}
	return out
}

// release gives the scratch memory back; the search is then of no further use.
func (s *search) release() {
	giveSlab(s.slab)
	s.slab = nil
}

// slabs keeps scratch memory between fits: they come in series of one size.
var slabs sync.Pool

func takeSlab(n int) *[]float64 {
	if p, ok := slabs.Get().(*[]float64); ok {
		if cap(*p) >= n && cap(*p) <= 8*n+4096 {
			*p = (*p)[:n]
			return p
		}
	}
	v := make([]float64, n)
	return &v
}

func giveSlab(p *[]float64) {
	if p != nil {
		slabs.Put(p)
	}
}

// prepareWhite allocates what correlated readings need.
func (s *search) prepareWhite() {
	if s.white.diagonal() || s.wres != nil {
		return
	}
	n := len(s.y)
	s.wres = make([]float64, n)
	s.wcols = make([][]float64, s.q)
	slab := make([]float64, n*s.q)
	for k := range s.wcols {
		s.wcols[k] = slab[k*n : k*n+n]
	}
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
			s.linear = !s.numeric && s.eiv == nil && s.sameColumns()
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
			s.last()
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
func (s *search) last() {
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

// step sets s.x to the step within delta that respects the bounds.
func (s *search) step(r []float64, ld int, b []float64, delta float64) (gauss bool) {
	if s.sub == nil {
		return s.trust.step(s.q, ld, r, b, s.d, delta, s.x)
	}
	return s.bounded(r, ld, b, delta)
}
