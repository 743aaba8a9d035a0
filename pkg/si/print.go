package si

import (
	"fmt"
	"math"
	"math/big"
	"strconv"
	"strings"
)

// String returns the unit for people as it was written, tidied: "um" becomes
// "µm", "m2" "m²", "degC" "°C", and a solidus stays: "pF/m".
func (u Unit) String() string { return u.text(true, true) }

// Unicode returns the unit for people without a solidus: "V m⁻¹".
func (u Unit) Unicode() string { return u.text(true, false) }

// ASCII returns the unit in ASCII, as it was written: "um", "V/m", "m^2",
// "degC", "ohm". ParseUnit reads it back.
func (u Unit) ASCII() string { return u.text(false, true) }

func (u Unit) text(unicode, solidus bool) string {
	if u == (Unit{}) {
		return "1"
	}
	x, err := parse(u.Symbol)
	if err != nil {
		return u.Symbol // made by hand: nothing better is known
	}
	return x.text(unicode, solidus)
}

func (x expr) text(unicode, solidus bool) string {
	var b strings.Builder
	below := x.solidus
	if !solidus {
		below = -1
	}
	factors := x.factors
	if below < 0 && len(factors) > 1 && factors[0].sym == 0 {
		factors = factors[1:] // 1/s is s⁻¹
	}
	many := below >= 0 && len(factors)-below > 1
	for i, f := range factors {
		num := f.num
		switch {
		case i == below:
			b.WriteByte('/')
			if many {
				b.WriteByte('(')
			}
		case i > 0:
			b.WriteByte(' ')
		}
		if below >= 0 && i >= below {
			num = -num
		}
		b.WriteString(f.word(unicode))
		writePower(&b, num, f.den, unicode)
	}
	if many {
		b.WriteByte(')')
	}
	return b.String()
}

// word returns the symbol with its prefix.
func (f factor) word(unicode bool) string {
	s := symbols[f.sym]
	w, pre := s.text, ""
	if f.pre >= 0 {
		pre = prefixes[f.pre].text
	}
	if unicode {
		if s.pretty != "" {
			w = s.pretty
		}
		return pre + w
	}
	switch w {
	case "Ω":
		w = "ohm"
	case "‰":
		w = "permil"
	}
	if pre == "µ" {
		pre = "u"
	}
	return pre + w
}

// writePower writes the exponent num/den, nothing for 1.
func writePower(b *strings.Builder, num, den int, unicode bool) {
	g := gcd(max(num, -num), den)
	if g > 1 {
		num, den = num/g, den/g
	}
	switch {
	case den != 1:
		fmt.Fprintf(b, "^(%d/%d)", num, den)
	case num == 1:
	case unicode:
		b.WriteString(superscript(num))
	default:
		b.WriteByte('^')
		b.WriteString(strconv.Itoa(num))
	}
}

// superscript writes a whole number in Unicode superscripts.
func superscript(n int) string {
	var b strings.Builder
	for _, c := range strconv.Itoa(n) {
		if c == '-' {
			b.WriteRune(superMinus)
		} else {
			b.WriteRune([]rune(superDigits)[c-'0'])
		}
	}
	return b.String()
}

// Exact returns the shortest decimal text that parses back to the same bits,
// for finite x; NaN and infinities are "NaN", "+Inf" and "-Inf", which
// strconv.ParseFloat reads too.
func Exact(x float64) string {
	return strconv.FormatFloat(x, 'g', -1, 64)
}

// Format returns the SI value x in unit u, exactly: "50.012 mm". ParseQuantity
// reads finite values back to the same bits when u differs from SI by a power of
// ten (mm, kV, %, hPa), where the point of the shortest decimal is moved, and for
// temperatures in degC (1 µK to 1e15 K): nothing is rounded. In other units (min,
// in, deg) two roundings of one conversion lie between.
func (u Unit) Format(x float64) string {
	return join(u.Number(x), u)
}

// Number is Format without the unit, for columns that have it in their header.
func (u Unit) Number(x float64) string {
	switch {
	case math.IsNaN(x) || math.IsInf(x, 0):
		return Exact(x)
	case u == Unit{}:
		return plain(x, 0)
	case u.Offset != 0 && u.offsetText() != "" && math.Abs(x) > 1e-6 && math.Abs(x) < 1e15:
		return shifted(x, u.offsetText())
	case u.num == 1 && u.den == 1 && u.Offset == 0:
		return plain(x, -u.exp)
	}
	return plain(u.FromSI(x), 0)
}

// plain writes the shortest decimal of a finite x times 10^shift, without an
// exponent for the sizes that people read so.
func plain(x float64, shift int) string {
	mantissa, e, _ := strings.Cut(strconv.FormatFloat(x, 'e', -1, 64), "e")
	exp, err := strconv.Atoi(e)
	if err != nil || x == 0 {
		return Exact(x)
	}
	exp += shift
	sign, digits := "", strings.Replace(mantissa, ".", "", 1)
	if digits[0] == '-' {
		sign, digits = "-", digits[1:]
	}
	const most = 15 // longer numbers carry an exponent
	switch {
	case exp < -5 || exp >= most:
		if len(digits) > 1 {
			digits = digits[:1] + "." + digits[1:]
		}
		return sign + digits + "e" + strconv.Itoa(exp)
	case exp >= len(digits)-1:
		return sign + digits + strings.Repeat("0", exp-len(digits)+1)
	case exp >= 0:
		return sign + digits[:exp+1] + "." + digits[exp+1:]
	}
	return sign + "0." + strings.Repeat("0", -exp-1) + digits
}

// shifted writes the shortest decimal of x less the decimal off, exactly: 293.15
// K less 273.15 is 20, where the difference of the doubles would not always be
// so short.
func shifted(x float64, off string) string {
	text := strconv.FormatFloat(x, 'f', -1, 64)
	decimals := 0
	for _, s := range []string{text, off} {
		if _, frac, ok := strings.Cut(s, "."); ok {
			decimals = max(decimals, len(frac))
		}
	}
	r, _ := new(big.Rat).SetString(text)
	o, _ := new(big.Rat).SetString(off) // both are decimals written by program
	s := r.Sub(r, o).FloatString(decimals)
	if decimals > 0 {
		s = strings.TrimRight(strings.TrimRight(s, "0"), ".")
	}
	return s
}

// join sets a unit behind a number, with a blank except before the degrees,
// minutes and seconds of arc (SI Brochure, 9th edition, section 5.4.3).
func join(number string, u Unit) string {
	switch s := u.String(); s {
	case "1", "":
		return number
	case "°", "′", "″":
		return number + s
	default:
		return number + " " + s
	}
}

// displayed are the prefixes that Prefixed chooses from.
var displayed = map[int]bool{-18: true, -15: true, -12: true, -9: true, -6: true, -3: true,
	3: true, 6: true, 9: true, 12: true, 15: true, 18: true}

// Prefixed chooses the SI prefix that suits the SI value x of a quantity in
// unit u, which has a prefix or none: with it the number lies from 1 to below
// 1000 (1e6 for m², 1e9 for m³) where the prefixes atto to exa allow it. It
// returns the number and the unit. Units that take no prefixes, zero, NaN and
// infinities come back in u.
func Prefixed(x float64, u Unit) (float64, Unit) {
	same := u.FromSI(x)
	e, err := parse(u.Symbol)
	if err != nil || x == 0 || math.IsNaN(x) || math.IsInf(x, 0) || u.Offset != 0 {
		return same, u
	}
	first := &e.factors[0]
	if symbols[first.sym].text == "kg" { // the prefix of the kilogram is part of its name
		first.sym = index["g"]
		first.pre = prefixOf(3)
	}
	if !symbols[first.sym].pre || first.den != 1 || first.num < 1 || first.num > 3 {
		return same, u
	}
	had := 0
	if first.pre >= 0 {
		had = prefixes[first.pre].exp
	}
	// The power of ten of the number when the first factor has no prefix.
	mantissa := strconv.FormatFloat(math.Abs(same), 'e', -1, 64)
	_, power, _ := strings.Cut(mantissa, "e")
	p, err := strconv.Atoi(power)
	if err != nil {
		return same, u
	}
	step := 3 * first.num
	want := floorDiv(p+had*first.num, step) * 3
	want = min(max(want, -18), 18)
	switch {
	case want == had && first.pre >= 0, want == 0 && first.pre < 0:
		return same, u
	case want == 0:
		first.pre = -1
	case displayed[want]:
		first.pre = prefixOf(want)
	}
	n, err := ParseUnit(e.text(true, true))
	if err != nil || n.Dim != u.Dim {
		return same, u
	}
	// The nearest double to the decimal that people see, 7853.9 mm², rather than
	// to the product of doubles, 7853.900000000001.
	if v, err := strconv.ParseFloat(n.Number(x), 64); err == nil {
		return v, n
	}
	return n.FromSI(x), n
}

// Suited returns u with the SI prefix that suits the SI value x with the
// uncertainty du: that of the larger of the two (Prefixed), or the next one up
// where du, rounded to two digits, would end left of the point, so that both
// stay plain decimals: −0.07 kV/m ± 0.10 kV/m rather than hundreds of V/m with
// a power of ten. An unknown or infinite du is left out of account.
func (u Unit) Suited(x, du float64) Unit {
	size := math.Abs(x)
	if du > size && !math.IsInf(du, 0) {
		size = du
	}
	_, n := Prefixed(size, u)
	plain := func(in Unit) bool {
		r := round(0, in.DeltaFromSI(du), digitsOfU)
		return r.apart || r.exp == 0
	}
	if plain(n) {
		return n
	}
	for up := 1e3; up <= 1e9; up *= 1e3 {
		// The number may grow by 10³, 10⁶ or 10⁹ within one prefix (m, m², m³).
		if _, next := Prefixed(size*up, u); next != n {
			if plain(next) {
				return next
			}
			return n
		}
	}
	return n
}

// prefixOf returns the index of the prefix 10^exp.
func prefixOf(exp int) int {
	for i, p := range prefixes {
		if p.exp == exp {
			return i
		}
	}
	return -1
}

func floorDiv(a, b int) int {
	q := a / b
	if a%b != 0 && a < 0 {
		q--
	}
	return q
}
