package reduce

import (
	"errors"

	"example.org/guardring/pkg/bench"
)

// Summary is what Check found.
type Summary struct {
	Rows      int      // in the fit
	Estimated []string // the scalars that the fit will estimate
	Hazard    Hazard   // what the bench stores, at the values the fit starts from
	Warnings  []error
}

// Check prepares a bench for reduction without fitting it: whether the model
// applies, the rows suffice, and the corrections are within their validity.
func Check(b *bench.Bench) (*Summary, error) {
	c, err := newChain(b)
	if err != nil {
		return nil, err
	}
	s := &Summary{Rows: len(c.record), Warnings: append([]error(nil), b.Warnings...)}
	for _, w := range c.warnings {
		s.Warnings = append(s.Warnings, errors.New(c.words(w)))
	}
	q := append([]float64(nil), c.q...)
	for k, f := range c.free {
		s.Estimated = append(s.Estimated, c.b.Scalars[f].Name)
		q[f] = c.start[k]
	}
	s.Hazard = c.hazard(&carried{q: q})
	return s, nil
}
