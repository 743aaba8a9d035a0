package main

import (
	"bytes"
	"io"

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
			var files []outFile
			if drawing != "" {
				f, err := figure.StrayField(s)
				if err != nil {
					return err
				}
				var svg bytes.Buffer
				if err := f.WriteSVG(&svg); err != nil {
					return err
				}
				files = []outFile{{drawing, svg.Bytes()}}
			}
			rec := s.Record()
			var record any
			if asJSON {
				record = rec
			}
			return deliver(cmd.OutOrStdout(), cmd.ErrOrStderr(), files, record, func(w io.Writer) error {
				_, err := io.WriteString(w, report.StrayField(s, nil).String())
				return err
			}, rec.Warnings)
		},
	}
	cmd.Flags().BoolVar(&asJSON, "json", false, "print the record as JSON and nothing else")
	cmd.Flags().StringVar(&drawing, "figure", "", "draw field lines and equipotentials as SVG into `FILE`")
	return cmd
}
