package plan_test

import (
	"bytes"
	"os"
	"path/filepath"
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
