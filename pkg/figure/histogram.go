package figure

import (
	"fmt"
	"math"
	"sort"

	"example.org/guardring/pkg/si"
	"gonum.org/v1/gonum/stat/distuv"
)

// Histogram draws the Monte Carlo values of a measurand ("" for the first) with
// their coverage interval, and the law's distribution over them: a scaled and
// shifted t with the effective degrees of freedom (JCGM 100 annex G).
func (d *Data) Histogram(name string) (*Figure, error) {
	m, at, err := d.measurand(name)
	if err != nil {
		return nil, err
	}
	if m.MonteCarlo == nil || at >= len(d.Trials) || len(d.Trials[at]) < 2 {
		return nil, fmt.Errorf("figure: %s has no Monte Carlo trials to draw; reduce without the law alone", m.Name)
	}
	unit, err := si.ParseUnit(m.Unit)
	if err != nil {
		return nil, fmt.Errorf("figure: unit of %s: %w", m.Name, err)
	}
	y := make([]float64, 0, len(d.Trials[at]))
	for _, v := range d.Trials[at] {
		if finite(v) {
			y = append(y, v)
		}
	}
	if len(y) < 2 {
		return nil, fmt.Errorf("figure: %s has no finite Monte Carlo trial", m.Name)
	}
	sort.Float64s(y)
	n := len(y)
	// Ends: all but one in a thousand trials, and the law's own reach.
	lo, hi := y[n/1000], y[n-1-n/1000]
	value, u := float64(m.Value), float64(m.U)
	law := finite(value, u) && u > 0
	if law {
		lo, hi = math.Min(lo, value-3.6*u), math.Max(hi, value+3.6*u)
	}
	for _, v := range m.MonteCarlo.Interval {
		if finite(float64(v)) {
			lo, hi = math.Min(lo, float64(v)), math.Max(hi, float64(v))
		}
	}
	if !(hi > lo) {
		d := math.Max(math.Abs(lo)*1e-9, math.SmallestNonzeroFloat64*1e6)
		lo, hi = lo-d, hi+d
	}
	// Freedman and Diaconis (1981), between 20 and 80 bins over the axis.
	iqr := y[3*n/4] - y[n/4]
	bins := 40
	if iqr > 0 {
		bins = int(clamp((hi-lo)/(2*iqr/math.Cbrt(float64(n))), 20, 80))
	}
	counts := make([]float64, bins)
	beyond := 0
	for _, v := range y {
		k := int(math.Floor((v - lo) / (hi - lo) * float64(bins)))
		if k < 0 || k >= bins {
			beyond++
			continue
		}
		counts[k]++
	}
	// Height in probability per standard uncertainty: a number near 0.4 for a
	// normal distribution, whatever the unit.
	scaleU := u
	if !law {
		scaleU = float64(m.MonteCarlo.U)
		if !(scaleU > 0) {
			scaleU = (hi - lo) / 7
		}
	}
	var sp, hs spanner
	sp.add(lo)
	sp.add(hi)
	hs.add(0)
	norm := float64(n) * (hi - lo) / float64(bins) / scaleU
	for i := range counts {
		counts[i] /= norm
		hs.add(counts[i])
	}
	var lx, ly []float64
	if law {
		density, _ := lawDensity(float64(m.DOF))
		const steps = 200
		for i := 0; i <= steps; i++ {
			v := lo + (hi-lo)*float64(i)/steps
			lx = append(lx, v)
			ly = append(ly, density((v-value)/u))
			hs.add(ly[i])
		}
	}
	title := "Distribution of " + words(m.Name)
	s := newSheet(wide, title, d.Record.Title)
	xs, err := newScale(Axis{Name: words(m.Name), Unit: unit, Low: lo, High: hi}, sp, 7)
	if err != nil {
		return nil, err
	}
	ys, err := newScale(Axis{Name: "probability density × standard uncertainty", Low: 0, High: 1.06 * hs.hi}, hs, 5)
	if err != nil {
		return nil, err
	}
	left := marginX + leftMargin(ys)
	keys := []key{{name: fmt.Sprintf("Monte Carlo, %s trials", count(m.MonteCarlo.Trials)), fill: "#9cc4de"}}
	if law {
		keys = append(keys, key{name: "law of propagation", line: true, look: look{color: vermilion}})
	}
	s.keys(keys, left)
	p := &panel{c: s.c, xs: xs, ys: ys}
	p.at(left, s.y+8+labelSize+6, wide-marginX-left, 170)
	iv := m.MonteCarlo.Interval
	if finite(float64(iv[0]), float64(iv[1])) {
		p.column(float64(iv[0]), float64(iv[1]), shade)
	}
	var bars, rim path
	for i, h := range counts {
		a := xs.pos(lo + (hi-lo)*float64(i)/float64(bins))
		b := xs.pos(lo + (hi-lo)*float64(i+1)/float64(bins))
		t := ys.pos(h)
		bars.rect(a, t, b-a, p.y+p.h-t)
		if i == 0 {
			rim.move(a, t)
		} else {
			rim.line(a, t)
		}
		rim.line(b, t)
	}
	p.c.draw(bars, pen{fill: "#9cc4de"})
	p.c.draw(rim, pen{stroke: blue, width: 0.7})
	p.curve(lx, ly, pen{stroke: vermilion, width: 1.2})
	p.axes(frame{})
	// The two intervals, one under the other, beneath the axis title's left.
	y0 := p.y + p.h + 4 + tickSize + 3 + labelSize - 3
	du := unit.Suited(math.Max(math.Abs(lo), math.Abs(hi)), scaleU)
	bracket := func(a, b float64, color, dash, name string) {
		if !finite(a, b) {
			return
		}
		y0 += 12
		x0, x1 := clamp(xs.pos(a), p.x, p.x+p.w), clamp(xs.pos(b), p.x, p.x+p.w)
		s.c.segment(x0, y0, x1, y0, pen{stroke: color, width: 1.1, dash: dash})
		s.c.segment(x0, y0-3, x0, y0+3, pen{stroke: color, width: 1.1})
		s.c.segment(x1, y0-3, x1, y0+3, pen{stroke: color, width: 1.1})
		l, _ := si.Round(du.FromSI(a), du.DeltaFromSI(scaleU))
		h, _ := si.Round(du.FromSI(b), du.DeltaFromSI(scaleU))
		text := signed(l) + " to " + signed(h)
		if t := du.Unicode(); t != "1" && t != "" {
			text += " " + t
		}
		w := width(name+": "+text, noteSize, false)
		cx := clamp((x0+x1)/2, p.x+w/2, p.x+p.w-w/2)
		y0 += 3 + noteSize
		s.c.write(label{x: cx, y: y0, size: noteSize, anchor: 0.5, color: slate, s: name + ": " + text})
	}
	prob := si.Percent(float64(m.Probability))
	bracket(float64(iv[0]), float64(iv[1]), blue, "", "Monte Carlo, "+prob)
	bracket(float64(m.Interval[0]), float64(m.Interval[1]), vermilion, "", "law, "+prob)
	s.y = y0 + 4
	if beyond > 0 {
		s.note("%s of %s trials lie beyond the axis.", count(beyond), count(n))
	}
	if m.MonteCarlo.Failed > 0 {
		s.note("%s trials did not converge and are left out.", count(m.MonteCarlo.Failed))
	}
	summary := fmt.Sprintf("%s trials of %s", count(m.MonteCarlo.Trials), words(m.Name))
	if m.MonteCarlo.Agrees {
		summary += "; the ends of the law's interval agree with those of the Monte Carlo interval."
	} else {
		summary += "; the ends of the law's interval do not agree with those of the Monte Carlo interval."
	}
	return s.finish("histogram", title, "Monte Carlo values of "+words(m.Name)+" with their "+prob+" coverage interval (grey), and the distribution that the law of propagation assigns.", summary), nil
}

// lawDensity is the density that the law assigns to (y − value)/u: a t with dof
// degrees of freedom, or the normal where these are too many to matter or infinite.
func lawDensity(dof float64) (density func(float64) float64, t bool) {
	if finite(dof) && dof < 1e6 {
		return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: dof}.Prob, true
	}
	return distuv.UnitNormal.Prob, false
}
