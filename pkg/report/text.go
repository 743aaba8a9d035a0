package report

import (
	"io"
	"math"
	"strings"
	"unicode/utf8"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"golang.org/x/text/width"
)

// columns is the widest line of the text form.
const columns = 100

// Text writes the report for a terminal: aligned, at most 100 columns (a longer
// word, such as a file name, is not cut), UTF-8, no colour.
func Text(w io.Writer, r *reduce.Result) error { return TextRecord(w, &r.Record) }

// TextRecord is Text from a record alone.
func TextRecord(w io.Writer, rec *reduce.Record) error {
	p := &printer{}
	p.document(build(rec, nil))
	return p.to(w)
}

// printer writes the text form.
type printer struct{ b strings.Builder }

func (p *printer) to(w io.Writer) error {
	_, err := io.WriteString(w, p.b.String())
	return err
}

func (p *printer) document(d *document) {
	for _, l := range fold(figure.OneLine(d.title), columns) {
		p.line(l)
	}
	for _, l := range fold(figure.OneLine(d.subtitle), columns) {
		p.line(l)
	}
	p.blocks(d)
}

func (p *printer) blocks(d *document) {
	for _, b := range d.blocks {
		switch {
		case b.heading != "":
			h := figure.OneLine(b.heading)
			p.line("")
			p.line("── " + h + " " + strings.Repeat("─", max(3, columns-4-cells(h))))
		case b.caution != nil:
			p.line("")
			p.hang("▌ ", "▌ ", b.caution.text)
			for _, s := range b.caution.above {
				p.hang("▌ ! ", "▌   ", s)
			}
		case b.results != nil:
			p.results(b.results)
		case b.para != "":
			p.hang("   ", "   ", b.para)
		case b.notices != nil:
			for _, s := range b.notices {
				p.hang(" ! ", "   ", s)
			}
		case b.facts != nil:
			most := 0
			for _, f := range b.facts {
				most = max(most, cells(f.label))
			}
			for _, f := range b.facts {
				p.hang("   "+pad(f.label, most)+"  ", strings.Repeat(" ", most+5), f.text)
			}
		case b.table != nil:
			p.tableAt(b.table, "   ")
		case b.figure != nil:
			p.hang("   ", "   ", b.figure.String())
		}
	}
}

func (p *printer) results(rs []result) {
	most := 0
	for _, r := range rs {
		most = max(most, cells(r.name))
	}
	for _, r := range rs {
		p.line("   " + pad(r.name, most) + " = " + r.short)
		if r.expanded != "" {
			p.line("   " + strings.Repeat(" ", most) + "   " + r.expanded)
		}
	}
}

// line writes one line without blanks at its end.
func (p *printer) line(s string) {
	p.b.WriteString(strings.TrimRight(s, " "))
	p.b.WriteByte('\n')
}

// hang writes a paragraph whose first line begins with first and the others
// with rest.
func (p *printer) hang(first, rest, s string) {
	for _, l := range fold(figure.OneLine(s), columns-cells(first)) {
		p.line(first + l)
		first = rest
	}
}

func (p *printer) table(t *Table) { p.tableAt(t, "") }

// eighths are the ends of bars.
var eighths = []string{"", "▏", "▎", "▍", "▌", "▋", "▊", "▉"}

const barCells = 6

// bar draws a fraction as blocks.
func bar(s string) string {
	f, ok := fraction(s)
	if !ok {
		return ""
	}
	n := int(math.Round(8 * barCells * math.Min(math.Abs(f), 1)))
	out := strings.Repeat("█", n/8) + eighths[n%8]
	if f < 0 && n > 0 {
		return "−" + out
	}
	return out
}

// layOut breaks texts that are wider than most, so that a row is as many lines
// as its longest cell; it returns the lines of each cell, the widths of the
// columns and that of the table.
func (t *Table) layOut(rows [][]string, most []int, space int) (broken [][][]string, widths []int, total int) {
	broken = make([][][]string, len(rows))
	widths = make([]int, len(t.Columns))
	grouped := len(t.Sections) > 0
	for c, col := range t.Columns {
		widths[c] = max(cells(figure.OneLine(col.Name)), cells(figure.OneLine(col.Unit)))
		if col.Align == Bar {
			widths[c] = max(widths[c], barCells)
		}
	}
	for i, row := range rows {
		broken[i] = make([][]string, len(row))
		for c, s := range row {
			s = strings.NewReplacer(figureSpace, " ", "\u2008", " ", nbsp, " ").Replace(s)
			switch t.Columns[c].Align {
			case Bar:
				broken[i][c] = []string{bar(s)}
			case Left:
				broken[i][c] = fold(s, most[c])
			default:
				broken[i][c] = []string{s}
			}
			in := 0
			if c == 0 && grouped && i < len(rows)-t.Sum {
				in = 2 // rows stand in from their section
			}
			for _, l := range broken[i][c] {
				widths[c] = max(widths[c], in+cells(l))
			}
		}
	}
	for c, w := range widths {
		total += w
		if c > 0 {
			total += t.gap(c, space)
		}
	}
	return broken, widths, total
}

// gap is the distance of column c from the one before: a unit stands close to
// its number, a percentage to its bar.
func (t *Table) gap(c, space int) int {
	if t.Columns[c].Close {
		return 1
	}
	return space
}

func (p *printer) tableAt(t *Table, indent string) {
	if len(t.Columns) == 0 {
		return
	}
	rows := t.cells()
	most := make([]int, len(t.Columns)) // widest text of a Left column
	for c, col := range t.Columns {
		if most[c] = col.Most; col.Most == 0 {
			most[c] = 36
		}
	}
	space := 2
	broken, widths, total := t.layOut(rows, most, space)
	if total+cells(indent) > columns {
		indent = ""
	}
	for total > columns {
		// Narrow the widest text until the table fits or nothing more gives way.
		widest := -1
		for c, col := range t.Columns {
			if col.Align == Left && most[c] > 10 && widths[c] > cells(col.Name) && (widest < 0 || widths[c] > widths[widest]) {
				widest = c
			}
		}
		if widest < 0 && space == 1 {
			break
		} else if widest < 0 {
			space = 1
		} else {
			most[widest] = min(most[widest], widths[widest]) - 1
		}
		broken, widths, total = t.layOut(rows, most, space)
	}
	grouped := len(t.Sections) > 0
	ruled := func(r string) { p.line(indent + strings.Repeat(r, total)) }
	set := func(c int, s string) string {
		gap := strings.Repeat(" ", max(0, widths[c]-cells(s)))
		if a := t.Columns[c].Align; a == Right || a == Decimal {
			return gap + s
		}
		return s + gap
	}
	join := func(get func(c int) string) {
		l := indent
		for c := range t.Columns {
			if c > 0 {
				l += strings.Repeat(" ", t.gap(c, space))
			}
			l += set(c, get(c))
		}
		p.line(l)
	}
	if t.Caption != "" {
		for _, l := range fold(figure.OneLine(t.Caption), columns-cells(indent)) {
			p.line(indent + l)
		}
	}
	join(func(c int) string { return figure.OneLine(t.Columns[c].Name) })
	if t.units() {
		join(func(c int) string { return figure.OneLine(t.Columns[c].Unit) })
	}
	ruled("─")
	for i := range rows {
		if i == len(rows)-t.Sum && t.Sum > 0 {
			ruled("─")
		}
		if name, ok := t.section(i); ok {
			p.line(indent + name)
		}
		lines := 1
		for c := range broken[i] {
			lines = max(lines, len(broken[i][c]))
		}
		for k := range lines {
			join(func(c int) string {
				s := ""
				if k < len(broken[i][c]) {
					s = broken[i][c][k]
				}
				if c == 0 && grouped && i < len(rows)-t.Sum {
					return "  " + s
				}
				return s
			})
		}
	}
}

// cells is the number of terminal cells of a text.
func cells(s string) int {
	n := 0
	for _, r := range s {
		switch k := width.LookupRune(r).Kind(); {
		case k == width.EastAsianWide || k == width.EastAsianFullwidth:
			n += 2
		case r >= 0x300 && r < 0x370 || r == 0x200b || r == 0x200d || r == 0xfeff: // combining or without width
		default:
			n++
		}
	}
	return n
}

// nbsp holds a number and its unit together.
const nbsp = "\u00a0"

// pad fills a text up with blanks.
func pad(s string, n int) string { return s + strings.Repeat(" ", max(0, n-cells(s))) }

// longestLine bounds one word, so that a hostile one can't flood a terminal.
const longestLine = 400

// fold breaks a text into lines of at most n cells. A word that is longer stands
// alone, uncut up to longestLine.
func fold(s string, n int) []string {
	var out []string
	line := ""
	for word := range strings.SplitSeq(s, " ") {
		if word == "" {
			continue
		}
		word = strings.ReplaceAll(word, nbsp, " ")
		if cells(word) > longestLine {
			r := []rune(word)
			word = string(r[:min(len(r), longestLine/2)]) + "…"
		}
		switch {
		case line == "":
			line = word
		case cells(line)+1+cells(word) <= n:
			line += " " + word
		default:
			out = append(out, line)
			line = word
		}
	}
	if line != "" || len(out) == 0 {
		out = append(out, line)
	}
	if !utf8.ValidString(line) {
		out[len(out)-1] = strings.ToValidUTF8(line, "\uFFFD")
	}
	return out
}
