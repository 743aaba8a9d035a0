package plan_test

import (
	"context"
	"math"
	"path/filepath"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/reduce"
)

// TestPredictionHolds compares the uncertainty that the plan of each dataset
// promises with the one that its reduction states: the reduction of readings with
// noise is the reference, and the two may differ only by the scatter of the
// estimates they are evaluated at.
func TestPredictionHolds(t *testing.T) {
	truths, err := filepath.Glob(filepath.Join("..", "..", "datasets", "*", plan.TruthFile))
	if err != nil || len(truths) == 0 {
		t.Fatalf("no dataset with a truth found (%v)", err)
	}
	for _, path := range truths {
		b, err := bench.Open(filepath.Dir(path))
		if err != nil {
			t.Fatal(err)
		}
		truth, err := plan.ReadTruth(b)
		if err != nil {
			t.Fatal(err)
		}
		p, err := plan.Predict(context.Background(), b, truth)
		if err != nil {
			t.Errorf("%s: %v", b.Dir, err)
			continue
		}
		r, err := reduce.Run(context.Background(), b, reduce.Settings{LawOnly: true})
		if err != nil {
			t.Fatal(err)
		}
		got, want := float64(p.Measurand.U), float64(r.Record.Measurands[0].U)
		if math.Abs(got/want-1) > 0.1 {
			t.Errorf("%s: the plan promises u = %g, the reduction states %g", b.Dir, got, want)
		}
		for _, s := range p.Scenarios {
			if s.Refused != "" {
				continue
			}
			// More readings, more settings and better inputs never make it worse.
			if better := s.Change == "readings at each setting" || s.Change == "settings"; better && s.Ratio > 1+1e-9 {
				t.Errorf("%s: %s would raise u by a factor %g", b.Dir, s.Name, s.Ratio)
			}
		}
	}
}
