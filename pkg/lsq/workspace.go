package lsq

import "math"

// init prepares for the readings y and the parameters of p. It uses again what
// memory the search already has.
func (s *search) init(p *Problem, y []float64, free []int, white *whitener) {
	n, np, q := len(y), len(p.Parameters), len(free)
	s.p, s.y, s.free, s.q, s.white, s.eval = p, y, free, q, white, p.Eval
	m := blockRows(n)
	tri := (q + 1) * (q + 1)
	s.single = n >= singleFrom && float64(n)*float64(q*q) > wideWork && !white.diagonal() && !p.Numeric && s.eiv == nil
	rows := 2*n + 2*n*q
	if s.single {
		rows = 0
	}
	need := rows + 4*np + 3*q + 2*tri + (q+1)*(m+1) + q*q + 3*q
	if cap(s.slab) < need {
		s.slab = make([]float64, need)
	}
	slab := s.slab[:need]
	at := 0
	take := func(k int) []float64 {
		v := slab[at : at+k : at+k]
		at += k
		return v
	}
	column := func() []float64 {
		if s.single { // on its own, so that the result can keep it
			return make([]float64, n)
		}
		return take(n)
	}
	s.f, s.ftrial = column(), column()
	if cap(s.heads) < 2*np+2*q {
		s.heads = make([][]float64, 2*np+2*q)
	}
	heads := s.heads[:2*np+2*q]
	clear(heads)
	s.jac, s.jtrial, s.cols, s.ctrial = heads[:np:np], heads[np:2*np:2*np], heads[2*np:2*np+q:2*np+q], heads[2*np+q:]
	if s.single {
		s.block = make([]float64, n*q)
		for k := range free {
			s.cols[k] = s.block[k*n : k*n+n : k*n+n]
			s.ctrial[k] = s.cols[k]
		}
	} else {
		for k := range free {
			s.cols[k], s.ctrial[k] = column(), column()
		}
	}
	for k, j := range free {
		s.jac[j], s.jtrial[j] = s.cols[k], s.ctrial[k]
	}
	s.theta, s.trial = take(np), take(np)
	s.priorV, s.priorW = take(np), take(np)
	s.d, s.x, s.rx = take(q), take(q), take(q)
	s.now = fold{q: q, r: take(tri), stride: m, buf: take((q + 1) * m), dots: take(q + 1)}
	s.next = fold{q: q, r: take(tri), stride: m, buf: s.now.buf, dots: s.now.dots}
	s.trust = trust{q: q, s: take(q * q), x: take(q), w: take(q), b: take(q)}
	for j := range p.Parameters {
		s.priorV[j], s.priorW[j] = math.NaN(), 0
	}
	for k, j := range free {
		q := &p.Parameters[j]
		if q.Prior != nil {
			s.priorV[j], s.priorW[j] = q.Prior.Value, 1/q.Prior.U
			s.hasPrior = true
		}
		if (q.Lower != nil || q.Upper != nil) && s.lo == nil {
			s.boundless()
		}
		if q.Lower != nil {
			s.lo[k] = *q.Lower
		}
		if q.Upper != nil {
			s.hi[k] = *q.Upper
		}
	}
	if p.Numeric {
		s.numeric = true
		s.diff = newDifference(s)
	}
	s.prepareWhite()
}

// singleRows is the number of correlated readings from which a search keeps one
// set of derivatives instead of three.
const singleRows = 1 << 16

var singleFrom = singleRows // for tests

// restore evaluates the derivatives at the present parameters again, where a
// search that keeps one set of them has whitened it.
func (s *search) restore() error {
	if !s.single || !s.stale {
		return nil
	}
	s.stale = false
	return s.call(s.theta, s.ftrial, s.jac, s.cols)
}

// columns returns a copy of the free columns of the Jacobian.
func (s *search) columns() [][]float64 {
	if s.single {
		return append([][]float64(nil), s.cols...)
	}
	out := make([][]float64, s.q)
	n := len(s.y)
	slab := make([]float64, n*s.q)
	for k, c := range s.cols {
		out[k] = slab[k*n : k*n+n : k*n+n]
		copy(out[k], c)
	}
	return out
}

// prepareWhite allocates what correlated readings need.
func (s *search) prepareWhite() {
	if s.white.diagonal() || s.wres != nil {
		return
	}
	n := len(s.y)
	s.wres = make([]float64, n)
	if s.single {
		s.wcols = s.cols
		return
	}
	s.wcols = make([][]float64, s.q)
	slab := make([]float64, n*s.q)
	for k := range s.wcols {
		s.wcols[k] = slab[k*n : k*n+n]
	}
}
