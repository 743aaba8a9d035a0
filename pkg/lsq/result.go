package lsq

import "gonum.org/v1/gonum/mat"

// Status says how a fit ended. Converged is the only good end.
type Status int

// The ways in which a fit ends.
const (
	Converged      Status = iota // the parameters satisfy the tolerance
	Stalled                      // no step lowers chi-squared, but the minimum is not reached
	IterationLimit               // Settings.MaxIterations used up
	Singular                     // some parameters can't be told apart by these readings
)

// String returns the status in words.
func (s Status) String() string {
	switch s {
	case Converged:
		return "converged"
	case Stalled:
		return "stalled"
	case IterationLimit:
		return "iteration limit"
	case Singular:
		return "singular"
	}
	return "unknown"
}

// Result is the outcome of a fit. Slices over parameters have one entry per
// parameter of the problem in its order (fixed ones have U = 0); slices over
// rows have one entry per reading.
type Result struct {
	Status Status
	Reason string // one sentence: why the search ended

	Values     []float64     // estimates, parameter's unit
	U          []float64     // standard uncertainties; NaN when unknown (a warning says why)
	Covariance *mat.SymDense // of all parameters; zero rows for fixed ones, NaN where unknown
	Free       []int         // indices of the parameters that were estimated

	ChiSquared float64 // rᵀΣ⁻¹r with the priors' terms; relative to s² = 1 when U is unknown
	PValue     float64 // probability of a larger chi-squared; NaN when the uncertainties are unknown or DOF = 0
	BirgeRatio float64 // √(ChiSquared/DOF); NaN when DOF = 0
	RSS        float64 // Σ (y−f)², unit of Y squared, unweighted
	ResidualSD float64 // √(RSS/DOF), unit of Y; NaN when DOF = 0
	DOF        int     // readings + priors − estimated parameters

	Iterations  int     // steps tried, over all restarts and reweightings
	Evaluations int     // calls of Eval
	Reweighting int     // times that Reweight was called
	Restarts    int     // searches begun from scaled starts after the first stalled
	Condition   float64 // condition number of the whitened Jacobian with columns scaled to unit length

	Confounded        []*Remark // one sentence per direction the readings can't resolve
	AtBound           []int     // parameters held at a bound
	ScaledByResiduals bool      // Covariance was scaled by s² because U is unknown
	ResidualsVanish   bool      // s² of ScaledByResiduals is rounding alone: it and all that follows from it mean nothing

	Fitted        []float64 // f at the estimates, unit of Y
	Residuals     []float64 // y − f, unit of Y
	Standardised  []float64 // residual over the standard uncertainty of its reading
	Leverage      []float64 // (JCJᵀ)_ii/Σ_ii: what the fit follows of each reading; for independent ones the diagonal of the hat matrix
	Studentised   []float64 // residual over the standard uncertainty of the residual
	CooksDistance []float64 // what leaving the reading out would move the estimates by, in their uncertainties squared per parameter
	Weights       []float64 // 1/Σ_ii, the final weights, unit of Y to the power −2

	Warnings []error // shown with the result, never hidden

	// kept for SolveCovariance, Sensitivity, refits and diagnostics
	white    *whitener
	factor   [][]float64 // columns of B, A⁻¹ = BBᵀ, before scaling by s²
	inv      []float64   // A⁻¹ by rows, free parameters
	jac      [][]float64 // free columns at the estimates
	priorW   []float64   // 1/u of the prior of each parameter, 0 without
	scale    float64     // s² when the covariance was scaled, else 1
	problem  *Problem
	settings Settings

	noiseFound bool // the readings' uncertainty was found beside priors or effects: see findNoise
}
