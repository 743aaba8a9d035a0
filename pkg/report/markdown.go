package report

import (
	"io"
	"strings"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
)

// Markdown writes the report in GitHub Flavored Markdown, without figures.
func Markdown(w io.Writer, r *reduce.Result) error { return MarkdownRecord(w, &r.Record) }

// MarkdownRecord is Markdown from a record alone.
func MarkdownRecord(w io.Writer, rec *reduce.Record) error {
	m := &marker{}
	m.document(build(rec, nil))
	return m.to(w)
}

// marker writes the Markdown form.
type marker struct{ b strings.Builder }

func (m *marker) to(w io.Writer) error {
	_, err := io.WriteString(w, m.b.String())
	return err
}

// mdEscaper takes from every character of Markdown and HTML its meaning.
var mdEscaper = strings.NewReplacer(`\`, `\\`, "`", "\\`", "*", `\*`, "_", `\_`, "{", `\{`, "}", `\}`, "[", `\[`, "]", `\]`,
	"#", `\#`, "|", `\|`, "~", `\~`, "$", `\$`, "!", `\!`, "<", "&lt;", ">", "&gt;", "&", "&amp;")

// md makes a text safe anywhere in Markdown, at the start of a line too.
func md(s string) string {
	s = mdEscaper.Replace(figure.OneLine(s))
	// Web addresses would become links by themselves.
	s = strings.ReplaceAll(s, "://", ":\u200b//")
	if s == "" {
		return s
	}
	digits := strings.TrimLeft(s, "0123456789")
	switch {
	case strings.HasPrefix(s, "- "), strings.HasPrefix(s, "+ "), strings.HasPrefix(s, "="), s[0] == '-', s[0] == '+':
		return `\` + s
	case digits != s && (strings.HasPrefix(digits, ". ") || strings.HasPrefix(digits, ") ")):
		return s[:len(s)-len(digits)] + `\` + digits
	}
	return s
}

func (m *marker) document(d *document) {
	m.b.WriteString("# " + md(d.title) + "\n\n" + md(d.subtitle) + "\n\n")
	for _, b := range d.blocks {
		switch {
		case b.heading != "":
			m.b.WriteString("## " + md(b.heading) + "\n\n")
		case b.caution != nil:
			m.b.WriteString("> " + md(b.caution.text) + "\n")
			for _, s := range b.caution.above {
				m.b.WriteString(">\n> **" + md(s) + "**\n")
			}
			m.b.WriteString("\n")
		case b.results != nil:
			for _, r := range b.results {
				m.b.WriteString("- " + md(r.name) + " = **" + md(r.short) + "**")
				if r.expanded != "" {
					m.b.WriteString("  \n  " + md(r.expanded))
				}
				m.b.WriteString("\n")
			}
			m.b.WriteString("\n")
		case b.para != "":
			m.b.WriteString(md(b.para) + "\n\n")
		case b.notices != nil:
			for _, s := range b.notices {
				m.b.WriteString("- " + md(s) + "\n")
			}
			m.b.WriteString("\n")
		case b.facts != nil:
			for _, f := range b.facts {
				m.b.WriteString("- " + md(f.label) + ": " + md(f.text) + "\n")
			}
			m.b.WriteString("\n")
		case b.table != nil:
			m.table(b.table)
			m.b.WriteString("\n")
		}
	}
}

func (m *marker) table(t *Table) {
	if t.Caption != "" {
		m.b.WriteString(md(t.Caption) + "\n\n")
	}
	row := func(get func(c int) string) {
		m.b.WriteString("|")
		for c := range t.Columns {
			s := get(c)
			if s == "" {
				m.b.WriteString(" |")
			} else {
				m.b.WriteString(" " + s + " |")
			}
		}
		m.b.WriteString("\n")
	}
	row(func(c int) string { return md(t.Columns[c].Name) })
	row(func(c int) string {
		if a := t.Columns[c].Align; a == Right || a == Decimal {
			return "--:"
		}
		return ":--"
	})
	if t.units() {
		row(func(c int) string {
			if u := t.Columns[c].Unit; u != "" {
				return "*" + md(u) + "*"
			}
			return ""
		})
	}
	rows := t.cells()
	for i := range rows {
		if name, ok := t.section(i); ok {
			row(func(c int) string {
				if c == 0 {
					return "**" + md(name) + "**"
				}
				return ""
			})
		}
		row(func(c int) string {
			if t.Columns[c].Align == Bar {
				return bar(rows[i][c])
			}
			return md(strings.TrimRight(rows[i][c], figureSpace+"\u2008"))
		})
	}
}
