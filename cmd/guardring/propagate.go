package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
)

// propagateOptions are the flags of propagate and merge.
type propagateOptions struct {
	json                      bool
	html, figures, output     string
	trials, probability, part string
	settings                  reduce.PropagateSettings
}

func (o *propagateOptions) outputFlags(cmd *cobra.Command) {
	f := cmd.Flags()
	f.BoolVar(&o.json, "json", false, "print the record as JSON and nothing else")
	f.StringVar(&o.html, "html", "", "write the report as one HTML `FILE`")
	f.StringVar(&o.figures, "figures", "", "write the figures as SVG into folder `DIR`")
}

func propagateCommand() *cobra.Command {
	var o propagateOptions
	cmd := &cobra.Command{
		Use:   "propagate BUDGET.toml",
		Short: "Propagate a budget of inputs through its formulas",
		Long: `Propagate states the uncertainty of every output of a budget file by the law of
propagation and by Monte Carlo from the same inputs, and says whether the two agree.

A long run can be spread over machines: --part I/N does one part of it and writes it
to a file, and merge joins the files. The result is that of --part 1/1 to the byte,
which is also that of the undivided run with more than ` + strconv.Itoa(gum.SelectionTrials) + ` trials; up to
there an undivided run finds its intervals by selection, without bins.`,
		Example: `  guardring propagate datasets/budgets/plate-permittivity.toml
  guardring propagate budget.toml --trials adaptive --html budget.html
  for i in 1 2 3 4; do
      guardring propagate budget.toml --trials 100000000 --part $i/4 -o part$i.json &
  done; wait; guardring merge part?.json -o budget.json`,
		Args: names("one budget file", 1, 1),
		RunE: func(cmd *cobra.Command, args []string) error {
			index, of, err := o.read(cmd.Flags().Changed("probability"))
			if err != nil {
				return err
			}
			b, err := bench.OpenBudget(args[0])
			if err != nil {
				return err
			}
			if of > 1 {
				return o.onePart(cmd.Context(), b, index, of)
			}
			var p *reduce.Propagation
			if of == 1 {
				p, err = whole(cmd.Context(), b, o.settings)
			} else {
				p, err = reduce.Propagate(cmd.Context(), b, o.settings)
			}
			if err != nil {
				return err
			}
			return o.print(p, cmd.OutOrStdout(), cmd.ErrOrStderr())
		},
	}
	o.outputFlags(cmd)
	f := cmd.Flags()
	f.StringVar(&o.trials, "trials", strconv.Itoa(gum.DefaultTrials), "number `N|adaptive` of Monte Carlo trials, such as 1e8; adaptive: as JCGM 101 7.9 asks for")
	f.Uint64Var(&o.settings.Seed, "seed", 0, "seed `N` of the Monte Carlo trials")
	f.StringVar(&o.probability, "probability", "", "coverage probability `P` (default: that of the budget, or 95.45 %)")
	f.BoolVar(&o.settings.LawOnly, "law-only", false, "no Monte Carlo")
	f.BoolVar(&o.settings.SecondOrder, "second-order", false, "add the second-order terms of the law")
	f.IntVar(&o.settings.Digits, "digits", 1, "significant digits `N` of u for the comparison of law and Monte Carlo, and for adaptive trials")
	f.StringVar(&o.part, "part", "", "do part `I/N` of the trials and write it with -o")
	f.StringVarP(&o.output, "output", "o", "", "`FILE` for the part, or for the record as JSON")
	return cmd
}

// read turns the flags into settings; of is 0 without --part.
func (o *propagateOptions) read(probability bool) (index, of int, err error) {
	s := &o.settings
	switch t := o.trials; {
	case t == "adaptive":
		s.Adaptive = true
	default:
		n, err := wholeNumber(t)
		if err != nil {
			return 0, 0, fmt.Errorf("--trials %s: %w, or adaptive", t, err)
		}
		if n < 1 {
			return 0, 0, fmt.Errorf("--trials %s: at least 1 is needed; use --law-only for none", t)
		}
		s.Trials = n
	}
	if probability {
		if s.Probability, err = probabilityFlag(o.probability); err != nil {
			return 0, 0, err
		}
	}
	if s.Digits < 1 || s.Digits > 4 {
		return 0, 0, fmt.Errorf("--digits %d: 1 to 4 digits of an uncertainty can mean something", s.Digits)
	}
	if s.LawOnly && s.Adaptive {
		return 0, 0, errors.New("--law-only makes no trials; leave out --trials adaptive")
	}
	if o.part == "" {
		return 0, 0, nil
	}
	a, b, ok := strings.Cut(o.part, "/")
	index, e1 := strconv.Atoi(strings.TrimSpace(a))
	of, e2 := strconv.Atoi(strings.TrimSpace(b))
	switch {
	case !ok || e1 != nil || e2 != nil:
		return 0, 0, fmt.Errorf("--part %s: write I/N, such as 3/16", o.part)
	case index < 1 || of < 1 || index > of:
		return 0, 0, fmt.Errorf("--part %s: parts are counted from 1 to their number", o.part)
	case s.Adaptive:
		return 0, 0, errors.New("--part can't be used with --trials adaptive: the number of trials is not known beforehand; state it")
	case s.LawOnly:
		return 0, 0, errors.New("--part cuts the Monte Carlo trials; with --law-only there are none")
	case of > 1 && o.output == "":
		return 0, 0, errors.New("--part needs -o FILE to write the part to")
	case of > 1 && (o.html != "" || o.figures != "" || o.json):
		return 0, 0, errors.New("a part is no result: --json, --html and --figures go with merge")
	}
	return index, of, nil
}

// whole runs all trials as one part, as merged parts do.
func whole(ctx context.Context, b *bench.Budget, s reduce.PropagateSettings) (*reduce.Propagation, error) {
	part, err := reduce.PropagatePart(ctx, b, s, 1, 1)
	if err != nil {
		return nil, err
	}
	var m reduce.PartMerger
	if err := m.Add(part); err != nil {
		return nil, err
	}
	return m.Result()
}

// onePart does a part and writes it.
func (o *propagateOptions) onePart(ctx context.Context, b *bench.Budget, index, of int) error {
	part, err := reduce.PropagatePart(ctx, b, o.settings, index, of)
	if err != nil {
		return err
	}
	data, err := json.Marshal(part)
	if err != nil {
		return err
	}
	return writeFiles([]outFile{{o.output, append(data, '\n')}})
}

// print writes the result where it is asked for.
func (o *propagateOptions) print(p *reduce.Propagation, stdout, stderr io.Writer) error {
	// Everything is made before anything is written, so that a failure leaves no
	// partial output.
	var files []outFile
	if o.html != "" {
		var b bytes.Buffer
		if err := report.PropagationHTML(&b, p); err != nil {
			return err
		}
		files = append(files, outFile{o.html, b.Bytes()})
	}
	if o.figures != "" {
		all, err := figure.AllOfBudget(p)
		if err != nil {
			return err
		}
		if files, err = drawn(files, o.figures, all); err != nil {
			return err
		}
	}
	var record, text bytes.Buffer
	if err := writeJSON(&record, &p.Record); err != nil {
		return err
	}
	if err := report.PropagationText(&text, p); err != nil {
		return err
	}
	if o.output != "" {
		files = append(files, outFile{o.output, record.Bytes()})
	}
	if err := writeFiles(files); err != nil {
		return err
	}
	switch {
	case o.json:
		if _, err := stdout.Write(record.Bytes()); err != nil {
			return err
		}
	case o.output == "":
		if _, err := stdout.Write(text.Bytes()); err != nil {
			return err
		}
		return nil // the text holds the warnings
	}
	for _, w := range p.Record.Warnings {
		fmt.Fprintf(stderr, "guardring: warning: %s\n", cell.Visible(w))
	}
	return nil
}

func mergeCommand() *cobra.Command {
	var o propagateOptions
	cmd := &cobra.Command{
		Use:   "merge PART...",
		Short: "Join the parts of a propagation to its result",
		Long: `Merge joins the files that propagate --part wrote, in any order, and prints what
propagate --part 1/1 prints, to the byte. A part that is missing, there twice or from
another run is an error that names it.`,
		Example: `  guardring merge part?.json
  guardring merge part*.json -o budget.json --html budget.html`,
		Args: names("the files that propagate --part wrote", 1, -1),
		RunE: func(cmd *cobra.Command, args []string) error {
			p, err := joined(cmd.Context(), args)
			if err != nil {
				return err
			}
			return o.print(p, cmd.OutOrStdout(), cmd.ErrOrStderr())
		},
	}
	o.outputFlags(cmd)
	cmd.Flags().StringVarP(&o.output, "output", "o", "", "`FILE` for the record as JSON")
	return cmd
}

// joined reads parts one by one and joins them.
func joined(ctx context.Context, paths []string) (*reduce.Propagation, error) {
	var m reduce.PartMerger
	for n, path := range paths {
		if err := ctx.Err(); err != nil {
			return nil, cell.Stopped(fmt.Sprintf("after %d of %d parts", n, len(paths)), err)
		}
		data, err := readDocument(path)
		if err != nil {
			return nil, err
		}
		part := &gum.Part{}
		if err := json.Unmarshal(data, part); err != nil {
			if r := record(data); r != nil {
				if len(paths) == 1 {
					return r, nil // all of the run, by --part 1/1
				}
				return nil, fmt.Errorf("%s: this is a result, not a part", path)
			}
			return nil, fmt.Errorf("%s: this is no part that propagate --part wrote: %w", path, err)
		}
		part.Source = path
		if err := m.Add(part); err != nil {
			return nil, err
		}
	}
	return m.Result()
}

// record reads the result of a propagation; nil when the data are none.
func record(data []byte) *reduce.Propagation {
	p := &reduce.Propagation{}
	d := json.NewDecoder(bytes.NewReader(data))
	d.DisallowUnknownFields()
	if d.Decode(&p.Record) != nil || p.Record.Format != 1 || len(p.Record.Outputs) == 0 {
		return nil
	}
	return p
}
