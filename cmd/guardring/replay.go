package main

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/replay"
	"example.org/guardring/pkg/safefile"
)

// replayOptions are the flags of replay.
type replayOptions struct {
	set             []string
	output          string
	overwrite, json bool
	settings        replay.Settings
}

// errDiffers is what a replay that differs ends with, after its report.
var errDiffers = errors.New("the replay differs from what is stored")

func replayCommand() *cobra.Command {
	var o replayOptions
	cmd := &cobra.Command{
		Use:   "replay FILE.ipynb|RESULT.json|PACK.zip",
		Short: "Run a notebook, a recorded result or a pack again and compare the numbers",
		Long: `Replay does recorded work again and compares every number with the stored one.

A notebook is run from a fresh kernel in its own folder, without Python; the
notebook with the new outputs is written beside it as FILE.replayed.ipynb. A
record (reduce --json, fit --json, propagate --json) is done again from the
inputs that it names, which stand beside it or in --inputs. A pack is unpacked
into a temporary folder, its checksums are verified, and what it holds is
replayed.

Numbers agree when they differ by no more than the tolerance times the larger of
the two and the standard uncertainty that is known of them. What differs is listed
by cell, name, both values and the difference in units of u; the exit code is
then 1.

Notebooks run code: replay only what you would run yourself.`,
		Example: `  guardring replay notebooks/attracted-disc.ipynb
  guardring replay notebooks/attracted-disc.ipynb --set seed=7 --set trials=100000
  guardring replay datasets/attracted-disc/result.json
  guardring replay attracted-disc.zip`,
		Args: names("one notebook, record or pack", 1, 1),
		RunE: func(cmd *cobra.Command, args []string) error {
			for _, s := range o.set {
				a, err := replay.ParseAssignment(s)
				if err != nil {
					return fmt.Errorf("--set %w", err)
				}
				o.settings.Set = append(o.settings.Set, a)
			}
			if !(o.settings.Tolerance > 0) {
				return fmt.Errorf("--tolerance %g: a positive number is due", o.settings.Tolerance)
			}
			o.settings.Stderr = cmd.ErrOrStderr()
			return o.run(cmd.Context(), args[0], cmd.OutOrStdout())
		},
	}
	f := cmd.Flags()
	f.StringArrayVar(&o.set, "set", nil, "give a setting of the notebook another value, `NAME=VALUE`; may be repeated")
	f.StringVarP(&o.output, "output", "o", "", "write the notebook with the new outputs to `FILE`")
	f.BoolVar(&o.overwrite, "overwrite", false, "write it over the notebook")
	f.Float64Var(&o.settings.Tolerance, "tolerance", replay.DefaultTolerance, "largest difference `T` that counts as agreement, relative to the number or its u")
	f.StringVar(&o.settings.Inputs, "inputs", "", "folder `DIR` of a record's inputs (default: the record's own)")
	f.StringVar(&o.settings.Kernel, "kernel", "", "kernel `FILE` to use (default: the installed one, else one is built)")
	f.BoolVar(&o.json, "json", false, "print what was compared as JSON and nothing else")
	cmd.MarkFlagsMutuallyExclusive("output", "overwrite")
	return cmd
}

// run replays one file.
func (o *replayOptions) run(ctx context.Context, path string, stdout io.Writer) error {
	switch strings.ToLower(filepath.Ext(path)) {
	case ".ipynb":
		if o.settings.Inputs != "" {
			return errors.New("--inputs is for records; a notebook names its inputs itself")
		}
		r, err := replay.RunNotebook(ctx, path, o.settings)
		if err != nil {
			return err
		}
		if err := replaceable(o.target(path)); err != nil {
			return err
		}
		if err := safefile.WriteBytes(o.target(path), r.Notebook.Bytes()); err != nil {
			return err
		}
		return o.report(stdout, r.Comparison)
	case ".json":
		if err := o.noNotebook("a record"); err != nil {
			return err
		}
		c, err := replay.RunRecord(ctx, path, o.settings)
		if err != nil {
			return err
		}
		return o.report(stdout, c)
	case ".zip":
		if err := o.noNotebook("a pack"); err != nil {
			return err
		}
		all, err := replay.RunPack(ctx, path, o.settings)
		if err != nil {
			return err
		}
		return o.report(stdout, all...)
	}
	return fmt.Errorf("%s: a notebook (.ipynb), a record (.json) or a pack (.zip) is due", path)
}

// noNotebook refuses flags that are about writing a notebook.
func (o *replayOptions) noNotebook(what string) error {
	if o.output != "" || o.overwrite {
		return fmt.Errorf("--output and --overwrite are for notebooks; replaying %s writes nothing", what)
	}
	return nil
}

// target is where the notebook with the new outputs goes.
func (o *replayOptions) target(path string) string {
	switch {
	case o.output != "":
		return o.output
	case o.overwrite:
		return path
	}
	return strings.TrimSuffix(path, filepath.Ext(path)) + ".replayed.ipynb"
}

// report prints the comparisons and says whether all agree.
func (o *replayOptions) report(stdout io.Writer, all ...*replay.Comparison) error {
	var out bytes.Buffer
	same := true
	for _, c := range all {
		same = same && c.Same()
		if !o.json {
			if err := c.WriteText(&out); err != nil {
				return err
			}
		}
	}
	if o.json {
		doc := struct {
			Format      int                  `json:"format"`
			Same        bool                 `json:"same"`
			Comparisons []*replay.Comparison `json:"comparisons"`
		}{1, same, all}
		if err := writeJSON(&out, doc); err != nil {
			return err
		}
	}
	if _, err := stdout.Write(out.Bytes()); err != nil {
		return err
	}
	if !same {
		return differs{errDiffers}
	}
	return nil
}
