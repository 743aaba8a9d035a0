package figure

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/si"
)

// Plot is one panel of things against each other in the style of all figures:
// calibration curves, correction factors, drift, results of laboratories. All
// data are SI. The zero Plot has linear axes of pure numbers and draws nothing.
type Plot struct {
	Name    string // base of the file name; "": "plot"
	Title   string
	From    string // what it was drawn from, under the title
	Caption string
	X, Y    Axis
	Bands   []Band
	Levels  []Level
	Shapes  []Shape
	Series  []Series
	Notes   []string
	Height  float64 // of the panel, points; 0: 210
	Equal   bool    // one length on the page for one unit on both axes, as maps need
}

// Series is points, a line or both. X and Y have the same length, as have UX and
// UY, half-lengths of error bars, unless nil.
type Series struct {
	Name   string // in the key; "" keeps it out
	X, Y   []float64
	UX, UY []float64
	Line   bool
	Points bool   // also points when Line is set; without Line there are always points
	Hollow []bool // points drawn open: excluded, or of another kind
	Look   int    // 1, 2, …: take the look of that series; 0: the next free one
}

// Band is the area between two curves over X.
type Band struct {
	Name         string
	X, Low, High []float64
}

// Level is a line at a constant Y (or X when Upright): a limit, a reference.
type Level struct {
	Name    string
	At      float64
	Upright bool
}

// Shape is a filled outline: an electrode, a body.
type Shape struct {
	Name string
	X, Y []float64
}

// Draw makes the figure. Errors name the series that can't be drawn and why:
// lengths that differ, nothing finite, zeros on a logarithmic axis.
func (p *Plot) Draw() (*Figure, error) {
	return Stack(p.Name, p.Title, p.From, []Plot{*p})
}

// Stack draws plots under one another on one page with their left and right
// edges aligned, lettered a, b, … when there are more than one. Plots that have
// the same X (name, unit and kind) share its scale, and only the lowest of a run
// of them carries the numbers.
func Stack(name, title, from string, plots []Plot) (*Figure, error) {
	if len(plots) == 0 {
		return nil, fmt.Errorf("figure: no plot to draw")
	}
	if len(plots) > 26 {
		return nil, fmt.Errorf("figure: %d plots on one page; 26 fit", len(plots))
	}
	xs, ys := make([]*scale, len(plots)), make([]*scale, len(plots))
	for i := range plots {
		if err := plots[i].check(); err != nil {
			return nil, err
		}
	}
	left := 0.0
	for i := range plots {
		var sx, sy spanner
		for j := range plots {
			if j == i || sharesX(&plots[i], &plots[j]) {
				plots[j].spanX(&sx)
			}
		}
		plots[i].spanY(&sy)
		var err error
		if xs[i], err = newScale(plots[i].X, sx, 8); err != nil {
			return nil, err
		}
		want := 6
		if plots[i].height() < 120 {
			want = 4
		}
		if ys[i], err = newScale(plots[i].Y, sy, want); err != nil {
			return nil, err
		}
		left = math.Max(left, leftMargin(ys[i]))
	}
	left += marginX
	s := newSheet(wide, title, from)
	caption := ""
	for i := range plots {
		p := &plots[i]
		f := frame{}
		if len(plots) > 1 {
			f.tag = string(rune('a' + i))
		}
		f.noX = i+1 < len(plots) && sharesX(p, &plots[i+1])
		s.keys(p.keys(), left)
		q := &panel{c: s.c, xs: xs[i], ys: ys[i]}
		w, h := wide-marginX-left, p.height()
		if p.Equal {
			w, h = equalise(q, w, h)
		}
		q.at(left, s.y+8+labelSize+6, w, h)
		p.draw(s, q)
		q.axes(f)
		s.y = q.y + q.h
		if f.noX {
			s.y += 6
		} else {
			s.y += below
		}
		for _, n := range p.Notes {
			s.note("%s", n)
		}
		if p.Caption != "" {
			if caption != "" {
				caption += " "
			}
			if f.tag != "" {
				caption += f.tag + ", "
			}
			caption += p.Caption
		}
	}
	if name == "" {
		name = "plot"
	}
	return s.finish(name, title, caption, caption), nil
}

func (p *Plot) height() float64 {
	if p.Height > 0 {
		return math.Min(math.Max(p.Height, 40), 2000)
	}
	return 210
}

// sharesX tells whether two plots have the same axis below.
func sharesX(a, b *Plot) bool {
	if len(a.X.Labels) != len(b.X.Labels) {
		return false
	}
	for i := range a.X.Labels {
		if a.X.Labels[i] != b.X.Labels[i] {
			return false
		}
	}
	return a.X.Name == b.X.Name && a.X.Unit == b.X.Unit && a.X.Log == b.X.Log && a.X.Low == b.X.Low && a.X.High == b.X.High && a.X.Zero == b.X.Zero &&
		!a.Equal && !b.Equal
}

// check finds lengths that differ.
func (p *Plot) check() error {
	for i, s := range p.Series {
		n := len(s.X)
		for _, l := range []struct {
			what string
			n    int
			some bool
		}{{"values of y", len(s.Y), true}, {"error bars of x", len(s.UX), s.UX != nil}, {"error bars of y", len(s.UY), s.UY != nil}, {"marks", len(s.Hollow), s.Hollow != nil}} {
			if l.some && l.n != n {
				return fmt.Errorf("figure: series %d (%s) has %d values of x and %d %s", i+1, OneLine(s.Name), n, l.n, l.what)
			}
		}
	}
	for _, b := range p.Bands {
		if len(b.Low) != len(b.X) || len(b.High) != len(b.X) {
			return fmt.Errorf("figure: band %s has %d values of x, %d of its lower and %d of its upper edge", OneLine(b.Name), len(b.X), len(b.Low), len(b.High))
		}
	}
	for _, b := range p.Shapes {
		if len(b.Y) != len(b.X) {
			return fmt.Errorf("figure: outline %s has %d values of x and %d of y", OneLine(b.Name), len(b.X), len(b.Y))
		}
	}
	return nil
}

func (p *Plot) spanX(s *spanner) {
	for _, r := range p.Series {
		for i, v := range r.X {
			if !finite(r.Y[i]) {
				continue
			}
			s.add(v)
			if r.UX != nil && finite(r.UX[i]) {
				s.add(v + r.UX[i])
				if !p.X.Log || v-r.UX[i] > 0 {
					s.add(v - r.UX[i])
				}
			}
		}
	}
	for _, b := range p.Bands {
		for _, v := range b.X {
			s.add(v)
		}
	}
	for _, b := range p.Shapes {
		for _, v := range b.X {
			s.add(v)
		}
	}
	for _, l := range p.Levels {
		if l.Upright {
			s.add(l.At)
		}
	}
}

func (p *Plot) spanY(s *spanner) {
	for _, r := range p.Series {
		for i, v := range r.Y {
			if !finite(r.X[i]) {
				continue
			}
			s.add(v)
			if r.UY != nil && finite(r.UY[i]) {
				s.add(v + r.UY[i])
				if !p.Y.Log || v-r.UY[i] > 0 {
					s.add(v - r.UY[i])
				}
			}
		}
	}
	for _, b := range p.Bands {
		for i := range b.X {
			s.add(b.Low[i])
			s.add(b.High[i])
		}
	}
	for _, b := range p.Shapes {
		for _, v := range b.Y {
			s.add(v)
		}
	}
	for _, l := range p.Levels {
		if !l.Upright {
			s.add(l.At)
		}
	}
}

// styles gives each series its look.
func (p *Plot) styles() []look {
	out := make([]look, len(p.Series))
	next := 0
	for i, s := range p.Series {
		if s.Look > 0 {
			out[i] = lookOf(s.Look - 1)
			continue
		}
		out[i] = lookOf(next)
		next++
	}
	return out
}

var levelDashes = []string{"7,3", "2,2", "9,2,2,2"}

func (p *Plot) keys() []key {
	var out []key
	styles := p.styles()
	for i, s := range p.Series {
		if s.Name != "" {
			out = append(out, key{look: styles[i], name: s.Name, line: s.Line, point: s.Points || !s.Line})
		}
	}
	for _, b := range p.Bands {
		if b.Name != "" {
			out = append(out, key{fill: shade2, name: b.Name})
		}
	}
	for i, l := range p.Levels {
		if l.Name != "" {
			out = append(out, key{look: look{color: slate, dash: dashes(levelDashes[i%len(levelDashes)])}, name: l.Name, line: true})
		}
	}
	for _, b := range p.Shapes {
		if b.Name != "" {
			out = append(out, key{fill: rule, name: b.Name})
		}
	}
	return out
}

// draw puts everything into the panel, from the back to the front.
func (p *Plot) draw(s *sheet, q *panel) {
	for i, b := range p.Bands {
		fill := shade2
		if i > 0 && b.Name != "" {
			fill = shade
		}
		q.band(b.X, b.Low, b.High, pen{fill: fill})
	}
	for _, b := range p.Shapes {
		q.shape(b.X, b.Y)
	}
	if !q.ys.log && q.ys.lo < 0 && q.ys.hi > 0 && len(p.Shapes) == 0 {
		q.level(0, zeroPen)
	}
	for i, l := range p.Levels {
		k := pen{stroke: slate, width: 0.9, dash: levelDashes[i%len(levelDashes)]}
		if l.Upright {
			q.upright(l.At, k)
		} else {
			q.level(l.At, k)
		}
	}
	styles := p.styles()
	for i, r := range p.Series {
		if r.Line {
			x, y := r.X, r.Y
			if len(x) > thinAbove {
				keep := thin(x, y, q.xs, q.ys, nil, thinAbove)
				s.count(len(keep), len(x))
				x, y = pick(x, keep), pick(y, keep)
			}
			q.curve(x, y, pen{stroke: styles[i].color, width: 1.1, dash: dashText(styles[i].dash)})
		}
	}
	for i, r := range p.Series {
		if r.Line && !r.Points {
			continue
		}
		size := 2.6
		if len(r.X) > crowded {
			size = 1.5
		}
		keep := thin(r.X, r.Y, q.xs, q.ys, r.Hollow, thinAbove)
		s.count(len(keep), len(r.X))
		var full, open []int
		for _, k := range keep {
			if r.Hollow != nil && r.Hollow[k] {
				open = append(open, k)
			} else {
				full = append(full, k)
			}
		}
		q.extent(r.X, r.Y, keep, pale(styles[i].color))
		q.bars(r.X, r.Y, r.UX, r.UY, keep, styles[i].color)
		q.dots(r.X, r.Y, full, styles[i].marker, size, styles[i].marker.pen(styles[i].color, false))
		q.dots(r.X, r.Y, open, styles[i].marker, size, styles[i].marker.pen(styles[i].color, true))
	}
}

// shape fills an outline, cut at the edge of the panel (Sutherland and Hodgman
// 1974).
func (p *panel) shape(x, y []float64) {
	type pt struct{ x, y float64 }
	poly := make([]pt, 0, len(x))
	for i := range x {
		a, b := p.xs.pos(x[i]), p.ys.pos(y[i])
		if !finite(a, b) {
			return // an outline with a hole in it can't be filled
		}
		poly = append(poly, pt{a, b})
	}
	for side := range 4 {
		in := func(q pt) float64 { // above zero inside
			switch side {
			case 0:
				return q.x - p.x
			case 1:
				return p.x + p.w - q.x
			case 2:
				return q.y - p.y
			}
			return p.y + p.h - q.y
		}
		var out []pt
		for i, q := range poly {
			from := poly[(i+len(poly)-1)%len(poly)]
			a, b := in(from), in(q)
			if (a >= 0) != (b >= 0) {
				t := a / (a - b)
				out = append(out, pt{from.x + t*(q.x-from.x), from.y + t*(q.y-from.y)})
			}
			if b >= 0 {
				out = append(out, q)
			}
		}
		poly = out
	}
	if len(poly) < 3 {
		return
	}
	var o path
	o.move(poly[0].x, poly[0].y)
	for _, q := range poly[1:] {
		o.line(q.x, q.y)
	}
	o.close()
	p.c.draw(o, pen{fill: "#b4b4b4", stroke: ink, width: 0.7})
}

// equalise makes one SI unit as long on both axes, by widening the range of the
// shorter one within the room there is.
func equalise(q *panel, w, h float64) (float64, float64) {
	if q.xs.log || q.ys.log {
		return w, h
	}
	dx, dy := q.xs.hi-q.xs.lo, q.ys.hi-q.ys.lo
	if most := 1.4 * w; w*dy/dx <= most {
		return w, w * dy / dx
	}
	h = 1.4 * w
	return h * dx / dy, h
}

// Pairs draws samples of several quantities against each other, one panel for
// each pair, with the ellipse that a normal distribution of the given covariance
// fills with probability p, and the correlation over each panel. samples[k] are
// the values of quantity k, SI; nil draws the ellipses alone. value has one entry
// a quantity and covariance is square, SI.
func Pairs(name, title, from string, axes []Axis, samples [][]float64, value []float64, covariance [][]float64, p float64) (*Figure, error) {
	n := len(axes)
	if n < 2 || n > 8 {
		return nil, fmt.Errorf("figure: pairs of %d quantities; 2 to 8 can be drawn", n)
	}
	if !(p > 0 && p < 1) {
		return nil, fmt.Errorf("figure: probability %s of an ellipse must lie between 0 and 1", si.Exact(p))
	}
	if len(value) != n || len(covariance) != n || samples != nil && len(samples) != n {
		return nil, fmt.Errorf("figure: %d quantities, but %d values, %d rows of covariance and %d samples", n, len(value), len(covariance), len(samples))
	}
	for i := range covariance {
		if len(covariance[i]) != n {
			return nil, fmt.Errorf("figure: row %d of the covariance has %d of %d entries", i+1, len(covariance[i]), n)
		}
		if !(covariance[i][i] > 0) || math.IsInf(covariance[i][i], 0) {
			return nil, fmt.Errorf("figure: the variance of %s is %s; it must be above zero", OneLine(axes[i].Name), si.Exact(covariance[i][i]))
		}
		if samples != nil && len(samples[i]) != len(samples[0]) {
			return nil, fmt.Errorf("figure: samples of %s and %s differ in length", OneLine(axes[0].Name), OneLine(axes[i].Name))
		}
	}
	// Radius of the ellipse: chi-squared with two degrees of freedom is
	// exponential, so that r² = −2 ln(1 − p).
	radius := math.Sqrt(-2 * math.Log(1-p))
	scales := make([]*scale, n)
	left := 0.0
	for k := range axes {
		var s spanner
		u := math.Sqrt(covariance[k][k])
		s.add(value[k] - 1.15*radius*u)
		s.add(value[k] + 1.15*radius*u)
		a := axes[k]
		a.Log, a.Labels = false, nil
		a.Low, a.High = s.lo-0.3*u, s.hi+0.3*u
		var err error
		if scales[k], err = newScale(a, s, 3); err != nil {
			return nil, err
		}
		if k > 0 {
			left = math.Max(left, leftMargin(scales[k]))
		}
	}
	left += marginX
	s := newSheet(wide, title, from)
	const gap = 14.0
	m := float64(n - 1)
	w := math.Min((wide-marginX-left-gap*(m-1))/m, 190)
	h := math.Min(w, 150)
	y := s.y + 8 + labelSize + 6
	for i := 1; i < n; i++ {
		for j := 0; j < i; j++ {
			q := &panel{c: s.c, xs: again(scales[j]), ys: again(scales[i])}
			q.at(left+float64(j)*(w+gap), y, w, h)
			if samples != nil {
				keep := thinCloud(samples[j], samples[i], 1200)
				s.count(len(keep), len(samples[j]))
				q.dots(samples[j], samples[i], keep, circle, 0.9, pen{fill: "#8fb8d4"})
			}
			ui, uj := math.Sqrt(covariance[i][i]), math.Sqrt(covariance[j][j])
			r := covariance[i][j] / (ui * uj)
			const steps = 90
			var ex, ey []float64
			for t := 0; t <= steps; t++ {
				sin, cos := math.Sincos(2 * math.Pi * float64(t) / steps)
				ex = append(ex, value[j]+radius*uj*cos)
				ey = append(ey, value[i]+radius*ui*(r*cos+math.Sqrt(math.Max(0, 1-r*r))*sin))
			}
			q.curve(ex, ey, pen{stroke: vermilion, width: 1.1})
			var centre path
			plus.mark(&centre, q.xs.pos(value[j]), q.ys.pos(value[i]), 3.2)
			q.c.draw(centre, pen{stroke: vermilion, width: 1.1})
			q.axes(frame{noX: i < n-1, noY: j > 0})
			rs := "r = " + signed(fmt.Sprintf("%+.2f", r))
			if j > 0 || width(q.ys.title, labelSize, false) < w-width(rs, noteSize, false)-8 {
				s.c.write(label{x: q.x + w, y: y - 3, size: noteSize, anchor: 1, color: slate, s: rs})
			} else {
				s.c.write(label{x: q.x + w, y: y + 7, size: noteSize, anchor: 1, color: slate, s: rs})
			}
		}
		y += h + 8 + labelSize + 8
	}
	s.y = y - (8 + labelSize + 8) + below
	s.note("Ellipses hold %s of a normal distribution of this covariance.", si.Percent(p))
	return s.finish(name, title, "Pairs of quantities with the ellipse that holds "+si.Percent(p)+" of a normal distribution of their covariance.", ""), nil
}

// thinCloud keeps every so many points of a cloud in which no order matters.
func thinCloud(x, y []float64, most int) []int {
	var keep []int
	step := max(1, (len(x)+most-1)/most)
	for i := 0; i < len(x); i += step {
		if finite(x[i], y[i]) {
			keep = append(keep, i)
		}
	}
	return keep
}
