// Package gum propagates distributions: the law of propagation of uncertainty
// (JCGM 100:2008) and the Monte Carlo method (JCGM 101:2008, JCGM 102:2011) from
// the same description of the inputs, and says whether the two agree.
//
// A Distribution is what is known of one input. A Model is named inputs, their
// correlations, and outputs that evaluate a formula; Propagate gives for each
// output the Law with its budget, the Sample of a Monte Carlo run with both
// kinds of coverage interval, and their Comparison. Combine, Summarise and
// Compare are the same three steps for work that makes its own sensitivities or
// trials.
//
// # What a result depends on
//
// Inputs, seed, number of trials and version alone. Trials are cut into blocks of
// BlockTrials; every input has a stream of its own for every block (package
// random); sums over blocks are exact, so that neither the number of processors
// nor the way the work is divided can change a bit of the answer. RunPart does
// one part of a run, Merge joins parts; Propagate above SelectionTrials is a run
// in one part.
//
// # Intervals
//
// Up to SelectionTrials the intervals come from the order statistics of all
// trials, exact as JCGM 101:2008 7.7 has them. Above, trials are counted in Bins bins
// that a pilot of PilotTrials sets, and an end of an interval lies within one bin
// of the order statistic; Sample.Resolution states that width for the bins in use.
//
// # Correlation
//
// Correlated normals are drawn as such, a set of inputs read together as a
// multivariate t (JCGM 102:2011 5.3.2). For any other shapes the correlation is that
// of the normals of a Gaussian copula (Nelsen, An Introduction to Copulas, 2nd ed.,
// 2006: the choice of this copula is an assumption), and a warning says so.
//
// # Second order
//
// With Settings.SecondOrder the variance gets the terms of the note to JCGM
// 100:2008 5.1.2. In matrix form, for inputs with covariance Σ and jointly normal
// errors, gradient g and Hessian H (derived from Isserlis' theorem; for independent
// inputs it is the note's double sum):
//
//	u² = gᵀΣg + ½ tr(HΣHΣ) + d/dt tr(H(x + tΣg)Σ) at t = 0.
//
// The last term holds all third derivatives that the note needs in one directional
// derivative, taken by differences with Richardson's extrapolation.
//
// # Cost
//
// Nothing is allocated for a block, and memory does not grow with the number of
// trials beyond SelectionTrials: measured, 20 MB resident at 1e7 and at 1e9 trials
// of the six-input budget of BenchmarkMonteCarlo. A trial of it took 31 ns of
// processor time, shared among the processors, for mean, standard uncertainty and both
// intervals: 20 ns are the draws (three normals, a t, a rectangular, an arcsine), 7 the
// formula, 3 counting. What is left is mostly the generator's own 2 ns a draw and the
// ziggurats' memory accesses.
package gum
