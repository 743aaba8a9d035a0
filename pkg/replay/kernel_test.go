package replay

import (
	"bytes"
	"context"
	"errors"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"example.org/guardring/pkg/kernel"
	"example.org/guardring/pkg/lab"
)

// binary is the kernel that runs the notebooks, built once by TestMain; skipReason
// says why there is none.
var (
	binary     string
	skipReason string
)

func TestMain(m *testing.M) { os.Exit(runTests(m)) }

func runTests(m *testing.M) int {
	flag.Parse()
	switch {
	case testing.Short():
		skipReason = "-short: building and driving the kernel takes a while"
	case runtime.GOOS != "linux" && runtime.GOOS != "darwin":
		skipReason = "the kernel is driven on Linux and macOS only"
	default:
		if _, err := exec.LookPath("go"); err != nil {
			skipReason = "no go tool in PATH to build the kernel with"
		}
	}
	if f := flag.Lookup("test.fuzz"); skipReason == "" && f != nil && f.Value.String() != "" {
		skipReason = "fuzzing: no kernel is needed"
	}
	if skipReason == "" {
		dir, err := os.MkdirTemp("", "guardring-replay-test-")
		if err != nil {
			fmt.Fprintln(os.Stderr, err)
			return 1
		}
		defer os.RemoveAll(dir)
		binary = filepath.Join(dir, "guardring-kernel")
		source, err := kernel.FindSource("")
		if err == nil {
			_, err = kernel.Build(context.Background(), source, binary, os.Stderr)
		}
		if err != nil {
			fmt.Fprintln(os.Stderr, "building the kernel:", err)
			return 1
		}
	}
	return m.Run()
}

// workshop lays out a notebook of testdata beside a copy of the demonstration
// dataset and returns the notebook's path.
func workshop(t *testing.T, notebook string) string {
	t.Helper()
	dir := t.TempDir()
	data := filepath.Join("..", "..", "datasets", "attracted-disc")
	if err := os.CopyFS(filepath.Join(dir, "datasets", "attracted-disc"), os.DirFS(data)); err != nil {
		t.Fatal(err)
	}
	nb, err := os.ReadFile(filepath.Join("testdata", notebook))
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(dir, "notebooks", notebook)
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		t.Fatal(err)
	}
	write(t, path, nb)
	return path
}

func write(t *testing.T, path string, data []byte) {
	t.Helper()
	if err := os.WriteFile(path, data, 0o644); err != nil {
		t.Fatal(err)
	}
}

func read(t *testing.T, path string) []byte {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return data
}

// swap puts new for the one old in a file.
func swap(t *testing.T, path, old, with string) {
	t.Helper()
	data := read(t, path)
	if n := bytes.Count(data, []byte(old)); n != 1 {
		t.Fatalf("%q stands %d times in %s", old, n, path)
	}
	write(t, path, bytes.Replace(data, []byte(old), []byte(with), 1))
}

func needKernel(t *testing.T) {
	t.Helper()
	if skipReason != "" {
		t.Skip(skipReason)
	}
}

func runNotebook(t *testing.T, path string, set ...Assignment) *NotebookReplay {
	t.Helper()
	r, err := RunNotebook(context.Background(), path, Settings{Kernel: binary, Set: set, Stderr: os.Stderr})
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// executed is a workshop whose notebook holds the outputs of a first run.
func executed(t *testing.T) (path string, first *NotebookReplay) {
	t.Helper()
	path = workshop(t, "work.ipynb")
	first = runNotebook(t, path)
	write(t, path, first.Notebook.Bytes())
	return path, first
}

func (c *Comparison) names() map[string]bool {
	all := map[string]bool{}
	for _, d := range c.Differences {
		all[d.Name] = true
	}
	return all
}

func TestNotebookReplay(t *testing.T) {
	needKernel(t)
	path, first := executed(t)
	if c := first.Comparison; c.Same() || c.Different != 0 || len(c.Notes) != 1 || !strings.Contains(c.Notes[0], "holds no outputs") {
		t.Errorf("a first run: %+v", c)
	}
	stored := read(t, path)
	for _, procs := range []string{"1", "2"} {
		t.Setenv("GOMAXPROCS", procs)
		r := runNotebook(t, path)
		if c := r.Comparison; !c.Same() || c.Within != 0 || c.Records != 1 || c.Cells != 5 || c.Identical < 500 {
			t.Errorf("GOMAXPROCS=%s: %d cells, %d records, %d identical, %d within, %d different: %+v", procs, c.Cells, c.Records, c.Identical, c.Within, c.Different, c.Differences)
		}
		if !bytes.Equal(r.Notebook.Bytes(), stored) {
			t.Errorf("GOMAXPROCS=%s: the notebook is written with other bytes", procs)
		}
	}

	t.Run("another seed", func(t *testing.T) {
		r := runNotebook(t, path, Assignment{"seed", "7"})
		names := r.Comparison.names()
		if r.Comparison.Same() || !names["run.seed"] || !names["measurands.permittivity.monte_carlo.value"] {
			t.Errorf("differences %v", names)
		}
		if names["measurands.permittivity.value"] || names["fit.parameters.permittivity.value"] {
			t.Errorf("the law does not depend on the seed: %v", names)
		}
		for _, d := range r.Comparison.Differences {
			if d.Name == "measurands.permittivity.monte_carlo.value" && (d.InU == nil || d.Within || d.Place != `cell 4 "reduce", output 2`) {
				t.Errorf("%+v", d)
			}
		}
		if c := r.Notebook.cells[2]; c.id != "settings-used" || c.source != "seed = 7" {
			t.Errorf("the cell after the settings: %+v", c)
		}
	})
	t.Run("changed number in the record", func(t *testing.T) {
		changed := filepath.Join(filepath.Dir(path), "changed.ipynb")
		nb, err := ReadNotebook(stored)
		if err != nil {
			t.Fatal(err)
		}
		rec := nb.cells[2].outputs()[1].get("data").get(lab.ResultMIME)
		rec.get("measurands").items[0].set("value", &value{kind: number, raw: "8.9e-12"})
		write(t, changed, nb.Bytes())
		c := runNotebook(t, changed).Comparison
		if len(c.Differences) != 1 || c.Different != 1 || c.Differences[0].Name != "measurands.permittivity.value" || c.Differences[0].Stored != "8.9e-12" || c.Differences[0].InU == nil {
			t.Errorf("%+v", c.Differences)
		}
	})
	t.Run("changed printed number", func(t *testing.T) {
		changed := filepath.Join(filepath.Dir(path), "changed.ipynb")
		write(t, changed, stored)
		swap(t, changed, `"permittivity 8.`, `"permittivity 9.`)
		c := runNotebook(t, changed).Comparison
		if len(c.Differences) != 1 || c.Differences[0].Name != "permittivity" || !strings.HasPrefix(c.Differences[0].Place, `cell 5 "printed"`) {
			t.Errorf("%+v", c.Differences)
		}
	})
	t.Run("changed figure", func(t *testing.T) {
		changed := filepath.Join(filepath.Dir(path), "changed.ipynb")
		nb, err := ReadNotebook(stored)
		if err != nil {
			t.Fatal(err)
		}
		forms := nb.cells[3].outputs()[0].get("data")
		svg, ok := forms.get("image/svg+xml").joined()
		at := strings.Index(svg, `d="M`)
		if !ok || at < 0 {
			t.Fatal("no drawing")
		}
		forms.set("image/svg+xml", linesValue(svg[:at]+`d="M1`+svg[at+4:]))
		write(t, changed, nb.Bytes())
		if c := runNotebook(t, changed).Comparison; c.Different != 1 || !strings.Contains(c.Differences[0].Place, "image/svg+xml") {
			t.Errorf("%+v", c.Differences)
		}
	})
	t.Run("tampered input", func(t *testing.T) {
		csv := filepath.Join(filepath.Dir(path), "..", "datasets", "attracted-disc", "readings.csv")
		whole := read(t, csv)
		defer write(t, csv, whole)
		swap(t, csv, "2.9986,3.9822,2.0143", "2.9986,3.9822,2.0153")
		c := runNotebook(t, path).Comparison
		names := c.names()
		if c.Same() || !names["inputs.readings.csv.sha256"] || names["inputs.bench.toml.sha256"] || !names["measurands.permittivity.value"] {
			t.Errorf("%v", names)
		}
	})
	t.Run("missing input", func(t *testing.T) {
		csv := filepath.Join(filepath.Dir(path), "..", "datasets", "attracted-disc", "readings.csv")
		whole := read(t, csv)
		defer write(t, csv, whole)
		if err := os.Remove(csv); err != nil {
			t.Fatal(err)
		}
		_, err := RunNotebook(context.Background(), path, Settings{Kernel: binary})
		var f *CellFailure
		if !errors.As(err, &f) || len(f.Inputs) != 1 || f.Inputs[0].File != "readings.csv" || !f.Inputs[0].Missing || !strings.Contains(err.Error(), sumOf(whole)) {
			t.Errorf("%v", err)
		}
	})
	if got := read(t, path); !bytes.Equal(got, stored) {
		t.Error("a replay changed the notebook")
	}

	t.Run("pack", func(t *testing.T) {
		p, err := Pack(context.Background(), path, PackSettings{Date: "2026-03-04"})
		if err != nil {
			t.Fatal(err)
		}
		file := writePack(t, p)
		all, err := RunPack(context.Background(), file, Settings{Kernel: binary})
		if err != nil {
			t.Fatal(err)
		}
		if len(all) != 1 || !all[0].Same() || !strings.HasSuffix(all[0].File, ": notebooks/work.ipynb") {
			t.Errorf("%+v", all)
		}
		// Stored outputs that do not belong to the inputs are refused.
		csv := filepath.Join(filepath.Dir(path), "..", "datasets", "attracted-disc", "readings.csv")
		whole := read(t, csv)
		defer write(t, csv, whole)
		swap(t, csv, "2.9986,3.9822,2.0143", "2.9986,3.9822,2.0153")
		if _, err := Pack(context.Background(), path, PackSettings{}); err == nil || !strings.Contains(err.Error(), sumOf(whole)) {
			t.Errorf("packing with other inputs: %v", err)
		}
	})
}

func TestFailingCells(t *testing.T) {
	needKernel(t)
	path := workshop(t, "fails.ipynb")
	before := read(t, path)
	_, err := RunNotebook(context.Background(), path, Settings{Kernel: binary})
	var f *CellFailure
	if !errors.As(err, &f) || f.Cell != `cell 3 "breaks"` || !strings.Contains(err.Error(), "os.Open returns 2 values") {
		t.Errorf("%v", err)
	}
	if !bytes.Equal(read(t, path), before) {
		t.Error("the notebook was changed")
	}
	// A cell that is meant to fail does not end the run.
	path = workshop(t, "meant.ipynb")
	write(t, path, runNotebook(t, path).Notebook.Bytes())
	c := runNotebook(t, path).Comparison
	if !c.Same() || c.Records != 0 || len(c.Notes) != 1 || !strings.Contains(c.Notes[0], "no output holds a record") {
		t.Errorf("%+v", c)
	}
}

func TestInterrupted(t *testing.T) {
	needKernel(t)
	path := workshop(t, "work.ipynb")
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if _, err := RunNotebook(ctx, path, Settings{Kernel: binary}); !errors.Is(err, context.Canceled) {
		t.Errorf("%v", err)
	}
}

// TestRefusals need no kernel.
func TestRefusals(t *testing.T) {
	ctx := context.Background()
	if _, err := RunNotebook(ctx, filepath.Join("testdata", "other.ipynb"), Settings{}); err == nil || !strings.Contains(err.Error(), `for the kernel "python3"`) {
		t.Errorf("another kernel: %v", err)
	}
	if _, err := RunNotebook(ctx, filepath.Join("testdata", "work.ipynb"), Settings{Kernel: "no such kernel"}); err == nil || !strings.Contains(err.Error(), "guardring kernel build") {
		t.Errorf("no kernel: %v", err)
	}
	// Nothing installed, no checkout, no compiler.
	empty := t.TempDir()
	for _, name := range []string{"JUPYTER_PATH", "JUPYTER_DATA_DIR", "PATH", "APPDATA", "PROGRAMDATA"} {
		t.Setenv(name, filepath.Join(empty, "nothing"))
	}
	nb, err := filepath.Abs(filepath.Join("testdata", "work.ipynb"))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := RunNotebook(ctx, nb, Settings{}); err == nil || !strings.Contains(err.Error(), "no go tool in PATH") {
		t.Errorf("in a checkout without a compiler: %v", err)
	}
	t.Chdir(string(filepath.Separator)) // a folder that no checkout surrounds
	if _, err := RunNotebook(ctx, nb, Settings{}); err == nil || !strings.Contains(err.Error(), "guardring kernel install") {
		t.Errorf("outside a checkout: %v", err)
	}
}
