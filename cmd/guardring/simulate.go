package main

import (
	"fmt"
	"path/filepath"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/plan"
)

func simulateCommand() *cobra.Command {
	var out string
	var seed uint64
	cmd := &cobra.Command{
		Use:   "simulate DIR -o OUT",
		Short: "Make readings of a bench from a stated truth",
		Long: `Simulate reads DIR/bench.toml with its readings and DIR/simulation.toml, which
states the truth; keeps the settings and makes the response anew with noise,
grouped errors, gains, offsets, what the instruments have moved by since their
calibration, zero and drift; and writes the bench with those readings into the new
folder OUT.`,
		Example: "  guardring simulate datasets/attracted-disc -o again",
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
			if !cmd.Flags().Changed("seed") {
				seed = truth.Seed
			}
			y, err := plan.Simulate(b, truth, seed)
			if err != nil {
				return err
			}
			made, err := plan.Files(b, y)
			if err != nil {
				return err
			}
			if err := mustBeEmpty(out); err != nil {
				return err
			}
			var files []outFile
			for _, f := range made {
				files = append(files, outFile{filepath.Join(out, filepath.FromSlash(f.Name)), f.Data})
			}
			if err := writeFiles(files); err != nil {
				return err
			}
			for _, f := range files {
				fmt.Fprintln(cmd.OutOrStdout(), f.path)
			}
			return nil
		},
	}
	cmd.Flags().StringVarP(&out, "output", "o", "", "the new folder `OUT`")
	cmd.Flags().Uint64Var(&seed, "seed", 0, "seed `N`; default: the one in simulation.toml")
	if err := cmd.MarkFlagRequired("output"); err != nil {
		panic(err) // the flag is defined above
	}
	return cmd
}
