// Package lab is the front door for notebook cells: a few verbs, each of which
// returns one value that shows itself when a cell ends in it.
//
//	import "example.org/guardring/pkg/lab"
//
//	b := lab.Open("../datasets/attracted-disc") // the bench, its first readings, the cautions
//	r := lab.Reduce(b)                          // progress while it works
//	r                                           // result, parameters, budget, warnings
//	r.Residuals()                               // a figure
//
// # Verbs
//
//	Open        look at a dataset
//	Reduce      turn readings into a result with its uncertainty budget
//	Fit         fit any formula to columns of a CSV file or a frame
//	Propagate   work out an uncertainty budget by the law and by Monte Carlo
//	Plan        say before measuring what a design gives
//	Certify     make the calibration certificate of a result
//	Compare     say whether laboratories agree
//	StrayField  find the field of charged fixtures at a meter's place
//	Provenance  say what another laboratory needs to get the same numbers
//
// Readings move to and from gota frames (Bench.Frame, WithFrame, Result.Frame,
// ReadFrame, Table) and gonum matrices (Bench.Matrix, Bench.WithMatrix).
//
// # What a cell can end in
//
// Every value that a verb or a method returns has String for plain text and
// SimpleRender for all its forms: text/plain, text/html and text/latex for
// tables, image/svg+xml and image/png for figures, and for a result its record
// as application/vnd.guardring.result+json (what the command prints with --json).
// What is shown is made when the value is, so showing can't fail.
//
// # Failure
//
// A verb that can't do its work ends the cell with the error that the command of
// the same name would print: what was wrong, where, and what would be right.
// Outside a notebook the verbs panic with cell.Failure, which wraps the error;
// programs use the packages underneath, which return (T, error).
//
// Numbers in fields and results are SI.
package lab
