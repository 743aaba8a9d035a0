package lsq

import (
	"context"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// EIVProblem is a fit with errors in the response and in the predictors. Each
// row i is a point z = (x_1 … x_m, y) read with a covariance V of its own; its
// true place obeys y = f(x, θ), or f(x, θ) = 0 when Y is nil. The points' true
// places and θ minimise Σ (z − ζ)ᵀV⁻¹(z − ζ) under that condition.
type EIVProblem struct {
	Parameters []Parameter

	X  [][]float64 // X[k][i]: reading i of predictor k, predictor's unit
	UX [][]float64 // standard uncertainty of X[k][i]; UX[k] nil or an element 0: exact
	Y  []float64   // readings of the response, unit of f; nil: implicit, f(x, θ) = 0
	UY []float64   // their standard uncertainties; nil or an element 0: exact

	// Covariance, when not nil, takes the place of UX and UY: for each row the
	// symmetric matrix of (x_1 … x_m, y), or of (x_1 … x_m) when implicit, by
	// rows, one row of the data after another. It may be singular.
	Covariance []float64

	// Relative says that the uncertainties are known only up to a common
	// factor: the covariance of the parameters is then scaled by the residual
	// variance, and the result says so. It can't be used with priors.
	Relative bool

	// Eval fills f[i] with the model at predictors x[k][i] and parameters
	// theta and, when jac is not nil, jac[j][i] = ∂f/∂θ_j (columns of fixed
	// parameters are nil) and dx[k][i] = ∂f/∂x_k. It is only called from the
	// goroutine that called FitEIV, and must not keep the slices.
	Eval func(theta []float64, x [][]float64, f []float64, jac, dx [][]float64) error

	// Numeric says that Eval ignores jac and dx: central differences are used.
	Numeric bool
}

// EIVResult is the outcome of FitEIV. Its fields have the meaning of those of
// Result.
type EIVResult struct {
	Status Status
	Reason string

	Values     []float64
	U          []float64
	Covariance *mat.SymDense
	Free       []int

	ChiSquared float64 // Σ (z − ζ)ᵀV⁻¹(z − ζ) and the priors' terms
	PValue     float64
	BirgeRatio float64
	DOF        int

	Iterations  int
	Evaluations int
	Condition   float64

	Confounded        []*Remark
	AtBound           []int
	ScaledByResiduals bool

	X            [][]float64 // estimates of the true predictors
	Y            []float64   // f at these: the estimates of the true response; nil when implicit
	Standardised []float64   // signed distance of each point from the curve over its standard uncertainty

	Warnings []error
}

// eivState is the part of the search that knows the points. For each row the
// condition g(ζ, θ) = f(ξ, θ) − η = 0 is linearised at the present estimate ζ:
// with B = ∂g/∂z, the residual against the readings is w = g + B(z − ζ), its
// variance s² = BVBᵀ. The step of θ solves min Σ (w + Aδ)²/s², and then
// ζ' = z − VBᵀ(w + Aδ)/s² (Britt and Luecke, Technometrics 15 (1973) 233,
// section 4, for one condition a row). It is the Gauss–Newton step of the whole
// problem with the points eliminated, in O(rows), and holds for singular V. The
// covariance of θ at the end is (AᵀS⁻²A)⁻¹ at the adjusted points.
type eivState struct {
	p       *EIVProblem
	s       *search
	n, m    int
	started bool
	xi, xt  [][]float64 // estimates of the predictors: present and trial
	dx, dt  [][]float64 // ∂f/∂x there
	w, wt   []float64   // 1/s there
	vx      [][]float64 // variances of the predictors, nil column: exact
	vy      []float64   // variance of the response, nil: exact or implicit
	e       []float64   // scratch
	hi, lo  []float64   // for differences
	scale   []float64   // size of each predictor, for differences near zero
	heads   [][]float64 // memory of the columns
	slab    []float64
	own     []float64
	bad     int // a row whose condition no uncertain reading moves, −1 none
}

// FitEIV adjusts the free parameters of p, and the true places of its points,
// to the readings. See Fit for what an error and a Status mean.
func FitEIV(ctx context.Context, p *EIVProblem, set Settings) (*EIVResult, error) {
	f := takeFitter()
	defer f.release()
	inner := &f.inner
	free, priors, err := p.check(inner)
	if err != nil {
		return nil, err
	}
	if err := ctx.Err(); err != nil {
		return nil, fmt.Errorf("lsq: fit cancelled: %w", err)
	}
	if err := set.defaults(); err != nil {
		return nil, err
	}
	f.p, f.set, f.free, f.priors = inner, set, free, priors
	s := &f.search
	s.init(inner, inner.Y, free, &f.white)
	s.tol, s.maxIter = set.Tolerance, set.MaxIterations
	st := &f.eiv
	st.init(p, s)
	s.eiv = st
	start := f.take(len(p.Parameters))
	for j := range start {
		start[j] = p.Parameters[j].Start
	}
	if err := s.begin(start); err != nil {
		if st.bad >= 0 {
			return nil, fmt.Errorf("lsq: row %d has no uncertainty that could bring it to the curve: give its response or a predictor that matters a standard uncertainty", st.bad+1)
		}
		return nil, err
	}
	if err := s.run(ctx); err != nil {
		return nil, err
	}
	return f.resultEIV(p, st)
}

// defaults fills in the zero fields.
func (set *Settings) defaults() error {
	if set.MaxIterations == 0 {
		set.MaxIterations = 1000
	}
	if set.Tolerance == 0 {
		set.Tolerance = 1e-11
	}
	if set.MaxIterations < 0 || !(set.Tolerance > 0) {
		return fmt.Errorf("lsq: MaxIterations %d and Tolerance %v must be positive (or 0 for the default)", set.MaxIterations, set.Tolerance)
	}
	return nil
}

// check validates p and casts it as the problem inner, whose readings are Y or
// zeros. It returns the free parameters and the number of their priors.
func (p *EIVProblem) check(inner *Problem) ([]int, int, error) {
	fail := func(format string, a ...any) ([]int, int, error) {
		return nil, 0, fmt.Errorf("lsq: "+format, a...)
	}
	if p.Eval == nil {
		return fail("EIVProblem.Eval is nil; it must compute the model's values")
	}
	if len(p.X) == 0 {
		return fail("there are no predictors; use Fit")
	}
	n, m := len(p.X[0]), len(p.X)
	for k, x := range p.X {
		if len(x) != n {
			return fail("predictor %d has %d readings, predictor 1 has %d", k+1, len(x), n)
		}
		if i := notFinite(x); i >= 0 {
			return fail("reading %d of predictor %d is %v; a reading must be finite (exclude the row instead)", i+1, k+1, x[i])
		}
	}
	y := p.Y
	if y == nil {
		y = make([]float64, n)
	} else if len(y) != n {
		return fail("%d readings of the response, %d of the predictors", len(y), n)
	}
	if p.Covariance != nil {
		if p.UX != nil || p.UY != nil {
			return fail("give either Covariance or UX and UY, not both")
		}
		c := m + 1
		if p.Y == nil {
			c = m
		}
		if len(p.Covariance) != n*c*c {
			return fail("Covariance has %d elements; %d rows of %d×%d need %d", len(p.Covariance), n, c, c, n*c*c)
		}
		for i := 0; i < n; i++ {
			v := p.Covariance[i*c*c : (i+1)*c*c]
			for a := 0; a < c; a++ {
				for b := 0; b <= a; b++ {
					x, z := v[a*c+b], v[b*c+a]
					if !finite(x) || x != z || (a == b && x < 0) || x*x > v[a*c+a]*v[b*c+b]*(1+1e-12) {
						return fail("the covariance of row %d is not a symmetric matrix of finite variances with correlations within ±1", i+1)
					}
				}
			}
			if c > 2 && !possible(v, c) {
				return fail("the correlations of row %d can't all hold: its covariance has a negative eigenvalue", i+1)
			}
		}
	} else {
		if p.UX != nil && len(p.UX) != m {
			return fail("%d columns of predictor uncertainties for %d predictors", len(p.UX), m)
		}
		for k, u := range p.UX {
			if u == nil {
				continue
			}
			if len(u) != n {
				return fail("%d uncertainties of predictor %d for %d readings", len(u), k+1, n)
			}
			for i, v := range u {
				if !(v >= 0) || v > math.MaxFloat64 {
					return fail("standard uncertainty of reading %d of predictor %d is %v; it must be finite and not negative", i+1, k+1, v)
				}
			}
		}
		if p.UY != nil {
			if p.Y == nil {
				return fail("UY is given but the model is implicit (Y is nil)")
			}
			if len(p.UY) != n {
				return fail("%d uncertainties of the response for %d readings", len(p.UY), n)
			}
			for i, v := range p.UY {
				if !(v >= 0) || v > math.MaxFloat64 {
					return fail("standard uncertainty of response %d is %v; it must be finite and not negative", i+1, v)
				}
			}
		}
	}
	*inner = Problem{Parameters: p.Parameters, Y: y, Numeric: p.Numeric, Eval: nothing}
	free, priors, err := inner.validate()
	if err == nil && p.Relative && priors > 0 {
		return fail("relative uncertainties can't be used with priors, whose size is known; state the uncertainties of the readings")
	}
	return free, priors, err
}

// nothing stands for the model of a problem whose points are handled here.
func nothing([]float64, []float64, [][]float64) error { return nil }

func (t *eivState) init(p *EIVProblem, s *search) {
	n, m := len(s.y), len(p.X)
	t.p, t.s, t.n, t.m, t.bad = p, s, n, m, -1
	if cap(t.slab) < n*(4*m+4) {
		t.slab = make([]float64, n*(4*m+4))
	}
	if cap(t.heads) < 5*m {
		t.heads = make([][]float64, 5*m)
	}
	slab := t.slab[:n*(4*m+4)]
	take := func() []float64 {
		v := slab[:n:n]
		slab = slab[n:]
		return v
	}
	heads := t.heads[:5*m]
	clear(heads)
	t.xi, t.xt, t.dx, t.dt, t.vx = heads[:m:m], heads[m:2*m:2*m], heads[2*m:3*m:3*m], heads[3*m:4*m:4*m], heads[4*m:]
	t.w = take()
	t.wt, t.e = take(), take()
	t.own = make([]float64, m*n) // leaves with the result
	for k := range t.xi {
		t.xi[k], t.xt[k], t.dx[k], t.dt[k] = t.own[k*n:k*n+n:k*n+n], take(), take(), take()
		if p.Covariance == nil && p.UX != nil && p.UX[k] != nil {
			t.vx[k] = take()
			for i, u := range p.UX[k] {
				t.vx[k][i] = u * u
			}
		}
	}
	if p.Covariance == nil && p.UY != nil {
		t.vy = take()
		for i, u := range p.UY {
			t.vy[i] = u * u
		}
	}
	if p.Numeric {
		t.hi, t.lo, t.scale = make([]float64, n), make([]float64, n), make([]float64, m)
		for k, x := range p.X {
			for _, v := range x {
				t.scale[k] = math.Max(t.scale[k], math.Abs(v))
			}
			if t.scale[k] *= 1e-3; t.scale[k] == 0 {
				t.scale[k] = 1
			}
		}
		s.eval = func(theta, f []float64, jac [][]float64) error { return p.Eval(theta, t.xt, f, nil, nil) }
	}
}

// weights is 1/s that belongs to the values f.
func (t *eivState) weights(f []float64) []float64 {
	if &f[0] == &t.s.ftrial[0] {
		return t.wt
	}
	return t.w
}

// call moves the points to where the step to theta takes them, evaluates the
// model there, and leaves in f its linear extrapolation to the readings
// f(ξ) + ∂f/∂x·(x − ξ), so that y − f is the residual −w.
func (t *eivState) call(theta, f []float64, jac, cols [][]float64) error {
	s, p := t.s, t.p
	if !t.started {
		for k, x := range p.X {
			copy(t.xt[k], x)
		}
	} else {
		t.move(theta)
	}
	if p.Numeric {
		if err := p.Eval(theta, t.xt, f, nil, nil); err != nil {
			return err
		}
		if err := s.diff.columns(theta, f, cols); err != nil {
			return err
		}
		if err := t.differences(theta); err != nil {
			return err
		}
	} else if err := p.Eval(theta, t.xt, f, jac, t.dt); err != nil {
		return err
	}
	t.linearise(f)
	if !t.started {
		if i := notFinite(t.wt); i >= 0 {
			if finite(f[i]) {
				t.bad = i
				return fmt.Errorf("the variance of row %d is not positive", i+1)
			}
			f[i] = math.NaN()
			return nil
		}
		t.accept() // begin works on the present arrays
		t.started = true
	}
	return nil
}

// move sets the trial points: ζ' = z − VBᵀ(w + Aδ)/s².
func (t *eivState) move(theta []float64) {
	s, p := t.s, t.p
	e := t.e
	if p.Covariance == nil && s.q == 3 && t.m == 2 && t.vx[0] != nil && t.vx[1] != nil {
		t.move3(theta)
		return
	}
	for i, y := range s.y {
		e[i] = y - s.f[i]
	}
	for k, j := range s.free {
		d := theta[j] - s.theta[j]
		if d == 0 {
			continue
		}
		for i, a := range s.cols[k] {
			e[i] -= a * d
		}
	}
	for i, w := range t.w {
		e[i] *= w * w
	}
	if p.Covariance != nil {
		t.moveFull()
		return
	}
	for k, x := range p.X {
		v, dx, xt := t.vx[k], t.dx[k], t.xt[k]
		if v == nil {
			copy(xt, x)
			continue
		}
		v, dx, xt, x = v[:len(e)], dx[:len(e)], xt[:len(e)], x[:len(e)]
		for i, q := range e {
			xt[i] = x[i] + v[i]*dx[i]*q
		}
	}
}

// settle moves the points to where the last step takes them.
func (t *eivState) settle() {
	// s.f has already been moved along with the parameters, from s.theta to theta
	t.move(t.s.theta)
	t.xi, t.xt = t.xt, t.xi
}

// move3 is the same in one pass for three parameters and two predictors.
func (t *eivState) move3(theta []float64) {
	s, n := t.s, t.n
	var d [3]float64
	for k, j := range s.free {
		d[k] = theta[j] - s.theta[j]
	}
	a, b, c := d[0], d[1], d[2]
	y, f, j0, j1, j2, w := s.y[:n], s.f[:n], s.cols[0][:n], s.cols[1][:n], s.cols[2][:n], t.w[:n]
	x0, x1, v0, v1 := t.p.X[0][:n], t.p.X[1][:n], t.vx[0][:n], t.vx[1][:n]
	d0, d1, z0, z1 := t.dx[0][:n], t.dx[1][:n], t.xt[0][:n], t.xt[1][:n]
	for i := range y {
		q := w[i]
		e := (y[i] - f[i] - (j0[i]*a + j1[i]*b + j2[i]*c)) * q * q
		z0[i] = x0[i] + v0[i]*d0[i]*e
		z1[i] = x1[i] + v1[i]*d1[i]*e
	}
}

// moveFull is the same with a covariance for each row.
func (t *eivState) moveFull() {
	m, c := t.m, t.order()
	for i, q := range t.e {
		v := t.p.Covariance[i*c*c : (i+1)*c*c]
		for k := 0; k < m; k++ {
			g := 0.0
			for l := 0; l < m; l++ {
				g += v[k*c+l] * t.dx[l][i]
			}
			if c > m {
				g -= v[k*c+m]
			}
			t.xt[k][i] = t.p.X[k][i] + g*q
		}
	}
}

// order is the size of a row's covariance.
func (t *eivState) order() int {
	if t.p.Y == nil {
		return t.m
	}
	return t.m + 1
}

// linearise extrapolates f to the readings and finds 1/s.
func (t *eivState) linearise(f []float64) {
	p, m := t.p, t.m
	wt := t.wt
	if p.Covariance != nil {
		c := t.order()
		for i := range wt {
			v := p.Covariance[i*c*c : (i+1)*c*c]
			ss := 0.0
			for k := 0; k < m; k++ {
				g := 0.0
				for l := 0; l < m; l++ {
					g += v[k*c+l] * t.dt[l][i]
				}
				ss += t.dt[k][i] * g
				f[i] += t.dt[k][i] * (p.X[k][i] - t.xt[k][i])
				if c > m {
					ss -= 2 * t.dt[k][i] * v[k*c+m]
				}
			}
			if c > m {
				ss += v[m*c+m]
			}
			wt[i] = 1 / math.Sqrt(ss)
		}
		return
	}
	if m == 2 && t.vx[0] != nil && t.vx[1] != nil && t.vy != nil {
		n := len(wt)
		f, vy := f[:n], t.vy[:n]
		x0, x1, s0, s1 := p.X[0][:n], p.X[1][:n], t.xt[0][:n], t.xt[1][:n]
		d0, d1, v0, v1 := t.dt[0][:n], t.dt[1][:n], t.vx[0][:n], t.vx[1][:n]
		for i := range wt {
			a, b := d0[i], d1[i]
			f[i] += a*(x0[i]-s0[i]) + b*(x1[i]-s1[i])
			wt[i] = 1 / math.Sqrt(vy[i]+a*a*v0[i]+b*b*v1[i])
		}
		return
	}
	if t.vy != nil {
		copy(wt, t.vy)
	} else {
		clear(wt)
	}
	for k, x := range p.X {
		v, d, xt := t.vx[k], t.dt[k], t.xt[k]
		if v == nil {
			continue
		}
		for i, a := range d {
			f[i] += a * (x[i] - xt[i])
			wt[i] += a * a * v[i]
		}
	}
	for i, ss := range wt {
		wt[i] = 1 / math.Sqrt(ss)
	}
}

// accept makes the trial points the present ones.
func (t *eivState) accept() {
	t.xi, t.xt = t.xt, t.xi
	t.dx, t.dt = t.dt, t.dx
	t.w, t.wt = t.wt, t.w
}

// differences estimates ∂f/∂x at the trial points.
func (t *eivState) differences(theta []float64) error {
	for k := range t.xt {
		x := t.xt[k]
		h := t.e
		for i, v := range x {
			h[i] = stepFactor * math.Max(math.Abs(v), t.scale[k])
		}
		keep := append([]float64(nil), x...)
		for i := range x {
			x[i] = keep[i] + h[i]
		}
		t.s.evaluations++
		err := t.p.Eval(theta, t.xt, t.hi, nil, nil)
		for i := range x {
			x[i] = keep[i] - h[i]
		}
		if err == nil {
			t.s.evaluations++
			err = t.p.Eval(theta, t.xt, t.lo, nil, nil)
		}
		for i := range x {
			t.dt[k][i] = (t.hi[i] - t.lo[i]) / ((keep[i] + h[i]) - (keep[i] - h[i]))
		}
		copy(x, keep)
		if err != nil {
			return err
		}
	}
	return nil
}

// resultEIV gathers everything about the end of the fit.
func (f *fitter) resultEIV(p *EIVProblem, t *eivState) (*EIVResult, error) {
	s := &f.search
	n := t.n
	sp := f.analyse()
	inner := &Result{Status: s.status, Reason: s.reason, Free: f.free}
	inner.DOF = n + f.priors - (len(sp.idx) - len(sp.null))
	scale := 1.0
	pv, birge := math.NaN(), math.NaN()
	switch {
	case inner.DOF <= 0 && p.Relative:
		scale = math.NaN()
		inner.warn("the uncertainties are unknown: only their ratios were stated and no degrees of freedom are left to find them from the residuals")
	case inner.DOF <= 0:
		inner.warn("there are no degrees of freedom: the readings can't test the model, and chi-squared has no probability")
	case p.Relative:
		scale = s.chi2 / float64(inner.DOF)
		inner.warn("only the ratios of the readings' uncertainties were stated: their size was taken from the residuals, so that chi-squared has no probability")
	default:
		birge = math.Sqrt(s.chi2 / float64(inner.DOF))
		pv = chiSquaredTail(s.chi2, inner.DOF)
	}
	f.parameters(inner, sp, scale)
	r := &EIVResult{
		Status: inner.Status, Reason: inner.Reason, Values: inner.Values, U: inner.U, Covariance: inner.Covariance, Free: f.free,
		ChiSquared: s.chi2, PValue: pv, BirgeRatio: birge, DOF: inner.DOF, Iterations: s.iterations, Evaluations: s.evaluations,
		Condition: sp.cond, Confounded: inner.Confounded, AtBound: inner.AtBound, ScaledByResiduals: p.Relative,
		X: make([][]float64, t.m), Warnings: inner.Warnings,
	}
	rows := make([]float64, 2*n)
	r.Standardised = rows[:n:n]
	root := 1 / math.Sqrt(scale)
	for i, w := range t.w {
		r.Standardised[i] = (s.y[i] - s.f[i]) * w * root
	}
	if p.Y != nil {
		r.Y = rows[n:]
		copy(r.Y, s.f)
		for k, x := range p.X {
			d, xi := t.dx[k], t.xi[k]
			for i, a := range d {
				r.Y[i] -= a * (x[i] - xi[i])
			}
		}
	}
	for k, c := range t.xi {
		r.X[k] = t.own[k*n : k*n+n : k*n+n]
		if &c[0] != &r.X[k][0] { // it stands in the other set: exchange
			copy(r.X[k], c)
		}
	}
	return r, nil
}
