// Package certificate makes the calibration certificate of a reduction and
// writes it in three forms: HTML that prints on A4, PDF, and XML of the open
// Digital Calibration Certificate schema, version 3.3.0, with quantities of
// D-SI.
//
// New fills one Certificate from the bench, its reduction and the decision rule,
// with every number already rounded to the text that is printed. The three forms
// print these texts, so that they agree digit for digit. Nothing comes from the
// clock or the machine: the same bench, seed and version give the same bytes.
//
// # Completeness
//
// A certificate that lacks something is not made. New then returns *Incomplete,
// which lists what is missing and the key of bench.toml for each: what ISO/IEC
// 17025:2017 asks of a calibration certificate (7.8.2.1, 7.8.4.1, 7.8.6.2; from
// memory), and what the calibration of a field meter adds (common practice, no
// source): reference plane, mounting, orientation, sign convention, plates,
// spacing, drive, dc or frequency, rms or peak, range, firmware, definition of
// the factor. An instrument used after its due date, or before its calibration,
// is a gap too unless a deviation names it. A date of recalibration is printed
// only when it is agreed with the client (7.8.4.3, from memory).
//
// # Numbers
//
// The expanded uncertainty U is rounded to two significant digits and the value
// to the same place (GUM 7.2.6; ILAC-P14, from memory). Rounding to two digits
// lowers U by at most 4.8 %, from 1.05 to 1.0: within the 5 % that ILAC-P14
// allows (from memory). U is never below the laboratory's stated capability: a
// smaller one is raised to it, with the capability's coverage factor, and rounded
// so that it stays there. Probabilities and risks of a statement of conformity
// are those of the uncertainty as stated.
//
// # Amendments
//
// An amendment is a new certificate with an identification of its own. It names
// the one it replaces and the reason, and holds the SHA-256 of what it replaces.
package certificate
