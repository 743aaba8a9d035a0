package lsq

import (
	"math"

	"gonum.org/v1/gonum/floats"
)

// foldRows is the number of rows folded at a time: a block of a few columns
// then stays in the first-level cache.
const foldRows = 256

// fold reduces the tall matrix [J | r] to the triangle [R b] of its QR
// decomposition by Householder reflections, block after block: each block of
// rows is stacked below the triangle so far and reflected into it (sequential
// tall-and-skinny QR, Demmel, Grigori, Hoemmen, Langou, SIAM J. Sci. Comput. 34
// (2012) A206, section 2). Q is never formed. The memory is O(q²).
type fold struct {
	q      int       // columns of J
	r      []float64 // (q+1)×(q+1) by columns, upper triangle; column q is b
	rest   float64   // squared length of the part of r outside the span of J
	stride int       // rows of a block, at most foldRows
	buf    []float64 // q+1 columns of stride rows
}

func (t *fold) init(q, n int) {
	t.q = q
	t.stride = min(n, foldRows)
	t.r = make([]float64, (q+1)*(q+1))
	t.buf = make([]float64, (q+1)*t.stride)
}

func (t *fold) reset() {
	clear(t.r)
	t.rest = 0
}

// diagonal stacks one row that has only a diagonal element d and the right-hand
// side b, before any block: how priors enter.
func (t *fold) diagonal(k int, d, b float64) {
	ld := t.q + 1
	t.r[k*ld+k] = d
	t.r[t.q*ld+k] = b
}

// chi2 is the squared length of the whole right-hand side.
func (t *fold) chi2() float64 {
	b := t.r[t.q*(t.q+1):]
	s := t.rest
	for _, v := range b[:t.q] {
		s += v * v
	}
	return s
}

// weighted folds all rows of [w·jac | w·(y−f)].
func (t *fold) weighted(w, y, f []float64, jac [][]float64) {
	n := len(y)
	for lo := 0; lo < n; lo += t.stride {
		m := min(t.stride, n-lo)
		if t.q == 3 {
			t.weighted3(w[lo:lo+m], y[lo:lo+m], f[lo:lo+m], jac[0][lo:lo+m], jac[1][lo:lo+m], jac[2][lo:lo+m])
			continue
		}
		wb := w[lo : lo+m]
		for j := 0; j < t.q; j++ {
			src, dst := jac[j][lo:lo+m], t.buf[j*t.stride:j*t.stride+m]
			for i, v := range wb {
				dst[i] = v * src[i]
			}
		}
		yb, fb, dst := y[lo:lo+m], f[lo:lo+m], t.buf[t.q*t.stride:t.q*t.stride+m]
		for i, v := range wb {
			dst[i] = v * (yb[i] - fb[i])
		}
		t.block(m)
	}
}

// columns folds all rows of [cols | rhs].
func (t *fold) columns(cols [][]float64, rhs []float64) {
	n := len(rhs)
	for lo := 0; lo < n; lo += t.stride {
		m := min(t.stride, n-lo)
		for j := 0; j < t.q; j++ {
			copy(t.buf[j*t.stride:j*t.stride+m], cols[j][lo:lo+m])
		}
		copy(t.buf[t.q*t.stride:t.q*t.stride+m], rhs[lo:lo+m])
		t.block(m)
	}
}

// block folds the first m rows of buf. A reflection I − 2vvᵀ/vᵀv with
// v = (R_kk − α, x), α = −sign(R_kk)·‖(R_kk, x)‖, has vᵀv = −2α(R_kk − α)
// (Golub, Van Loan, Matrix Computations, 4th ed., section 5.1).
func (t *fold) block(m int) {
	q, ld := t.q, t.q+1
	for k := 0; k < q; k++ {
		x := t.buf[k*t.stride : k*t.stride+m]
		nn := floats.Dot(x, x)
		if nn == 0 {
			continue
		}
		rkk := t.r[k*ld+k]
		alpha := math.Sqrt(rkk*rkk + nn)
		if rkk > 0 {
			alpha = -alpha
		}
		v0 := rkk - alpha
		t.r[k*ld+k] = alpha
		g := -1 / (alpha * v0)
		for j := k + 1; j <= q; j++ {
			c := t.buf[j*t.stride : j*t.stride+m]
			s := (floats.Dot(x, c) + v0*t.r[j*ld+k]) * g
			t.r[j*ld+k] -= s * v0
			floats.AddScaled(c, -s, x)
		}
	}
	c := t.buf[q*t.stride : q*t.stride+m]
	t.rest += floats.Dot(c, c)
}

// reflect prepares the reflection of column k for the squared norm nn of its
// block and returns v0 and −2/vᵀv.
func (t *fold) reflect(k int, nn float64) (v0, g float64) {
	if nn == 0 {
		return 0, 0
	}
	i := k*(t.q+1) + k
	rkk := t.r[i]
	alpha := math.Sqrt(rkk*rkk + nn)
	if rkk > 0 {
		alpha = -alpha
	}
	t.r[i] = alpha
	v0 = rkk - alpha
	return v0, -1 / (alpha * v0)
}

// pull applies the reflection of column k to element j of its row of R, where d
// is the dot product of the two block columns; it returns the multiple of
// column k to be subtracted from column j of the block.
func (t *fold) pull(k, j int, v0, g, d float64) float64 {
	i := j*(t.q+1) + k
	s := (d + v0*t.r[i]) * g
	t.r[i] -= s * v0
	return s
}

// weighted3 is weighting and block for three columns with the loops fused:
// each pass applies one reflection and gathers the dot products of the next.
func (t *fold) weighted3(w, y, f, j0, j1, j2 []float64) {
	m := len(w)
	y, f, j0, j1, j2 = y[:m], f[:m], j0[:m], j1[:m], j2[:m]
	a := t.buf[0*t.stride : 0*t.stride+m]
	b := t.buf[1*t.stride : 1*t.stride+m]
	c := t.buf[2*t.stride : 2*t.stride+m]
	r := t.buf[3*t.stride : 3*t.stride+m]
	// two rows at a time, each with its own sums: the additions then overlap
	var nn, d1, d2, d3, ee, e1, e2, e3 float64
	i := 0
	for ; i+1 < m; i += 2 {
		wi := w[i]
		ai, bi, ci, ri := wi*j0[i], wi*j1[i], wi*j2[i], wi*(y[i]-f[i])
		a[i], b[i], c[i], r[i] = ai, bi, ci, ri
		nn += ai * ai
		d1 += ai * bi
		d2 += ai * ci
		d3 += ai * ri
		k := i + 1
		wi = w[k]
		ai, bi, ci, ri = wi*j0[k], wi*j1[k], wi*j2[k], wi*(y[k]-f[k])
		a[k], b[k], c[k], r[k] = ai, bi, ci, ri
		ee += ai * ai
		e1 += ai * bi
		e2 += ai * ci
		e3 += ai * ri
	}
	if i < m {
		wi := w[i]
		ai, bi, ci, ri := wi*j0[i], wi*j1[i], wi*j2[i], wi*(y[i]-f[i])
		a[i], b[i], c[i], r[i] = ai, bi, ci, ri
		nn += ai * ai
		d1 += ai * bi
		d2 += ai * ci
		d3 += ai * ri
	}
	v0, g := t.reflect(0, nn+ee)
	s1, s2, s3 := t.pull(0, 1, v0, g, d1+e1), t.pull(0, 2, v0, g, d2+e2), t.pull(0, 3, v0, g, d3+e3)
	nn, d1, d2, ee, e1, e2 = 0, 0, 0, 0, 0, 0
	for i = 0; i+1 < m; i += 2 {
		ai := a[i]
		bi := b[i] - s1*ai
		ci := c[i] - s2*ai
		ri := r[i] - s3*ai
		b[i], c[i], r[i] = bi, ci, ri
		nn += bi * bi
		d1 += bi * ci
		d2 += bi * ri
		k := i + 1
		ai = a[k]
		bi = b[k] - s1*ai
		ci = c[k] - s2*ai
		ri = r[k] - s3*ai
		b[k], c[k], r[k] = bi, ci, ri
		ee += bi * bi
		e1 += bi * ci
		e2 += bi * ri
	}
	if i < m {
		ai := a[i]
		bi := b[i] - s1*ai
		ci := c[i] - s2*ai
		ri := r[i] - s3*ai
		b[i], c[i], r[i] = bi, ci, ri
		nn += bi * bi
		d1 += bi * ci
		d2 += bi * ri
	}
	v0, g = t.reflect(1, nn+ee)
	s1, s2 = t.pull(1, 2, v0, g, d1+e1), t.pull(1, 3, v0, g, d2+e2)
	nn, d1, ee, e1 = 0, 0, 0, 0
	for i = 0; i+1 < m; i += 2 {
		bi := b[i]
		ci := c[i] - s1*bi
		ri := r[i] - s2*bi
		c[i], r[i] = ci, ri
		nn += ci * ci
		d1 += ci * ri
		k := i + 1
		bi = b[k]
		ci = c[k] - s1*bi
		ri = r[k] - s2*bi
		c[k], r[k] = ci, ri
		ee += ci * ci
		e1 += ci * ri
	}
	if i < m {
		bi := b[i]
		ci := c[i] - s1*bi
		ri := r[i] - s2*bi
		c[i], r[i] = ci, ri
		nn += ci * ci
		d1 += ci * ri
	}
	v0, g = t.reflect(2, nn+ee)
	s1 = t.pull(2, 3, v0, g, d1+e1)
	nn, ee, e1, e2 = 0, 0, 0, 0
	for i = 0; i+3 < m; i += 4 {
		r0, r1, r2, r3 := r[i]-s1*c[i], r[i+1]-s1*c[i+1], r[i+2]-s1*c[i+2], r[i+3]-s1*c[i+3]
		nn += r0 * r0
		ee += r1 * r1
		e1 += r2 * r2
		e2 += r3 * r3
	}
	for ; i < m; i++ {
		r0 := r[i] - s1*c[i]
		nn += r0 * r0
	}
	t.rest += nn + ee + e1 + e2
}
