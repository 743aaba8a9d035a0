package si

import (
	"math"
	"strings"
)

// twelfths is the denominator common to all exponents of a Dimension: halves,
// thirds, quarters and sixths are exact.
const twelfths = 12

// base lists the base units in the order in which Dimension keeps exponents
// and in which they are printed.
var base = [7]string{"kg", "m", "s", "A", "K", "mol", "cd"}

// Dimension is the dimension of a quantity: the exponents of the seven SI base
// units. They are rational, so that the square root of any dimension is one.
// The zero Dimension is that of a pure number. Dimensions compare with ==.
//
// Plane and solid angle have the dimension one, as in the SI Brochure (9th
// edition) section 2.3.3.
type Dimension struct {
	e [7]int16 // in twelfths, order of base
}

// Dimensions of quantities that guardring meets.
var (
	Dimensionless = Dimension{}
	Angle         = Dimension{}
	Mass          = dim(1, 0, 0, 0)
	Length        = dim(0, 1, 0, 0)
	Time          = dim(0, 0, 1, 0)
	Current       = dim(0, 0, 0, 1)
	Temperature   = Dimension{e: [7]int16{4: twelfths}}
	Amount        = Dimension{e: [7]int16{5: twelfths}}
	Luminous      = Dimension{e: [7]int16{6: twelfths}}

	Area          = dim(0, 2, 0, 0)
	Volume        = dim(0, 3, 0, 0)
	Frequency     = dim(0, 0, -1, 0)
	Velocity      = dim(0, 1, -1, 0)
	Acceleration  = dim(0, 1, -2, 0)
	Density       = dim(1, -3, 0, 0)
	Force         = dim(1, 1, -2, 0)
	Torque        = dim(1, 2, -2, 0)
	Pressure      = dim(1, -1, -2, 0)
	Energy        = dim(1, 2, -2, 0)
	Power         = dim(1, 2, -3, 0)
	Charge        = dim(0, 0, 1, 1)
	Voltage       = dim(1, 2, -3, -1)
	Field         = dim(1, 1, -3, -1) // V/m
	Capacitance   = dim(-1, -2, 4, 2) // F
	Permittivity  = dim(-1, -3, 4, 2) // F/m
	Resistance    = dim(1, 2, -3, -2) // Ω
	Conductivity  = dim(-1, -3, 3, 2) // S/m
	Inductance    = dim(1, 2, -2, -2) // H
	FluxDensity   = dim(1, 0, -2, -1) // T
	SurfaceCharge = dim(0, -2, 1, 1)  // C/m², charge on a surface
)

func dim(kg, m, s, a int16) Dimension {
	return Dimension{e: [7]int16{kg * twelfths, m * twelfths, s * twelfths, a * twelfths}}
}

// Mul returns the dimension of a product of quantities of dimensions d and x.
func (d Dimension) Mul(x Dimension) Dimension {
	for i := range d.e {
		d.e[i] = clamp16(int(d.e[i]) + int(x.e[i]))
	}
	return d
}

// Div returns the dimension of a quotient of quantities of dimensions d and x.
func (d Dimension) Div(x Dimension) Dimension {
	for i := range d.e {
		d.e[i] = clamp16(int(d.e[i]) - int(x.e[i]))
	}
	return d
}

// Pow returns the dimension of the num/den-th power of a quantity of dimension
// d. Exponents are kept in twelfths; where that can't be exact, Root says so.
// A den of 0 gives the dimension one.
func (d Dimension) Pow(num, den int) Dimension {
	r, _ := d.Root(num, den)
	return r
}

// Root is Pow, and reports whether the result is exact: false when an exponent
// is no multiple of one twelfth, or too large to hold, or den is 0.
func (d Dimension) Root(num, den int) (Dimension, bool) {
	if den == 0 {
		return Dimension{}, false
	}
	exact := true
	for i := range d.e {
		if d.e[i] == 0 {
			continue
		}
		if num > math.MaxInt16 || num < math.MinInt16 || den > math.MaxInt16 || den < math.MinInt16 {
			return Dimension{}, false
		}
		p := int(d.e[i]) * num
		q := p / den
		exact = exact && q*den == p && q == int(clamp16(q))
		d.e[i] = clamp16(q)
	}
	return d, exact
}

// clamp16 keeps absurd exponents from wrapping round to plausible ones.
func clamp16(x int) int16 {
	return int16(min(max(x, math.MinInt16), math.MaxInt16))
}

// IsOne reports whether d is the dimension of a pure number.
func (d Dimension) IsOne() bool { return d == Dimension{} }

// String returns d as a product of base units, "kg m s⁻²", and "1" for a pure
// number. Fractional exponents are written "m^(1/2)".
func (d Dimension) String() string {
	var b strings.Builder
	for i, e := range d.e {
		if e == 0 {
			continue
		}
		if b.Len() > 0 {
			b.WriteByte(' ')
		}
		b.WriteString(base[i])
		writePower(&b, int(e), twelfths, true)
	}
	if b.Len() == 0 {
		return "1"
	}
	return b.String()
}

// named are the units in which people know a dimension; Unit looks here.
var named = []struct {
	dim  Dimension
	unit string
}{
	{Dimensionless, "1"}, {Mass, "kg"}, {Length, "m"}, {Time, "s"}, {Current, "A"}, {Temperature, "K"},
	{Amount, "mol"}, {Luminous, "cd"}, {Area, "m²"}, {Volume, "m³"}, {Frequency, "Hz"}, {Velocity, "m/s"},
	{Acceleration, "m/s²"}, {Density, "kg/m³"}, {Force, "N"}, {Pressure, "Pa"}, {Energy, "J"}, {Power, "W"},
	{Charge, "C"}, {Voltage, "V"}, {Field, "V/m"}, {Capacitance, "F"}, {Permittivity, "F/m"},
	{Resistance, "Ω"}, {Conductivity, "S/m"}, {Inductance, "H"}, {FluxDensity, "T"}, {SurfaceCharge, "C/m²"},
	{Dimensionless.Div(Permittivity), "N m²/C²"}, // Coulomb's constant
}

// Unit returns the coherent SI unit of d under the name that people know it
// by: "V/m" for a field, "F/m" for a permittivity; a product of base units when
// the dimension has none. (A torque is printed like an energy, in J.)
func (d Dimension) Unit() Unit {
	for _, n := range named {
		if n.dim == d {
			return Unit{Symbol: n.unit, Dim: d, Factor: 1, num: 1, den: 1}
		}
	}
	return Unit{Symbol: d.String(), Dim: d, Factor: 1, num: 1, den: 1}
}
