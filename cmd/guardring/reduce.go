package main

import (
	"bytes"
	"context"
	"fmt"
	"io"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
)

// reduceOptions are the flags of reduce.
type reduceOptions struct {
	html, figures string
	json, lawOnly bool
	settings      reduce.Settings
}

func reduceCommand() *cobra.Command {
	var o reduceOptions
	cmd := &cobra.Command{
		Use:   "reduce DIR...",
		Short: "Turn the readings of a bench into a result with its uncertainty",
		Long: `Reduce reads DIR/bench.toml and the readings it names, applies the corrections,
fits the model, builds the uncertainty budget by the law of propagation, checks
it by Monte Carlo trials of the whole chain, and prints the result.

With several folders each is reduced by itself and a summary table is printed; a
bad one does not stop the others.`,
		Example: `  guardring reduce datasets/attracted-disc
  guardring reduce datasets/attracted-disc --html result.html --figures figures
  guardring reduce datasets/attracted-disc --json --rows > result.json`,
		Args: names("at least one bench folder", 1, -1),
		RunE: func(cmd *cobra.Command, dirs []string) error {
			o.settings.LawOnly = o.lawOnly
			if o.settings.Trials < 1 {
				return fmt.Errorf("--trials %d: at least 1 is needed; use --law-only for none", o.settings.Trials)
			}
			if len(dirs) == 1 {
				return o.one(cmd.Context(), dirs[0], cmd.OutOrStdout(), cmd.ErrOrStderr())
			}
			return o.many(cmd.Context(), dirs, cmd.OutOrStdout(), cmd.ErrOrStderr())
		},
	}
	f := cmd.Flags()
	f.StringVar(&o.html, "html", "", "write the report as one HTML `FILE`")
	f.StringVar(&o.figures, "figures", "", "write the figures as SVG into folder `DIR`")
	f.BoolVar(&o.json, "json", false, "print the record as JSON and nothing else")
	f.BoolVar(&o.settings.Rows, "rows", false, "put every row with its residual into the record")
	f.Uint64Var(&o.settings.Seed, "seed", 0, "seed `N` of the Monte Carlo trials")
	countFlag(cmd, &o.settings.Trials, "trials", reduce.DefaultTrials, "number `N` of Monte Carlo trials")
	f.BoolVar(&o.lawOnly, "law-only", false, "no Monte Carlo check")
	return cmd
}

// one reduces one bench and prints its result.
func (o *reduceOptions) one(ctx context.Context, dir string, stdout, stderr io.Writer) error {
	b, err := bench.Open(dir)
	if err != nil {
		return err
	}
	r, err := reduce.Run(ctx, b, o.settings)
	if err != nil { // what is odd about the bench may be why
		for _, w := range b.Warnings {
			fmt.Fprintf(stderr, "guardring: warning: %s\n", cell.Visible(w.Error()))
		}
		return err
	}
	// Everything is made before anything is written, so that a failure leaves no
	// partial output.
	files, err := o.render(r)
	if err != nil {
		return err
	}
	var record any
	if o.json {
		record = &r.Record
	}
	if err := deliver(stdout, stderr, files, record, func(w io.Writer) error { return report.Text(w, r) }, r.Record.Warnings); err != nil {
		return err
	}
	return unsettled(dir, &r.Record)
}

// unsettled returns an error when a reduction ends without a result: its fit has
// not converged, or nothing could be stated from it.
func unsettled(dir string, r *reduce.Record) error {
	switch {
	case r.Fit.Status != "converged":
		return fmt.Errorf("%s: the fit is %s: %s", dir, r.Fit.Status, r.Fit.Reason)
	case len(r.Measurands) == 0:
		return fmt.Errorf("%s: no measurand is stated; the warnings say why", dir)
	}
	return nil
}

// render makes the files that the options ask for.
func (o *reduceOptions) render(r *reduce.Result) ([]outFile, error) {
	var files []outFile
	if o.html != "" {
		var b bytes.Buffer
		if err := report.HTML(&b, r); err != nil {
			return nil, err
		}
		files = append(files, outFile{o.html, b.Bytes()})
	}
	if o.figures != "" {
		all, err := figure.All(r)
		if err != nil {
			return nil, err
		}
		if files, err = drawn(files, o.figures, all); err != nil {
			return nil, err
		}
	}
	return files, nil
}
