package report

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// minus replaces the hyphen of a number by a minus sign.
func minus(s string) string { return strings.ReplaceAll(s, "-", "−") }

// unitOf parses the unit of a record; what this version can't parse is shown as
// it stands.
func unitOf(symbol string) si.Unit {
	u, err := si.ParseUnit(symbol)
	if err != nil {
		return si.Unit{Symbol: figure.OneLine(symbol), Factor: 1}
	}
	return u
}

// unitText is a unit as a table shows it; nothing for pure numbers.
func unitText(u si.Unit) string {
	if t := u.String(); t != "1" {
		return t
	}
	return ""
}

// display chooses the prefix of the unit in which x, SI, is shown.
func display(x float64, symbol string) si.Unit {
	_, u := si.Prefixed(x, unitOf(symbol))
	return u
}

// measured gives a value and its standard uncertainty, both SI, rounded for
// people in one display unit.
func measured(value, u reduce.Number, symbol string) (v, du string, unit si.Unit) {
	x, ux := float64(value), float64(u)
	unit = unitOf(symbol).Suited(x, ux)
	if ux == 0 {
		return minus(short(unit.FromSI(x), 12)), "0", unit
	}
	v, du = si.Round(unit.FromSI(x), unit.DeltaFromSI(ux))
	return rounded(v), power(du), unit
}

// rounded sets a value that package si rounded: "0.0e-5" is 0.
func rounded(v string) string {
	mantissa, _, exponent := strings.Cut(v, "e")
	if exponent && strings.Trim(mantissa, "-0.") == "" {
		return "0"
	}
	return minus(power(v))
}

// shown is the unit in which everything of a measurand is stated, such that its
// expanded uncertainty needs no power of ten.
func shown(m *reduce.Measurand) si.Unit {
	du := float64(m.U)
	if k := float64(m.K); k > 1 && !math.IsInf(k, 0) {
		du *= k
	}
	return unitOf(m.Unit).Suited(float64(m.Value), du)
}

// power rewrites "1.2e-30" as "1.2×10⁻³⁰".
func power(s string) string {
	mantissa, e, ok := strings.Cut(s, "e")
	n, err := strconv.Atoi(e)
	if !ok || err != nil {
		return s
	}
	return mantissa + "×10" + super(n)
}

func super(n int) string {
	return strings.NewReplacer("-", "⁻", "0", "⁰", "1", "¹", "2", "²", "3", "³", "4", "⁴", "5", "⁵", "6", "⁶",
		"7", "⁷", "8", "⁸", "9", "⁹").Replace(strconv.Itoa(n))
}

// short writes a number with at most n significant digits and no idle zeros.
func short(x float64, n int) string {
	switch {
	case math.IsNaN(x):
		return "unknown"
	case math.IsInf(x, 0):
		return "∞"
	}
	s := strconv.FormatFloat(x, 'g', n, 64)
	if f, err := strconv.ParseFloat(s, 64); err == nil && (math.Abs(f) < 1e6 && math.Abs(f) >= 1e-4 || f == 0) {
		return strconv.FormatFloat(f, 'f', -1, 64)
	}
	return power(s)
}

// digits writes a number with exactly n significant digits.
func digits(x float64, n int) string {
	if math.IsNaN(x) || math.IsInf(x, 0) || x == 0 {
		return short(x, n)
	}
	s := strconv.FormatFloat(x, 'e', n-1, 64)
	mantissa, e, _ := strings.Cut(s, "e")
	k, err := strconv.Atoi(e)
	if err != nil {
		return s
	}
	if k < -4 || k > 5 {
		return mantissa + "×10" + super(k)
	}
	f, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return s
	}
	return strconv.FormatFloat(f, 'f', max(0, n-1-k), 64)
}

// one writes an SI number with n significant digits and its unit.
func one(x reduce.Number, symbol string, n int) string {
	u := display(math.Abs(float64(x)), symbol)
	s := minus(digits(u.FromSI(float64(x)), n))
	if t := unitText(u); t != "" {
		s += nbsp + t
	}
	return s
}

// probability writes a p-value.
func probability(p reduce.Number) string {
	x := float64(p)
	switch {
	case math.IsNaN(x):
		return "unknown"
	case x < 1e-4:
		return "< 0.0001"
	}
	return strconv.FormatFloat(x, 'g', 2, 64)
}

// freedom writes degrees of freedom; a null in the record is infinite.
func freedom(d reduce.Number) string {
	x := float64(d)
	if math.IsNaN(x) || math.IsInf(x, 0) || x > 1e5 {
		return "∞"
	}
	if x == math.Trunc(x) || x >= 100 {
		return strconv.FormatFloat(math.Floor(x), 'f', 0, 64)
	}
	return strconv.FormatFloat(math.Floor(x*10)/10, 'f', -1, 64)
}

// percent writes a share with one decimal.
func percent(share reduce.Number) string {
	v := 100 * float64(share)
	switch {
	case math.IsNaN(v):
		return "unknown"
	case v != 0 && math.Abs(v) < 0.05:
		return "< 0.1"
	}
	return minus(strconv.FormatFloat(v, 'f', 1, 64))
}

// whole writes a count with thin spaces.
func whole(n int) string {
	s := strconv.Itoa(n)
	if len(s) <= 4 {
		return s
	}
	var parts []string
	for len(s) > 3 {
		parts = append([]string{s[len(s)-3:]}, parts...)
		s = s[:len(s)-3]
	}
	return strings.Join(append([]string{s}, parts...), "\u2009")
}

// plural writes a count with its noun.
func plural(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return whole(n) + " " + many
}

// words makes a key of the bench readable.
func words(key string) string { return figure.Words(key) }

// quantity writes a difference, SI, with n significant digits and its unit.
func quantity(x float64, unit si.Unit, n int) string {
	s := minus(digits(unit.DeltaFromSI(x), n))
	if t := unitText(unit); t != "" {
		s += nbsp + t
	}
	return s
}

// equals writes a probability with its sign: "= 0.50", "< 0.0001".
func equals(p float64) string {
	s := probability(reduce.Number(p))
	if strings.HasPrefix(s, "<") {
		return s
	}
	return "= " + s
}

// Words makes a key of a bench or record readable: "disc_radius" is "disc
// radius", "channels.voltage.gain" is "voltage gain".
func Words(key string) string { return words(key) }

// Number writes x with n significant digits for people, with a true minus sign.
func Number(x float64, n int) string { return minus(digits(x, n)) }

// Plain writes x with at most n significant digits and no idle zeros.
func Plain(x float64, n int) string { return minus(short(x, n)) }

// Measured writes a value and its standard uncertainty, both in unit, rounded
// after GUM 7.2.6.
func Measured(value, u float64, unit si.Unit) (v, du string) {
	x, ux := unit.FromSI(value), unit.DeltaFromSI(u)
	if !(ux > 0) {
		return minus(short(x, 12)), minus(short(ux, 2))
	}
	v, du = si.Round(x, ux)
	return minus(power(v)), power(du)
}

// fixed writes x with n digits after the point; nothing for what is not known.
func fixed(x float64, n int) string {
	if x != x {
		return ""
	}
	s := fmt.Sprintf("%.*f", n, x)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return minus(s)
}

// In writes x, SI, in a unit with exactly n significant digits; an unknown
// number is a dash.
func In(x float64, unit si.Unit, n int) string {
	if math.IsNaN(x) {
		return "–"
	}
	return minus(digits(unit.DeltaFromSI(x), n))
}

// Unit is the unit in which people read x, SI, of the dimension of symbol, and
// its name: nothing for pure numbers.
func Unit(x float64, symbol string) (si.Unit, string) {
	u := display(math.Abs(x), symbol)
	return u, unitText(u)
}
