package field

import "math"

// pairGap holds capacity coefficients aa, ab, bb per 4πε with their first and
// second derivatives by the gap.
type pairGap struct{ c, w, w1 [3]float64 }

// pairSecond is pair for one variable, the gap.
func pairSecond(a, b, gap float64) (z pairGap) {
	t := geometry(a, b, gap)
	ga, gb, gab, d := gap+2*a, gap+2*b, gap+2*(a+b), a+b+gap
	l := t.fg / t.f
	fgg := t.f * (l*l - 0.5*(1/(gap*gap)+1/(ga*ga)+1/(gb*gb)+1/(gab*gab)) + 1/(d*d))
	// α_g = f_g/h, h = √(a² + f²)
	agg := fgg/t.ha - t.fg*t.fg*t.f/(t.ha*t.ha*t.ha)
	bgg := fgg/t.hb - t.fg*t.fg*t.f/(t.hb*t.hb*t.hb)
	uG, ugg := t.alphaG+t.betaG, agg+bgg
	q := t.ealpha * t.ebeta
	var alpha, beta float64
	if t.needsLogarithm {
		alpha, beta = math.Asinh(t.f/a), math.Asinh(t.f/b)
	}
	u := alpha + beta

	set := func(i int, sign, r, r1, r2 float64, s *sinhSum, pg, pgg float64) {
		s1 := s.a*pg + s.u*uG
		s2 := s.aa*pg*pg + 2*s.au*pg*uG + s.uu*uG*uG + s.a*pgg + s.u*ugg
		z.c[i] = sign * (r + t.f*s.s)
		z.w[i] = sign * (r1 + t.fg*s.s + t.f*s1)
		z.w1[i] = sign * (r2 + fgg*s.s + 2*t.fg*s1 + t.f*s2)
	}
	s := sumSinh(alpha+u, u, t.ealpha*q, q)
	set(0, 1, a, 0, 0, &s, t.alphaG+uG, agg+ugg)
	if a != b {
		s = sumSinh(beta+u, u, t.ebeta*q, q)
	}
	set(2, 1, b, 0, 0, &s, t.betaG+uG, bgg+ugg)
	s = sumSinh(2*u, u, q*q, q)
	h := a * b / d
	set(1, -1, h, -h/d, 2*h/(d*d), &s, 2*uG, 2*ugg)
	return z
}
