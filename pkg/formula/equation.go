package formula

import (
	"errors"
	"slices"
	"strings"
	"unicode/utf8"
)

// equals stands between the sides of an equation, and less in its place makes of both
// one expression, in which every column stays where it is.
const equals, less = " = ", " -("

// IsEquation reports whether a text is meant as an equation, left = right, which
// Compile does not take.
func IsEquation(src string) bool { return strings.Contains(src, "=") }

// CompileEquation reads an equation left = right between formulas. The program's
// value is left − right, which vanishes where the equation holds; its Source is the
// equation with one blank on either side of the sign.
func CompileEquation(src string, vars []string) (*Program, error) {
	left, right, err := sides(src)
	if err != nil {
		return nil, err
	}
	src = left + equals + right
	if _, err := Compile(left, vars); err != nil {
		return nil, within(err, src, 0)
	}
	if _, err := Compile(right, vars); err != nil {
		return nil, within(err, src, len(left)+len(equals))
	}
	p, err := Compile(left+less+right+")", vars)
	if err != nil {
		return nil, within(err, src, 0)
	}
	p.src, p.equation = src, true
	return p, nil
}

// NamesOfEquation is Names for both sides of an equation.
func NamesOfEquation(src string) ([]string, error) {
	left, right, err := sides(src)
	if err != nil {
		return nil, err
	}
	src = left + equals + right
	all, err := Names(left)
	if err != nil {
		return nil, within(err, src, 0)
	}
	more, err := Names(right)
	if err != nil {
		return nil, within(err, src, len(left)+len(equals))
	}
	for _, n := range more {
		if !slices.Contains(all, n) {
			all = append(all, n)
		}
	}
	return all, nil
}

// sides takes an equation apart.
func sides(src string) (left, right string, err error) {
	left, right, ok := strings.Cut(src, "=")
	left, right = strings.TrimSpace(left), strings.TrimSpace(right)
	column := func(i int) int { return utf8.RuneCountInString(src[:i]) + 1 }
	first := strings.Index(src, "=")
	switch {
	case !ok:
		return "", "", &Error{Source: src, Reason: "no equals sign", Hint: "an equation is left = right"}
	case strings.Contains(right, "="):
		return "", "", &Error{Source: src, Column: column(first + 1 + strings.Index(src[first+1:], "=")), Reason: "a second equals sign", Hint: "an equation is left = right"}
	case left == "" || right == "":
		return "", "", &Error{Source: src, Column: column(first), Reason: "one side of the equation is empty", Hint: "write 0 for a side that vanishes"}
	}
	return left, right, nil
}

// within tells an error of a side in the whole equation, whose byte at the side has.
func within(err error, src string, at int) error {
	var e *Error
	if !errors.As(err, &e) {
		return err
	}
	moved := *e
	moved.Source = src
	if e.Column > 0 {
		moved.Column += utf8.RuneCountInString(src[:at])
	}
	return &moved
}
