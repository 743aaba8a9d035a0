package replay

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
)

// recorded lays out a copy of the demonstration dataset with a record in it.
func recorded(t *testing.T, s reduce.Settings) (dir, record string) {
	t.Helper()
	dir = t.TempDir()
	if err := os.CopyFS(dir, os.DirFS(filepath.Join("..", "..", "datasets", "attracted-disc"))); err != nil {
		t.Fatal(err)
	}
	b, err := bench.Open(dir)
	if err != nil {
		t.Fatal(err)
	}
	r, err := reduce.Run(context.Background(), b, s)
	if err != nil {
		t.Fatal(err)
	}
	data, err := indented(&r.Record)
	if err != nil {
		t.Fatal(err)
	}
	record = filepath.Join(dir, "result.json")
	write(t, record, data)
	return dir, record
}

func TestRecordReplay(t *testing.T) {
	ctx := context.Background()
	for _, s := range []reduce.Settings{{LawOnly: true}, {Trials: 200, Seed: 5, Rows: true, Probability: 0.99}} {
		_, path := recorded(t, s)
		c, err := RunRecord(ctx, path, Settings{})
		if err != nil {
			t.Fatal(err)
		}
		if !c.Same() || c.Within != 0 || c.Records != 1 || c.Identical < 100 {
			t.Errorf("%+v: %+v", s, c)
		}
	}
	dir, path := recorded(t, reduce.Settings{Trials: 200})
	whole := read(t, path)

	t.Run("another seed", func(t *testing.T) {
		defer write(t, path, whole)
		swap(t, path, `"seed": 0`, `"seed": 1`)
		c, err := RunRecord(ctx, path, Settings{})
		if err != nil {
			t.Fatal(err)
		}
		for name := range c.names() {
			if !strings.Contains(name, "monte_carlo") && !strings.HasPrefix(name, "warnings") {
				t.Errorf("%s differs, which no seed changes", name)
			}
		}
		if c.Same() {
			t.Error("another seed gives the same trials")
		}
	})
	t.Run("changed number", func(t *testing.T) {
		defer write(t, path, whole)
		var r reduce.Record
		if err := json.Unmarshal(whole, &r); err != nil {
			t.Fatal(err)
		}
		u := float64(r.Measurands[0].U)
		r.Measurands[0].Value += reduce.Number(u / 2)
		data, err := indented(&r)
		if err != nil {
			t.Fatal(err)
		}
		write(t, path, data)
		c, err := RunRecord(ctx, path, Settings{})
		if err != nil {
			t.Fatal(err)
		}
		if len(c.Differences) != 1 || c.Differences[0].Name != "measurands.permittivity.value" || fmt.Sprintf("%.6f", *c.Differences[0].InU) != "-0.500000" {
			t.Errorf("%+v", c.Differences)
		}
		var b strings.Builder
		if err := c.WriteText(&b); err != nil {
			t.Fatal(err)
		}
		for _, want := range []string{"result.json: different", "measurands.permittivity.value", "which is -0.5 u", "1 different"} {
			if !strings.Contains(b.String(), want) {
				t.Errorf("%q is not in\n%s", want, b.String())
			}
		}
		// Within a stated tolerance of one u it is no difference.
		if c, err = RunRecord(ctx, path, Settings{Tolerance: 1}); err != nil || !c.Same() || c.Within != 1 {
			t.Errorf("%v %+v", err, c)
		}
	})
	csv := filepath.Join(dir, "readings.csv")
	readings := read(t, csv)
	t.Run("changed input", func(t *testing.T) {
		defer write(t, csv, readings)
		swap(t, csv, "2.9986,3.9822,2.0143", "2.9986,3.9822,2.0153")
		c, err := RunRecord(ctx, path, Settings{})
		if err != nil {
			t.Fatal(err)
		}
		for _, d := range c.Differences {
			if d.Name == "inputs.readings.csv.sha256" && d.Stored == sumOf(readings) && d.Now == sumOf(read(t, csv)) {
				return
			}
		}
		t.Errorf("the changed input is not named by its hash: %v", c.names())
	})
	t.Run("missing input", func(t *testing.T) {
		defer write(t, csv, readings)
		if err := os.Remove(csv); err != nil {
			t.Fatal(err)
		}
		_, err := RunRecord(ctx, path, Settings{})
		var p *InputProblem
		if !errors.As(err, &p) || !p.Missing || p.File != "readings.csv" || p.Recorded != sumOf(readings) {
			t.Errorf("%v", err)
		}
	})
	t.Run("elsewhere", func(t *testing.T) {
		other := filepath.Join(t.TempDir(), "record.json")
		write(t, other, whole)
		if _, err := RunRecord(ctx, other, Settings{}); err == nil || !strings.Contains(err.Error(), "--inputs") {
			t.Errorf("%v", err)
		}
		if c, err := RunRecord(ctx, other, Settings{Inputs: dir}); err != nil || !c.Same() {
			t.Errorf("%v %+v", err, c)
		}
	})
}

// TestFitAndPropagation: records of the other commands are done again too.
func TestFitAndPropagation(t *testing.T) {
	ctx := context.Background()
	dir := t.TempDir()
	write(t, filepath.Join(dir, "gap.csv"), []byte("d/mm,c/pF,u/pF\n1,70.93,0.05\n2,36.41,0.05\n3,24.82,0.04\n4,18.99,0.04\n6,13.21,0.03\n9,9.35,0.03\n"))
	f, err := os.Open(filepath.Join(dir, "gap.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	settings := reduce.FitSettings{Formula: "c_s + s/(d+d0)", Response: "c", Noise: "u", Rows: true,
		Start: map[string]float64{"c_s": 2e-12, "s": 7e-14, "d0": 1e-5}, Bounds: map[string][2]float64{"c_s": {math.Inf(-1), 1e-11}},
		Priors: map[string]reduce.Prior{"d0": {Value: 1e-5, U: 2e-5}}, PredictorNoise: map[string]string{"d": "3 um"}}
	fit, err := reduce.FitCSV(ctx, f, "gap.csv", settings)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := f.Seek(0, io.SeekStart); err != nil {
		t.Fatal(err)
	}
	settings.PredictorNoise, settings.Noise, settings.Rows = nil, "0.04 pF", false
	settings.Seed, settings.Bootstrap, settings.Probability, settings.Fixed = 3, 50, 0.9, []string{"d0"}
	settings.Priors = nil
	second, err := reduce.FitCSV(ctx, f, "gap.csv", settings)
	if err != nil {
		t.Fatal(err)
	}
	write(t, filepath.Join(dir, "budget.toml"), []byte("format = 1\ntitle = \"Field of plates (invented)\"\n[inputs.v]\nvalue = \"1000 V\"\nu = \"0.2 V\"\n[inputs.d]\nvalue = \"50 mm\"\nhalf_width = \"0.05 mm\"\nshape = \"rectangular\"\n[outputs.e]\nformula = \"v/d\"\nunit = \"V/m\"\n"))
	budget, err := bench.OpenBudget(filepath.Join(dir, "budget.toml"))
	if err != nil {
		t.Fatal(err)
	}
	prop, err := reduce.Propagate(ctx, budget, reduce.PropagateSettings{Trials: 20000, Seed: 2, Probability: 0.95})
	if err != nil {
		t.Fatal(err)
	}
	for name, rec := range map[string]any{"fit.json": &fit.Record, "second.json": &second.Record, "propagation.json": &prop.Record} {
		data, err := indented(rec)
		if err != nil {
			t.Fatal(err)
		}
		path := filepath.Join(dir, name)
		write(t, path, data)
		c, err := RunRecord(ctx, path, Settings{})
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if !c.Same() || c.Within != 0 {
			t.Errorf("%s: %+v", name, c)
		}
	}
}

func TestBadRecords(t *testing.T) {
	for _, c := range []struct{ in, want string }{
		{`{}`, "format and run.command are due"},
		{`[]`, "an object is due"},
		{`{"format":2,"run":{"command":"reduce"},"inputs":[{"file":"a"}]}`, "format 2"},
		{`{"format":1,"run":{"command":"reduce"}}`, "no inputs"},
		{`{"format":1,"run":{"command":"reduce"},"inputs":[{"file":"../bench.toml"}]}`, "leads out of the folder"},
		{`{"format":1,"run":{"command":"reduce"},"inputs":[{"file":"/etc/passwd"}]}`, "leads out of the folder"},
		{`{"format":1,"run":{"command":"reduce"},"inputs":[{"file":"gone.csv","sha256":"ab"}]}`, "SHA-256 ab) is missing"},
		{`{"format":1,"run":{"command":"brew"},"inputs":[{"file":"here.csv"}]}`, `"brew" can't be done again`},
		{`{"format":1,"run":{"command":"reduce","options":{"law-onlt":"true"}},"inputs":[{"file":"here.csv"}]}`, "did you mean law-only?"},
		{`{"format":1,"run":{"command":"reduce","options":{"law-only":"yes"}},"inputs":[{"file":"here.csv"}]}`, "true is due"},
		{`{"format":1,"run":{"command":"reduce"},"inputs":[{"file":"here.csv"}]}`, "run.trials is 0"},
		{`{"format":1,"run":{"command":"fit","options":{"start":"a=x"}},"inputs":[{"file":"here.csv"}]}`, `"x" is no number`},
		{`{"format":1,"run":{"command":"fit","options":{"separator":"pipe"}},"inputs":[{"file":"here.csv"}]}`, `run.options.separator: "pipe" is neither comma, semicolon nor tab`},
		{`{"format":1,"run":{"command":"fit","options":{"missing":"\"a"}},"inputs":[{"file":"here.csv"}]}`, `run.options.missing`},
		{`{"format":1,"format":1}`, "stands twice"},
	} {
		dir := t.TempDir()
		write(t, filepath.Join(dir, "here.csv"), []byte("a\n1\n"))
		path := filepath.Join(dir, "r.json")
		write(t, path, []byte(c.in))
		if got, err := RunRecord(context.Background(), path, Settings{}); err == nil || got != nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", c.in, err, c.want)
		}
	}
	if _, err := RunRecord(context.Background(), "x.json", Settings{Set: []Assignment{{"a", "1"}}}); err == nil || !strings.Contains(err.Error(), "no settings") {
		t.Errorf("%v", err)
	}
}
