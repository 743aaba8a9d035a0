// Package si holds units, dimensions and constants, and prints numbers with
// their uncertainties.
//
// Inside guardring every number is a float64 in SI base units; units are read
// and printed only at the edges, and this is the package that does it:
//
//	ParseUnit, ParseQuantity, ParseInterval   text → Unit, SI value
//	Unit.ToSI, FromSI, DeltaToSI, DeltaFromSI conversions, rounded once
//	Unit.CheckDim, Dimension                  what may be added to what
//	Round, Short, Expanded                    numbers for people (GUM 7.2.6)
//	Exact, Unit.Format                        numbers for machines, bit for bit
//	Prefixed, Unit.Suited, Unit.Coherent      the unit to show a number in
//	Suggest                                   the word that was meant
//	Unit.UCUM, Unit.DSI                       codes for certificates and data packages
//	Constants, Eps0, KE …                     CODATA 2022
//
// # Units
//
// The SI units with all prefixes, and the units that the trade uses beside
// them: min h d, deg (°) arcmin arcsec, L t bar eV, % ‰ ppm ppb %RH, degC (°C),
// in ft, atm Torr mmHg, dyn erg Gal statC. An exact symbol wins over a prefix
// with a unit. Factors are kept as exact rationals (the degrees of arc, which
// are irrational, excepted), so that a conversion is the one correctly rounded
// operation: 3.3 mm is 3.3/1000 m.
//
// A gram-force is refused: it hides the gravity that it was weighed in.
//
// # Temperature
//
// A value in degC is a point of a scale, 20 degC = 293.15 K; an uncertainty or
// a difference in degC is an interval, 0.5 degC = 0.5 K. ParseQuantity reads
// the first, ParseInterval the second; in products and quotients (ppm/degC) it
// is always the interval.
//
// # Rounding
//
// Round, Short and Expanded give uncertainties two significant digits and the
// value the same last place. Ties go away from zero. This is for display only:
// whatever is computed from, or written to a file, is printed by Exact.
package si
