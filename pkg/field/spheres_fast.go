package field

import "math"

// pairGeometry holds what the sums need of a pair at one gap.
type pairGeometry struct {
	f, fg          float64 // m and 1: half the distance of the poles, its derivative by the gap
	alphaG, betaG  float64 // 1/m
	ealpha, ebeta  float64 // exp(−α), exp(−β)
	ha, hb         float64 // √(a² + f²), √(b² + f²), m: distances of the centres from the mid-plane
	needsLogarithm bool
}

func geometry(a, b, gap float64) (z pairGeometry) {
	ga, gb, gab, c := gap+2*a, gap+2*b, gap+2*(a+b), a+b+gap
	z.f = 0.5 * math.Sqrt(gap*ga*gb*gab) / c
	z.fg = z.f * (0.5*(1/gap+1/ga+1/gb+1/gab) - 1/c)
	z.ha = math.Sqrt(a*a + z.f*z.f)
	z.hb = math.Sqrt(b*b + z.f*z.f)
	z.alphaG = z.fg / z.ha
	z.betaG = z.fg / z.hb
	z.ealpha = a / (z.f + z.ha)
	z.ebeta = b / (z.f + z.hb)
	z.needsLogarithm = z.ealpha*z.ebeta > expSwitch
	return z
}

// pairFirst returns the capacity coefficients aa, ab, bb per 4πε and their
// derivatives by the gap; pair without the derivatives that only a fit needs.
func pairFirst(a, b, gap float64) (c, w [3]float64) {
	z := geometry(a, b, gap)
	uG := z.alphaG + z.betaG
	var sa, sb, s0 sum1
	if z.needsLogarithm {
		alpha, beta := math.Asinh(z.f/a), math.Asinh(z.f/b)
		u := alpha + beta
		sa, s0 = near1(alpha+u, u)
		sb = sa
		if a != b {
			sb, _ = near1(beta+u, u)
		}
	} else {
		sa, sb, s0 = far1(z.ealpha, z.ebeta)
	}
	d := a + b + gap
	h := a * b / d
	c[0] = a + z.f*sa.s
	w[0] = z.fg*sa.s + z.f*(sa.a*(z.alphaG+uG)+sa.u*uG)
	c[1] = -h - z.f*s0.s
	w[1] = h/d - z.fg*s0.s - z.f*s0.u*uG
	c[2] = b + z.f*sb.s
	w[2] = z.fg*sb.s + z.f*(sb.a*(z.betaG+uG)+sb.u*uG)
	return c, w
}

// sum1 is S with its first derivatives; on the line of s0 the whole derivative
// is in u.
type sum1 struct{ s, a, u float64 }

// far1 is sumSinhFar at α + u, β + u and 2u together, to first order, from
// x = exp(−α) and y = exp(−β): no transcendental function is called.
func far1(x, y float64) (sa, sb, s0 sum1) {
	q := x * y
	q2 := q * q
	q4 := q2 * q2
	x *= q
	y *= q
	ea, eb, e0 := x, y, q2 // exp(−Kt) for the three t
	ra, rb, r0 := x*x*q2*q, y*y*q2*q, q4*q2*q
	sA, sB, sZ := x*x, y*y, q4 // exp(−2t)
	r := q                     // exp(−Ku)
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
		kp := K * (k + r*w)

		ya, fa := ea*w, ea*pa
		la := fa * (K + 2 + 2*pa)
		sa.s += ya + fa
		sa.a -= K*ya + la
		sa.u -= kp*ya + k*la

		yb, fb := eb*w, eb*pb
		lb := fb * (K + 2 + 2*pb)
		sb.s += yb + fb
		sb.a -= K*yb + lb
		sb.u -= kp*yb + k*lb

		y0, f0 := e0*w, e0*p0
		l0 := f0 * (K + 2 + 2*p0)
		s0.s += y0 + f0
		s0.u -= (2*K+kp)*y0 + (k+2)*l0

		ea *= ra
		eb *= rb
		e0 *= r0
		if ea < 1e-18*sa.s && eb < 1e-18*sb.s && e0 < 1e-18*s0.s {
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
	sa.s, sa.a, sa.u = 2*sa.s, 2*sa.a, 2*sa.u
	sb.s, sb.a, sb.u = 2*sb.s, 2*sb.a, 2*sb.u
	s0.s, s0.u = 2*s0.s, 2*s0.u
	return sa, sb, s0
}

// near1 is sumSinhNear at (α, u) and on α = 2u, to first order.
func near1(alpha, u float64) (sa, s0 sum1) {
	x := alpha / u
	iu := 1 / u
	l := (math.Ln2 - math.Log(u)) * iu
	poly := polygamma(x)
	psi, psi1 := poly[0], poly[1]
	// first terms: [ln(2/u) − ψ]/u
	sa.s = l - psi*iu
	sa.a = -psi1 * iu * iu
	sa.u = (-l - iu + (psi+x*psi1)*iu) * iu
	const psi2 = 1 - eulerGamma
	s0.s = l - psi2*iu
	s0.u = (-l - iu + psi2*iu) * iu
	un := 1.0 // u^(2k−2)
	for k := 1; k <= nearTerms; k++ {
		n := float64(2*k - 1)
		c := nearCoefficient[k] * un
		h0 := horner(bernoulliPoly[2*k], x)
		h1 := (n + 1) * horner(bernoulliPoly[2*k-1], x)
		sa.s += c * u * h0
		sa.a += c * h1
		sa.u += c * (n*h0 - x*h1)
		s0.s += u * un * nearEven[k]
		s0.u += n * un * nearEven[k]
		un *= u * u
	}
	return sa, s0
}

const eulerGamma = 0.57721566490153286060651209008240243104215933593992

// chargeForce returns ½VᵀWV with V = C⁻¹q, arranged by the sums σ = C_aa + C_ab,
// which stay finite at contact where each coefficient grows:
// VᵀWV = σ_a' V_a² + σ_b' V_b² − C_ab' (V_a − V_b)².
func chargeForce(c, w *[3]float64, qa, qb float64) float64 {
	sa, sb := c[0]+c[1], c[2]+c[1]
	det := sa*sb - c[1]*(sa+sb)
	va := c[2]*qa - c[1]*qb
	vb := c[0]*qb - c[1]*qa
	dv := sb*qa - sa*qb
	return 0.5 * ((w[0]+w[1])*va*va + (w[2]+w[1])*vb*vb - w[1]*dv*dv) / (det * det)
}

// equalForce returns the force of two spheres of radius 1 with charges p and q,
// per 1/4πε: pairFirst and chargeForce with α = β = u/2, for which all is
// algebraic in h = exp(−u/2).
func equalForce(gap, p, q float64) float64 {
	// cosh(u/2) = 1 + gap/2, f = sinh(u/2)
	c := 1 + 0.5*gap
	f := math.Sqrt(gap * (1 + 0.25*gap))
	h := 1 / (c + f)
	var s, s1, z, z1 float64 // S(3u/2, u), S(2u, u) and their derivatives by u/2
	if h*h > expSwitch {
		s, s1, z, z1 = equalNear(math.Log1p(0.5*gap + f))
	} else {
		s, s1, z, z1 = equalFar(h)
	}
	// by the gap: d(u/2)/dg = 1/2f, df/dg = c/2f
	i, ic := 0.5*c/f, 0.5/c
	caa, cab := 1+f*s, -ic-f*z
	waa := i*s + 0.5*s1
	wab := ic*ic - i*z - 0.5*z1
	sum := caa + cab
	det := (caa - cab) * sum
	va := caa*p - cab*q
	vb := caa*q - cab*p
	dv := sum * (p - q)
	return 0.5 * ((waa+wab)*(va*va+vb*vb) - wab*dv*dv) / (det * det)
}

// equalFar sums 1/sinh over the odd multiples from 3 on (s) and the even ones
// from 4 on (z) of μ = −ln h, with derivatives by μ: sumSinhFar at 3μ and 4μ
// with u = 2μ, where exp(−Kt) is h^(K(K+2)) and h^(K(K+3)), K = 2k+1.
func equalFar(h float64) (s, s1, z, z1 float64) {
	q := h * h
	q2 := q * q
	q4 := q2 * q2
	e, re := h*q, q4*q2  // h^(K(K+2)), its ratio to the next
	d, rd := q2, q4*q2*q // h^(K(K+3)), its ratio to the next
	v, w := q, 1/(1-q)   // h^2K and 1/(1 − h^2K)
	y := q4              // h^(2K+6)
	for K := 1.0; K < 24; K += 2 {
		x := v * q2 // h^(2K+4)
		a, b := 1-x, 1-y
		inv := 1 / (a * b)
		wx, wy := inv*b, inv*a
		p := v * w
		t, g := e*w, e*x*wx
		s += t + g
		s1 -= t*K*(K+2+2*p) + g*(K+2)*(K+2*wx)
		t, g = d*w, d*y*wy
		z += t + g
		z1 -= t*K*(K+3+2*p) + g*(K+3)*(K+2*wy)
		e *= re
		d *= rd
		if e < 1e-18*s && d < 1e-18*z {
			break
		}
		re *= q4
		rd *= q4
		v, w = x, wx
		y *= q2
	}
	return 2 * s, 2 * s1, 2 * z, 2 * z1
}

// equalNear is near1 at 3u/2 and 2u, by u/2 = μ.
func equalNear(mu float64) (s, s1, z, z1 float64) {
	u := 2 * mu
	iu := 1 / u
	l := (math.Ln2 - math.Log(u)) * iu
	u2 := u * u
	var po, po1, pe, pe1 float64
	for k := nearTerms; k >= 1; k-- {
		n := float64(2*k - 1)
		po = po*u2 + nearOdd[k]
		po1 = po1*u2 + n*nearOdd[k]
		pe = pe*u2 + nearEven[k]
		pe1 = pe1*u2 + n*nearEven[k]
	}
	const (
		psiOdd  = 2 - eulerGamma - 2*math.Ln2 // ψ(3/2)
		psiEven = 1 - eulerGamma              // ψ(2)
	)
	s = l - psiOdd*iu + u*po
	s1 = 2 * (po1 - (l+iu-psiOdd*iu)*iu)
	z = l - psiEven*iu + u*pe
	z1 = 2 * (pe1 - (l+iu-psiEven*iu)*iu)
	return s, s1, z, z1
}
