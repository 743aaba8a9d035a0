// Package model holds the bench kinds: what a bench of each kind consists of,
// and how its readings follow from its dimensions and from the quantity sought.
//
// A kind is one file that fills a Kind and registers it: its channels (what is
// read, row by row), its scalars (one number for the whole bench: dimensions,
// environment, the inputs of corrections, and the parameters that are fitted),
// its corrections, its options, its measurands, and Prepare, which turns one
// bench's choices into a Predictor. Everything above this package (reading a
// bench file, fitting, the budget, simulation, reports) works from that
// description; a new kind needs no change elsewhere.
//
// A Predictor gives the true value of the response channel from the scalars and
// the true values of the predictor channels as jets (package jet), so that one
// formula yields the value, the sensitivity to every parameter and shared input
// and the mixed second derivatives that the reduction needs. The formulas
// themselves are in package field.
//
// The sign and zero conventions: the true value of a channel is
// gain × reading + offset; a scalar that shifts a scale is added to the reading
// (gap + gap_offset); a contact potential is subtracted from the voltage.
package model
