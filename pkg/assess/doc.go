// Package assess makes the statements a laboratory signs about results it
// already has: whether an item conforms, whether laboratories agree, whether an
// instrument drifts.
//
// Conformity. [Decide] applies one of three decision rules to a [Result] and
// [Limits] and returns a [Statement] with the probability of conformity and the
// risks of JCGM 106:2012. [GlobalRisks] needs a stated [Population].
//
// Agreement. [En], [Zeta] and [Z] compare two results, [WeightedMean] and
// [Mean.Degrees] several, with their full covariance; [SharedCovariance] builds
// that covariance from the budgets of records that used the same instrument or
// certificate, and [Compare] does all of it for records. [LargestConsistentSubset]
// and [AlgorithmA] serve when they do not agree.
//
// Drift. [Drift] fits a line through the calibrations of one instrument, tests
// its slope, draws control limits and predicts.
//
// Conventions. A Result carries its unit; results and limits in other units of
// the same dimension are converted to the unit of the first. U is always the
// standard uncertainty, Expanded() is K·U. Where degrees of freedom are finite,
// (Value − true value)/U is taken to follow Student's t with that many (JCGM 100
// G.3.2). Clause numbers of JCGM 106 and ISO 13528 are given from memory.
//
// Nothing here rescales an uncertainty, drops a result or extrapolates without
// being asked; what a reader should know stands in Warnings.
package assess
