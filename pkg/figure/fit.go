package figure

import (
	"fmt"
	"math"
	"strconv"
)

// Fit draws the response against the predictor and in the series that show the
// fitted values as lines, with error bars of one standard uncertainty and the fitted
// values joined, over an aligned panel of standardised residuals. Where the predictor
// alone does not tell the fitted values apart, a dash marks each of them.
func (d *Data) Fit() (*Figure, error) {
	r, err := d.rows()
	if err != nil {
		return nil, err
	}
	x, xName := d.order(), "reading, in order of acquisition"
	xUnit := d.unit("")
	chosen := d.choose()
	first, groups := chosen.x, chosen.series
	if first >= 0 {
		x, xName, xUnit = r.Predictors[first], words(r.PredictorNames[first]), d.unit(r.PredictorNames[first])
	}
	var xsp, ysp spanner
	for i := range x {
		xsp.add(x[i])
		ysp.add(r.Response[i])
		if !r.Excluded[i] {
			ysp.add(r.Fitted[i])
			ysp.add(r.Response[i] + r.U[i])
			ysp.add(r.Response[i] - r.U[i])
		}
	}
	xa := Axis{Name: xName, Unit: xUnit, Log: first >= 0 && xsp.lo > 0 && xsp.hi/xsp.lo > longAxis}
	xs, err := newScale(xa, xsp, 9)
	if err != nil {
		return nil, err
	}
	name, unit := d.response()
	ya := Axis{Name: name, Unit: unit}
	var plain spanner
	for _, v := range r.Response {
		plain.add(v)
	}
	if plain.lo > 0 && plain.hi/plain.lo > longAxis {
		ya.Log = true
		ysp = plain
		for i, v := range r.Fitted {
			if !r.Excluded[i] && v > 0 {
				ysp.add(v)
			}
		}
	}
	// The lines through the fitted values, which the axis must hold too.
	type curve struct{ x, y []float64 }
	lines := make([]curve, len(groups))
	if first >= 0 {
		for k, g := range groups {
			some := sparse(g.rows)
			skip := make([]bool, len(some))
			for i, j := range some {
				skip[i] = r.Excluded[j]
			}
			cx, cy, ok := guide(pick(x, some), pick(r.Fitted, some), skip, xs)
			if !ok {
				continue
			}
			lines[k] = curve{cx, cy}
			for _, v := range cy {
				if !ya.Log || v > 0 {
					ysp.add(v)
				}
			}
		}
	}
	ys, err := newScale(ya, ysp, 6)
	if err != nil {
		return nil, err
	}
	ra, rsp := d.residualAxis()
	rs, err := newScale(ra, rsp, 5)
	if err != nil {
		return nil, err
	}

	title := "Fit and residuals"
	s := newSheet(wide, title, d.Record.Title)
	left := marginX + math.Max(leftMargin(ys), leftMargin(rs))
	var keys []key
	for k, g := range groups {
		n := g.name
		if n == "" {
			n = "readings"
		}
		keys = append(keys, key{look: lookOf(k), name: n, point: true, line: lines[k].x != nil})
	}
	dashed := func(k int) bool { return lines[k].x == nil && len(groups[k].rows) <= crowded }
	for k := range groups {
		if dashed(k) {
			keys = append(keys, key{look: look{color: ink}, name: "fitted values", line: true, short: true})
			break
		}
	}
	s.keys(keys, left)
	top := &panel{c: s.c, xs: xs, ys: ys}
	top.at(left, s.y+8+labelSize+6, wide-marginX-left, 210)
	foot := &panel{c: s.c, xs: again(xs), ys: rs}
	foot.at(left, top.y+top.h+14+labelSize+6, top.w, 92)
	foot.ground()
	size := 2.6
	if r.N > crowded {
		size = 1.5
	}
	joined, marked := true, false
	mark, _ := d.reasons()
	var skip []bool
	for k, g := range groups {
		lk := lookOf(k)
		gx, gy, gu, gr := pick(x, g.rows), pick(r.Response, g.rows), pick(r.U, g.rows), pick(r.Standardised, g.rows)
		skip = skip[:0]
		for _, i := range g.rows {
			skip = append(skip, r.Excluded[i])
		}
		if l := lines[k]; l.x != nil {
			top.curve(l.x, l.y, pen{stroke: lk.color, width: 1, dash: dashText(lk.dash)})
		} else {
			joined = false
		}
		keep := thin(gx, gy, xs, ys, skip, thinAbove/len(groups))
		var in, out []int
		for _, i := range keep {
			if skip[i] {
				out = append(out, i)
			} else {
				in = append(in, i)
			}
		}
		s.count(len(keep), len(g.rows))
		if dashed(k) {
			marked = true
			var q path
			for _, i := range in {
				if cx, cy := xs.pos(gx[i]), ys.pos(r.Fitted[g.rows[i]]); finite(cx, cy) && top.inside(cx, cy) {
					q.move(cx-dashHalf, cy)
					q.line(cx+dashHalf, cy)
				}
			}
			top.c.draw(q, pen{stroke: ink, width: 0.9})
		}
		if len(in) <= 1000 {
			top.bars(gx, gy, nil, gu, in, lk.color)
		}
		top.dots(gx, gy, in, lk.marker, size, lk.marker.pen(lk.color, false))
		top.dots(gx, gy, out, lk.marker, size, lk.marker.pen(lk.color, true))
		rk := thin(gx, gr, xs, rs, skip, thinAbove/len(groups))
		in, out = in[:0], out[:0]
		for _, i := range rk {
			if skip[i] {
				out = append(out, i)
			} else {
				in = append(in, i)
			}
		}
		s.count(len(rk), len(g.rows))
		if len(rk) < len(g.rows) {
			foot.extent(gx, gr, rk, pale(lk.color))
			if k == len(groups)-1 {
				foot.over()
			}
		}
		foot.dots(gx, gr, in, lk.marker, size, lk.marker.pen(lk.color, false))
		foot.edgeDots(gx, gr, out, lk.marker, size, lk.color, func(i int) string { return strconv.Itoa(mark[g.rows[i]]) })
	}
	top.axes(frame{tag: "a", noX: true})
	foot.axes(frame{tag: "b"})
	s.y = foot.y + foot.h + below
	if d.hollow() != "" {
		s.note("Open markers: readings left out of the fit; one beyond the axis has its residual beside it.")
		d.foot(s)
	}
	caption := fmt.Sprintf("a, %s against %s with error bars of one standard uncertainty (often smaller than the marker)", name, xName)
	if joined {
		caption += "; the lines join the fitted values"
	}
	if marked {
		caption += "; dashes are the fitted values"
	}
	caption += ". b, standardised residuals; the grey band is ±2."
	return s.finish("fit", title, caption, d.residualSummary(r.N)), nil
}

// dashHalf is half the length of the dash of a fitted value, in points.
const dashHalf = 5.5

// edgeDots draws hollow markers with the numbers of their reasons, those beyond
// the axis at its edge with their values.
func (p *panel) edgeDots(x, y []float64, rows []int, m marker, r float64, color string, reason func(i int) string) {
	for _, i := range rows {
		cx, cy := p.xs.pos(x[i]), p.ys.pos(y[i])
		shape := m
		switch {
		case !finite(cx, cy):
			continue
		case cy < p.y:
			cy, shape = p.y+8, triangle
		case cy > p.y+p.h:
			cy, shape = p.y+p.h-9, inverted
		}
		var q path
		shape.mark(&q, cx, cy, r)
		p.c.draw(q, shape.pen(color, true))
		if len(rows) > 200 {
			continue
		}
		text := reason(i)
		if y[i] < p.ys.lo || y[i] > p.ys.hi {
			text += " (" + number(y[i]) + ")"
		}
		side, anchor := cx+r+2.5, 0.0
		if side+width(text, noteSize, false) > p.x+p.w {
			side, anchor = cx-r-2.5, 1
		}
		p.c.write(label{x: side, y: cy + 0.35*noteSize, size: noteSize, anchor: anchor, color: color, s: text})
	}
}
