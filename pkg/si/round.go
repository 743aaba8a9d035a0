package si

import (
	"math"
	"strconv"
	"strings"
)

// digitsOfU is the number of significant digits that uncertainties are rounded
// to (GUM 7.2.6: "at most two").
const digitsOfU = 2

// mostDigits is the longest number that a double can fill with meaning; where
// value and uncertainty are further apart they are printed apart.
const mostDigits = 17

// What stands in place of an uncertainty that can't be printed.
const (
	unknownU  = "unknown"
	infiniteU = "infinite"
)

// Round rounds a value and its uncertainty for people (GUM 7.2.6): u to two
// significant digits and the value to the same decimal place. Both have the
// same unit. Where the last digit kept is not left of the point and the number
// is not tiny both are plain decimals, otherwise both carry the same exponent:
// "1.23e6", "0.12e6". strconv.ParseFloat reads them.
//
// Ties are rounded away from zero, on the decimal digits that one sees when the
// number is printed, so that 0.0315 becomes 0.032 whatever the last bit of its
// double is. An uncertainty of zero leaves the value exact and is "0"; an
// unknown one (NaN, or negative) is "unknown", and the value is then given to
// six digits, since nothing says how many are good; an infinite one is
// "infinite".
func Round(value, u float64) (v, du string) {
	r := round(value, u, digitsOfU)
	if r.apart {
		return r.value, r.u
	}
	if r.exp != 0 {
		e := "e" + strconv.Itoa(r.exp)
		return r.value + e, r.u + e
	}
	return r.value, r.u
}

// Short returns the value with its standard uncertainty in parentheses:
// "8.8542(31) pF/m". value and u are in SI; they are printed in unit. The
// digits in parentheses count in the last place of the value; where they reach
// over the point they carry it, "12.3(1.5) kV". (GUM 7.2.2, second form.)
//
// u = 0 gives "299792458 m/s (exact)", an unknown u (NaN)
// "8.85419 pF/m (u unknown)".
func Short(value, u float64, unit Unit) string {
	r := round(unit.FromSI(value), unit.DeltaFromSI(u), digitsOfU)
	switch {
	case u == 0:
		return join(timesTen(r.value), unit) + " (exact)"
	case r.apart && (r.u == unknownU || r.u == infiniteU):
		return join(timesTen(r.value), unit) + " (u " + r.u + ")"
	case r.apart:
		return join(timesTen(r.value), unit) + " (u = " + join(timesTen(r.u), unit) + ")"
	}
	digits := strings.TrimLeft(strings.Replace(r.u, ".", "", 1), "0")
	if whole, frac, point := strings.Cut(r.u, "."); point && strings.Trim(whole, "0") != "" && frac != "" {
		digits = r.u // reaches over the point
	}
	return join(r.value+"("+digits+")"+times(r.exp), unit)
}

// Expanded returns the value with its expanded uncertainty, the coverage factor
// and the coverage probability: "8.8542 pF/m ± 0.0062 pF/m (k = 2.00, p = 95.45
// %)" (GUM 7.2.4). value and U are in SI; they are printed in unit. p is a
// fraction. k or p that are not known (zero or NaN) are left out, as k is for
// an interval found by Monte Carlo.
func Expanded(value, U float64, unit Unit, k, p float64) string {
	r := round(unit.FromSI(value), unit.DeltaFromSI(U), digitsOfU)
	var s string
	switch {
	case U == 0:
		return join(timesTen(r.value), unit) + " (exact)"
	case r.apart && (r.u == unknownU || r.u == infiniteU):
		return join(timesTen(r.value), unit) + " (U " + r.u + ")"
	case r.apart:
		s = join(timesTen(r.value), unit) + " ± " + join(timesTen(r.u), unit)
	default:
		s = join(r.value+times(r.exp), unit) + " ± " + join(r.u+times(r.exp), unit)
	}
	var tail []string
	if k > 0 && !math.IsInf(k, 0) {
		tail = append(tail, "k = "+strconv.FormatFloat(k, 'f', 2, 64))
	}
	if p > 0 && p <= 1 {
		tail = append(tail, "p = "+Percent(p))
	}
	if tail != nil {
		s += " (" + strings.Join(tail, ", ") + ")"
	}
	return s
}

// Percent returns a fraction as a percentage with at most four decimals and no
// idle zeros: 0.9545 is "95.45 %".
func Percent(p float64) string {
	return strconv.FormatFloat(math.Round(p*1e6)/1e4, 'f', -1, 64) + " %"
}

// rounded is a value and its uncertainty to the same place; both times 10^exp.
type rounded struct {
	value, u string
	exp      int
	apart    bool // the two are complete texts of their own
}

func round(value, u float64, digits int) rounded {
	switch {
	case math.IsNaN(value) || math.IsInf(value, 0):
		r := rounded{value: Exact(value), u: unknownU, apart: true}
		if u >= 0 && !math.IsInf(u, 0) {
			r.u = strconv.FormatFloat(u, 'g', digits, 64)
		}
		return r
	case math.IsNaN(u) || u < 0:
		return rounded{value: strconv.FormatFloat(value, 'g', 6, 64), u: unknownU, apart: true}
	case math.IsInf(u, 0):
		return rounded{value: strconv.FormatFloat(value, 'g', 6, 64), u: infiniteU, apart: true}
	case u == 0:
		return rounded{value: plain(value, 0), u: "0", apart: true}
	}
	place := top(u) - digits + 1
	n := at(u, place)
	if len(n) > digits { // 9.96 has become 10.0, which is 10
		place++
		n = at(u, place)
	}
	if value != 0 && top(value)-place >= mostDigits {
		return rounded{value: plain(value, 0), u: strconv.FormatFloat(u, 'e', digits-1, 64), apart: true}
	}
	m := at(value, place)
	head := max(len(m), len(n)) - 1 + place // power of ten of the leading digit of both
	r := rounded{}
	decimals := -place
	if place > 0 || head < -4 {
		r.exp = head
		decimals = head - place
	}
	r.value, r.u = fixed(m, decimals), fixed(n, decimals)
	if value < 0 && strings.Trim(m, "0") != "" {
		r.value = "-" + r.value
	}
	return r
}

// top is the power of ten of the leading digit of x, which is finite and not 0.
func top(x float64) int {
	_, e := decimal(x, 15)
	return e
}

// decimal returns digits of |x| and the power of ten of the first: up to prec
// of them, by which the noise of a binary number disappears (0.00315 that came
// out of a conversion as 0.0031499999999999996), or all that the double holds.
func decimal(x float64, prec int) (digits string, power int) {
	if prec > 15 {
		prec = 0
	}
	s := strconv.FormatFloat(math.Abs(x), 'e', prec-1, 64)
	mantissa, e, _ := strings.Cut(s, "e")
	power, err := strconv.Atoi(e)
	if err != nil {
		panic("si: strconv wrote no exponent: " + s) // can't happen for finite x
	}
	return strings.Replace(mantissa, ".", "", 1), power
}

// at returns |x| rounded to a whole multiple of 10^place, as the digits of that
// whole number: ties away from zero.
func at(x float64, place int) string {
	if x == 0 {
		return "0"
	}
	_, e := decimal(x, 15)
	d, e := decimal(x, max(15, e-place+2))
	keep := e - place + 1 // digits before the cut
	switch {
	case keep < 0:
		return "0"
	case keep >= len(d):
		return d + strings.Repeat("0", keep-len(d))
	}
	up := d[keep] >= '5'
	n := []byte("0" + d[:keep])
	if up {
		for i := len(n) - 1; ; i-- {
			if n[i]++; n[i] <= '9' {
				break
			}
			n[i] = '0'
		}
	}
	s := strings.TrimLeft(string(n), "0")
	if s == "" {
		return "0"
	}
	return s
}

// fixed sets the point into a whole number.
func fixed(n string, decimals int) string {
	if decimals <= 0 {
		return n
	}
	if len(n) <= decimals {
		n = strings.Repeat("0", decimals-len(n)+1) + n
	}
	return n[:len(n)-decimals] + "." + n[len(n)-decimals:]
}

// times writes ×10ⁿ, nothing for n = 0.
func times(n int) string {
	if n == 0 {
		return ""
	}
	return "×10" + superscript(n)
}

// timesTen rewrites "1.0e-30" as "1.0×10⁻³⁰".
func timesTen(s string) string {
	mantissa, e, ok := strings.Cut(s, "e")
	n, err := strconv.Atoi(e)
	if !ok || err != nil {
		return s
	}
	return mantissa + times(n)
}
