package certificate

import (
	"fmt"
	"html"
	"io"
	"strconv"
	"strings"
)

// pageCSS sets every piece at the height that the layout gave it, so that pages
// end where the certificate says whatever fonts a reader has. Lines end where the
// layout ended them: Liberation Sans, Arimo, Arial and Helvetica have the same widths,
// and the wider letters of readers who have none of these are set smaller, so that no
// line runs off its page.
const pageCSS = `* { box-sizing: border-box; margin: 0; padding: 0; }
@font-face { font-family: narrowed; src: local("DejaVu Sans"), local("DejaVuSans"), local("Verdana"), local("Noto Sans"); size-adjust: 84%; }
@font-face { font-family: narrowed; font-weight: bold; src: local("DejaVu Sans Bold"), local("DejaVuSans-Bold"), local("Verdana Bold"), local("Noto Sans Bold"); size-adjust: 80%; }
html { background: #777; }
body { font: 9pt/12pt "Liberation Sans", Arimo, Arial, Helvetica, "Nimbus Sans", narrowed, sans-serif; color: #000; font-variant-numeric: lining-nums tabular-nums; }
.page { position: relative; width: 595.28pt; height: 841.2pt; margin: 12pt auto; background: #fff; overflow: hidden; white-space: nowrap; }
.head, .foot { position: absolute; left: 54pt; right: 54pt; font-size: 7.5pt; line-height: 10pt; color: #444; display: flex; justify-content: space-between; }
.head { top: 34pt; padding-bottom: 3pt; border-bottom: .4pt solid #000; }
.foot { top: 804pt; }
.head b, .foot b { color: #000; }
.body { position: absolute; top: 62pt; left: 54pt; right: 54pt; }
.mast .lab { font-weight: bold; font-size: 10pt; line-height: 12.5pt; }
h1 { font-size: 18pt; line-height: 22pt; margin-top: 14pt; }
.id { font-size: 12pt; line-height: 16pt; font-weight: bold; }
h2 { font-size: 10.5pt; line-height: 13pt; padding-top: 11pt; position: relative; }
h2::after { content: ""; position: absolute; left: 0; right: 0; top: 25.5pt; border-top: .6pt solid #000; }
dl div { display: flex; }
dt { width: 124pt; flex: none; color: #444; }
li { list-style: none; padding-left: 12pt; position: relative; }
li::before { content: "–"; position: absolute; left: 1pt; }
table { border-collapse: collapse; table-layout: fixed; font-size: 8.5pt; line-height: 11pt; border-top: .8pt solid #000; border-bottom: .8pt solid #000; }
th, td { vertical-align: top; text-align: left; padding-right: 9pt; font-weight: normal; }
th:last-child, td:last-child { padding-right: 0; }
thead th { vertical-align: bottom; font-weight: bold; padding-bottom: 2pt; }
thead { border-bottom: .4pt solid #000; }
th i { font-weight: normal; font-style: normal; }
.n { text-align: right; }
.s { font-weight: bold; }
figure svg { display: block; width: 400pt; height: auto; margin-top: 4pt; }
figcaption { font-size: 7.5pt; line-height: 10pt; color: #444; }
.end { text-align: center; font-weight: bold; padding-top: 15pt; }
@page { size: A4; margin: 0; }
@media print { html { background: none; } .page { margin: 0; break-after: page; } .page:last-child { break-after: auto; } }
`

// HTML writes the certificate as one self-contained page of HTML that prints on
// A4: no script, nothing fetched.
func (c *Certificate) HTML(w io.Writer) error {
	h := &writer{}
	pages := c.pages()
	h.b.WriteString("<!DOCTYPE html>\n<html lang=\"en-GB\">\n<head>\n<meta charset=\"utf-8\">\n" +
		"<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; style-src 'unsafe-inline'; img-src data:\">\n" +
		`<meta name="identifier" content="` + esc(c.Identification) + "\">\n<meta name=\"generator\" content=\"guardring " + esc(c.Software) + "\">\n<title>" +
		esc(c.Title+" "+c.Identification) + "</title>\n<style>\n" + pageCSS + "</style>\n</head>\n<body>\n")
	for i, p := range pages {
		head, foot := c.running(i, len(pages))
		fmt.Fprintf(&h.b, "<section class=\"page\">\n<div class=\"head\"><span>%s</span><b>%s</b></div>\n<div class=\"body\">\n", esc(head[0]), esc(head[1]))
		for k := range p {
			first := k == 0 || p[k-1].of != p[k].of
			last := k+1 == len(p) || p[k+1].of != p[k].of
			h.atom(&p[k], first, last)
		}
		fmt.Fprintf(&h.b, "</div>\n<div class=\"foot\"><span>%s</span><b>%s</b></div>\n</section>\n", esc(foot[0]), esc(foot[1]))
	}
	h.b.WriteString("</body>\n</html>\n")
	_, err := io.WriteString(w, h.b.String())
	return err
}

// esc makes a text safe in HTML content and attributes.
func esc(s string) string { return html.EscapeString(one(s)) }

type writer struct{ b strings.Builder }

// lines joins lines as they were broken.
func lines(l []string) string {
	out := make([]string, len(l))
	for i, s := range l {
		out[i] = esc(s)
	}
	return strings.Join(out, "<br>")
}

func pt(x float64) string { return strconv.FormatFloat(x, 'f', -1, 64) + "pt" }

// atom writes one atom; first and last tell whether it opens and closes its
// block on this page.
func (h *writer) atom(a *atom, first, last bool) {
	b := &h.b
	height := `style="height:` + pt(a.height) + `"`
	switch a.of.kind {
	case masthead:
		fmt.Fprintf(b, "<header class=\"mast\" %s><p class=\"lab\">%s</p><p>%s</p><h1>%s</h1><p class=\"id\">%s</p></header>\n", height,
			lines(a.cells[0]), lines(a.cells[1]), lines(a.cells[2]), lines(a.cells[3]))
	case heading:
		fmt.Fprintf(b, "<h2 %s>%s</h2>\n", height, lines(a.cells[0]))
	case facts:
		if first {
			b.WriteString("<dl>\n")
		}
		fmt.Fprintf(b, "<div %s><dt>%s</dt><dd>%s</dd></div>\n", height, lines(a.cells[0]), lines(a.cells[1]))
		if last {
			b.WriteString("</dl>\n")
		}
	case para:
		fmt.Fprintf(b, "<p %s>%s</p>\n", height, lines(a.cells[0]))
	case notices:
		if a.continued { // without a mark of its own
			if !first {
				b.WriteString("</ul>\n")
			}
			fmt.Fprintf(b, "<p style=\"height:%s;padding-left:12pt\">%s</p>\n", pt(a.height), lines(a.cells[0]))
			if !last {
				b.WriteString("<ul>\n")
			}
			break
		}
		if first {
			b.WriteString("<ul>\n")
		}
		fmt.Fprintf(b, "<li %s>%s</li>\n", height, lines(a.cells[0]))
		if last {
			b.WriteString("</ul>\n")
		}
	case table:
		h.row(a, first, last)
	case drawing:
		fmt.Fprintf(b, "<figure %s>\n%s<figcaption>%s</figcaption>\n</figure>\n", height, a.of.fig.SVG(), lines(a.cells[0]))
	case end:
		fmt.Fprintf(b, "<p class=\"end\" %s>%s</p>\n", height, lines(a.cells[0]))
	}
}

func (h *writer) row(a *atom, first, last bool) {
	b := &h.b
	g := a.of.table
	class := func(j int) string {
		var c []string
		if g.columns[j].right {
			c = append(c, "n")
		}
		if g.columns[j].strong {
			c = append(c, "s")
		}
		if c == nil {
			return ""
		}
		return ` class="` + strings.Join(c, " ") + `"`
	}
	if first {
		b.WriteString("<table><colgroup>")
		for j, w := range g.widths() {
			if j+1 < len(g.columns) {
				w += columnGap
			}
			b.WriteString(`<col style="width:` + pt(w) + `">`)
		}
		b.WriteString("</colgroup>\n")
	}
	height := a.height
	if a.row == headerRow {
		fmt.Fprintf(b, "<thead><tr style=\"height:%s\">", pt(height))
		for j, cell := range a.cells {
			unit := ""
			if u := g.columns[j].unit; u != "" {
				cell = cell[:len(cell)-1]
				unit = "<br><i>" + esc(u) + "</i>"
			}
			fmt.Fprintf(b, "<th scope=\"col\"%s>%s%s</th>", class(j), lines(cell), unit)
		}
		b.WriteString("</tr></thead>\n<tbody>\n")
	} else {
		end := a.row == len(g.rows)-1 && !a.goesOn
		if end {
			height -= 8
		}
		fmt.Fprintf(b, "<tr style=\"height:%s\">", pt(height))
		for j, cell := range a.cells {
			fmt.Fprintf(b, "<td%s>%s</td>", class(j), lines(cell))
		}
		b.WriteString("</tr>\n")
		if last {
			b.WriteString("</tbody></table>\n")
			if end {
				b.WriteString("<div style=\"height:8pt\"></div>\n")
			}
		}
	}
}
