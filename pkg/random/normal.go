package random

import (
	"math"
)

// The ziggurat of Marsaglia and Tsang, "The ziggurat method for generating
// random variables", J. Statist. Softw. 5 (2000) no. 8, in the layout of
// Doornik, "An improved ziggurat method to generate normal random samples"
// (2005): the layer comes from bits that take no part in the abscissa. Here one
// 64-bit word gives eight bits of layer and a signed abscissa of 55 bits, odd,
// so that it is never zero and the two signs mirror each other exactly.
const (
	layers   = 256
	fraction = 1 << 54 // the abscissa is an odd integer in (−2^54, 2^54)
)

// A ziggurat covers a symmetric unimodal density with equal-area layers.
type ziggurat struct {
	accept [layers]int64       // integers below this in absolute value lie under the density
	width  [layers]float64     // layer width per unit of the integer
	height [layers + 1]float64 // density, 1 at the mode, at the right end of each layer
}

// newZiggurat lays out the layers with right ends x, from the base strip's
// equivalent width x[0] to x[layers] = 0, and density f at them.
func newZiggurat(x *[layers + 1]float64, f func(float64) float64) *ziggurat {
	var z ziggurat
	for i := range layers {
		z.accept[i] = int64(x[i+1] / x[i] * fraction)
		z.width[i] = x[i] / fraction
		z.height[i] = f(x[i])
	}
	z.height[layers] = f(x[layers])
	return &z
}

var normalZiggurat = newZiggurat(&normalLayers, func(x float64) float64 { return math.Exp(-0.5 * x * x) })

// Normal returns a number with the standard normal distribution. Abscissae have
// 54 random bits; beyond 3.654 the tail is drawn exactly (Marsaglia, "Generating
// a variable from the tail of the normal distribution", Technometrics 6 (1964)
// 101–102), so that it is right at 6σ and beyond.
func (s *Source) Normal() float64 {
	u := s.Uint64()
	i := u & (layers - 1)
	j := int64(u)>>9 | 1
	x := float64(j) * normalZiggurat.width[i]
	if max(j, -j) < normalZiggurat.accept[i] {
		return x
	}
	return s.normalSlow(i, x)
}

// normalSlow finishes a draw that fell outside the rectangle of layer i, at x.
func (s *Source) normalSlow(i uint64, x float64) float64 {
	z := normalZiggurat
	for {
		if i == 0 {
			return math.Copysign(s.normalTail(), x)
		}
		if z.height[i]+s.Float64()*(z.height[i+1]-z.height[i]) < math.Exp(-0.5*x*x) {
			return x
		}
		u := s.Uint64()
		i = u & (layers - 1)
		j := int64(u)>>9 | 1
		x = float64(j) * z.width[i]
		if max(j, -j) < z.accept[i] {
			return x
		}
	}
}

// normalTail returns a standard normal number conditional on exceeding the
// right end of the base strip.
func (s *Source) normalTail() float64 {
	r := normalLayers[1]
	for {
		a := s.Exponential() / r
		if b := s.Exponential(); b+b > a*a {
			return r + a
		}
	}
}
