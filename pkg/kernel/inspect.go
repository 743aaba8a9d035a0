package kernel

import (
	"fmt"
	"html"
	"sort"
	"strings"
	"unicode/utf8"

	"example.org/guardring/pkg/kernel/docindex"
)

// Inspect describes what stands at the cursor (in code points): forms for a tooltip, false when there is nothing to
// say. detail 0 gives the declaration and its documentation; detail 1 adds the present value, and the members of a
// type or package.
func Inspect(in Interpreter, docs *docindex.Index, code string, cursor, detail int) (map[string]any, bool) {
	expr := operandAt(code, byteOffset(code, cursor))
	if expr == "" {
		return nil, false
	}
	d, err := in.Describe(expr)
	if err != nil {
		return nil, false
	}
	var p page
	switch d.Kind {
	case "package":
		p.head = fmt.Sprintf("package %s // import %q", expr, d.Type)
		if pkg, err := docs.Package(d.Path); err == nil {
			p.text = pkg.Doc
		}
		if detail > 0 {
			p.list(d.Members)
		}
	default:
		p.head = expr + " " + d.Type
		switch d.Kind {
		case "func", "method":
			p.head = "func " + expr + strings.TrimPrefix(d.Type, "func")
		case "type":
			p.head = "type " + expr
		case "const", "var":
			p.head = d.Kind + " " + expr + " " + d.Type
		}
		if d.Path != "" && d.Symbol != "" {
			if e, ok := docs.Lookup(d.Path, d.Symbol); ok {
				p.text = e.Doc
				if d.Kind != "var" && d.Kind != "value" {
					p.head = e.Decl
				} else if e.Kind == "type" && detail > 0 {
					p.head += "\n\n" + e.Decl
				}
				if e.From != "" {
					p.text = strings.TrimSpace(p.text + "\n\nPromoted from " + e.From + ".")
				}
			}
		}
		if detail > 0 {
			if v, ok := in.Value(expr); ok {
				p.value = v
			}
			if d.Kind != "func" && d.Kind != "method" {
				p.list(d.Members)
			}
		}
	}
	return p.forms(), true
}

// operandAt returns the operand around a place in the code: the whole identifier that the place is in or behind,
// with what stands before it; behind or inside the brackets of a call, the function that is called.
func operandAt(code string, at int) string {
	end := at
	for end < len(code) {
		r, n := utf8.DecodeRuneInString(code[end:])
		if !isIdentifier(r) {
			break
		}
		end += n
	}
	head := strings.TrimRight(code[:end], " \t")
	if insideComment(head) {
		return ""
	}
	if trailingIdentifier(head) != "" && !insideLiteral(head) {
		return trailingOperand(head)
	}
	if strings.HasSuffix(head, ".") && !insideLiteral(head) {
		return trailingOperand(head[:len(head)-1])
	}
	// inside a call's brackets: what is called
	var open []int
	scanCode(code[:at], func(i int, c byte) {
		switch c {
		case '(', '[', '{':
			open = append(open, i)
		case ')', ']', '}':
			if len(open) > 0 {
				open = open[:len(open)-1]
			}
		}
	})
	for k := len(open) - 1; k >= 0; k-- {
		if code[open[k]] == '(' {
			if op := trailingOperand(code[:open[k]]); op != "" {
				return op
			}
		}
	}
	if strings.HasSuffix(head, ")") { // behind a call: what was called
		if i := openingBracket(head); i > 0 {
			return trailingOperand(head[:i])
		}
	}
	return ""
}

func insideComment(s string) bool {
	end := scanCode(s, func(int, byte) {})
	return end == inLineComment || end == inBlockComment
}

// page is what a tooltip says.
type page struct {
	head, text, value string
	members           []Name
}

func (p *page) list(members []Name) {
	p.members = append([]Name(nil), members...)
	sort.SliceStable(p.members, func(i, j int) bool { return p.members[i].Name < p.members[j].Name })
}

func (p *page) forms() map[string]any {
	var plain, rich strings.Builder
	plain.WriteString(p.head)
	fmt.Fprintf(&rich, "<pre>%s</pre>", html.EscapeString(p.head))
	if p.text != "" {
		plain.WriteString("\n\n" + strings.TrimSpace(p.text))
		for _, para := range strings.Split(strings.TrimSpace(p.text), "\n\n") {
			if strings.HasPrefix(para, "\t") || strings.HasPrefix(para, " ") {
				fmt.Fprintf(&rich, "<pre>%s</pre>", html.EscapeString(para))
			} else {
				fmt.Fprintf(&rich, "<p>%s</p>", html.EscapeString(para))
			}
		}
	}
	if p.value != "" {
		plain.WriteString("\n\nNow: " + p.value)
		fmt.Fprintf(&rich, "<p>Now: <code>%s</code></p>", html.EscapeString(p.value))
	}
	if len(p.members) > 0 {
		plain.WriteString("\n")
		rich.WriteString("<pre>")
		for _, m := range p.members {
			line := strings.TrimSpace(m.Kind + " " + m.Name + " " + m.Type)
			plain.WriteString("\n    " + line)
			rich.WriteString(html.EscapeString(line) + "\n")
		}
		rich.WriteString("</pre>")
	}
	return map[string]any{"text/plain": plain.String(), "text/html": rich.String()}
}
