package report

import (
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
)

// LaTeX writes the report as a document for any of the usual engines that needs
// no package beyond the standard classes and fontenc; figures are left out.
func LaTeX(w io.Writer, r *reduce.Result) error { return LaTeXRecord(w, &r.Record) }

// LaTeXRecord is LaTeX from a record alone.
func LaTeXRecord(w io.Writer, rec *reduce.Record) error {
	s := &setter{}
	s.document(build(rec, nil))
	return s.to(w)
}

// setter writes the LaTeX form.
type setter struct {
	b     strings.Builder
	tight bool // tables are set smaller, the more columns they have: they stand in somebody else's page
}

func (s *setter) to(w io.Writer) error {
	_, err := io.WriteString(w, s.b.String())
	return err
}

var texWords = map[rune]string{
	'\\': `\textbackslash{}`, '{': `\{`, '}': `\}`, '$': `\$`, '&': `\&`, '#': `\#`, '%': `\%`, '_': `\_`,
	'^': `\textasciicircum{}`, '~': `\textasciitilde{}`, '<': `\textless{}`, '>': `\textgreater{}`, '|': `\textbar{}`, '"': `\textquotedbl{}`,
	'\'': `\textquotesingle{}`, '`': `\textasciigrave{}`, '-': `{-}`,
	'−': `$-$`, '×': `$\times$`, '·': `$\cdot$`, '±': `$\pm$`, '∞': `$\infty$`, '°': `$^\circ$`, '≤': `$\le$`, '≥': `$\ge$`, '≈': `$\approx$`, '√': `$\surd$`,
	'\u00b5': `$\mu$`, '\u03bc': `$\mu$`, 'Ω': `$\Omega$`, '\u2126': `$\Omega$`, 'α': `$\alpha$`, 'β': `$\beta$`, 'δ': `$\delta$`, 'Δ': `$\Delta$`, 'ε': `$\varepsilon$`,
	'θ': `$\theta$`, 'ν': `$\nu$`, 'π': `$\pi$`, 'ρ': `$\rho$`, 'σ': `$\sigma$`, 'τ': `$\tau$`, 'χ': `$\chi$`, '′': `$'$`, '″': `$''$`, '½': `$\frac12$`,
	'…': `\ldots{}`, '–': `--`, '—': `---`, '‘': "`", '’': "'", '“': "``", '”': "''", nbspRune: `~`, '\u2009': `\,`, '\u202f': `\,`, '\u200b': ``,
	'\u2007': `\phantom{0}`, '\u2008': `\phantom{.}`,
}

const nbspRune = '\u00a0'

const (
	supers = "⁰¹²³⁴⁵⁶⁷⁸⁹⁺⁻"
	subs   = "₀₁₂₃₄₅₆₇₈₉"
)

// tex makes a text safe in LaTeX. Letters with accents stay, for the engine's
// UTF-8; what no usual font holds is named by its code point.
func tex(s string) string {
	var b strings.Builder
	level := byte(0) // inside a superscript or subscript
	set := func(l byte) {
		if level == l {
			return
		}
		if level != 0 {
			b.WriteString("}$")
		}
		if l != 0 {
			b.WriteString("$" + string(l) + "{")
		}
		level = l
	}
	for _, r := range figure.OneLine(s) {
		if i := strings.IndexRune(supers, r); i >= 0 {
			set('^')
			b.WriteByte("0123456789+-"[len([]rune(supers[:i]))])
			continue
		}
		if i := strings.IndexRune(subs, r); i >= 0 {
			set('_')
			b.WriteByte("0123456789"[len([]rune(subs[:i]))])
			continue
		}
		set(0)
		switch w, ok := texWords[r]; {
		case ok:
			b.WriteString(w)
		case r < 0x80 || r >= 0xc0 && r < 0x180:
			b.WriteRune(r)
		default:
			fmt.Fprintf(&b, "[U+%04X]", r)
		}
	}
	set(0)
	return b.String()
}

func (s *setter) document(d *document) {
	b := &s.b
	b.WriteString("\\documentclass[a4paper,10pt]{article}\n\\usepackage[T1]{fontenc}\n\\usepackage{textcomp}\n\\IfFileExists{lmodern.sty}{\\usepackage{lmodern}}{}\n" +
		"\\setlength{\\textwidth}{17cm}\\setlength{\\oddsidemargin}{-0.4cm}\\setlength{\\textheight}{24.5cm}\\setlength{\\topmargin}{-1.8cm}\n" +
		"\\setlength{\\parindent}{0pt}\\setlength{\\parskip}{3pt plus 1pt}\\sloppy\n\\begin{document}\n")
	b.WriteString("{\\Large\\bfseries " + tex(d.title) + "\\par}\n" + tex(d.subtitle) + "\\par\n")
	s.blocks(d, func(heading string) string { return "\n\\subsection*{" + heading + "}\n" })
	b.WriteString("\\end{document}\n")
}

// blocks writes the body; heading sets a heading that is already escaped.
func (s *setter) blocks(d *document, heading func(string) string) {
	b := &s.b
	for _, bl := range d.blocks {
		switch {
		case bl.heading != "":
			b.WriteString(heading(tex(bl.heading)))
		case bl.caution != nil:
			b.WriteString("\n\\begin{quote}\\small " + tex(bl.caution.text) + "\n")
			for _, x := range bl.caution.above {
				b.WriteString("\n\\textbf{" + tex(x) + "}\n")
			}
			b.WriteString("\\end{quote}\n")
		case bl.results != nil:
			for _, r := range bl.results {
				b.WriteString(tex(r.name) + " = \\textbf{" + tex(r.short) + "}")
				if r.expanded != "" {
					b.WriteString("\\quad " + tex(r.expanded))
				}
				b.WriteString("\\par\n")
			}
		case bl.para != "":
			b.WriteString(tex(bl.para) + "\\par\n")
		case bl.notices != nil:
			b.WriteString("\\begin{itemize}\n")
			for _, x := range bl.notices {
				b.WriteString("\\item " + tex(x) + "\n")
			}
			b.WriteString("\\end{itemize}\n")
		case bl.facts != nil:
			b.WriteString("\\begin{description}\n")
			for _, f := range bl.facts {
				b.WriteString("\\item[" + tex(f.label) + "] " + tex(f.text) + "\n")
			}
			b.WriteString("\\end{description}\n")
		case bl.table != nil:
			b.WriteString("{" + s.size(bl.table) + "\n")
			s.table(bl.table)
			b.WriteString("\\par}\n")
		case bl.figure != nil:
			b.WriteString(tex(bl.figure.String()) + "\\par\n")
		}
	}
}

// size chooses the size of a table's type.
func (s *setter) size(t *Table) string {
	n := len(t.Columns)
	if s.tight {
		n += 2
	}
	switch {
	case n < 8:
		return `\small`
	case n < 11 || !s.tight:
		return `\footnotesize\setlength{\tabcolsep}{3pt}`
	}
	return `\scriptsize\setlength{\tabcolsep}{3pt}`
}

// narrow is the length of a text up to which a column is set on one line; wider
// ones become paragraphs.
const narrow = 30

func (s *setter) table(t *Table) {
	if len(t.Columns) == 0 {
		return
	}
	b := &s.b
	rows := t.cells()
	if t.Caption != "" {
		b.WriteString(tex(t.Caption) + "\\par\n")
	}
	b.WriteString("\\begin{tabular}{@{}")
	for c, col := range t.Columns {
		longest := 0
		for i := range rows {
			longest = max(longest, len([]rune(rows[i][c])))
		}
		switch {
		case col.Align == Right || col.Align == Decimal:
			b.WriteByte('r')
		case col.Align == Left && longest > narrow && longest != 64: // 64: a hash stays whole
			b.WriteString("p{5.2cm}")
		default:
			b.WriteByte('l')
		}
	}
	b.WriteString("@{}}\n\\hline\n")
	line := func(get func(c int) string) {
		for c := range t.Columns {
			if c > 0 {
				b.WriteString(" & ")
			}
			b.WriteString(get(c))
		}
		b.WriteString(" \\\\\n")
	}
	line(func(c int) string { return tex(t.Columns[c].Name) })
	if t.units() {
		line(func(c int) string { return tex(t.Columns[c].Unit) })
	}
	b.WriteString("\\hline\n")
	for i, row := range rows {
		if t.Sum > 0 && i == len(rows)-t.Sum {
			b.WriteString("\\hline\n")
		}
		if name, ok := t.section(i); ok {
			fmt.Fprintf(b, "\\multicolumn{%d}{@{}l}{\\textit{%s}} \\\\\n", len(t.Columns), tex(name))
		}
		line(func(c int) string {
			switch {
			case t.Columns[c].Align == Bar:
				f, ok := fraction(row[c])
				if !ok {
					return ""
				}
				return "\\rule{" + strconv.FormatFloat(math.Round(150*math.Min(math.Abs(f), 1))/100, 'f', 2, 64) + "cm}{1.2ex}"
			case c == 0 && len(t.Sections) > 0 && i < len(rows)-t.Sum:
				return "\\quad " + tex(row[c])
			case len(row[c]) == 64 && t.Columns[c].Align == Left:
				return "{\\scriptsize " + tex(row[c]) + "}"
			}
			return tex(row[c])
		})
	}
	b.WriteString("\\hline\n\\end{tabular}\n")
}
