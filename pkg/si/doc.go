// Package si holds units, dimensions and constants, and prints numbers with
// their uncertainties. Everything inside guardring is float64 in SI; units are
// read and printed only at the edges, and this is the package that does it.
package si
