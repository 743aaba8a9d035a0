package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/si"
)

// RowError is a reading outside the validity of its kind: Row counts the rows
// handed to Check from 0.
type RowError struct {
	Row int
	Err error
}

// Error gives the cause; who knows the readings adds the place of the row.
func (e *RowError) Error() string { return e.Err.Error() }

// Unwrap returns the cause.
func (e *RowError) Unwrap() error { return e.Err }

// breakdownWarning says when a bench works near or beyond the breakdown of air.
func breakdownWarning(h Hazard) []error {
	if !h.HasBreakdown || !(h.Breakdown > 0) {
		return nil
	}
	switch r := h.Field / h.Breakdown; {
	case r >= 1:
		return []error{fmt.Errorf("the field reaches %.3g kV/mm, above the %.3g kV/mm at which uniform air breaks down", h.Field/1e6, h.Breakdown/1e6)}
	case r >= 0.8:
		return []error{fmt.Errorf("the field reaches %.3g kV/mm, %.0f %% of the breakdown of uniform air (%.3g kV/mm)", h.Field/1e6, 100*r, h.Breakdown/1e6)}
	}
	return nil
}

// dampAir warns of humidity at which such readings are not to be trusted.
func dampAir(h float64) []error {
	if h <= 0.7 {
		return nil
	}
	return []error{fmt.Errorf("environment.humidity: %.0f %% is above 70 %%, where surface leakage spoils such readings (common practice)", 100*h)}
}

// airDensity is the relative density of the air, 1 where it can't be told: the
// cautions stand even where the air is not known.
func airDensity(T, p float64) float64 {
	if d, err := field.RelativeAirDensity(T, p); err == nil {
		return d
	}
	return 1
}

// meet takes the row at voltage v, with field e across an air gap d and
// capacitance c, into the hazard; worst is the largest field over breakdown so
// far, negative before the first.
func (h *Hazard) meet(row int, v, e, d, c, delta float64, worst *float64) {
	v, e = math.Abs(v), math.Abs(e)
	h.Voltage = math.Max(h.Voltage, v)
	h.Energy = math.Max(h.Energy, field.StoredEnergy(c, v))
	h.Charge = math.Max(h.Charge, c*v)
	b, err := field.BreakdownField(d, delta)
	switch {
	case err == nil && e/b > *worst:
		*worst = e / b
		h.Field, h.Breakdown, h.Row, h.HasBreakdown = e, b, row, true
	case err != nil && !h.HasBreakdown && e > h.Field:
		h.Field, h.Row = e, row
	}
}

// meetSphere takes the surface field of a sphere of radius a with charge q into
// the hazard, judged against the breakdown of a uniform gap of one radius. The
// field falls off within that distance, so this is a warning and no more.
func (h *Hazard) meetSphere(row int, q, a, delta float64, worst *float64) {
	h.meet(row, 0, q/(4*math.Pi*si.Eps0*a*a), a, 0, delta, worst)
}
