package reduce

import (
	"errors"
	"fmt"
	"path"
	"regexp"
	"slices"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/lsq"
	"example.org/guardring/pkg/si"
)

// keys finds what may be a key in a sentence; what is quoted or stands in square
// brackets is the file's own text and is left alone.
var keys = regexp.MustCompile(`"[^"]*"|\[[^\]]*\]|[A-Za-z][A-Za-z0-9]*(?:[._][A-Za-z0-9]+)+`)

// tables are the parts of a bench whose keys are told in words.
var tables = []string{"channels", "corrections", "environment", "quantities"}

// extensions are those of files, which may be called as the tables are.
var extensions = []string{".csv", ".tsv", ".txt", ".toml"}

// words is a warning for people: names as the budget has them, and the key in
// brackets where it is one of bench.toml; parameters with their units. What tells a
// place in a file keeps its form.
func (c *chain) words(w error) string {
	if at := (*bench.Error)(nil); errors.As(w, &at) {
		return w.Error()
	}
	if r := (*lsq.Remark)(nil); errors.As(w, &r) {
		return r.In(func(j int) string { return "the " + bench.Words(c.b.Scalars[c.free[j]].Name) },
			func(j int, x float64) string { return amount(x, c.b.Scalars[c.free[j]].Unit) })
	}
	told := map[string]bool{}
	return keys.ReplaceAllStringFunc(w.Error(), func(s string) string {
		if s[0] == '"' || s[0] == '[' {
			return s
		}
		table, name, dotted := strings.Cut(s, ".")
		switch {
		case dotted && (!slices.Contains(tables, table) || slices.Contains(extensions, path.Ext(s))), !dotted && !c.known(s):
			return s
		case !dotted:
			return bench.Words(s)
		}
		said := bench.Words(s)
		if strings.Contains(name, ".") {
			table = ""
		}
		switch table {
		case "channels":
			said = "channel " + said
		case "corrections":
			said += " correction"
		}
		if told[s] {
			return said
		}
		told[s] = true
		return said + " (" + s + ")"
	})
}

// known reports whether a name is one of the bench or of its kind.
func (c *chain) known(name string) bool {
	for i := range c.b.Scalars {
		if c.b.Scalars[i].Name == name {
			return true
		}
	}
	for i := range c.b.Channels {
		if c.b.Channels[i].Name == name {
			return true
		}
	}
	for i := range c.m.Measurands {
		if base, _, _ := strings.Cut(c.m.Measurands[i].Name, " ("); base == name { // one for each series of readings
			return true
		}
	}
	for i := range c.m.Causes {
		if c.m.Causes[i].Name == name {
			return true
		}
	}
	_, correction := c.b.Corrections[name]
	return correction
}

// amount writes a value or a change in unit u, SI inside, with the prefix that
// suits it.
func amount(x float64, u si.Unit) string {
	if u.Offset != 0 {
		u = u.Coherent()
	}
	v, u := si.Prefixed(x, u)
	if u.Symbol == "1" || u.Symbol == "" {
		return fmt.Sprintf("%.6g", v)
	}
	return fmt.Sprintf("%.6g %s", v, u)
}
