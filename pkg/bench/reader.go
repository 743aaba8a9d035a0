package bench

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/si"
)

// reader takes values out of a document and gathers what is wrong with them.
type reader struct {
	file    string
	root    *node
	grammar *grammar // of the whole file
	errs    errorList
	warn    []error
	// instruments that quantities name, to be looked up when all are known.
	cited []*node
}

func suggest(word string, known []string) string { return si.Suggest(word, known) }

// fail notes an error at the value of n.
func (r *reader) fail(n *node, format string, a ...any) {
	r.errs.add(r.errorf(n, format, a...))
}

func (r *reader) errorf(n *node, format string, a ...any) *Error {
	return &Error{File: r.file, Line: n.vline, Column: n.vcol, Key: n.path, Problem: fmt.Sprintf(format, a...)}
}

// missing notes that a table lacks a key.
func (r *reader) missing(t *node, key, hint string) {
	problem := "is missing"
	if hint != "" {
		problem += "; " + hint
	}
	r.errs.add(&Error{File: r.file, Line: t.line, Column: t.col, Key: join(t.path, key), Problem: problem})
}

// warnf notes a warning at n.
func (r *reader) warnf(n *node, format string, a ...any) {
	r.warn = append(r.warn, &Error{File: r.file, Line: n.line, Column: n.col, Key: n.path, Problem: fmt.Sprintf(format, a...)})
}

// quoted shows a text of the file in a message, shortened.
func quoted(s string) string {
	const most = 60
	if len(s) > most {
		cut := most
		for cut > 0 && s[cut]&0xC0 == 0x80 {
			cut--
		}
		s = s[:cut] + "…"
	}
	return strconv.Quote(s)
}

// shown is the value of n for messages.
func shown(n *node) string {
	switch n.shape {
	case isText:
		return quoted(n.text)
	case isTable, isArray:
		return n.shape.String()
	}
	return n.text
}

// text returns the text under key; "" when there is none.
func (r *reader) text(t *node, key string) string {
	n := t.field(key)
	if n == nil {
		return ""
	}
	if n.shape != isText {
		r.fail(n, "%s where a text is due; put it in quotes", shown(n))
		return ""
	}
	if len(n.text) > 4096 {
		r.fail(n, "the text has %d bytes; at most 4096 are read", len(n.text))
		return ""
	}
	if strings.TrimSpace(n.text) == "" {
		r.fail(n, "the text is empty; leave the key out, or fill it in")
		return ""
	}
	return n.text
}

// word returns the text under key, which must be one of known.
func (r *reader) word(t *node, key, byDefault string, known ...string) string {
	n := t.field(key)
	if n == nil {
		return byDefault
	}
	s := r.text(t, key)
	if s == "" {
		return byDefault
	}
	for _, k := range known {
		if s == k {
			return s
		}
	}
	r.fail(n, "%s is not known here%s", quoted(s), didYouMean(s, known))
	return byDefault
}

// texts returns the texts under key: an array, or one text.
func (r *reader) texts(t *node, key string) []string {
	n := t.field(key)
	if n == nil {
		return nil
	}
	if n.shape == isText {
		return []string{r.text(t, key)}
	}
	if n.shape != isArray {
		r.fail(n, `%s where texts are due, like ["one", "two"]`, shown(n))
		return nil
	}
	var out []string
	for _, e := range n.items {
		if e.shape != isText {
			r.fail(e, "%s where a text is due; put it in quotes", shown(e))
			continue
		}
		out = append(out, e.text)
	}
	return out
}

// flag returns the boolean under key.
func (r *reader) flag(t *node, key string, byDefault bool) bool {
	n := t.field(key)
	if n == nil {
		return byDefault
	}
	if n.shape != isBool {
		r.fail(n, "%s where true or false is due", shown(n))
		return byDefault
	}
	return n.flag
}

// whole returns the integer under key, between lo and hi.
func (r *reader) whole(t *node, key string, lo, hi int) (int, bool) {
	n := t.field(key)
	if n == nil {
		return 0, false
	}
	if n.shape != isNumber || !n.integer {
		r.fail(n, "%s where a whole number is due", shown(n))
		return 0, false
	}
	if n.number < float64(lo) || n.number > float64(hi) {
		r.fail(n, "%s lies outside %d to %d", shown(n), lo, hi)
		return 0, false
	}
	return int(n.number), true
}

// date returns the date under key in ISO 8601; TOML dates and texts both do.
func (r *reader) date(t *node, key string) string {
	n := t.field(key)
	if n == nil {
		return ""
	}
	if n.shape == isText || n.shape == isDate {
		day := n.text
		if n.shape == isDate && len(day) > 10 {
			day = day[:10]
		}
		if _, err := time.Parse("2006-01-02", day); err == nil {
			return day
		}
	}
	r.fail(n, "%s is not a date; write it like 2026-03-04", shown(n))
	return ""
}

// table returns the table under key, nil when there is none.
func (r *reader) table(t *node, key string) *node {
	n := t.field(key)
	if n == nil {
		return nil
	}
	if n.shape != isTable {
		r.fail(n, "%s where a table is due, like [%s]", shown(n), n.path)
		return nil
	}
	return n
}

// tables returns the tables of an array of tables.
func (r *reader) tables(t *node, key string) []*node {
	n := t.field(key)
	if n == nil {
		return nil
	}
	switch n.shape {
	case isTable:
		if !n.inline {
			r.fail(n, "one table where several may stand; write [[%s]]", n.path)
			return nil
		}
	case isArray:
		for _, e := range n.items {
			if e.shape != isTable {
				r.fail(e, "%s where a table is due", shown(e))
				return nil
			}
		}
		return n.items
	}
	r.fail(n, "%s where an array of tables is due, like [[%s]]", shown(n), n.path)
	return nil
}

// unit reads the unit under key.
func (r *reader) unit(t *node, key string) (si.Unit, bool) {
	n := t.field(key)
	if n == nil {
		return si.Unit{}, false
	}
	if n.shape == isNumber && n.text == "1" {
		return si.One, true
	}
	s := r.text(t, key)
	if s == "" {
		return si.Unit{}, false
	}
	u, err := si.ParseUnit(s)
	if err != nil {
		e := r.errorf(n, "%v", err)
		e.Err = err
		r.errs.add(e)
		return si.Unit{}, false
	}
	return u, true
}

// wanted is the dimension that a quantity must have.
type wanted struct {
	any  bool    // every dimension will do
	like si.Unit // a unit that would be right
	// interval: an uncertainty or another difference, for which degC is K.
	interval bool
}

// number reads n, a quantity in a text or a plain number, in SI.
func (r *reader) number(n *node, want wanted) (float64, si.Unit, bool) {
	switch n.shape {
	case isNumber:
		if math.IsNaN(n.number) || math.IsInf(n.number, 0) {
			r.fail(n, "%s is not a finite number", n.text)
			return 0, si.Unit{}, false
		}
		if !want.any && !want.like.Dim.IsOne() {
			r.fail(n, `%s is a plain number; %s is due, with its unit (for example "%s %s")`,
				n.text, dimensionName(want.like), n.text, want.like.Symbol)
			return 0, si.Unit{}, false
		}
		return n.number, si.One, true
	case isText:
		parse := si.ParseQuantity
		if want.interval {
			parse = si.ParseInterval
		}
		v, u, err := parse(n.text)
		if err != nil {
			e := r.errorf(n, "%v", err)
			e.Err = err
			r.errs.add(e)
			return 0, si.Unit{}, false
		}
		if !want.any && u.Dim != want.like.Dim {
			if form := "relative_" + n.name; want.interval && u.Dim.IsOne() && slices.Contains(append(uncertaintyForms, "relative_noise"), form) {
				r.fail(n, "%s is a pure number; %s is due, or write %s = %s", quoted(n.text), dimensionName(want.like), form, quoted(n.text))
				return 0, si.Unit{}, false
			}
			r.measures(n, u, want.like)
			return 0, si.Unit{}, false
		}
		return v, u, true
	}
	r.fail(n, `%s where a number with its unit is due, like "50 mm"`, shown(n))
	return 0, si.Unit{}, false
}

// measures checks that unit u has the dimension of like.
func (r *reader) measures(n *node, u, like si.Unit) bool {
	if u.Dim == like.Dim {
		return true
	}
	e := r.errorf(n, "%s", WrongDimension(n.text, u, like))
	e.Err = u.CheckDim(like.Dim)
	r.errs.add(e)
	return false
}

// amount reads the number under key.
func (r *reader) amount(t *node, key string, want wanted) (float64, si.Unit, bool) {
	n := t.field(key)
	if n == nil {
		return 0, si.Unit{}, false
	}
	return r.number(n, want)
}

// positive reads a number above zero under key.
func (r *reader) positive(t *node, key string, want wanted) (float64, bool) {
	n := t.field(key)
	if n == nil {
		return 0, false
	}
	v, _, ok := r.number(n, want)
	if ok && !(v > 0) {
		r.fail(n, "%s must be above zero; leave the key out when there is none", shown(n))
		return 0, false
	}
	return v, ok
}

// ratio reads a pure number above zero under key, "0.02 %" or 2e-4.
func (r *reader) ratio(t *node, key string) (float64, bool) {
	return r.positive(t, key, wanted{like: si.One, interval: true})
}

// probability reads a probability between 0 and 1, both excluded.
func (r *reader) probability(t *node, key string) (float64, bool) {
	p, ok := r.ratio(t, key)
	if ok && p >= 1 {
		n := t.field(key)
		hint := ""
		if p < 100 && n.shape == isNumber {
			hint = fmt.Sprintf(`; write "%s %%"`, n.text)
		}
		r.fail(n, "%s is not a probability below 1%s", shown(n), hint)
		return 0, false
	}
	return p, ok
}

// coverage reads a coverage probability.
func (r *reader) coverage(t *node, key string) (float64, bool) {
	p, ok := r.probability(t, key)
	if ok && gum.CheckCoverage(p) != nil {
		r.fail(t.field(key), "%s is no coverage probability: those lie from 50 %% to 99.9999 %%", shown(t.field(key)))
		return 0, false
	}
	return p, ok
}

// dof reads degrees of freedom; +Inf when not stated.
func (r *reader) dof(t *node, key string) float64 {
	n := t.field(key)
	if n == nil {
		return math.Inf(1)
	}
	if n.shape == isText && strings.EqualFold(n.text, "infinite") || n.shape == isNumber && math.IsInf(n.number, 1) {
		return math.Inf(1)
	}
	if n.shape != isNumber || !(n.number > 0) {
		r.fail(n, "%s where degrees of freedom are due: a number above zero, or leave the key out when they are infinite", shown(n))
		return math.Inf(1)
	}
	// JCGM 100:2008 G.4.2: ν = ½ (Δu/u)⁻², and an uncertainty that may be wrong by
	// more than itself is none.
	if n.number < 0.5 {
		r.fail(n, "%s degrees of freedom: 0.5 belong to an uncertainty that may be wrong by all of itself, and fewer say nothing", n.text)
		return math.Inf(1)
	}
	return n.number
}

// check refuses keys that grammar g does not know, in the order of the file.
func (r *reader) check(n *node, g *grammar) {
	if n.shape == isArray && g.array {
		for _, e := range n.items {
			if e.shape == isTable {
				r.checkTable(e, g)
			}
		}
		return
	}
	if n.shape == isTable {
		if g.leaf {
			r.fail(n, "a table where a plain value is due")
			return
		}
		r.checkTable(n, g)
	}
}

func (r *reader) checkTable(n *node, g *grammar) {
	for _, name := range n.keys {
		f := n.fields[name]
		c := g.children[name]
		if c == nil && g.each != nil {
			c = g.each
		}
		if c != nil {
			r.check(f, c)
			continue
		}
		f.used = true
		e := &Error{File: r.file, Line: f.line, Column: f.col, Key: f.path, Problem: "the key is not known" + r.hint(name, n, g)}
		r.errs.add(e)
	}
}

// hint says where an unknown key may belong: a near name in the same table, or
// the same name elsewhere.
func (r *reader) hint(name string, n *node, g *grammar) string {
	if s := suggest(name, g.order); s != "" {
		return "; did you mean " + s + "?"
	}
	if at := r.elsewhere(name, n.path); at != "" {
		return "; it belongs in [" + at + "]"
	}
	if len(g.order) > 0 && len(g.order) <= 24 {
		return "; known here: " + strings.Join(g.order, ", ")
	}
	return ""
}

// elsewhere finds the table that has a key of that name, "" when there is none
// or it is the same table.
func (r *reader) elsewhere(name, path string) string {
	for _, table := range r.grammar.order {
		c := r.grammar.children[table]
		if table != path && !c.quantity && !c.array && c.children[name] != nil {
			return table
		}
		for _, sub := range c.order {
			if p := table + "." + sub; p != path && !c.children[sub].quantity && c.children[sub].children[name] != nil {
				return p
			}
		}
	}
	return ""
}
