package lsq

import (
	"context"
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/gonum/mat"
)

// RobustKind is a way to give outlying readings less weight.
type RobustKind int

// The weight functions; their constants give 95 % efficiency on normal noise.
const (
	Huber    RobustKind = iota // ψ(t) = t up to 1.345, then constant (Huber, Ann. Math. Stat. 35 (1964) 73)
	Bisquare                   // ψ(t) = t(1 − t²/4.685²)², nothing beyond (Beaton and Tukey, Technometrics 16 (1974) 147)
)

// Robust is a second opinion on a fit: it never replaces the result.
type Robust struct {
	Kind       RobustKind
	Values, U  []float64     // of all parameters; U is 0 for fixed ones, NaN for those held at a bound
	Covariance *mat.SymDense // asymptotic (Huber and Ronchetti, Robust Statistics, 2nd ed., section 7.6)
	Scale      float64       // robust size of the standardised residuals, 1 when the stated uncertainties are right
	Factors    []float64     // weight of each reading relative to the fit's, 0 … 1
	Outliers   []int         // readings flagged: beyond three times Scale
	Shift      []float64     // difference from the fit's values over the fit's uncertainties; NaN where these are unknown
	Iterations int
	Converged  bool
}

// Robust fits again with weights that fall with the size of the residuals
// (iteratively reweighted least squares; Holland and Welsch, Comm. Stat. A6
// (1977) 813), scale from the median absolute deviation. Bisquare starts from
// Huber's estimate, since it may have several solutions. Readings must be
// independent.
func (r *Result) Robust(ctx context.Context, kind RobustKind) (*Robust, error) {
	if kind != Huber && kind != Bisquare {
		return nil, fmt.Errorf("lsq: robust kind %d is unknown; use Huber or Bisquare", kind)
	}
	if r.Status != Converged {
		return nil, fmt.Errorf("lsq: the fit is %s; a robust second opinion needs a converged fit", r.Status)
	}
	n := len(r.Fitted)
	factors := make([]float64, n)
	fill(factors, 1)
	a, err := r.repeat(r.problem.Y, r.Free, factors)
	if err != nil {
		return nil, err
	}
	o := &Robust{Kind: kind, Factors: factors}
	theta := append([]float64(nil), r.Values...)
	resid := append([]float64(nil), r.Residuals...)
	t := make([]float64, n)
	root := math.Sqrt(r.scale)
	stages := []RobustKind{Huber}
	if kind == Bisquare {
		stages = append(stages, Bisquare)
	}
	for _, stage := range stages {
		o.Converged = false
		for i := 0; i < 100; i++ {
			o.Iterations++
			for k := range t {
				t[k] = resid[k] * r.white.w[k] / root
			}
			o.Scale = madScale(t)
			if o.Scale == 0 {
				return nil, fmt.Errorf("lsq: more than half of the readings are met exactly; a robust scale can't be found")
			}
			for k := range t {
				factors[k] = robustWeight(stage, t[k]/o.Scale)
				a.w.w[k] = r.white.w[k] * math.Sqrt(factors[k]) / (o.Scale * root)
			}
			if err := a.run(ctx, theta); err != nil {
				return nil, fmt.Errorf("lsq: robust refit: %w", err)
			}
			change := 0.0
			for k, j := range r.Free {
				change = math.Max(change, math.Abs(a.s.theta[j]-theta[j])*a.s.d[k])
			}
			copy(theta, a.s.theta)
			for k, y := range r.problem.Y {
				resid[k] = y - a.s.f[k]
			}
			if change <= 1e-8 {
				o.Converged = true
				break
			}
		}
	}
	o.Values = theta
	held := a.s.held // nil without bounds
	q := len(r.Free)
	for _, h := range held {
		if h {
			q--
		}
	}
	// covariance: K² [Σψ²/(n−q)]/[mean ψ']² (JᵀJ)⁻¹ scale², K = 1 + q var ψ'/(n mean² ψ')
	var psi2, slope, slope2 float64
	for k := range t {
		x := resid[k] * r.white.w[k] / (o.Scale * root)
		w := robustWeight(kind, x)
		psi2 += w * w * x * x
		s := robustSlope(kind, x)
		slope += s
		slope2 += s * s
		if math.Abs(x) > 3 {
			o.Outliers = append(o.Outliers, k)
		}
	}
	m := slope / float64(n)
	factor := math.NaN()
	if n > q && m > 0 {
		kk := 1 + float64(q)/float64(n)*(slope2/float64(n)-m*m)/(m*m)
		factor = kk * kk * psi2 / float64(n-q) / (m * m) * o.Scale * o.Scale * r.scale
	}
	// JᵀJ at the robust estimate, with the fit's own weights
	copy(a.w.w, r.white.w)
	if err := a.s.begin(theta); err != nil {
		return nil, err
	}
	f := fitter{p: &a.p, free: r.Free}
	f.search.q, f.search.now, f.search.d, f.search.held = a.s.q, a.s.now, a.s.d, held
	sp := f.analyse()
	np := len(r.Values)
	o.Covariance, o.U, o.Shift = mat.NewSymDense(np, nil), make([]float64, np), make([]float64, np)
	for k, j := range r.Free {
		for l := 0; l <= k; l++ {
			c := 0.0
			for _, b := range sp.factor {
				c += b[k] * b[l]
			}
			if held != nil && (held[k] || held[l]) {
				c = math.NaN()
			}
			o.Covariance.SetSym(j, r.Free[l], c*factor)
		}
		o.U[j] = math.Sqrt(o.Covariance.At(j, j))
		o.Shift[j] = (theta[j] - r.Values[j]) / r.U[j]
	}
	return o, nil
}

// madScale is the median of the absolute values over 0.6745, the standard
// deviation when they come from normal noise.
func madScale(t []float64) float64 {
	v := make([]float64, len(t))
	for i, x := range t {
		v[i] = math.Abs(x)
	}
	sort.Float64s(v)
	m := len(v)
	med := v[m/2]
	if m%2 == 0 {
		med = 0.5 * (v[m/2-1] + v[m/2])
	}
	return med / 0.6744897501960817
}

// robustWeight is ψ(t)/t.
func robustWeight(kind RobustKind, t float64) float64 {
	t = math.Abs(t)
	if kind == Huber {
		if t <= 1.345 {
			return 1
		}
		return 1.345 / t
	}
	if t >= 4.685 {
		return 0
	}
	x := 1 - t*t/(4.685*4.685)
	return x * x
}

// robustSlope is ψ'(t).
func robustSlope(kind RobustKind, t float64) float64 {
	t = math.Abs(t)
	if kind == Huber {
		if t <= 1.345 {
			return 1
		}
		return 0
	}
	if t >= 4.685 {
		return 0
	}
	x := t * t / (4.685 * 4.685)
	return (1 - x) * (1 - 5*x)
}
