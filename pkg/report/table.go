package report

import (
	"io"
	"strconv"
	"strings"

	"example.org/guardring/pkg/figure"
)

// Align says how the cells of a column stand.
type Align int

// The ways to align. Numbers of one column that should line up at the point are
// aligned Decimal.
const (
	Left Align = iota
	Right
	Decimal
	// Bar draws the cell, a fraction from 0 to 1 as a decimal number, as a bar.
	Bar
)

// Column is one column of a Table.
type Column struct {
	Name  string
	Unit  string // stands in a second header row; "" for none
	Align Align
	Most  int  // Left columns: widest text before it is broken, in characters; 0: 36
	Close bool // belongs to the column before: a unit to its number
}

// Table is a small table: a few columns whose cells are already text.
type Table struct {
	Caption string
	Columns []Column
	Rows    [][]string // one cell a column; a missing one is empty
	// Sections name groups of rows.
	Sections []Section
	// Sum is the number of rows at the end that stand under a rule.
	Sum int
}

// Section is a heading inside a table.
type Section struct {
	Before int // index of the row it stands over
	Name   string
}

// figureSpace is as wide as a digit.
const figureSpace = "\u2007"

// cells returns the rows as they are shown: one line each, as many as there are
// columns, decimals padded so that points line up when set flush right.
func (t *Table) cells() [][]string {
	out := make([][]string, len(t.Rows))
	for i, row := range t.Rows {
		out[i] = make([]string, len(t.Columns))
		for c := range t.Columns {
			if c < len(row) {
				out[i][c] = figure.OneLine(row[c])
			}
		}
	}
	for c, col := range t.Columns {
		if col.Align != Decimal {
			continue
		}
		most := 0
		for i := range out {
			_, after := point(out[i][c])
			most = max(most, after)
		}
		for i := range out {
			number, after := point(out[i][c])
			if !number || most == 0 {
				continue
			}
			pad := most - after
			if after == 0 {
				pad++ // the point itself
				out[i][c] += "\u2008"
				pad--
			}
			out[i][c] += strings.Repeat(figureSpace, pad)
		}
	}
	return out
}

// point tells whether a cell is a plain number and how many digits stand after
// its point.
func point(s string) (number bool, after int) {
	plain := strings.NewReplacer("−", "-", "\u2009", "").Replace(s)
	if _, err := strconv.ParseFloat(plain, 64); err != nil {
		return false, 0
	}
	if strings.ContainsAny(plain, "eExXnN") {
		return false, 0
	}
	_, frac, _ := strings.Cut(plain, ".")
	return true, len(frac)
}

// units tells whether any column has a unit.
func (t *Table) units() bool {
	for _, c := range t.Columns {
		if c.Unit != "" {
			return true
		}
	}
	return false
}

// section returns the name of the section that starts at row i.
func (t *Table) section(i int) (string, bool) {
	for _, s := range t.Sections {
		if s.Before == i {
			return figure.OneLine(s.Name), true
		}
	}
	return "", false
}

// fraction reads the cell of a bar.
func fraction(s string) (float64, bool) {
	f, err := strconv.ParseFloat(s, 64)
	if err != nil || f != f {
		return 0, false
	}
	return f, true
}

// Text writes the table for a terminal or a text file, with rules of its own
// width.
func (t *Table) Text(w io.Writer) error {
	p := &printer{}
	p.table(t)
	return p.to(w)
}

// HTML writes the table as an element with styles of its own, so that it looks
// the same wherever it is put, on light ground and on dark.
func (t *Table) HTML(w io.Writer) error {
	p := &pager{inline: true}
	p.table(t)
	return p.to(w)
}

// Markdown writes the table in the pipe form of GitHub Flavored Markdown; units
// are the first row of the body, since the form has one header row.
func (t *Table) Markdown(w io.Writer) error {
	p := &marker{}
	p.table(t)
	return p.to(w)
}

// LaTeX writes a tabular environment that needs no package.
func (t *Table) LaTeX(w io.Writer) error {
	p := &setter{}
	p.table(t)
	return p.to(w)
}

// String returns the text form.
func (t *Table) String() string {
	p := &printer{}
	p.table(t)
	return p.b.String()
}

// SimpleRender gives the forms that a notebook can show.
func (t *Table) SimpleRender() map[string]any {
	h, l := &pager{inline: true}, &setter{tight: true}
	h.table(t)
	l.b.WriteString("{" + l.size(t) + "\n")
	l.table(t)
	l.b.WriteString("\\par}\n")
	return map[string]any{
		"text/plain": t.String(),
		"text/html":  h.b.String(),
		"text/latex": l.b.String(),
	}
}

// CSV writes the table as RFC 4180 with units in the header as NAME/UNIT. A cell
// that a spreadsheet would take for a formula is given a leading apostrophe.
func (t *Table) CSV(w io.Writer) error {
	var b strings.Builder
	line := func(cells []string) {
		for i, c := range cells {
			if i > 0 {
				b.WriteByte(',')
			}
			if strings.ContainsAny(c, ",\"\r\n") {
				c = `"` + strings.ReplaceAll(c, `"`, `""`) + `"`
			}
			b.WriteString(c)
		}
		b.WriteString("\r\n")
	}
	var head []string
	for _, c := range t.Columns {
		h := figure.OneLine(c.Name)
		if c.Unit != "" {
			h += "/" + figure.OneLine(c.Unit)
		}
		head = append(head, harmless(h))
	}
	line(head)
	for _, row := range t.Rows {
		cells := make([]string, len(t.Columns))
		for c := range cells {
			if c < len(row) {
				cells[c] = harmless(figure.OneLine(row[c]))
			}
		}
		line(cells)
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// harmless keeps a spreadsheet from running a text as a formula; numbers stay.
func harmless(s string) string {
	if s == "" || !strings.ContainsRune("=+-@\t\r", rune(s[0])) {
		return s
	}
	if _, err := strconv.ParseFloat(s, 64); err == nil {
		return s
	}
	return "'" + s
}
