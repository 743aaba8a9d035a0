package figure

import "math"

// canvas is a list of things drawn, in points, y downwards from the top left.
type canvas struct {
	w, h float64
	ops  []op
}

// op is one thing drawn: a path with its pen, or a text.
type op struct {
	path path
	pen  pen
	text *label
}

// pen says how a path is stroked and filled. Empty colours draw nothing.
type pen struct {
	stroke, fill string
	width        float64
	dash         string  // lengths in points, comma separated; "" is solid
	alpha        float64 // of the whole path; 0 means 1
}

// label is one line of text.
type label struct {
	x, y   float64 // baseline
	size   float64
	anchor float64 // 0 starts at x, ½ centred, 1 ends at x
	turn   float64 // degrees clockwise about (x, y)
	bold   bool
	color  string
	s      string
}

// path is a sequence of moves, lines, circles and closings.
type path []step

type step struct {
	verb byte // 'M', 'L', 'O' (circle of radius r about x, y), 'Z'
	x, y float64
	r    float64
}

func (p *path) move(x, y float64)      { *p = append(*p, step{verb: 'M', x: x, y: y}) }
func (p *path) line(x, y float64)      { *p = append(*p, step{verb: 'L', x: x, y: y}) }
func (p *path) circle(x, y, r float64) { *p = append(*p, step{verb: 'O', x: x, y: y, r: r}) }
func (p *path) close()                 { *p = append(*p, step{verb: 'Z'}) }

func (p *path) rect(x, y, w, h float64) {
	p.move(x, y)
	p.line(x+w, y)
	p.line(x+w, y+h)
	p.line(x, y+h)
	p.close()
}

// draw adds a path. Neighbours with the same opaque pen become one path, which
// keeps the files small.
func (c *canvas) draw(p path, k pen) {
	if len(p) == 0 {
		return
	}
	if n := len(c.ops); n > 0 && c.ops[n-1].text == nil && c.ops[n-1].pen == k && k.alpha == 0 {
		c.ops[n-1].path = append(c.ops[n-1].path, p...)
		return
	}
	c.ops = append(c.ops, op{path: append(path(nil), p...), pen: k})
}

// segment draws one straight line.
func (c *canvas) segment(x0, y0, x1, y1 float64, k pen) {
	var p path
	p.move(x0, y0)
	p.line(x1, y1)
	c.draw(p, k)
}

// write adds a text.
func (c *canvas) write(l label) {
	if l.s == "" {
		return
	}
	if l.color == "" {
		l.color = ink
	}
	c.ops = append(c.ops, op{text: &l})
}

// mark adds a marker of half-size r at x, y to p. Markers are of equal area, as
// the eye judges it.
func (m marker) mark(p *path, x, y, r float64) {
	switch m {
	case circle:
		p.circle(x, y, r)
	case square:
		s := 0.89 * r
		p.rect(x-s, y-s, 2*s, 2*s)
	case triangle, inverted:
		a := 1.3 * r
		d := 1.0
		if m == inverted {
			d = -1
		}
		p.move(x, y-d*a)
		p.line(x+0.866*a, y+d*a/2)
		p.line(x-0.866*a, y+d*a/2)
		p.close()
	case diamond:
		a := 1.25 * r
		p.move(x, y-a)
		p.line(x+a, y)
		p.line(x, y+a)
		p.line(x-a, y)
		p.close()
	case cross:
		a := 0.85 * r
		p.move(x-a, y-a)
		p.line(x+a, y+a)
		p.move(x-a, y+a)
		p.line(x+a, y-a)
	case plus:
		a := 1.15 * r
		p.move(x-a, y)
		p.line(x+a, y)
		p.move(x, y-a)
		p.line(x, y+a)
	}
}

// open tells whether the marker has no inside.
func (m marker) open() bool { return m == cross || m == plus }

// pen returns the pen for a marker; hollow ones show the paper inside.
func (m marker) pen(color string, hollow bool) pen {
	switch {
	case m.open():
		return pen{stroke: color, width: 1.1}
	case hollow:
		return pen{stroke: color, fill: paper, width: 0.9}
	}
	return pen{stroke: paper, fill: color, width: 0.4}
}

// clipLine returns the part of a straight line inside the rectangle (Liang and
// Barsky 1984).
func clipLine(x0, y0, x1, y1, left, top, right, bottom float64) (float64, float64, float64, float64, bool) {
	t0, t1 := 0.0, 1.0
	dx, dy := x1-x0, y1-y0
	for _, e := range [4][2]float64{{-dx, x0 - left}, {dx, right - x0}, {-dy, y0 - top}, {dy, bottom - y0}} {
		p, q := e[0], e[1]
		if p == 0 {
			if q < 0 {
				return 0, 0, 0, 0, false
			}
			continue
		}
		t := q / p
		if p < 0 {
			t0 = math.Max(t0, t)
		} else {
			t1 = math.Min(t1, t)
		}
	}
	if !(t0 <= t1) {
		return 0, 0, 0, 0, false
	}
	return x0 + t0*dx, y0 + t0*dy, x0 + t1*dx, y0 + t1*dy, true
}
