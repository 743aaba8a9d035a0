// Package model holds the bench kinds: what a bench of each kind consists of,
// and how its readings follow from its dimensions and from the quantity sought.
//
// A kind is one file that fills a Kind and registers it: its channels (what is
// read, row by row), its scalars (one number for the whole bench: dimensions,
// environment, the inputs of corrections, and the parameters that are fitted),
// its corrections, its options, its measurands, and Prepare, which turns one
// bench's choices into a Model. Everything above this package (reading a
// bench file, fitting, the budget, simulation, reports) works from that
// description; a new kind needs no change elsewhere.
//
// A Model gives the true value of the response channel from the scalars and
// the true values of the predictor channels as jets (package jet), so that one
// formula yields the value, the sensitivity to every parameter and shared input
// and the mixed second derivatives that the reduction needs. The formulas
// themselves are in package field.
//
// The sign and zero conventions: the true value of a channel is
// gain × reading + offset; a scalar that shifts a scale is added to the reading
// (gap + gap_offset); a contact potential is subtracted from the voltage.
//
// # Charge readings
//
// An electrometer holds a charge Q, and the charge Q_i that its switch injects, on
// a capacitor that loses charge with time constant τ while a current i flows in:
// dQ/dt = i − Q/τ. After the hold time t it reads (derived)
//
//	Q(t) = (Q + Q_i) exp(−t/τ) + i t φ(t/τ),  φ(u) = (1 − exp(−u))/u,
//
// which is Q + Q_i + i t without leakage. A blank, the cycle at zero volts, shows
// Q_i alone when it is read at once; blanks held as long as the readings take the
// offset current off as well, and its own correction then stays off.
//
// # Sheet in the gap
//
// A sheet of thickness t and relative permittivity ε_r in a gap d leaves an air
// film d − t. Capacitors in series give Q/V = ε₀A/s with the electric spacing
// s = (d − t)/ε_air + t/ε_r, so ε_air s is the plate spacing of an empty gap of
// the same capacitance. The guard slot lies in the film: its far field is a line
// dipole in air, and the charge that the dipole draws off the disc is found by
// reciprocity from the field per volt at the disc, 1/(ε_air s). A small tilt Δ
// changes the film alone. So the guard, wedge and step corrections of an empty
// gap hold with ε_air s in place of the spacing (derived), for a film of at least
// 5 guard gaps; below that the sheet enters the field of the slot.
//
// # Body between plates
//
// A conducting sphere of radius a and charge q at the middle of a gap d has, to
// first order in k = (a/d)³, the dipole p = 4πεa³E besides its charge. The images
// of the dipole, all of one sign at distances nd, make the field 4ζ(3)k·E at the
// centre; those of the charge, of alternating sign, make no field there but the
// gradient 3ζ(3) q/(4πεd³), which pulls the dipole with 3ζ(3)k·qE. So
// F = qE(1 + 7ζ(3)k) (derived; a test compares it with a numerical solution).
//
// # Beam between plates
//
// A particle of rest energy mc² = eM and kinetic energy eU (M, U in volts for one
// elementary charge) enters a uniform transverse field E along its axis. Its
// longitudinal momentum stays p₀, p₀c/e = √(U(U + 2M)), and its path is the
// catenary (Landau and Lifshitz, The Classical Theory of Fields, § 20)
//
//	y = ((M + U)/E)(cosh w − 1),  dy/dx = ((M + U)/(p₀c/e)) sinh w,  w = E x/(p₀c/e),
//
// y = E x²/4U for U ≪ M. On leaving balanced plates off the axis the particle gives
// back to the edge field the energy eEy that it took; the edge lowers both parts of
// its momentum by the same ratio, so the slope stays (derived to third order in
// deflection: ∂E/∂x takes eEy/v from the longitudinal momentum, and −½y²∂²E/∂x²,
// integrated by parts, eEy·(dy/dx)/v from the transverse one). The field that leaks
// beyond the plates lengthens them by ∫E dx/E₀ less their length, half at each end.
package model
