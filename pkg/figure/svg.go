package figure

import (
	"io"
	"math"
	"strconv"
	"strings"
)

// Fonts of the SVG: Liberation Sans first, whose metrics the layout used, then
// faces of the same metrics or nearly so. Superscripts come as one run from a
// face that has all of them.
const (
	svgFonts  = `Liberation Sans,Arimo,Arial,Helvetica,sans-serif`
	svgRaised = `DejaVu Sans,Segoe UI,Lucida Grande,Noto Sans,sans-serif`
)

// svg writes the canvas as a stand-alone document that can also stand inline in
// HTML: it has no ids, no style sheet and no script.
func (c *canvas) svg(alt string) string {
	var b strings.Builder
	b.WriteString(`<svg xmlns="http://www.w3.org/2000/svg" width="`)
	num(&b, c.w)
	b.WriteString(`pt" height="`)
	num(&b, c.h)
	b.WriteString(`pt" viewBox="0 0 `)
	num(&b, c.w)
	b.WriteByte(' ')
	num(&b, c.h)
	b.WriteString(`" role="img" aria-label="` + escape(alt) + `" font-family="` + svgFonts + `" fill="none" stroke-linejoin="round">` + "\n")
	for i := range c.ops {
		if o := &c.ops[i]; o.text != nil {
			svgText(&b, o.text)
		} else {
			svgPath(&b, o)
		}
	}
	b.WriteString("</svg>\n")
	return b.String()
}

func svgPath(b *strings.Builder, o *op) {
	b.WriteString("<path")
	if o.pen.stroke != "" {
		b.WriteString(` stroke="` + o.pen.stroke + `" stroke-width="`)
		num(b, o.pen.width)
		b.WriteByte('"')
		if o.pen.dash != "" {
			b.WriteString(` stroke-dasharray="` + o.pen.dash + `"`)
		}
	}
	if o.pen.fill != "" {
		b.WriteString(` fill="` + o.pen.fill + `"`)
	}
	if o.pen.alpha != 0 {
		b.WriteString(` opacity="`)
		num(b, o.pen.alpha)
		b.WriteByte('"')
	}
	b.WriteString(` d="`)
	for _, s := range o.path {
		switch s.verb {
		case 'Z':
			b.WriteByte('Z')
		case 'O':
			// Two half circles: an arc can't end where it begins.
			b.WriteByte('M')
			pair(b, s.x-s.r, s.y)
			for _, d := range [2]float64{2 * s.r, -2 * s.r} {
				b.WriteByte('a')
				pair(b, s.r, s.r)
				b.WriteString(" 0 1 0 ")
				pair(b, d, 0)
			}
			b.WriteByte('Z')
		default:
			b.WriteByte(s.verb)
			pair(b, s.x, s.y)
		}
	}
	b.WriteString("\"/>\n")
}

func svgText(b *strings.Builder, l *label) {
	b.WriteString(`<text x="`)
	num(b, l.x)
	b.WriteString(`" y="`)
	num(b, l.y)
	b.WriteString(`" font-size="`)
	num(b, l.size)
	b.WriteString(`" fill="` + l.color + `"`)
	switch {
	case l.anchor == 0.5:
		b.WriteString(` text-anchor="middle"`)
	case l.anchor == 1:
		b.WriteString(` text-anchor="end"`)
	}
	if l.bold {
		b.WriteString(` font-weight="bold"`)
	}
	if l.turn != 0 {
		b.WriteString(` transform="rotate(`)
		num(b, l.turn)
		b.WriteByte(' ')
		pair(b, l.x, l.y)
		b.WriteString(`)"`)
	}
	b.WriteByte('>')
	for _, r := range runs(l.s) {
		if r.up {
			b.WriteString(`<tspan font-family="` + svgRaised + `">` + escape(r.u) + `</tspan>`)
		} else {
			b.WriteString(escape(r.u))
		}
	}
	b.WriteString("</text>\n")
}

// num writes a length with at most two decimals.
func num(b *strings.Builder, x float64) {
	x = math.Round(x*100) / 100
	if x == 0 {
		x = 0 // no negative zero
	}
	b.WriteString(strconv.FormatFloat(x, 'f', -1, 64))
}

func pair(b *strings.Builder, x, y float64) {
	num(b, x)
	b.WriteByte(' ')
	num(b, y)
}

var xmlEscaper = strings.NewReplacer("&", "&amp;", "<", "&lt;", ">", "&gt;", `"`, "&#34;", "'", "&#39;")

// escape makes a text safe in XML content and attributes, free of characters
// that XML 1.0 forbids.
func escape(s string) string { return xmlEscaper.Replace(tidyKeep(s)) }

// tidyKeep is OneLine with the blanks left as they are.
func tidyKeep(s string) string {
	return strings.Map(func(r rune) rune {
		if r < 0x20 || r == 0xfffe || r == 0xffff {
			return ' '
		}
		return r
	}, strings.ToValidUTF8(s, "\uFFFD"))
}

// writeSVG writes the document.
func (c *canvas) writeSVG(w io.Writer, alt string) error {
	_, err := io.WriteString(w, c.svg(alt))
	return err
}
