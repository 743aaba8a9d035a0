package lsq

import (
	"math"
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
	stride int       // rows of a block, a multiple of four, at most foldRows
	dots   []float64 // scratch, q+1
	buf    []float64 // q+1 columns of stride rows
}

func (t *fold) init(q, n int) {
	t.q = q
	t.stride = blockRows(n)
	t.r = make([]float64, (q+1)*(q+1))
	t.buf = make([]float64, (q+1)*t.stride)
	t.dots = make([]float64, q+1)
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

// blockRows is the number of rows of a block for n rows in all.
func blockRows(n int) int { return (min(n, foldRows) + 3) &^ 3 }

// finite reports that no element of the triangle is NaN or infinite; a number
// in the rows that is not finite spoils it.
func (t *fold) finite() bool { return notFinite(t.r) < 0 && finite(t.rest) }

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

// column is column j of the block, padded to a multiple of four rows.
func (t *fold) column(j, m int) []float64 {
	return t.buf[j*t.stride : j*t.stride+(m+3)&^3]
}

// block folds the first m rows of buf. Each pass applies one reflection to the
// remaining columns and gathers the dot products of the next.
func (t *fold) block(m int) {
	q := t.q
	for j := 0; j <= q && m&3 != 0; j++ {
		clear(t.column(j, m)[m:])
	}
	if q == 0 {
		var s lanes
		c := t.column(0, m)
		dotLanes(c, c, &s)
		t.rest += s.total(0)
		return
	}
	x := t.column(0, m)
	dots := t.dots[:0]
	for j := 0; j <= q; j++ {
		var s lanes
		dotLanes(x, t.column(j, m), &s)
		dots = append(dots, s.total(0))
	}
	for k := 0; k < q; k++ {
		v0, g := t.reflect(k, dots[0])
		x := t.column(k, m)
		// factors of column k to subtract from columns k+1 … q
		for j := k + 1; j <= q; j++ {
			dots[j-k] = t.pull(k, j, v0, g, dots[j-k])
		}
		var s lanes
		next := t.column(k+1, m)
		switch q - k {
		case 1:
			fuse1(x, next, dots[1], &s)
			dots[0] = s.total(0)
		case 2:
			fuse2(x, next, t.column(k+2, m), dots[1], dots[2], &s)
			dots[0], dots[1] = s.total(0), s.total(1)
		default:
			fuse3(x, next, t.column(k+2, m), t.column(k+3, m), dots[1], dots[2], dots[3], &s)
			dots[0], dots[1], dots[2] = s.total(0), s.total(1), s.total(2)
			for j := k + 4; j <= q; j++ {
				s = lanes{}
				pair(x, next, t.column(j, m), dots[j-k], &s)
				dots[j-k-1] = s.total(0)
			}
		}
	}
	t.rest += dots[0]
}

// reflect prepares the reflection of column k, I − 2vvᵀ/vᵀv with v = (R_kk − α,
// x) and α = −sign(R_kk)·‖(R_kk, x)‖, for the squared norm nn of its block x. It
// returns v0 = R_kk − α and 2/vᵀv = −1/(α·v0) (Golub, Van Loan, Matrix
// Computations, 4th ed., section 5.1).
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

// weighted3 is weighting and block for three columns in four passes.
func (t *fold) weighted3(w, y, f, j0, j1, j2 []float64) {
	m := len(w)
	whole := m &^ 3
	a, b, c, r := t.column(0, m), t.column(1, m), t.column(2, m), t.column(3, m)
	var s lanes
	weigh3(whole, w, y, f, j0, j1, j2, t.buf, t.stride, &s)
	if whole < m {
		for i := whole; i < len(a); i++ {
			a[i], b[i], c[i], r[i] = 0, 0, 0, 0
			if i < m {
				a[i], b[i], c[i], r[i] = w[i]*j0[i], w[i]*j1[i], w[i]*j2[i], w[i]*(y[i]-f[i])
			}
			l := i & 3
			s[l] += a[i] * a[i]
			s[4+l] += a[i] * b[i]
			s[8+l] += a[i] * c[i]
			s[12+l] += a[i] * r[i]
		}
	}
	v0, g := t.reflect(0, s.total(0))
	s1, s2, s3 := t.pull(0, 1, v0, g, s.total(1)), t.pull(0, 2, v0, g, s.total(2)), t.pull(0, 3, v0, g, s.total(3))
	s = lanes{}
	fuse3(a, b, c, r, s1, s2, s3, &s)
	v0, g = t.reflect(1, s.total(0))
	s1, s2 = t.pull(1, 2, v0, g, s.total(1)), t.pull(1, 3, v0, g, s.total(2))
	s = lanes{}
	fuse2(b, c, r, s1, s2, &s)
	v0, g = t.reflect(2, s.total(0))
	s1 = t.pull(2, 3, v0, g, s.total(1))
	s = lanes{}
	fuse1(c, r, s1, &s)
	t.rest += s.total(0)
}
