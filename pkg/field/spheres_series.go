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

// sumSinh returns S and its derivatives at (α, u). Relative accuracy of S near
// 1e-15, of the derivatives near 1e-14.
func sumSinh(alpha, u float64) sinhSum {
	if u < seriesSwitch {
		return sumSinhNear(alpha, u)
	}
	return sumSinhFar(alpha, u)
}

// sumSinhFar sums the double series 2 ΣΣ exp[−(nu+α)(2m+1)] along its diagonal
// n = m = k: with K = 2k+1 and t = ku + α (derived, package comment)
//
//	S = 2 Σ_k { exp(−Kt)/(1 − exp(−Ku)) + exp(−(K+2)t)/(1 − exp(−2t)) }.
func sumSinhFar(alpha, u float64) (z sinhSum) {
	for k := 0.0; ; k++ {
		K := 2*k + 1
		t := k*u + alpha
		x := K * t
		if x > 745 {
			break
		}
		e := 2 * math.Exp(-x)
		// first part, e·w with w = 1/(1 − r); logarithmic derivatives −K in α, −K(k + p) in u
		r := math.Exp(-K * u)
		w := 1 / (1 - r)
		p := r * w
		m := p * (1 + p)
		y := e * w
		l := k + p
		l2 := l*l + m
		l3 := l*l*l + 3*l*m + m*(1+2*p)
		K2, K3 := K*K, K*K*K
		z.s += y
		z.a -= K * y
		z.u -= K * l * y
		z.aa += K2 * y
		z.au += K2 * l * y
		z.uu += K2 * l2 * y
		z.aaa -= K3 * y
		z.aau -= K3 * l * y
		z.auu -= K3 * l2 * y
		z.uuu -= K3 * l3 * y
		// second part, a function of t alone
		P := 1 / math.Expm1(2*t)
		M := 4 * P * (1 + P)
		L := K + 2*(1+P)
		f := e * P
		f1 := -f * L
		f2 := f * (L*L + M)
		f3 := -f * (L*L*L + 3*L*M + 2*M*(1+2*P))
		z.s += f
		z.a += f1
		z.u += k * f1
		z.aa += f2
		z.au += k * f2
		z.uu += k * k * f2
		z.aaa += f3
		z.aau += k * f3
		z.auu += k * k * f3
		z.uuu += k * k * k * f3
		// the third derivative carries (k(2k+1))³ more than the sum
		if kk := k*K + 1; y*kk*kk*kk < 1e-17*z.s {
			break
		}
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
	z.addScaled(-1, -1, x, u, iu2*iu2, digamma(x), hurwitz(2, x), -2*hurwitz(3, x), 6*hurwitz(4, x))
	un := iu2
	for k := 1; k <= nearTerms; k++ {
		n := float64(2 * k)
		h0 := horner(bernoulliPoly[2*k], x)
		h1 := n * horner(bernoulliPoly[2*k-1], x)
		h2 := n * (n - 1) * horner(bernoulliPoly[2*k-2], x)
		h3 := 0.0
		if k > 1 {
			h3 = n * (n - 1) * (n - 2) * horner(bernoulliPoly[2*k-3], x)
		}
		z.addScaled(nearCoefficient[k], n-1, x, u, un, h0, h1, h2, h3)
		un *= u * u
	}
	return z
}

// along returns the series and its three derivatives by u on the line α = 2u.
func (z *sinhSum) along() (s, s1, s2, s3 float64) {
	return z.s, 2*z.a + z.u, 4*(z.aa+z.au) + z.uu, 8*z.aaa + 12*z.aau + 6*z.auu + z.uuu
}
