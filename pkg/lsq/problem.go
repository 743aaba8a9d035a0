package lsq

import "gonum.org/v1/gonum/mat"

// Prior is knowledge of a parameter from outside the readings: a normal
// distribution with the given mean and standard uncertainty, both in the
// parameter's unit. It enters the fit as a pseudo-observation and counts as
// one datum in the degrees of freedom and in chi-squared.
type Prior struct {
	Value float64 // parameter's unit
	U     float64 // standard uncertainty, parameter's unit, > 0
}

// Parameter is one adjustable quantity of a Problem.
type Parameter struct {
	Name  string   // used in messages; an empty name is shown as b1, b2, …
	Start float64  // where the search begins, parameter's unit
	Lower *float64 // smallest admitted value; nil: none
	Upper *float64 // largest admitted value; nil: none
	Fixed bool     // held at Start
	Prior *Prior   // knowledge from outside the readings; nil: none
}

// Problem is a least-squares problem: readings Y with their covariance, and a
// model f(θ) of them. Exactly one of U, Covariance, or neither (unknown, equal
// uncertainties) describes the independent part of the covariance.
type Problem struct {
	Parameters []Parameter
	Y          []float64 // readings, length n, any unit

	// U holds the independent standard uncertainty of each reading, in the
	// unit of Y. Nil: unknown and equal; the covariance of the parameters is
	// then scaled by the residual variance and the result says so.
	U []float64

	// Eval fills f[i] with the model's value of reading i at theta (all
	// parameters, the fixed ones too). When jac is not nil it also fills
	// jac[j][i] = ∂f_i/∂θ_j for every j whose jac[j] is not nil (columns of
	// fixed parameters may be nil). The slices belong to the caller of Eval
	// and must not be kept. Eval is only ever called from the goroutine that
	// called Fit.
	Eval func(theta, f []float64, jac [][]float64) error

	// Numeric says that Eval ignores jac: derivatives are then central
	// differences with a step scaled to each parameter.
	Numeric bool

	// Effects is the low-rank part of the covariance of the readings,
	// Σ = diag(U²) + G Gᵀ: errors that groups of readings share. Nil: none.
	Effects *Effects

	// Covariance is the full covariance of the readings, n×n, in the unit of Y
	// squared. It takes the place of U and Effects.
	Covariance *mat.SymDense

	// Reweight, when not nil, rewrites the standard uncertainties u and the
	// loads of g (nil when the problem has no Effects) for parameters theta
	// with fitted values f: effective variance of predictor noise, or loads
	// proportional to a sensitivity. Weights are frozen while a fit runs;
	// fitting and reweighting alternate until neither changes. When U is nil
	// or holds a zero, Reweight is also called at the start.
	Reweight func(theta, f, u []float64, g *Effects) error

	// Scratch gives U and the loads of Effects to Fit, which then rewrites them
	// in place through Reweight instead of copies: for problems whose readings
	// fill much of the memory.
	Scratch bool

	// Linear states that f is linear in the parameters. Fit also recognises
	// it when the derivatives do not change with the parameters.
	Linear bool

	// Relative says that U or Covariance are known only up to a common factor:
	// the covariance of the parameters is then scaled by the residual variance
	// s², and the result says so. It can't be used with priors or effects.
	Relative bool

	powers func(cols [][]wide) // derivatives in extended precision, of a linear model
}

// Effects is a sparse matrix G by rows: reading i is moved by
// Σ_k Load[k]·e(Column[k]), k from Start[i] to Start[i+1]−1, where the e are
// independent errors of unit variance, each shared by all readings that name
// its column. Loads are in the unit of Y and already hold the standard
// uncertainty of the effect.
type Effects struct {
	Columns int       // number of effects
	Start   []int32   // length n+1, from 0, not decreasing
	Column  []int32   // 0 … Columns−1, at most once in a row
	Load    []float64 // unit of Y
}

// Settings adjusts how a fit is done. The zero value is the default.
type Settings struct {
	MaxIterations int     // of one search; 0: 1000
	Tolerance     float64 // relative error left in the parameters; 0: 1e-11
	NoRestarts    bool    // do not try scaled starts when the first search stalls

	// SkipDiagnostics gives estimates, covariance, chi-squared and residuals
	// only, for fits in series: Standardised, Leverage, Studentised,
	// CooksDistance, Weights and the Jacobian stay nil.
	SkipDiagnostics bool
}
