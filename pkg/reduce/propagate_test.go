package reduce_test

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"math"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

func openBudget(t testing.TB, name string) *bench.Budget {
	t.Helper()
	b, err := bench.OpenBudget("../../datasets/budgets/" + name + ".toml")
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func propagation(t testing.TB, name string, s reduce.PropagateSettings) *reduce.Propagation {
	t.Helper()
	p, err := reduce.Propagate(context.Background(), openBudget(t, name), s)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func abs(t testing.TB, what string, got reduce.Number, want, tol float64) {
	t.Helper()
	if !(math.Abs(float64(got)-want) <= tol) {
		t.Errorf("%s is %.9g, not %.9g", what, float64(got), want)
	}
}

// TestEndGauge is JCGM 100:2008 H.1 (values from memory): 50.000838 mm, u = 32 nm, 16
// effective degrees of freedom, U99 = 93 nm with k = 2.92; 34 nm with the second-order
// terms of H.1.7.
func TestEndGauge(t *testing.T) {
	p := propagation(t, "end-gauge", reduce.PropagateSettings{LawOnly: true})
	l := p.Record.Outputs[0].Law
	abs(t, "l", l.Value, 50.000838e-3, 0.5e-9)
	abs(t, "u", l.U, 32e-9, 0.6e-9)
	abs(t, "degrees of freedom", reduce.Number(math.Floor(float64(l.DOF))), 16, 0)
	abs(t, "k", l.K, 2.92, 0.005)
	abs(t, "U", l.K*l.U, 93e-9, 1e-9)
	for _, b := range l.Budget {
		if want, ok := map[string]float64{"l_s": 25e-9, "d": 9.7e-9, "da": 2.9e-9, "dt": 16.6e-9}[b.Input]; ok {
			abs(t, "contribution of "+b.Input, b.Contribution, want, 0.06e-9)
		} else if b.Contribution != 0 {
			t.Errorf("contribution of %s is %v; the first order has none", b.Input, float64(b.Contribution))
		}
	}
	second := propagation(t, "end-gauge", reduce.PropagateSettings{LawOnly: true, SecondOrder: true}).Record.Outputs[0].Law
	abs(t, "u of the second order", second.U, 34e-9, 0.6e-9)
	if second.SecondOrder == nil || second.SecondOrder.FirstOrderU != l.U {
		t.Errorf("second order: %+v", second.SecondOrder)
	}
}

// TestImpedance is JCGM 100:2008 H.2 (values from memory): R = 127.732 Ω, X = 219.847
// Ω, Z = 254.260 Ω with u 0.071, 0.295, 0.236 Ω and r(R,X) = −0.588, r(R,Z) = −0.485,
// r(X,Z) = 0.993 from readings taken together.
func TestImpedance(t *testing.T) {
	p := propagation(t, "impedance", reduce.PropagateSettings{LawOnly: true})
	for i, want := range [][2]float64{{127.732, 0.071}, {219.847, 0.295}, {254.260, 0.236}} {
		l := p.Record.Outputs[i].Law
		abs(t, p.Record.Outputs[i].Name, l.Value, want[0], 0.0006)
		abs(t, "u of "+p.Record.Outputs[i].Name, l.U, want[1], 0.0006)
	}
	abs(t, "r(R,X)", p.Record.Correlation[0][1], -0.588, 0.001)
	abs(t, "r(R,Z)", p.Record.Correlation[0][2], -0.485, 0.001)
	abs(t, "r(X,Z)", p.Record.Correlation[1][2], 0.993, 0.001)
}

// TestComparisonLoss is JCGM 101:2008 9.4, x1 = 0.050 (values from memory, in 10⁻⁶):
// law 2500, u 500, interval 1520 to 3480; Monte Carlo 2550, u 502, shortest interval
// 1590 to 3543; and the law is not confirmed.
func TestComparisonLoss(t *testing.T) {
	o := propagation(t, "comparison-loss", reduce.PropagateSettings{}).Record.Outputs[0]
	abs(t, "law", o.Law.Value, 2500e-6, 1e-9)
	abs(t, "u of the law", o.Law.U, 500e-6, 1e-9)
	abs(t, "its interval from", o.Law.Interval[0], 1520e-6, 0.5e-6)
	abs(t, "Monte Carlo", o.MonteCarlo.Value, 2550e-6, 2e-6)
	abs(t, "its u", o.MonteCarlo.U, 502e-6, 2e-6)
	abs(t, "shortest from", o.MonteCarlo.Shortest[0], 1590e-6, 10e-6)
	abs(t, "shortest to", o.MonteCarlo.Shortest[1], 3543e-6, 10e-6)
	if o.MonteCarlo.Agrees {
		t.Error("the law was confirmed")
	}
}

// TestParts: parts done apart and read from JSON give the bytes of one part, and
// those of the undivided run above the size of selection.
func TestParts(t *testing.T) {
	b := openBudget(t, "plate-field")
	s := reduce.PropagateSettings{Trials: gum.SelectionTrials + 12345, Seed: 9, Probability: 0.9}
	parts := func(n int) []*gum.Part {
		var out []*gum.Part
		for i := n; i >= 1; i-- {
			p, err := reduce.PropagatePart(context.Background(), b, s, i, n)
			if err != nil {
				t.Fatal(err)
			}
			data, err := json.Marshal(p)
			if err != nil {
				t.Fatal(err)
			}
			q := &gum.Part{}
			if err := json.Unmarshal(data, q); err != nil {
				t.Fatal(err)
			}
			out = append(out, q)
		}
		return out
	}
	record := func(p *reduce.Propagation) []byte {
		data, err := json.Marshal(p.Record)
		if err != nil {
			t.Fatal(err)
		}
		return data
	}
	whole, err := reduce.Propagate(context.Background(), b, s)
	if err != nil {
		t.Fatal(err)
	}
	for _, n := range []int{1, 3} {
		var m reduce.PartMerger
		for _, p := range parts(n) {
			if err := m.Add(p); err != nil {
				t.Fatal(err)
			}
		}
		p, err := m.Result()
		if err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(record(p), record(whole)) {
			t.Errorf("%d parts differ from the undivided run", n)
		}
	}
	// What does not belong is an error that names it.
	three := parts(3)
	for i, p := range three {
		p.Source = string(rune('a'+i)) + ".json"
	}
	var m reduce.PartMerger
	if err := m.Add(three[0]); err != nil {
		t.Fatal(err)
	}
	if _, err := m.Result(); err == nil || !strings.Contains(err.Error(), "part 1, 2 of 3 are missing") {
		t.Errorf("two lost parts: %v", err)
	}
	if err := m.Add(three[0]); err == nil || !strings.Contains(err.Error(), "twice") || !strings.Contains(err.Error(), "a.json") {
		t.Errorf("a doubled part: %v", err)
	}
	s.Seed = 10
	foreign := parts(3)[1]
	foreign.Source = "foreign.json"
	if err := m.Add(foreign); err == nil || !strings.Contains(err.Error(), "foreign.json") || !strings.Contains(err.Error(), "seed is 10") {
		t.Errorf("a foreign part: %v", err)
	}
	s.Adaptive = true
	if _, err := reduce.PropagatePart(context.Background(), b, s, 1, 2); err == nil || !strings.Contains(err.Error(), "adaptive") {
		t.Errorf("a part of an adaptive run: %v", err)
	}
}

// TestPropagationRecord: the record says how the run was made, and comes back from
// JSON as it was.
func TestPropagationRecord(t *testing.T) {
	p := propagation(t, "plate-permittivity", reduce.PropagateSettings{Trials: 20000, Seed: 5, Probability: 0.99, Digits: 2})
	r := p.Record
	if r.Run.Command != "propagate" || r.Run.Trials != 20000 || r.Run.Seed != 5 || r.Run.Options["probability"] != "0.99" || r.Run.Options["digits"] != "2" {
		t.Errorf("run %+v", r.Run)
	}
	if len(r.Inputs) != 1 || r.Inputs[0].File != "plate-permittivity.toml" || len(r.Inputs[0].SHA256) != 64 {
		t.Errorf("inputs %+v", r.Inputs)
	}
	o := r.Outputs[0]
	if o.Unit != "F/m" || o.StatedUnit != "pF/m" || o.Law.Probability != 0.99 {
		t.Errorf("output in %s, stated in %s, %v", o.Unit, o.StatedUnit, float64(o.Law.Probability))
	}
	sum := 0.0
	for _, b := range o.Law.Budget {
		sum += float64(b.Share)
	}
	if math.Abs(sum-1) > 1e-12 {
		t.Errorf("shares sum to %v", sum)
	}
	first, err := json.Marshal(r)
	if err != nil {
		t.Fatal(err)
	}
	var back reduce.PropagationRecord
	if err := json.Unmarshal(first, &back); err != nil {
		t.Fatal(err)
	}
	second, err := json.Marshal(back)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(first, second) {
		t.Errorf("the record does not come back from JSON:\n%s\n%s", first, second)
	}
}

func TestAdaptivePropagation(t *testing.T) {
	r := propagation(t, "plate-permittivity", reduce.PropagateSettings{Adaptive: true}).Record
	if r.Sequences < 2 || r.Run.Trials < 2*10000 || r.Run.Options["trials"] != "adaptive" {
		t.Errorf("%d sequences, run %+v", r.Sequences, r.Run)
	}
}

// ExamplePropagate states the published end gauge by the law alone.
func ExamplePropagate() {
	b, err := bench.OpenBudget("../../datasets/budgets/end-gauge.toml")
	if err != nil {
		fmt.Println(err)
		return
	}
	p, err := reduce.Propagate(context.Background(), b, reduce.PropagateSettings{LawOnly: true})
	if err != nil {
		fmt.Println(err)
		return
	}
	l := p.Record.Outputs[0].Law
	fmt.Println(si.Expanded(float64(l.Value), float64(l.K*l.U), si.MustUnit("mm"), float64(l.K), float64(l.Probability)))
	// Output:
	// 50.000838 mm ± 0.000092 mm (k = 2.92, p = 99 %)
}
