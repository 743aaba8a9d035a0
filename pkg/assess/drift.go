package assess

import (
	"errors"
	"fmt"
	"math"
	"time"

	"example.org/guardring/pkg/reduce"
	"gonum.org/v1/gonum/mat"
)

// Year is the Julian year in seconds, by which drift is usually stated.
const Year = 365.25 * 86400

// Calibration is one calibration of an instrument as found. Value and U are in
// the unit of the History.
type Calibration struct {
	Name  string // certificate
	Date  time.Time
	Value float64 // as found
	U     float64 // standard uncertainty, > 0, with what all calibrations share
	// Adjustment is as left minus as found, 0 when not adjusted, and UAdjustment
	// its standard uncertainty (what both runs share cancels in it).
	Adjustment, UAdjustment float64
}

// History is the calibrations of one instrument in the order of their dates.
type History struct {
	Unit         string // "1" when dimensionless
	Calibrations []Calibration
	// Shared is the standard uncertainty common to all calibrations, that of one
	// standard used each time. It moves all values together: it belongs on the
	// level of the line and not on its slope or the scatter.
	Shared float64
}

// DriftSettings adjusts Drift. The zero value is the default.
type DriftSettings struct {
	Level       float64 // significance level of the tests; 0: 0.05
	Probability float64 // of prediction intervals; 0: 0.9545
	// Scale multiplies the uncertainties by the Birge ratio where that is above
	// one; intervals then use Student's t. Never done unasked.
	Scale bool
}

// Line is a straight line through a history.
type Line struct {
	Unit      string    `json:"unit"`
	Reference time.Time `json:"reference"`       // date at which level and slope are uncorrelated
	Level     float64   `json:"level"`           // value at Reference, adjustments taken out
	ULevel    float64   `json:"u_level"`         // its standard uncertainty, with what is shared
	Slope     float64   `json:"slope"`           // Unit per second; times Year: per year
	USlope    float64   `json:"u_slope"`         // Unit per second
	Z         float64   `json:"slope_over_u"`    // Slope/USlope
	PSlope    float64   `json:"p_slope"`         // probability of a larger |Slope/USlope| without drift
	PScatter  float64   `json:"p_slope_scatter"` // same from the scatter alone: t test, n − 2 degrees of freedom
	// Significant: PSlope is below the level of the tests.
	Significant bool         `json:"significant"`
	ChiSquared  float64      `json:"chi_squared"`
	DOF         int          `json:"dof"`
	PValue      float64      `json:"p_value"` // of the line
	BirgeRatio  float64      `json:"birge_ratio"`
	Scaled      bool         `json:"scaled"`           // uncertainties multiplied by the Birge ratio
	PConstant   float64      `json:"p_value_constant"` // of no drift at all: chi-squared about the weighted mean
	Points      []ChartPoint `json:"points"`
	Latest      *LatestCheck `json:"latest,omitempty"` // nil with fewer than four calibrations
	Warnings    []error      `json:"-"`

	history     History
	probability float64
	b           [2][]float64 // level and slope as linear forms of the values
	inner       []float64    // variances of the values without what is shared
	stated      [2]float64   // standard uncertainties of level and slope without what is shared, not scaled
}

// ChartPoint is one calibration in a control chart about the line. Limits are
// for the value as found.
type ChartPoint struct {
	Name         string        `json:"name"`
	Date         time.Time     `json:"date"`
	Value        float64       `json:"value"`
	U            float64       `json:"u"`
	Centre       float64       `json:"centre"`       // the line, with the adjustments made before
	Warn         [2]float64    `json:"warning"`      // centre ± 2 standard uncertainties of the residual
	Act          [2]float64    `json:"action"`       // centre ± 3
	Standardised reduce.Number `json:"standardised"` // residual over its standard uncertainty; null when the line must pass through the point
	Signal       Signal        `json:"signal"`
}

// LatestCheck compares the last calibration with what the others predict.
type LatestCheck struct {
	Predicted float64 `json:"predicted"`
	U         float64 `json:"u"`     // standard uncertainty of the difference
	Score     float64 `json:"score"` // (found − predicted)/U
	Signal    Signal  `json:"signal"`
}

// Drift fits a line to a history by generalised least squares in time, with the
// stated uncertainties as weights (JCGM 100 H.3 for the line; the formulas with
// a covariance are those of WeightedMean, with a second column). Values are
// compared with the adjustments taken out, whose uncertainty correlates all
// later values. At least three calibrations on three dates are wanted.
//
// Two tests of drift are given: PSlope by the stated uncertainties, PScatter by
// the scatter about the line; a warning says when they disagree. Control limits
// are at 2 and 3 standard uncertainties of the residual (as for ISO 13528
// scores; common practice, no source).
func Drift(h History, s DriftSettings) (*Line, error) {
	if s.Level == 0 {
		s.Level = defaultLevel
	}
	if s.Probability == 0 {
		s.Probability = 0.9545
	}
	if !(s.Level > 0 && s.Level < 1) || !(s.Probability > 0 && s.Probability < 1) {
		return nil, fmt.Errorf("significance level %v and probability %v must lie between 0 and 1", s.Level, s.Probability)
	}
	if err := h.check(); err != nil {
		return nil, err
	}
	h.Calibrations = append([]Calibration(nil), h.Calibrations...)
	l, v, err := fitLine(h)
	if err != nil {
		return nil, err
	}
	l.probability = s.Probability
	n := len(h.Calibrations)
	if s.Scale && l.BirgeRatio > 1 {
		l.Scaled = true
		l.USlope = l.stated[1] * l.BirgeRatio
		l.ULevel = math.Hypot(l.stated[0]*l.BirgeRatio, h.Shared)
	}
	l.Z = l.Slope / l.USlope
	l.PSlope = twoSided(l.Z, l.dof())
	l.PScatter = twoSided(l.Slope/(l.stated[1]*l.BirgeRatio), float64(l.DOF))
	if l.Slope == 0 {
		l.PScatter = 1
	}
	l.Significant = l.PSlope < s.Level
	if l.PValue < s.Level && !l.Scaled {
		l.Warnings = append(l.Warnings, fmt.Errorf("the calibrations scatter about the line more than their uncertainties allow (chi-squared %.4g for %d degrees of freedom, probability %.2g): instability or steps between them are not in the prediction", l.ChiSquared, l.DOF, l.PValue))
	}
	if (l.PScatter < s.Level) != l.Significant {
		l.Warnings = append(l.Warnings, fmt.Errorf("drift is %s by the stated uncertainties (p = %.2g) but not so by the scatter (p = %.2g): too few calibrations, or uncertainties that do not describe them", map[bool]string{true: "significant", false: "not significant"}[l.Significant], l.PSlope, l.PScatter))
	}
	l.chart(v)
	if n > 3 {
		rest := h
		rest.Calibrations = h.Calibrations[:n-1]
		if rest.check() == nil { // still three dates
			before, _, err := fitLine(rest)
			if err != nil {
				return nil, err
			}
			last := h.Calibrations[n-1]
			value, inner := before.at(last.Date)
			c := &LatestCheck{Predicted: value, U: math.Sqrt(inner + last.U*last.U - h.Shared*h.Shared)}
			c.Score = (last.Value - value) / c.U
			c.Signal = signal(c.Score)
			l.Latest = c
			if c.Signal != Acceptable {
				l.Warnings = append(l.Warnings, fmt.Errorf("the last calibration, %s, lies %.2g standard uncertainties from what the earlier ones predict (%s)", last.label(n-1), c.Score, c.Signal))
			}
		}
	}
	return l, nil
}

func (c Calibration) label(i int) string {
	if c.Name != "" {
		return c.Name
	}
	return fmt.Sprintf("calibration %d of %s", i+1, c.Date.Format(time.DateOnly))
}

func (h History) check() error {
	if h.Unit == "" {
		return errors.New("history: no unit; write \"1\" for a dimensionless quantity")
	}
	if !(h.Shared >= 0) || math.IsInf(h.Shared, 0) {
		return fmt.Errorf("history: shared standard uncertainty %v must not be negative", h.Shared)
	}
	if n := len(h.Calibrations); n < 3 {
		return fmt.Errorf("drift needs at least three calibrations, with two any line fits; got %d", n)
	}
	dates := 0
	for i, c := range h.Calibrations {
		name := c.label(i)
		for _, x := range []float64{c.Value, c.U, c.Adjustment, c.UAdjustment} {
			if math.IsNaN(x) || math.IsInf(x, 0) {
				return fmt.Errorf("%s: value %v, standard uncertainty %v and adjustment %v ± %v must be finite numbers", name, c.Value, c.U, c.Adjustment, c.UAdjustment)
			}
		}
		switch {
		case c.Date.IsZero():
			return fmt.Errorf("calibration %d has no date", i+1)
		case c.U <= h.Shared:
			return fmt.Errorf("%s: standard uncertainty %v must be larger than %v, the part that all calibrations share", name, c.U, h.Shared)
		case c.UAdjustment < 0:
			return fmt.Errorf("%s: standard uncertainty of the adjustment %v must not be negative", name, c.UAdjustment)
		case i > 0 && c.Date.Before(h.Calibrations[i-1].Date):
			return fmt.Errorf("%s is dated %s, before the calibration that precedes it (%s): put them in order", name, c.Date.Format(time.DateOnly), h.Calibrations[i-1].Date.Format(time.DateOnly))
		case i == 0 || c.Date.After(h.Calibrations[i-1].Date):
			dates++
		}
	}
	if dates < 3 {
		return fmt.Errorf("drift needs calibrations on at least three dates; got %d", dates)
	}
	return nil
}

// fitLine returns level, slope and chi-squared, with the covariance of the
// values after the adjustments are taken out (without what is shared).
func fitLine(h History) (*Line, *mat.SymDense, error) {
	cs := h.Calibrations
	n := len(cs)
	v := mat.NewSymDense(n, nil)
	rs := make([]Result, n)
	t, y := make([]float64, n), make([]float64, n)
	l := &Line{Unit: h.Unit, DOF: n - 2, history: h, inner: make([]float64, n)}
	var moved, variance float64 // sums over the adjustments made before
	for i, c := range cs {
		l.inner[i] = (c.U - h.Shared) * (c.U + h.Shared)
		t[i] = c.Date.Sub(cs[0].Date).Seconds()
		y[i] = c.Value - moved
		for k := i; k < n; k++ {
			v.SetSym(i, k, variance)
		}
		v.SetSym(i, i, variance+l.inner[i])
		rs[i] = Result{Name: c.label(i), Value: y[i], U: math.Sqrt(variance + l.inner[i]), Unit: h.Unit}
		moved += c.Adjustment
		variance += c.UAdjustment * c.UAdjustment
	}
	_, chol, err := covariance(rs, v)
	if err != nil {
		return nil, nil, err
	}
	solve := func(x []float64) ([]float64, error) {
		b := mat.NewVecDense(n, nil)
		for i := range n {
			b.SetVec(i, x[i]/rs[i].U)
		}
		if err := chol.SolveVecTo(b, b); err != nil {
			return nil, err
		}
		out := make([]float64, n)
		for i := range n {
			out[i] = b.AtVec(i) / rs[i].U
		}
		return out, nil
	}
	one := make([]float64, n)
	for i := range one {
		one[i] = 1
	}
	w, err := solve(one)
	if err != nil {
		return nil, nil, err
	}
	s0, centre := sum(w), dot(w, t)/sum(w)
	for i := range t {
		t[i] -= centre
	}
	wt, err := solve(t)
	if err != nil {
		return nil, nil, err
	}
	s2 := dot(wt, t)
	// about the weighted mean date the normal matrix is diagonal
	y0 := y[0]
	for i := range y {
		y[i] -= y0
	}
	level := dot(w, y) / s0
	l.Level, l.Slope = y0+level, dot(wt, y)/s2
	l.stated = [2]float64{1 / math.Sqrt(s0), 1 / math.Sqrt(s2)}
	l.ULevel, l.USlope = math.Hypot(l.stated[0], h.Shared), l.stated[1]
	l.Reference = cs[0].Date.Add(time.Duration(centre * float64(time.Second)))
	for i := range n {
		w[i] /= s0
		wt[i] /= s2
	}
	l.b = [2][]float64{w, wt}
	chi := func(slope float64) (float64, error) {
		e := make([]float64, n)
		for i := range e {
			e[i] = y[i] - level - slope*t[i]
		}
		we, err := solve(e)
		if err != nil {
			return 0, err
		}
		return math.Max(0, dot(e, we)), nil
	}
	if l.ChiSquared, err = chi(l.Slope); err != nil {
		return nil, nil, err
	}
	constant, err := chi(0)
	if err != nil {
		return nil, nil, err
	}
	l.PValue, l.BirgeRatio = chiTail(l.ChiSquared, l.DOF), math.Sqrt(l.ChiSquared/float64(l.DOF))
	l.PConstant = chiTail(constant, n-1)
	return l, v, nil
}

func sum(a []float64) (s float64) {
	for _, x := range a {
		s += x
	}
	return s
}

func dot(a, b []float64) (s float64) {
	for i := range a {
		s += a[i] * b[i]
	}
	return s
}

// dof returns the degrees of freedom of the line's uncertainties.
func (l *Line) dof() float64 {
	if l.Scaled {
		return float64(l.DOF)
	}
	return math.Inf(1)
}

// at returns the value expected before any adjustment on that date, and its
// variance without what is shared and without scaling.
func (l *Line) at(date time.Time) (value, variance float64) {
	cs := l.history.Calibrations
	tau := date.Sub(l.Reference).Seconds()
	value = l.Level + l.Slope*tau
	g := make([]float64, len(cs)) // the line's value as a linear form of the values
	for i := range cs {
		g[i] = l.b[0][i] + tau*l.b[1][i]
		variance += g[i] * g[i] * l.inner[i]
	}
	// An adjustment j enters values i > j with −1, and the prediction with +1
	// when it was made before that date.
	later := 0.0
	for j := len(cs) - 1; j >= 0; j-- {
		c := -later
		if cs[j].Date.Before(date) {
			value += cs[j].Adjustment
			c++
		}
		variance += c * c * cs[j].UAdjustment * cs[j].UAdjustment
		later += g[j]
	}
	return value, variance
}
