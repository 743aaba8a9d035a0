package si

import (
	"fmt"
	"strconv"
	"strings"
)

// UCUM returns the unit's case-sensitive code of the Unified Code for Units of
// Measure (version 2.1): "V.m-1", "Cel", "uT". Units that the code can't write
// exactly (fractional exponents, units it does not know) are an error.
func (u Unit) UCUM() (string, error) {
	x, err := u.expr()
	if err != nil {
		return "", err
	}
	var b strings.Builder
	for _, f := range x.factors {
		s := symbols[f.sym]
		if f.den != 1 {
			return "", fmt.Errorf("unit %q: UCUM has no fractional exponents", u.Symbol)
		}
		if f.sym == 0 && len(x.factors) > 1 {
			continue
		}
		if b.Len() > 0 {
			b.WriteByte('.')
		}
		if f.pre >= 0 {
			pre := prefixes[f.pre]
			if pre.exp > 24 || pre.exp < -24 {
				return "", fmt.Errorf("unit %q: UCUM has no prefix %s", u.Symbol, pre.text)
			}
			if pre.exp == -6 {
				b.WriteByte('u')
			} else {
				b.WriteString(pre.text)
			}
		}
		code := s.ucum
		switch {
		case s.off != "" && !x.alone():
			code = "K" // an interval
		case s.text == "Torr", s.text == "statC":
			return "", fmt.Errorf("unit %q: UCUM has no %s", u.Symbol, s.name)
		case code == "":
			code = s.text
		}
		b.WriteString(code)
		if f.num != 1 {
			b.WriteString(strconv.Itoa(f.num))
		}
	}
	return b.String(), nil
}

// DSI returns the unit in the notation of the Digital System of Units (D-SI),
// as digital calibration certificates carry it: `\micro\tesla`,
// `\volt\metre\tothe{-1}`, `\one`. (Style common practice, no source.) Units
// without a word there are an error.
func (u Unit) DSI() (string, error) {
	x, err := u.expr()
	if err != nil {
		return "", err
	}
	var b strings.Builder
	for _, f := range x.factors {
		s := symbols[f.sym]
		if f.sym == 0 && len(x.factors) > 1 {
			continue
		}
		word := s.dsi
		if s.off != "" && !x.alone() {
			word = "kelvin" // an interval
		}
		if word == "" {
			return "", fmt.Errorf("unit %q: D-SI has no word for the %s; give the result in %s", u.Symbol, s.name, u.Dim.Unit())
		}
		if f.pre >= 0 {
			b.WriteString(`\` + prefixes[f.pre].dsi)
		}
		b.WriteString(`\` + word)
		if f.num != 1 || f.den != 1 {
			b.WriteString(`\tothe{` + strconv.FormatFloat(float64(f.num)/float64(f.den), 'f', -1, 64) + `}`)
		}
	}
	return b.String(), nil
}

// alone reports whether the expression is one unit to the first power.
func (x expr) alone() bool {
	return len(x.factors) == 1 && x.factors[0].num == 1 && x.factors[0].den == 1
}

// expr takes the unit apart again.
func (u Unit) expr() (expr, error) {
	if u == (Unit{}) {
		return parse("1")
	}
	return parse(u.Symbol)
}
