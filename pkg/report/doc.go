// Package report says what a reduction found: as text for a terminal, as a
// self-contained HTML page with its figures, as Markdown and as LaTeX.
//
// The four forms are one document: what stands in one stands in all, except
// that figures are in the page alone. A report opens with the cautions of the
// bench and the result, names every warning in a sentence of its own, and then
// gives the parameters, all their correlations, the goodness of the fit, the
// corrections, the uncertainty budget (the columns of EA-4/02 section 4, grouped
// by the parts of the bench), the Monte Carlo check (JCGM 101 clause 8), the
// tests of the residuals, what was left out and why, the inputs with their
// SHA-256, and how to run it again. Numbers are rounded as GUM 7.2.6 says.
//
// Everything that came from a file is escaped for the form it is written in.
//
// Table is the small table that other packages show in the same four forms.
//
// FitText, FitHTML, PropagationText and PropagationHTML report the fit of a formula
// and the propagation of a budget in the same manner.
package report
