package kernel

import (
	"regexp"
	"strings"
)

// entry is one cell of the history.
type entry struct {
	line   int
	input  string
	output string // the plain text of its value, "" for none
}

// history holds the cells of this run of the kernel: session 1.
type history struct{ entries []entry }

const historySession = 1

func (h *history) add(line int, input, output string) {
	h.entries = append(h.entries, entry{line, input, output})
}

// tail returns the last n entries.
func (h *history) tail(n int) []entry {
	if n < 0 {
		n = 0
	}
	return h.entries[max(0, len(h.entries)-n):]
}

// between returns the entries with start <= line < stop; stop 0 means no end. Session 0 is this one, as is 1; there
// are no others.
func (h *history) between(session, start, stop int) []entry {
	if session != 0 && session != historySession {
		return nil
	}
	var out []entry
	for _, e := range h.entries {
		if e.line >= start && (stop <= 0 || e.line < stop) {
			out = append(out, e)
		}
	}
	return out
}

// search returns the last n entries (n 0: all) that match a pattern with * and ?, with unique each input once, the
// latest.
func (h *history) search(pattern string, n int, unique bool) []entry {
	var re strings.Builder
	re.WriteString("(?s)^")
	for _, r := range pattern {
		switch r {
		case '*':
			re.WriteString(".*")
		case '?':
			re.WriteString(".")
		default:
			re.WriteString(regexp.QuoteMeta(string(r)))
		}
	}
	match := regexp.MustCompile(re.String() + "$") // quoted, so that it always compiles
	var out []entry
	seen := map[string]bool{}
	for i := len(h.entries) - 1; i >= 0 && (n <= 0 || len(out) < n); i-- {
		e := h.entries[i]
		if !match.MatchString(e.input) || unique && seen[e.input] {
			continue
		}
		seen[e.input] = true
		out = append(out, e)
	}
	for i, j := 0, len(out)-1; i < j; i, j = i+1, j-1 {
		out[i], out[j] = out[j], out[i]
	}
	return out
}

// rows puts entries into the form of a history_reply.
func rows(entries []entry, output bool) []any {
	out := []any{}
	for _, e := range entries {
		if output {
			var text any
			if e.output != "" {
				text = e.output
			}
			out = append(out, []any{historySession, e.line, []any{e.input, text}})
		} else {
			out = append(out, []any{historySession, e.line, e.input})
		}
	}
	return out
}
