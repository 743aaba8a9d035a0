// Package figure draws the result of a reduction: the fit over its residuals, a
// sheet of residuals, the share of variance of every input, the Monte Carlo
// distribution beside the law.
//
// A Figure is drawn once, into a list of strokes, fills and texts, and written
// from that list as SVG, PNG or PDF, so that the three agree and the bytes
// depend on nothing but the data. gonum/plot supplies the fonts (Liberation),
// their metrics and the raster canvas; its vector canvases are not used because
// they can't name a stack of fonts, and its PDF text is confined to code page
// 1252, which has no superscript minus.
//
// One style holds for all figures. Colours are those of Okabe and Ito ("Color
// Universal Design", 2008), each with a marker and a dash of its own so that a
// grey print can be read. Axes name the quantity and its unit as a quotient,
// "E / (kV m⁻¹)" (SI Brochure 9th ed., section 5.4.1), choose an SI prefix, and
// stand at the head of the vertical axis rather than turned on its side. Keys
// stand in a row above the panel and cover no data. Where more points arrive
// than the eye can part, the lowest and the highest of each column of the page
// are kept, and the figure says how many were drawn.
//
// Curve and AllOfFit draw the fit of a formula, Density, BudgetShares, Joint and
// AllOfBudget the propagation of a budget. Design draws a plan, Agreement and Drift
// what package assess found, StrayField the lines of a field.
package figure
