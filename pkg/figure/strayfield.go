package figure

import (
	"fmt"
	"math"
	"sort"
	"strconv"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/si"
)

// StrayField draws a stray field in the plane through the meter that holds most
// of the bodies: field lines from every body, more of them for a larger charge,
// equipotentials at values of the series 1, 2, 5, the bodies in outline with their
// charges in nC, the earthed plane, places without field, and the meter.
func StrayField(s *plan.StrayField) (*Figure, error) {
	v := newStrayView(s)
	title := s.Bench.Title
	if OneLine(title) == "" {
		title = "Stray field"
	}
	page := newSheet(wide, title, "plane "+v.name()+" through "+s.Bench.Meter)
	keys := []key{
		{look: look{color: green}, name: "field line", line: true},
		{look: look{color: slate, dash: []float64{3, 2}}, name: "equipotential", line: true},
		{look: look{color: orange, marker: diamond}, name: s.Bench.Meter, point: true},
	}
	if len(v.zeros()) > 0 {
		keys = append(keys, key{look: look{color: purple, marker: circle}, name: "no field", point: true, hollow: true})
	}
	q := &panel{c: page.c}
	mk := func(axis int, lo, hi float64, want int) (*scale, error) {
		var span spanner
		span.add(lo)
		span.add(hi)
		return newScale(Axis{Name: axisLetters[axis], Unit: si.MustUnit("m"), Low: lo, High: hi}, span, want)
	}
	var err error
	if q.xs, err = mk(v.h, v.lo[0], v.hi[0], 8); err != nil {
		return nil, err
	}
	if q.ys, err = mk(v.v, v.lo[1], v.hi[1], 6); err != nil {
		return nil, err
	}
	left := marginX + leftMargin(q.ys)
	page.keys(keys, left)
	w, h := equalise(q, wide-marginX-left, 0)
	q.at(left, page.y+8+labelSize+6, w, h)

	v.ground(q)
	labels, err := v.potentials(q)
	if err != nil {
		return nil, err
	}
	lines := v.lines(q)
	labels()
	v.bodies(q)
	v.marks(q)
	q.axes(frame{})
	page.y = q.y + q.h + below
	page.note("Field lines begin on positive and end on negative bodies, the earthed plane, or beyond the panel; a body of larger charge has more of them. Outlines of negative bodies are dashed.")
	if v.aside > 0 {
		page.note("%s not in this plane and drawn grey where seen along its normal; field lines are drawn as they run in space.", aside(v.aside))
	}
	summary := fmt.Sprintf("Field at %s: %s V/m, potential %s V. %d field lines, %d places without field.", s.Bench.Meter, number(s.Magnitude), number(s.Potential), lines, len(s.Zeros))
	return page.finish("strayfield", title, "Field lines and equipotentials of the charged bodies around the meter, with their charges.", summary), nil
}

func aside(n int) string {
	if n == 1 {
		return "One body is"
	}
	return strconv.Itoa(n) + " bodies are"
}

var axisLetters = [3]string{"x", "y", "z"}

// strayView is the plane drawn and its window.
type strayView struct {
	s       *plan.StrayField
	h, v, n int // axes across, up, and along the normal
	at      float64
	lo, hi  [2]float64
	size    float64
	aside   int // bodies out of the plane
}

func newStrayView(s *plan.StrayField) *strayView {
	lo, hi := s.Bench.At, s.Bench.At
	for _, c := range s.Scene.Sources {
		for _, p := range []field.Vec{c.From, c.To} {
			for k := range 3 {
				lo[k] = math.Min(lo[k], p[k]-c.Radius)
				hi[k] = math.Max(hi[k], p[k]+c.Radius)
			}
		}
	}
	v := &strayView{s: s}
	spread := func(k int) float64 { // of centres: radii say nothing of where bodies lie
		a, b := s.Bench.At[k], s.Bench.At[k]
		for _, c := range s.Scene.Sources {
			for _, p := range []float64{c.From[k], c.To[k]} {
				a, b = math.Min(a, p), math.Max(b, p)
			}
		}
		return b - a
	}
	// Seen along the axis of least spread; y before x before z when they are equal,
	// so that z stands upright.
	v.n = 1
	for _, k := range []int{0, 2} {
		if spread(k) < spread(v.n)*(1-1e-9) {
			v.n = k
		}
	}
	v.h, v.v = [3]int{1, 0, 0}[v.n], [3]int{2, 2, 1}[v.n]
	v.at = s.Bench.At[v.n]
	side := math.Max(hi[v.h]-lo[v.h], hi[v.v]-lo[v.v])
	for i, k := range []int{v.h, v.v} {
		v.lo[i], v.hi[i] = lo[k]-0.2*side, hi[k]+0.2*side
		// A plane not far outside belongs to the picture.
		if p := s.Scene.Plane; p != nil && math.Abs(p.Normal[k]) > 0.999 {
			v.lo[i] = math.Max(math.Min(v.lo[i], p.Point[k]-0.04*side), lo[k]-0.7*side)
			v.hi[i] = math.Min(math.Max(v.hi[i], p.Point[k]+0.04*side), hi[k]+0.7*side)
			if p.Normal[k] > 0 {
				v.lo[i] = math.Max(v.lo[i], p.Point[k]-0.04*side)
			} else {
				v.hi[i] = math.Min(v.hi[i], p.Point[k]+0.04*side)
			}
		}
	}
	v.size = math.Max(v.hi[0]-v.lo[0], v.hi[1]-v.lo[1])
	for _, c := range s.Scene.Sources {
		if !v.holds(c.From) || !v.holds(c.To) {
			v.aside++
		}
	}
	return v
}

// holds tells whether a point lies in the plane drawn.
func (v *strayView) holds(p field.Vec) bool { return math.Abs(p[v.n]-v.at) <= 0.01*v.size }

func (v *strayView) name() string {
	return fmt.Sprintf("%s%s at %s = %s", axisLetters[v.h], axisLetters[v.v], axisLetters[v.n], number(v.at)+" m")
}

// point is a place of the window in space.
func (v *strayView) point(x, y float64) field.Vec {
	var p field.Vec
	p[v.h], p[v.v], p[v.n] = x, y, v.at
	return p
}

func (v *strayView) zeros() []plan.StrayZero {
	var out []plan.StrayZero
	for _, z := range v.s.Zeros {
		x, y := z.At[v.h], z.At[v.v]
		if v.holds(z.At) && !z.Line && x > v.lo[0] && x < v.hi[0] && y > v.lo[1] && y < v.hi[1] {
			out = append(out, z)
		}
	}
	return out
}

// ground shades what lies behind the earthed plane.
func (v *strayView) ground(q *panel) {
	p := v.s.Scene.Plane
	if p == nil {
		return
	}
	behind := func(x, y float64) float64 {
		var d float64
		at := v.point(x, y)
		for k := range 3 {
			d += (at[k] - p.Point[k]) * p.Normal[k]
		}
		return -d
	}
	corners := [][2]float64{{v.lo[0], v.lo[1]}, {v.hi[0], v.lo[1]}, {v.hi[0], v.hi[1]}, {v.lo[0], v.hi[1]}}
	var x, y []float64
	for i, b := range corners { // one side of Sutherland and Hodgman's clipping
		a := corners[(i+3)%4]
		da, db := behind(a[0], a[1]), behind(b[0], b[1])
		if (da >= 0) != (db >= 0) {
			t := da / (da - db)
			x, y = append(x, a[0]+t*(b[0]-a[0])), append(y, a[1]+t*(b[1]-a[1]))
		}
		if db >= 0 {
			x, y = append(x, b[0]), append(y, b[1])
		}
	}
	if len(x) < 3 {
		return
	}
	var o path
	for i := range x {
		if a, b := q.xs.pos(x[i]), q.ys.pos(y[i]); i == 0 {
			o.move(a, b)
		} else {
			o.line(a, b)
		}
	}
	o.close()
	q.c.draw(o, pen{fill: shade2})
	// its edge: where two neighbours lie on the plane
	for i := range x {
		j := (i + 1) % len(x)
		if math.Abs(behind(x[i], y[i])) < 1e-9*v.size && math.Abs(behind(x[j], y[j])) < 1e-9*v.size {
			q.c.segment(q.xs.pos(x[i]), q.ys.pos(y[i]), q.xs.pos(x[j]), q.ys.pos(y[j]), pen{stroke: ink, width: 1.3})
		}
	}
}

// potentials draws the equipotentials; their labels wait, to stand over the field
// lines.
func (v *strayView) potentials(q *panel) (labels func(), err error) {
	g := newGrid(v, 180)
	levels, err := v.levels(g)
	if err != nil {
		return nil, err
	}
	k := pen{stroke: slate, width: 0.55, dash: "3,2"}
	type tag struct {
		places [][2]float64 // where its label may stand
		level  float64
	}
	var tags []tag
	for _, level := range levels {
		longest := 0
		var best tag
		for _, c := range g.contour(level) {
			x, y := make([]float64, len(c)), make([]float64, len(c))
			for i, p := range c {
				x[i], y[i] = p[0], p[1]
			}
			q.curve(x, y, k)
			if len(c) > longest {
				longest = len(c)
				best = tag{level: level}
				for _, part := range []int{8, 12, 5, 16, 3, 19, 10, 14, 1, 22} {
					best.places = append(best.places, c[len(c)*part/24])
				}
			}
		}
		if longest > 12 {
			tags = append(tags, best)
		}
	}
	return func() {
		unit := si.MustUnit("V")
		var put [][4]float64
		for _, t := range tags {
			x, prefix := si.Prefixed(t.level, unit)
			text := number(x) + " " + prefix.Unicode()
			w := width(text, 6, false)
			for _, at := range t.places {
				px, py := q.xs.pos(at[0]), q.ys.pos(at[1])
				box := [4]float64{px - w/2 - 2, py - 4.5, px + w/2 + 2, py + 4.5}
				if box[0] < q.x || box[2] > q.x+q.w || box[1] < q.y || box[3] > q.y+q.h || overlaps(box, put) || v.near(q, box) {
					continue
				}
				put = append(put, box)
				var o path
				o.rect(box[0]+1, box[1]+0.8, box[2]-box[0]-2, box[3]-box[1]-1.6)
				q.c.draw(o, pen{fill: paper})
				q.c.write(label{x: px, y: py + 2.1, size: 6, anchor: 0.5, color: slate, s: text})
				break
			}
		}
	}, nil
}

func overlaps(b [4]float64, with [][4]float64) bool {
	for _, o := range with {
		if b[0] < o[2] && b[2] > o[0] && b[1] < o[3] && b[3] > o[1] {
			return true
		}
	}
	return false
}

// near tells whether a box of the page touches a body or the meter.
func (v *strayView) near(q *panel, b [4]float64) bool {
	const room = 16
	for _, c := range v.s.Scene.Sources {
		for _, p := range []field.Vec{c.From, c.To} {
			x, y := q.xs.pos(p[v.h]), q.ys.pos(p[v.v])
			r := math.Abs(q.xs.pos(c.Radius)-q.xs.pos(0)) + room
			if b[0] < x+r && b[2] > x-r && b[1] < y+r && b[3] > y-r {
				return true
			}
		}
	}
	x, y := q.xs.pos(v.s.Bench.At[v.h]), q.ys.pos(v.s.Bench.At[v.v])
	return b[0] < x+room && b[2] > x-room && b[1] < y+room && b[3] > y-room
}

// levels are potentials of the series 1, 2, 5 over two decades below the highest
// that fill the window.
func (v *strayView) levels(g *potentialGrid) ([]float64, error) {
	var all []float64
	negative, positive := false, false
	for _, p := range g.phi {
		if !math.IsNaN(p) && !math.IsInf(p, 0) {
			all = append(all, math.Abs(p))
			negative, positive = negative || p < 0, positive || p > 0
		}
	}
	if len(all) == 0 {
		return nil, fmt.Errorf("figure: the plane drawn has no place outside the bodies")
	}
	sort.Float64s(all)
	top := all[len(all)*99/100]
	if !(top > 0) {
		return nil, nil
	}
	var out []float64
	decade := math.Pow(10, math.Floor(math.Log10(top)))
	for _, by := range []float64{decade / 100, decade / 10, decade} {
		for _, m := range []float64{1, 2, 5} {
			if l := m * by; l <= top && l >= top/60 {
				if positive {
					out = append(out, l)
				}
				if negative {
					out = append(out, -l)
				}
			}
		}
	}
	if positive && negative {
		out = append(out, 0)
	}
	sort.Float64s(out)
	return out, nil
}

// lines draws the field lines and returns their number.
func (v *strayView) lines(q *panel) int {
	var lo, hi field.Vec
	lo[v.h], lo[v.v], lo[v.n] = v.lo[0], v.lo[1], v.at-v.size
	hi[v.h], hi[v.v], hi[v.n] = v.hi[0], v.hi[1], v.at+v.size
	most := 0.0
	for _, c := range v.s.Scene.Sources {
		most = math.Max(most, math.Abs(c.Charge))
	}
	positive := map[string]bool{}
	for _, c := range v.s.Scene.Sources {
		positive[c.Name] = c.Charge > 0
	}
	drawn := 0
	var chevrons path
	for _, c := range v.s.Scene.Sources {
		if c.Charge == 0 || !v.holds(c.From) || !v.holds(c.To) {
			continue
		}
		n := max(6, int(math.Round(28*math.Sqrt(math.Abs(c.Charge)/most))))
		for _, seed := range v.seeds(c, n) {
			inside := true
			for k := range 3 {
				inside = inside && seed[k] > lo[k] && seed[k] < hi[k]
			}
			if !inside {
				continue
			}
			line, err := v.s.Scene.Line(seed, c.Charge > 0, lo, hi, field.LineSettings{MaxStep: v.size / 160})
			if err != nil {
				continue // a seed within a neighbouring body or behind the plane
			}
			if c.Charge < 0 && line.End == field.OnSource && positive[line.Source] {
				continue // drawn from its other end
			}
			drawn++
			x, y := make([]float64, len(line.Points)), make([]float64, len(line.Points))
			for i, p := range line.Points {
				x[i], y[i] = p[v.h], p[v.v]
			}
			q.curve(x, y, pen{stroke: green, width: 0.75})
			chevron(&chevrons, q, x, y, c.Charge > 0)
		}
	}
	q.c.draw(chevrons, pen{stroke: green, width: 0.75})
	return drawn
}

// chevron adds a small open angle to p, a fifth of the way along a line that is
// long enough, pointing along the field.
func chevron(p *path, q *panel, x, y []float64, forward bool) {
	total := 0.0
	at := make([]float64, len(x))
	for i := 1; i < len(x); i++ {
		total += math.Hypot(q.xs.pos(x[i])-q.xs.pos(x[i-1]), q.ys.pos(y[i])-q.ys.pos(y[i-1]))
		at[i] = total
	}
	if total < 60 {
		return
	}
	i := sort.SearchFloat64s(at, 0.3*total)
	if i < 1 || i >= len(x) {
		return
	}
	ax, ay, bx, by := q.xs.pos(x[i-1]), q.ys.pos(y[i-1]), q.xs.pos(x[i]), q.ys.pos(y[i])
	l := math.Hypot(bx-ax, by-ay)
	if l == 0 || !q.inside(bx, by) {
		return
	}
	ux, uy := (bx-ax)/l, (by-ay)/l
	if !forward {
		ux, uy = -ux, -uy
	}
	const arm = 3.2
	p.move(bx-arm*(ux+0.55*uy), by-arm*(uy-0.55*ux))
	p.line(bx, by)
	p.line(bx-arm*(ux-0.55*uy), by-arm*(uy+0.55*ux))
}

// seeds are n places around a body from which field lines start.
func (v *strayView) seeds(c field.Source, n int) []field.Vec {
	around := func(centre field.Vec, r, from, span float64, n int) []field.Vec {
		var out []field.Vec
		for i := range n {
			sin, cos := math.Sincos(from + span*(float64(i)+0.5)/float64(n))
			p := centre
			p[v.h] += r * cos
			p[v.v] += r * sin
			out = append(out, p)
		}
		return out
	}
	r := 2.2e-3 * v.size
	if c.Radius > 0 {
		return around(c.From, c.Radius*(1+1e-6), 0, 2*math.Pi, n)
	}
	dx, dy := c.To[v.h]-c.From[v.h], c.To[v.v]-c.From[v.v]
	l := math.Hypot(dx, dy)
	if l == 0 {
		return around(c.From, r, 0, 2*math.Pi, n)
	}
	angle := math.Atan2(dy, dx)
	// both flanks and, at each end, a few around it
	out := append(around(c.From, r, angle+math.Pi/2, math.Pi, 3), around(c.To, r, angle-math.Pi/2, math.Pi, 3)...)
	flank := max(2, (n-6)/2)
	for i := range flank {
		t := (float64(i) + 0.5) / float64(flank)
		for _, side := range []float64{-1, 1} {
			var p field.Vec
			p[v.n] = c.From[v.n]
			p[v.h] = c.From[v.h] + t*dx - side*r*dy/l
			p[v.v] = c.From[v.v] + t*dy + side*r*dx/l
			out = append(out, p)
		}
	}
	return out
}

// bodies outlines the bodies and writes their charges.
func (v *strayView) bodies(q *panel) {
	nano := si.MustUnit("nC")
	for i, c := range v.s.Scene.Sources {
		k := pen{stroke: ink, width: 1.2, fill: paper}
		if c.Charge < 0 {
			k.dash = "2.5,1.8"
		}
		if !v.holds(c.From) || !v.holds(c.To) {
			k.stroke = rule
		}
		x0, y0, x1, y1 := q.xs.pos(c.From[v.h]), q.ys.pos(c.From[v.v]), q.xs.pos(c.To[v.h]), q.ys.pos(c.To[v.v])
		r := math.Max(math.Abs(q.xs.pos(c.Radius)-q.xs.pos(0)), 2.6)
		var o path
		if x0 == x1 && y0 == y1 {
			if !q.inside(x0, y0) {
				continue
			}
			o.circle(x0, y0, r)
		} else { // a slender bar
			l := math.Hypot(x1-x0, y1-y0)
			nx, ny := -(y1-y0)/l*1.8, (x1-x0)/l*1.8
			o.move(x0+nx, y0+ny)
			o.line(x1+nx, y1+ny)
			o.line(x1-nx, y1-ny)
			o.line(x0-nx, y0-ny)
			o.close()
			r = 1.8
		}
		q.c.draw(o, k)
		value := number(nano.FromSI(c.Charge))
		if c.Charge > 0 {
			value = "+" + value
		}
		text := value + " nC"
		mx, my := (x0+x1)/2, (y0+y1)/2
		name := OneLine(v.s.Bench.Bodies[i].Name)
		if w := width(text, 7, true); 2*r > w+6 {
			q.c.write(label{x: mx, y: my + 2.6, size: 7, bold: true, anchor: 0.5, s: text})
			v.caption(q, mx, my-r-3.5, name)
			continue
		}
		v.caption(q, mx, my-r-3.5, name+"  "+text)
	}
}

// caption writes a name over a body on a strip of paper, within the panel.
func (v *strayView) caption(q *panel, x, y float64, s string) {
	s = fitted(s, 7, true, q.w/2)
	w := width(s, 7, true)
	x = clamp(x, q.x+w/2+3, q.x+q.w-w/2-3)
	y = clamp(y, q.y+9, q.y+q.h-3)
	var o path
	o.rect(x-w/2-1.5, y-6.4, w+3, 8.4)
	q.c.draw(o, pen{fill: paper, alpha: 0.85})
	q.c.write(label{x: x, y: y, size: 7, bold: true, anchor: 0.5, s: s})
}

// marks draws places without field and the meter.
func (v *strayView) marks(q *panel) {
	for _, z := range v.zeros() {
		var o path
		o.circle(q.xs.pos(z.At[v.h]), q.ys.pos(z.At[v.v]), 3)
		q.c.draw(o, pen{stroke: purple, fill: paper, width: 1.2})
	}
	x, y := q.xs.pos(v.s.Bench.At[v.h]), q.ys.pos(v.s.Bench.At[v.v])
	var o path
	diamond.mark(&o, x, y, 3.4)
	q.c.draw(o, pen{stroke: ink, fill: orange, width: 0.8})
	e := v.s.Field
	l := math.Hypot(e[v.h], e[v.v])
	if l == 0 {
		return
	}
	// One stroke from the meter, along the field there.
	ux, uy := e[v.h]/l, -e[v.v]/l
	const from, to = 5.0, 20.0
	var a path
	a.move(x+from*ux, y+from*uy)
	a.line(x+to*ux, y+to*uy)
	a.move(x+(to-4)*ux-2.2*uy, y+(to-4)*uy+2.2*ux)
	a.line(x+to*ux, y+to*uy)
	a.line(x+(to-4)*ux+2.2*uy, y+(to-4)*uy-2.2*ux)
	q.c.draw(a, pen{stroke: ink, width: 1.1})
	v.caption(q, x, y+14, number(v.s.Magnitude)+" V/m")
}
