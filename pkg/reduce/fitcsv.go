package reduce

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/si"
)

// FitSettings say how to fit a formula to the columns of a table. Formula,
// Response and a start for every parameter must be given; the rest is optional.
//
// A formula with an equals sign is an equation that holds between the columns it
// names, such as pow(x-a, 2) + pow(y-b, 2) = pow(r, 2). It predicts no column, so
// Response stays empty, and PredictorNoise must be stated for each; all are adjusted.
//
// A header NAME/UNIT is the variable NAME; its values are converted to SI. The
// parameters are the names in the formula that are no columns. Starts, bounds and
// priors are SI. Where a column in use has no unit, dimensions are not checked and
// its numbers are taken as they stand.
type FitSettings struct {
	Formula  string // Go expression of columns and parameters, see package formula, or left = right
	Response string // column that the formula predicts; "" for an equation

	Start  map[string]float64    // where the search begins; a parameter with a prior may do without
	Fixed  []string              // parameters held at their start
	Bounds map[string][2]float64 // smallest and largest admitted value; infinite: none
	Priors map[string]Prior      // knowledge from outside the readings

	// Noise is the standard uncertainty of one reading of the response: a column, or
	// a value such as "0.3 fF" (a number without unit is SI). "" is unknown: the
	// covariance is then scaled by the residuals, and the result says so.
	Noise string
	// PredictorNoise is the same for predictors, by column name. With it the fit is
	// one with errors in variables, unless EffectiveVariance is set.
	PredictorNoise map[string]string
	// EffectiveVariance weighs with u² = u_y² + Σ(∂f/∂x · u_x)², re-evaluated at the
	// fit (GUM 5.1.2 applied to y − f; Orear, Am. J. Phys. 50 (1982) 912).
	EffectiveVariance bool
	// Weights is a column proportional to 1/u², for when only ratios are known: the
	// covariance is scaled by the residuals.
	Weights string

	Profile     bool    // intervals from the profile of chi-squared
	Robust      bool    // a second opinion with robust weights
	Bootstrap   int     // replicates of a bootstrap of the residuals; 0: none
	Probability float64 // coverage probability of intervals; 0: 0.9545
	Seed        uint64  // of the bootstrap; 0 is a seed

	Rows    bool              // put the rows into the record
	CSV     bench.CSVSettings // how FitCSV reads; Numbers and Words are not looked at
	Command string            // what the record calls the run; "": "fit"
}

// FormulaFit is the fit of a formula to a table: its record, and the numbers
// behind the figures.
type FormulaFit struct {
	Record FitRecord
	Rows   Rows // Record indexes the table's data records
	// UX are the standard uncertainties of the predictors, beside Rows.Predictors,
	// SI; nil for one that is exact.
	UX [][]float64
	// Units are those of the columns in use, by name; columns without a unit are not
	// in it.
	Units map[string]si.Unit
	// Curve is the fitted formula between the readings; nil unless there is one
	// predictor.
	Curve *Curve
	// Lines of the file by data record.
	Line func(record int) int
}

// Curve is a fitted formula over its only predictor, SI.
type Curve struct {
	X, F []float64
	U    []float64 // standard uncertainty of F from that of the parameters; NaN when unknown
}

// FitRecord is the fit of a formula as it is written. Numbers are SI, or stand as
// in the table where columns have no units.
type FitRecord struct {
	Format    int       `json:"format"`
	Guardring string    `json:"guardring"`
	Run       RunRecord `json:"run"`
	Inputs    []Input   `json:"inputs"`
	Formula   string    `json:"formula"`
	Response  string    `json:"response"` // "": the formula is an equation
	// Noise says in words where the uncertainty of the readings comes from.
	Noise string `json:"noise"`
	Fit   Fit    `json:"fit"`
	// Limits are what held parameters: those fixed, and those with bounds.
	Limits []Limit `json:"limits,omitempty"`
	// Missing are the parameters whose uncertainty is unknown, each with the reason.
	Missing   []Missing   `json:"missing,omitempty"`
	AICc      Number      `json:"aicc"` // Akaike's criterion, corrected; null where it is not defined
	LackOfFit *LackOfFit  `json:"lack_of_fit,omitempty"`
	Intervals []Interval  `json:"intervals,omitempty"`
	Robust    *Robust     `json:"robust,omitempty"`
	Diagnosis Diagnosis   `json:"diagnosis"`
	Warnings  []string    `json:"warnings"`
	Rows      []RecordRow `json:"rows,omitempty"`
}

// Title is what was fitted: response = formula, or the equation.
func (r *FitRecord) Title() string {
	if r.Response == "" {
		return r.Formula
	}
	return r.Response + " = " + r.Formula
}

// Limit is what held a parameter.
type Limit struct {
	Parameter string `json:"parameter"`
	Unit      string `json:"unit"`
	Fixed     bool   `json:"fixed"`
	Value     Number `json:"value"` // estimate, or the value it was fixed at
	Lower     Number `json:"lower"` // null: none
	Upper     Number `json:"upper"` // null: none
	Reached   bool   `json:"reached"`
}

// Missing is a parameter whose uncertainty is unknown.
type Missing struct {
	Parameter string `json:"parameter"`
	Reason    string `json:"reason"`
}

// LackOfFit compares the scatter of the means of replicates about the formula with
// that of the replicates about their means.
type LackOfFit struct {
	F        Number `json:"f"`
	ModelDOF int    `json:"model_dof"`
	PureDOF  int    `json:"pure_dof"`
	PValue   Number `json:"p_value"`
}

// Interval is an interval of a parameter that does not rest on linearity.
type Interval struct {
	Parameter   string    `json:"parameter"`
	Method      string    `json:"method"` // "profile" or "bootstrap"
	Probability Number    `json:"probability"`
	Interval    [2]Number `json:"interval"` // null: open on that side
	U           Number    `json:"u"`        // standard deviation of the bootstrap; null for a profile
}

// Robust is a second opinion with weights that fall with the size of the residuals.
type Robust struct {
	Kind      string   `json:"kind"`
	Values    []Number `json:"values"` // beside the fit's parameters
	U         []Number `json:"u"`
	Shift     []Number `json:"shift"` // difference from the fit over its uncertainty
	Scale     Number   `json:"scale"`
	Outliers  []int    `json:"outliers"` // data records from 1, flagged, not dropped
	Converged bool     `json:"converged"`
}

// Reduction is the record in the form of a reduction's, for what reads those: the
// fit, its tests, warnings and provenance; no measurands.
func (r *FitRecord) Reduction() *Record {
	return &Record{Format: r.Format, Guardring: r.Guardring, Title: r.Formula, Run: r.Run, Inputs: r.Inputs, Fit: r.Fit, Diagnosis: r.Diagnosis,
		Warnings: r.Warnings, Rows: r.Rows, Exclusions: []Exclusion{}, Corrections: []Correction{}, Measurands: []Measurand{}}
}

// longestHeader bounds the header and first record of a file of readings.
const longestHeader = 2 << 20

// FitCSV reads the columns that s names from a CSV file and fits. name stands for
// the file in messages; the record holds its last element.
func FitCSV(ctx context.Context, r io.Reader, name string, s FitSettings) (*FormulaFit, error) {
	in := bufio.NewReaderSize(r, longestHeader)
	// The header says which columns there are; it is read with the first record.
	var head []byte
	for n := 4096; ; n *= 2 {
		b, err := in.Peek(min(n, longestHeader))
		head = b
		if i := twoLines(b); i >= 0 {
			head = b[:i]
			break
		}
		if err != nil || n >= longestHeader {
			if err != nil && !errors.Is(err, io.EOF) {
				return nil, fmt.Errorf("%s: %w", name, err)
			}
			break
		}
	}
	set := s.CSV
	set.Words, set.Numbers = nil, []string{}
	t, err := bench.ReadCSV(bytes.NewReader(head), name, set)
	if err != nil {
		return nil, err
	}
	p, err := newFitPlan(t, s)
	if err != nil {
		return nil, err
	}
	set.Numbers = p.headers()
	if t, err = bench.ReadCSV(in, name, set); err != nil {
		return nil, err
	}
	return FitTable(ctx, t, s)
}

// twoLines returns the length of the first two records that hold something, or −1.
func twoLines(b []byte) int {
	some, quoted, lines := false, false, 0
	for i, c := range b {
		switch {
		case c == '"':
			quoted = !quoted
			some = true
		case c == '\n' && some && !quoted:
			if lines++; lines == 2 {
				return i + 1
			}
			some = false
		case c != '\n' && c != '\r' && c != ' ':
			some = true
		}
	}
	return -1
}

// FitTable fits a formula to a table whose columns in use have been read as
// numbers. Where it can't begin, the error says what is wrong; where the search
// does not converge or the readings don't tell parameters apart, the result says so
// in Record.Fit.Status and Reason.
func FitTable(ctx context.Context, t *bench.Table, s FitSettings) (*FormulaFit, error) {
	p, err := newFitPlan(t, s)
	if err != nil {
		return nil, err
	}
	d, err := p.data(t)
	if err != nil {
		return nil, err
	}
	var f *FormulaFit
	if len(p.noisy) > 0 && !s.EffectiveVariance {
		f, err = d.errorsInVariables(ctx)
	} else {
		f, err = d.leastSquares(ctx)
	}
	if err != nil {
		return nil, fmt.Errorf("%s: %w", t.File, err)
	}
	return f, nil
}
