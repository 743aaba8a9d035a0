package lsq

import (
	"context"
	"errors"
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/gonum/mat"
)

// spectrum is the singular value decomposition of the whitened Jacobian with
// columns scaled to unit length, for the parameters that are not held at a
// bound.
type spectrum struct {
	idx    []int     // positions among the free parameters
	norm   []float64 // lengths of their columns
	s, v   []float64 // singular values, right vectors by columns
	null   []int     // singular values that count as zero
	cond   float64
	factor [][]float64 // columns of B with (JᵀΣ⁻¹J)⁻¹ = BBᵀ, over all free parameters
}

// take hands out zeroed memory for what is small and leaves with the result.
func (f *fitter) take(k int) []float64 {
	if len(f.small) < k {
		q, np := f.search.q, len(f.p.Parameters)
		f.small = make([]float64, k+4*q*q+2*q+np*np+4*np)
	}
	v := f.small[:k:k]
	f.small = f.small[k:]
	return v
}

// analyse decomposes the triangle at the end of the search.
func (f *fitter) analyse() *spectrum {
	s := &f.search
	q, ld := s.q, s.q+1
	ints := make([]int, 2*q)
	sp := &spectrum{idx: ints[:0:q], null: ints[q : q : 2*q], norm: f.take(q)[:0], factor: make([][]float64, 0, q)}
	a := f.take(q * q)
	for k := 0; k < q; k++ {
		if s.held != nil && s.held[k] {
			continue
		}
		l := len(sp.idx)
		sp.idx = append(sp.idx, k)
		c := columnNorm(k, ld, s.now.r)
		if s.collapsed && s.silent(k, c) {
			c = 0 // this parameter ran to where the readings no longer respond
		}
		sp.norm = append(sp.norm, c)
		if c > 0 {
			for i, v := range s.now.r[k*ld : k*ld+k+1] {
				a[l*q+i] = v / c
			}
		} else {
			sp.norm[l] = 1
		}
	}
	m := len(sp.idx)
	if m < q { // a q×m matrix: triangulate it first
		b := make([]float64, q)
		triangulate(q, m, q, a, b)
		c := make([]float64, m*m)
		for l := 0; l < m; l++ {
			copy(c[l*m:l*m+l+1], a[l*q:l*q+l+1])
		}
		a = c
	}
	sp.s, sp.v = f.take(m), f.take(m*m)
	jacobiSVD(m, a, sp.s, sp.v)
	top, low := 0.0, math.Inf(1)
	for _, x := range sp.s {
		top, low = math.Max(top, x), math.Min(low, x)
	}
	sp.cond = top / low
	limit := 1e-13
	if f.p.Numeric {
		limit = 1e-9
	}
	for k, x := range sp.s {
		if !(x > limit*top) {
			sp.null = append(sp.null, k)
		}
	}
	for k, x := range sp.s {
		if !(x > limit*top) {
			continue
		}
		col := f.take(q)
		for l, at := range sp.idx {
			col[at] = sp.v[k*m+l] / (x * sp.norm[l])
		}
		sp.factor = append(sp.factor, col)
	}
	if f.exact != nil && len(sp.null) == 0 && m == q {
		sp.factor = f.exact.inverse()
	}
	return sp
}

// inverse returns the columns of R⁻¹, found in wide arithmetic and rounded.
func (e *extended) inverse() [][]float64 {
	out := make([][]float64, e.q)
	for k := range out {
		x := make([]wide, k+1)
		x[k] = wide{1, 0}
		for j := k; j >= 0; j-- {
			x[j] = x[j].div(e.r[j][j])
			for i := 0; i < j; i++ {
				x[i] = x[i].sub(e.r[j][i].mul(x[j]))
			}
		}
		out[k] = make([]float64, e.q)
		for i, v := range x {
			out[k][i] = v.float()
		}
	}
	return out
}

// faintLimit is the size of a singular value, relative to the greatest, below
// which a search that ended badly names its direction.
const faintLimit = 1e-5

// faint lists the singular values that are small without being zero.
func (sp *spectrum) faint() []int {
	top := 0.0
	for _, x := range sp.s {
		top = math.Max(top, x)
	}
	var out []int
	for k, x := range sp.s {
		if x <= faintLimit*top {
			out = append(out, k)
		}
	}
	return out
}

// confounded names the parameters of each null vector, after reducing the null
// vectors to echelon form so that each names as few as it can.
func (f *fitter) confounded(sp *spectrum) (remarks []*Remark, involved []bool) {
	s := &f.search
	involved = make([]bool, s.q)
	for _, d := range sp.echelon(largest) {
		row := d.v
		// the direction in units of the parameters, scaled to a change of 1 % of
		// the parameter that changes most relative to itself
		big, most := 0.0, 0.0
		for l, v := range row {
			big = math.Max(big, math.Abs(v))
			if at := s.theta[f.free[sp.idx[l]]]; at != 0 {
				most = math.Max(most, math.Abs(v/sp.norm[l]/at))
			}
		}
		if most == 0 {
			most = 0.01
		}
		var moves []move
		for l, v := range row {
			if math.Abs(v) < 1e-5*big {
				continue
			}
			k := sp.idx[l]
			involved[k] = true
			j := f.free[k]
			m := move{j: j, change: 0.01 * v / sp.norm[l] / most}
			if at := s.theta[j]; at != 0 {
				m.change, m.share = m.change/at, true
			}
			m.change = three(m.change)
			moves = append(moves, m)
		}
		if len(moves) > 0 {
			remarks = append(remarks, f.p.alike(moves))
		}
	}
	sort.Slice(remarks, func(a, b int) bool { return remarks[a].Error() < remarks[b].Error() })
	return remarks, involved
}

// result gathers everything about the end of the fit.
func (f *fitter) result(ctx context.Context) (*Result, error) {
	s, p := &f.search, f.p
	n := len(s.y)
	if f.pinned != nil {
		f.unpin()
	}
	sp := f.analyse()
	if err := s.restore(); err != nil {
		return nil, fmt.Errorf("lsq: the model can't be evaluated: %w", err)
	}
	f.u, f.g, f.lastU, f.lastLoad = nil, nil, nil, nil
	r := &Result{
		Status: s.status, Reason: s.reason, Free: f.free,
		Iterations: s.iterations, Evaluations: s.evaluations, Reweighting: f.reweighting, Restarts: f.restarts,
		Condition: sp.cond, Warnings: f.warnings,
	}
	r.ChiSquared = s.chi2
	r.DOF = n + f.priors - (len(sp.idx) - len(sp.null))

	columns := 6
	if f.set.SkipDiagnostics {
		columns = 1
	}
	var slab []float64
	if s.single { // what nobody needs any more can go
		s.ftrial, s.wres, s.block = nil, nil, nil
	} else {
		slab = make([]float64, columns*n)
	}
	take := func() []float64 {
		if s.single {
			return make([]float64, n)
		}
		v := slab[:n:n]
		slab = slab[n:]
		return v
	}
	if r.Residuals = take(); s.single {
		r.Fitted = s.f
	} else {
		r.Fitted = append([]float64(nil), s.f...)
	}
	if f.exact != nil && s.white.diagonal() {
		for i, v := range f.exact.residuals[:n] {
			r.Residuals[i] = v / s.white.w[i]
			r.Fitted[i] = s.y[i] - r.Residuals[i]
			r.RSS += r.Residuals[i] * r.Residuals[i]
		}
	} else {
		res, fit := r.Residuals[:n], s.f[:n]
		var a, b float64
		for i, y := range s.y {
			e := y - fit[i]
			res[i] = e
			a, b = b, a+e*e
		}
		r.RSS = a + b
	}
	r.ResidualSD, r.BirgeRatio, r.PValue = math.NaN(), math.NaN(), math.NaN()
	if r.DOF > 0 {
		r.ResidualSD = math.Sqrt(r.RSS / float64(r.DOF))
	}
	scale := 1.0 // variance of unit weight
	known := (p.U != nil || p.Covariance != nil || p.Reweight != nil) && !p.Relative
	switch {
	case known && r.DOF > 0:
		r.BirgeRatio = math.Sqrt(r.ChiSquared / float64(r.DOF))
		r.PValue = chiSquaredTail(r.ChiSquared, r.DOF)
	case known:
		r.warn("there are no degrees of freedom: the readings can't test the model, and chi-squared has no probability")
	case r.DOF <= 0:
		r.ScaledByResiduals = true
		scale = math.NaN()
		r.warn("the uncertainties are unknown: the readings' uncertainty was not stated and no degrees of freedom are left to find it from the residuals")
	case f.estimated():
		r.ScaledByResiduals, r.noiseFound = true, true
		r.warn("the readings' uncertainty was not stated: it was found from the residuals, so that chi-squared equals its degrees of freedom and has no probability")
	case p.Relative:
		r.ScaledByResiduals = true
		scale = r.ChiSquared / float64(r.DOF)
		r.warn("only the ratios of the readings' uncertainties were stated: their size was taken from the residuals, so that chi-squared has no probability")
	default:
		r.ScaledByResiduals = true
		scale = r.ChiSquared / float64(r.DOF)
		r.warn("the readings' uncertainty was not stated: it was taken from the residual standard deviation, so that chi-squared has no probability")
	}
	r.scale = scale
	if r.ScaledByResiduals && r.DOF > 0 && s.vanishing() {
		r.ResidualsVanish = true
		r.warn("the residuals vanish to rounding: they say nothing about the readings' uncertainty, and those of the parameters are unknown; state the uncertainty of the readings")
	}

	f.parameters(r, sp, scale)

	// what later questions need
	white := f.white
	r.white, r.factor = &white, sp.factor
	if !f.set.SkipDiagnostics {
		r.jac = s.columns()
	}
	r.problem, r.settings = p, f.set
	r.priorW = f.take(len(s.priorW))
	copy(r.priorW, s.priorW)

	// rows
	if f.set.SkipDiagnostics {
		return r, nil
	}
	r.Weights = take()
	for i := range r.Weights {
		r.Weights[i] = r.weight(i)
	}
	r.Standardised, r.Leverage, r.Studentised, r.CooksDistance = take(), take(), take(), take()
	if err := ctx.Err(); err != nil {
		return nil, fmt.Errorf("lsq: fit cancelled: %w", err)
	}
	r.influence()
	return r, nil
}

// vanishing reports residuals that are no more than the rounding of the readings:
// they say nothing about the noise.
func (s *search) vanishing() bool { return math.Sqrt(s.chi2) <= 4e-15*s.size }

// weight is 1/Σ_ii.
func (r *Result) weight(i int) float64 {
	if r.white.vars != nil {
		return 1 / (r.white.vars[i] * r.scale)
	}
	w := r.white.w[i]
	return w * w / r.scale
}

// influence computes leverage, studentised residuals and Cook's distances from
// cov(r) = Σ − J C Jᵀ (derived; for independent readings these are the usual
// ones: Cook, Technometrics 19 (1977) 15).
func (r *Result) influence() {
	n := len(r.Fitted)
	std, h, stud, cook := r.Standardised[:n], r.Leverage[:n], r.Studentised[:n], r.CooksDistance[:n]
	if r.scale == 0 || math.IsNaN(r.scale) {
		for _, v := range [][]float64{std, h, stud, cook} {
			fill(v, math.NaN())
		}
		return
	}
	if q := len(r.factor); q == len(r.jac) && q == 3 {
		j0, j1, j2 := r.jac[0][:n], r.jac[1][:n], r.jac[2][:n]
		a, b, c := r.factor[0], r.factor[1], r.factor[2]
		a0, a1, a2, b0, b1, b2, c0, c1, c2 := a[0], a[1], a[2], b[0], b[1], b[2], c[0], c[1], c[2]
		for i := range h {
			x, y, z := j0[i], j1[i], j2[i]
			p, s, t := x*a0+y*a1+z*a2, x*b0+y*b1+z*b2, x*c0+y*c1+z*c2
			h[i] = p*p + s*s + t*t
		}
	} else {
		z := stud // free until below
		for _, b := range r.factor {
			clear(z)
			for k, x := range b {
				if x != 0 {
					for i, v := range r.jac[k] {
						z[i] += v * x
					}
				}
			}
			for i, v := range z {
				h[i] += v * v
			}
		}
	}
	per := 1 / float64(len(r.factor))
	res, wts := r.Residuals[:n], r.Weights[:n]
	for i := range h {
		e := res[i] * math.Sqrt(wts[i])
		std[i] = e
		l := h[i] * wts[i] * r.scale
		if l >= 1-1e-12 {
			// the fit follows this reading whatever it is
			h[i] = math.Min(l, 1)
			stud[i], cook[i] = math.NaN(), math.NaN()
			continue
		}
		h[i] = l
		inv := 1 / (1 - l)
		t2 := e * e * inv
		stud[i] = e * math.Sqrt(inv)
		cook[i] = t2 * l * inv * per
	}
}

func fill(v []float64, x float64) {
	for i := range v {
		v[i] = x
	}
}

func (r *Result) warn(format string, a ...any) {
	if len(a) == 0 {
		r.Warnings = append(r.Warnings, errors.New(format))
		return
	}
	r.Warnings = append(r.Warnings, fmt.Errorf(format, a...))
}

// Jacobian returns ∂f_i/∂θ_j at the estimates: one column per free parameter
// (in the order of Free), each with one entry per reading. The caller owns it.
// Nil with SkipDiagnostics.
func (r *Result) Jacobian() [][]float64 {
	if r.jac == nil {
		return nil
	}
	out := make([][]float64, len(r.jac))
	for k, c := range r.jac {
		out[k] = append([]float64(nil), c...)
	}
	return out
}

// Derivatives returns what Jacobian does without a copy: it belongs to the
// result and must not be changed.
func (r *Result) Derivatives() [][]float64 { return r.jac }

// SolveCovariance sets dst = Σ⁻¹v, with Σ the covariance of the readings at
// the final weights (scaled by s² when ScaledByResiduals). v and dst have one
// entry per reading and may be the same slice.
func (r *Result) SolveCovariance(v, dst []float64) {
	copy(dst, v)
	r.white.apply(dst)
	r.white.applyT(dst)
	if r.scale != 1 {
		for i := range dst {
			dst[i] /= r.scale
		}
	}
}

// Sensitivity returns ∂θ/∂y = A⁻¹JᵀΣ⁻¹ with A = JᵀΣ⁻¹J + diag(1/u²) of the
// priors, at frozen weights and to first order (Gauss–Newton): one row per free
// parameter, each with one entry per reading. Rows of parameters held at a
// bound are zero; where parameters can't be told apart the least change is
// taken. Nil with SkipDiagnostics.
func (r *Result) Sensitivity() [][]float64 {
	if r.jac == nil {
		return nil
	}
	q, n := len(r.jac), len(r.Fitted)
	cols := make([][]float64, q)
	for k, c := range r.jac {
		cols[k] = append([]float64(nil), c...)
		r.white.apply(cols[k])
		r.white.applyT(cols[k])
	}
	out := make([][]float64, q)
	for k := range out {
		out[k] = make([]float64, n)
		for l, c := range cols {
			x := r.inv[k*q+l]
			for i, v := range c {
				out[k][i] += x * v
			}
		}
	}
	return out
}

// PriorSensitivity returns ∂θ/∂(prior value) = A⁻¹ diag(1/u²): one row per free
// parameter, one column per parameter of the problem, zero where it has no
// prior or is fixed.
func (r *Result) PriorSensitivity() [][]float64 {
	q := len(r.Free)
	out := make([][]float64, q)
	for k := range out {
		out[k] = make([]float64, len(r.Values))
		for l, j := range r.Free {
			w := r.priorW[j]
			out[k][j] = r.inv[k*q+l] * w * w
		}
	}
	return out
}

// Correlation returns the correlation of the estimates of parameters i and j;
// NaN when either is fixed or its uncertainty unknown.
func (r *Result) Correlation(i, j int) float64 {
	if r.U[i] == 0 || r.U[j] == 0 {
		return math.NaN()
	}
	return r.Covariance.At(i, j) / (r.U[i] * r.U[j])
}

// parameters fills in the estimates, their covariance times scale, and what is
// to be said about them.
func (f *fitter) parameters(r *Result, sp *spectrum, scale float64) {
	s, p := &f.search, f.p
	np, q := len(p.Parameters), s.q
	r.Values, r.U = f.take(np), f.take(np)
	copy(r.Values, s.theta)
	r.Covariance = mat.NewSymDense(np, f.take(np*np))
	var involved []bool
	if len(sp.null) > 0 {
		r.Confounded, involved = f.confounded(sp)
		r.Status = Singular
		r.Reason = "some parameters can't be told apart by these readings"
		for _, c := range r.Confounded {
			r.Warnings = append(r.Warnings, c.within("", "; "+c.whose+" unknown"))
		}
	}
	r.inv = f.take(q * q)
	for _, b := range sp.factor {
		for i, x := range b {
			for j, y := range b {
				r.inv[i*q+j] += x * y
			}
		}
	}
	for k, j := range f.free {
		held := s.held != nil && s.held[k]
		if held {
			r.AtBound = append(r.AtBound, j)
			at := s.theta[j]
			r.Warnings = append(r.Warnings, p.remark([]int{j}, func(name func(j int) string, amount func(j int, x float64) string) string {
				return fmt.Sprintf("%s is held at its bound %s: its uncertainty is unknown, and those of the others hold for that value", name(j), amount(j, at))
			}))
		}
		for l := 0; l <= k; l++ {
			c := r.inv[k*q+l] * scale
			if held || (s.held != nil && s.held[l]) || (involved != nil && (involved[k] || involved[l])) {
				c = math.NaN()
			}
			r.Covariance.SetSym(j, f.free[l], c)
		}
		r.U[j] = math.Sqrt(r.Covariance.At(j, j))
	}
	if len(sp.null) == 0 && sp.cond > 1e8 {
		r.warn("the problem is badly conditioned (%.2g): small changes of the readings change the parameters much", sp.cond)
	}
	if r.Status != Converged && r.Status != Singular {
		r.warn("the fit did not converge: %s", r.Reason)
		near := &spectrum{idx: sp.idx, norm: sp.norm, s: sp.s, v: sp.v, null: sp.faint()}
		remarks, _ := f.confounded(near)
		for _, c := range remarks {
			r.Warnings = append(r.Warnings, c.within(fmt.Sprintf("where the search ended, to within %.0g of the readings' response, ", faintLimit), ""))
		}
	}

}
