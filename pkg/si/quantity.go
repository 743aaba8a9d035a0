package si

import (
	"errors"
	"math"
	"math/big"
	"strconv"
	"strings"
	"unicode"
)

// ParseQuantity reads a number with its unit, "50.012 mm", "20 degC", "0.02 %",
// or a number alone, which has the unit one. It returns the value in SI, the
// double nearest to the decimal text times the unit's exact factor, and the
// unit as written.
//
// The number is decimal with a point and an optional exponent ("1.5e-6", also
// "1.5×10⁻⁶"); NaN, infinities, hexadecimal numbers, decimal commas and digit
// groups are refused. Errors are *QuantityError.
func ParseQuantity(s string) (value float64, unit Unit, err error) {
	return quantity(s, false)
}

// ParseInterval reads a difference, an interval or an uncertainty as
// ParseQuantity reads a value, except that "0.5 degC" is 0.5 K: offsets of
// scales play no part.
func ParseInterval(s string) (value float64, unit Unit, err error) {
	return quantity(s, true)
}

func quantity(s string, interval bool) (float64, Unit, error) {
	fail := func(reason, hint string) (float64, Unit, error) {
		return 0, Unit{}, &QuantityError{Text: clip(s), Reason: reason, Hint: hint}
	}
	if len(s) > longestQuantity {
		return fail("it is too long", "")
	}
	text := strings.TrimSpace(s)
	if text == "" {
		return fail("it is empty", `write a number and its unit, like "50.012 mm"`)
	}
	number, rest := splitNumber(text)
	if number == "" {
		return fail("it starts with no number", `write a number and its unit, like "50.012 mm"`)
	}
	if strings.HasPrefix(rest, ",") {
		return fail("a comma stands in the number", "write a decimal point")
	}
	if rest != "" && (rest[0] == '.' || rest[0] == '_' || '0' <= rest[0] && rest[0] <= '9') {
		return fail("the number is not understood", `write it like "1234.5" or "1.5e-6"`)
	}
	unit := One
	if rest = strings.TrimFunc(rest, unicode.IsSpace); rest != "" {
		if rest[0] == '.' || '0' <= rest[0] && rest[0] <= '9' {
			return fail("two numbers stand here", "write digits without blanks between them")
		}
		var err error
		if unit, err = ParseUnit(rest); err != nil {
			return 0, Unit{}, &QuantityError{Text: clip(s), Err: err}
		}
	}
	var v float64
	var err error
	switch off := offsetOf(unit, interval); {
	case unit.den == 0: // irrational factor: two roundings, nothing better
		if v, err = strconv.ParseFloat(number, 64); err == nil {
			v = unit.DeltaToSI(v)
		}
	case unit.num == 1 && unit.den == 1 && off == "":
		v, err = timesPower(number, unit.exp)
	default:
		v, err = rational(number, unit, off)
	}
	switch {
	case math.IsInf(v, 0) || errors.Is(err, strconv.ErrRange):
		return fail("the number is too large", "")
	case err != nil:
		return fail("the exponent is not understood", "")
	}
	return v, unit, nil
}

// offsetOf is the decimal offset that counts for a value; for an interval none does.
func offsetOf(u Unit, interval bool) string {
	if interval || u.Offset == 0 {
		return ""
	}
	return u.offsetText()
}

// exponent takes a decimal number apart. Exponents beyond reason, which make
// any number that is short enough to be read here zero or infinite, are cut to
// what does the same.
func exponent(number string) (mantissa string, exp int, err error) {
	mantissa, e, ok := strings.Cut(number, "e")
	if !ok {
		return mantissa, 0, nil
	}
	exp, err = strconv.Atoi(e)
	const reason = 2000 // above the range of doubles and longestQuantity together
	return mantissa, min(max(exp, -reason), reason), err
}

// timesPower reads number × 10^exp with one rounding.
func timesPower(number string, exp int) (float64, error) {
	mantissa, e, err := exponent(number)
	if err != nil {
		return 0, err
	}
	return strconv.ParseFloat(mantissa+"e"+strconv.Itoa(e+exp), 64)
}

// rational converts exactly and rounds once.
func rational(number string, u Unit, off string) (float64, error) {
	mantissa, exp, err := exponent(number)
	if err != nil {
		return 0, err
	}
	r, ok := new(big.Rat).SetString(mantissa)
	if !ok {
		return 0, strconv.ErrSyntax
	}
	if r.Sign() == 0 {
		exp = 0
	}
	r.Mul(r, ratio(u.num, u.den, u.exp+exp))
	if off != "" {
		o, _ := new(big.Rat).SetString(off) // a literal of the table
		r.Add(r, o)
	}
	f, _ := r.Float64()
	return f, nil
}

// splitNumber cuts the longest decimal number off the front and returns it in
// Go's spelling. "1e3" is a number, the e of "1 eV" is not.
func splitNumber(s string) (number, rest string) {
	const minus = "−" // U+2212
	sign := ""
	switch {
	case strings.HasPrefix(s, "-"), strings.HasPrefix(s, "+"):
		sign, s = s[:1], s[1:]
	case strings.HasPrefix(s, minus):
		sign, s = "-", s[len(minus):]
	}
	i, digits := 0, 0
	for point := false; i < len(s); i++ {
		if c := s[i]; '0' <= c && c <= '9' {
			digits++
		} else if c == '.' && !point {
			point = true
		} else {
			break
		}
	}
	if digits == 0 {
		return "", s
	}
	number, rest = sign+s[:i], s[i:]
	if rest != "" && (rest[0] == 'e' || rest[0] == 'E') {
		if exp, after := whole(rest[1:]); exp != "" {
			return number + "e" + exp, after
		}
	}
	// 1.5×10⁻⁶ and 1.5 × 10^-6
	if after, ok := strings.CutPrefix(strings.TrimLeftFunc(rest, unicode.IsSpace), "×"); ok {
		after, ok = strings.CutPrefix(strings.TrimLeftFunc(after, unicode.IsSpace), "10")
		if !ok {
			return number, rest
		}
		if caret, ok := strings.CutPrefix(after, "^"); ok {
			if exp, after := whole(caret); exp != "" {
				return number + "e" + exp, after
			}
		}
		if exp, after := super(after); exp != "" {
			return number + "e" + exp, after
		}
	}
	return number, rest
}

// whole cuts a signed whole number off the front.
func whole(s string) (number, rest string) {
	i := 0
	if i < len(s) && (s[i] == '-' || s[i] == '+') {
		i++
	}
	from := i
	for i < len(s) && '0' <= s[i] && s[i] <= '9' {
		i++
	}
	if i == from {
		return "", s
	}
	return s[:i], s[i:]
}

// super cuts a signed whole number in superscripts off the front.
func super(s string) (number, rest string) {
	var b strings.Builder
	digits := 0
	for i, c := range s {
		d := superDigit(c)
		switch {
		case d >= 0:
			b.WriteByte(byte('0' + d))
			digits++
		case c == superMinus && i == 0:
			b.WriteByte('-')
		case digits > 0:
			return b.String(), s[i:]
		default:
			return "", s
		}
	}
	if digits == 0 {
		return "", s
	}
	return b.String(), ""
}
