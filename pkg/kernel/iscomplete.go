package kernel

import "strings"

// IsComplete judges whether code can be run as it stands: "complete", "incomplete" with the indent of the next line,
// or "invalid".
func IsComplete(in Interpreter, code string) (status, indent string) {
	_, code = splitSpecial(code)
	bad := false
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
	depth := len(stack)
	if bad {
		return "invalid", ""
	}
	switch open {
	case inQuotes:
		return "invalid", ""
	case inRaw, inBlockComment:
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
