package lsq

import "math"

// difference estimates derivatives by central differences. The step of each
// parameter balances rounding against curvature: h = (3ε)^(1/3)·scale, where
// the scale is |θ| or, near zero, the parameter's own range (prior, bounds or,
// failing these, the change that moves the model noticeably).
type difference struct {
	s      *search
	hi, lo []float64
	x      []float64
	scale  []float64 // of each free parameter, for values near zero
}

var stepFactor = math.Cbrt(3 * 2.2e-16)

func newDifference(s *search) *difference {
	n := len(s.y)
	return &difference{s: s, hi: make([]float64, n), lo: make([]float64, n), x: make([]float64, len(s.p.Parameters)), scale: make([]float64, s.q)}
}

func (d *difference) columns(theta, f []float64, cols [][]float64) error {
	s := d.s
	copy(d.x, theta)
	for k, j := range s.free {
		scale := math.Max(math.Abs(theta[j]), d.scale[k])
		if scale == 0 {
			c, err := d.findScale(k, theta, f)
			if err != nil {
				return err
			}
			d.scale[k] = c
			scale = c
		}
		h := stepFactor * scale
		up, down := theta[j]+h, theta[j]-h
		// its own bounds: those of the search may pin it (see valley)
		if hi := s.p.Parameters[j].Upper; hi != nil {
			up = math.Min(up, *hi)
		}
		if lo := s.p.Parameters[j].Lower; lo != nil {
			down = math.Max(down, *lo)
		}
		d.x[j] = up
		s.evaluations++
		errUp := s.eval(d.x, d.hi, nil)
		d.x[j] = down
		s.evaluations++
		errDown := s.eval(d.x, d.lo, nil)
		d.x[j] = theta[j]
		switch {
		case errUp == nil && errDown == nil && notFinite(d.hi) < 0 && notFinite(d.lo) < 0:
			inv := 1 / (up - down)
			for i := range cols[k] {
				cols[k][i] = (d.hi[i] - d.lo[i]) * inv
			}
		case errUp == nil && notFinite(d.hi) < 0: // one-sided at the edge of the domain
			inv := 1 / (up - theta[j])
			for i := range cols[k] {
				cols[k][i] = (d.hi[i] - f[i]) * inv
			}
		case errDown == nil && notFinite(d.lo) < 0:
			inv := 1 / (theta[j] - down)
			for i := range cols[k] {
				cols[k][i] = (f[i] - d.lo[i]) * inv
			}
		case errUp != nil:
			return errUp
		default:
			return errDown
		}
	}
	return nil
}

// findScale looks for the size of a parameter that stands at zero.
func (d *difference) findScale(k int, theta, f []float64) (float64, error) {
	s := d.s
	j := s.free[k]
	p := &s.p.Parameters[j]
	if p.Prior != nil {
		return p.Prior.U, nil
	}
	if p.Start != 0 {
		return math.Abs(p.Start), nil
	}
	size := 0.0
	for i := range f {
		size = math.Hypot(size, math.Max(math.Abs(f[i]), math.Abs(s.y[i])))
	}
	if size == 0 {
		return 1, nil
	}
	moves := func(h float64) float64 {
		d.x[j] = theta[j] + h
		s.evaluations++
		err := s.eval(d.x, d.hi, nil)
		d.x[j] = theta[j]
		if err != nil || notFinite(d.hi) >= 0 {
			return math.Inf(1)
		}
		m := 0.0
		for i := range f {
			m = math.Hypot(m, d.hi[i]-f[i])
		}
		return m / size
	}
	h := 1.0
	for i := 0; i < 150 && moves(h) > 0.1; i++ {
		h /= 10
	}
	for i := 0; i < 150 && moves(h) < 1e-3; i++ {
		h *= 10
		if h > 1e100 {
			return 1, nil // the readings do not respond to this parameter
		}
	}
	return h, nil
}
