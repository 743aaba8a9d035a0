package field

import (
	"math"

	"gonum.org/v1/gonum/mathext"
)

// hurwitz is ζ(s, q) for s > 1 and q > 0.
func hurwitz(s, q float64) float64 { return mathext.Zeta(s, q) }

// digamma is ψ(x) for x > 0, to 1e-15 of its size (near its zero, of 1): the
// recurrence NIST DLMF 5.5.2 up to 12 and the asymptotic series 5.11.2. The
// library's Digamma stops at 1e-11, too little for coefficients whose
// differences are forces.
func digamma(x float64) float64 {
	shift := 0.0
	for x < 12 {
		shift += 1 / x
		x++
	}
	y := 1 / (x * x)
	sum := 0.0
	for k := 7; k >= 1; k-- {
		sum = (sum + bernoulli[2*k]/float64(2*k)) * y
	}
	return math.Log(x) - 0.5/x - sum - shift
}
