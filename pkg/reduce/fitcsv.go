package reduce

import (
	"context"
	"errors"
	"io"

	"example.org/guardring/pkg/bench"
)

// FitSettings say how to fit a formula to the columns of a table. Formula,
// Response and Start must be given; the rest is optional.
//
// A header NAME/UNIT is the variable NAME; its values are converted to SI. The
// parameters are the names of the formula that are no columns. Starts, bounds,
// priors are SI. Where a column in use has no unit, dimensions are not checked and
// numbers are taken as they stand.
type FitSettings struct {
	Formula  string // Go expression of columns and parameters
	Response string // column that the formula predicts

	Start  map[string]float64    // where the search begins, for every parameter
	Fixed  []string              // parameters held at their start
	Bounds map[string][2]float64 // smallest and largest admitted value; infinite: none
	Priors map[string]Prior      // knowledge from outside the readings

	// Noise is the standard uncertainty of a reading of the response: a column, or
	// a value such as "0.3 fF" (a number without unit is SI); "" is unknown: the
	// covariance is then scaled by the residuals, and the result says so.
	Noise string
	// PredictorNoise is the same for predictors, by column name. With it, the fit
	// is one with errors in variables, unless EffectiveVariance is set.
	PredictorNoise    map[string]string
	EffectiveVariance bool   // u² = u_y² + Σ(∂f/∂x · u_x)², re-evaluated at the fit
	Weights           string // column of weights, proportional to 1/u², when only their ratios are known

	Profile     bool    // intervals from the profile of chi-squared
	Robust      bool    // a second opinion with robust weights
	Bootstrap   int     // replicates of a bootstrap of the residuals; 0: none
	Probability float64 // coverage probability of intervals; 0: 0.9545
	Seed        uint64  // of the bootstrap; 0 is a seed

	CSV     bench.CSVSettings // how FitCSV reads; Numbers and Words are not looked at
	Command string            // what the record calls the run; "": "fit"
}

// FormulaFit is a fit of a formula to a table: its record, and the rows behind the
// figures.
type FormulaFit struct {
	Record FitRecord
	Rows   Rows
	Units  map[string]string // of the columns, as their headers state them
}

// FitRecord is the fit of a formula as it is written.
type FitRecord struct {
	Format    int       `json:"format"`
	Guardring string    `json:"guardring"`
	Run       RunRecord `json:"run"`
	Inputs    []Input   `json:"inputs"`
	Formula   string    `json:"formula"`
	Response  string    `json:"response"`
	Fit       Fit       `json:"fit"`
	Diagnosis Diagnosis `json:"diagnosis"`
	Warnings  []string  `json:"warnings"`
}

// FitTable fits a formula to a table whose columns have been read as numbers.
func FitTable(ctx context.Context, t *bench.Table, s FitSettings) (*FormulaFit, error) {
	return nil, errors.New("not yet")
}

// FitCSV reads the columns that s names from a CSV file and fits. name stands for
// the file in messages and in the record.
func FitCSV(ctx context.Context, r io.Reader, name string, s FitSettings) (*FormulaFit, error) {
	return nil, errors.New("not yet")
}
