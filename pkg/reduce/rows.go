package reduce

// Rows are the readings as they stand after the fit, in acquisition order, one
// entry a data record of kind "reading" (zero and blank records serve the
// corrections and have no residual). Excluded rows stay, marked; their
// residuals are against the fit that left them out.
type Rows struct {
	N        int
	Record   []int // index into the bench's records
	Excluded []bool
	// Predictors[c][i] is the true value of predictor c (named by
	// PredictorNames), SI; Response the corrected reading; Fitted the prediction;
	// U the effective standard uncertainty of one reading, independent part.
	PredictorNames []string
	ResponseName   string
	Predictors     [][]float64
	Response       []float64
	Fitted         []float64
	U              []float64
	// Residual is Response − Fitted, SI; Standardised is that in units of
	// its standard uncertainty, freed of what readings share (W(y − f) with
	// WᵀW = Σ⁻¹; for excluded rows over the marginal uncertainty); Leverage and Studentised are those of the whitened fit (NaN for
	// excluded rows).
	Residual, Standardised, Leverage, Studentised []float64
}
