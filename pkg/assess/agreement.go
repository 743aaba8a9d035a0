package assess

import (
	"context"
	"errors"
	"fmt"

	"example.org/guardring/pkg/reduce"
)

// AgreementSettings adjusts Compare. The zero value is the default.
type AgreementSettings struct {
	Measurand string   // which of the records' measurands; "": the first
	Shared    []string // common inputs or sources; nil: found in the budgets (SharedCovariance)
	// Independent ignores all common inputs.
	Independent bool
	Subset      SubsetSettings
}

// Agreement is the comparison of several laboratories' records of one item.
type Agreement struct {
	Shared  *Shared  `json:"shared"`
	Mean    *Mean    `json:"mean"`
	Degrees *Degrees `json:"degrees"` // with Mean; the bilateral ones hold E_n of each pair
	// Subset and its degrees stand where the results are not consistent and some
	// of them are; Robust where there are at least three results.
	Subset        *Subset  `json:"subset,omitempty"`
	SubsetDegrees *Degrees `json:"subset_degrees,omitempty"`
	Robust        *Robust  `json:"robust,omitempty"`
	// Agrees: the results are consistent, and |E_n| ≤ 1 for each of them against
	// the mean and for each pair.
	Agrees   bool    `json:"agrees"`
	Warnings []error `json:"-"` // those of the parts included
}

// Compare assesses whether the records of several laboratories agree: common
// inputs, weighted mean with its consistency, degrees of equivalence, and as
// second opinions the largest consistent subset and the robust mean.
func Compare(ctx context.Context, records []*reduce.Record, s AgreementSettings) (*Agreement, error) {
	names := s.Shared
	if s.Independent {
		if len(names) > 0 {
			return nil, errors.New("results can't be independent and have named inputs in common")
		}
		names = []string{}
	}
	shared, err := SharedCovarianceOf(records, s.Measurand, names)
	if err != nil {
		return nil, err
	}
	a := &Agreement{Shared: shared}
	if a.Mean, err = WeightedMean(shared.Results, shared.Covariance); err != nil {
		return nil, err
	}
	a.Degrees = a.Mean.Degrees()
	a.Warnings = append(append(a.Warnings, shared.Warnings...), a.Mean.Warnings...)
	if !a.Mean.Consistent {
		switch a.Subset, err = LargestConsistentSubset(ctx, shared.Results, shared.Covariance, s.Subset); {
		case errors.Is(err, errNoSubset):
			a.Warnings = append(a.Warnings, err)
		case err != nil:
			return nil, err
		default:
			a.SubsetDegrees = a.Subset.Mean.Degrees()
			a.Warnings = append(append(a.Warnings, a.Subset.Warnings...), a.Subset.Mean.Warnings...)
		}
	}
	if n := len(shared.Results); n >= 3 {
		x := make([]float64, n)
		for i, r := range shared.Results {
			x[i] = r.Value
		}
		if a.Robust, err = AlgorithmA(x, RobustSettings{}); err != nil { // ties: no reason to give up the rest
			a.Warnings = append(a.Warnings, fmt.Errorf("no robust mean: %w", err))
		} else {
			a.Warnings = append(a.Warnings, a.Robust.Warnings...)
		}
	}
	a.Agrees = a.Mean.Consistent
	for i, d := range a.Degrees.Unilateral {
		a.Agrees = a.Agrees && d.En <= 1 && d.En >= -1
		for _, b := range a.Degrees.Bilateral[i] {
			a.Agrees = a.Agrees && b.En <= 1 && b.En >= -1
		}
	}
	return a, nil
}
