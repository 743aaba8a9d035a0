package lsq

import "math"

// Small dense triangles, stored by columns with leading dimension ld: element
// (i, j) at j*ld+i.

// solveUpper sets x = R⁻¹ x for the q×q upper triangle r. It reports false
// when a diagonal element is zero or the result is not finite.
func solveUpper(q, ld int, r, x []float64) bool {
	for k := q - 1; k >= 0; k-- {
		d := r[k*ld+k]
		if d == 0 {
			return false
		}
		v := x[k] / d
		x[k] = v
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return false
		}
		col := r[k*ld : k*ld+k]
		for i, c := range col {
			x[i] -= c * v
		}
	}
	return true
}

// solveUpperT sets x = R⁻ᵀ x.
func solveUpperT(q, ld int, r, x []float64) bool {
	for k := 0; k < q; k++ {
		col := r[k*ld : k*ld+k+1]
		s := x[k]
		for i := 0; i < k; i++ {
			s -= col[i] * x[i]
		}
		if col[k] == 0 {
			return false
		}
		x[k] = s / col[k]
	}
	return true
}

// mulUpper sets y = R x.
func mulUpper(q, ld int, r, x, y []float64) {
	for i := 0; i < q; i++ {
		y[i] = 0
	}
	for k := 0; k < q; k++ {
		v := x[k]
		col := r[k*ld : k*ld+k+1]
		for i, c := range col {
			y[i] += c * v
		}
	}
}

// mulUpperT sets y = Rᵀ x.
func mulUpperT(q, ld int, r, x, y []float64) {
	for k := 0; k < q; k++ {
		col := r[k*ld : k*ld+k+1]
		s := 0.0
		for i, c := range col {
			s += c * x[i]
		}
		y[k] = s
	}
}

// columnNorm is the length of column k of the upper triangle.
func columnNorm(k, ld int, r []float64) float64 {
	s := 0.0
	for _, c := range r[k*ld : k*ld+k+1] {
		s += c * c
	}
	if s == 0 || math.IsInf(s, 0) { // under- or overflow of the squares
		s = 0
		for _, c := range r[k*ld : k*ld+k+1] {
			s = math.Hypot(s, c)
		}
		return s
	}
	return math.Sqrt(s)
}

// triangulate reduces the full m×k matrix a (columns of leading dimension ld)
// with right-hand side b to upper triangular form by Householder reflections,
// in place. Elements below the diagonal are left undefined.
func triangulate(m, k, ld int, a, b []float64) {
	for j := 0; j < k && j < m; j++ {
		x := a[j*ld : j*ld+m]
		nn := 0.0
		for _, v := range x[j+1:] {
			nn += v * v
		}
		if nn == 0 {
			continue
		}
		alpha := math.Sqrt(x[j]*x[j] + nn)
		if x[j] > 0 {
			alpha = -alpha
		}
		v0 := x[j] - alpha
		g := -1 / (alpha * v0)
		apply := func(c []float64) {
			s := v0 * c[j]
			for i := j + 1; i < m; i++ {
				s += x[i] * c[i]
			}
			s *= g
			c[j] -= s * v0
			for i := j + 1; i < m; i++ {
				c[i] -= s * x[i]
			}
		}
		for l := j + 1; l < k; l++ {
			apply(a[l*ld : l*ld+m])
		}
		apply(b[:m])
		x[j] = alpha
	}
}

// jacobiSVD finds the singular values s and right singular vectors v (column k
// at v[k*q:]) of the q×q matrix a, given by columns and overwritten, by
// one-sided rotations (Hestenes; Golub, Van Loan, 4th ed., section 8.6.3): small
// singular values keep their relative accuracy. Values are in no order.
func jacobiSVD(q int, a, s, v []float64) {
	clear(v[:q*q])
	for k := 0; k < q; k++ {
		v[k*q+k] = 1
	}
	for sweep := 0; sweep < 40; sweep++ {
		turned := false
		for i := 0; i < q-1; i++ {
			ci := a[i*q : i*q+q]
			for j := i + 1; j < q; j++ {
				cj := a[j*q : j*q+q]
				var aa, bb, ab float64
				for k, x := range ci {
					aa += x * x
					bb += cj[k] * cj[k]
					ab += x * cj[k]
				}
				if math.Abs(ab) <= 1e-15*math.Sqrt(aa*bb) || ab == 0 {
					continue
				}
				turned = true
				z := (bb - aa) / (2 * ab)
				t := 1 / (math.Abs(z) + math.Sqrt(1+z*z))
				if z < 0 {
					t = -t
				}
				c := 1 / math.Sqrt(1+t*t)
				d := c * t
				for k, x := range ci {
					ci[k], cj[k] = c*x-d*cj[k], d*x+c*cj[k]
				}
				vi, vj := v[i*q:i*q+q], v[j*q:j*q+q]
				for k, x := range vi {
					vi[k], vj[k] = c*x-d*vj[k], d*x+c*vj[k]
				}
			}
		}
		if !turned {
			break
		}
	}
	for k := 0; k < q; k++ {
		s[k] = 0
		for _, x := range a[k*q : k*q+q] {
			s[k] += x * x
		}
		s[k] = math.Sqrt(s[k])
	}
}

// trust finds steps of a trust-region search.
type trust struct {
	q          int
	s, x, w, b []float64 // q×q triangle of the damped problem and vectors
	lambda     float64   // damping of the last step
}

func (t *trust) init(q int) {
	t.q = q
	slab := make([]float64, q*q+3*q)
	t.s, slab = slab[:q*q], slab[q*q:]
	t.x, t.w, t.b = slab[:q], slab[q:2*q], slab[2*q:]
}

// damped solves min ‖b − Rx‖² + λ‖Dx‖² by rotating the rows of √λ·D into the
// triangle (Moré, Numerical Analysis, Springer LNM 630 (1978) 105, section 3).
func (t *trust) damped(q, ld int, r, b, d []float64, lambda float64) bool {
	for k := 0; k < q; k++ {
		copy(t.s[k*q:k*q+k+1], r[k*ld:k*ld+k+1])
	}
	copy(t.x, b[:q])
	root := math.Sqrt(lambda)
	row := t.w
	for l := 0; l < q; l++ {
		clear(row[:q])
		row[l] = root * d[l]
		rb := 0.0
		for k := l; k < q; k++ {
			if row[k] == 0 {
				continue
			}
			skk := t.s[k*q+k]
			h := math.Hypot(skk, row[k])
			c, s := skk/h, row[k]/h
			t.s[k*q+k] = h
			for j := k + 1; j < q; j++ {
				sj := t.s[j*q+k]
				t.s[j*q+k] = c*sj + s*row[j]
				row[j] = c*row[j] - s*sj
			}
			t.x[k], rb = c*t.x[k]+s*rb, c*rb-s*t.x[k]
		}
	}
	return solveUpper(q, q, t.s, t.x[:q])
}

// step sets out to the minimiser of ‖b − R x‖ with ‖D x‖ ≤ delta to within a
// tenth of delta, by Newton's method on the secular equation with safeguards
// (Moré 1978, section 5). It reports whether out is the full Gauss–Newton step.
func (t *trust) step(q, ld int, r, b, d []float64, delta float64, out []float64) (gauss bool) {
	x := t.x[:q]
	copy(x, b[:q])
	full := solveUpper(q, ld, r, x)
	norm := scaledNorm(d, x)
	if full && norm <= 1.1*delta {
		t.lambda = 0
		copy(out, x)
		return true
	}
	full = full && !math.IsInf(norm, 0) && !math.IsNaN(norm)
	phi := norm - delta
	lower := 0.0
	w := t.w[:q]
	if full {
		for k := range w {
			w[k] = d[k] * (d[k] * x[k] / norm)
		}
		solveUpperT(q, ld, r, w)
		if z := dot(w, w); z > 0 && !math.IsInf(z, 0) {
			lower = phi / delta / z
		}
	}
	mulUpperT(q, ld, r, b, w)
	g := 0.0
	for k, v := range w {
		g = math.Hypot(g, v/d[k])
	}
	upper := g / delta
	if upper == 0 {
		clear(out[:q])
		return false
	}
	lambda := math.Min(math.Max(t.lambda, lower), upper)
	if lambda == 0 {
		lambda = 1e-3 * upper
		if full {
			lambda = math.Min(g/norm, upper)
		}
	}
	for i := 0; ; i++ {
		if lambda == 0 {
			lambda = math.Max(math.SmallestNonzeroFloat64, 1e-3*upper)
		}
		if !t.damped(q, ld, r, b, d, lambda) {
			lambda = math.Max(lambda*10, 1e-3*upper)
			if i < 20 {
				continue
			}
			clear(out[:q])
			return false
		}
		norm = scaledNorm(d, x)
		before := phi
		phi = norm - delta
		if math.Abs(phi) <= 0.1*delta || (lower == 0 && phi <= before && before < 0) || i >= 10 {
			break
		}
		for k := range w {
			w[k] = d[k] * (d[k] * x[k] / norm)
		}
		solveUpperT(q, q, t.s, w)
		change := phi / delta / dot(w, w)
		if phi > 0 {
			lower = math.Max(lower, lambda)
		} else if phi < 0 {
			upper = math.Min(upper, lambda)
		}
		lambda = math.Max(lower, lambda+change)
	}
	t.lambda = lambda
	copy(out, x)
	return false
}

func scaledNorm(d, x []float64) float64 {
	s := 0.0
	for k, v := range x {
		v *= d[k]
		s += v * v
	}
	return math.Sqrt(s)
}

func dot(a, b []float64) float64 {
	s := 0.0
	for i, v := range a {
		s += v * b[i]
	}
	return s
}
