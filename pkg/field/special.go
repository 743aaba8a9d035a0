package field

import (
	"gonum.org/v1/gonum/mathext"
)

// hurwitz is ζ(s, q) for s > 1 and q > 0.
func hurwitz(s, q float64) float64 { return mathext.Zeta(s, q) }

// digamma is ψ(x).
func digamma(x float64) float64 { return mathext.Digamma(x) }
