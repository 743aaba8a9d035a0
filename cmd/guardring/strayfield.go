package main

import (
	"bytes"
	"fmt"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/report"
)

func strayfieldCommand() *cobra.Command {
	var asJSON bool
	var drawing string
	cmd := &cobra.Command{
		Use:   "strayfield FILE.toml",
		Short: "Find the field of charged fixtures at a meter's place",
		Long: `Strayfield reads charged bodies (points, spheres at a charge or a potential,
edges of plates), an earthed plane and the place of a meter from FILE.toml, and
prints the field and potential there with their uncertainty, the share of each
body, the part of the field in a bench's budget, and the places without field,
where a meter may be zeroed.`,
		Example: `  guardring strayfield datasets/strayfield/strayfield.toml
  guardring strayfield datasets/strayfield/strayfield.toml --figure field.svg
  guardring strayfield datasets/strayfield/strayfield.toml --json > field.json`,
		Args: names("one file", 1, 1),
		RunE: func(cmd *cobra.Command, args []string) error {
			b, err := plan.OpenStray(args[0])
			if err != nil {
				return err
			}
			s, err := plan.Stray(b)
			if err != nil {
				return err
			}
			var out bytes.Buffer
			if asJSON {
				if err := writeJSON(&out, s.Record()); err != nil {
					return err
				}
			} else {
				out.WriteString(report.StrayField(s, nil).String())
			}
			if drawing != "" {
				f, err := figure.StrayField(s)
				if err != nil {
					return err
				}
				var svg bytes.Buffer
				if err := f.WriteSVG(&svg); err != nil {
					return err
				}
				if err := writeFiles([]outFile{{drawing, svg.Bytes()}}); err != nil {
					return err
				}
			}
			if _, err := cmd.OutOrStdout().Write(out.Bytes()); err != nil {
				return err
			}
			if asJSON {
				for _, w := range s.Warnings {
					fmt.Fprintf(cmd.ErrOrStderr(), "guardring: warning: %v\n", w)
				}
			}
			return nil
		},
	}
	cmd.Flags().BoolVar(&asJSON, "json", false, "print the record as JSON and nothing else")
	cmd.Flags().StringVar(&drawing, "figure", "", "draw field lines and equipotentials as SVG into `FILE`")
	return cmd
}
