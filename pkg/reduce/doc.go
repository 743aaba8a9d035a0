// Package reduce turns a bench into a reduction: fitted parameters, measurands
// with an uncertainty budget, residuals, warnings, and the record that another
// laboratory needs to get the same numbers.
//
// # Statement of the problem
//
// Rows i carry a response reading y_i and predictor readings. With scalars q
// (some estimated, θ; the others, with the gains and offsets of the channels,
// shared inputs s), the kind's model predicts the indication f_i(θ, s). The fit
// minimises
//
//	S/2 = ½ (y − f)ᵀ Σ⁻¹ (y − f) + ½ Σ_j (θ_j − p_j)²/u(p_j)²,
//
// where p_j are prior values and Σ holds what varies between rows: noise and
// resolution of the response, noise of the predictors through ∂f/∂x (effective
// variance), errors shared by a setting or mounting, and the error of the zero
// correction, which rows between the same zeros share.
//
// # Carrying the shared inputs
//
// At the minimum ∂S/∂θ = 0 for every s and p, hence (implicit differentiation,
// derived)
//
//	H = JᵀΣ⁻¹J + P − Σ_i v_i ∂²f_i/∂θ∂θ,   v = Σ⁻¹(y − f),  P = diag(1/u(p)²),
//	dθ/ds = −H⁻¹ [JᵀΣ⁻¹ ∂f/∂s − Σ_i v_i ∂²f_i/∂θ∂s],
//	dθ/dp = H⁻¹ P,   dθ/dy = H⁻¹ JᵀΣ⁻¹,
//
// with the full Hessian, not its Gauss–Newton part. A measurand Y(θ, s) has
// dY/ds = ∂Y/∂s + ∂Y/∂θ·dθ/ds, and the law of propagation combines shared
// inputs, priors and the components of Σ line by line (JCGM 100, 5.1 and 5.2).
// The weights Σ are held at their values at the fit.
//
// What an instrument may have moved by since its calibration is one such input, e,
// for everything that it gives: gains g(1 + e) of its channels and values p(1 + e), or
// offsets o + e and values p + e; a prior value moves with its instrument too,
// dθ/de = dθ/dp·dp/de.
//
// Even one-sided inputs (model.Scalar.Squared) enter by their square, whose
// expectation and standard uncertainty follow from the stated distribution.
//
// # The check
//
// Monte Carlo repeats the whole chain: every shared input, prior value, group
// error and noise is drawn, the readings are corrected and fitted again, and the
// endpoints of the law's interval are compared with those of the trials
// (JCGM 101 clause 8). Inputs with finite degrees of freedom are drawn as scaled
// t; noise with finite degrees of freedom shares one scale factor a channel.
// Each trial has its own stream, so the numbers do not depend on the number of
// cores.
//
// # Formulas and budgets
//
// Two smaller jobs stand beside the reduction of a bench. FitTable and FitCSV fit
// a formula to the columns of a table, with units from the headers, by least
// squares, effective variance or errors in variables. Propagate takes a budget
// file through its formulas by the law and by Monte Carlo; PropagatePart does one
// part of a long run and a PartMerger joins the parts to the same bytes.
package reduce
