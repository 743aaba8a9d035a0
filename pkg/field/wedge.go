package field

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/jet"
)

// Shape is the outline of a plate, or of a meter's head over a plate.
type Shape int

const (
	// Rectangle tilts about a line parallel to one side.
	Rectangle Shape = iota
	// Disc tilts about a diameter.
	Disc
)

// String returns the name that a bench uses.
func (s Shape) String() string {
	switch s {
	case Rectangle:
		return "rectangle"
	case Disc:
		return "disc"
	}
	return fmt.Sprintf("Shape(%d)", int(s))
}

// Effect is what a correction acts on.
type Effect int

const (
	// OnField is the mean field over the plate, and so its charge.
	OnField Effect = iota
	// OnForce is the force on the plate.
	OnForce
)

// String returns the name that a bench uses.
func (e Effect) String() string {
	switch e {
	case OnField:
		return "field"
	case OnForce:
		return "force"
	}
	return fmt.Sprintf("Effect(%d)", int(e))
}

// WedgeLimit is the largest half-difference over spacing Δ/d for which the
// second-order wedge factor is offered; what it leaves out is below 1.1e-4.
const WedgeLimit = 0.1

// WedgeCoefficient returns c of the wedge correction c Δ²/d²: on the mean field
// 1/3 for a rectangle and 1/4 for a disc, on the force 1 and 3/4. Derived:
// averages of 1/(d+Δx) and 1/(d+Δx)² over the plate, to second order.
func WedgeCoefficient(shape Shape, on Effect) (float64, error) {
	switch {
	case shape == Rectangle && on == OnField:
		return 1.0 / 3, nil
	case shape == Rectangle && on == OnForce:
		return 1, nil
	case shape == Disc && on == OnField:
		return 1.0 / 4, nil
	case shape == Disc && on == OnForce:
		return 3.0 / 4, nil
	}
	return 0, fmt.Errorf("wedge: no coefficient for %v and %v; shapes are rectangle and disc, effects field and force", shape, on)
}

// WedgeFactor returns 1 + cΔ²/d², the factor by which plates that are not
// parallel raise the mean field or the force; delta is half the difference of
// spacing over the plate (for a meter: over its head), d the mean spacing (m).
// Refused for Δ/d above WedgeLimit. The correction is even and one-sided:
// carry it as itself (WedgeMean), not as a zero with a first-order uncertainty.
func WedgeFactor(shape Shape, on Effect, delta, d float64) (float64, error) {
	if err := wedgeChecks(delta, d); err != nil {
		return 0, err
	}
	c, err := WedgeCoefficient(shape, on)
	if err != nil {
		return 0, err
	}
	return 1 + c*(delta/d)*(delta/d), nil
}

// WedgeFactorJet is WedgeFactor for the coefficient c of WedgeCoefficient, with
// derivatives.
func WedgeFactorJet(c float64, delta, d jet.Jet) jet.Jet {
	return delta.Div(d).Sqr().Scale(c).Plus(1)
}

// WedgeMean returns expectation and standard uncertainty of the correction
// c Δ²/d² when Δ is known only to lie within ±half (m), rectangular:
// c·half²/3d² and 2c·half²/(3√5 d²). Derived: moments of Δ².
func WedgeMean(c, half, d float64) (mean, u float64, err error) {
	if err := wedgeChecks(half, d); err != nil {
		return 0, 0, err
	}
	x := c * (half / d) * (half / d)
	return x / 3, 2 * x / (3 * math.Sqrt(5)), nil
}

// WedgeExact returns the wedge factor without the truncation of WedgeFactor,
// for any Δ below d: averages of d/(d+Δx) and d²/(d+Δx)² over the plate.
// Derived; with y = Δ/d and s = √(1−y²) they are artanh(y)/y and 1/s² for a
// rectangle, 2/(1+s) and 2/(s(1+s)) for a disc.
func WedgeExact(shape Shape, on Effect, delta, d float64) (float64, error) {
	if err := refuse("wedge", positive("spacing", d, "m"), finite("half-difference", delta, "m"),
		that("half-difference / spacing", math.Abs(delta)/d, "1", math.Abs(delta) < d, "less than 1: the plates must not touch")); err != nil {
		return 0, err
	}
	if _, err := WedgeCoefficient(shape, on); err != nil {
		return 0, err
	}
	y := delta / d
	s := math.Sqrt((1 - y) * (1 + y))
	switch {
	case shape == Rectangle && on == OnForce:
		return 1 / (s * s), nil
	case shape == Rectangle:
		if math.Abs(y) < 1e-4 {
			return 1 + y*y/3, nil
		}
		return math.Atanh(y) / y, nil
	case on == OnForce:
		return 2 / (s * (1 + s)), nil
	}
	return 2 / (1 + s), nil
}

func wedgeChecks(delta, d float64) error {
	return refuse("wedge", positive("spacing", d, "m"), finite("half-difference", delta, "m"),
		atMost("half-difference / spacing", math.Abs(delta)/d, WedgeLimit))
}
