package kernel

import (
	"sort"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Match is one completion.
type Match struct {
	Text string
	Kind string
	Type string
}

// Complete lists what may stand at the cursor. start and end say which part of the code a match replaces; cursor,
// start and end count code points.
func Complete(in Interpreter, code string, cursor int) (matches []Match, start, end int) {
	at := byteOffset(code, cursor)
	end = utf8.RuneCountInString(code[:at])
	head := code[:at]
	if insideLiteral(head) {
		return nil, end, end
	}
	word := trailingIdentifier(head)
	start = end - utf8.RuneCountInString(word)
	before := strings.TrimRightFunc(head[:len(head)-len(word)], unicode.IsSpace)
	if strings.HasSuffix(before, ".") && !strings.HasSuffix(before, "..") {
		expr := trailingOperand(before[:len(before)-1])
		if expr == "" {
			return nil, end, end
		}
		d, err := in.Describe(expr)
		if err != nil {
			return nil, start, end
		}
		return filter(d.Members, word), start, end
	}
	if word == "" {
		return nil, end, end
	}
	names := in.Names()
	for _, k := range keywords {
		names = append(names, Name{Name: k, Kind: "keyword"})
	}
	return filter(names, word), start, end
}

var keywords = []string{
	"break", "case", "chan", "const", "continue", "default", "defer", "else", "fallthrough", "for", "func", "go",
	"goto", "if", "import", "interface", "map", "package", "range", "return", "select", "struct", "switch", "type",
	"var",
}

func filter(names []Name, prefix string) []Match {
	var out []Match
	seen := map[string]bool{}
	for _, n := range names {
		if strings.HasPrefix(n.Name, prefix) && !seen[n.Name] {
			seen[n.Name] = true
			out = append(out, Match{Text: n.Name, Kind: n.Kind, Type: n.Type})
		}
	}
	sort.Slice(out, func(i, j int) bool { return out[i].Text < out[j].Text })
	return out
}

// byteOffset turns a position in code points into one in bytes, within the code.
func byteOffset(code string, points int) int {
	if points <= 0 {
		return 0
	}
	n := 0
	for i := range code {
		if n == points {
			return i
		}
		n++
	}
	return len(code)
}

func isIdentifier(r rune) bool { return r == '_' || unicode.IsLetter(r) || unicode.IsDigit(r) }

// trailingIdentifier returns the identifier that s ends in, perhaps "".
func trailingIdentifier(s string) string {
	i := len(s)
	for i > 0 {
		r, n := utf8.DecodeLastRuneInString(s[:i])
		if !isIdentifier(r) {
			break
		}
		i -= n
	}
	word := s[i:]
	if r, _ := utf8.DecodeRuneInString(word); unicode.IsDigit(r) {
		return ""
	}
	return word
}

// trailingOperand returns the operand that s ends in: identifiers joined by dots, with calls, indices and type
// assertions, as in "r.Budget(1).Rows[0]"; "" when s ends in none.
func trailingOperand(s string) string {
	end := len(strings.TrimRightFunc(s, unicode.IsSpace))
	i := end
	for {
		// one element from the right: brackets, then an identifier or a parenthesised expression
		closed := false
		for i > 0 && (s[i-1] == ')' || s[i-1] == ']' || s[i-1] == '}') {
			j := openingBracket(s[:i])
			if j < 0 {
				return ""
			}
			i = j
			closed = true
		}
		word := trailingIdentifier(s[:i])
		if word == "" && !closed {
			return ""
		}
		i -= len(word)
		j := len(strings.TrimRightFunc(s[:i], unicode.IsSpace))
		if j == 0 || s[j-1] != '.' {
			break
		}
		i = len(strings.TrimRightFunc(s[:j-1], unicode.IsSpace))
	}
	for _, k := range keywords { // "return x.", "if f(x)." and the like
		if rest, ok := strings.CutPrefix(s[i:end], k); ok && rest != "" && !isIdentifier(rune(rest[0])) && rest[0] < utf8.RuneSelf {
			return strings.TrimSpace(rest)
		}
	}
	return s[i:end]
}

// openingBracket returns the place of the bracket that the last byte of s closes, -1 when there is none. Brackets in
// string and rune literals don't count.
func openingBracket(s string) int {
	var open []int
	scanCode(s, func(i int, c byte) {
		switch c {
		case '(', '[', '{':
			open = append(open, i)
		case ')', ']', '}':
			if i == len(s)-1 {
				return
			}
			if len(open) > 0 {
				open = open[:len(open)-1]
			}
		}
	})
	if len(open) == 0 {
		return -1
	}
	return open[len(open)-1]
}

// insideLiteral reports whether s ends inside a string, a rune or a comment.
func insideLiteral(s string) bool { return scanCode(s, func(int, byte) {}) != inCode }

// What scanCode may end in.
const (
	inCode         = 0
	inLineComment  = '/'
	inBlockComment = '*'
	inRaw          = '`'
	inQuotes       = '"' // a string or a rune, over at the end of its line
)

// scanCode calls visit for every ASCII byte of s outside literals and comments, and returns what s ends in.
func scanCode(s string, visit func(i int, c byte)) (end byte) {
	for i := 0; i < len(s); {
		switch c := s[i]; {
		case c == '/' && strings.HasPrefix(s[i:], "//"):
			n := strings.IndexByte(s[i:], '\n')
			if n < 0 {
				return inLineComment
			}
			i += n
		case c == '/' && strings.HasPrefix(s[i:], "/*"):
			n := strings.Index(s[i+2:], "*/")
			if n < 0 {
				return inBlockComment
			}
			i += n + 4
		case c == '"' || c == '\'':
			j := i + 1
			for j < len(s) && s[j] != c && s[j] != '\n' {
				if s[j] == '\\' {
					j++
				}
				j++
			}
			if j >= len(s) {
				return inQuotes
			}
			i = j + 1
		case c == '`':
			n := strings.IndexByte(s[i+1:], '`')
			if n < 0 {
				return inRaw
			}
			i += n + 2
		default:
			if c < utf8.RuneSelf {
				visit(i, c)
			}
			i++
		}
	}
	return inCode
}
