package lsq

import (
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// Test is the outcome of a statistical test.
type Test struct {
	Statistic float64
	PValue    float64 // probability of a statistic at least as extreme when nothing is wrong; NaN when it can't be told
}

// RunsTest counts runs of equal sign in residuals taken in the order of
// acquisition and compares with what independent signs would give (Wald and
// Wolfowitz, Ann. Math. Stat. 11 (1940) 147): too few runs mean drift or a
// wrong model, too many an alternation. Zeros are left out. The p-value is
// two-sided, exact to 100 residuals of each sign, beyond that from the normal
// approximation with continuity correction.
func RunsTest(residuals []float64) (Test, error) {
	var plus, minus, runs int
	last := 0
	for i, r := range residuals {
		if math.IsNaN(r) {
			return Test{}, fmt.Errorf("lsq: residual %d is NaN; the runs test needs all of them", i+1)
		}
		sign := 0
		switch {
		case r > 0:
			sign = 1
			plus++
		case r < 0:
			sign = -1
			minus++
		default:
			continue
		}
		if sign != last {
			runs++
			last = sign
		}
	}
	t := Test{Statistic: float64(runs), PValue: math.NaN()}
	if plus == 0 || minus == 0 {
		return t, nil
	}
	if plus <= 100 && minus <= 100 {
		t.PValue = exactRuns(plus, minus, runs)
		return t, nil
	}
	a, b := float64(plus), float64(minus)
	n := a + b
	mean := 1 + 2*a*b/n
	sd := math.Sqrt(2 * a * b * (2*a*b - n) / (n * n * (n - 1)))
	z := math.Max(0, math.Abs(float64(runs)-mean)-0.5) / sd
	t.PValue = math.Erfc(z / math.Sqrt2)
	return t, nil
}

// exactRuns sums the probabilities of all counts that are no more probable than
// the observed one.
func exactRuns(a, b, runs int) float64 {
	choose := func(n, k int) float64 { // logarithm
		if k < 0 || k > n {
			return math.Inf(-1)
		}
		x, _ := math.Lgamma(float64(n + 1))
		y, _ := math.Lgamma(float64(k + 1))
		z, _ := math.Lgamma(float64(n - k + 1))
		return x - y - z
	}
	total := choose(a+b, a)
	prob := func(r int) float64 {
		k := r / 2
		if r%2 == 0 {
			return 2 * math.Exp(choose(a-1, k-1)+choose(b-1, k-1)-total)
		}
		return math.Exp(choose(a-1, k)+choose(b-1, k-1)-total) + math.Exp(choose(a-1, k-1)+choose(b-1, k)-total)
	}
	at := prob(runs)
	sum := 0.0
	for r := 2; r <= 2*min(a, b)+1; r++ {
		if p := prob(r); p <= at*(1+1e-9) {
			sum += p
		}
	}
	return math.Min(sum, 1)
}

// AndersonDarling tests whether residuals are normal, with mean and standard
// deviation found from them (Stephens, J. Am. Stat. Assoc. 69 (1974) 730, case
// 3; p-value after D'Agostino and Stephens, Goodness-of-Fit Techniques (1986),
// table 4.9). The statistic is A² with the correction for sample size. At least
// 8 residuals are needed.
func AndersonDarling(residuals []float64) (Test, error) {
	n := len(residuals)
	if n < 8 {
		return Test{}, fmt.Errorf("lsq: the normality test needs at least 8 residuals, there are %d", n)
	}
	if i := notFinite(residuals); i >= 0 {
		return Test{}, fmt.Errorf("lsq: residual %d is %v; the normality test needs finite residuals", i+1, residuals[i])
	}
	s, err := Summarise(residuals)
	if err != nil {
		return Test{}, err
	}
	if s.SD == 0 {
		return Test{}, fmt.Errorf("lsq: all residuals are equal; their normality can't be tested")
	}
	z := make([]float64, n)
	for i, r := range residuals {
		z[i] = (r - s.Mean) / s.SD
	}
	sort.Float64s(z)
	logCDF := func(x float64) float64 { return math.Log(0.5 * math.Erfc(-x/math.Sqrt2)) }
	sum := 0.0
	for i := range z {
		sum += float64(2*i+1) * (logCDF(z[i]) + logCDF(-z[n-1-i]))
	}
	nn := float64(n)
	a := (-nn - sum/nn) * (1 + 0.75/nn + 2.25/(nn*nn))
	return Test{Statistic: a, PValue: andersonDarlingP(a)}, nil
}

// andersonDarlingP is the p-value of the corrected statistic.
func andersonDarlingP(a float64) (p float64) {
	switch {
	case a < 0.2:
		p = 1 - math.Exp(-13.436+101.14*a-223.73*a*a)
	case a < 0.34:
		p = 1 - math.Exp(-8.318+42.796*a-59.938*a*a)
	case a < 0.6:
		p = math.Exp(0.9177 - 4.279*a - 1.38*a*a)
	case a < 13:
		p = math.Exp(1.2937 - 5.709*a + 0.0186*a*a)
	}
	return p
}

// DurbinWatson tests the standardised residuals, in the order of acquisition,
// for correlation of neighbours: d = Σ(r_{i+1} − r_i)²/Σr_i², near 2 when there
// is none. The two-sided p-value uses the beta distribution on 0 … 4 with the
// exact mean and variance of d for this fit's Jacobian (Durbin and Watson,
// Biometrika 38 (1951) 159, sections 3 and 4); with priors they are approximate.
// For correlated readings the residuals are whitened first.
func (r *Result) DurbinWatson() (Test, error) {
	if r.jac == nil {
		return Test{}, fmt.Errorf("lsq: the Durbin–Watson test needs the Jacobian; fit without SkipDiagnostics")
	}
	n, q := len(r.Fitted), len(r.factor)
	if n-q < 3 {
		return Test{}, fmt.Errorf("lsq: %d readings and %d parameters leave too few residuals for the Durbin–Watson test", n, q)
	}
	e := append([]float64(nil), r.Residuals...)
	r.white.apply(e)
	num, den := 0.0, 0.0
	for i, v := range e {
		den += v * v
		if i > 0 {
			num += (v - e[i-1]) * (v - e[i-1])
		}
	}
	if den == 0 {
		return Test{Statistic: math.NaN(), PValue: math.NaN()}, nil
	}
	d := num / den
	// orthonormal basis of the whitened Jacobian
	basis := make([][]float64, q)
	for k, b := range r.factor {
		c := make([]float64, n)
		for l, x := range b {
			if x != 0 {
				for i, v := range r.jac[l] {
					c[i] += x * v
				}
			}
		}
		r.white.apply(c)
		basis[k] = c
	}
	return Test{Statistic: d, PValue: durbinWatsonP(d, n, basis)}, nil
}

// durbinWatsonP is the two-sided p-value of d for n residuals of a fit whose
// whitened Jacobian has the given orthonormal basis. A is the matrix of the
// quadratic form Σ(r_{i+1} − r_i)². With priors the basis is shorter than
// orthonormal, since the readings spend less than a degree of freedom on such a
// parameter: the covariance of the residuals is still 1 − Σccᵀ.
func durbinWatsonP(d float64, n int, basis [][]float64) float64 {
	q := len(basis)
	mul := func(x []float64) []float64 {
		y := make([]float64, n)
		for i := 1; i < n; i++ {
			t := x[i] - x[i-1]
			y[i] += t
			y[i-1] -= t
		}
		return y
	}
	spent := 0.0
	for _, c := range basis {
		spent += dot(c, c)
	}
	if math.Abs(spent-float64(q)) < 1e-6 {
		spent = float64(q)
	}
	nn, m := float64(n), float64(n)-spent
	s1, s2 := 2*(nn-1), 6*nn-8
	ab := make([][]float64, q)
	for k, c := range basis {
		ab[k] = mul(c)
		s1 -= dot(c, ab[k])
		s2 -= 2 * dot(ab[k], ab[k])
	}
	for k := range basis {
		for l := range basis {
			t := dot(basis[k], ab[l])
			s2 += t * t
		}
	}
	mean := s1 / m
	variance := 2 * (s2 - m*mean*mean) / (m * (m + 2))
	// beta distribution of d/4
	mu, v := mean/4, variance/16
	common := mu*(1-mu)/v - 1
	if !(v > 0) || !(common > 0) {
		return math.NaN()
	}
	p := mathext.RegIncBeta(mu*common, (1-mu)*common, math.Min(d/4, 1))
	return math.Min(1, 2*math.Min(p, 1-p))
}

// fTail is the probability that F(a, b) exceeds x.
func fTail(x, a, b float64) float64 {
	if math.IsNaN(x) || a <= 0 || b <= 0 {
		return math.NaN()
	}
	if math.IsInf(x, 1) {
		return 0
	}
	return distuv.F{D1: a, D2: b}.Survival(x)
}
