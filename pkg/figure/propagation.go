package figure

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// ofBudget takes what the figure of shares needs from a propagation.
func ofBudget(p *reduce.Propagation) *Data {
	rec := &reduce.Record{Title: p.Record.Title}
	for _, o := range p.Record.Outputs {
		rec.Measurands = append(rec.Measurands, o.Measurand())
	}
	return &Data{Record: rec, verbatim: true}
}

// output finds one by name; "" is the first.
func output(p *reduce.Propagation, name string) (*reduce.BudgetResult, int, error) {
	if p == nil || len(p.Record.Outputs) == 0 {
		return nil, 0, fmt.Errorf("figure: no propagation to draw")
	}
	i, err := oneNamed(name, len(p.Record.Outputs), func(i int) string { return p.Record.Outputs[i].Name }, "output", "budget")
	if err != nil {
		return nil, 0, err
	}
	return &p.Record.Outputs[i], i, nil
}

// BudgetShares draws the share of the variance of an output ("" for the first) that
// each input contributes, largest first within the parts of the bench.
func BudgetShares(p *reduce.Propagation, name string) (*Figure, error) {
	o, _, err := output(p, name)
	if err != nil {
		return nil, err
	}
	if o.Law == nil {
		return nil, fmt.Errorf("figure: %s has no budget: the law could not be applied", o.Name)
	}
	return ofBudget(p).Shares(o.Name)
}

// mostBars is the number of bars of a density.
const mostBars = 90

// Density draws the Monte Carlo values of an output ("" for the first) with both
// coverage intervals, and the distribution that the law assigns over them: a normal,
// or a scaled and shifted t with the effective degrees of freedom (JCGM 100 annex G).
func Density(p *reduce.Propagation, name string) (*Figure, error) {
	o, at, err := output(p, name)
	if err != nil {
		return nil, err
	}
	if o.MonteCarlo == nil {
		return nil, fmt.Errorf("figure: %s has no Monte Carlo trials to draw; propagate without the law alone", o.Name)
	}
	if p.Result == nil {
		return nil, fmt.Errorf("figure: this record holds no histogram of %s; draw from the propagation itself", o.Name)
	}
	unit, err := si.ParseUnit(o.StatedUnit)
	if err != nil {
		return nil, fmt.Errorf("figure: unit of %s: %w", o.Name, err)
	}
	mc := p.Result.Outputs[at].MonteCarlo
	h := coarser(mc.Histogram, mostBars)
	lo, hi := h.Low, h.Low+h.Width*float64(len(h.Counts))
	value, u := math.NaN(), math.NaN()
	dof := math.NaN()
	if l := o.Law; l != nil {
		value, u, dof = float64(l.Value), float64(l.U), float64(l.DOF)
	}
	law := finite(value, u) && u > 0
	scaleU := u
	if law {
		lo, hi = math.Min(lo, value-3.3*u), math.Max(hi, value+3.3*u)
	} else if scaleU = mc.U; !finite(scaleU) || !(scaleU > 0) {
		scaleU = (mc.Interval[1] - mc.Interval[0]) / 4
	}
	if !(hi > lo) || !(scaleU > 0) {
		return nil, fmt.Errorf("figure: %w of %s", errAlike, o.Name)
	}
	// Height in probability per standard uncertainty: near 0.4 for a normal
	// distribution, whatever the unit.
	norm := float64(mc.Trials-mc.Undefined) * h.Width / scaleU
	heights := make([]float64, len(h.Counts))
	var xs, ys spanner
	xs.add(lo)
	xs.add(hi)
	ys.add(0)
	for i, n := range h.Counts {
		heights[i] = float64(n) / norm
		ys.add(heights[i])
	}
	lawName := "law: normal"
	var lx, ly []float64
	if law {
		density, t := lawDensity(dof)
		if t {
			lawName = "law: t with ν = " + shortNumber(dof)
		}
		const steps = 240
		for i := 0; i <= steps; i++ {
			v := lo + (hi-lo)*float64(i)/steps
			lx = append(lx, v)
			ly = append(ly, density((v-value)/u))
			ys.add(ly[i])
		}
	}
	title := "Distribution of " + OneLine(o.Name)
	s := newSheet(wide, title, p.Record.Title)
	sx, err := newScale(Axis{Name: o.Name, Unit: unit, Low: lo, High: hi}, xs, 7)
	if err != nil {
		return nil, err
	}
	sy, err := newScale(Axis{Name: "probability density × standard uncertainty", Low: 0, High: 1.06 * ys.hi}, ys, 5)
	if err != nil {
		return nil, err
	}
	left := marginX + leftMargin(sy)
	keys := []key{{name: fmt.Sprintf("Monte Carlo, %s trials", count(mc.Trials)), fill: monteFill}}
	if law {
		keys = append(keys, key{name: lawName, line: true, look: look{color: vermilion}})
	}
	s.keys(keys, left)
	q := &panel{c: s.c, xs: sx, ys: sy}
	q.at(left, s.y+8+labelSize+6, wide-marginX-left, 170)
	q.column(mc.Interval[0], mc.Interval[1], shade)
	var bars, rim path
	for i, v := range heights {
		a := sx.pos(h.Low + h.Width*float64(i))
		b := sx.pos(h.Low + h.Width*float64(i+1))
		t := sy.pos(v)
		bars.rect(a, t, b-a, q.y+q.h-t)
		if i == 0 {
			rim.move(a, q.y+q.h)
			rim.line(a, t)
		} else {
			rim.line(a, t)
		}
		rim.line(b, t)
		if i == len(heights)-1 {
			rim.line(b, q.y+q.h)
		}
	}
	q.c.draw(bars, pen{fill: monteFill})
	q.c.draw(rim, pen{stroke: blue, width: 0.7})
	q.curve(lx, ly, pen{stroke: vermilion, width: 1.2})
	q.axes(frame{})
	y := q.y + q.h + 4 + tickSize + 3 + labelSize - 3
	du := unit.Suited(math.Max(math.Abs(lo), math.Abs(hi)), scaleU)
	bracket := func(ends [2]float64, color, dash, what string) {
		if !finite(ends[0], ends[1]) {
			return
		}
		y += 12
		x0, x1 := clamp(sx.pos(ends[0]), q.x, q.x+q.w), clamp(sx.pos(ends[1]), q.x, q.x+q.w)
		s.c.segment(x0, y, x1, y, pen{stroke: color, width: 1.1, dash: dash})
		for _, x := range []float64{x0, x1} {
			s.c.segment(x, y-3, x, y+3, pen{stroke: color, width: 1.1})
		}
		l, _ := si.Round(du.FromSI(ends[0]), du.DeltaFromSI(scaleU))
		r, _ := si.Round(du.FromSI(ends[1]), du.DeltaFromSI(scaleU))
		text := what + ": " + signed(l) + " to " + signed(r)
		if t := du.Unicode(); t != "1" && t != "" {
			text += " " + t
		}
		w := width(text, noteSize, false)
		y += 3 + noteSize
		s.c.write(label{x: clamp((x0+x1)/2, q.x+w/2, q.x+q.w-w/2), y: y, size: noteSize, anchor: 0.5, color: slate, s: text})
	}
	prob := si.Percent(mc.Probability)
	bracket(mc.Interval, blue, "", "Monte Carlo, symmetric in probability, "+prob)
	bracket(mc.Shortest, blue, "4,2", "Monte Carlo, shortest, "+prob)
	if law {
		bracket([2]float64{float64(o.Law.Interval[0]), float64(o.Law.Interval[1])}, vermilion, "", "law, "+si.Percent(float64(o.Law.Probability)))
	}
	s.y = y + 4
	if n := h.Below + h.Above; n > 0 {
		s.note("%s of %s trials lie beyond the bars.", count(int(n)), count(mc.Trials))
	}
	if mc.Undefined > 0 {
		s.note("%s trials had no defined value and are left out.", count(mc.Undefined))
	}
	verdict := "there is no law to compare with"
	if o.MonteCarlo.Digits > 0 {
		verdict = "the ends of the law's interval agree with those of the symmetric interval (JCGM 101 clause 8)"
		if !o.MonteCarlo.Agrees {
			verdict = "the ends of the law's interval do not agree with those of the symmetric interval (JCGM 101 clause 8)"
		}
	}
	return s.finish(fileName("density-"+o.Name), title,
		"Monte Carlo values of "+OneLine(o.Name)+" with their "+prob+" coverage intervals (grey: the one symmetric in probability), and the distribution that the law of propagation assigns.",
		fmt.Sprintf("%s trials of %s; %s.", count(mc.Trials), OneLine(o.Name), verdict)), nil
}

// errAlike says that there is nothing to see.
var errAlike = errors.New("there is one value in all trials")

// monteFill is the colour of Monte Carlo bars.
const monteFill = "#9cc4de"

// shortNumber writes degrees of freedom.
func shortNumber(x float64) string {
	if x == math.Trunc(x) {
		return plainNumber(x, 0)
	}
	return plainNumber(math.Floor(x*10)/10, 1)
}

// coarser joins bins until there are at most most.
func coarser(h gum.Histogram, most int) gum.Histogram {
	group := (len(h.Counts) + most - 1) / most
	if group < 2 {
		return h
	}
	out := gum.Histogram{Low: h.Low, Width: h.Width * float64(group), Below: h.Below, Above: h.Above, Counts: make([]int64, (len(h.Counts)+group-1)/group)}
	for i, n := range h.Counts {
		out.Counts[i/group] += n
	}
	return out
}

// mostJoint is the number of outputs that a scatter matrix shows.
const mostJoint = 6

// mostPoints is the number of trials drawn in each of its panels.
const mostPoints = 2000

// Joint draws the outputs of a propagation against each other, one panel for each
// pair, with the joint coverage regions of JCGM 102:2011 7.7: the ellipse and the
// rectangle that hold all outputs together with the coverage probability, seen along
// the other outputs.
func Joint(p *reduce.Propagation) (*Figure, error) {
	if p == nil || p.Result == nil || len(p.Result.Points) == 0 {
		return nil, fmt.Errorf("figure: there are no joint trials to draw; propagate without the law alone")
	}
	r := p.Result
	all := len(r.Outputs)
	if all < 2 {
		return nil, fmt.Errorf("figure: one output alone; a joint distribution needs two")
	}
	n := min(all, mostJoint)
	units := make([]si.Unit, n)
	for k := range units {
		u, err := si.ParseUnit(p.Record.Outputs[k].StatedUnit)
		if err != nil {
			return nil, fmt.Errorf("figure: unit of %s: %w", r.Outputs[k].Name, err)
		}
		units[k] = u
	}
	scales := make([]*scale, n)
	left := 0.0
	for k := range scales {
		var s spanner
		ends := r.Outputs[k].MonteCarlo.Interval
		half := (ends[1] - ends[0]) / 2
		s.add(ends[0] - 0.9*half)
		s.add(ends[1] + 0.9*half)
		for _, g := range r.Regions {
			reach := g.K * math.Sqrt(g.Shape[k][k])
			s.add(g.Centre[k] - 1.06*reach)
			s.add(g.Centre[k] + 1.06*reach)
		}
		if !(s.hi > s.lo) {
			return nil, fmt.Errorf("figure: %w of %s", errAlike, r.Outputs[k].Name)
		}
		var err error
		if scales[k], err = newScale(Axis{Name: r.Outputs[k].Name, Unit: units[k], Low: s.lo, High: s.hi}, s, 3); err != nil {
			return nil, err
		}
		if k > 0 {
			left = math.Max(left, leftMargin(scales[k]))
		}
	}
	left += marginX
	title := "Joint distribution of the outputs"
	s := newSheet(wide, title, p.Record.Title)
	keys := []key{{name: "trials", look: look{color: "#8fb8d4", marker: circle}, point: true}}
	styles := map[string]pen{"ellipse": {stroke: vermilion, width: 1.1}, "rectangle": {stroke: ink, width: 0.9, dash: "5,2"}}
	for _, g := range r.Regions {
		k := styles[g.Kind]
		var dash []float64
		if k.dash != "" {
			dash = dashes(k.dash)
		}
		keys = append(keys, key{name: g.Kind + ", " + si.Percent(g.Probability) + " of the trials", line: true, look: look{color: k.stroke, dash: dash}})
	}
	s.keys(keys, left)
	const gap = 14.0
	m := float64(n - 1)
	w := math.Min((wide-marginX-left-gap*(m-1))/m, 300)
	h := math.Min(0.8*w, 220)
	y := s.y + 8 + labelSize + 6
	drawn := 0
	for i := 1; i < n; i++ {
		for j := range i {
			q := &panel{c: s.c, xs: again(scales[j]), ys: again(scales[i])}
			q.at(left+float64(j)*(w+gap), y, w, h)
			keep := thinCloud(r.Points[j], r.Points[i], mostPoints)
			drawn = max(drawn, len(keep))
			keep = slices.DeleteFunc(keep, func(t int) bool { return !q.inside(q.xs.pos(r.Points[j][t]), q.ys.pos(r.Points[i][t])) })
			q.dots(r.Points[j], r.Points[i], keep, circle, 0.9, pen{fill: "#8fb8d4"})
			for _, g := range r.Regions {
				q.region(&g, j, i, styles[g.Kind])
			}
			q.axes(frame{noX: i < n-1, noY: j > 0})
			if rho := r.Correlation[i][j]; finite(rho) {
				text := "r = " + signed(fmt.Sprintf("%+.3f", rho))
				drop := -3.0
				if j == 0 && width(q.ys.title, labelSize, false) > w-width(text, noteSize, false)-8 {
					drop = 7
				}
				s.c.write(label{x: q.x + w, y: y + drop, size: noteSize, anchor: 1, color: slate, s: text})
			}
		}
		y += h + 8 + labelSize + 8
	}
	s.y = y - (8 + labelSize + 8) + below
	s.note("%s of %s trials are drawn.", count(drawn), count(int(r.Trials)))
	if n < all {
		s.note("The first %d of %d outputs are drawn; the regions hold all of them together.", n, all)
	}
	if len(r.Regions) == 0 {
		s.note("No joint region: the trials have no covariance, or one that can't be inverted.")
	}
	return s.finish("joint", title, "Outputs against each other, trial by trial, with the joint coverage regions of JCGM 102 7.7: the ellipse and the rectangle that hold all outputs together.",
		fmt.Sprintf("%d outputs; correlations stand over the panels.", all)), nil
}

// region draws a joint region as seen in the plane of two outputs.
func (p *panel) region(g *gum.Region, j, i int, k pen) {
	uj, ui := math.Sqrt(g.Shape[j][j]), math.Sqrt(g.Shape[i][i])
	var x, y []float64
	if g.Kind == "rectangle" {
		for _, c := range [5][2]float64{{-1, -1}, {1, -1}, {1, 1}, {-1, 1}, {-1, -1}} {
			x, y = append(x, g.Centre[j]+c[0]*g.K*uj), append(y, g.Centre[i]+c[1]*g.K*ui)
		}
		p.curve(x, y, k)
		return
	}
	r := g.Shape[i][j] / (ui * uj)
	const steps = 120
	for t := 0; t <= steps; t++ {
		sin, cos := math.Sincos(2 * math.Pi * float64(t) / steps)
		x = append(x, g.Centre[j]+g.K*uj*cos)
		y = append(y, g.Centre[i]+g.K*ui*(r*cos+math.Sqrt(math.Max(0, 1-r*r))*sin))
	}
	p.curve(x, y, k)
}

// AllOfBudget draws every figure of a propagation: density and shares of each output,
// and their joint distribution when there are several. An output without uncertainty
// has no density.
func AllOfBudget(p *reduce.Propagation) ([]*Figure, error) {
	var out []*Figure
	add := func(f *Figure, err error) error {
		if errors.Is(err, errAlike) {
			return nil
		}
		if err == nil {
			out = append(out, f)
		}
		return err
	}
	for i := range p.Record.Outputs {
		o := &p.Record.Outputs[i]
		if p.Result != nil && o.MonteCarlo != nil {
			if err := add(Density(p, o.Name)); err != nil {
				return nil, err
			}
		}
		if o.Law != nil && len(o.Law.Budget) > 0 && o.Law.U > 0 {
			f, err := named(BudgetShares(p, o.Name))("shares-" + o.Name)
			if err := add(f, err); err != nil {
				return nil, err
			}
		}
	}
	if p.Result != nil && len(p.Record.Outputs) > 1 && len(p.Result.Points) > 0 {
		if err := add(Joint(p)); err != nil {
			return nil, err
		}
	}
	return out, nil
}
