package certificate

import (
	"math"
	"strconv"
	"strings"

	"example.org/guardring/pkg/si"
)

// Quantity is a number as the certificate states it. The texts have a point, a
// hyphen as minus and no exponent; they are what every form prints.
type Quantity struct {
	Name     string
	Doc      string  // what it is, in words
	Unit     si.Unit // of Value and Expanded
	Value    string
	Expanded string // expanded uncertainty; "" when none is stated
	K        string // coverage factor
	Raised   bool   // the uncertainty was raised to the stated capability
	// SI values behind the texts.
	value, expanded, k float64
}

// capability is an expanded uncertainty below which none is stated.
type capability struct {
	u, relative float64 // SI; one of them is 0
	k           float64
}

// least returns the capability at a value.
func (c *capability) least(value float64) float64 {
	if c == nil {
		return 0
	}
	return math.Max(c.u, c.relative*math.Abs(value))
}

// quantity states a value with standard uncertainty u and coverage factor k, all
// SI, in a unit.
func quantity(name, doc string, value, u, k float64, unit si.Unit, c *capability) Quantity {
	q := Quantity{Name: name, Doc: doc, Unit: unit, value: value, expanded: k * u, k: k}
	least := c.least(value)
	if q.expanded < least {
		q.expanded, q.k, q.Raised = least, c.k, true
	}
	q.Value, q.Expanded = round(unit.FromSI(value), unit.DeltaFromSI(q.expanded), unit.DeltaFromSI(least))
	q.K = fixed(q.k, 2)
	return q
}

// u is the standard uncertainty that belongs to the uncertainty as stated.
func (q *Quantity) u() float64 { return q.expanded / q.k }

// beside writes another value of the quantity, SI, at the place of this one.
func (q *Quantity) beside(x float64) string {
	place := 0
	if _, frac, ok := strings.Cut(q.Value, "."); ok {
		place = -len(frac)
	}
	return at(q.Unit.FromSI(x), place)
}

// round writes an expanded uncertainty with two significant digits, not below
// least, and the value to the same place.
func round(value, expanded, least float64) (v, u string) {
	if !(expanded > 0) || math.IsInf(expanded, 0) {
		return strconv.FormatFloat(value, 'f', -1, 64), "0"
	}
	place, u := two(expanded)
	if x, err := strconv.ParseFloat(u, 64); err == nil && x < least {
		// One unit of the second digit more; that may be a digit more in all.
		place, u = two(x + 1.001*math.Pow(10, float64(place)))
	}
	return at(value, place), u
}

// two writes x > 0 with two significant digits; place is the power of ten of the
// second.
func two(x float64) (place int, s string) {
	e := strconv.FormatFloat(x, 'e', 1, 64)
	_, exp, _ := strings.Cut(e, "e")
	n, err := strconv.Atoi(exp)
	if err != nil {
		return 0, e
	}
	rounded, err := strconv.ParseFloat(e, 64)
	if err != nil {
		return 0, e
	}
	return n - 1, strconv.FormatFloat(rounded, 'f', max(0, 1-n), 64)
}

// fifth is the power of ten of the fifth significant digit of x.
func fifth(x float64) int {
	if !(x > 0) {
		return 0
	}
	return int(math.Floor(math.Log10(x))) - 4
}

// at writes x rounded to a power of ten.
func at(x float64, place int) string {
	if place > 0 {
		p := math.Pow(10, float64(place))
		x = math.Round(x/p) * p
	}
	return unsigned(strconv.FormatFloat(x, 'f', max(0, -place), 64))
}

// fixed writes x with n digits after the point.
func fixed(x float64, n int) string { return unsigned(strconv.FormatFloat(x, 'f', n, 64)) }

// significant writes x with n significant digits and no exponent.
func significant(x float64, n int) string {
	if x == 0 {
		return "0"
	}
	e := strconv.FormatFloat(x, 'e', n-1, 64)
	_, exp, _ := strings.Cut(e, "e")
	k, err := strconv.Atoi(exp)
	if err != nil {
		return e
	}
	f, err := strconv.ParseFloat(e, 64)
	if err != nil {
		return e
	}
	return strconv.FormatFloat(f, 'f', max(0, n-1-k), 64)
}

// unsigned takes the sign off a zero.
func unsigned(s string) string {
	if strings.Trim(s, "-0.") == "" {
		return strings.TrimPrefix(s, "-")
	}
	return s
}

// shown is a number for people: with a true minus sign.
func shown(s string) string { return strings.ReplaceAll(s, "-", "−") }

// unitText is a unit for people; nothing for pure numbers.
func unitText(u si.Unit) string {
	if t := u.Unicode(); t != "1" {
		return t
	}
	return ""
}

// with puts a unit after a number.
func with(s string, u si.Unit) string {
	if t := unitText(u); t != "" {
		return shown(s) + "\u00a0" + t
	}
	return shown(s)
}
