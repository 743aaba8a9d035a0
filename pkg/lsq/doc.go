// Package lsq estimates parameters from readings: least squares with correlated
// readings, prior knowledge and errors in the predictors, and the diagnostics
// that say whether the estimate can be trusted.
//
// Fit takes a Problem (parameters, readings, their covariance, a model) and
// returns a Result: estimates with their covariance, chi-squared, residuals with
// leverage and influence, a Status with its Reason, and Warnings that belong
// beside the numbers. FitEIV does the same for errors in the response and the
// predictors, explicit or implicit; Line is the straight line with errors in
// both axes; Polynomial keeps its digits however badly conditioned. A Refitter
// repeats a fit for other readings, for Monte Carlo.
//
// All numbers are in whatever units the caller uses; the search scales each
// parameter by its own effect on the readings, so that picofarads and volts can
// stand side by side. Nothing is printed and no file is read. Callbacks run on
// the caller's goroutine. The same problem gives the same bits on any number of
// cores.
//
// # What is minimised
//
// With residuals r = y − f(θ), covariance Σ of the readings and priors θ_j ~
// (m_j, u_j), Fit minimises
//
//	χ²(θ) = rᵀ Σ⁻¹ r + Σ_j ((θ_j − m_j)/u_j)²
//
// within the bounds. A prior is a pseudo-observation: it counts as one datum in
// the degrees of freedom. The covariance of the estimates is A⁻¹ with
// A = JᵀΣ⁻¹J + diag(1/u_j²), J the Jacobian of f; it is never scaled by the
// residuals unless the readings' uncertainties were not stated, and then the
// Result says so. The Birge ratio is reported beside it.
//
// # How
//
// Readings are whitened: W with WᵀW = Σ⁻¹ is applied to residuals and Jacobian.
// Independent readings need a division each. Effects shared by groups of
// readings, Σ = diag(u²) + GGᵀ, are whitened in time proportional to the number
// of readings, without forming Σ (see whitener). A full covariance is factored
// once.
//
// The whitened matrix [WJ | Wr] is reduced, block of rows after block, to the
// triangle of its QR decomposition by Householder reflections; normal equations
// are never formed, and priors enter as the first rows. The trust-region
// Levenberg–Marquardt step (Moré 1978) works on the small triangle. Near the
// minimum, where differences of χ² drown in rounding, Gauss–Newton steps go on
// until what is left, judged from how fast they shrink, is below the tolerance.
// Parameters at a bound that the gradient pushes outwards are held there.
//
// A model linear in its parameters (stated, or recognised because its
// derivatives did not change) is solved directly, and when its conditioning asks
// for it the whole QR decomposition is done again with numbers of twice the
// precision.
//
// When the first search stalls, or runs to where some parameter no longer
// matters, searches from starts scaled by powers of ten follow in a fixed order,
// and a warning says so.
//
// # Errors in the predictors
//
// FitEIV eliminates the true places of the points: with the condition of each
// row linearised at its present place, w + Aδ against the variance s² = BVBᵀ of
// the row, the step of the parameters solves a weighted problem of their number
// alone, and the points follow (Britt and Luecke 1973; see eivState). Time and
// memory are proportional to the rows, covariances of a row may be singular, and
// explicit and implicit models are treated alike.
//
// # What can't be told
//
// The singular values of the whitened Jacobian with columns scaled to unit
// length give Result.Condition. Directions in which it is singular are turned
// into sentences that name the parameters (Result.Confounded); their
// uncertainties are NaN, with a warning, as are those of parameters held at a
// bound.
//
// # Residuals
//
// Leverage is (JCJᵀ)_ii/Σ_ii, C the covariance of the estimates; a studentised
// residual is r_i/√(Σ_ii − (JCJᵀ)_ii), since cov(r) = Σ − JCJᵀ for the estimates
// of generalised least squares (derived: r = (I − JCJᵀΣ⁻¹)e). For independent
// readings these are the usual definitions. RunsTest, DurbinWatson,
// AndersonDarling, LackOfFit, CompareNested, AICc, Profile, Bootstrap and Robust
// ask further questions; none of them changes the result, and no reading is ever
// dropped.
//
// # Accuracy
//
// All 27 nonlinear sets of the NIST Statistical Reference Datasets are met from
// both published starts to 10 of the 11 printed digits of parameters and residual
// sums of squares and 8 or more of the standard deviations (Lanczos1, whose
// residuals are below the rounding of its data, in the parameters only); the
// linear sets to 13 of 15 digits, Filip to 7 with powers rounded to double
// precision and to 14 with Polynomial. The tests print the table.
package lsq
