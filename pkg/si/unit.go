package si

import (
	"math"
	"math/big"
)

// Unit is a unit of measurement: SI value = Factor × x + Offset, where x is the
// number that stands before the unit. Units are values and compare with ==
// (same writing, same unit). The zero Unit is the unit one.
type Unit struct {
	Symbol string    // as written, blanks tidied; "1" for pure numbers; ParseUnit reads it back
	Dim    Dimension // of the quantity measured in it
	Factor float64   // SI units per unit, nearest double
	Offset float64   // SI value of the unit's zero: 273.15 for degC, otherwise 0

	// The exact factor num/den × 10^exp, so that conversions are rounded once:
	// 3.3 mm is 3.3/1000 m, the nearest double to 0.0033, which 3.3 × 0.001 is
	// not. den is 0 when the factor is not rational (degrees of arc) or the
	// Unit was made by hand; then Factor is all there is.
	num, den float64
	exp      int
}

// One is the unit of pure numbers.
var One = Unit{Symbol: "1", Factor: 1, num: 1, den: 1}

// ToSI converts x in unit u to SI, with one correct rounding where the factor
// is rational (all units but the degrees of arc). degC adds its offset as a
// double, so that −273.15 is 0 K.
func (u Unit) ToSI(x float64) float64 {
	if u.Offset != 0 {
		return u.DeltaToSI(x) + u.Offset
	}
	return u.DeltaToSI(x)
}

// FromSI converts the SI value x to unit u, the inverse of ToSI up to one
// rounding.
func (u Unit) FromSI(x float64) float64 {
	if u.Offset != 0 {
		return u.DeltaFromSI(x - u.Offset)
	}
	return u.DeltaFromSI(x)
}

// offsetText is the offset as the exact decimal of the table; "" for a Unit
// made by hand.
func (u Unit) offsetText() string {
	if u.Offset == ZeroCelsius && u.num == 1 && u.den == 1 && u.exp == 0 {
		return "273.15"
	}
	return ""
}

// DeltaToSI converts a difference, an interval or an uncertainty from unit u to
// SI: the offset plays no part, so that u = 0.5 degC is 0.5 K.
func (u Unit) DeltaToSI(x float64) float64 {
	if u.den == 0 {
		if u.Factor == 0 {
			return x // the zero Unit is one
		}
		return x * u.Factor
	}
	return scale(x, u.num, u.den, u.exp)
}

// DeltaFromSI converts a difference, an interval or an uncertainty from SI to
// unit u.
func (u Unit) DeltaFromSI(x float64) float64 {
	if u.den == 0 {
		if u.Factor == 0 {
			return x
		}
		return x / u.Factor
	}
	return scale(x, u.den, u.num, -u.exp)
}

// pow10 holds the powers of ten that doubles hold exactly.
var pow10 = [23]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// scale returns x × num/den × 10^exp rounded once, to nearest even. num and den
// are positive integers below 2^53.
func scale(x, num, den float64, exp int) float64 {
	if num == 1 && den == 1 {
		switch {
		case exp == 0:
			return x
		case 0 < exp && exp < len(pow10):
			return x * pow10[exp]
		case exp < 0 && -exp < len(pow10):
			return x / pow10[-exp]
		}
	} else if exp == 0 && den == 1 {
		return x * num
	} else if exp == 0 && num == 1 {
		return x / den
	}
	if x == 0 || math.IsNaN(x) || math.IsInf(x, 0) {
		return x
	}
	r := new(big.Rat).SetFloat64(x)
	f, _ := r.Mul(r, ratio(num, den, exp)).Float64()
	return f // ±Inf beyond the range, as the multiplication would give
}

// ratio returns num/den × 10^exp exactly.
func ratio(num, den float64, exp int) *big.Rat {
	a, b := big.NewInt(int64(num)), big.NewInt(int64(den))
	ten := new(big.Int).Exp(big.NewInt(10), big.NewInt(int64(max(exp, -exp))), nil)
	if exp >= 0 {
		a.Mul(a, ten)
	} else {
		b.Mul(b, ten)
	}
	return new(big.Rat).SetFrac(a, b)
}
