package plan_test

import (
	"context"
	"math"
	"path/filepath"
	"strings"
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

// A plan looks at designs that can be built, and says what is to be said of them
// without noise: the warnings of the bench and its settings (derived).
func TestPredictionOfDesigns(t *testing.T) {
	predict := func(name string) *plan.Prediction {
		b, err := bench.Open(filepath.Join("..", "..", "datasets", name))
		if err != nil {
			t.Fatal(err)
		}
		truth, err := plan.ReadTruth(b)
		if err != nil {
			t.Fatal(err)
		}
		p, err := plan.Predict(context.Background(), b, truth)
		if err != nil {
			t.Fatal(err)
		}
		return p
	}
	// Another gap takes the body between the plates with it.
	n := 0
	for _, s := range predict("charge-in-field").Scenarios {
		switch {
		case s.Change == "height":
			t.Errorf("%s by itself takes the body out of the mid-plane", s.Name)
		case s.Change == "gap":
			if n++; s.Refused != "" {
				t.Errorf("%s: %s", s.Name, s.Refused)
			}
		}
	}
	if n != 4 {
		t.Errorf("%d other gaps", n)
	}
	// What is refused is told of the change, not of the files at hand.
	p := predict("dielectric-sample")
	for _, s := range p.Scenarios {
		if strings.Contains(s.Refused, "datasets") {
			t.Errorf("%s: %s", s.Name, s.Refused)
		}
	}
	if len(p.Warnings) != 1 || !strings.Contains(p.Warnings[0], "the air film") {
		t.Errorf("warnings %q", p.Warnings)
	}
}
