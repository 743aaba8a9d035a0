package field

import "math"

// pairGap holds capacity coefficients aa, ab, bb per 4πε with their first and
// second derivatives by the gap.
type pairGap struct{ c, w, w1 [3]float64 }

// pairSecond is pair for one variable, the gap.
func pairSecond(a, b, gap float64) (z pairGap) {
	ga, gb, gab, d := gap+2*a, gap+2*b, gap+2*(a+b), a+b+gap
	i0, i1, i2, i3, id := 1/gap, 1/ga, 1/gb, 1/gab, 1/d
	f := 0.5 * math.Sqrt(gap*ga*gb*gab) * id
	l := 0.5*(i0+i1+i2+i3) - id // f_g/f
	fg := f * l
	fgg := f * (l*l - 0.5*(i0*i0+i1*i1+i2*i2+i3*i3) + id*id)
	ha, hb := math.Sqrt(a*a+f*f), math.Sqrt(b*b+f*f)
	// α_g = f_g/h, h = √(a² + f²)
	ia, ib := 1/ha, 1/hb
	alphaG, betaG := fg*ia, fg*ib
	agg, bgg := ia*(fgg-alphaG*alphaG*f), ib*(fgg-betaG*betaG*f)
	uG, ugg := alphaG+betaG, agg+bgg
	ea, eb := a/(f+ha), b/(f+hb)
	var sa, sb, s0 sum2
	if q := ea * eb; q > expSwitch {
		alpha, beta := math.Asinh(f/a), math.Asinh(f/b)
		u := alpha + beta
		sa = near2(alpha+u, u, alphaG+uG, uG, agg+ugg, ugg)
		if sb = sa; a != b {
			sb = near2(beta+u, u, betaG+uG, uG, bgg+ugg, ugg)
		}
		s0 = near2(2*u, u, 2*uG, uG, 2*ugg, ugg)
	} else {
		sa, sb, s0 = far2(ea, eb, alphaG+uG, betaG+uG, uG, agg+ugg, bgg+ugg, ugg)
	}
	h := a * b * id
	z.c = [3]float64{a + f*sa.s, -h - f*s0.s, b + f*sb.s}
	z.w = [3]float64{fg*sa.s + f*sa.s1, h*id - fg*s0.s - f*s0.s1, fg*sb.s + f*sb.s1}
	fg *= 2
	z.w1 = [3]float64{fgg*sa.s + fg*sa.s1 + f*sa.s2, -2*h*id*id - fgg*s0.s - fg*s0.s1 - f*s0.s2, fgg*sb.s + fg*sb.s1 + f*sb.s2}
	return z
}

// sum2 is S with its first and second derivative by the gap.
type sum2 struct{ s, s1, s2 float64 }

// near2 is sumSinhNear at (α, u), which the gap moves at the rates αg and ug, and
// these at αgg and ugg.
func near2(alpha, u, ag, ug, agg, ugg float64) sum2 {
	s := sumSinhNear(alpha, u)
	return sum2{s.s, s.a*ag + s.u*ug, s.aa*ag*ag + 2*s.au*ag*ug + s.uu*ug*ug + s.a*agg + s.u*ugg}
}

// far2 is sumSinhFar at α + u, β + u and 2u together, from x = exp(−α) and
// y = exp(−β), differentiated by the gap, which moves α + u, β + u and u at the rates
// ag, bg and ug, and these at agg, bgg and ugg. With g = t_g of the k-th term the
// logarithmic derivatives of its parts are −K(g + p u_g), p = exp(−Ku)/(1 − exp(−Ku)),
// and −Lg; p_u = −Kp(1 + p), L_t = −4P(1 + P) (derived).
func far2(x, y, ag, bg, ug, agg, bgg, ugg float64) (sa, sb, s0 sum2) {
	q := x * y
	q2 := q * q
	q4 := q2 * q2
	x *= q
	y *= q
	ea, eb, e0 := x, y, q2 // exp(−Kt) for the three t
	ra, rb, r0 := x*x*q2*q, y*y*q2*q, q4*q2*q
	sA, sB, sZ := x*x, y*y, q4 // exp(−2t)
	r := q                     // exp(−Ku)
	zg, zgg := 2*ug, 2*ugg
	for k := 0.0; k < 12; k++ {
		K := 2*k + 1
		// one division for the four denominators
		d0, d1, d2, d3 := 1-r, 1-sA, 1-sB, 1-sZ
		d01, d23 := d0*d1, d2*d3
		inv := 1 / (d01 * d23)
		i01, i23 := inv*d23, inv*d01
		w := i01 * d1
		pa := sA * i01 * d0
		pb := sB * i23 * d3
		p0 := sZ * i23 * d2
		p := r * w
		pu, puu := p*ug, p*ugg
		m := K * K * p * (1 + p) * ug * ug
		kg, kgg := k*ug, k*ugg

		g, gg := ag+kg, agg+kgg
		v, c := ea*w, K*(g+pu)
		sa.s += v
		sa.s1 -= v * c
		sa.s2 += v * (c*c + m - K*(gg+puu))
		v, c = ea*pa, K+2+2*pa
		sa.s += v
		sa.s1 -= v * c * g
		sa.s2 += v * ((c*c+4*pa*(1+pa))*g*g - c*gg)

		g, gg = bg+kg, bgg+kgg
		v, c = eb*w, K*(g+pu)
		sb.s += v
		sb.s1 -= v * c
		sb.s2 += v * (c*c + m - K*(gg+puu))
		v, c = eb*pb, K+2+2*pb
		sb.s += v
		sb.s1 -= v * c * g
		sb.s2 += v * ((c*c+4*pb*(1+pb))*g*g - c*gg)

		g, gg = zg+kg, zgg+kgg
		v, c = e0*w, K*(g+pu)
		s0.s += v
		s0.s1 -= v * c
		s0.s2 += v * (c*c + m - K*(gg+puu))
		v, c = e0*p0, K+2+2*p0
		s0.s += v
		s0.s1 -= v * c * g
		s0.s2 += v * ((c*c+4*p0*(1+p0))*g*g - c*gg)

		ea *= ra
		eb *= rb
		e0 *= r0
		if ea < 1e-20*sa.s && eb < 1e-20*sb.s && e0 < 1e-20*s0.s { // what is left out grows by K⁴
			break
		}
		ra *= q4
		rb *= q4
		r0 *= q4
		sA *= q2
		sB *= q2
		sZ *= q2
		r *= q2
	}
	return sum2{2 * sa.s, 2 * sa.s1, 2 * sa.s2}, sum2{2 * sb.s, 2 * sb.s1, 2 * sb.s2}, sum2{2 * s0.s, 2 * s0.s1, 2 * s0.s2}
}
