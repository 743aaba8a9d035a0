// Package formula compiles formulas written as Go expressions, checks their
// dimensions, evaluates them in blocks of rows and differentiates them exactly.
package formula
