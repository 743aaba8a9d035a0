package figure

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/assess"
	"example.org/guardring/pkg/si"
)

// Agreement draws the results of laboratories with their expanded uncertainties,
// about the weighted mean in the band of its own.
func Agreement(a *assess.Agreement, measurand string) (*Figure, error) {
	m := a.Mean
	unit, err := si.ParseUnit(m.Results[0].Unit)
	if err != nil {
		return nil, fmt.Errorf("figure: %w", err)
	}
	p := Plot{Name: "comparison", Title: "Comparison of " + words(measurand), X: Axis{Name: "laboratory"}, Y: Axis{Name: words(measurand), Unit: unit},
		Caption: "Results with bars of their expanded uncertainties; the line is the weighted mean, the band its expanded uncertainty (k = 2)."}
	s := Series{Name: "results"}
	for i, r := range m.Results {
		p.X.Labels = append(p.X.Labels, r.Name)
		s.X, s.Y = append(s.X, float64(i+1)), append(s.Y, unit.ToSI(r.Value))
		s.UY = append(s.UY, unit.DeltaToSI(r.Expanded()))
	}
	n := float64(len(m.Results))
	mean, u := unit.ToSI(m.Value), unit.DeltaToSI(2*m.U)
	p.Bands = []Band{{Name: "weighted mean", X: []float64{0.5, n + 0.5}, Low: []float64{mean - u, mean - u}, High: []float64{mean + u, mean + u}}}
	p.Levels = []Level{{At: mean}}
	p.Series = []Series{s}
	return p.Draw()
}

// Drift draws the calibrations of an instrument against their dates, with the
// line and its control limits, and what is predicted.
func Drift(l *assess.Line, what string, predictions []*assess.Prediction) (*Figure, error) {
	unit, err := si.ParseUnit(l.Unit)
	if err != nil {
		return nil, fmt.Errorf("figure: %w", err)
	}
	if len(l.Points) == 0 {
		return nil, fmt.Errorf("figure: the history has no calibration")
	}
	// Years since the first calibration; the axis has no calendar.
	first := l.Points[0].Date
	p := Plot{Name: "history", Title: "History of " + what, X: Axis{Name: "years since " + first.Format("2006-01-02")}, Y: Axis{Name: what, Unit: unit},
		Caption: "Values as found with bars of two standard uncertainties; the line with its warning limits (band) and action limits (dashed)."}
	found := Series{Name: "as found"}
	line := Series{Line: true, Look: 1}
	low, high := Series{Name: "action limits", Line: true, Look: 2}, Series{Line: true, Look: 2}
	band := Band{Name: "warning limits"}
	for _, c := range l.Points {
		x := c.Date.Sub(first).Seconds() / assess.Year
		found.X, found.Y, found.UY = append(found.X, x), append(found.Y, unit.ToSI(c.Value)), append(found.UY, unit.DeltaToSI(2*c.U))
		line.X, line.Y = append(line.X, x), append(line.Y, unit.ToSI(c.Centre))
		band.X = append(band.X, x)
		band.Low, band.High = append(band.Low, unit.ToSI(c.Warn[0])), append(band.High, unit.ToSI(c.Warn[1]))
		low.X, low.Y = append(low.X, x), append(low.Y, unit.ToSI(c.Act[0]))
		high.X, high.Y = append(high.X, x), append(high.Y, unit.ToSI(c.Act[1]))
	}
	p.Bands = []Band{band}
	p.Series = []Series{line, found, low, high}
	if len(predictions) > 0 {
		next := Series{Name: "predicted", Look: 3}
		for _, q := range predictions {
			next.X, next.Y = append(next.X, q.Date.Sub(first).Seconds()/assess.Year), append(next.Y, unit.ToSI(q.Value))
			next.UY = append(next.UY, unit.DeltaToSI(math.Abs(q.Next[1]-q.Next[0])/2))
			next.Hollow = append(next.Hollow, true)
		}
		p.Series = append(p.Series, next)
	}
	return p.Draw()
}
