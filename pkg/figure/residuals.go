package figure

import (
	"fmt"
	"math"
	"sort"

	"example.org/guardring/pkg/si"
	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

const residualName = "standardised residual"

// bandHalf is the half-width of the band behind standardised residuals: about
// one in twenty lies outside when the stated uncertainties are right.
const bandHalf = 2.0

// residualAxis is the axis that every panel of residuals shares.
func (d *Data) residualAxis() (Axis, spanner) {
	var s spanner
	for _, v := range d.Rows.Standardised {
		s.add(v)
	}
	// An excluded reading far off would flatten all others: it is drawn at the
	// edge with its value beside it.
	var used spanner
	for i, v := range d.Rows.Standardised {
		if !d.Rows.Excluded[i] {
			used.add(v)
		}
	}
	if used.n > 0 {
		reach := math.Max(3, math.Max(math.Abs(used.lo), math.Abs(used.hi)))
		s.lo, s.hi = math.Max(s.lo, -1.3*reach), math.Min(s.hi, 1.3*reach)
	}
	s.add(-2.5)
	s.add(2.5)
	return Axis{Name: residualName}, s
}

// ground draws what lies behind residuals: the ±2 band and the zero line.
func (p *panel) ground() {
	p.stripe(-bandHalf, bandHalf, shade)
	p.level(0, zeroPen)
}

// over draws the zero line and the ends of the band again where thinned points
// have filled the panel.
func (p *panel) over() {
	p.level(0, zeroPen)
	for _, v := range []float64{-bandHalf, bandHalf} {
		p.level(v, pen{stroke: slate, width: 0.5, dash: "2,2"})
	}
}

// residualDots draws standardised residuals at x, those left out hollow with
// the number of their reason; it returns how many were drawn.
func (d *Data) residualDots(p *panel, x []float64, r float64, lk look) int {
	rows := d.Rows
	var used, out []int
	keep := thin(x, rows.Standardised, p.xs, p.ys, rows.Excluded, thinAbove)
	if len(x) > thinAbove {
		p.extent(x, rows.Standardised, keep, pale(lk.color))
		p.over()
		r = math.Min(r, 0.9)
	}
	for _, i := range keep {
		if rows.Excluded[i] {
			out = append(out, i)
		} else {
			used = append(used, i)
		}
	}
	p.dots(x, rows.Standardised, used, lk.marker, r, lk.marker.pen(lk.color, false))
	mark, _ := d.reasons()
	if len(out) > 200 {
		p.dots(x, rows.Standardised, out, lk.marker, r, lk.marker.pen(vermilion, true))
		return len(used) + len(out)
	}
	for _, i := range out {
		cx, cy := p.xs.pos(x[i]), p.ys.pos(rows.Standardised[i])
		text := fmt.Sprint(mark[i])
		if cy < p.y || cy > p.y+p.h { // beyond the axis: an arrow at the edge and the value
			m := triangle
			edge := p.y + 8.0
			if cy > p.y {
				m, edge = inverted, p.y+p.h-9
			}
			cy = edge
			var q path
			m.mark(&q, cx, cy, r)
			p.c.draw(q, m.pen(vermilion, true))
			text += " (" + number(rows.Standardised[i]) + ")"
		} else {
			var q path
			lk.marker.mark(&q, cx, cy, r)
			p.c.draw(q, lk.marker.pen(vermilion, true))
		}
		side, anchor := cx+r+2.5, 0.0
		if side+width(text, noteSize, false) > p.x+p.w {
			side, anchor = cx-r-2.5, 1
		}
		p.c.write(label{x: side, y: cy + 0.35*noteSize, size: noteSize, anchor: anchor, color: vermilion, s: text})
	}
	return len(used) + len(out)
}

// order gives the abscissa of the acquisition order: the number of the data
// record.
func (d *Data) order() []float64 {
	x := make([]float64, d.Rows.N)
	for i := range x {
		x[i] = float64(d.number(i))
	}
	return x
}

// settings draws, over the panel of the acquisition order, where one setting
// ends and the next begins.
func (d *Data) settings(p *panel, x []float64) {
	if d.Groups == nil {
		return
	}
	changes := 0
	for i := 1; i < len(d.Groups); i++ {
		if d.Groups[i] != d.Groups[i-1] {
			changes++
		}
	}
	if changes == 0 || changes > 60 {
		return
	}
	var q path
	for i := 1; i < len(d.Groups); i++ {
		if d.Groups[i] != d.Groups[i-1] {
			v := p.xs.pos((x[i] + x[i-1]) / 2)
			q.move(v, p.y)
			q.line(v, p.y+p.h)
		}
	}
	p.c.draw(q, pen{stroke: "#c8c8c8", width: 0.5, dash: "1,2"})
}

// Order draws the standardised residuals in the order in which the readings
// were taken, which is where drift and disturbances show.
func (d *Data) Order() (*Figure, error) {
	r, err := d.rows()
	if err != nil {
		return nil, err
	}
	title := "Residuals in the order of acquisition"
	s := newSheet(wide, title, d.Record.Title)
	p, err := d.orderPanel(s, 150, "")
	if err != nil {
		return nil, err
	}
	s.y = p.y + p.h + below
	d.foot(s)
	return s.finish("order", title, "Standardised residuals in the order of acquisition; the grey band is ±2."+d.hollow(),
		d.residualSummary(r.N)), nil
}

// hollow is the sentence that explains marked readings, where there are any.
func (d *Data) hollow() string {
	for _, x := range d.Rows.Excluded {
		if x {
			return " Open markers are readings left out of the fit, numbered by reason."
		}
	}
	return ""
}

// foot lists the reasons under a figure.
func (d *Data) foot(s *sheet) {
	_, lines := d.reasons()
	for i, l := range lines {
		if i == 8 {
			s.note("… and %d further reasons, see the record.", len(lines)-i)
			break
		}
		s.note("%s", l)
	}
}

func (d *Data) residualSummary(n int) string {
	outside, used := 0, 0
	worst, at := 0.0, -1
	for i, v := range d.Rows.Standardised {
		if d.Rows.Excluded[i] || !finite(v) {
			continue
		}
		used++
		if math.Abs(v) > bandHalf {
			outside++
		}
		if math.Abs(v) > math.Abs(worst) {
			worst, at = v, i
		}
	}
	s := fmt.Sprintf("%d readings, %d in the fit, %d of them outside ±2", n, used, outside)
	if at >= 0 {
		s += fmt.Sprintf("; the largest standardised residual is %s, reading %d", number(worst), d.number(at))
	}
	return s + "."
}

// orderPanel draws the panel of Order at the sheet's height.
func (d *Data) orderPanel(s *sheet, height float64, tag string) (*panel, error) {
	x := d.order()
	var sx spanner
	for _, v := range x {
		sx.add(v)
	}
	xs, err := newScale(Axis{Name: "reading, in order of acquisition", Low: sx.lo - 0.5 - 0.01*(sx.hi-sx.lo), High: sx.hi + 0.5 + 0.01*(sx.hi-sx.lo)}, sx, 10)
	if err != nil {
		return nil, err
	}
	wholeTicks(xs)
	ra, rs := d.residualAxis()
	ys, err := newScale(ra, rs, 5)
	if err != nil {
		return nil, err
	}
	left := marginX + leftMargin(ys)
	p := &panel{c: s.c, xs: xs, ys: ys}
	p.at(left, s.y+8+labelSize+6, wide-marginX-left, height)
	p.ground()
	d.settings(p, x)
	size := 2.6
	if d.Rows.N > crowded {
		size = 1.4
	} else {
		// A thread through the readings in use shows runs and drift.
		var tx, ty []float64
		for i := range x {
			if !d.Rows.Excluded[i] {
				tx, ty = append(tx, x[i]), append(ty, d.Rows.Standardised[i])
			}
		}
		p.curve(tx, ty, pen{stroke: "#b9c7d3", width: 0.6})
	}
	drawn := d.residualDots(p, x, size, looks[0])
	s.count(drawn, d.Rows.N)
	p.axes(frame{tag: tag})
	return p, nil
}

// wholeTicks takes the marks between whole numbers off a scale of counts.
func wholeTicks(s *scale) {
	out := s.ticks[:0]
	for _, t := range s.ticks {
		if t.at == math.Trunc(t.at) {
			out = append(out, t)
		}
	}
	s.ticks = out
}

// Residuals draws a sheet on which one scale of standardised residuals runs
// through four panels, so that a reading can be followed across: over it the
// order of acquisition, below side by side the same residuals against the
// fitted value, against the pull that each reading has on the fit (leverage),
// and against what a normal distribution would give.
func (d *Data) Residuals() (*Figure, error) {
	r, err := d.rows()
	if err != nil {
		return nil, err
	}
	title := "Residuals of the fit"
	s := newSheet(wide, title, d.Record.Title)
	top, err := d.orderPanel(s, 128, "a")
	if err != nil {
		return nil, err
	}
	const gap = 24.0
	y := top.y + top.h + below + 8 + labelSize + 4
	const height = 128
	w := (top.w - 2*gap) / 3
	size := 2.3
	if r.N > crowded {
		size = 1.3
	}

	// b: against the fitted value, or the first predictor where that is one for all, as
	// of an equation.
	name, unit := d.response()
	across, fa := r.Fitted, Axis{Name: "fitted " + name, Unit: unit}
	var fs spanner
	for _, v := range across {
		fs.add(v)
	}
	if fs.lo == fs.hi && len(r.Predictors) > 0 {
		fs, across = spanner{}, r.Predictors[0]
		fa = Axis{Name: words(r.PredictorNames[0]), Unit: d.unit(r.PredictorNames[0])}
		for _, v := range across {
			fs.add(v)
		}
	}
	fa.Log = fs.lo > 0 && fs.hi/fs.lo > longAxis
	fx, err := newScale(fa, fs, 4)
	if err != nil {
		return nil, err
	}
	b := &panel{c: s.c, xs: fx, ys: again(top.ys)}
	b.at(top.x, y, w, height)
	b.ground()
	s.count(d.residualDots(b, across, size, looks[0]), r.N)
	b.axes(frame{tag: "b"})

	// c: against leverage.
	var ls spanner
	mean, used := 0.0, 0
	for i, v := range r.Leverage {
		if !r.Excluded[i] && finite(v) {
			ls.add(v)
			mean += v
			used++
		}
	}
	c := &panel{c: s.c}
	if ls.n > 0 {
		mean /= float64(used)
		ls.add(2 * mean)
		lx, err := newScale(Axis{Name: "leverage", Zero: true}, ls, 4)
		if err != nil {
			return nil, err
		}
		c.xs, c.ys = lx, again(top.ys)
		c.at(top.x+w+gap, y, w, height)
		c.ground()
		c.upright(2*mean, pen{stroke: vermilion, width: 0.8, dash: "4,2"})
		c.c.write(label{x: c.xs.pos(2*mean) - 3, y: c.y + 7, size: noteSize, anchor: 1, color: slate, s: "twice the mean"})
		lev := make([]float64, r.N)
		for i := range lev {
			lev[i] = r.Leverage[i]
			if r.Excluded[i] {
				lev[i] = math.NaN()
			}
		}
		s.count(d.residualDots(c, lev, size, looks[0]), used)
		c.axes(frame{tag: "c", noY: true})
	}

	// d: quantiles; only readings in the fit.
	q := &panel{c: s.c, ys: again(top.ys)}
	if err := d.quantilePanel(s, q, top.x+2*(w+gap), y, w, height, "d", true); err != nil {
		return nil, err
	}
	s.y = y + height + below
	d.foot(s)
	return s.finish("residuals", title,
		"Standardised residuals on one scale: a, in the order of acquisition (dotted lines: a new setting); b, against the fitted value; "+
			"c, against leverage; d, ordered, against the quantiles of a normal distribution with the range that holds 95 % of the points one by one. "+
			"The grey band is ±2."+d.hollow(), d.residualSummary(r.N)), nil
}

// again copies a scale for another panel.
func again(s *scale) *scale {
	c := *s
	c.ticks = append([]tick(nil), s.ticks...)
	return &c
}

// quantilePanel draws the ordered standardised residuals against normal
// quantiles. shared says that the panel takes its y axis from a neighbour.
func (d *Data) quantilePanel(s *sheet, p *panel, x, y, w, h float64, tag string, shared bool) error {
	var v []float64
	for i, z := range d.Rows.Standardised {
		if !d.Rows.Excluded[i] && finite(z) {
			v = append(v, z)
		}
	}
	sort.Float64s(v)
	n := len(v)
	var span spanner
	q := make([]float64, n)
	norm := distuv.UnitNormal
	for i := range q {
		// Median of the i-th order statistic, by Benard's approximation to the
		// median of Beta(i, n+1−i).
		q[i] = norm.Quantile((float64(i) + 0.7) / (float64(n) + 0.4))
		span.add(q[i])
	}
	if n == 0 {
		return fmt.Errorf("figure: no standardised residual is known, so their quantiles can't be drawn")
	}
	reach := math.Max(2.2, math.Max(-span.lo, span.hi))
	xs, err := newScale(Axis{Name: "normal quantile", Low: -1.08 * reach, High: 1.08 * reach}, span, 5)
	if err != nil {
		return err
	}
	p.xs = xs
	p.at(x, y, w, h)
	// Pointwise range: the i-th order statistic of n uniforms is Beta(i, n+1−i).
	const steps = 60
	var bx, lo, hi []float64
	at := make([]int, 0, steps+1)
	for k := 0; k <= min(steps, n-1); k++ {
		i := k
		if n-1 > steps {
			// Even steps in the quantile, so that the tails are smooth.
			z := q[0] + (q[n-1]-q[0])*float64(k)/steps
			i = sort.SearchFloat64s(q, z-1e-12)
		}
		if len(at) == 0 || i > at[len(at)-1] {
			at = append(at, min(i, n-1))
		}
	}
	for _, i := range at {
		a, b := float64(i+1), float64(n-i)
		bx = append(bx, q[i])
		lo = append(lo, norm.Quantile(mathext.InvRegIncBeta(a, b, 0.025)))
		hi = append(hi, norm.Quantile(mathext.InvRegIncBeta(a, b, 0.975)))
	}
	p.band(bx, lo, hi, pen{fill: shade})
	ends := []float64{xs.lo, xs.hi}
	p.curve(ends, ends, zeroPen)
	size := 2.3
	if n > crowded {
		size = 1.3
	}
	keep := thin(q, v, p.xs, p.ys, nil, thinAbove)
	p.dots(q, v, keep, circle, size, circle.pen(blue, false))
	s.count(len(keep), n)
	p.axes(frame{tag: tag, noY: shared})
	return nil
}

// Quantiles draws the ordered standardised residuals against the quantiles of
// a normal distribution, with the range that holds each point with 95 %
// probability.
func (d *Data) Quantiles() (*Figure, error) {
	if _, err := d.rows(); err != nil {
		return nil, err
	}
	title := "Normal quantiles of the residuals"
	s := newSheet(300, title, d.Record.Title)
	var span spanner
	for i, v := range d.Rows.Standardised {
		if !d.Rows.Excluded[i] {
			span.add(v)
		}
	}
	span.add(-2.5)
	span.add(2.5)
	ys, err := newScale(Axis{Name: residualName, Unit: si.One}, span, 6)
	if err != nil {
		return nil, err
	}
	left := marginX + leftMargin(ys)
	p := &panel{c: s.c, ys: ys}
	y := s.y + 8 + labelSize + 6
	if err := d.quantilePanel(s, p, left, y, 300-marginX-left, 230, "", false); err != nil {
		return nil, err
	}
	s.y = y + 230 + below
	return s.finish("quantiles", title, "Ordered standardised residuals against the quantiles of a normal distribution; the grey band holds each point with 95 % probability.",
		d.residualSummary(d.Rows.N)), nil
}
