package plan_test

import (
	"context"
	"path/filepath"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
)

// TestCausesOfForces leaves out of a demonstration bench a correction whose effect
// its readings carry: the diagnosis must name it first, by its signature.
func TestCausesOfForces(t *testing.T) {
	for _, c := range []struct{ dataset, correction, cause string }{
		{"coulomb-point", "induction", "induction"},
		{"sphere-pair", "induction", "induction"},
		{"sphere-pair", "leakage", "leakage"},
		{"attracted-disc-unguarded", "edge", "edge"},
	} {
		b, err := bench.Open(filepath.Join("..", "..", "datasets", c.dataset))
		if err != nil {
			t.Fatal(err)
		}
		b.Corrections[c.correction] = false
		for i := range b.Scalars {
			if b.Scalars[i].Name == "corrections."+c.correction+".time_constant" {
				b.Scalars[i].Adjust = false
			}
		}
		r, err := reduce.Run(context.Background(), b, reduce.Settings{LawOnly: true})
		if err != nil {
			t.Errorf("%s without %s: %v", c.dataset, c.correction, err)
			continue
		}
		causes := r.Record.Diagnosis.Causes
		if len(causes) == 0 || causes[0].Name != c.cause {
			t.Errorf("%s without %s: the causes found are %+v, want %s first", c.dataset, c.correction, causes, c.cause)
		}
	}
}
