package main

import (
	"fmt"
	"sort"
	"strings"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

func checkCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "check DIR",
		Short: "Read and validate a bench without reducing it",
		Long: `Check reads DIR/bench.toml and the readings it names, checks every key, unit and
number and whether the model applies, and prints what it found; of each instrument
what names it and what it may have moved by since its calibration.`,
		Example: "  guardring check datasets/attracted-disc",
		Args:    names("one bench folder", 1, 1),
		RunE: func(cmd *cobra.Command, args []string) error {
			b, err := bench.Open(args[0])
			if err != nil {
				return err
			}
			s, err := reduce.Check(b)
			if err != nil {
				return err
			}
			w := cmd.OutOrStdout()
			fmt.Fprintf(w, "%s\n", b.Title)
			fmt.Fprintf(w, "model        %s (%s)\n", b.Kind.Name, b.Kind.Title)
			for _, in := range b.Inputs {
				fmt.Fprintf(w, "input        %s  sha256 %s", in.File, in.SHA256)
				if in.Rows > 0 {
					fmt.Fprintf(w, "  %d rows, %d excluded", in.Rows, in.Excluded)
				}
				fmt.Fprintln(w)
			}
			fmt.Fprintf(w, "rows in fit  %d\n", s.Rows)
			for _, c := range b.Channels {
				fmt.Fprintf(w, "channel      %s: column %q in %s\n", c.Name, c.Column, c.Unit.Symbol)
			}
			for _, p := range s.Estimated {
				fmt.Fprintf(w, "estimate     %s\n", p)
			}
			for _, q := range b.Scalars {
				if q.Given {
					fmt.Fprintf(w, "given        %s = %s\n", q.Name, si.Short(q.Dist.Value, q.Dist.U, q.Unit))
				}
			}
			for i := range b.Instruments {
				fmt.Fprintf(w, "instrument   %s: %s\n", b.Instruments[i].Name, instrumentUse(&b.Instruments[i]))
			}
			names := make([]string, 0, len(b.Corrections))
			for n := range b.Corrections {
				names = append(names, n)
			}
			sort.Strings(names)
			for _, n := range names {
				state := "off"
				if b.Corrections[n] {
					state = "on"
				}
				fmt.Fprintf(w, "correction   %s: %s\n", n, state)
			}
			for _, warning := range s.Warnings {
				fmt.Fprintf(cmd.ErrOrStderr(), "guardring: warning: %s\n", cell.Visible(warning.Error()))
			}
			fmt.Fprintln(w, "the bench is in order")
			return nil
		},
	}
}

// instrumentUse tells which keys name an instrument, and what it may have moved by
// since its calibration.
func instrumentUse(in *bench.Instrument) string {
	if len(in.Named) == 0 {
		return "nothing names it; write instrument = \"" + in.Name + "\" with the channels and quantities that it gives"
	}
	use := strings.Join(in.Named, ", ")
	for i := range in.Allowances {
		a := &in.Allowances[i]
		half := fmt.Sprintf("%.3g %%", 100*a.Dist.Half)
		if !a.Relative {
			v, u := si.Prefixed(a.Dist.Half, a.Unit.Coherent())
			half = fmt.Sprintf("%.3g %s", v, u)
		}
		use += fmt.Sprintf("; %s within ±%s", strings.TrimPrefix(a.Name, "instruments."+in.Name+"."), half)
	}
	return use
}
