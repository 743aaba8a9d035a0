package kernel

import "strings"

// IsComplete judges whether code can be run as it stands: "complete", "incomplete" with the indent of the next line,
// or "invalid".
func IsComplete(in Interpreter, code string) (status, indent string) {
	depth, bad := 0, false
	var stack []byte
	open := scanCode(code, func(_ int, c byte) {
		switch c {
		case '(', '[', '{':
			stack = append(stack, c)
		case ')', ']', '}':
			want := map[byte]byte{')': '(', ']': '[', '}': '{'}[c]
			if len(stack) == 0 || stack[len(stack)-1] != want {
				bad = true
				return
			}
			stack = stack[:len(stack)-1]
		}
	})
	depth = len(stack)
	if bad {
		return "invalid", ""
	}
	if open && !openLineComment(code) {
		if openLine(code) {
			return "invalid", "" // an interpreted string ends with its line
		}
		return "incomplete", ""
	}
	if depth > 0 {
		return "incomplete", strings.Repeat("\t", depth)
	}
	if strings.TrimSpace(code) == "" {
		return "complete", ""
	}
	switch in.Check(code) {
	case CodeIncomplete:
		return "incomplete", ""
	case CodeInvalid:
		return "invalid", ""
	}
	return "complete", ""
}

// openLineComment reports whether code ends in a comment that goes to the end of its line.
func openLineComment(code string) bool {
	last := code[strings.LastIndexByte(code, '\n')+1:]
	before := len(code) - len(last)
	if insideLiteral(code[:before]) {
		return false
	}
	return insideLiteral(code) && !insideLiteral(code+"\n")
}

// openLine reports whether code ends inside a string or rune that can't go on in the next line.
func openLine(code string) bool {
	// After a line break such a literal is over, while a raw string or a comment is not.
	return !insideLiteral(code + "\n")
}
