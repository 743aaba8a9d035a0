package figure

import (
	"fmt"
	"math"
)

// panel is one rectangle with its axes.
type panel struct {
	c          *canvas
	x, y, w, h float64 // the rectangle of the data, points
	xs, ys     *scale
}

// at sets the panel on the page and ties its scales to it.
func (p *panel) at(x, y, w, h float64) {
	p.x, p.y, p.w, p.h = x, y, w, h
	p.tie()
}

func (p *panel) tie() {
	p.xs.from, p.xs.to = p.x, p.x+p.w
	p.ys.from, p.ys.to = p.y+p.h, p.y
}

// leftMargin is the room that the numbers of a vertical axis need.
func leftMargin(s *scale) float64 {
	w := 0.0
	for _, t := range s.ticks {
		w = math.Max(w, width(t.label, tickSize, false))
	}
	return w + 6
}

var (
	axisPen  = pen{stroke: ink, width: 0.7}
	minorPen = pen{stroke: ink, width: 0.45}
	zeroPen  = pen{stroke: rule, width: 0.6}
)

// frame says which parts of the axes are drawn.
type frame struct {
	tag      string // "a"
	noX, noY bool   // leave out the numbers and the title (a neighbour has them)
}

// axes draws the two spines with marks that point into the panel, the numbers
// outside, and the titles: that of y lying over its axis, that of x at the far
// end below.
func (p *panel) axes(f frame) {
	left, right, bottom := p.x, p.x+p.w, p.y+p.h
	var majors, minors path
	majors.move(left, p.y)
	majors.line(left, bottom)
	majors.line(right, bottom)
	const long, short = 4, 2.2
	end := math.Inf(-1)
	for _, t := range p.xs.ticks {
		x := p.xs.pos(t.at)
		if x < left-0.01 || x > right+0.01 {
			continue
		}
		if t.minor {
			minors.move(x, bottom)
			minors.line(x, bottom-short)
			continue
		}
		majors.move(x, bottom)
		majors.line(x, bottom-long)
		if half := width(t.label, tickSize, false) / 2; !f.noX && x-half > end+3 {
			at := math.Min(x, p.c.w-2-half) // stays on the page
			p.c.write(label{x: at, y: bottom + 4 + tickSize, size: tickSize, anchor: 0.5, s: t.label})
			end = x + half
		}
	}
	for _, t := range p.ys.ticks {
		y := p.ys.pos(t.at)
		if y < p.y-0.01 || y > bottom+0.01 {
			continue
		}
		if t.minor {
			minors.move(left, y)
			minors.line(left+short, y)
			continue
		}
		majors.move(left, y)
		majors.line(left+long, y)
		if !f.noY {
			p.c.write(label{x: left - 4, y: y + 0.35*tickSize, size: tickSize, anchor: 1, s: t.label})
		}
	}
	p.c.draw(minors, minorPen)
	p.c.draw(majors, axisPen)
	if !f.noX && p.xs.title != "" {
		p.c.write(label{x: right, y: bottom + 4 + tickSize + 3 + labelSize, size: labelSize, anchor: 1, s: fitted(p.xs.title, labelSize, false, p.w)})
	}
	x := left
	if f.tag != "" {
		p.c.write(label{x: x, y: p.y - 7, size: labelSize, bold: true, s: f.tag})
		x += width(f.tag, labelSize, true) + 6
	}
	if !f.noY && p.ys.title != "" {
		p.c.write(label{x: x, y: p.y - 7, size: labelSize, s: fitted(p.ys.title, labelSize, false, right-x)})
	}
}

// below is the room under a panel for numbers and title.
const below = 4 + tickSize + 3 + labelSize + 4

// inside tells whether a point falls into the panel.
func (p *panel) inside(x, y float64) bool {
	const e = 0.01
	return x >= p.x-e && x <= p.x+p.w+e && y >= p.y-e && y <= p.y+p.h+e
}

// level draws a horizontal line at an SI value.
func (p *panel) level(y float64, k pen) {
	if v := p.ys.pos(y); v >= p.y && v <= p.y+p.h {
		p.c.segment(p.x, v, p.x+p.w, v, k)
	}
}

// upright draws a vertical line at an SI value.
func (p *panel) upright(x float64, k pen) {
	if v := p.xs.pos(x); v >= p.x && v <= p.x+p.w {
		p.c.segment(v, p.y, v, p.y+p.h, k)
	}
}

// stripe fills between two levels.
func (p *panel) stripe(lo, hi float64, fill string) {
	a := clamp(p.ys.pos(hi), p.y, p.y+p.h)
	b := clamp(p.ys.pos(lo), p.y, p.y+p.h)
	if b > a {
		var q path
		q.rect(p.x, a, p.w, b-a)
		p.c.draw(q, pen{fill: fill})
	}
}

// column fills between two values of x.
func (p *panel) column(lo, hi float64, fill string) {
	a := clamp(p.xs.pos(lo), p.x, p.x+p.w)
	b := clamp(p.xs.pos(hi), p.x, p.x+p.w)
	if b > a {
		var q path
		q.rect(a, p.y, b-a, p.h)
		p.c.draw(q, pen{fill: fill})
	}
}

// curve draws straight lines between points, cut at the edge of the panel and
// broken where a value is not finite.
func (p *panel) curve(x, y []float64, k pen) {
	var q path
	lastX, lastY := math.NaN(), math.NaN()
	for i := 1; i < len(x); i++ {
		x0, y0, x1, y1 := p.xs.pos(x[i-1]), p.ys.pos(y[i-1]), p.xs.pos(x[i]), p.ys.pos(y[i])
		if !finite(x0, y0, x1, y1) {
			continue
		}
		a, b, c, d, ok := clipLine(x0, y0, x1, y1, p.x, p.y, p.x+p.w, p.y+p.h)
		if !ok {
			continue
		}
		if a != lastX || b != lastY {
			q.move(a, b)
		}
		q.line(c, d)
		lastX, lastY = c, d
	}
	p.c.draw(q, k)
}

// band fills between two curves over the same x, cut at the edge of the panel.
func (p *panel) band(x, lo, hi []float64, k pen) {
	var q path
	var back [][2]float64
	flush := func() {
		for i := len(back) - 1; i >= 0; i-- {
			q.line(back[i][0], back[i][1])
		}
		if len(back) > 0 {
			q.close()
		}
		back = back[:0]
	}
	for i := range x {
		a, b, c := p.xs.pos(x[i]), p.ys.pos(hi[i]), p.ys.pos(lo[i])
		if !finite(a, b, c) || a < p.x-0.01 || a > p.x+p.w+0.01 {
			flush()
			continue
		}
		b, c = clamp(b, p.y, p.y+p.h), clamp(c, p.y, p.y+p.h)
		if len(back) == 0 {
			q.move(a, b)
		} else {
			q.line(a, b)
		}
		back = append(back, [2]float64{a, c})
	}
	flush()
	p.c.draw(q, k)
}

// bars draws error bars of half-lengths ux, uy (nil for none) with small caps.
func (p *panel) bars(x, y, ux, uy []float64, keep []int, color string) {
	const cap = 1.6
	var q path
	for _, i := range keep {
		cx, cy := p.xs.pos(x[i]), p.ys.pos(y[i])
		if !finite(cx, cy) || !p.inside(cx, cy) {
			continue
		}
		if uy != nil && uy[i] > 0 {
			top, foot := p.ys.pos(y[i]+uy[i]), p.ys.pos(y[i]-uy[i])
			if math.IsNaN(foot) || math.IsInf(foot, 0) {
				foot = p.y + p.h // below zero on a logarithmic axis
			}
			if finite(top) && foot-top > 1 {
				t, b := math.Max(top, p.y), math.Min(foot, p.y+p.h)
				q.move(cx, t)
				q.line(cx, b)
				if t == top {
					q.move(cx-cap, t)
					q.line(cx+cap, t)
				}
				if b == foot {
					q.move(cx-cap, b)
					q.line(cx+cap, b)
				}
			}
		}
		if ux != nil && ux[i] > 0 {
			l, r := p.xs.pos(x[i]-ux[i]), p.xs.pos(x[i]+ux[i])
			if math.IsNaN(l) || math.IsInf(l, 0) {
				l = p.x
			}
			if finite(r) && r-l > 1 {
				a, b := math.Max(l, p.x), math.Min(r, p.x+p.w)
				q.move(a, cy)
				q.line(b, cy)
				if a == l {
					q.move(a, cy-cap)
					q.line(a, cy+cap)
				}
				if b == r {
					q.move(b, cy-cap)
					q.line(b, cy+cap)
				}
			}
		}
	}
	p.c.draw(q, pen{stroke: color, width: 0.7})
}

// crowded is the number of points from which markers go without a rim.
const crowded = 400

// dots draws markers at the points kept. A few have paper-coloured rims that set
// them off from each other, for which each must be a path of its own; many share
// one path.
func (p *panel) dots(x, y []float64, keep []int, m marker, r float64, k pen) {
	if len(keep) > crowded && k.stroke == paper {
		k.stroke = ""
	}
	for start := 0; start < len(keep); {
		var q path
		stop := len(keep)
		if k.fill != "" && k.stroke != "" && len(keep) <= crowded {
			stop = start + 1
		}
		for _, i := range keep[start:stop] {
			cx, cy := p.xs.pos(x[i]), p.ys.pos(y[i])
			if finite(cx, cy) && p.inside(cx, cy) {
				m.mark(&q, cx, cy, r)
			}
		}
		p.c.draw(q, k)
		start = stop
	}
}

func clamp(x, lo, hi float64) float64 { return math.Min(math.Max(x, lo), hi) }

func finite(x ...float64) bool {
	for _, v := range x {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return false
		}
	}
	return true
}

// extent draws, for points that are thinned, a stroke from the lowest to the
// highest of each column of the page, so that what lies between is seen to be
// filled. keep is what thin returned.
func (p *panel) extent(x, y []float64, keep []int, color string) {
	if len(keep) == len(x) {
		return
	}
	type reach struct{ lo, hi float64 }
	columns := map[int]reach{}
	last := 0
	for _, i := range keep {
		cx, cy := p.xs.pos(x[i]), p.ys.pos(y[i])
		if !finite(cx, cy) {
			continue
		}
		cy = clamp(cy, p.y, p.y+p.h)
		c := int(math.Floor(2 * (cx - p.x)))
		r, ok := columns[c]
		if !ok {
			r = reach{cy, cy}
		}
		columns[c] = reach{math.Min(r.lo, cy), math.Max(r.hi, cy)}
		last = max(last, c)
	}
	var q path
	for c := 0; c <= last; c++ {
		if r, ok := columns[c]; ok && r.hi > r.lo {
			q.move(p.x+(float64(c)+0.5)/2, r.lo)
			q.line(p.x+(float64(c)+0.5)/2, r.hi)
		}
	}
	p.c.draw(q, pen{stroke: color, width: 0.5})
}

// pale returns a light tint of a colour.
func pale(color string) string {
	r, g, b := rgb(color)
	mix := func(v uint8) int { return int(0.45*float64(v) + 0.55*255) }
	return fmt.Sprintf("#%02x%02x%02x", mix(r), mix(g), mix(b))
}

// thinAbove is the number of points above which a panel is thinned.
const thinAbove = 5000

// thin returns the indices of the points to draw: all of them up to most, else
// the first, lowest and highest of each half-point column of the page, and
// every one of must (nil for none). Points that are not finite are left out.
func thin(x, y []float64, xs, ys *scale, must []bool, most int) []int {
	keep := make([]int, 0, min(len(x), 4*most))
	for i := range x {
		if finite(x[i], y[i]) {
			keep = append(keep, i)
		}
	}
	if len(keep) <= most {
		return keep
	}
	span := math.Abs(xs.to - xs.from)
	columns := int(2*span) + 1
	low, high := make([]int, columns), make([]int, columns)
	for i := range low {
		low[i], high[i] = -1, -1
	}
	chosen := make([]bool, len(x))
	for _, i := range keep {
		at := xs.pos(x[i])
		if !finite(at) {
			continue
		}
		c := int(clamp(2*math.Abs(at-xs.from), 0, float64(columns-1)))
		if low[c] < 0 || y[i] < y[low[c]] {
			low[c] = i
		}
		if high[c] < 0 || y[i] > y[high[c]] {
			high[c] = i
		}
		if must != nil && must[i] {
			chosen[i] = true
		}
	}
	for c := range low {
		if low[c] >= 0 {
			chosen[low[c]], chosen[high[c]] = true, true
		}
	}
	out := keep[:0]
	for _, i := range keep {
		if chosen[i] {
			out = append(out, i)
		}
	}
	return out
}
