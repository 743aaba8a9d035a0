package replay

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// maxRecord bounds a record file, in bytes: a million rows fit.
const maxRecord = 1 << 30

// recordHead is what every kind of record begins with.
type recordHead struct {
	Format int              `json:"format"`
	Run    reduce.RunRecord `json:"run"`
	Inputs []reduce.Input   `json:"inputs"`
	Rows   json.RawMessage  `json:"rows"`
}

// readHead reads the beginning of a record.
func readHead(data []byte) (*recordHead, error) {
	var h recordHead
	if err := json.Unmarshal(data, &h); err != nil {
		return nil, fmt.Errorf("this is no record: %w", err)
	}
	switch {
	case h.Format == 0 || h.Run.Command == "":
		return nil, errors.New("this is no record of a result: format and run.command are due, as `guardring reduce DIR --json` writes them")
	case h.Format != 1:
		return nil, fmt.Errorf("records of format %d are not known here, only format 1 is; use a newer guardring", h.Format)
	case len(h.Inputs) == 0:
		return nil, errors.New("the record names no inputs")
	}
	return &h, nil
}

// An InputProblem is an input of a record that is missing or is not what it was.
type InputProblem struct {
	File           string // as the record names it
	Path           string // where it was looked for
	Recorded, Note string // SHA-256 of the record; what was found instead
	Missing        bool
}

// Error names the file by its hash.
func (e *InputProblem) Error() string {
	if e.Missing {
		return fmt.Sprintf("input %s (SHA-256 %s) is missing: looked for it at %s", e.File, e.Recorded, e.Path)
	}
	return fmt.Sprintf("input %s: SHA-256 %s is recorded, %s", e.File, e.Recorded, e.Note)
}

// checkInputs compares the inputs in folder dir with what the record says of them.
func checkInputs(dir string, inputs []reduce.Input) (missing, changed []*InputProblem, err error) {
	for _, in := range inputs {
		if !filepath.IsLocal(filepath.FromSlash(in.File)) {
			return nil, nil, fmt.Errorf("input %q leads out of the folder of the record", in.File)
		}
		path := filepath.Join(dir, filepath.FromSlash(in.File))
		sum, err := fileSum(path)
		switch {
		case errors.Is(err, fs.ErrNotExist):
			missing = append(missing, &InputProblem{File: in.File, Path: path, Recorded: in.SHA256, Missing: true})
		case err != nil:
			return nil, nil, err
		case sum != in.SHA256:
			changed = append(changed, &InputProblem{File: in.File, Path: path, Recorded: in.SHA256, Note: "the file has " + sum})
		}
	}
	return missing, changed, nil
}

// fileSum is the SHA-256 of an ordinary file.
func fileSum(path string) (string, error) {
	f, _, err := openFile(path)
	if err != nil {
		return "", err
	}
	defer f.Close()
	h := sha256.New()
	if _, err := io.Copy(h, f); err != nil {
		return "", fmt.Errorf("%s: %w", path, err)
	}
	return hex.EncodeToString(h.Sum(nil)), nil
}

func sumOf(data []byte) string {
	s := sha256.Sum256(data)
	return hex.EncodeToString(s[:])
}

// RunRecord does the work that a record file tells of again, from the inputs that
// it names, and compares the records. An input that is missing is an error
// (*InputProblem) that names its SHA-256; one that has changed is a difference.
func RunRecord(ctx context.Context, path string, s Settings) (*Comparison, error) {
	cmp, err := newComparison(path, s.Tolerance)
	if err != nil {
		return nil, err
	}
	if len(s.Set) > 0 {
		return nil, fmt.Errorf("%s is a record, which has no settings to set; that is for notebooks", path)
	}
	data, err := readBounded(path, maxRecord)
	if err != nil {
		return nil, err
	}
	stored, err := parseRecord(data)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	head, err := readHead(data)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	dir := s.Inputs
	if dir == "" {
		dir = filepath.Dir(path)
	}
	missing, changed, err := checkInputs(dir, head.Inputs)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if len(missing) > 0 {
		errs := make([]error, len(missing), len(missing)+1)
		for i, m := range missing {
			errs[i] = m
		}
		errs = append(errs, errors.New("a record stands beside its inputs; give their folder with --inputs when it does not"))
		return nil, fmt.Errorf("%s: %w", path, errors.Join(errs...))
	}
	now, err := again(ctx, dir, head)
	if err != nil {
		for _, c := range changed { // the likely reason comes with the error
			err = fmt.Errorf("%w\n%w", c, err)
		}
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	v, err := marshalled(now)
	if err != nil {
		return nil, err
	}
	cmp.records("", stored, v)
	return cmp, nil
}

// parseRecord reads a record for comparison.
func parseRecord(data []byte) (*value, error) {
	d, err := parseDocument(data)
	if err != nil {
		return nil, err
	}
	if d.root.kind != object {
		return nil, errors.New("this is no record: an object is due")
	}
	return d.root, nil
}

// again does the work of a record and returns the new record.
func again(ctx context.Context, dir string, h *recordHead) (any, error) {
	o := &options{left: map[string]string{}}
	for k, v := range h.Run.Options {
		o.left[k] = v
	}
	switch h.Run.Command {
	case "reduce", "certificate":
		s := reduce.Settings{Seed: h.Run.Seed, Trials: h.Run.Trials, LawOnly: o.flag("law-only"), Probability: o.number("probability"),
			Digits: o.count("digits"), Rows: h.Rows != nil, Command: h.Run.Command}
		if err := o.err(); err != nil {
			return nil, err
		}
		if !s.LawOnly && s.Trials < 1 {
			return nil, fmt.Errorf("run.trials is %d without the option law-only", s.Trials)
		}
		if h.Inputs[0].File != "bench.toml" {
			return nil, fmt.Errorf("the first input is %q; a reduction starts from bench.toml", h.Inputs[0].File)
		}
		b, err := bench.Open(dir)
		if err != nil {
			return nil, err
		}
		r, err := reduce.Run(ctx, b, s)
		if err != nil {
			return nil, err
		}
		return &r.Record, nil
	case "propagate", "merge":
		s := reduce.PropagateSettings{Seed: h.Run.Seed, Trials: int64(h.Run.Trials), LawOnly: o.flag("law-only"), SecondOrder: o.flag("second-order"),
			Probability: o.number("probability"), Digits: o.count("digits"), Command: h.Run.Command}
		if o.left["trials"] == "adaptive" {
			s.Adaptive, s.Trials = true, 0
			delete(o.left, "trials")
		}
		if err := o.err(); err != nil {
			return nil, err
		}
		b, err := bench.OpenBudget(filepath.Join(dir, filepath.FromSlash(h.Inputs[0].File)))
		if err != nil {
			return nil, err
		}
		r, err := reduce.Propagate(ctx, b, s)
		if err != nil {
			return nil, err
		}
		return &r.Record, nil
	case "fit":
		s, err := o.fit(h)
		if err != nil {
			return nil, err
		}
		name := h.Inputs[0].File
		f, err := os.Open(filepath.Join(dir, filepath.FromSlash(name)))
		if err != nil {
			return nil, err
		}
		defer f.Close()
		r, err := reduce.FitCSV(ctx, f, name, s)
		if err != nil {
			return nil, err
		}
		return &r.Record, nil
	}
	return nil, fmt.Errorf("run.command %q can't be done again; reduce, fit and propagate can", h.Run.Command)
}

// options takes the options of a record one by one; what is left is not known.
type options struct {
	left map[string]string
	errs []error
}

func (o *options) word(key string) string {
	v := o.left[key]
	delete(o.left, key)
	return v
}

func (o *options) flag(key string) bool {
	switch v := o.word(key); v {
	case "true":
		return true
	case "", "false":
		return false
	default:
		o.errs = append(o.errs, fmt.Errorf("run.options.%s is %q; true is due", key, v))
		return false
	}
}

func (o *options) number(key string) float64 {
	v := o.word(key)
	if v == "" {
		return 0
	}
	return o.parse(key, v)
}

func (o *options) parse(key, v string) float64 {
	f, err := strconv.ParseFloat(v, 64)
	if err != nil {
		o.errs = append(o.errs, fmt.Errorf("run.options.%s: %q is no number", key, v))
	}
	return f
}

func (o *options) count(key string) int {
	v := o.word(key)
	if v == "" {
		return 0
	}
	n, err := strconv.Atoi(v)
	if err != nil || n < 0 {
		o.errs = append(o.errs, fmt.Errorf("run.options.%s: %q is no count", key, v))
	}
	return n
}

// list takes an option of the form NAME=VALUE,NAME=VALUE apart.
func (o *options) list(key string, each func(name, val string)) {
	v := o.word(key)
	if v == "" {
		return
	}
	for _, part := range strings.Split(v, ",") {
		name, val, _ := strings.Cut(part, "=")
		each(name, val)
	}
}

// err is what was wrong with the options, those not known among it.
func (o *options) err() error {
	known := []string{"law-only", "probability", "digits", "trials", "second-order", "formula", "response", "start", "fix", "bound", "prior",
		"noise", "predictor-noise", "weights", "effective-variance", "profile", "robust", "bootstrap", "separator", "decimal", "missing"}
	var keys []string
	for k := range o.left {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	for _, k := range keys {
		e := fmt.Errorf("run.options.%s is not known", k)
		if s := si.Suggest(k, known); s != "" && s != k {
			e = fmt.Errorf("%w; did you mean %s?", e, s)
		}
		o.errs = append(o.errs, e)
	}
	return errors.Join(o.errs...)
}

// fit reads the options of a fit.
func (o *options) fit(h *recordHead) (reduce.FitSettings, error) {
	s := reduce.FitSettings{Seed: h.Run.Seed, Rows: h.Rows != nil, Command: h.Run.Command,
		Formula: o.word("formula"), Response: o.word("response"), Noise: o.word("noise"), Weights: o.word("weights"),
		EffectiveVariance: o.flag("effective-variance"), Profile: o.flag("profile"), Robust: o.flag("robust"),
		Bootstrap: o.count("bootstrap"), Probability: o.number("probability"),
		Start: map[string]float64{}, Bounds: map[string][2]float64{}, Priors: map[string]reduce.Prior{}, PredictorNoise: map[string]string{}}
	o.list("start", func(n, v string) { s.Start[n] = o.parse("start", v) })
	o.list("fix", func(n, _ string) { s.Fixed = append(s.Fixed, n) })
	o.list("bound", func(n, v string) {
		low, high, _ := strings.Cut(v, ":")
		b := [2]float64{math.Inf(-1), math.Inf(1)}
		for i, e := range []string{low, high} {
			if e != "" {
				b[i] = o.parse("bound", e)
			}
		}
		s.Bounds[n] = b
	})
	o.list("prior", func(n, v string) {
		val, u, _ := strings.Cut(v, "±")
		s.Priors[n] = reduce.Prior{Value: reduce.Number(o.parse("prior", val)), U: reduce.Number(o.parse("prior", u))}
	})
	o.list("predictor-noise", func(n, v string) { s.PredictorNoise[n] = v })
	var err error
	if s.CSV, err = reduce.CSVOptions(o.word("separator"), o.word("decimal"), o.word("missing")); err != nil {
		o.errs = append(o.errs, fmt.Errorf("run.options.%w", err))
	}
	return s, o.err()
}

// isRecord reports whether data looks like a record of a result.
func isRecord(data []byte) bool {
	if !bytes.HasPrefix(bytes.TrimLeft(data, " \t\r\n"), []byte("{")) {
		return false
	}
	_, err := readHead(data)
	return err == nil
}
