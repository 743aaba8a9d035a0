package plan_test

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/plan"
)

// TestDatasetsAreSimulated makes the readings of each dataset again from its own
// folder: they must be the committed bytes.
func TestDatasetsAreSimulated(t *testing.T) {
	truths, err := filepath.Glob(filepath.Join("..", "..", "datasets", "*", plan.TruthFile))
	if err != nil || len(truths) == 0 {
		t.Fatalf("no dataset with a truth found (%v)", err)
	}
	for _, path := range truths {
		dir := filepath.Dir(path)
		t.Run(filepath.Base(dir), func(t *testing.T) {
			b, err := bench.Open(dir)
			if err != nil {
				t.Fatal(err)
			}
			truth, err := plan.ReadTruth(b)
			if err != nil {
				t.Fatal(err)
			}
			y, err := plan.Simulate(b, truth, truth.Seed)
			if err != nil {
				t.Fatal(err)
			}
			files, err := plan.Files(b, y)
			if err != nil {
				t.Fatal(err)
			}
			for _, f := range files {
				want, err := os.ReadFile(filepath.Join(dir, f.Name))
				if err != nil {
					t.Fatal(err)
				}
				if !bytes.Equal(f.Data, want) {
					t.Errorf("%s: the simulation gives other bytes than the dataset holds", f.Name)
				}
			}
		})
	}
}

// TestSimulatedFilesAreAsTheirsWere: a simulation keeps how a file is written, with
// another separator, decimal commas, a comma in a header, line ends and a byte order
// mark, and a pinned sum fits the new readings. What it gives opens, and holds the
// numbers that the plain file holds.
func TestSimulatedFilesAreAsTheirsWere(t *testing.T) {
	source := filepath.Join("..", "..", "datasets", "plate-charge")
	read := func(name string) string {
		data, err := os.ReadFile(filepath.Join(source, name))
		if err != nil {
			t.Fatal(err)
		}
		return string(data)
	}
	plain, toml := read("readings.csv"), read("bench.toml")
	csv := strings.NewReplacer(",", ";", ".", ",", "Q/nC", `"Q/nC (a, b)"`, "\n", "\r\n").Replace(plain)
	sum := sha256.Sum256([]byte("\ufeff" + csv))
	toml = strings.ReplaceAll(toml, `"Q/nC"`, `"Q/nC (a, b)"`)
	toml = strings.Replace(toml, `file = "readings.csv"`, "file = \"readings.csv\"\ndecimal = \"comma\"\nsha256 = \""+strings.ToUpper(hex.EncodeToString(sum[:]))+`"`, 1)
	open := func(files map[string]string) *bench.Bench {
		dir := t.TempDir()
		for name, text := range files {
			if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
				t.Fatal(err)
			}
		}
		b, err := bench.Open(dir)
		if err != nil {
			t.Fatal(err)
		}
		return b
	}
	b := open(map[string]string{"readings.csv": "\ufeff" + csv, "bench.toml": toml, plan.TruthFile: read(plan.TruthFile)})
	truth, err := plan.ReadTruth(b)
	if err != nil {
		t.Fatal(err)
	}
	y, err := plan.Simulate(b, truth, 77)
	if err != nil {
		t.Fatal(err)
	}
	files, err := plan.Files(b, y)
	if err != nil {
		t.Fatal(err)
	}
	made := map[string]string{}
	for _, f := range files {
		made[f.Name] = string(f.Data)
	}
	again := open(made)
	for i, v := range again.Channels[len(again.Channels)-1].Readings {
		if again.Channels[len(again.Channels)-1].Name != "charge" {
			t.Fatal("the last channel is not the response")
		}
		if d := v - y[i]; d > 1e-13 || d < -1e-13 { // printed to 0.1 pC
			t.Fatalf("record %d: %v was written, %v simulated", i+1, v, y[i])
		}
	}
	got := made["readings.csv"]
	if !strings.HasPrefix(got, "\ufefft/s;") || strings.Count(got, "\r\n") != strings.Count(plain, "\n") || strings.Count(got, "\n") != strings.Count(plain, "\n") {
		t.Errorf("the file is written otherwise: %.80q", got)
	}
}
