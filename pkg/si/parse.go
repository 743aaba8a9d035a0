package si

import (
	"fmt"
	"math"
	"math/big"
	"slices"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Bounds of what is read, so that a hostile text costs little.
const (
	longestUnit     = 128 // bytes
	longestQuantity = 512 // bytes
	mostFactors     = 16
	mostPower       = 24
)

// factor is one symbol of a unit with its prefix and exponent num/den.
type factor struct {
	sym      int // in symbols
	pre      int // in prefixes; −1: none
	num, den int // exponent, den > 0; negative after a solidus
}

// expr is a unit taken apart.
type expr struct {
	factors []factor
	solidus int // index of the first factor below the solidus; −1: none
}

// ParseUnit reads a unit: SI units and the usual ones beside them with SI
// prefixes, multiplied by `*`, `·` or a blank, with at most one `/`, exponents
// as m2, m^2, m² or m^-1 and fractional ones as Hz^(1/2). Behind the `/` stands
// one factor, or several in parentheses, "J/(kg K)" (SI Brochure, 9th edition,
// section 5.2: no second sign without parentheses). "1" is the unit of pure
// numbers. An exact symbol wins over a prefix with a unit: "min" is the minute,
// "cd" the candela. Micro may be written µ, μ or u.
//
// Degrees Celsius alone are a scale with an offset; in a product or quotient
// ("ppm/degC") they are intervals, the same as K.
//
// Errors are *UnitError.
func ParseUnit(s string) (Unit, error) {
	x, err := parse(s)
	if err != nil {
		return Unit{}, err
	}
	return x.unit(s)
}

// MustUnit is ParseUnit for units that stand in the program; it panics when s
// is no unit.
func MustUnit(s string) Unit {
	u, err := ParseUnit(s)
	if err != nil {
		panic(err)
	}
	return u
}

// parser reads one unit, character by character.
type parser struct {
	text []rune
	pos  int
	src  string
}

func (p *parser) fail(at int, reason, hint string) *UnitError {
	return &UnitError{Unit: clip(p.src), Column: at + 1, Reason: reason, Hint: hint}
}

func (p *parser) peek() rune {
	if p.pos < len(p.text) {
		return p.text[p.pos]
	}
	return 0
}

func (p *parser) blanks() bool {
	from := p.pos
	for p.pos < len(p.text) && unicode.IsSpace(p.text[p.pos]) {
		p.pos++
	}
	return p.pos > from
}

func parse(s string) (expr, error) {
	p := parser{src: s}
	none := expr{}
	if len(s) > longestUnit {
		return none, p.fail(0, fmt.Sprintf("it is longer than %d bytes", longestUnit), "")
	}
	if !utf8.ValidString(s) {
		return none, p.fail(0, "it is not UTF-8 text", "save the file as UTF-8, or write um for micrometre and degC for degree Celsius")
	}
	s = strings.TrimSpace(s)
	if s == "" {
		return none, p.fail(0, "it is empty", `write "1" for a pure number`)
	}
	p.text = []rune(s)
	x := expr{solidus: -1}
	inside := false // parentheses
	joined := true  // a factor may follow here
	for p.pos < len(p.text) {
		at := p.pos
		if p.blanks() {
			joined = true
			continue
		}
		switch c := p.peek(); {
		case c == '*' || c == '·' || c == '⋅':
			p.pos++
			if p.peek() == '*' {
				return none, p.fail(at, "** is no exponent", "write m^2")
			}
			p.blanks()
			if len(x.factors) == 0 || !p.starts() {
				return none, p.fail(at, "a unit is missing beside the multiplication sign", "")
			}
			joined = true
		case c == '/':
			if x.solidus >= 0 {
				return none, p.fail(at, "a second solidus", "write a/(b c), or exponents: a b^-1 c^-1")
			}
			if len(x.factors) == 0 {
				return none, p.fail(at, "nothing stands before the solidus", `write "1/s" or "s^-1"`)
			}
			p.pos++
			p.blanks()
			x.solidus = len(x.factors)
			if p.peek() == '(' {
				inside = true
				p.pos++
				p.blanks()
			}
			if !p.starts() {
				hint := ""
				if plainDigit(p.peek()) >= 0 || p.peek() == '√' {
					hint = "write fractional exponents as m^(1/2)"
				}
				return none, p.fail(p.pos, "a unit is missing behind the solidus", hint)
			}
			joined = true
		case c == ')' && inside:
			inside = false
			p.pos++
			p.blanks()
			if p.pos < len(p.text) {
				return none, p.fail(p.pos, "more follows the closing parenthesis", "put all that divides into the parentheses, at the end")
			}
		default:
			if !joined {
				return none, p.fail(at, fmt.Sprintf("%q is not understood here", c), "multiply by a blank, * or ·; write exponents as m2 or m^2")
			}
			if x.solidus >= 0 && !inside && len(x.factors) > x.solidus {
				return none, p.fail(at, "it is not clear whether this still divides", "write a/(b c), or exponents: a b^-1 c")
			}
			f, err := p.factor()
			if err != nil {
				return none, err
			}
			if x.solidus >= 0 {
				f.num = -f.num
			}
			if x.factors = append(x.factors, f); len(x.factors) > mostFactors {
				return none, p.fail(at, fmt.Sprintf("more than %d factors", mostFactors), "")
			}
			joined = false
		}
	}
	if inside {
		return none, p.fail(len(p.text)-1, "the parenthesis is not closed", "")
	}
	for i, f := range x.factors {
		if f.sym == 0 && len(x.factors) > 1 && (i != 0 || x.solidus != 1) {
			return none, p.fail(0, "a 1 stands among units", "leave it out")
		}
	}
	return x, nil
}

// wordRune reports whether c may stand in a symbol.
func wordRune(c rune) bool {
	return unicode.IsLetter(c) || strings.ContainsRune("%‰°′″℃", c)
}

// starts reports whether a factor may start here.
func (p *parser) starts() bool { return wordRune(p.peek()) || p.peek() == '1' }

// factor reads a symbol with its exponent.
func (p *parser) factor() (factor, error) {
	at := p.pos
	if p.peek() == '1' {
		p.pos++
		if c := p.peek(); unicode.IsDigit(c) || c == '.' || c == 'e' || c == '^' {
			return factor{}, p.fail(at, "a number stands in the unit", "only 1 may, as in 1/s; put powers of ten into the prefix")
		}
		return factor{sym: 0, pre: -1, num: 1, den: 1}, nil
	}
	for p.pos < len(p.text) && wordRune(p.text[p.pos]) {
		p.pos++
	}
	if p.pos == at {
		c := p.text[at]
		hint := ""
		switch {
		case unicode.IsDigit(c):
			hint = "put powers of ten into the prefix"
		case c == '√':
			hint = "write V/Hz^(1/2)"
		case c == '.' || c == '×':
			hint = "multiply by a blank, * or ·"
		case c == '(':
			hint = "parentheses may stand behind the solidus only"
		case c == '\'' || c == '"':
			hint = "write arcmin, arcsec, ft or in"
		}
		return factor{}, p.fail(at, fmt.Sprintf("%q can't start a unit", c), hint)
	}
	f, err := p.symbol(string(p.text[at:p.pos]), at)
	if err != nil {
		return factor{}, err
	}
	return f, p.power(&f)
}

// symbol finds a word in the table, exactly or behind a prefix.
func (p *parser) symbol(word string, at int) (factor, error) {
	if hint, bad := refused[word]; bad {
		return factor{}, p.fail(at, fmt.Sprintf("%q is not accepted", word), hint)
	}
	if i, ok := lookup(word); ok {
		return factor{sym: i, pre: -1, num: 1, den: 1}, nil
	}
	for k, pre := range prefixes {
		rest, ok := strings.CutPrefix(word, pre.text)
		if !ok && pre.exp == -6 {
			if c, n := utf8.DecodeRuneInString(word); micros[string(c)] {
				rest, ok = word[n:], true
			}
		}
		if !ok {
			continue
		}
		if i, found := lookup(rest); found && symbols[i].pre {
			return factor{sym: i, pre: k, num: 1, den: 1}, nil
		}
	}
	hint := ""
	if micros[word] {
		hint = "micro is a prefix: write um or µm"
	} else if near := Suggest(word, vocabulary()); near != "" {
		hint = fmt.Sprintf("did you mean %q?", near)
	}
	return factor{}, p.fail(at, fmt.Sprintf("%q is not known", word), hint)
}

func lookup(word string) (int, bool) {
	if a, ok := aliases[word]; ok {
		word = a
	}
	i, ok := index[word]
	return i, ok
}

// vocabulary lists what can be suggested: symbols first, then the prefixes in
// daily use with them.
func vocabulary() []string {
	var words []string
	for _, s := range symbols[1:] {
		words = append(words, s.text)
	}
	for _, s := range symbols[1:] {
		if !s.pre {
			continue
		}
		for _, pre := range []string{"k", "m", "µ", "n", "p", "M", "G", "c", "h", "f", "T"} {
			words = append(words, pre+s.text)
		}
	}
	return words
}

const (
	superDigits = "⁰¹²³⁴⁵⁶⁷⁸⁹"
	superMinus  = '⁻'
	superPlus   = '⁺'
)

// power reads the exponent behind a symbol, if there is one.
func (p *parser) power(f *factor) error {
	at := p.pos
	num, den, sign := 0, 1, 1
	digits := 0
	read := func(into *int, digit func(rune) int) {
		*into, digits = 0, 0
		for d := digit(p.peek()); d >= 0; d = digit(p.peek()) {
			*into = min(10**into+d, 10*mostPower)
			digits++
			p.pos++
		}
	}
	minus := func() {
		switch p.peek() {
		case '-', '−':
			sign = -1
			p.pos++
		case '+':
			p.pos++
		}
	}
	switch c := p.peek(); {
	case c == '^':
		p.pos++
		if p.peek() == '(' {
			p.pos++
			minus()
			read(&num, plainDigit)
			if digits > 0 && p.peek() == '/' {
				p.pos++
				read(&den, plainDigit)
			}
			if digits == 0 || p.peek() != ')' {
				return p.fail(at, "the exponent is not understood", "write ^2, ^-1 or ^(1/2)")
			}
			p.pos++
		} else {
			minus()
			read(&num, plainDigit)
		}
	case c == '-' || c == '−' || c == '+' || plainDigit(c) >= 0:
		minus()
		read(&num, plainDigit)
	case c == superMinus || c == superPlus || superDigit(c) >= 0:
		if c == superMinus || c == superPlus {
			if c == superMinus {
				sign = -1
			}
			p.pos++
		}
		read(&num, superDigit)
	default:
		return nil
	}
	switch {
	case digits == 0:
		return p.fail(at, "the exponent is not understood", "write ^2, ^-1 or ^(1/2)")
	case p.peek() == '.' || p.peek() == ',':
		return p.fail(at, "the exponent is not a whole number", "write fractions as ^(1/2)")
	case den == 0 || num == 0:
		return p.fail(at, "the exponent is zero or divides by zero", "")
	case num > mostPower || den > twelfths:
		return p.fail(at, fmt.Sprintf("the exponent is beyond %d", mostPower), "")
	case twelfths%(den/gcd(num, den)) != 0:
		return p.fail(at, "the exponent is no multiple of 1/12", "")
	}
	g := gcd(num, den)
	f.num, f.den = sign*num/g, den/g
	return nil
}

func plainDigit(c rune) int {
	if '0' <= c && c <= '9' {
		return int(c - '0')
	}
	return -1
}

func superDigit(c rune) int {
	return slices.Index([]rune(superDigits), c)
}

func gcd(a, b int) int {
	for b != 0 {
		a, b = b, a%b
	}
	return a
}

// unit multiplies the factors out. text is what the user wrote.
func (x expr) unit(text string) (Unit, error) {
	fail := func(reason string) (Unit, error) {
		return Unit{}, &UnitError{Unit: clip(text), Reason: reason}
	}
	u := Unit{Symbol: strings.Join(strings.Fields(text), " ")}
	if len(x.factors) == 1 && x.factors[0].num == 1 && x.factors[0].den == 1 {
		if off := symbols[x.factors[0].sym].off; off != "" {
			r, _ := new(big.Rat).SetString(off) // a literal of the table
			u.Offset, _ = r.Float64()
		}
	}
	exact, real := big.NewRat(1, 1), 1.0
	exp := 0
	for _, f := range x.factors {
		s := symbols[f.sym]
		d, ok := s.dim.Root(f.num, f.den)
		if !ok {
			return fail("an exponent is no multiple of 1/12")
		}
		u.Dim = u.Dim.Mul(d)
		e := s.exp
		if f.pre >= 0 {
			e += prefixes[f.pre].exp
		}
		switch {
		case s.real != 0:
			real *= math.Pow(s.real, float64(f.num)/float64(f.den))
		case f.den == 1:
			r := new(big.Rat).SetFrac(power(s.num, max(f.num, -f.num)), power(s.den, max(f.num, -f.num)))
			if f.num < 0 {
				r.Inv(r)
			}
			exact.Mul(exact, r)
		case s.num != 1 || s.den != 1:
			real *= math.Pow(s.num/s.den, float64(f.num)/float64(f.den))
		}
		if e*f.num%f.den == 0 {
			exp += e * f.num / f.den
		} else {
			real *= math.Pow(10, float64(e*f.num)/float64(f.den))
		}
	}
	if exp > 300 || exp < -300 {
		return fail("its size is beyond 1e±300 SI units")
	}
	// Powers of ten move into the exponent, where they are exact.
	num, den, ten := new(big.Int).Set(exact.Num()), new(big.Int).Set(exact.Denom()), big.NewInt(10)
	for _, v := range []struct {
		x    *big.Int
		step int
	}{{num, 1}, {den, -1}} {
		for {
			q, r := new(big.Int).QuoRem(v.x, ten, new(big.Int))
			if r.Sign() != 0 {
				break
			}
			v.x.Set(q)
			exp += v.step
		}
	}
	whole := new(big.Rat).SetFrac(num, den)
	if exp > 300 || exp < -300 {
		return fail("its size is beyond 1e±300 SI units")
	}
	u.Factor, _ = whole.Mul(whole, ratio(1, 1, exp)).Float64()
	if real != 1 {
		u.Factor *= real
	}
	if !(u.Factor > 1e-300 && u.Factor < 1e300) {
		return fail("its size is beyond 1e±300 SI units")
	}
	if real == 1 && num.BitLen() <= 53 && den.BitLen() <= 53 {
		u.num, u.den, u.exp = float64(num.Int64()), float64(den.Int64()), exp
	}
	return u, nil
}

// power returns x^n for a positive whole x.
func power(x float64, n int) *big.Int {
	return new(big.Int).Exp(big.NewInt(int64(x)), big.NewInt(int64(n)), nil)
}
