package field

import (
	"math"

	"gonum.org/v1/gonum/mathext"
)

// hurwitz is ζ(s, q) for s > 1 and q > 0.
func hurwitz(s, q float64) float64 { return mathext.Zeta(s, q) }

// polygamma returns ψ(x) and its first three derivatives for x > 0, to 1e-15 of
// their size (ψ near its zero: of 1), by their recurrences (NIST DLMF 5.5.2,
// 5.15.5) up to 12 and asymptotic series (5.11.2, 5.15.8). The library's Digamma
// stops at 1e-11, too little for coefficients whose differences are forces.
func polygamma(x float64) (p [4]float64) {
	for x < 12 {
		r := 1 / x
		r2 := r * r
		p[0] -= r
		p[1] += r2
		p[2] -= 2 * r2 * r
		p[3] += 6 * r2 * r2
		x++
	}
	r := 1 / x
	y := r * r
	var a, b, c, d float64
	for k := 7; k >= 1; k-- {
		n, v := float64(2*k), bernoulli[2*k]
		a = (a + v/n) * y
		b = (b + v) * y
		c = (c + (n+1)*v) * y
		d = (d + (n+1)*(n+2)*v) * y
	}
	p[0] += math.Log(x) - 0.5*r - a
	p[1] += r + 0.5*y + b*r
	p[2] -= y + y*r + c*y
	p[3] += 2*y*r + 3*y*y + d*y*r
	return p
}

// digamma is ψ(x) for x > 0.
func digamma(x float64) float64 { return polygamma(x)[0] }
