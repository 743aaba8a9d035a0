package certificate

import (
	"fmt"
	"strings"

	"example.org/guardring/pkg/figure"
)

// The page, in points: A4 with the head and foot that every page carries.
const (
	pageWidth, pageHeight = 595.28, 841.89
	marginX               = 54.0
	bodyTop               = 62.0
	bodyBottom            = 786.0
	bodyWidth             = pageWidth - 2*marginX
	headLine              = 42.0  // baseline of the head
	footLine              = 812.0 // baseline of the foot

	textSize, textLeading   = 9.0, 12.0
	cellSize, cellLeading   = 8.5, 11.0
	smallSize, smallLeading = 7.5, 10.0
	labelWidth              = 124.0
	columnGap               = 9.0
	figureWidth             = 400.0
	longestKept             = 12 // rows of a table that is not broken between pages
	mostLines               = 24 // lines of an atom of text; more become several
)

// atom is a piece that is not broken between pages: a heading, a fact, a row.
type atom struct {
	of     *block
	row    int // of facts, notices and tables
	height float64
	// keep holds the atom on the page of the one after it, unless what is held
	// together would not fit a page.
	keep bool
	// A text that is too long for one atom goes on in the next.
	goesOn, continued bool
	// lines are the texts, broken to their widths: one list a cell.
	cells [][]string
}

// page is a list of atoms. A table that goes on from the page before begins with
// its header again.
type page []atom

// headerRow is the row number of a table's header.
const headerRow = -1

// pages breaks the certificate into pages.
func (c *Certificate) pages() []page {
	var out []page
	var now page
	used := 0.0
	room := bodyBottom - bodyTop
	atoms := c.atoms()
	for i := 0; i < len(atoms); {
		// A table that is broken here begins with its header on the new page.
		var again page
		free := room
		if a := atoms[i]; a.of.kind == table && i > 0 && atoms[i-1].of == a.of {
			h := header(a.of)
			again, free = page{h}, room-h.height
		}
		// A run that stays together: up to the first atom that does not hold on to
		// the next, or as much as fits a page.
		n, need := i, 0.0
		for {
			need += atoms[n].height
			if !atoms[n].keep || n+1 == len(atoms) || need+atoms[n+1].height > free && !atoms[n].leads() {
				break
			}
			n++
		}
		if used > 0 && used+need > room {
			out, now, used = append(out, now), again, room-free
		}
		for ; i <= n; i++ {
			now = append(now, atoms[i])
			used += atoms[i].height
		}
	}
	return append(out, now)
}

// leads reports whether an atom is nothing without the one after it.
func (a *atom) leads() bool { return a.of.kind == heading || a.row == headerRow }

// fits refuses a certificate with a piece that is too high for a page: a title or a
// figure, which can't be broken.
func (c *Certificate) fits() error {
	for i, p := range c.pages() {
		height, longest := 0.0, ""
		for _, a := range p {
			height += a.height
			for _, cell := range a.cells {
				if s := strings.Join(cell, " "); len(s) > len(longest) {
					longest = s
				}
			}
		}
		if height > bodyBottom-bodyTop {
			return fmt.Errorf("certificate: page %d would be too high; shorten %.60q", i+1, longest)
		}
	}
	return nil
}

// parts breaks an atom whose texts have many lines into several, so that a page can
// end within it; leading is the height of a line.
func (a atom) parts(leading float64) []atom {
	most := 0
	for _, cell := range a.cells {
		most = max(most, len(cell))
	}
	if most <= mostLines {
		return []atom{a}
	}
	var out []atom
	for from := 0; from < most; from += mostLines {
		b := a
		b.cells, b.continued, b.goesOn = nil, from > 0, from+mostLines < most
		for _, cell := range a.cells {
			b.cells = append(b.cells, cell[min(from, len(cell)):min(from+mostLines, len(cell))])
		}
		if b.goesOn {
			b.height, b.keep = mostLines*leading, false
			a.height -= b.height
		}
		out = append(out, b)
	}
	return out
}

// Pages is the number of pages of the printed forms.
func (c *Certificate) Pages() int { return len(c.pages()) }

func (c *Certificate) atoms() []atom {
	var out []atom
	blocks := c.sheet()
	for i := range blocks {
		b := &blocks[i]
		switch b.kind {
		case masthead:
			cells := [][]string{fold(c.Laboratory.Name, 10, true, bodyWidth), fold(c.Laboratory.Address, textSize, false, bodyWidth),
				fold(c.Title, 18, true, bodyWidth), fold(c.Identification, 12, true, bodyWidth)}
			h := 12.5*float64(len(cells[0])) + textLeading*float64(len(cells[1])) + 14 + 22*float64(len(cells[2])) + 16*float64(len(cells[3])) + 2
			out = append(out, atom{of: b, height: h, cells: cells, keep: true})
		case heading:
			out = append(out, atom{of: b, height: 30, keep: true, cells: [][]string{{one(b.text)}}})
		case facts:
			for k, f := range b.facts {
				l := fold(f.Label, textSize, false, labelWidth-8)
				t := fold(f.Text, textSize, false, bodyWidth-labelWidth)
				a := atom{of: b, row: k, height: textLeading*float64(max(len(l), len(t))) + 1.5, cells: [][]string{l, t}, keep: k < len(b.facts)-1 && (k == 0 || len(b.facts) <= 4)}
				out = append(out, a.parts(textLeading)...)
			}
		case para:
			t := fold(b.text, textSize, false, bodyWidth)
			out = append(out, atom{of: b, height: textLeading*float64(len(t)) + 5, cells: [][]string{t}}.parts(textLeading)...)
		case notices:
			for k, s := range b.lines {
				t := fold(s, textSize, false, bodyWidth-12)
				out = append(out, atom{of: b, row: k, height: textLeading*float64(len(t)) + 2, cells: [][]string{t}}.parts(textLeading)...)
			}
		case table:
			out = append(out, header(b))
			w := b.table.widths()
			for k, row := range b.table.rows {
				a := atom{of: b, row: k}
				lines := 1
				for j, s := range row {
					t := fold(s, cellSize, b.table.columns[j].strong, w[j])
					a.cells = append(a.cells, t)
					lines = max(lines, len(t))
				}
				a.height = cellLeading*float64(lines) + 2.5
				if k == len(b.table.rows)-1 {
					a.height += 8
				}
				a.keep = k < len(b.table.rows)-1 && (k == 0 || len(b.table.rows) <= longestKept)
				out = append(out, a.parts(cellLeading)...)
			}
		case drawing:
			t := fold(b.fig.Caption, smallSize, false, bodyWidth)
			out = append(out, atom{of: b, height: drawn(b.fig) + smallLeading*float64(len(t)) + 14, cells: [][]string{t}})
		case end:
			out = append(out, atom{of: b, height: 34, cells: [][]string{{"—  " + one(b.text) + "  —"}}})
		}
	}
	// The end mark never stands alone on a page.
	if n := len(out); n > 1 {
		out[n-2].keep = true
	}
	return out
}

// drawn is the height of a figure at its width on the page.
func drawn(f *figure.Figure) float64 {
	w, h := f.Size()
	return figureWidth * h / w
}

// header is the head of a table as an atom.
func header(b *block) atom {
	a := atom{of: b, row: headerRow, keep: true}
	w := b.table.widths()
	lines := 1
	for j, c := range b.table.columns {
		t := fold(c.name, cellSize, true, w[j])
		if c.unit != "" {
			t = append(t, c.unit)
		}
		a.cells = append(a.cells, t)
		lines = max(lines, len(t))
	}
	a.height = cellLeading*float64(lines) + 6
	return a
}

// widths of the columns: numbers as wide as they are, texts as wide as there is
// room.
func (g *grid) widths() []float64 {
	if g.wide == nil {
		g.wide = g.fit()
	}
	return g.wide
}

func (g *grid) fit() []float64 {
	w := make([]float64, len(g.columns))
	var fixed, loose float64
	for j, c := range g.columns {
		// A header may break between its words where there is no room.
		for _, word := range strings.Split(c.name, " ") {
			w[j] = max(w[j], figure.TextWidth(word, cellSize, true))
		}
		w[j] = max(w[j], figure.TextWidth(c.unit, cellSize, false))
		if !c.right {
			w[j] = max(w[j], figure.TextWidth(c.name, cellSize, true))
		}
		for _, r := range g.rows {
			w[j] = max(w[j], figure.TextWidth(one(r[j]), cellSize, c.strong))
		}
		w[j] += 0.5
		if c.right || c.strong {
			fixed += w[j]
		} else {
			loose += w[j]
		}
	}
	room := bodyWidth - columnGap*float64(len(w)-1) - fixed
	for j, c := range g.columns {
		if more := figure.TextWidth(c.name, cellSize, true) + 0.5 - w[j]; c.right && more > 0 && loose+more <= room {
			w[j] += more
			room -= more
		}
	}
	for loose > room {
		// Narrow the widest text column by what is too much, not below a third of
		// the room.
		k := -1
		for j, c := range g.columns {
			if !c.right && !c.strong && (k < 0 || w[j] > w[k]) {
				k = j
			}
		}
		if k < 0 {
			break
		}
		cut := min(loose-room, max(w[k]/4, 1))
		if w[k]-cut < 20 {
			break
		}
		w[k] -= cut
		loose -= cut
	}
	return w
}

// fold breaks a text into lines of at most a width; a word that is wider is
// broken.
func fold(s string, size float64, bold bool, most float64) []string {
	var out []string
	line := ""
	for _, word := range strings.Split(one(s), " ") {
		for {
			try := word
			if line != "" {
				try = line + " " + word
			}
			if figure.TextWidth(try, size, bold) <= most {
				line = try
				break
			}
			if line != "" {
				out, line = append(out, line), ""
				continue
			}
			// The longest beginning that fits, at least one character.
			r := []rune(word)
			n := 1
			for n < len(r) && figure.TextWidth(string(r[:n+1]), size, bold) <= most {
				n++
			}
			out = append(out, string(r[:n]))
			word = string(r[n:])
			if word == "" {
				break
			}
		}
	}
	if line != "" || len(out) == 0 {
		out = append(out, line)
	}
	return out
}
