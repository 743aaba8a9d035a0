package main

import (
	"errors"
	"fmt"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/replay"
	"example.org/guardring/pkg/safefile"
)

func packCommand() *cobra.Command {
	var s replay.PackSettings
	cmd := &cobra.Command{
		Use:   "pack DIR|FILE.ipynb -o FILE.zip",
		Short: "Put a dataset or a notebook, its inputs and results into one file that another laboratory can replay",
		Long: `Pack writes a zip that "guardring replay" verifies and does again.

Of a dataset it takes every file of the folder that is not hidden; when none of
them is the record of a result, the bench is reduced and result.json is added. Of
a notebook it takes the files and dataset folders that the strings in its cells
name.
Every input of a recorded result must be there, with the SHA-256 of the record.

SHA256SUMS, go.sum with the sums of the modules of this program,
ro-crate-metadata.json (RO-Crate 1.1) and datapackage.json (Data Package 1, units
as UCUM codes) come with it. The same files with the same --date give the same
bytes.`,
		Example: `  guardring pack datasets/attracted-disc -o attracted-disc.zip
  guardring pack notebooks/attracted-disc.ipynb -o attracted-disc.zip --license CC-BY-4.0`,
		Args: names("one bench folder or notebook", 1, 1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if s.Output == "" {
				return errors.New("-o FILE.zip is missing")
			}
			if !strings.EqualFold(filepath.Ext(s.Output), ".zip") {
				return fmt.Errorf("%s: the name of a pack ends in .zip", s.Output)
			}
			if s.Reduce.Trials < 1 {
				return fmt.Errorf("--trials %d: at least 1 is needed; use --law-only for none", s.Reduce.Trials)
			}
			p, err := replay.Pack(cmd.Context(), args[0], s)
			if err != nil {
				return err
			}
			if err := safefile.Write(s.Output, p.Write); err != nil {
				return err
			}
			out := cmd.OutOrStdout()
			for _, f := range p.Files {
				if _, err := fmt.Fprintf(out, "%s  %9d  %s\n", f.SHA256, f.Bytes, f.Name); err != nil {
					return err
				}
			}
			_, err = fmt.Fprintf(out, "packed %d files into %s, dated %s\n", len(p.Files), s.Output, p.Date)
			return err
		},
	}
	f := cmd.Flags()
	f.StringVarP(&s.Output, "output", "o", "", "`FILE.zip` to write")
	f.StringArrayVar(&s.With, "with", nil, "take in this `FILE` or folder too; may be repeated")
	f.StringVar(&s.Date, "date", "", "date of publication, `YYYY-MM-DD` (default: SOURCE_DATE_EPOCH, else that of the newest file)")
	f.StringVar(&s.License, "license", "", "licence of what is packed: an SPDX `ID`, a URL, or words")
	f.Uint64Var(&s.Reduce.Seed, "seed", 0, "seed `N` of the trials, for a dataset without a record")
	countFlag(cmd, &s.Reduce.Trials, "trials", reduce.DefaultTrials, "number `N` of trials, likewise")
	f.BoolVar(&s.Reduce.LawOnly, "law-only", false, "no Monte Carlo check, likewise")
	return cmd
}
