package main

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
	"example.org/guardring/pkg/si"
)

// fitOptions are the flags of fit.
type fitOptions struct {
	html, figures                        string
	json                                 bool
	start, fix, bound, prior, predictors []string
	missing                              []string
	separator, decimal, probability      string
	settings                             reduce.FitSettings
}

func fitCommand() *cobra.Command {
	var o fitOptions
	cmd := &cobra.Command{
		Use:   "fit FILE.csv --formula FORMULA [--response COLUMN] --start NAME=VALUE,...",
		Short: "Fit a formula to the columns of a CSV file",
		Long: `Fit estimates the parameters of a formula by least squares, and says whether the
estimate can be trusted. FILE may be - for standard input.

A header NAME/UNIT is the variable NAME, converted to SI. The other names in the
formula are parameters; their starts, bounds and priors are SI. When every column
in use has a unit, dimensions are checked and the units of the parameters follow.

The formula is a Go expression of names, numbers, + - * /, parentheses and
sqrt pow exp log sin cos tan asin acos atan atan2 sinh cosh tanh abs min max, with
the constants pi eps0 qe ke g0.

A formula with an equals sign is an equation that holds between the columns it
names, such as a circle through points. It predicts no response; all its columns are
adjusted (errors in variables), so that each needs its --predictor-noise, 0 for one
that is exact.

Without --noise the uncertainty of the readings is taken from the residuals, and
chi-squared can't test it. With --predictor-noise the fit is one with errors in
variables, or one with --effective-variance.`,
		Example: `  guardring fit gap.csv --formula 'c_s + s/(d+d0)' --response c \
      --start c_s=2e-12,s=7e-14,d0=1e-5 --noise u_c
  guardring fit gap.csv --formula 'c_s + s/(d+d0)' --response c \
      --start c_s=2e-12,s=7e-14,d0=1e-5 --noise '0.02 pF' --predictor-noise 'd=0.5 um'
  guardring fit gap.csv --formula 'c_s + s/(d+d0)' --response c --noise u_c \
      --start c_s=2e-12,s=7e-14 --prior d0=1e-5+-2e-6 --bound c_s=0: --html fit.html
  guardring fit rim.csv --formula 'pow(x-a, 2) + pow(y-b, 2) = pow(r, 2)' \
      --start a=0,b=0,r=0.05 --predictor-noise 'x=2 um,y=2 um'`,
		Args: names("one CSV file", 1, 1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if err := o.read(); err != nil {
				return err
			}
			return o.run(cmd.Context(), args[0], cmd.InOrStdin(), cmd.OutOrStdout(), cmd.ErrOrStderr())
		},
	}
	f := cmd.Flags()
	s := &o.settings
	f.StringVar(&s.Formula, "formula", "", "`FORMULA` for the response, or LEFT = RIGHT between columns")
	f.StringVar(&s.Response, "response", "", "`COLUMN` that the formula predicts; none of an equation")
	f.StringArrayVar(&o.start, "start", nil, "where the search begins, `NAME=VALUE`,... in SI")
	f.StringVar(&s.Noise, "noise", "", "standard uncertainty of one reading of the response, `COLUMN|VALUE` such as '0.3 fF'")
	f.StringArrayVar(&o.predictors, "predictor-noise", nil, "the same for a predictor, `NAME=COLUMN|VALUE`,...")
	f.BoolVar(&s.EffectiveVariance, "effective-variance", false, "treat predictor noise by effective variance instead of errors in variables")
	f.StringArrayVar(&o.fix, "fix", nil, "hold parameters at their start, or at `NAME[=VALUE]`,...")
	f.StringArrayVar(&o.bound, "bound", nil, "keep a parameter within `NAME=LOW:HIGH`; either end may be left out")
	f.StringArrayVar(&o.prior, "prior", nil, "knowledge from outside the readings, `NAME=VALUE+-U`, SI")
	f.StringVar(&s.Weights, "weights", "", "`COLUMN` proportional to 1/u², when only the ratios of the noise are known")
	f.BoolVar(&s.Profile, "profile", false, "intervals from the profile of chi-squared")
	f.BoolVar(&s.Robust, "robust", false, "a second opinion with robust weights")
	countFlag(cmd, &s.Bootstrap, "bootstrap", 0, "intervals from `N` fits to resampled residuals")
	f.StringVar(&o.probability, "probability", "95.45 %", "coverage probability `P` of intervals")
	f.Uint64Var(&s.Seed, "seed", 0, "seed `N` of the bootstrap")
	f.StringVar(&o.decimal, "decimal", "point", "decimal sign of the file, `point|comma`")
	f.StringVar(&o.separator, "separator", "", "`comma|semicolon|tab`; found from the header when not stated")
	f.StringArrayVar(&o.missing, "missing", nil, "`WORD` that means a missing value, besides an empty cell")
	f.BoolVar(&s.Rows, "rows", false, "put every row with its residual into the record")
	f.BoolVar(&o.json, "json", false, "print the record as JSON and nothing else")
	f.StringVar(&o.html, "html", "", "write the report as one HTML `FILE`")
	f.StringVar(&o.figures, "figures", "", "write the figures as SVG into folder `DIR`")
	if err := cmd.MarkFlagRequired("formula"); err != nil {
		panic(err) // the flag is defined above
	}
	return cmd
}

// read turns the flags into settings.
func (o *fitOptions) read() error {
	s := &o.settings
	s.Start, s.Bounds, s.Priors, s.PredictorNoise = map[string]float64{}, map[string][2]float64{}, map[string]reduce.Prior{}, map[string]string{}
	for _, item := range items(o.start) {
		name, text, err := assignment("start", item, "d0=1e-5")
		if err != nil {
			return err
		}
		if _, twice := s.Start[name]; twice {
			return fmt.Errorf("--start: %s is there twice", name)
		}
		if s.Start[name], err = plainNumber("start", name, text); err != nil {
			return err
		}
	}
	for _, item := range items(o.fix) {
		name, text, has := strings.Cut(item, "=")
		name = strings.TrimSpace(name)
		if slices.Contains(s.Fixed, name) {
			return fmt.Errorf("--fix: %s is there twice", name)
		}
		s.Fixed = append(s.Fixed, name)
		if has {
			if _, twice := s.Start[name]; twice {
				return fmt.Errorf("--fix: %s has a start too; state one of them", name)
			}
			v, err := plainNumber("fix", name, text)
			if err != nil {
				return err
			}
			s.Start[name] = v
		}
	}
	for _, item := range items(o.bound) {
		name, text, err := assignment("bound", item, "d0=0:1e-4")
		if err != nil {
			return err
		}
		low, high, ok := strings.Cut(text, ":")
		if !ok {
			return fmt.Errorf("--bound: %q has no colon; write %s=LOW:HIGH, where either end may be left out", item, name)
		}
		b := [2]float64{math.Inf(-1), math.Inf(1)}
		for i, end := range []string{low, high} {
			if strings.TrimSpace(end) == "" {
				continue
			}
			if b[i], err = plainNumber("bound", name, end); err != nil {
				return err
			}
		}
		if _, twice := s.Bounds[name]; twice {
			return fmt.Errorf("--bound: %s is there twice", name)
		}
		s.Bounds[name] = b
	}
	for _, item := range items(o.prior) {
		name, text, err := assignment("prior", item, "d0=1e-5+-2e-6")
		if err != nil {
			return err
		}
		value, u, ok := strings.Cut(strings.ReplaceAll(text, "±", "+-"), "+-")
		if !ok {
			return fmt.Errorf("--prior: %q has no +-; write %s=VALUE+-U with the standard uncertainty U", item, name)
		}
		v, err := plainNumber("prior", name, value)
		if err != nil {
			return err
		}
		d, err := plainNumber("prior", name, u)
		if err != nil {
			return err
		}
		if !(d > 0) {
			return fmt.Errorf("--prior: the standard uncertainty of %s is %s; it must be above zero (to hold a parameter use --fix)", name, strings.TrimSpace(u))
		}
		if _, twice := s.Priors[name]; twice {
			return fmt.Errorf("--prior: %s is there twice", name)
		}
		s.Priors[name] = reduce.Prior{Value: reduce.Number(v), U: reduce.Number(d)}
	}
	for _, item := range items(o.predictors) {
		name, text, err := assignment("predictor-noise", item, "'d=0.5 um'")
		if err != nil {
			return err
		}
		if _, twice := s.PredictorNoise[name]; twice {
			return fmt.Errorf("--predictor-noise: %s is there twice", name)
		}
		s.PredictorNoise[name] = text
	}
	if s.Bootstrap < 0 {
		return fmt.Errorf("--bootstrap %d: a number of replicates is above zero", s.Bootstrap)
	}
	var err error
	if s.Probability, err = probabilityFlag(o.probability); err != nil {
		return err
	}
	if s.CSV, err = reduce.CSVOptions(o.separator, o.decimal, ""); err != nil {
		return fmt.Errorf("--%w", err)
	}
	s.CSV.Missing = o.missing
	return nil
}

// items cuts lists at commas.
func items(flags []string) []string {
	var out []string
	for _, f := range flags {
		for _, item := range strings.Split(f, ",") {
			if item = strings.TrimSpace(item); item != "" {
				out = append(out, item)
			}
		}
	}
	return out
}

// assignment takes NAME=TEXT apart.
func assignment(flag, item, example string) (name, text string, err error) {
	name, text, ok := strings.Cut(item, "=")
	name, text = strings.TrimSpace(name), strings.TrimSpace(text)
	if !ok || name == "" || text == "" {
		return "", "", fmt.Errorf("--%s: %q is no NAME=VALUE, such as %s", flag, item, example)
	}
	return name, text, nil
}

// plainNumber reads a number in SI.
func plainNumber(flag, name, text string) (float64, error) {
	text = strings.TrimSpace(text)
	v, err := strconv.ParseFloat(text, 64)
	// strconv also reads hexadecimal numbers and underscores.
	if err != nil || math.IsNaN(v) || math.IsInf(v, 0) || strings.ContainsAny(text, "xXpP_") {
		if _, _, unit := si.ParseQuantity(text); unit == nil {
			return 0, fmt.Errorf("--%s: %s=%s: write the number alone, in SI units", flag, name, text)
		}
		return 0, fmt.Errorf("--%s: %s=%s is not a number", flag, name, text)
	}
	return v, nil
}

// probabilityFlag reads a coverage probability, "0.95" or "95 %".
func probabilityFlag(text string) (float64, error) {
	p, u, err := si.ParseQuantity(text)
	if err == nil && !u.Dim.IsOne() {
		err = fmt.Errorf("a probability has no unit; write 0.95 or '95 %%'")
	}
	if err == nil {
		err = gum.CheckCoverage(p)
	}
	if err != nil {
		return 0, fmt.Errorf("--probability %s: %w", text, err)
	}
	return p, nil
}

// run fits and prints.
func (o *fitOptions) run(ctx context.Context, path string, stdin io.Reader, stdout, stderr io.Writer) error {
	in, name := stdin, "standard input"
	if path != "-" {
		f, err := os.Open(path)
		if err != nil {
			return err
		}
		defer f.Close()
		in, name = f, filepath.ToSlash(path)
	}
	r, err := reduce.FitCSV(ctx, in, name, o.settings)
	if err != nil {
		return err
	}
	// Everything is made before anything is written, so that a failure leaves no
	// partial output.
	var files []outFile
	if o.html != "" {
		var b bytes.Buffer
		if err := report.FitHTML(&b, r); err != nil {
			return err
		}
		files = append(files, outFile{o.html, b.Bytes()})
	}
	if o.figures != "" {
		all, err := figure.AllOfFit(r)
		if err != nil {
			return err
		}
		if files, err = drawn(files, o.figures, all); err != nil {
			return err
		}
	}
	var record any
	if o.json {
		record = &r.Record
	}
	if err := deliver(stdout, stderr, files, record, func(w io.Writer) error { return report.FitText(w, r) }, r.Record.Warnings); err != nil {
		return err
	}
	if s := r.Record.Fit.Status; s != "converged" {
		return errors.New(name + ": the fit is " + s + ": " + r.Record.Fit.Reason)
	}
	return nil
}
