package gum

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/random"
)

// The shapes a Distribution can have: those of JCGM 101:2008 table 1, the
// trapezoid with inexact limits of its 6.4.3, and no uncertainty at all.
const (
	ShapeExact       = "exact"
	ShapeNormal      = "normal"
	ShapeT           = "t"
	ShapeRectangular = "rectangular"
	ShapeTriangular  = "triangular"
	ShapeTrapezoidal = "trapezoidal"
	ShapeCurvilinear = "curvilinear-trapezoid"
	ShapeArcsine     = "arcsine"
	ShapeExponential = "exponential"
	ShapeGamma       = "gamma"
)

// Shapes lists the shapes by name, in the order of the constants.
func Shapes() []string {
	return []string{ShapeExact, ShapeNormal, ShapeT, ShapeRectangular, ShapeTriangular, ShapeTrapezoidal,
		ShapeCurvilinear, ShapeArcsine, ShapeExponential, ShapeGamma}
}

// A Distribution is the state of knowledge about one input, in the input's SI
// unit. Make one with a constructor. The zero Distribution is exactly 0.
type Distribution struct {
	Shape string  // one of the Shape constants; "" is exact
	Value float64 // best estimate; the centre of symmetric shapes, the expectation of others
	U     float64 // standard uncertainty for the law; for t the scale s (see StudentT)
	DOF   float64 // degrees of freedom of U; +Inf when U is known, 0 is read as +Inf
	Half  float64 // half-width: rectangular, triangular, trapezoidal, arcsine, curvilinear-trapezoid
	Beta  float64 // trapezoidal: width of the top over width of the base, 0 to 1
	D     float64 // curvilinear-trapezoid: half-width of the limits' own uncertainty
	Gamma float64 // gamma: the shape parameter; the scale is Value/Gamma

	// Readings taken together are drawn from a multivariate t whose scale and degrees of
	// freedom differ from what the law uses (see JointReadings); 0 means as U, DOF.
	drawScale, drawDOF float64
}

// Exactly returns the value v without uncertainty.
func Exactly(v float64) Distribution {
	return Distribution{Shape: ShapeExact, Value: v, DOF: math.Inf(1)}
}

// Normal returns N(v, u²): an estimate v with a known standard uncertainty u
// (JCGM 101:2008 6.4.7). Give it a finite DOF and Monte Carlo draws from
// the t distribution scaled by u with as many degrees of freedom, since u is then
// itself an estimate (JCGM 101:2008 6.4.9.7).
func Normal(v, u float64) Distribution {
	return Distribution{Shape: ShapeNormal, Value: v, U: u, DOF: math.Inf(1)}
}

// StudentT returns the scaled and shifted t distribution t_dof(v, s²) of JCGM
// 101:2008 6.4.9. U is the scale s with dof degrees of freedom, as the law of
// propagation takes a Type A evaluation; the standard deviation of the
// distribution is s·√(dof/(dof−2)) and StandardDeviation returns it. With dof ≤ 2
// there is none: the law refuses the input, Monte Carlo gives intervals only.
func StudentT(v, s, dof float64) Distribution {
	return Distribution{Shape: ShapeT, Value: v, U: s, DOF: dof}
}

// Rectangular returns R(v−half, v+half) (JCGM 101:2008 6.4.2): u = half/√3.
func Rectangular(v, half float64) Distribution {
	return Distribution{Shape: ShapeRectangular, Value: v, U: half / math.Sqrt(3), DOF: math.Inf(1), Half: half}
}

// Triangular returns T(v−half, v+half) (JCGM 101:2008 6.4.5): u = half/√6.
func Triangular(v, half float64) Distribution {
	return Distribution{Shape: ShapeTriangular, Value: v, U: half / math.Sqrt(6), DOF: math.Inf(1), Half: half}
}

// Trapezoidal returns the symmetric trapezoid Trap(v−half, v+half, beta) (JCGM
// 101:2008 6.4.4): beta is the width of its top over that of its base;
// u = half·√((1+beta²)/6).
func Trapezoidal(v, half, beta float64) Distribution {
	return Distribution{Shape: ShapeTrapezoidal, Value: v, U: half * math.Sqrt((1+beta*beta)/6), DOF: math.Inf(1),
		Half: half, Beta: beta}
}

// CurvilinearTrapezoidal returns CTrap(a, b, d) (JCGM 101:2008 6.4.3): limits a < b
// each known to ±d only, their sum fixed; u² = (b−a)²/12 + d²/9. Its degrees of
// freedom for the law are those of a half-width w = (b−a)/2 known to d/w, w²/2d²
// (JCGM 100:2008 equation (G.3)).
func CurvilinearTrapezoidal(a, b, d float64) Distribution {
	half := (b - a) / 2
	return Distribution{Shape: ShapeCurvilinear, Value: a + half, U: math.Sqrt(half*half/3 + d*d/9), DOF: half * half / (2 * d * d),
		Half: half, D: d}
}

// Arcsine returns U(v−half, v+half) (JCGM 101:2008 6.4.6), the distribution of a
// sine of amplitude half at an unknown phase: u = half/√2.
func Arcsine(v, half float64) Distribution {
	return Distribution{Shape: ShapeArcsine, Value: v, U: half / math.Sqrt2, DOF: math.Inf(1), Half: half}
}

// Exponential returns Ex(1/v) (JCGM 101:2008 6.4.10): a quantity that can't be negative
// of which only the estimate v > 0 is known; u = v.
func Exponential(v float64) Distribution {
	return Distribution{Shape: ShapeExponential, Value: v, U: v, DOF: math.Inf(1)}
}

// Gamma returns the gamma distribution of a shape parameter and a scale:
// expectation shape·scale, u = √shape·scale.
func Gamma(shape, scale float64) Distribution {
	return Distribution{Shape: ShapeGamma, Value: shape * scale, U: math.Sqrt(shape) * scale, DOF: math.Inf(1), Gamma: shape}
}

// Counted returns G(q+1, 1), the knowledge of the mean of a Poisson count after q
// objects were counted (JCGM 101:2008 6.4.11): expectation and variance q+1.
func Counted(q float64) Distribution { return Gamma(q+1, 1) }

// dof is DOF with the zero value read as infinite.
func (d *Distribution) dof() float64 {
	if d.DOF == 0 {
		return math.Inf(1)
	}
	return d.DOF
}

// draw returns scale and degrees of freedom of the t (or, when infinite, normal)
// distribution that a normal or t input is drawn from.
func (d *Distribution) draw() (scale, dof float64) {
	scale, dof = d.U, d.dof()
	if d.drawScale > 0 {
		scale = d.drawScale
	}
	if d.drawDOF > 0 {
		dof = d.drawDOF
	}
	return scale, dof
}

// IsExact reports whether d carries no uncertainty.
func (d Distribution) IsExact() bool { return d.Shape == ShapeExact || d.Shape == "" }

// StandardDeviation returns the standard deviation of the distribution that
// trials are drawn from; +Inf for t with at most two degrees of freedom.
func (d Distribution) StandardDeviation() float64 {
	if d.Shape != ShapeNormal && d.Shape != ShapeT {
		return d.U
	}
	scale, dof := d.draw()
	switch {
	case math.IsInf(dof, 1):
		return scale
	case dof <= 2:
		return math.Inf(1)
	}
	return scale * math.Sqrt(dof/(dof-2))
}

// Check reports what is wrong with d, and what would be right.
func (d Distribution) Check() error {
	if math.IsNaN(d.Value) || math.IsInf(d.Value, 0) {
		return fmt.Errorf("value is %v: it must be a finite number", d.Value)
	}
	if d.IsExact() {
		if d.U != 0 {
			return fmt.Errorf("standard uncertainty %v on an exact value: give it a shape", d.U)
		}
		return nil
	}
	positive := func(name string, x float64) error {
		if !(x > 0) || math.IsInf(x, 1) {
			return fmt.Errorf("%s is %v: it must be positive and finite (for a value without uncertainty use the exact shape)", name, x)
		}
		return nil
	}
	name := "standard uncertainty"
	if d.Shape == ShapeT {
		name = "scale"
	}
	if d.DOF < 0 || math.IsNaN(d.DOF) {
		return fmt.Errorf("degrees of freedom are %v: they must be positive, or +Inf when the uncertainty is known", d.DOF)
	}
	switch d.Shape {
	case ShapeNormal, ShapeT:
		return positive(name, d.U)
	case ShapeRectangular, ShapeTriangular, ShapeArcsine:
		return positive("half-width", d.Half)
	case ShapeTrapezoidal:
		if !(d.Beta >= 0 && d.Beta <= 1) {
			return fmt.Errorf("beta is %v: top over base of a trapezoid lies between 0 (triangle) and 1 (rectangle)", d.Beta)
		}
		return positive("half-width", d.Half)
	case ShapeCurvilinear:
		if !(d.D >= 0 && d.D <= d.Half) {
			return fmt.Errorf("the limits are uncertain by ±%v: that lies between 0 and the half-width %v", d.D, d.Half)
		}
		return positive("half-width", d.Half)
	case ShapeExponential:
		return positive("value", d.Value)
	case ShapeGamma:
		if err := positive("shape parameter", d.Gamma); err != nil {
			return err
		}
		return positive("value", d.Value)
	}
	return fmt.Errorf("unknown shape %q; known are %v", d.Shape, Shapes())
}

// Sample draws one value.
func (d *Distribution) Sample(src *random.Source) float64 {
	switch d.Shape {
	case ShapeNormal, ShapeT:
		scale, dof := d.draw()
		return d.Value + scale*src.StudentT(dof)
	case ShapeRectangular:
		lo, hi := d.Value-d.Half, d.Value+d.Half
		return lo + (hi-lo)*src.Float64()
	case ShapeTriangular: // JCGM 101:2008 6.4.5.4
		return d.Value + d.Half*(src.Float64()+src.Float64()-1)
	case ShapeTrapezoidal: // JCGM 101:2008 6.4.4.4
		return d.Value + d.Half*((1+d.Beta)*src.Float64()+(1-d.Beta)*src.Float64()-1)
	case ShapeCurvilinear: // JCGM 101:2008 6.4.3.4: the half-width is uniform within ±d
		w := d.Half + d.D*(2*src.Float64()-1)
		return d.Value + w*(2*src.Float64()-1)
	case ShapeArcsine:
		return d.Value + d.Half*src.Arcsine()
	case ShapeExponential: // JCGM 101:2008 6.4.10.4
		return d.Value * src.Exponential()
	case ShapeGamma:
		return d.Value / d.Gamma * src.Gamma(d.Gamma)
	}
	return d.Value
}

// Fill fills dst with draws: the same numbers that as many calls of Sample give,
// faster.
func (d *Distribution) Fill(src *random.Source, dst []float64) {
	switch d.Shape {
	case ShapeNormal, ShapeT:
		scale, dof := d.draw()
		src.FillStudentT(dst, dof, d.Value, scale)
	case ShapeRectangular:
		src.FillUniformIn(dst, d.Value-d.Half, d.Value+d.Half)
	case ShapeArcsine:
		src.FillArcsine(dst, d.Value, d.Half)
	default:
		for i := range dst {
			dst[i] = d.Sample(src)
		}
	}
}
