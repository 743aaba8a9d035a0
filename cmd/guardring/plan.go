package main

import (
	"fmt"
	"io"
	"sort"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
	"example.org/guardring/pkg/si"
)

func planCommand() *cobra.Command {
	var asJSON bool
	var figures string
	cmd := &cobra.Command{
		Use:   "plan DIR",
		Short: "Say before measuring what uncertainty a design gives",
		Long: `Plan takes the settings of DIR/bench.toml and its readings file, the truth of
DIR/simulation.toml, and states what uncertainty the first measurand would have,
what dominates it, and how more readings, more settings, other voltages or
spacings, or better known inputs would change it; whether the design stays below
the breakdown of air and the laboratory's limits of stored energy and charge.`,
		Example: "  guardring plan datasets/attracted-disc",
		Args:    names("one bench folder", 1, 1),
		RunE: func(cmd *cobra.Command, args []string) error {
			b, err := bench.Open(args[0])
			if err != nil {
				return err
			}
			truth, err := plan.ReadTruth(b)
			if err != nil {
				return err
			}
			p, err := plan.Predict(cmd.Context(), b, truth)
			if err != nil {
				return err
			}
			var files []outFile
			if figures != "" {
				f, err := figure.Design(p)
				if err != nil {
					return err
				}
				if files, err = drawn(files, figures, []*figure.Figure{f}); err != nil {
					return err
				}
			}
			var record any
			if asJSON {
				record = p
			}
			return deliver(cmd.OutOrStdout(), cmd.ErrOrStderr(), files, record, func(w io.Writer) error { return planText(w, p) }, nil)
		},
	}
	cmd.Flags().BoolVar(&asJSON, "json", false, "print the prediction as JSON and nothing else")
	cmd.Flags().StringVar(&figures, "figures", "", "write the figure as SVG into folder `DIR`")
	return cmd
}

// planText prints a prediction as tables.
func planText(w io.Writer, p *plan.Prediction) error {
	m := &p.Measurand
	unit, err := si.ParseUnit(m.Unit)
	if err != nil {
		return err
	}
	unit = unit.Suited(float64(m.Value), float64(m.K)*float64(m.U))
	fmt.Fprintf(w, "%s\nmodel %s, before measuring\n\n", p.Title, p.Model)
	fmt.Fprintf(w, "The design gives %s: %s\n", figure.Words(m.Name), si.Expanded(float64(m.Value), float64(m.K)*float64(m.U), unit, float64(m.K), float64(m.Probability)))
	if held := report.Held(&p.Hazard); held != "" {
		fmt.Fprintf(w, "%s\nHigh voltage: interlock or barrier, discharge rod and earth before touching; local codes and licensed practice prevail.\n", held)
	}
	fmt.Fprintln(w)
	budget := report.Table{Caption: "What dominates", Columns: []report.Column{{Name: "input"}, {Name: "share", Unit: "%", Align: report.Decimal}}}
	for _, l := range dominant(m.Budget, 6) {
		budget.Rows = append(budget.Rows, []string{figure.Words(l.input), fmt.Sprintf("%.1f", 100*l.share)})
	}
	if err := budget.Text(w); err != nil {
		return err
	}
	fmt.Fprintln(w)
	table, notes := report.Changes(p, unit)
	table.Caption = "One change at a time"
	if err := table.Text(w); err != nil {
		return err
	}
	for i, note := range notes {
		fmt.Fprintf(w, "(%d) %s\n", i+1, note)
	}
	for _, warning := range p.Warnings {
		fmt.Fprintf(w, "! %s\n", warning)
	}
	return nil
}

// share is a budget line for the summary.
type share struct {
	input string
	share float64
}

// dominant returns the n largest shares of a budget.
func dominant(budget []reduce.BudgetLine, n int) []share {
	var out []share
	for _, l := range budget {
		out = append(out, share{l.Input, float64(l.Share)})
	}
	sort.SliceStable(out, func(a, b int) bool { return out[a].share > out[b].share })
	return out[:min(n, len(out))]
}
