package figure

import (
	"fmt"
	"strconv"
	"strings"

	"example.org/guardring/pkg/bench"
)

// sheet is a page being laid out from the top.
type sheet struct {
	c     *canvas
	y     float64 // the next free height
	notes []string
	drawn int // points drawn and given, over all panels that thin
	given int
}

const (
	marginX  = 8.0
	marginTy = 8.0
)

// newSheet begins a page with a title and, beneath it, what it is drawn from.
func newSheet(w float64, title, from string) *sheet {
	s := &sheet{c: &canvas{w: w, h: 0}, y: marginTy}
	title = fitted(title, titleSize, true, w-2*marginX)
	if title != "" {
		s.y += titleSize
		s.c.write(label{x: marginX, y: s.y, size: titleSize, bold: true, s: title})
	}
	if from = fitted(from, tickSize, false, w-2*marginX); from != "" {
		s.y += 3 + tickSize
		s.c.write(label{x: marginX, y: s.y, size: tickSize, color: slate, s: from})
	}
	return s
}

// key is one entry of the key over a panel.
type key struct {
	look   look
	name   string
	line   bool
	short  bool // a dash for the line
	point  bool
	hollow bool
	fill   string // a patch instead of line and point
	alpha  float64
}

// keys sets the key in rows over the panel, where it can cover no data.
func (s *sheet) keys(entries []key, left float64) {
	if len(entries) == 0 {
		return
	}
	s.y += 7
	x := left
	y := s.y + tickSize
	for _, e := range entries {
		name := fitted(e.name, tickSize, false, 0.6*s.c.w)
		sample := 11.0
		if e.line && !e.short {
			sample = 20
		}
		w := sample + 4 + width(name, tickSize, false) + 14
		if x > left && x+w-14 > s.c.w-marginX {
			x = left
			y += tickSize + 4
		}
		mid := y - 0.35*tickSize
		switch {
		case e.fill != "":
			var q path
			q.rect(x, mid-3, sample, 6)
			s.c.draw(q, pen{fill: e.fill, alpha: e.alpha})
		default:
			if e.line {
				s.c.segment(x, mid, x+sample, mid, pen{stroke: e.look.color, width: 1.1, dash: dashText(e.look.dash)})
			}
			if e.point {
				var q path
				e.look.marker.mark(&q, x+sample/2, mid, 2.4)
				s.c.draw(q, e.look.marker.pen(e.look.color, e.hollow))
			}
		}
		s.c.write(label{x: x + sample + 4, y: y, size: tickSize, s: name})
		x += w
	}
	s.y = y + 2
}

// note adds a line under the figure.
func (s *sheet) note(format string, a ...any) {
	s.notes = append(s.notes, fmt.Sprintf(format, a...))
}

// count adds a panel's points to the statement of what was drawn.
func (s *sheet) count(drawn, given int) {
	s.drawn += drawn
	s.given += given
}

// finish writes the notes and closes the page.
func (s *sheet) finish(name, title, caption, summary string) *Figure {
	if s.given > s.drawn {
		s.note("%s of %s points drawn, all panels counted: the lowest and the highest of each column of the page are kept.", count(s.drawn), count(s.given))
	}
	for _, n := range s.notes {
		for _, l := range wrap(OneLine(n), noteSize, s.c.w-2*marginX) {
			s.y += noteSize + 3
			s.c.write(label{x: marginX, y: s.y, size: noteSize, color: slate, s: l})
		}
	}
	s.c.h = s.y + 8
	var bg path
	bg.rect(0, 0, s.c.w, s.c.h)
	s.c.ops = append([]op{{path: bg, pen: pen{fill: paper}}}, s.c.ops...)
	return &Figure{Name: fileName(name), Title: OneLine(title), Caption: caption, Summary: summary, c: s.c}
}

// count writes a whole number with thin spaces.
func count(n int) string { return plainNumber(float64(n), 0) }

// wrap breaks a text into lines of a width; words that are longer are cut.
func wrap(s string, size, most float64) []string {
	var out []string
	line := ""
	for word := range strings.SplitSeq(s, " ") {
		if word == "" {
			continue
		}
		word = fitted(word, size, false, most)
		switch {
		case line == "":
			line = word
		case width(line+" "+word, size, false) <= most:
			line += " " + word
		default:
			out = append(out, line)
			line = word
		}
		if len(out) == 12 {
			return append(out, "…")
		}
	}
	if line != "" {
		out = append(out, line)
	}
	return out
}

// Words makes a key of the bench readable: "channels.voltage.gain" is "voltage
// gain", "contact_potential" is "contact potential".
func Words(key string) string { return bench.Words(OneLine(key)) }

func words(key string) string { return Words(key) }

// number writes a value for a sentence, three significant digits.
func number(x float64) string {
	return signed(strconv.FormatFloat(x, 'g', 3, 64))
}

// fileName makes a text usable as the base of a file name anywhere: letters,
// digits, hyphens and underscores, at most 60.
func fileName(s string) string {
	out := strings.Map(func(r rune) rune {
		switch {
		case r >= 'a' && r <= 'z', r >= 'A' && r <= 'Z', r >= '0' && r <= '9', r == '-', r == '_':
			return r
		}
		return '-'
	}, s)
	if out = out[:min(len(out), 60)]; out == "" {
		return "figure"
	}
	return out
}
