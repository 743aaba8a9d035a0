package figure

import (
	"fmt"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// OfFit takes what the figures need from the fit of a formula.
func OfFit(f *reduce.FormulaFit) *Data {
	if f == nil {
		return nil
	}
	rec := f.Record.Reduction()
	rec.Title = f.Record.Response + " = " + f.Record.Formula
	d := &Data{Record: rec, Rows: &f.Rows, Units: map[string]si.Unit{}}
	for name, u := range f.Units {
		d.Units[name] = u
	}
	return d
}

// bandFactor is the half-width of the band about a fitted curve, in standard
// uncertainties.
const bandFactor = 2

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
	for _, v := range f.Curve.F {
		ys.add(v)
	}
	ya.Log = ys.lo > 0 && ys.hi/ys.lo > longAxis
	c := f.Curve
	lo, hi := make([]float64, len(c.X)), make([]float64, len(c.X))
	band := true
	for i := range c.X {
		lo[i], hi[i] = c.F[i]-bandFactor*c.U[i], c.F[i]+bandFactor*c.U[i]
		band = band && finite(lo[i], hi[i]) && !(ya.Log && lo[i] <= 0)
	}
	// The error bars are those of the response alone where predictors have their own.
	uy := make([]float64, r.N)
	var ux []float64
	if len(f.UX) == 1 && f.UX[0] != nil {
		ux = f.UX[0]
	}
	for i := range uy {
		uy[i] = r.U[i]
		if !finite(uy[i]) {
			uy = nil
			break
		}
	}
	if r.N > 1000 {
		uy, ux = nil, nil
	}
	top := Plot{X: xa, Y: ya, Series: []Series{
		{Name: "readings", X: x, Y: r.Response, UX: ux, UY: uy, Points: true},
		{Name: "fitted formula", X: c.X, Y: c.F, Line: true},
	}, Caption: fmt.Sprintf("%s against %s with error bars of one standard uncertainty (often smaller than the marker), and the fitted formula", words(r.ResponseName), words(r.PredictorNames[0]))}
	if band {
		top.Bands = []Band{{Name: fmt.Sprintf("± %d standard uncertainties of the formula", bandFactor), X: c.X, Low: lo, High: hi}}
		top.Caption += fmt.Sprintf(" with a band of ±%d standard uncertainties from those of its parameters", bandFactor)
	}
	top.Caption += "."
	if ux != nil {
		top.Caption += " Bars along the response hold the part of the predictor's uncertainty."
	}
	span := xs
	flat := []float64{span.lo, span.hi}
	foot := Plot{X: xa, Y: Axis{Name: residualName}, Height: 92,
		Bands:   []Band{{X: flat, Low: []float64{-bandHalf, -bandHalf}, High: []float64{bandHalf, bandHalf}}},
		Series:  []Series{{X: x, Y: r.Standardised, Points: true}},
		Caption: "standardised residuals; the grey band is ±2."}
	g, err := Stack("fit", "Fit and residuals", f.Record.Response+" = "+f.Record.Formula, []Plot{top, foot})
	if err != nil {
		return nil, err
	}
	g.Summary = OfFit(f).residualSummary(r.N)
	return g, nil
}

// AllOfFit draws every figure of a formula's fit.
func AllOfFit(f *reduce.FormulaFit) ([]*Figure, error) {
	d := OfFit(f)
	var out []*Figure
	for _, draw := range []func() (*Figure, error){func() (*Figure, error) { return Curve(f) }, d.Residuals, d.Order, d.Quantiles} {
		g, err := draw()
		if err != nil {
			return nil, err
		}
		out = append(out, g)
	}
	return out, nil
}
