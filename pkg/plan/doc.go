// Package plan works before measuring: it simulates the readings of a bench
// whose truth is stated, and predicts what uncertainty a design would give.
//
// A simulation keeps the settings of a bench (the readings of its predictor
// channels, its row columns) and makes the response anew: the true predictors
// depart from their readings by noise, gains, offsets and grouped errors, the
// response follows from the kind's model at the true scalars, and carries zero,
// drift, noise and resolution. The truth stands in simulation.toml beside
// bench.toml:
//
//	format = 1
//	seed = 7                        # used unless the command says otherwise
//	[truth]                         # true values; anything not named is as the bench states it
//	permittivity = "8.8597 pF/m"
//	"channels.voltage.gain" = "1.00011"
//	"corrections.wedge.half_difference" = "3 um"
//	"instruments.divider.drift" = "20 ppm"   # by what it has moved since its calibration
//	[zero]                          # of the response
//	start = "0.031 mN"
//	per_hour = "0.012 mN"           # drift
//	[[fault]]                       # added to one reading
//	row = 17                        # data records from 1
//	add = "0.4 mN"
//
// The same bench, truth and seed give the same bytes, so the readings of a
// dataset can be made again from its own folder.
//
// A stray field (StrayBench) is what charged fixtures, spheres, plate edges and
// their images in an earthed plane make at the place where a meter is to stand: its
// value with a budget, its part in the budget of the bench, and the places without
// field where the meter may be zeroed.
package plan
