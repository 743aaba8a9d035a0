package main

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"runtime"
	"strings"
	"sync"
	"text/tabwriter"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// outcome is what became of one bench of a batch.
type outcome struct {
	record *reduce.Record
	err    error
}

// many reduces several benches side by side and prints a summary, in the order
// given.
func (o *reduceOptions) many(ctx context.Context, dirs []string, stdout, stderr io.Writer) error {
	if o.html != "" || o.figures != "" {
		return fmt.Errorf("--html and --figures are for one folder; there are %d", len(dirs))
	}
	results := make([]outcome, len(dirs))
	next := make(chan int)
	var wg sync.WaitGroup
	for range min(runtime.GOMAXPROCS(0), len(dirs)) {
		wg.Add(1)
		go func() {
			defer wg.Done()
			for i := range next {
				results[i] = o.member(ctx, dirs[i])
			}
		}()
	}
	for i := range dirs {
		next <- i
	}
	close(next)
	wg.Wait()
	if err := ctx.Err(); err != nil {
		done := 0
		for _, r := range results {
			if r.record != nil {
				done++
			}
		}
		return cell.Stopped(fmt.Sprintf("after %d of %d benches", done, len(dirs)), err)
	}
	bad := 0
	for _, r := range results {
		if r.err != nil {
			bad++
		}
	}
	var out bytes.Buffer
	var err error
	if o.json {
		err = batchJSON(&out, results)
	} else {
		batchTable(&out, dirs, results)
	}
	if err != nil {
		return err
	}
	if _, err := stdout.Write(out.Bytes()); err != nil {
		return err
	}
	for i, r := range results {
		if r.err == nil {
			continue
		}
		msg := r.err.Error()
		if dir := filepath.Clean(dirs[i]); !strings.HasPrefix(msg, dir) {
			msg = dir + ": " + msg
		}
		fmt.Fprintf(stderr, "guardring: %s\n", cell.Visible(msg))
	}
	if bad > 0 {
		return fmt.Errorf("%d of %d benches are bad", bad, len(dirs))
	}
	return nil
}

// member reduces one bench of a batch; a panic in it is its error.
func (o *reduceOptions) member(ctx context.Context, dir string) (r outcome) {
	defer func() {
		if p := recover(); p != nil {
			r = outcome{err: fmt.Errorf("%s: internal error: %v", dir, p)}
		}
	}()
	b, err := bench.Open(dir)
	if err != nil {
		return outcome{err: err}
	}
	res, err := reduce.Run(ctx, b, o.settings)
	if err != nil {
		return outcome{err: err}
	}
	r.record = &res.Record
	r.err = unsettled(dir, &res.Record)
	return r
}

func batchJSON(w io.Writer, results []outcome) error {
	list := make([]*reduce.Record, 0, len(results))
	for _, r := range results {
		if r.record != nil {
			list = append(list, r.record)
		}
	}
	return writeJSON(w, map[string]any{"format": 1, "results": list})
}

// batchTable prints a line a bench: its first measurand, how well the fit
// describes the readings, and how many warnings to read.
func batchTable(w io.Writer, dirs []string, results []outcome) {
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', 0)
	fmt.Fprintln(t, "bench\tmeasurand\tresult\trows\tchi-squared/dof\tp\twarnings")
	for i, r := range results {
		name := cell.Visible(strings.ReplaceAll(filepath.Clean(dirs[i]), "\n", `\n`))
		if r.record == nil {
			fmt.Fprintf(t, "%s\tbad: %s\n", name, cell.Visible(firstLine(r.err)))
			continue
		}
		rec := r.record
		what, value := "none", rec.Fit.Status
		if len(rec.Measurands) > 0 {
			m := rec.Measurands[0]
			u, err := si.ParseUnit(m.Unit)
			if err != nil {
				u = si.One
			}
			u = u.Suited(float64(m.Value), float64(m.U))
			what, value = figure.Words(m.Name), si.Short(float64(m.Value), float64(m.U), u)
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%d\t%.4g/%d\t%s\t%d\n", name, what, value, rec.Fit.Rows,
			float64(rec.Fit.ChiSquared), rec.Fit.DOF, probability(float64(rec.Fit.PValue)), len(rec.Warnings))
	}
	// The writer below is memory.
	_ = t.Flush()
}

func probability(p float64) string {
	if p != p {
		return "unknown"
	}
	if p < 0.001 {
		return "< 0.001"
	}
	return fmt.Sprintf("%.3f", p)
}

// firstLine is the first line of a message.
func firstLine(err error) string {
	if err == nil {
		err = errors.New("unknown")
	}
	s, _, _ := strings.Cut(err.Error(), "\n")
	return s
}
