package model

import "fmt"

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
