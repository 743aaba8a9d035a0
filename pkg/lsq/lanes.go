package lsq

// The inner loops of fold work on four rows at a time, each lane with sums of
// its own; a block is padded with zero rows to a multiple of four. The portable
// loops below and the vector instructions add in the same order and round
// alike, so that results do not depend on which of them runs.

// lanes holds four partial sums of each of up to four dot products.
type lanes [16]float64

// total adds the lanes of dot product k.
func (s *lanes) total(k int) float64 {
	return (s[4*k] + s[4*k+1]) + (s[4*k+2] + s[4*k+3])
}

// weigh3Go sets the four columns of buf to w·j0, w·j1, w·j2, w·(y − f) and adds
// the products of the first with all four to s; m is a multiple of four.
func weigh3Go(m int, w, y, f, j0, j1, j2, buf []float64, stride int, s *lanes) {
	a, b, c, r := buf[:m], buf[stride:stride+m], buf[2*stride:2*stride+m], buf[3*stride:3*stride+m]
	w, y, f, j0, j1, j2 = w[:m], y[:m], f[:m], j0[:m], j1[:m], j2[:m]
	for i, wi := range w {
		ai, bi, ci, ri := wi*j0[i], wi*j1[i], wi*j2[i], wi*(y[i]-f[i])
		a[i], b[i], c[i], r[i] = ai, bi, ci, ri
		l := i & 3
		s[l] += ai * ai
		s[4+l] += ai * bi
		s[8+l] += ai * ci
		s[12+l] += ai * ri
	}
}

// fuse3Go subtracts s0·x, s1·x, s2·x from a, b, c and adds a·a, a·b, a·c.
func fuse3Go(x, a, b, c []float64, s0, s1, s2 float64, s *lanes) {
	a, b, c = a[:len(x)], b[:len(x)], c[:len(x)]
	for i, v := range x {
		ai, bi, ci := a[i]-s0*v, b[i]-s1*v, c[i]-s2*v
		a[i], b[i], c[i] = ai, bi, ci
		l := i & 3
		s[l] += ai * ai
		s[4+l] += ai * bi
		s[8+l] += ai * ci
	}
}

// fuse2Go subtracts s0·x, s1·x from a, b and adds a·a, a·b.
func fuse2Go(x, a, b []float64, s0, s1 float64, s *lanes) {
	a, b = a[:len(x)], b[:len(x)]
	for i, v := range x {
		ai, bi := a[i]-s0*v, b[i]-s1*v
		a[i], b[i] = ai, bi
		l := i & 3
		s[l] += ai * ai
		s[4+l] += ai * bi
	}
}

// fuse1Go subtracts s0·x from a and adds a·a.
func fuse1Go(x, a []float64, s0 float64, s *lanes) {
	a = a[:len(x)]
	for i, v := range x {
		ai := a[i] - s0*v
		a[i] = ai
		s[i&3] += ai * ai
	}
}

// pairGo subtracts s0·x from a and adds p·a.
func pairGo(x, p, a []float64, s0 float64, s *lanes) {
	p, a = p[:len(x)], a[:len(x)]
	for i, v := range x {
		ai := a[i] - s0*v
		a[i] = ai
		s[i&3] += p[i] * ai
	}
}

// dotGo adds x·a.
func dotGo(x, a []float64, s *lanes) {
	a = a[:len(x)]
	for i, v := range x {
		s[i&3] += v * a[i]
	}
}
