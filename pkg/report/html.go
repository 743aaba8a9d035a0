package report

import (
	_ "embed"
	"fmt"
	"html"
	"io"
	"math"
	"strconv"
	"strings"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
)

//go:embed page.css
var pageCSS string

// HTML writes the report as one self-contained page with its figures inline: no
// script, nothing fetched, readable on light and dark screens and on A4.
func HTML(w io.Writer, r *reduce.Result) error {
	return page(w, &r.Record, figure.Of(r))
}

// HTMLRecord is HTML from a record alone; figures need its rows.
func HTMLRecord(w io.Writer, rec *reduce.Record) error {
	return page(w, rec, figure.FromRecord(rec))
}

func page(w io.Writer, rec *reduce.Record, figures *figure.Data) error {
	p := &pager{}
	p.document(build(rec, figures))
	return p.to(w)
}

// pager writes the HTML form. inline says that a table carries its own styles,
// because it will stand in somebody else's page.
type pager struct {
	b      strings.Builder
	inline bool
}

func (p *pager) to(w io.Writer) error {
	_, err := io.WriteString(w, p.b.String())
	return err
}

// esc makes a text safe in HTML content and attributes.
func esc(s string) string { return html.EscapeString(figure.OneLine(s)) }

func (p *pager) document(d *document) {
	p.b.WriteString("<!DOCTYPE html>\n<html lang=\"en-GB\">\n<head>\n<meta charset=\"utf-8\">\n" +
		"<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; style-src 'unsafe-inline'; img-src data:\">\n" +
		"<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n<meta name=\"color-scheme\" content=\"light dark\">\n<title>")
	p.b.WriteString(esc(d.title) + "</title>\n<style>\n" + pageCSS + "</style>\n</head>\n<body>\n<main>\n<header>\n<h1>" + esc(d.title) + "</h1>\n<p>" + esc(d.subtitle) + "</p>\n</header>\n")
	open := false
	for _, b := range d.blocks {
		switch {
		case b.heading != "":
			if open {
				p.b.WriteString("</div>\n</section>\n")
			}
			open = true
			p.b.WriteString("<section>\n<h2>" + esc(b.heading) + "</h2>\n<div>\n")
		case b.caution != nil:
			p.b.WriteString("<aside>\n<p>" + esc(b.caution.text) + "</p>\n")
			for _, s := range b.caution.above {
				p.b.WriteString("<p><strong>" + esc(s) + "</strong></p>\n")
			}
			p.b.WriteString("</aside>\n")
		case b.results != nil:
			p.b.WriteString("<dl class=\"result\">\n")
			for _, r := range b.results {
				p.b.WriteString("<dt>" + esc(r.name))
				if r.doc != "" {
					p.b.WriteString(" <small>" + esc(r.doc) + "</small>")
				}
				p.b.WriteString("</dt>\n<dd><b>" + esc(r.short) + "</b><br>" + esc(r.expanded) + "</dd>\n")
			}
			p.b.WriteString("</dl>\n")
		case b.para != "":
			p.b.WriteString("<p>" + esc(b.para) + "</p>\n")
		case b.notices != nil:
			p.b.WriteString("<ul class=\"notice\">\n")
			for _, s := range b.notices {
				p.b.WriteString("<li>" + esc(s) + "</li>\n")
			}
			p.b.WriteString("</ul>\n")
		case b.facts != nil:
			p.b.WriteString("<dl class=\"facts\">\n")
			for _, f := range b.facts {
				p.b.WriteString("<dt>" + esc(f.label) + "</dt><dd>" + esc(f.text) + "</dd>\n")
			}
			p.b.WriteString("</dl>\n")
		case b.table != nil:
			p.table(b.table)
		case b.figure != nil:
			p.b.WriteString("<figure>\n" + b.figure.SVG() + "<figcaption>" + esc(b.figure.Caption) + "</figcaption>\n</figure>\n")
		}
	}
	if open {
		p.b.WriteString("</div>\n</section>\n")
	}
	p.b.WriteString("</main>\n</body>\n</html>\n")
}

// Styles of a table that stands in somebody else's page. Colours are those of
// the surrounding text, so that it can be read on any ground; the stripes that
// notebooks give to tables are taken off.
const (
	heavyRule = "1.5px solid currentColor"
	lightRule = "1px solid currentColor"
	hairRule  = "1px solid rgba(128,128,128,.45)"
	barColour = "#3d8fc4" // between the light and the dark ground
)

// longTable is the number of rows from which a table in somebody else's page
// scrolls by itself.
const longTable = 40

func (p *pager) table(t *Table) {
	rows := t.cells()
	b := &p.b
	style := func(s string) string {
		if !p.inline {
			return ""
		}
		return ` style="` + s + `"`
	}
	if p.inline {
		scroll := "overflow-x:auto"
		if len(rows) > longTable {
			scroll = "overflow:auto;max-height:36em"
		}
		b.WriteString(`<div style="` + scroll + `"><table style="border-collapse:collapse;border:0;border-top:` + heavyRule + `;border-bottom:` + heavyRule +
			`;font-variant-numeric:tabular-nums lining-nums;margin:.4em 0;color:inherit;background:none">` + "\n")
	} else {
		b.WriteString("<div class=\"wide\"><table>\n")
	}
	if t.Caption != "" {
		b.WriteString("<caption" + style("text-align:left;caption-side:top;padding-bottom:.3em;color:inherit") + ">" + esc(t.Caption) + "</caption>\n")
	}
	tr := "<tr" + style("background:none") + ">"
	class := func(c int) string {
		a := t.Columns[c].Align
		if !p.inline {
			s := ""
			switch a {
			case Right, Decimal:
				s = "n"
			case Bar:
				s = "bar"
			}
			if t.Columns[c].Close {
				s = strings.TrimSpace(s + " close")
			}
			if s == "" {
				return ""
			}
			return ` class="` + s + `"`
		}
		s := "text-align:left;"
		if a == Right || a == Decimal {
			s = "text-align:right;white-space:nowrap;"
		}
		if a == Bar {
			s = "text-align:left;min-width:5em;"
		}
		lead := ".9em"
		switch {
		case c == 0:
			lead = "0"
		case t.Columns[c].Close:
			lead = ".35em"
		}
		return ` style="` + s + `border:0;padding:.12em 0 .12em ` + lead + `;vertical-align:top;font-weight:inherit"`
	}
	header := func(get func(Column) string, s string) {
		b.WriteString("<tr" + style("background:none;"+s) + ">")
		for c := range t.Columns {
			b.WriteString("<th scope=\"col\"" + class(c) + ">" + esc(get(t.Columns[c])) + "</th>")
		}
		b.WriteString("</tr>\n")
	}
	b.WriteString("<thead" + style("border-bottom:"+lightRule+";vertical-align:bottom") + ">\n")
	header(func(c Column) string { return c.Name }, "font-weight:600")
	if t.units() {
		header(func(c Column) string { return c.Unit }, "font-weight:normal;opacity:.75")
	}
	b.WriteString("</thead>\n<tbody>\n")
	for i, row := range rows {
		if name, ok := t.section(i); ok {
			top := ""
			if i > 0 {
				top = ";border-top:" + hairRule
			}
			b.WriteString("<tr" + pick(p.inline, style("background:none"+top), ` class="part"`) + `><th scope="rowgroup" colspan="` + strconv.Itoa(len(t.Columns)) + `"` +
				style("text-align:left;font-weight:normal;font-style:italic;border:0;padding:.3em 0 .1em 0") + ">" + esc(name) + "</th></tr>\n")
		}
		switch {
		case t.Sum > 0 && i == len(rows)-t.Sum:
			b.WriteString("<tr" + pick(p.inline, style("background:none;border-top:"+lightRule), ` class="sum"`) + ">")
		default:
			b.WriteString(tr)
		}
		for c, s := range row {
			b.WriteString("<td" + class(c) + ">")
			if t.Columns[c].Align == Bar {
				p.bar(s)
			} else {
				b.WriteString(html.EscapeString(s))
			}
			b.WriteString("</td>")
		}
		b.WriteString("</tr>\n")
	}
	b.WriteString("</tbody>\n</table></div>\n")
}

func pick(first bool, a, b string) string {
	if first {
		return a
	}
	return b
}

// bar draws a fraction as a bar of that part of the cell.
func (p *pager) bar(s string) {
	f, ok := fraction(s)
	if !ok {
		return
	}
	width := math.Round(1000*math.Min(math.Abs(f), 1)) / 10
	colour := barColour
	if f < 0 {
		colour = "#d55e00"
	}
	fmt.Fprintf(&p.b, `<span style="display:inline-block;height:.62em;width:%s%%;background:%s"></span>`, strconv.FormatFloat(width, 'f', -1, 64), colour)
}
