package field

import "math"

// The capacity coefficients of two spheres are sums of one kind (package
// comment, "Two spheres"):
//
//	S(α, u) = Σ_{n≥0} 1/sinh(nu + α),   u < α ≤ 2u.
//
// seriesSwitch is the u at which the two ways of summing it meet: above, the
// rearranged double series, whose k-th term falls as exp(−2k²u); below, the
// near-contact expansion in powers of u, whose least term is near
// exp(−2π²/u).
const seriesSwitch = 0.3

// sinhSum is S(α, u) with its partial derivatives to third order.
type sinhSum struct {
	s          float64
	a, u       float64
	aa, au, uu float64
	aaa, aau   float64
	auu, uuu   float64
}

// sumSinh returns S and its derivatives at (α, u), given exp(−α) and exp(−u)
// too. Relative accuracy of S near 1e-15, of the derivatives near 1e-14.
func sumSinh(alpha, u, ealpha, eu float64) sinhSum {
	if eu > expSwitch {
		return sumSinhNear(alpha, u)
	}
	return sumSinhFar(ealpha, eu)
}

// expSwitch is exp(−seriesSwitch).
var expSwitch = math.Exp(-seriesSwitch)

// sumSinhFar sums the double series 2 ΣΣ exp[−(nu+α)(2m+1)] along its diagonal
// n = m = k: with K = 2k+1 and t = ku + α (derived, package comment)
//
//	S = 2 Σ_k { exp(−Kt)/(1 − exp(−Ku)) + exp(−(K+2)t)/(1 − exp(−2t)) },
//
// from x = exp(−α) and q = exp(−u), calling no transcendental function.
func sumSinhFar(x, q float64) (z sinhSum) {
	q2 := q * q
	q4 := q2 * q2
	e, ratio := 2*x, x*x*q2*q // 2 exp(−Kt) and what takes it to the next
	r, s := q, x*x            // exp(−Ku), exp(−2t)
	k := 0.0
	for range 12 {
		K := 2*k + 1
		a, b := 1-r, 1-s
		inv := 1 / (a * b)
		w, P := inv*b, s*inv*a
		// first part, e·w with w = 1/(1 − r); logarithmic derivatives −K in α, −K(k + p) in u
		p := r * w
		m := p * (1 + p)
		y := e * w
		l := k + p
		l2 := l*l + m
		l3 := l*(l2+2*m) + m*(1+2*p)
		y1 := K * y
		y2 := K * y1
		y3 := K * y2
		// second part, a function of t alone
		M := 4 * P * (1 + P)
		L := K + 2*(1+P)
		f := e * P
		f1 := f * L
		f2 := f * (L*L + M)
		f3 := f * (L*(L*L+3*M) + 2*M*(1+2*P))
		z.s += y + f
		z.a -= y1 + f1
		z.u -= l*y1 + k*f1
		z.aa += y2 + f2
		z.au += l*y2 + k*f2
		z.uu += l2*y2 + k*k*f2
		z.aaa -= y3 + f3
		z.aau -= l*y3 + k*f3
		z.auu -= l2*y3 + k*k*f3
		z.uuu -= l3*y3 + k*k*k*f3
		e *= ratio
		if e < 1e-23*z.s { // what is left out grows by K⁶ in the third derivative
			break
		}
		ratio *= q4
		r *= q2
		s *= q2
		k++
	}
	return z
}

// nearTerms is the number of powers of u carried by the near-contact expansion.
const nearTerms = 9

// nearCoefficient[k] = 2(2^(2k−1) − 1) B_2k/(2k (2k)!), the coefficient of
// u^(2k−1) B_2k(α/u); bernoulliPoly[n] are the coefficients of the Bernoulli
// polynomial B_n, lowest power first.
var (
	nearCoefficient [nearTerms + 1]float64
	nearEven        [nearTerms + 1]float64 // times B_2k(2)
	nearOdd         [nearTerms + 1]float64 // times B_2k(3/2)
	bernoulliPoly   [2*nearTerms + 1][]float64
)

func init() {
	b := bernoulli[:]
	binomial := func(n, k int) float64 {
		c := 1.0
		for i := 1; i <= k; i++ {
			c = c * float64(n-k+i) / float64(i)
		}
		return math.Round(c)
	}
	for n := range bernoulliPoly {
		bernoulliPoly[n] = make([]float64, n+1)
		for k := 0; k <= n; k++ { // B_n(x) = Σ C(n,k) B_k x^(n−k), DLMF 24.2.5
			bernoulliPoly[n][n-k] = binomial(n, k) * b[k]
		}
	}
	fact := 1.0
	for k := 1; k <= nearTerms; k++ {
		n := 2 * k
		fact *= float64(n * (n - 1))
		nearCoefficient[k] = 2 * (math.Exp2(float64(n-1)) - 1) * b[n] / (float64(n) * fact)
		// B_n(x+1) = B_n(x) + n xⁿ⁻¹ and B_n(½) = (2^(1−n) − 1)B_n, DLMF 24.4.1, 24.4.27
		nearEven[k] = nearCoefficient[k] * (b[n] + float64(n))
		nearOdd[k] = nearCoefficient[k] * (b[n]*(math.Exp2(float64(1-n))-1) + float64(n)*math.Exp2(float64(1-n)))
	}
}

// bernoulli holds B_0 to B_18, NIST DLMF 24.2.
var bernoulli = [2*nearTerms + 1]float64{1, -1. / 2, 1. / 6, 0, -1. / 30, 0, 1. / 42, 0, -1. / 30, 0, 5. / 66, 0,
	-691. / 2730, 0, 7. / 6, 0, -3617. / 510, 0, 43867. / 798}

func horner(c []float64, x float64) float64 {
	v := 0.0
	for i := len(c) - 1; i >= 0; i-- {
		v = v*x + c[i]
	}
	return v
}

// addScaled adds c·uⁿ h(α/u) and its derivatives, h0 to h3 being h and its
// derivatives at x = α/u and un the power u^(n−3).
func (z *sinhSum) addScaled(c, n, x, u, un, h0, h1, h2, h3 float64) {
	n1, n2 := n-1, n-2
	c3 := c * un
	c2 := c3 * u
	c1 := c2 * u
	z.s += c1 * u * h0
	z.a += c1 * h1
	z.u += c1 * (n*h0 - x*h1)
	z.aa += c2 * h2
	z.au += c2 * (n1*h1 - x*h2)
	z.uu += c2 * (n*n1*h0 - 2*n1*x*h1 + x*x*h2)
	z.aaa += c3 * h3
	z.aau += c3 * (n2*h2 - x*h3)
	z.auu += c3 * (n1*n2*h1 - 2*n2*x*h2 + x*x*h3)
	z.uuu += c3 * (n*n1*n2*h0 - 3*n1*n2*x*h1 + 3*n2*x*x*h2 - x*x*x*h3)
}

// sumSinhNear is the expansion of S for small u (derived by summing the Laurent
// series of 1/sinh term by term with ζ(1−2k, x) = −B_2k(x)/2k, DLMF 25.11.14,
// and the Mellin transform for its first term):
//
//	S = [ln(2/u) − ψ(x)]/u + Σ_{k≥1} 2(2^(2k−1) − 1) B_2k B_2k(x) u^(2k−1)/(2k (2k)!),  x = α/u.
func sumSinhNear(alpha, u float64) (z sinhSum) {
	x := alpha / u
	l := math.Log(u)
	iu := 1 / u
	iu2 := iu * iu
	z.s = (math.Ln2 - l) * iu
	z.u = (l - 1 - math.Ln2) * iu2
	z.uu = (3 - 2*l + 2*math.Ln2) * iu2 * iu
	z.uuu = (6*l - 11 - 6*math.Ln2) * iu2 * iu2
	psi := polygamma(x)
	z.addScaled(-1, -1, x, u, iu2*iu2, psi[0], psi[1], psi[2], psi[3])
	un := iu2
	var b [2*nearTerms + 1]float64 // Bernoulli polynomials at x
	b[0] = 1
	for k := 1; k <= nearTerms; k++ {
		n := float64(2 * k)
		b[2*k-1] = horner(bernoulliPoly[2*k-1], x)
		b[2*k] = horner(bernoulliPoly[2*k], x)
		h3 := 0.0
		if k > 1 {
			h3 = n * (n - 1) * (n - 2) * b[2*k-3]
		}
		z.addScaled(nearCoefficient[k], n-1, x, u, un, b[2*k], n*b[2*k-1], n*(n-1)*b[2*k-2], h3)
		un *= u * u
		if un*u*u*math.Abs(nearEven[k]) < 1e-22 { // the next term, its derivatives' factors (2k)³ included
			break
		}
	}
	return z
}

// along returns the series and its three derivatives by u on the line α = 2u.
func (z *sinhSum) along() (s, s1, s2, s3 float64) {
	return z.s, 2*z.a + z.u, 4*(z.aa+z.au) + z.uu, 8*z.aaa + 12*z.aau + 6*z.auu + z.uuu
}
