package si

import (
	"fmt"
	"strings"
)

// UnitError says why a text is no unit, and where.
type UnitError struct {
	Unit   string // the text, shortened when very long
	Column int    // character, counted from 1, at which it goes wrong; 0: as a whole
	Reason string // what is wrong
	Hint   string // what would be right; "" when nothing near is known
}

// Error gives the unit, what is wrong with it and where, and the hint.
func (e *UnitError) Error() string {
	var b strings.Builder
	fmt.Fprintf(&b, "unit %q: %s", e.Unit, e.Reason)
	if e.Column > 1 {
		fmt.Fprintf(&b, " (at character %d)", e.Column)
	}
	if e.Hint != "" {
		b.WriteString("; ")
		b.WriteString(e.Hint)
	}
	return b.String()
}

// QuantityError says why a text is no quantity. Err is a *UnitError when the
// unit is at fault.
type QuantityError struct {
	Text   string // the text, shortened when very long
	Reason string
	Hint   string
	Err    error
}

// Error gives the text, what is wrong with it, and the hint.
func (e *QuantityError) Error() string {
	if e.Err != nil {
		return fmt.Sprintf("quantity %q: %v", e.Text, e.Err)
	}
	s := fmt.Sprintf("quantity %q: %s", e.Text, e.Reason)
	if e.Hint != "" {
		s += "; " + e.Hint
	}
	return s
}

// Unwrap returns the cause, nil when there is none.
func (e *QuantityError) Unwrap() error { return e.Err }

// ErrorDim says that a quantity has one dimension where another is due.
type ErrorDim struct {
	Unit  string    // the unit found, as written
	Found Dimension // its dimension
	Want  Dimension // the dimension that is due
	Like  string    // a unit that would be right, "kV"; "" for the coherent SI unit
}

// Error gives the unit found with its dimension, and one that would be right.
func (e *ErrorDim) Error() string {
	like := e.Like
	if like == "" {
		like = e.Want.Unit().String()
	}
	switch {
	case e.Unit == "" || e.Unit == "1":
		return fmt.Sprintf("a pure number where a quantity in %s is due; write its unit", like)
	case e.Want.IsOne():
		return fmt.Sprintf("unit %q (%s) where a pure number is due", e.Unit, e.Found)
	}
	return fmt.Sprintf("unit %q (%s) where a unit like %s (%s) is due", e.Unit, e.Found, like, e.Want)
}

// CheckDim returns nil when u measures quantities of dimension want, otherwise
// an *ErrorDim.
func (u Unit) CheckDim(want Dimension) error {
	if u.Dim == want {
		return nil
	}
	return &ErrorDim{Unit: u.Symbol, Found: u.Dim, Want: want}
}

// clip shortens a text for messages.
func clip(s string) string {
	const most = 60
	if len(s) <= most {
		return s
	}
	cut := most
	for cut > 0 && s[cut]&0xC0 == 0x80 {
		cut-- // not within a character
	}
	return s[:cut] + "…"
}
