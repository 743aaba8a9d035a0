package replay

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"time"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/kernel"
	"example.org/guardring/pkg/lab"
	"example.org/guardring/pkg/reduce"
)

// Settings say how to replay. The zero Settings are the defaults.
type Settings struct {
	// Set gives settings of a notebook other values.
	Set []Assignment
	// Tolerance is the largest difference that counts as agreement, over the larger
	// of the two numbers and their standard uncertainty; 0: DefaultTolerance.
	Tolerance float64
	// Inputs is the folder of a record's inputs; "": the record's own.
	Inputs string
	// Kernel is the kernel's binary; "": the installed one, else one that is built.
	Kernel string
	// Stderr takes what the kernel and its compilation say; nil drops it.
	Stderr io.Writer
}

// A NotebookReplay is a notebook that was run again.
type NotebookReplay struct {
	Comparison *Comparison
	Notebook   *Notebook // with the outputs of this run
}

// A CellFailure is a cell that ended in an error.
type CellFailure struct {
	Notebook, Cell string
	Err            error
	// Inputs are those of the stored records that are missing or have changed, the
	// likely reason.
	Inputs []*InputProblem
}

// Error tells the notebook, the cell and what it said.
func (e *CellFailure) Error() string {
	s := fmt.Sprintf("%s: %s failed, the cells after it were not run: %v", e.Notebook, e.Cell, e.Err)
	for _, p := range e.Inputs {
		s += "\n" + p.Error()
	}
	return s
}

// Unwrap returns the error of the cell.
func (e *CellFailure) Unwrap() error { return e.Err }

// RunNotebook runs the notebook at path from a fresh kernel, in the notebook's
// folder, and compares every output with the stored one. It writes nothing. A cell
// that fails ends the run with a *CellFailure, unless it is tagged
// raises-exception. Notebooks run code: replay only what you would run.
func RunNotebook(ctx context.Context, path string, s Settings) (*NotebookReplay, error) {
	cmp, err := newComparison(path, s.Tolerance)
	if err != nil {
		return nil, err
	}
	nb, err := OpenNotebook(path)
	if err != nil {
		return nil, err
	}
	if err := nb.ours(); err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if err := nb.apply(s.Set); err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	launch, err := findKernel(ctx, s, cmp)
	if err != nil {
		return nil, err
	}
	if launch.Dir, err = filepath.Abs(filepath.Dir(path)); err != nil {
		return nil, err
	}
	launch.Stderr = s.Stderr
	client, err := kernel.Start(ctx, launch)
	if err != nil {
		return nil, fmt.Errorf("starting the kernel %s: %w", launch.Argv[0], err)
	}
	ended := false
	defer func() {
		if !ended {
			client.Kill()
		}
	}()
	out, err := nb.copyNotebook()
	if err != nil {
		return nil, err
	}
	if err := nb.run(ctx, client, out, cmp); err != nil {
		var f *CellFailure
		if errors.As(err, &f) && ctx.Err() == nil {
			f.Notebook, f.Inputs = path, nb.inputProblems(launch.Dir)
			return nil, f
		}
		if ctx.Err() != nil { // an interrupt also ends the cell, which is then no failure of its own
			err = ctx.Err()
		}
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	ended = true
	stop, cancel := context.WithTimeout(context.WithoutCancel(ctx), 10*time.Second)
	defer cancel()
	if err := client.Shutdown(stop, false); err != nil {
		cmp.note("the kernel did not end when asked: %v", err)
	}
	return &NotebookReplay{Comparison: cmp, Notebook: out}, nil
}

// run executes the cells, puts their outputs into out and compares.
func (nb *Notebook) run(ctx context.Context, client *kernel.Client, out *Notebook, cmp *Comparison) error {
	total := int64(0)
	stored := 0
	for _, c := range nb.cells {
		if c.kind == "code" {
			total++
			stored += len(c.outputs())
		}
	}
	count := 0
	for i, c := range nb.cells {
		if c.kind != "code" {
			continue
		}
		cell.Report(ctx, "running the notebook", int64(count), total)
		count++
		var outputs []*value
		if !c.blank() {
			e, err := client.Execute(ctx, c.source, kernel.ExecuteOptions{GoOn: c.tagged(tagRaises)})
			if err != nil {
				return fmt.Errorf("%s: %w", c.place(), err)
			}
			if err := e.Err(); err != nil && !c.tagged(tagRaises) {
				return &CellFailure{Cell: c.place(), Err: err}
			} else if err == nil && c.tagged(tagRaises) {
				cmp.note("%s is tagged %s and did not fail", c.place(), tagRaises)
			}
			for _, o := range e.Outputs {
				v, err := outputValue(o, count)
				if err != nil {
					return fmt.Errorf("%s: %w", c.place(), err)
				}
				outputs = append(outputs, v)
			}
		}
		cmp.Cells++
		if stored > 0 {
			cmp.compareCell(c, outputs)
		}
		to := out.cells[i].v
		to.set("outputs", &value{kind: array, items: outputs})
		to.set("execution_count", intValue(count))
	}
	cell.Report(ctx, "running the notebook", total, total)
	switch {
	case stored == 0:
		cmp.note("the notebook holds no outputs: nothing could be compared")
	case cmp.Records == 0:
		cmp.note("no output holds a record (%s): only printed numbers and figures were compared", lab.ResultMIME)
	}
	return nil
}

// inputProblems compares the inputs that the stored records name with the files in
// the folders that the cells name.
func (nb *Notebook) inputProblems(dir string) []*InputProblem {
	folders := []string{dir}
	var deeper []string // datasets in a folder that a cell names
	var inputs []reduce.Input
	for _, c := range nb.cells {
		if c.kind != "code" {
			continue
		}
		for _, s := range stringsOf(c.source) {
			if p := filepath.FromSlash(s); !filepath.IsAbs(p) {
				p = filepath.Join(dir, p)
				folders = append(folders, p, filepath.Dir(p))
				deeper = append(deeper, datasetsIn(p)...)
			}
		}
		for _, o := range c.outputs() {
			if h, err := recordOf(o); err == nil && h != nil {
				inputs = append(inputs, h.Inputs...)
			}
		}
	}
	var out []*InputProblem
	told := map[reduce.Input]bool{}
	for _, in := range inputs {
		key := reduce.Input{File: in.File, SHA256: in.SHA256}
		if in.File == frameInput || told[key] || !filepath.IsLocal(filepath.FromSlash(in.File)) {
			continue
		}
		told[key] = true
		problem := &InputProblem{File: in.File, Path: "the folders that the cells name", Recorded: in.SHA256, Missing: true}
		for _, folder := range folders {
			sum, err := fileSum(filepath.Join(folder, filepath.FromSlash(in.File)))
			switch {
			case err != nil: // not there
			case sum == in.SHA256:
				problem = nil
			case problem.Missing:
				problem.Missing, problem.Note = false, "the file in "+folder+" has "+sum
			}
			if problem == nil {
				break
			}
		}
		for _, folder := range deeper {
			if sum, err := fileSum(filepath.Join(folder, filepath.FromSlash(in.File))); err == nil && sum == in.SHA256 {
				problem = nil
			}
		}
		if problem != nil {
			out = append(out, problem)
		}
	}
	return out
}

// findKernel finds the kernel's binary: the one asked for, the installed one, or
// one that it builds into the user's cache.
func findKernel(ctx context.Context, s Settings, cmp *Comparison) (kernel.Launch, error) {
	if s.Kernel != "" {
		binary, err := filepath.Abs(s.Kernel)
		if err != nil {
			return kernel.Launch{}, err
		}
		if info, err := os.Stat(binary); err != nil || !info.Mode().IsRegular() {
			return kernel.Launch{}, fmt.Errorf("%s is no kernel: a file made by `guardring kernel build` is due", s.Kernel)
		}
		return kernel.LaunchOf(binary), nil
	}
	found, err := kernel.List(ctx)
	if err != nil {
		return kernel.Launch{}, err
	}
	for _, k := range found {
		if k.Problem == "" {
			if k.Version != reduce.Version {
				cmp.note("the kernel installed in %s is of guardring %s, this is %s", k.Dir, k.Version, reduce.Version)
			}
			return kernel.LaunchOf(k.Binary), nil
		}
	}
	source, err := kernel.FindSource("")
	if err != nil {
		return kernel.Launch{}, fmt.Errorf("no kernel is installed and none can be built here: %w; `guardring kernel install` installs one", err)
	}
	cache, err := os.UserCacheDir()
	if err != nil {
		return kernel.Launch{}, fmt.Errorf("no place for a kernel to be built in: %w", err)
	}
	binary := filepath.Join(cache, "guardring", "guardring-kernel")
	if _, err := kernel.Build(ctx, source, binary, s.Stderr); err != nil {
		return kernel.Launch{}, fmt.Errorf("no kernel is installed, and building one failed: %w", err)
	}
	return kernel.LaunchOf(binary), nil
}
