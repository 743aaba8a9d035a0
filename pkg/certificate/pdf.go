package certificate

import (
	"bytes"
	"encoding/xml"
	"fmt"
	"io"
	"time"

	"codeberg.org/go-pdf/fpdf"

	"example.org/guardring/pkg/figure"
)

const (
	black = "#000000"
	quiet = "#444444"
)

// PDF writes the certificate as a PDF document, fonts embedded, text selectable.
// It refuses a text that the fonts can't show.
func (c *Certificate) PDF(w io.Writer) error {
	pages := c.pages()
	for _, p := range pages {
		for _, a := range p {
			for _, cell := range a.cells {
				for _, line := range cell {
					if r, bad := figure.Missing(line); bad {
						return fmt.Errorf("certificate: the fonts of the PDF form have no %q (%U), which stands in %q; write it otherwise or use the HTML form", r, r, line)
					}
				}
			}
		}
	}
	issued, err := time.Parse(time.DateOnly, c.Issued)
	if err != nil {
		return fmt.Errorf("certificate: date of issue: %w", err)
	}
	d := fpdf.NewCustom(&fpdf.InitType{OrientationStr: "P", UnitStr: "pt", Size: fpdf.SizeType{Wd: pageWidth, Ht: pageHeight}})
	d.SetCatalogSort(true) // the same bytes every time
	d.SetCreationDate(issued)
	d.SetModificationDate(issued)
	d.SetProducer("guardring "+c.Software, true)
	d.SetTitle(one(c.Title+" "+c.Identification), true)
	d.SetAuthor(one(c.Laboratory.Name), true)
	d.SetLang("en-GB")
	xmp, err := c.xmp()
	if err != nil {
		return err
	}
	d.SetXmpMetadata(xmp)
	d.SetMargins(0, 0, 0)
	d.SetAutoPageBreak(false, 0)
	if err := figure.AddFonts(d); err != nil {
		return err
	}
	for i, p := range pages {
		d.AddPage()
		q := &printer{d: d}
		head, foot := c.running(i, len(pages))
		q.text(marginX, headLine, smallSize, false, quiet, head[0])
		q.right(pageWidth-marginX, headLine, smallSize, true, black, head[1])
		q.rule(headLine+5, 0.4)
		q.text(marginX, footLine, smallSize, false, quiet, foot[0])
		q.right(pageWidth-marginX, footLine, smallSize, true, black, foot[1])
		y := bodyTop
		for k, a := range p {
			last := k+1 == len(p) || p[k+1].of != a.of
			if err := q.atom(&a, y, last); err != nil {
				return err
			}
			y += a.height
		}
	}
	if err := d.Error(); err != nil {
		return err
	}
	return d.Output(w)
}

// running is the head and foot of a page, left and right.
func (c *Certificate) running(i, n int) (head, foot [2]string) {
	lab := fold(c.Laboratory.Name, smallSize, false, 0.6*bodyWidth)[0]
	return [2]string{lab, "Certificate " + fold(c.Identification, smallSize, true, 0.34*bodyWidth)[0]},
		[2]string{"Relates only to the item described.", fmt.Sprintf("Page %d of %d", i+1, n)}
}

// xmp is the metadata that Identify reads.
func (c *Certificate) xmp() ([]byte, error) {
	var id, title bytes.Buffer
	if err := xml.EscapeText(&id, []byte(one(c.Identification))); err != nil {
		return nil, err
	}
	if err := xml.EscapeText(&title, []byte(one(c.Title))); err != nil {
		return nil, err
	}
	return []byte(`<?xpacket begin="` + "\ufeff" + `" id="W5M0MpCehiHzreSzNTczkc9d"?>
<x:xmpmeta xmlns:x="adobe:ns:meta/"><rdf:RDF xmlns:rdf="http://www.w3.org/1999/02/22-rdf-syntax-ns#">
<rdf:Description rdf:about="" xmlns:dc="http://purl.org/dc/elements/1.1/">
<dc:format>application/pdf</dc:format>
<dc:identifier>` + id.String() + `</dc:identifier>
<dc:title><rdf:Alt><rdf:li xml:lang="x-default">` + title.String() + `</rdf:li></rdf:Alt></dc:title>
</rdf:Description></rdf:RDF></x:xmpmeta>
<?xpacket end="r"?>`), nil
}

// printer sets atoms on a page of a PDF document.
type printer struct{ d *fpdf.Fpdf }

func (p *printer) text(x, y, size float64, bold bool, color, s string) {
	figure.PlaceText(p.d, x, y, size, bold, color, s)
}

func (p *printer) right(x, y, size float64, bold bool, color, s string) {
	p.text(x-figure.TextWidth(s, size, bold), y, size, bold, color, s)
}

func (p *printer) rule(y, width float64) { p.line(marginX, pageWidth-marginX, y, width) }

func (p *printer) line(x0, x1, y, width float64) {
	p.d.SetDrawColor(0, 0, 0)
	p.d.SetLineWidth(width)
	p.d.SetDashPattern([]float64{}, 0)
	p.d.Line(x0, y, x1, y)
}

func (p *printer) lines(x, y, size, leading float64, bold bool, color string, lines []string) {
	for _, l := range lines {
		p.text(x, y+0.78*leading, size, bold, color, l)
		y += leading
	}
}

// atom sets one atom with its upper edge at y; last says that nothing of its
// block follows on this page.
func (p *printer) atom(a *atom, y float64, last bool) error {
	switch a.of.kind {
	case masthead:
		p.lines(marginX, y, 10, 12.5, true, black, a.cells[0])
		y += 12.5 * float64(len(a.cells[0]))
		p.lines(marginX, y, textSize, textLeading, false, black, a.cells[1])
		y += textLeading*float64(len(a.cells[1])) + 14
		p.lines(marginX, y, 18, 22, true, black, a.cells[2])
		y += 22 * float64(len(a.cells[2]))
		p.lines(marginX, y, 12, 16, true, black, a.cells[3])
	case heading:
		p.text(marginX, y+21, 10.5, true, black, a.cells[0][0])
		p.rule(y+25.5, 0.6)
	case facts:
		p.lines(marginX, y, textSize, textLeading, false, quiet, a.cells[0])
		p.lines(marginX+labelWidth, y, textSize, textLeading, false, black, a.cells[1])
	case para:
		p.lines(marginX, y+1, textSize, textLeading, false, black, a.cells[0])
	case notices:
		if !a.continued {
			p.text(marginX+1, y+0.78*textLeading, textSize, false, black, "–")
		}
		p.lines(marginX+12, y, textSize, textLeading, false, black, a.cells[0])
	case table:
		p.row(a, y, last)
	case drawing:
		if err := a.of.fig.PlacePDF(p.d, marginX, y+4, figureWidth); err != nil {
			return err
		}
		p.lines(marginX, y+4+drawn(a.of.fig), smallSize, smallLeading, false, quiet, a.cells[0])
	case end:
		s := a.cells[0][0]
		p.text((pageWidth-figure.TextWidth(s, textSize, true))/2, y+24, textSize, true, black, s)
	}
	return p.d.Error()
}

// row sets a row of a table, or its header with rules over and under it.
func (p *printer) row(a *atom, y float64, last bool) {
	g := a.of.table
	w := g.widths()
	total := columnGap * float64(len(w)-1)
	for _, x := range w {
		total += x
	}
	leading := cellLeading
	if a.row == headerRow {
		p.line(marginX, marginX+total, y+1, 0.8)
		p.line(marginX, marginX+total, y+a.height-2, 0.4)
		y += 2
	}
	x := marginX
	for j, cell := range a.cells {
		c := g.columns[j]
		at := y
		if a.row == headerRow { // names stand on the rule
			at += leading * (headerLines(a) - float64(len(cell)))
		}
		for k, s := range cell {
			bold := c.strong || a.row == headerRow && !(c.unit != "" && k == len(cell)-1)
			if c.right {
				p.right(x+w[j], at+0.78*leading, cellSize, bold, black, s)
			} else {
				p.text(x, at+0.78*leading, cellSize, bold, black, s)
			}
			at += leading
		}
		x += w[j] + columnGap
	}
	if last && a.row != headerRow {
		under := y + a.height - 0.5
		if a.row == len(g.rows)-1 && !a.goesOn {
			under -= 8
		}
		p.line(marginX, marginX+total, under, 0.8)
	}
}

// headerLines is the number of lines of a header.
func headerLines(a *atom) float64 {
	n := 1
	for _, c := range a.cells {
		n = max(n, len(c))
	}
	return float64(n)
}
