package lsq

import (
	"context"
	"fmt"
	"math"
	"slices"
	"sort"
	"sync"

	"gonum.org/v1/gonum/mathext"
)

// Fit adjusts the free parameters of p to its readings: the θ that minimises
// χ² = (y − f)ᵀΣ⁻¹(y − f) + Σ((θ_j − prior_j)/u_j)², within the bounds.
//
// The method is trust-region Levenberg–Marquardt (Moré 1978) on the QR
// decomposition of the whitened Jacobian; models linear in the parameters are
// solved directly, in extended precision where their conditioning asks for it.
// When the search from the given start stalls, it is repeated from scaled
// starts in a fixed order, and a warning says so.
//
// An error means that nothing could be computed: a problem that is wrongly
// stated (the message says what would be right), a model that can't be
// evaluated at the start, or a cancelled context. Otherwise the Result says in
// Status and Reason how the search ended; look at Warnings.
func Fit(ctx context.Context, p *Problem, set Settings) (*Result, error) {
	free, priors, err := p.validate()
	if err != nil {
		return nil, err
	}
	if err := ctx.Err(); err != nil {
		return nil, fmt.Errorf("lsq: fit cancelled: %w", err)
	}
	if err := set.defaults(); err != nil {
		return nil, err
	}
	f := takeFitter()
	defer f.release()
	f.p, f.set, f.free, f.priors = p, set, free, priors
	if err := f.weights(); err != nil {
		return nil, err
	}
	if err := f.fit(ctx); err != nil {
		return nil, err
	}
	return f.result(ctx)
}

// fitter carries one call of Fit.
type fitter struct {
	p      *Problem
	set    Settings
	free   []int
	priors int
	white  whitener
	search search
	eiv    eivState
	inner  Problem // of an errors-in-variables fit

	u        []float64 // current uncertainties, ours to rewrite
	g        *Effects  // current loads, ours to rewrite
	lastU    []float64
	lastLoad []float64

	noise       float64   // estimated equal uncertainty when U is unknown and priors or effects need it
	small       []float64 // see take
	reweighting int
	restarts    int
	warnings    []error
	exact       *extended // solution of a linear model in extended precision
	pinned      []int     // free parameters kept at the start: see valley
	bare        bool      // the search had no bounds before
}

// fitters keeps the working memory of fits, which come in series.
var fitters sync.Pool

func takeFitter() *fitter {
	if f, ok := fitters.Get().(*fitter); ok {
		return f
	}
	return &fitter{}
}

// keptFloats bounds the working memory that outlives a fit.
const keptFloats = 1 << 20

// release forgets everything but memory that can be used again.
func (f *fitter) release() {
	heads, slab := f.search.heads, f.search.slab
	if cap(slab) > keptFloats {
		slab = nil
	}
	points, pointHeads := f.eiv.slab, f.eiv.heads
	if cap(points) > keptFloats {
		points = nil
	}
	clear(heads)
	clear(pointHeads)
	*f = fitter{}
	f.search.heads, f.search.slab = heads, slab
	f.eiv.slab, f.eiv.heads = points, pointHeads
	fitters.Put(f)
}

// estimated reports that the noise must be found from the residuals although
// priors or effects make its size matter for the estimates.
func (f *fitter) estimated() bool {
	return f.p.U == nil && f.p.Covariance == nil && f.p.Reweight == nil && (f.priors > 0 || f.p.Effects != nil)
}

// weights prepares the first weights.
func (f *fitter) weights() error {
	p := f.p
	n := len(p.Y)
	switch {
	case p.Covariance != nil:
		return f.white.setFull(p.Covariance)
	case p.Reweight != nil:
		if f.u, f.g = p.U, p.Effects; !p.Scratch || p.U == nil {
			f.u = make([]float64, n)
			copy(f.u, p.U)
		}
		if p.Effects != nil && !p.Scratch {
			f.g = p.Effects.copy()
		}
		needed := p.U == nil
		for _, u := range f.u {
			needed = needed || u == 0
		}
		if needed {
			theta := make([]float64, len(p.Parameters))
			for j := range theta {
				theta[j] = p.Parameters[j].Start
			}
			values := make([]float64, n)
			if err := p.Eval(theta, values, nil); err != nil {
				return fmt.Errorf("lsq: the model can't be evaluated at the start: %w", err)
			}
			if err := f.reweight(theta, values); err != nil {
				return err
			}
		}
		return f.setWeights(f.u, f.g)
	case p.U == nil && f.estimated():
		f.noise = spread(p.Y)
		f.u = make([]float64, n)
		for i := range f.u {
			f.u[i] = f.noise
		}
		return f.setWeights(f.u, p.Effects)
	case p.U == nil:
		f.white.setUnit(n)
		return nil
	}
	return f.setWeights(p.U, p.Effects)
}

func (f *fitter) setWeights(u []float64, g *Effects) error {
	if g == nil {
		f.white.setDiagonal(u)
		return nil
	}
	return f.white.setEffects(u, g)
}

// spread is a first guess of unknown noise: a tenth of the readings' scatter.
func spread(y []float64) float64 {
	m, ss := 0.0, 0.0
	for _, v := range y {
		m += v
	}
	m /= float64(len(y))
	for _, v := range y {
		ss += (v - m) * (v - m)
	}
	if ss == 0 {
		if m != 0 {
			return 1e-3 * math.Abs(m)
		}
		return 1
	}
	return 0.1 * math.Sqrt(ss/float64(len(y)))
}

// reweight asks the user for weights at theta and checks them.
func (f *fitter) reweight(theta, values []float64) error {
	f.reweighting++
	if s := &f.search; s.single {
		// What the search whitens into is idle now.
		s.stale = true
		f.lastU, f.lastLoad = s.wres[:0:len(s.wres)], s.block[:0:len(s.block)]
	}
	f.lastU = append(f.lastU[:0], f.u...)
	if f.g != nil {
		f.lastLoad = append(f.lastLoad[:0], f.g.Load...)
	}
	if err := f.p.Reweight(theta, values, f.u, f.g); err != nil {
		return fmt.Errorf("lsq: the weights can't be evaluated: %w", err)
	}
	for i, u := range f.u {
		if !(u > 0) || math.IsInf(u, 0) {
			return fmt.Errorf("lsq: Reweight gave reading %d the standard uncertainty %v; it must be positive and finite", i+1, u)
		}
	}
	if f.g != nil {
		for _, v := range f.g.Load {
			if !finite(v) {
				return fmt.Errorf("lsq: Reweight gave an effect the load %v; it must be finite", v)
			}
		}
	}
	return nil
}

// moved is the largest relative change of the weights by the last reweighting.
func (f *fitter) moved() float64 {
	worst := 0.0
	for i, u := range f.u {
		worst = math.Max(worst, math.Abs(u-f.lastU[i])/u)
	}
	if f.g != nil {
		for i := 0; i+1 < len(f.g.Start); i++ {
			for k := f.g.Start[i]; k < f.g.Start[i+1]; k++ {
				scale := math.Max(math.Abs(f.g.Load[k]), f.u[i])
				worst = math.Max(worst, math.Abs(f.g.Load[k]-f.lastLoad[k])/scale)
			}
		}
	}
	return worst
}

// fit searches, and repeats the search while the weights change.
func (f *fitter) fit(ctx context.Context) error {
	s := &f.search
	s.init(f.p, f.p.Y, f.free, &f.white)
	s.tol, s.maxIter = f.set.Tolerance, f.set.MaxIterations
	start := f.take(len(f.p.Parameters))
	for j := range start {
		start[j] = f.p.Parameters[j].Start
	}
	if err := f.once(ctx, start, true); err != nil {
		return err
	}
	const rounds = 100
	switch {
	case f.p.Reweight != nil:
		for i := 0; ; i++ {
			if err := f.reweight(s.theta, s.f); err != nil {
				return err
			}
			change := f.moved()
			if change <= 1e-10 {
				break
			}
			if i == rounds {
				f.warnings = append(f.warnings, fmt.Errorf("the weights still changed by a factor of 1 + %.2g after %d reweightings", change, rounds))
				break
			}
			if err := f.setWeights(f.u, f.g); err != nil {
				return err
			}
			if err := f.again(ctx); err != nil {
				return err
			}
		}
	case f.estimated():
		return f.findNoise(ctx, rounds)
	}
	return nil
}

// findNoise finds the equal standard uncertainty at which chi-squared equals
// the degrees of freedom (Paule and Mandel, J. Res. NBS 87 (1982) 377): with
// priors or shared effects the noise decides their weight, so that scaling the
// covariance afterwards would be wrong.
func (f *fitter) findNoise(ctx context.Context, rounds int) error {
	s := &f.search
	floor := 1e-12 * f.noise
	for i := 0; i < rounds; i++ {
		dof := float64(len(f.p.Y) + f.priors - len(f.free) + f.heldOrPinned())
		if dof <= 0 {
			return nil // result says that the noise can't be known
		}
		factor := math.Sqrt(s.chi2 / dof)
		if math.Abs(factor-1) <= 1e-10 {
			return nil
		}
		f.noise *= factor
		if f.noise < floor || s.chi2 == 0 {
			return fmt.Errorf("lsq: the noise of the readings can't be found from the residuals: they scatter less than the priors and shared effects allow; state the uncertainty of the readings")
		}
		for k := range f.u {
			f.u[k] = f.noise
		}
		if err := f.setWeights(f.u, f.p.Effects); err != nil {
			return err
		}
		if err := f.again(ctx); err != nil {
			return err
		}
	}
	f.warnings = append(f.warnings, fmt.Errorf("the noise found from the residuals had not settled after %d rounds", rounds))
	return nil
}

// heldOrPinned counts the free parameters that are not estimated: at a bound, or
// kept at the start.
func (f *fitter) heldOrPinned() int {
	n := len(f.pinned)
	for k, h := range f.search.held {
		if h && !slices.Contains(f.pinned, k) {
			n++
		}
	}
	return n
}

// again repeats the search from where it stands with new weights.
func (f *fitter) again(ctx context.Context) error {
	return f.once(ctx, append([]float64(nil), f.search.theta...), false)
}

// once searches from start, and from scaled starts when that fails.
func (f *fitter) once(ctx context.Context, start []float64, restarts bool) error {
	s := &f.search
	if err := s.begin(start); err != nil {
		return err
	}
	s.linear = f.p.Linear
	s.checkedLinear = f.p.Linear
	limit := s.iterations + f.set.MaxIterations
	s.maxIter = limit
	if restarts && !f.p.Linear && s.eiv == nil {
		if pins := f.pins(); pins != nil {
			if lost, err := f.valley(ctx, pins); lost || err != nil {
				return err
			}
			if err := s.begin(start); err != nil {
				return err
			}
			s.checkedLinear = false
			s.linear = false
			s.maxIter = s.iterations + f.set.MaxIterations
		}
	}
	if err := s.run(ctx); err != nil {
		return err
	}
	f.exact = nil
	if f.pinned != nil {
		return nil
	}
	if s.linear && !s.anyHeld() {
		return f.refine(ctx)
	}
	if !restarts || f.set.NoRestarts || f.p.Linear || f.good() {
		return nil
	}
	return f.restart(ctx, start)
}

func (s *search) anyHeld() bool {
	for _, h := range s.held {
		if h {
			return true
		}
	}
	return false
}

// good reports that a search ended at a well-determined minimum.
func (f *fitter) good() bool {
	s := &f.search
	if s.status != Converged || s.collapsed {
		return false
	}
	if s.q == 1 {
		return true
	}
	// cheap test first: the scaled diagonal of the triangle
	worst := 1.0
	for k := 0; k < s.q; k++ {
		if c := columnNorm(k, s.q+1, s.now.r); c > 0 {
			worst = math.Min(worst, math.Abs(s.now.r[k*(s.q+1)+k])/c)
		} else {
			return false
		}
	}
	return worst > 1e-11
}

// restart repeats the search from scaled starts, the most promising first, and
// keeps the best end. The starts and their order depend on nothing but the
// problem.
func (f *fitter) restart(ctx context.Context, start []float64) error {
	s := &f.search
	reason := s.reason
	if s.status == Converged {
		reason = "it ended where some parameters no longer matter"
	}
	type end struct {
		theta  []float64
		chi2   float64
		status Status
		reason string
		good   bool
	}
	keep := func() end {
		return end{append([]float64(nil), s.theta...), s.chi2, s.status, s.reason, f.good()}
	}
	best := keep()
	first := best
	type candidate struct {
		theta []float64
		chi2  float64
	}
	var cand []candidate
	for _, theta := range f.scaledStarts(start) {
		if err := ctx.Err(); err != nil {
			return fmt.Errorf("lsq: fit cancelled: %w", err)
		}
		s.evaluations++
		if err := f.p.Eval(theta, s.ftrial, nil); err != nil || notFinite(s.ftrial) >= 0 {
			continue
		}
		if c := s.chiSquared(theta, s.ftrial); finite(c) {
			cand = append(cand, candidate{theta, c})
		}
	}
	sort.SliceStable(cand, func(a, b int) bool { return cand[a].chi2 < cand[b].chi2 })
	found := 0
	for i, c := range cand {
		if i >= 40 || found >= 3 {
			break
		}
		if s.begin(c.theta) != nil {
			continue
		}
		f.restarts++
		s.maxIter = s.iterations + f.set.MaxIterations
		if err := s.run(ctx); err != nil {
			return err
		}
		e := keep()
		if e.good {
			found++
		}
		if better := e.chi2 < best.chi2*(1-1e-9); (e.good && !best.good && e.chi2 <= best.chi2*(1+1e-9)) || (better && (e.good || !best.good)) {
			best = e
		}
	}
	if best.chi2 < first.chi2 || best.good {
		f.warnings = append(f.warnings, fmt.Errorf("the search from the given start stalled (%s); the result comes from the best of %d scaled starts", reason, f.restarts))
	}
	if err := s.begin(best.theta); err != nil {
		return err
	}
	s.status, s.reason = best.status, best.reason
	if s.status == Converged && !best.good {
		s.collapsed = true
	}
	return nil
}

// scaledStarts multiplies the start by powers of ten, all parameters in all
// combinations when they are few, else together and one by one.
func (f *fitter) scaledStarts(start []float64) [][]float64 {
	factors := []float64{1, 0.1, 10, 0.01, 100}
	var out [][]float64
	q := len(f.free)
	add := func(scale func(k int) float64) {
		t := append([]float64(nil), start...)
		same := true
		for k, j := range f.free {
			v := t[j] * scale(k)
			if v == 0 && scale(k) != 1 { // zero has no scale of its own
				v = (scale(k) - 1) / f.search.d[k]
			}
			if s := &f.search; s.lo != nil {
				v = math.Min(math.Max(v, s.lo[k]), s.hi[k])
			}
			same = same && v == t[j]
			t[j] = v
		}
		if !same {
			out = append(out, t)
		}
	}
	if q <= 4 {
		total := 1
		for i := 0; i < q; i++ {
			total *= len(factors)
		}
		for c := 1; c < total; c++ {
			add(func(k int) float64 {
				d := c
				for i := 0; i < k; i++ {
					d /= len(factors)
				}
				return factors[d%len(factors)]
			})
		}
		return out
	}
	for _, x := range []float64{0.5, 2, 0.1, 10, 0.01, 100} {
		add(func(int) float64 { return x })
		for l := 0; l < q; l++ {
			add(func(k int) float64 {
				if k == l {
					return x
				}
				return 1
			})
		}
	}
	return out
}

// chiSquaredTail is the probability that chi-squared with dof degrees of
// freedom exceeds x: for few degrees of freedom the finite sums (26.4.4) and
// (26.4.5) of Abramowitz and Stegun, Handbook of Mathematical Functions.
func chiSquaredTail(x float64, dof int) float64 {
	if dof <= 0 || math.IsNaN(x) {
		return math.NaN()
	}
	if dof > 60 || x > 500 {
		return mathext.GammaIncRegComp(float64(dof)/2, x/2)
	}
	h := x / 2
	if dof%2 == 0 {
		term, sum := 1.0, 1.0
		for k := 1; k < dof/2; k++ {
			term *= h / float64(k)
			sum += term
		}
		return math.Min(1, math.Exp(-h)*sum)
	}
	root := math.Sqrt(h)
	term, sum := root/(0.5*math.SqrtPi), 0.0 // h^(k−1/2)/Γ(k+1/2) at k = 1
	for k := 1; k <= (dof-1)/2; k++ {
		sum += term
		term *= h / (float64(k) + 0.5)
	}
	return math.Min(1, math.Erfc(root)+math.Exp(-h)*sum)
}
