package report

import (
	"io"
	"strings"

	"example.org/guardring/pkg/figure"
)

// Sheet is a part of a report that stands by itself, as under the cell of a
// notebook: the same blocks as a report has, with styles of its own so that it
// looks the same wherever it is put. A Sheet from one of this package's
// functions is complete; New and the methods that add to a sheet serve packages
// that say something of their own.
type Sheet struct{ d document }

// New begins a sheet. Title and subtitle may be empty.
func New(title, subtitle string) *Sheet {
	return &Sheet{d: document{title: title, subtitle: subtitle}}
}

// Head adds a heading.
func (s *Sheet) Head(text string) *Sheet { s.d.head(text); return s }

// Say adds a paragraph.
func (s *Sheet) Say(text string) *Sheet { s.d.say(text); return s }

// Notice adds sentences that a reader must not miss; none adds nothing.
func (s *Sheet) Notice(sentences ...string) *Sheet {
	if len(sentences) > 0 {
		s.d.notice(sentences)
	}
	return s
}

// Fact adds a labelled line; facts that follow each other are set as one list.
func (s *Sheet) Fact(label, text string) *Sheet {
	if n := len(s.d.blocks); n > 0 && s.d.blocks[n-1].facts != nil {
		s.d.blocks[n-1].facts = append(s.d.blocks[n-1].facts, fact{label, text})
	} else {
		s.d.list([]fact{{label, text}})
	}
	return s
}

// Table adds a table.
func (s *Sheet) Table(t *Table) *Sheet { s.d.show(t); return s }

// Figure adds a figure, which the text and LaTeX forms tell in words.
func (s *Sheet) Figure(f *figure.Figure) *Sheet { s.d.draw(f); return s }

// Tables returns the tables of the sheet in their order.
func (s *Sheet) Tables() []*Table {
	var out []*Table
	for i := range s.d.blocks {
		if t := s.d.blocks[i].table; t != nil {
			out = append(out, t)
		}
	}
	return out
}

// String returns the text form, at most 100 columns wide.
func (s *Sheet) String() string {
	p := &printer{}
	d := s.d
	if d.title == "" && d.subtitle == "" {
		p.blocks(&d)
		return strings.TrimPrefix(p.b.String(), "\n")
	}
	p.document(&d)
	return p.b.String()
}

// HTML returns the sheet as an element for somebody else's page.
func (s *Sheet) HTML() string {
	p := &pager{inline: true}
	p.sheet(&s.d)
	return p.b.String()
}

// LaTeX returns the sheet for the body of a document; it needs no package.
func (s *Sheet) LaTeX() string {
	t := &setter{tight: true}
	t.sheet(&s.d)
	return t.b.String()
}

// Page writes the sheet as one self-contained page of HTML with its figures
// inline, in the style of the reports.
func (s *Sheet) Page(w io.Writer) error {
	p := &pager{}
	p.document(&s.d)
	return p.to(w)
}

// SimpleRender gives the forms that a notebook can show.
func (s *Sheet) SimpleRender() map[string]any {
	return map[string]any{"text/plain": s.String(), "text/html": s.HTML(), "text/latex": s.LaTeX()}
}

// alertColour reads on light ground and on dark.
const alertColour = "#d55e00"

// sheet writes blocks with inline styles; text takes the colour of the page
// around it.
func (p *pager) sheet(d *document) {
	b := &p.b
	b.WriteString(`<div style="max-width:72em;line-height:1.4;color:inherit">` + "\n")
	if d.title != "" {
		b.WriteString(`<div style="font-size:1.15em;font-weight:600">` + esc(d.title) + "</div>\n")
	}
	if d.subtitle != "" {
		b.WriteString(`<div style="opacity:.75">` + esc(d.subtitle) + "</div>\n")
	}
	for i := range d.blocks {
		bl := &d.blocks[i]
		switch {
		case bl.heading != "":
			b.WriteString(`<div style="font-weight:600;margin-top:.9em">` + esc(bl.heading) + "</div>\n")
		case bl.caution != nil:
			b.WriteString(`<div style="border-left:3px solid ` + alertColour + `;padding:.1em 0 .1em .7em;margin:.6em 0;font-size:.93em;max-width:52em">` + esc(bl.caution.text))
			for _, s := range bl.caution.above {
				b.WriteString("<br><b>" + esc(s) + "</b>")
			}
			b.WriteString("</div>\n")
		case bl.results != nil:
			for _, r := range bl.results {
				b.WriteString(`<div style="margin:.35em 0"><i>` + esc(r.name) + "</i>")
				if r.doc != "" {
					b.WriteString(` <span style="opacity:.75;font-size:.9em">` + esc(r.doc) + "</span>")
				}
				b.WriteString(`<br><b style="font-size:1.25em">` + esc(r.short) + "</b>")
				if r.expanded != "" {
					b.WriteString(` <span style="opacity:.85;padding-left:.9em;display:inline-block">` + esc(r.expanded) + "</span>")
				}
				b.WriteString("</div>\n")
			}
		case bl.para != "":
			b.WriteString(`<div style="margin:.3em 0;max-width:52em">` + esc(bl.para) + "</div>\n")
		case bl.notices != nil:
			for _, s := range bl.notices {
				b.WriteString(`<div style="margin:.2em 0;padding-left:1.1em;text-indent:-1.1em;max-width:52em"><span style="color:` + alertColour +
					`;display:inline-block;width:1.1em;text-indent:0">▸</span>` + esc(s) + "</div>\n")
			}
		case bl.facts != nil:
			b.WriteString(`<div style="display:grid;grid-template-columns:max-content minmax(0,1fr);gap:.1em 1.2em;margin:.3em 0">` + "\n")
			for _, f := range bl.facts {
				b.WriteString("<i>" + esc(f.label) + "</i><span>" + esc(f.text) + "</span>\n")
			}
			b.WriteString("</div>\n")
		case bl.table != nil:
			p.table(bl.table)
		case bl.figure != nil:
			b.WriteString(`<div style="margin:.5em 0">` + bl.figure.SVG() + "</div>\n")
		}
	}
	b.WriteString("</div>\n")
}

// sheet writes blocks for the body of somebody else's document.
func (s *setter) sheet(d *document) {
	b := &s.b
	if d.title != "" {
		b.WriteString("{\\large\\bfseries " + tex(d.title) + "\\par}\n")
	}
	if d.subtitle != "" {
		b.WriteString("{\\small " + tex(d.subtitle) + "\\par}\n")
	}
	s.blocks(d, func(heading string) string { return "\n\\medskip\\noindent\\textbf{" + heading + "}\\par\\nobreak\n" })
}

// Part adds the blocks of another sheet, its title as a heading.
func (s *Sheet) Part(other *Sheet) *Sheet {
	if other.d.title != "" {
		s.Head(other.d.title)
	}
	s.d.blocks = append(s.d.blocks, other.d.blocks...)
	return s
}
