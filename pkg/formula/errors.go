package formula

import (
	"fmt"
	"strings"
	"unicode/utf8"
)

// Error says what is wrong with a formula, and where.
type Error struct {
	Source string // the formula
	Column int    // character, counted from 1; 0: the formula as a whole
	Reason string // what is wrong
	Hint   string // what would be right; "" when nothing is known
}

// Error gives the formula, shortened when it is long, the column, what is wrong
// there, and the hint.
func (e *Error) Error() string {
	var b strings.Builder
	b.WriteString("formula ")
	fmt.Fprintf(&b, "%q: ", short(e.Source))
	if e.Column > 0 {
		fmt.Fprintf(&b, "column %d: ", e.Column)
	}
	b.WriteString(e.Reason)
	if e.Hint != "" {
		b.WriteString("; ")
		b.WriteString(e.Hint)
	}
	return b.String()
}

// short cuts a text of the user's for a message.
func short(s string) string {
	const most = 80
	if len(s) <= most {
		return s
	}
	cut := most
	for cut > 0 && !utf8.RuneStart(s[cut]) {
		cut--
	}
	return s[:cut] + "…"
}
