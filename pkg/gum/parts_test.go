package gum_test

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"runtime"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/gum"
)

// TestSameBytes: any number of processors, any number of parts, in any order, and
// through JSON: the same result to the last bit; and so for kept trials.
func TestSameBytes(t *testing.T) {
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(0))
	m := twoOutputs(t)
	m.Inputs[0].Dist.DOF = 7
	m.Outputs = append(m.Outputs, compiled(t, "sometimes undefined", "sqrt(a)", m.Inputs))
	s := gum.Settings{Trials: gum.SelectionTrials + 12_345, Seed: 3}
	kept := gum.Settings{Trials: 234_567, Seed: 3}
	adaptive := gum.Settings{Adaptive: true, Digits: 2, Seed: 3}
	var want, wantKept, wantAdaptive string
	for _, n := range []int{1, 2, 5} {
		runtime.GOMAXPROCS(n)
		for _, c := range []struct {
			s    gum.Settings
			want *string
		}{{s, &want}, {kept, &wantKept}, {adaptive, &wantAdaptive}} {
			got := text(propagate(t, m, c.s))
			if *c.want == "" {
				*c.want = got
			} else if got != *c.want {
				t.Errorf("%d processors: %s", n, cmp.Diff(*c.want, got))
			}
		}
	}
	runtime.GOMAXPROCS(2)
	for _, of := range []int{1, 3, 8} {
		var parts []*gum.Part
		for i := of; i >= 1; i-- {
			p, err := gum.RunPart(context.Background(), m, s, i, of)
			if err != nil {
				t.Fatal(err)
			}
			b, err := json.Marshal(p)
			if err != nil {
				t.Fatal(err)
			}
			var q gum.Part
			if err := json.Unmarshal(b, &q); err != nil {
				t.Fatal(err)
			}
			b2, err := json.Marshal(&q)
			if err != nil || string(b2) != string(b) {
				t.Fatalf("part %d of %d changes on a round trip: %v", i, of, err)
			}
			parts = append(parts, &q)
		}
		r, err := gum.Merge(parts)
		if err != nil {
			t.Fatal(err)
		}
		if got := text(r); got != want {
			t.Errorf("%d parts: %s", of, cmp.Diff(want, got))
		}
	}
}

// text writes a result with every bit of its numbers.
func text(r *gum.Result) string {
	var b strings.Builder
	write := func(v any) {
		fmt.Fprintf(&b, "%x ", v)
	}
	for _, o := range r.Outputs {
		l, s := *o.Law, *o.MonteCarlo
		for _, w := range append(append([]error{}, l.Warnings...), s.Warnings...) {
			fmt.Fprintln(&b, w)
		}
		l.Warnings, s.Warnings = nil, nil
		write(o.Name)
		write(l)
		write(s)
		write(*o.Comparison)
		b.WriteByte('\n')
	}
	for _, w := range r.Warnings {
		fmt.Fprintln(&b, w)
	}
	write(r.Correlation)
	write(r.Covariance)
	write(r.Points)
	for _, g := range r.Regions {
		write(g)
	}
	fmt.Fprintln(&b, r.Trials, r.Sequences, r.Converged, r.Seed, r.Probability)
	return b.String()
}

// TestParts: what is wrong with a set of parts is named.
func TestParts(t *testing.T) {
	m := permittivity(t)
	run := func(s gum.Settings, i, of int, m *gum.Model) *gum.Part {
		t.Helper()
		p, err := gum.RunPart(context.Background(), m, s, i, of)
		if err != nil {
			t.Fatal(err)
		}
		p.Source = fmt.Sprintf("part%d.json", i)
		return p
	}
	s := gum.Settings{Trials: 95_000, Probability: 0.95}
	p1, p2, p3 := run(s, 1, 3, m), run(s, 2, 3, m), run(s, 3, 3, m)
	if _, err := gum.Merge([]*gum.Part{p3, p1, p2}); err != nil {
		t.Fatal(err)
	}
	other := s
	other.Seed = 1
	more := s
	more.Trials = 96_000
	changed := permittivity(t)
	changed.Inputs[2].Dist.DOF = 8
	attached := run(s, 2, 3, m)
	attached.Attachment = json.RawMessage(`{"title":"another"}`)
	for _, c := range []struct {
		parts []*gum.Part
		words []string
	}{
		{nil, []string{"no parts"}},
		{[]*gum.Part{p1, p3}, []string{"part 2 of 3 is missing"}},
		{[]*gum.Part{p2}, []string{"part 1, 3 of 3 are missing"}},
		{[]*gum.Part{{Index: 1, Of: 3}}, []string{"empty part"}},
		{[]*gum.Part{p1, p2, p3, p2}, []string{"part 2 of 3 (part2.json) is there twice"}},
		{[]*gum.Part{p1, run(other, 2, 3, m), p3}, []string{"part 2 of 3", "another run", "seed is 1"}},
		{[]*gum.Part{p1, run(more, 2, 3, m), p3}, []string{"part 2 of 3", "96000 trials"}},
		{[]*gum.Part{p1, run(s, 2, 3, changed), p3}, []string{"part 2 of 3", "inputs, outputs or settings differ"}},
		{[]*gum.Part{p1, run(s, 2, 4, m), p3}, []string{"part 2 of 4", "cut into 3 parts"}},
		{[]*gum.Part{p1, attached, p3}, []string{"part 2 of 3", "attached"}},
	} {
		r, err := gum.Merge(c.parts)
		if err == nil || r != nil {
			t.Errorf("want an error with %q, got %v", c.words, err)
			continue
		}
		for _, w := range c.words {
			if !strings.Contains(err.Error(), w) {
				t.Errorf("error %q lacks %q", err, w)
			}
		}
	}
	for _, c := range []struct {
		s     gum.Settings
		i, of int
		word  string
	}{{s, 0, 3, "part 0 of 3"}, {s, 4, 3, "part 4 of 3"}, {s, 1, 0, "part 1 of 0"}, {gum.Settings{Adaptive: true}, 1, 2, "adaptive"}, {gum.Settings{LawOnly: true}, 1, 2, "nothing to cut"}} {
		if _, err := gum.RunPart(context.Background(), m, c.s, c.i, c.of); err == nil || !strings.Contains(err.Error(), c.word) {
			t.Errorf("error %v lacks %q", err, c.word)
		}
	}
}

// TestDamagedParts: joint sums, points and counts that contradict each other are
// refused, and nothing panics.
func TestDamagedParts(t *testing.T) {
	p, err := gum.RunPart(context.Background(), twoOutputs(t), gum.Settings{Trials: 1000, Points: 3}, 1, 1)
	if err != nil {
		t.Fatal(err)
	}
	whole, err := json.Marshal(p)
	if err != nil {
		t.Fatal(err)
	}
	type object = map[string]any
	for _, c := range []struct {
		word   string
		damage func(o object)
	}{
		{"", func(object) {}},
		{"joint sums do not add up", func(o object) { o["joint"].(object)["n"] = 2000 }},
		{"joint sums do not add up", func(o object) { o["joint"].(object)["n"] = -1 }},
		{"joint sums do not add up", func(o object) {
			e := o["joint"].(object)
			e["rectangle"].(object)["counts"] = ""
			e["rectangle"].(object)["n"] = 0
		}},
		{"2 points of output 2", func(o object) { x := o["points"].([]any); x[1] = x[1].([]any)[:2] }},
		{"counts do not add up", func(o object) {
			x := o["outputs"].([]any)[0].(object)["tally"].(object)
			x["below"], x["above"] = int64(math.MaxInt64), int64(math.MaxInt64)
		}},
	} {
		var o object
		if err := json.Unmarshal(whole, &o); err != nil {
			t.Fatal(err)
		}
		c.damage(o)
		b, err := json.Marshal(o)
		if err != nil {
			t.Fatal(err)
		}
		var q gum.Part
		err = json.Unmarshal(b, &q)
		if c.word == "" {
			if err != nil {
				t.Error(err)
			} else if _, err := gum.Merge([]*gum.Part{&q}); err != nil {
				t.Error(err)
			}
			continue
		}
		if err == nil || !strings.Contains(err.Error(), c.word) {
			t.Errorf("error %v lacks %q", err, c.word)
		}
	}
}

// FuzzPart: whatever is read as a part either fails or writes back as it was read.
func FuzzPart(f *testing.F) {
	in := []gum.Input{{Name: "x", Dist: gum.Normal(1, 0.1)}}
	m := &gum.Model{Inputs: in, Outputs: []gum.Output{{Name: "y", New: func() gum.Evaluator {
		return gum.Evaluator{Block: func(x [][]float64, out []float64) { copy(out, x[0]) }}
	}}}}
	p, err := gum.RunPart(context.Background(), m, gum.Settings{Trials: 100, Points: 3}, 1, 1)
	if err != nil {
		f.Fatal(err)
	}
	b, err := json.Marshal(p)
	if err != nil {
		f.Fatal(err)
	}
	f.Add(b)
	f.Add([]byte(`{}`))
	f.Add([]byte(`{"format":1,"part":1,"of":1,"fingerprint":"x","trials":1,"probability":0.95,"digits":1,"outputs":[{}],"points":[[]]}`))
	f.Fuzz(func(t *testing.T, b []byte) {
		var p gum.Part
		if json.Unmarshal(b, &p) != nil {
			return
		}
		b1, err := json.Marshal(&p)
		if err != nil {
			t.Fatal(err)
		}
		var q gum.Part
		if err := json.Unmarshal(b1, &q); err != nil {
			t.Fatalf("can't read back: %v", err)
		}
		b2, err := json.Marshal(&q)
		if err != nil || string(b1) != string(b2) {
			t.Fatalf("changes on a round trip: %v", err)
		}
		gum.Merge([]*gum.Part{&p}) // must not panic
	})
}

// TestCancel: a cancelled context ends a long run within 50 ms, with its error.
func TestCancel(t *testing.T) {
	m := permittivity(t)
	for _, s := range []gum.Settings{{Trials: 1_000_000_000_000}, {Adaptive: true, Digits: 6, Trials: 1_000_000_000_000}} {
		ctx, cancel := context.WithCancel(context.Background())
		var done, last atomic.Int64
		ctx = cell.WithProgress(ctx, func(p cell.Progress) {
			if p.Done > 300_000 && done.CompareAndSwap(0, 1) {
				last.Store(time.Now().UnixNano())
				cancel()
			}
		})
		_, err := gum.Propagate(ctx, m, s)
		took := time.Duration(time.Now().UnixNano() - last.Load())
		if !errors.Is(err, context.Canceled) {
			t.Fatalf("error %v, want that of the context", err)
		}
		if !strings.Contains(err.Error(), "interrupted after 3") {
			t.Errorf("error %q does not say how far the run came", err)
		}
		t.Logf("ended %v after cancel", took)
	}
}

// TestNoAllocationPerBlock: ten times the blocks, the same allocations but for the
// few that the runtime makes by itself in the time; one a block would be 90.
func TestNoAllocationPerBlock(t *testing.T) {
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(1))
	m := permittivity(t)
	count := func(trials int64) float64 {
		return testing.AllocsPerRun(1, func() {
			if _, err := gum.RunPart(context.Background(), m, gum.Settings{Trials: trials}, 1, 1); err != nil {
				t.Fatal(err)
			}
		})
	}
	few, many := count(100_000), count(1_000_000)
	if many > few+45 {
		t.Errorf("%v allocations for 10 blocks, %v for 100", few, many)
	}
}
