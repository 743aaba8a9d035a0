// Guardring reduces readings of electrostatic benches: from a folder with a
// bench description (bench.toml) and readings (CSV) to fitted parameters,
// measurands with an uncertainty budget, residuals and a record that another
// laboratory can check.
//
// Usage:
//
//	guardring reduce DIR...             the main job: readings to a result
//	guardring check DIR                 read and validate a bench, reduce nothing
//	guardring new DIR --model NAME      write a commented bench to start from
//	guardring plan DIR                  what a design would give, before measuring
//	guardring simulate DIR -o OUT       make readings from a stated truth
//	guardring fit FILE.csv              fit a formula to the columns of a CSV file
//	guardring propagate BUDGET.toml     propagate a budget by the law and by Monte Carlo
//	guardring merge PART...             join the parts of a long propagation
//	guardring certificate DIR -o FILE   the calibration certificate: .html, .pdf, .xml
//	guardring compare RESULT.json...    do laboratories agree
//	guardring history DIR...            follow an instrument over its calibrations
//	guardring strayfield FILE.toml      the field of charged fixtures at a meter's place
//	guardring replay FILE               run a notebook, record or pack again and compare
//	guardring pack DIR|FILE -o FILE.zip one file that another laboratory can replay
//	guardring kernel install            build the notebook kernel, install, list, remove it
//	guardring man DIR                   write the manual pages
//	guardring version                   version, modules and licences
//
// Run "guardring help COMMAND" for the options of a command, with an example.
//
// Exit codes: 0 the work is done; 1 it shows a difference; 2 wrong use, bad
// input, a fit that is singular or has not converged (its result is printed), or
// a failed write; 130 interrupted.
package main

import (
	"context"
	"os"
)

func main() {
	os.Exit(run(context.Background(), os.Args[1:], os.Stdin, os.Stdout, os.Stderr))
}
