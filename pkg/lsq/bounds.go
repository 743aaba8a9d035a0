package lsq

import "math"

// subspace holds the triangle of the parameters that are not held at bounds.
type subspace struct {
	q     int
	a, b  []float64
	d, x  []float64
	idx   []int
	moved []bool
	tr    trust
}

func newSubspace(q int) *subspace {
	return &subspace{q: q, a: make([]float64, q*q), b: make([]float64, q), d: make([]float64, q), x: make([]float64, q), idx: make([]int, 0, q), moved: make([]bool, q)}
}

// bounded finds a step within the bounds. Parameters at a bound that the
// gradient pushes outwards are held; the step of the others is found in the
// triangle of their columns; parameters that would cross a bound are put on it
// and the others are found again (an active-set method; Björck, Numerical
// Methods for Least Squares Problems, section 5.2).
func (s *search) bounded(r []float64, ld int, b []float64, delta float64) (gauss bool) {
	q, u := s.q, s.sub
	fixed := s.held
	clear(s.x)
	for k := 0; k < q; k++ {
		g := 0.0
		for i, c := range r[k*ld : k*ld+k+1] {
			g += c * b[i]
		}
		t := s.theta[s.free[k]]
		fixed[k] = (t <= s.lo[k] && g <= 0) || (t >= s.hi[k] && g >= 0)
	}
	moved := u.moved // put on a bound by this step
	clear(moved)
	first := true
	for {
		u.idx = u.idx[:0]
		copy(u.b, b[:q])
		for k := 0; k < q; k++ {
			if moved[k] {
				for i, c := range r[k*ld : k*ld+k+1] {
					u.b[i] -= c * s.x[k]
				}
			} else if !fixed[k] {
				u.idx = append(u.idx, k)
			}
		}
		m := len(u.idx)
		if m == 0 {
			return gauss
		}
		for l, k := range u.idx {
			col := u.a[l*q : l*q+q]
			clear(col)
			copy(col, r[k*ld:k*ld+k+1])
			u.d[l] = s.d[k]
		}
		triangulate(q, m, q, u.a, u.b)
		if u.tr.q != m {
			lambda := s.trust.lambda
			u.tr.init(m)
			u.tr.lambda = lambda
		}
		u.tr.lambda = s.trust.lambda
		g := u.tr.step(m, q, u.a, u.b, u.d[:m], delta, u.x[:m])
		s.trust.lambda = u.tr.lambda
		if first {
			gauss, first = g, false
		}
		gauss = gauss && g
		again := false
		for l, k := range u.idx {
			t := s.theta[s.free[k]]
			s.x[k] = u.x[l]
			if t+u.x[l] < s.lo[k] {
				s.x[k], moved[k], again = s.lo[k]-t, true, true
			} else if t+u.x[l] > s.hi[k] {
				s.x[k], moved[k], again = s.hi[k]-t, true, true
			}
		}
		if !again {
			break
		}
	}
	// the predicted change must be a reduction; otherwise go along the gradient
	mulUpper(q, ld, r, s.x, s.rx)
	pred := 0.0
	for k, v := range s.rx {
		pred += v * (2*b[k] - v)
	}
	if pred > 0 {
		return gauss
	}
	return s.projectedGradient(r, ld, b, delta)
}

// projectedGradient is the step along the scaled gradient of the parameters
// that are not held, as far as the bounds and delta let it go.
func (s *search) projectedGradient(r []float64, ld int, b []float64, delta float64) bool {
	q := s.q
	for k := 0; k < q; k++ {
		s.x[k] = 0
		if s.held[k] {
			continue
		}
		g := 0.0
		for i, c := range r[k*ld : k*ld+k+1] {
			g += c * b[i]
		}
		s.x[k] = g / (s.d[k] * s.d[k])
	}
	mulUpper(q, ld, r, s.x, s.rx)
	gg, rr := 0.0, 0.0
	for k, v := range s.rx {
		gg += v * b[k]
		rr += v * v
	}
	if rr == 0 {
		clear(s.x)
		return true
	}
	t := gg / rr
	if n := scaledNorm(s.d, s.x); t*n > delta {
		t = delta / n
	}
	for k, v := range s.x {
		at := s.theta[s.free[k]]
		if v > 0 && at+t*v > s.hi[k] {
			t = (s.hi[k] - at) / v
		} else if v < 0 && at+t*v < s.lo[k] {
			t = (s.lo[k] - at) / v
		}
	}
	for k := range s.x {
		s.x[k] *= math.Max(t, 0)
	}
	return false
}
