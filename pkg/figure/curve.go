package figure

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// OfFit takes what the figures need from the fit of a formula.
func OfFit(f *reduce.FormulaFit) *Data {
	if f == nil {
		return nil
	}
	rec := f.Record.Reduction()
	rec.Title = f.Record.Title()
	d := &Data{Record: rec, Rows: &f.Rows, Units: map[string]si.Unit{}}
	for name, u := range f.Units {
		d.Units[name] = u
	}
	return d
}

// bandFactor is the half-width of the band about a fitted curve, in standard
// uncertainties.
const bandFactor = 2

// bandFill is the colour of that band.
const bandFill = "#f6d9c4"

// Curve draws the fit of a formula. With one predictor: the readings with error bars
// of one standard uncertainty in both directions, the fitted curve with a band of
// two standard uncertainties of the curve, over an aligned panel of standardised
// residuals. With several or none it is Data.Fit.
func Curve(f *reduce.FormulaFit) (*Figure, error) {
	if f == nil || f.Rows.N == 0 {
		return nil, fmt.Errorf("figure: no fit to draw")
	}
	if f.Curve == nil {
		return OfFit(f).Fit()
	}
	r := &f.Rows
	x := r.Predictors[0]
	unit := func(name string) si.Unit {
		if u, ok := f.Units[name]; ok {
			return u
		}
		return si.One
	}
	xa := Axis{Name: words(r.PredictorNames[0]), Unit: unit(r.PredictorNames[0])}
	ya := Axis{Name: words(r.ResponseName), Unit: unit(r.ResponseName)}
	var xs, ys spanner
	for i := range x {
		xs.add(x[i])
		ys.add(r.Response[i])
		ys.add(r.Fitted[i])
	}
	xa.Log = xs.lo > 0 && xs.hi/xs.lo > longAxis
	// The curve may lead a little beyond the readings, not to a pole between them.
	room := (ys.hi - ys.lo) / 4
	low, high := ys.lo-room, ys.hi+room
	for _, v := range f.Curve.F {
		if v > low && v < high {
			ys.add(v)
		}
	}
	ya.Log = ys.lo > 0 && ys.hi/ys.lo > longAxis
	c := f.Curve
	lo, hi := make([]float64, len(c.X)), make([]float64, len(c.X))
	band := true
	for i := range c.X {
		lo[i], hi[i] = c.F[i]-bandFactor*c.U[i], c.F[i]+bandFactor*c.U[i]
		band = band && finite(lo[i], hi[i]) && !(ya.Log && lo[i] <= 0)
	}
	var ux, uy []float64
	if r.N <= 1000 {
		if len(f.UX) == 1 {
			ux = f.UX[0]
		}
		uy = r.U
		for i := range x {
			for _, v := range []float64{r.Response[i] - uy[i], r.Response[i] + uy[i]} {
				if !ya.Log || v > 0 {
					ys.add(v)
				}
			}
		}
	}
	d := OfFit(f)
	sx, err := newScale(xa, xs, 9)
	if err != nil {
		return nil, err
	}
	sy, err := newScale(ya, ys, 6)
	if err != nil {
		return nil, err
	}
	ra, rsp := d.residualAxis()
	sr, err := newScale(ra, rsp, 5)
	if err != nil {
		return nil, err
	}
	title := "Fit and residuals"
	s := newSheet(wide, title, d.Record.Title)
	left := marginX + math.Max(leftMargin(sy), leftMargin(sr))
	keys := []key{{look: lookOf(0), name: "readings, bars of one standard uncertainty", point: true}, {look: look{color: vermilion}, name: "fitted formula", line: true}}
	if band {
		keys = append(keys, key{name: fmt.Sprintf("±%d standard uncertainties of the formula", bandFactor), fill: bandFill})
	}
	s.keys(keys, left)
	top := &panel{c: s.c, xs: sx, ys: sy}
	top.at(left, s.y+8+labelSize+6, wide-marginX-left, 210)
	foot := &panel{c: s.c, xs: again(sx), ys: sr}
	foot.at(left, top.y+top.h+14+labelSize+6, top.w, 92)
	foot.ground()
	size := 2.6
	if r.N > crowded {
		size = 1.5
	}
	if band {
		top.band(c.X, lo, hi, pen{fill: bandFill})
	}
	keep := thin(x, r.Response, sx, sy, nil, thinAbove)
	s.count(len(keep), r.N)
	if len(keep) < r.N {
		top.extent(x, r.Response, keep, pale(blue))
	}
	top.bars(x, r.Response, ux, uy, keep, blue)
	top.dots(x, r.Response, keep, circle, size, circle.pen(blue, false))
	top.curve(c.X, c.F, pen{stroke: vermilion, width: 1.1})
	rk := thin(x, r.Standardised, sx, sr, nil, thinAbove)
	s.count(len(rk), r.N)
	if len(rk) < r.N {
		foot.extent(x, r.Standardised, rk, pale(blue))
		foot.over()
	}
	foot.dots(x, r.Standardised, rk, circle, size, circle.pen(blue, false))
	top.axes(frame{tag: "a", noX: true})
	foot.axes(frame{tag: "b"})
	s.y = foot.y + foot.h + below
	caption := fmt.Sprintf("a, %s against %s with error bars of one standard uncertainty (often smaller than the marker), and the fitted formula", words(r.ResponseName), words(r.PredictorNames[0]))
	if band {
		caption += fmt.Sprintf(" with a band of ±%d standard uncertainties that come from its parameters", bandFactor)
	}
	caption += "."
	if ux != nil {
		caption += " Bars along the response hold the predictor's part too."
	}
	return s.finish("fit", title, caption+" b, standardised residuals; the grey band is ±2.", d.residualSummary(r.N)), nil
}

// AllOfFit draws every figure of a formula's fit; those of residuals need two that
// are known.
func AllOfFit(f *reduce.FormulaFit) ([]*Figure, error) {
	d := OfFit(f)
	var out []*Figure
	draws := []func() (*Figure, error){func() (*Figure, error) { return Curve(f) }}
	known := 0
	for _, v := range f.Rows.Standardised {
		if finite(v) {
			known++
		}
	}
	if known > 1 {
		draws = append(draws, d.Residuals, d.Order, d.Quantiles)
	}
	for _, draw := range draws {
		g, err := draw()
		if err != nil {
			return nil, err
		}
		out = append(out, g)
	}
	return out, nil
}
