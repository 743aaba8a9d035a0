package assess

import (
	"fmt"
	"math"
	"time"

	"example.org/guardring/pkg/reduce"
)

// chart fills the control chart about the line.
func (l *Line) chart() {
	for i, c := range l.history.Calibrations {
		centre, variance := l.expect(l.tau(c.Date), func(j int) bool { return j < i })
		p := ChartPoint{Name: c.label(i), Date: c.Date, Value: c.Value, U: c.U, Centre: centre,
			Warn: [2]float64{centre, centre}, Act: [2]float64{centre, centre},
			Standardised: reduce.Number(math.NaN()), Signal: Acceptable}
		// least squares: var(residual) = σ²(1 − leverage)
		own := (c.U - l.history.Shared) * (c.U + l.history.Shared)
		if inner := own - variance; inner > 1e-10*own {
			u := l.factor() * math.Sqrt(inner)
			e := (c.Value - centre) / u
			p.Standardised, p.Signal = reduce.Number(e), signal(e)
			p.Warn, p.Act = [2]float64{centre - 2*u, centre + 2*u}, [2]float64{centre - 3*u, centre + 3*u}
		}
		l.Points = append(l.Points, p)
	}
}

// Prediction is what a line expects at a date.
type Prediction struct {
	Date        time.Time  `json:"date"`
	Value       float64    `json:"value"` // before any adjustment on that date
	U           float64    `json:"u"`     // standard uncertainty of the instrument's value there
	K           float64    `json:"k"`     // coverage factor of both intervals
	Probability float64    `json:"probability"`
	Interval    [2]float64 `json:"interval"` // holds the instrument's value
	NextU       float64    `json:"next_u"`   // standard uncertainty of the calibration foreseen
	Next        [2]float64 `json:"next"`     // prediction interval: holds what that calibration will find
	Warnings    []error    `json:"-"`
}

// Predict returns what the line expects at a date, from the line alone and for a
// calibration of standard uncertainty u there (0: as the last one; it includes
// what all calibrations share, which cancels against the history). It warns
// where the date lies outside the history by more than the history's length,
// and refuses one outside by more than ten times that.
func (l *Line) Predict(date time.Time, u float64) (*Prediction, error) {
	cs := l.history.Calibrations
	first, last := cs[0], cs[len(cs)-1]
	if u == 0 {
		u = last.U
	}
	if !(u > l.history.Shared) || math.IsInf(u, 0) {
		return nil, fmt.Errorf("standard uncertainty %v of the calibration foreseen must be larger than %v, the part that all calibrations share", u, l.history.Shared)
	}
	span := last.Date.Sub(first.Date)
	beyond := max(date.Sub(last.Date), first.Date.Sub(date))
	if beyond.Seconds() > 10*span.Seconds() {
		return nil, fmt.Errorf("%s lies more than ten times the length of the history outside it: a line through %s to %s says nothing about that date",
			date.Format(time.DateOnly), first.Date.Format(time.DateOnly), last.Date.Format(time.DateOnly))
	}
	value, inner := l.at(date)
	f := l.factor()
	inner *= f * f
	p := &Prediction{Date: date, Value: value, U: math.Hypot(math.Sqrt(inner), l.history.Shared), Probability: l.probability, NextU: u}
	p.K = -quantile((1-l.probability)/2, l.dof())
	// a scaled line says that calibrations scatter by that factor: the next does too
	next := math.Sqrt(inner + f*f*(u-l.history.Shared)*(u+l.history.Shared))
	p.Interval = [2]float64{value - p.K*p.U, value + p.K*p.U}
	p.Next = [2]float64{value - p.K*next, value + p.K*next}
	if beyond > span {
		p.Warnings = append(p.Warnings, fmt.Errorf("%s lies further outside the history than the history is long", date.Format(time.DateOnly)))
	}
	return p, nil
}

// Reaches returns the first date after the last calibration at which the
// interval for the instrument's value touches a limit, searched over as long a
// time as the history covers; found is false when it stays inside so long. It is
// meant for the laboratory's own planning: a certificate carries no
// recommendation of the interval unless the client agreed (ISO/IEC 17025:2017
// 7.8.4.3).
func (l *Line) Reaches(limits Limits) (date time.Time, found bool, err error) {
	lower, upper, err := limits.ends(l.Unit)
	if err != nil {
		return date, false, err
	}
	cs := l.history.Calibrations
	last := cs[len(cs)-1].Date
	span := last.Sub(cs[0].Date)
	outside := func(after time.Duration) bool {
		p, e := l.Predict(last.Add(after), 0)
		if e != nil {
			err = e
			return true
		}
		return p.Interval[0] < lower || p.Interval[1] > upper
	}
	const steps = 512 // the interval's ends bend once at most; then bisect to a second
	for k := range steps {
		b := time.Duration(float64(span) * float64(k+1) / steps)
		if !outside(b) {
			continue
		}
		a := time.Duration(float64(span) * float64(k) / steps)
		if k == 0 {
			a = time.Second
			if outside(a) {
				return last.Add(a), true, err
			}
		}
		for b-a > time.Second {
			if m := a + (b-a)/2; outside(m) {
				b = m
			} else {
				a = m
			}
		}
		return last.Add(b).Truncate(time.Second), true, err
	}
	return time.Time{}, false, err
}
