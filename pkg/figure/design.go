package figure

import (
	"math"
	"sort"

	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/si"
)

// Design draws how the uncertainty of a planned measurement follows from changes
// of its design: more readings, more settings, other voltages and spacings. Changes
// that are not possible are drawn open.
func Design(p *plan.Prediction) (*Figure, error) {
	series := map[string]*Series{}
	var order []string
	for _, s := range p.Scenarios {
		if s.Factor == 0.5 && series[s.Change] == nil && !scaled(p, s.Change) {
			continue // an input known twice as well is in the table
		}
		if math.IsNaN(float64(s.Ratio)) {
			continue
		}
		if series[s.Change] == nil {
			series[s.Change] = &Series{Name: words(s.Change), X: []float64{1}, Y: []float64{1}, Hollow: []bool{false}, Line: true, Points: true}
			order = append(order, s.Change)
		}
		q := series[s.Change]
		q.X, q.Y, q.Hollow = append(q.X, s.Factor), append(q.Y, float64(s.Ratio)), append(q.Hollow, s.Refused != "")
	}
	plot := Plot{Name: "design", Title: "Uncertainty of " + words(p.Measurand.Name) + " against the design", From: p.Title,
		Caption: "Standard uncertainty relative to the design as it stands, one change at a time. Open markers: not possible (breakdown, limits of energy or charge).",
		X:       Axis{Name: "factor of the change", Unit: si.MustUnit("1"), Log: true}, Y: Axis{Name: "u / u of the design", Unit: si.MustUnit("1")},
		Levels: []Level{{At: 1}}}
	for _, name := range order {
		q := series[name]
		at := make([]int, len(q.X))
		for i := range at {
			at[i] = i
		}
		sort.Slice(at, func(a, b int) bool { return q.X[at[a]] < q.X[at[b]] })
		sorted := Series{Name: q.Name, Line: true, Points: true}
		for _, i := range at {
			sorted.X, sorted.Y, sorted.Hollow = append(sorted.X, q.X[i]), append(sorted.Y, q.Y[i]), append(sorted.Hollow, q.Hollow[i])
		}
		plot.Series = append(plot.Series, sorted)
	}
	return plot.Draw()
}

// scaled reports whether a change comes in more than one size.
func scaled(p *plan.Prediction, change string) bool {
	n := 0
	for _, s := range p.Scenarios {
		if s.Change == change {
			n++
		}
	}
	return n > 1
}
