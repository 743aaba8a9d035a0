package gum

import (
	"math"

	"gonum.org/v1/gonum/mathext"
)

// Quantile returns the value that the distribution stays below with probability
// p, 0 < p < 1; NaN for a p outside or a distribution that Check refuses.
func (d Distribution) Quantile(p float64) float64 {
	if !(p > 0 && p < 1) || d.Check() != nil {
		return math.NaN()
	}
	if p <= 0.5 {
		return d.quantile(p, -1)
	}
	return d.quantile(1-p, 1)
}

// quantileNormal returns the quantile at the probability Φ(z): the map by which a
// Gaussian copula turns a normal into this distribution. Both tails keep their
// digits.
func (d *Distribution) quantileNormal(z float64) float64 {
	side := 1.0
	if z < 0 {
		side = -1
	}
	if d.Shape == ShapeNormal || d.Shape == ShapeT {
		if scale, dof := d.draw(); math.IsInf(dof, 1) {
			return d.Value + scale*z
		}
	}
	return d.quantile(0.5*math.Erfc(math.Abs(z)/math.Sqrt2), side)
}

// quantile returns the value with probability q ≤ 1/2 beyond it on the given
// side, −1 below or +1 above.
func (d *Distribution) quantile(q, side float64) float64 {
	switch d.Shape {
	case ShapeNormal, ShapeT:
		scale, dof := d.draw()
		return d.Value + side*scale*tUpper(q, dof)
	case ShapeRectangular:
		return d.Value + side*d.Half*(1-2*q)
	case ShapeTriangular:
		return d.Value + side*d.Half*(1-math.Sqrt(2*q))
	case ShapeTrapezoidal:
		// Density 1/(half(1+β)) over the top, falling linearly over a width half(1−β).
		if slope := (1 - d.Beta) / (2 * (1 + d.Beta)); q < slope { // mass of one slope
			return d.Value + side*d.Half*(1-math.Sqrt(2*q*(1-d.Beta*d.Beta)))
		}
		return d.Value + side*d.Half*(1+d.Beta)*(0.5-q)
	case ShapeCurvilinear:
		return d.Value + side*d.curvilinear(1-2*q)
	case ShapeArcsine:
		return d.Value + side*d.Half*math.Cos(math.Pi*q)
	case ShapeExponential:
		if side > 0 {
			return -d.Value * math.Log(q)
		}
		return -d.Value * math.Log1p(-q)
	case ShapeGamma:
		if side > 0 {
			return d.Value / d.Gamma * mathext.GammaIncRegCompInv(d.Gamma, q)
		}
		return d.Value / d.Gamma * mathext.GammaIncRegInv(d.Gamma, q)
	}
	return d.Value
}

// curvilinear returns the distance s from the centre within which the
// curvilinear trapezoid has probability m. With w the half-width and
// c = w + d its density is ln(c/max(|x|, w−d))/4d (JCGM 101:2008 6.4.3.2), so that
// m = s·ln(c/(w−d))/2d up to w − d and m = (s ln(c/s) + s − (w−d))/2d beyond
// (derived by integration).
func (d *Distribution) curvilinear(m float64) float64 {
	w, e := d.Half, d.D
	if e < 1e-9*w { // the logarithm has lost its digits, and the shape is a rectangle to 1e-9
		return m * w
	}
	c, top := w+e, w-e
	if top > 0 {
		if l := math.Log(c / top); m*2*e <= top*l {
			return m * 2 * e / l
		}
	}
	target := 2*e*m + top
	lo, hi := max(top, 0), c
	s := lo + (hi-lo)/2
	for range 200 {
		f := s*math.Log(c/s) + s - target
		if f > 0 {
			hi = s
		} else {
			lo = s
		}
		next := s - f/math.Log(c/s)
		if !(next > lo && next < hi) {
			next = lo + (hi-lo)/2
		}
		if math.Abs(next-s) <= 1e-15*c {
			return next
		}
		s = next
	}
	return s
}
