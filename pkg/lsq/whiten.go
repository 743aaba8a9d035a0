package lsq

import (
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"
)

// denseLimit bounds the number of overlapping effects: those left after as many
// disjoint ones as possible are set apart. Cost is O(rows·k + k³).
const denseLimit = 400

// denseFloats bounds the memory that those effects take.
const denseFloats = 40_000_000

// whitener applies W with WᵀW = Σ⁻¹ to columns of rows.
//
// Independent readings: W = diag(1/u). With effects, Σ = D(I + HHᵀ)D, D =
// diag(u), H = D⁻¹G. For effects of which no two share a row, HᵀH is diagonal
// and (I + hhᵀ)^(−1/2) = I − c·hhᵀ, c = (1 − 1/√(1+s))/s, s = hᵀh, effect by
// effect (derived: hhᵀ has the eigenvector h with eigenvalue s). The other k
// effects are whitened by the first, H₂' = W₁H₂, and then handled together
// through the eigenvectors of their small Gram matrix H₂'ᵀH₂' = V diag(s) Vᵀ:
// (I + H₂'H₂'ᵀ)^(−1/2) = I − QQᵀ, Q = H₂'V diag(√c). With a full covariance
// Σ = UᵀU, W = U⁻ᵀ.
type whitener struct {
	n    int
	w    []float64 // 1/u; nil with a full covariance
	full *mat.TriDense
	vars []float64 // Σ_ii

	// effects
	disjoint []int32 // column of the disjoint effect of each row, −1 none
	load     []float64
	coef     []float64 // c per disjoint effect
	sum      []float64 // scratch per disjoint effect
	dense    [][]float64
	t        []float64 // scratch per dense column
	plan     *plan
}

// plan is what the pattern of the effects alone decides: it survives reweighting.
type plan struct {
	slot []int // of each column: −1−k for dense column k, or k ≥ 0 among the disjoint
	nd   int   // disjoint
	nk   int   // dense
}

func (w *whitener) diagonal() bool { return w.full == nil && w.plan == nil }

func newPlan(n int, g *Effects) (*plan, error) {
	count := make([]int, g.Columns)
	for _, c := range g.Column {
		count[c]++
	}
	// rows of each column
	at := make([]int, g.Columns+1)
	for c, k := range count {
		at[c+1] = at[c] + k
	}
	rows := make([]int32, len(g.Column))
	fill := append([]int(nil), at[:g.Columns]...)
	for i := 0; i < n; i++ {
		for _, c := range g.Column[g.Start[i]:g.Start[i+1]] {
			rows[fill[c]] = int32(i)
			fill[c]++
		}
	}
	order := make([]int, g.Columns)
	for c := range order {
		order[c] = c
	}
	// effects of few rows first: the most effects then go the cheap way
	sort.SliceStable(order, func(a, b int) bool { return count[order[a]] < count[order[b]] })
	p := &plan{slot: make([]int, g.Columns)}
	taken := make([]bool, n)
	for _, c := range order {
		free := true
		for _, i := range rows[at[c]:at[c+1]] {
			if taken[i] {
				free = false
				break
			}
		}
		if free {
			p.slot[c] = p.nd
			p.nd++
			for _, i := range rows[at[c]:at[c+1]] {
				taken[i] = true
			}
		} else {
			p.slot[c] = -1 - p.nk
			p.nk++
		}
	}
	if limit := min(denseLimit, denseFloats/n); p.nk > limit {
		return nil, fmt.Errorf("lsq: %d effects overlap others in the same rows; at most %d can be handled at this number of rows; give the covariance in full, or merge effects that always occur together", p.nk, limit)
	}
	return p, nil
}

// setDiagonal prepares W for independent readings.
func (w *whitener) setDiagonal(u []float64) {
	w.n = len(u)
	if w.w == nil {
		w.w = make([]float64, w.n)
	}
	for i, v := range u {
		w.w[i] = 1 / v
	}
}

func (w *whitener) setUnit(n int) {
	w.n = n
	w.w = make([]float64, n)
	for i := range w.w {
		w.w[i] = 1
	}
}

// setEffects prepares W for Σ = diag(u²) + GGᵀ.
func (w *whitener) setEffects(u []float64, g *Effects) error {
	w.setDiagonal(u)
	n := w.n
	if w.plan == nil {
		p, err := newPlan(n, g)
		if err != nil {
			return err
		}
		w.plan = p
		w.disjoint = make([]int32, n)
		w.load = make([]float64, n)
		w.coef = make([]float64, p.nd)
		w.sum = make([]float64, p.nd)
		w.t = make([]float64, p.nk)
		w.vars = make([]float64, n)
		w.dense = make([][]float64, p.nk)
		slab := make([]float64, p.nk*n)
		for k := range w.dense {
			w.dense[k] = slab[k*n : k*n+n]
		}
	}
	p := w.plan
	clear(w.sum)
	for k := range w.dense {
		clear(w.dense[k])
	}
	for i := 0; i < n; i++ {
		w.disjoint[i], w.load[i] = -1, 0
		v := u[i] * u[i]
		for k := g.Start[i]; k < g.Start[i+1]; k++ {
			v += g.Load[k] * g.Load[k]
			h := g.Load[k] * w.w[i]
			if s := p.slot[g.Column[k]]; s >= 0 {
				w.disjoint[i], w.load[i] = int32(s), h
				w.sum[s] += h * h
			} else {
				w.dense[-1-s][i] = h
			}
		}
		w.vars[i] = v
	}
	for s, q := range w.sum {
		w.coef[s] = rankOne(q)
	}
	if p.nk == 0 {
		return nil
	}
	for _, h := range w.dense {
		w.grouped(h)
	}
	gram := mat.NewSymDense(p.nk, nil)
	for a := range w.dense {
		for b := a; b < p.nk; b++ {
			gram.SetSym(a, b, floats.Dot(w.dense[a], w.dense[b]))
		}
	}
	var eig mat.EigenSym
	if !eig.Factorize(gram, true) {
		return fmt.Errorf("lsq: the overlapping effects have no eigenvalues; their loads are too large or not finite")
	}
	var v mat.Dense
	eig.VectorsTo(&v)
	vals := eig.Values(nil)
	row := make([]float64, p.nk)
	for i := 0; i < n; i++ {
		for k := range row {
			row[k] = w.dense[k][i]
		}
		for k := range row {
			s := 0.0
			for l, x := range row {
				s += x * v.At(l, k)
			}
			w.dense[k][i] = s * math.Sqrt(rankOne(math.Max(vals[k], 0)))
		}
	}
	return nil
}

// rankOne is c with (I + hhᵀ)^(−1/2) = I − c·hhᵀ for hᵀh = s, without cancellation.
func rankOne(s float64) float64 {
	root := math.Sqrt(1 + s)
	return 1 / (root * (1 + root)) // (1 − 1/√(1+s))/s
}

// setFull prepares W for a full covariance.
func (w *whitener) setFull(c *mat.SymDense) error {
	w.n = c.SymmetricDim()
	var chol mat.Cholesky
	if !chol.Factorize(c) {
		detail := ""
		if w.n <= 500 {
			var eig mat.EigenSym
			if eig.Factorize(c, false) {
				detail = fmt.Sprintf(": its smallest eigenvalue is %.3g of a largest %.3g", eig.Values(nil)[0], eig.Values(nil)[w.n-1])
			}
		}
		return fmt.Errorf("lsq: the covariance of the readings is not positive definite%s", detail)
	}
	w.full = mat.NewTriDense(w.n, mat.Upper, nil)
	chol.UTo(w.full)
	w.vars = make([]float64, w.n)
	for i := range w.vars {
		w.vars[i] = c.At(i, i)
	}
	return nil
}

// grouped multiplies v by the symmetric factor of the disjoint effects.
func (w *whitener) grouped(v []float64) {
	if w.plan.nd == 0 {
		return
	}
	clear(w.sum)
	for i, s := range w.disjoint {
		if s >= 0 {
			w.sum[s] += w.load[i] * v[i]
		}
	}
	for s, c := range w.coef {
		w.sum[s] *= c
	}
	for i, s := range w.disjoint {
		if s >= 0 {
			v[i] -= w.load[i] * w.sum[s]
		}
	}
}

// overlapping multiplies v by the symmetric factor of the other effects.
func (w *whitener) overlapping(v []float64) {
	for k, h := range w.dense {
		w.t[k] = floats.Dot(h, v)
	}
	for k, h := range w.dense {
		floats.AddScaled(v, -w.t[k], h)
	}
}

// apply sets v = W v.
func (w *whitener) apply(v []float64) {
	if w.full != nil {
		blas64.Trsv(blas.Trans, w.full.RawTriangular(), blas64.Vector{N: w.n, Inc: 1, Data: v})
		return
	}
	for i, x := range w.w {
		v[i] *= x
	}
	if w.plan != nil {
		w.grouped(v)
		w.overlapping(v)
	}
}

// applyT sets v = Wᵀ v.
func (w *whitener) applyT(v []float64) {
	if w.full != nil {
		blas64.Trsv(blas.NoTrans, w.full.RawTriangular(), blas64.Vector{N: w.n, Inc: 1, Data: v})
		return
	}
	if w.plan != nil {
		w.overlapping(v)
		w.grouped(v)
	}
	for i, x := range w.w {
		v[i] *= x
	}
}

// logDeterminant is ln det Σ, for independent readings with or without effects.
// The factor of a disjoint effect has the eigenvalue 1/√(1+s) = 1 − cs; so has
// that of each overlapping one, 1 − qᵀq (see whitener).
func (w *whitener) logDeterminant() float64 {
	sum := 0.0
	for _, x := range w.w {
		sum -= 2 * math.Log(x)
	}
	if w.plan == nil {
		return sum
	}
	for _, c := range w.coef {
		sum += 2 * math.Log((math.Sqrt(1+4/c)-1)/2) // c = 1/(√(1+s)(1 + √(1+s)))
	}
	for _, q := range w.dense {
		sum -= 2 * math.Log1p(-floats.Dot(q, q))
	}
	return sum
}

// variance is Σ_ii.
func (w *whitener) variance(i int) float64 {
	if w.vars != nil {
		return w.vars[i]
	}
	return 1 / (w.w[i] * w.w[i])
}
