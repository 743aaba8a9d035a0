package assess

import (
	"errors"
	"fmt"
	"math"
	"time"

	"example.org/guardring/pkg/gum"
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
	span        float64       // length of the history, s
	column      []int         // of each calibration's adjustment in theta; 0: none
	theta       *mat.VecDense // level − first value, slope × span, adjustments' departures over their u
	covariance  *mat.SymDense // of theta
	stated      [2]float64    // standard uncertainties of level and slope without what is shared, not scaled
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

// LatestCheck compares the last calibration with what the others predict, by the
// stated uncertainties: DriftSettings.Scale does not touch it.
type LatestCheck struct {
	Predicted float64 `json:"predicted"`
	U         float64 `json:"u"`     // standard uncertainty of the difference
	Score     float64 `json:"score"` // (found − predicted)/U
	Signal    Signal  `json:"signal"`
}

// Drift fits a line to a history by least squares in time, with the stated
// uncertainties as weights (JCGM 100 H.3 for the line). Each adjustment moves all
// later values by its true size, of which the stated one is an estimate. At least
// three calibrations on three dates are wanted.
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
		s.Probability = gum.DefaultCoverage
	}
	if !(s.Level > 0 && s.Level < 1) {
		return nil, fmt.Errorf("significance level %v must lie between 0 and 1", s.Level)
	}
	if err := gum.CheckCoverage(s.Probability); err != nil {
		return nil, err
	}
	if err := h.check(); err != nil {
		return nil, err
	}
	h.Calibrations = append([]Calibration(nil), h.Calibrations...)
	l, err := fitLine(h)
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
	l.chart()
	if n > 3 {
		rest := h
		rest.Calibrations = h.Calibrations[:n-1]
		if rest.check() == nil { // still three dates
			before, err := fitLine(rest)
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

// fitLine estimates level, slope and the true size of each uncertain adjustment
// (its stated size is one more datum): the errors of all data are then
// independent but for what is shared, which only the level feels.
func fitLine(h History) (*Line, error) {
	cs := h.Calibrations
	n := len(cs)
	l := &Line{Unit: h.Unit, DOF: n - 2, history: h, column: make([]int, n), span: cs[n-1].Date.Sub(cs[0].Date).Seconds()}
	p := 2
	for j, c := range cs[:n-1] { // the last adjustment is in no value
		if c.UAdjustment > 0 {
			l.column[j], p = p, p+1
		}
	}
	x, y := mat.NewDense(n+p-2, p, nil), mat.NewVecDense(n+p-2, nil)
	moved := 0.0
	for i, c := range cs {
		u := math.Sqrt((c.U - h.Shared) * (c.U + h.Shared))
		for k, v := range l.row(l.tau(c.Date), func(j int) bool { return j < i }, p) {
			x.Set(i, k, v/u)
		}
		y.SetVec(i, (c.Value-moved-cs[0].Value)/u)
		moved += c.Adjustment
		if k := l.column[i]; k > 0 { // departure from the stated size, in units of its uncertainty
			x.Set(n+k-2, k, 1)
		}
	}
	var qr mat.QR
	qr.Factorize(x)
	theta := mat.NewVecDense(p, nil)
	if err := qr.SolveVecTo(theta, false, y); err != nil {
		return nil, fmt.Errorf("level and slope can't be told apart by these dates and uncertainties: %w", err)
	}
	var r, inverse mat.Dense
	qr.RTo(&r)
	if err := inverse.Inverse(r.Slice(0, p, 0, p)); err != nil {
		return nil, fmt.Errorf("level and slope can't be told apart by these dates and uncertainties: %w", err)
	}
	l.theta, l.covariance = theta, mat.NewSymDense(p, nil)
	l.covariance.SymOuterK(1, &inverse) // (XᵀX)⁻¹ = R⁻¹R⁻ᵀ
	var residual mat.VecDense
	residual.MulVec(x, theta)
	residual.SubVec(&residual, y)
	l.ChiSquared = mat.Dot(&residual, &residual)
	l.PValue, l.BirgeRatio = chiTail(l.ChiSquared, l.DOF), math.Sqrt(l.ChiSquared/float64(l.DOF))
	// moving the origin by −cov/var makes level and slope uncorrelated
	c := l.covariance
	centre := -c.At(0, 1) / c.At(1, 1)
	l.Reference = cs[0].Date.Add(time.Duration(centre * l.span * float64(time.Second)))
	l.Level = cs[0].Value + theta.AtVec(0) + centre*theta.AtVec(1)
	l.stated = [2]float64{math.Sqrt(c.At(0, 0) + centre*c.At(0, 1)), math.Sqrt(c.At(1, 1)) / l.span}
	l.ULevel, l.USlope = math.Hypot(l.stated[0], h.Shared), l.stated[1]
	l.Slope = theta.AtVec(1) / l.span
	z := l.Slope / l.USlope
	l.PConstant = chiTail(l.ChiSquared+z*z, n-1) // the fit without slope has a chi-squared larger by z²
	return l, nil
}

// tau is a date in units of the history's length from its first date.
func (l *Line) tau(date time.Time) float64 {
	return date.Sub(l.history.Calibrations[0].Date).Seconds() / l.span
}

// row is the value at tau as a linear form of what was estimated, with those
// adjustments that were made before.
func (l *Line) row(tau float64, before func(j int) bool, p int) []float64 {
	row := make([]float64, p)
	row[0], row[1] = 1, tau
	for j, k := range l.column {
		if k > 0 && before(j) {
			row[k] = l.history.Calibrations[j].UAdjustment
		}
	}
	return row
}

// expect returns the value of the line with the adjustments made before, and its
// variance without what is shared and without scaling.
func (l *Line) expect(tau float64, before func(j int) bool) (value, variance float64) {
	cs := l.history.Calibrations
	h := mat.NewVecDense(l.theta.Len(), l.row(tau, before, l.theta.Len()))
	value, variance = cs[0].Value+mat.Dot(h, l.theta), mat.Inner(h, l.covariance, h)
	for j, c := range cs {
		if before(j) {
			value += c.Adjustment
		}
	}
	if last := len(cs) - 1; before(last) { // not estimated: no value follows it
		variance += cs[last].UAdjustment * cs[last].UAdjustment
	}
	return value, variance
}

// at returns what to expect at a date before any adjustment on that date.
func (l *Line) at(date time.Time) (value, variance float64) {
	return l.expect(l.tau(date), func(j int) bool { return l.history.Calibrations[j].Date.Before(date) })
}

// factor is what the stated uncertainties are multiplied by.
func (l *Line) factor() float64 {
	if l.Scaled {
		return l.BirgeRatio
	}
	return 1
}

// dof returns the degrees of freedom of the line's uncertainties.
func (l *Line) dof() float64 {
	if l.Scaled {
		return float64(l.DOF)
	}
	return math.Inf(1)
}
