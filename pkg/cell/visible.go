package cell

import (
	"fmt"
	"strings"
	"unicode"
)

// Visible spells out the characters of s that would steer a terminal or turn the
// direction of a line, as \x1b and \u202e: names of files and texts in records may
// come from anyone. Line feeds and tabs stay.
func Visible(s string) string {
	hidden := func(r rune) bool {
		return r != '\n' && r != '\t' && (unicode.IsControl(r) || unicode.Is(unicode.Cf, r))
	}
	if strings.IndexFunc(s, hidden) < 0 {
		return s
	}
	var b strings.Builder
	for _, r := range s {
		switch {
		case !hidden(r):
			b.WriteRune(r)
		case r < 0x100:
			fmt.Fprintf(&b, `\x%02x`, r)
		case r < 0x10000:
			fmt.Fprintf(&b, `\u%04x`, r)
		default:
			fmt.Fprintf(&b, `\U%08x`, r)
		}
	}
	return b.String()
}
