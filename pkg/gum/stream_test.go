package gum_test

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/random"
)

// TestShortestInterval judges the shortest interval of skew outputs by length and
// by coverage against theory: exponential, where it begins at 0 and is −ln(1−p)
// long, and chi-squared with four degrees of freedom.
func TestShortestInterval(t *testing.T) {
	for _, p := range []float64{0.5, 0.9545} {
		in := []gum.Input{{Name: "x", Dist: gum.Exponential(1)}}
		m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "y", "3 + x", in)}}
		for _, trials := range []int64{200_000, 3_000_000} {
			s := propagate(t, m, gum.Settings{Trials: trials, Probability: p}).Outputs[0].MonteCarlo
			want := -math.Log1p(-p)
			sd := math.Sqrt(p/(1-p)/float64(trials)) * 1 // of that quantile
			near(t, "length", s.Shortest[1]-s.Shortest[0], want, 5*sd+2*s.Resolution)
			cover := math.Exp(3-s.Shortest[0]) - math.Exp(3-s.Shortest[1])
			near(t, "coverage", cover, p, 5*math.Sqrt(p*(1-p)/float64(trials))+s.Resolution)
			near(t, "left end", s.Shortest[0], 3, 0.02)
		}
	}
}

// TestStreamingAgainstSelection: what a run that streams says of the same trials
// lies within the stated resolution of the exact order statistics, for shapes with
// long tails, edges, steps and spikes.
func TestStreamingAgainstSelection(t *testing.T) {
	for _, f := range []string{"z", "x*x", "exp(z)", "t3", "t1", "a", "r + 1e-9*z", "max(r, 0)", "min(max(z, -1.5), 1.5)", "1e9 + 1e-3*z", "e/(r+2)", "0*z + 7", "0*z", "1e-300*z"} {
		in := []gum.Input{{Name: "z", Dist: gum.Normal(0, 1)}, {Name: "x", Dist: gum.Normal(0.5, 1)}, {Name: "t3", Dist: gum.StudentT(0, 1, 3)},
			{Name: "t1", Dist: gum.StudentT(0, 1, 1)}, {Name: "a", Dist: gum.Arcsine(0, 1)}, {Name: "r", Dist: gum.Rectangular(0, 1)}, {Name: "e", Dist: gum.Exponential(2)}}
		m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "y", f, in)}}
		for _, p := range []float64{0.5, 0.9545, 0.9973} {
			s := gum.Settings{Trials: 300_000, Probability: p, Seed: 5}
			exact := propagate(t, m, s).Outputs[0].MonteCarlo
			part, err := gum.RunPart(context.Background(), m, s, 1, 1)
			if err != nil {
				t.Fatal(err)
			}
			r, err := gum.Merge([]*gum.Part{part})
			if err != nil {
				t.Fatal(err)
			}
			stream := r.Outputs[0].MonteCarlo
			what := fmt.Sprintf("%s at p = %v: ", f, p)
			tiny := 4e-16 * math.Max(math.Abs(exact.Interval[0]), math.Abs(exact.Interval[1]))
			for k, end := range []string{"low", "high"} {
				near(t, what+end, stream.Interval[k], exact.Interval[k], stream.Resolution+tiny)
			}
			near(t, what+"length of the shortest", stream.Shortest[1]-stream.Shortest[0], exact.Shortest[1]-exact.Shortest[0], 2*stream.Resolution+tiny)
			if !math.IsNaN(exact.Value) {
				near(t, what+"mean", stream.Value, exact.Value, 1e-9*exact.U+tiny)
			}
			if !math.IsNaN(exact.U) {
				near(t, what+"u", stream.U, exact.U, 1e-9*exact.U+tiny)
			}
			// The stated bound itself must be small where it matters.
			if w := exact.Interval[1] - exact.Interval[0]; stream.Resolution > 2e-4*w+tiny+1e-290 {
				t.Errorf("%sresolution %v of an interval of %v", what, stream.Resolution, w)
			}
			if exact.Resolution != 0 {
				t.Errorf("%sselection states a resolution of %v", what, exact.Resolution)
			}
			if stream.Trials != exact.Trials {
				t.Errorf("%s%d trials streamed, %d kept", what, stream.Trials, exact.Trials)
			}
		}
	}
}

// TestSummarise compares with order statistics taken from a full sort, and checks
// that the caller's trials stay as they are.
func TestSummarise(t *testing.T) {
	src := random.New(8, "summarise", 0)
	for _, n := range []int{2, 3, 19, 20, 1000, 10_000, 25_000, 123_457} {
		for _, p := range []float64{0.1, 0.5, 0.9, 0.95} {
			y := make([]float64, n)
			for i := range y {
				y[i] = math.Exp(src.Normal()) * 1e-12
			}
			before := slices.Clone(y)
			s, err := gum.Summarise(y, p)
			q := int(p*float64(n) + 0.5)
			if q < 1 || q >= n {
				if err == nil {
					t.Errorf("n = %d, p = %v: no error", n, p)
				}
				continue
			}
			if err != nil {
				t.Fatal(err)
			}
			if !slices.Equal(y, before) {
				t.Fatal("the caller's trials are changed")
			}
			slices.Sort(before)
			r := (n - q + 1) / 2
			if got, want := s.Interval, [2]float64{before[r-1], before[r+q-1]}; got != want {
				t.Errorf("n = %d, p = %v: symmetric interval %v, want %v", n, p, got, want)
			}
			best := math.Inf(1)
			for i := range n - q {
				best = math.Min(best, before[i+q]-before[i])
			}
			if got := s.Shortest[1] - s.Shortest[0]; got != best {
				t.Errorf("n = %d, p = %v: shortest interval is %v long, want %v", n, p, got, best)
			}
			var mean, ss float64
			for _, v := range before {
				mean += v / float64(n)
			}
			for _, v := range before {
				ss += (v - mean) * (v - mean)
			}
			near(t, "mean", s.Value, mean, 1e-13*mean)
			near(t, "u", s.U, math.Sqrt(ss/float64(n-1)), 1e-12*s.U)
			if s.Min != before[0] || s.Max != before[n-1] {
				t.Errorf("extremes %v and %v, want %v and %v", s.Min, s.Max, before[0], before[n-1])
			}
			sum := s.Histogram.Below + s.Histogram.Above
			for _, c := range s.Histogram.Counts {
				sum += c
			}
			if sum != int64(n) {
				t.Errorf("the histogram holds %d of %d trials", sum, n)
			}
		}
	}
	for _, y := range [][]float64{nil, {1}, {1, math.NaN()}} {
		if s, err := gum.Summarise(y, 0.5); err == nil || s != nil {
			t.Errorf("trials %v are summarised: %v", y, s)
		}
	}
	if s, err := gum.Summarise(slices.Repeat([]float64{3}, 1000), 0.95); err != nil || s.Interval != [2]float64{3, 3} || s.U != 0 || s.Shortest != s.Interval {
		t.Errorf("equal trials give %+v, %v", s, err)
	}
}

// TestUndefined counts trials without a value: few are left out and reported, more
// than MaxUndefined are an error.
func TestUndefined(t *testing.T) {
	for _, c := range []struct {
		x   float64
		bad bool
	}{{4.2, false}, {3, true}} { // sqrt of a normal: undefined in 1.3e-5 and 1.3e-3 of the trials
		in := []gum.Input{{Name: "x", Dist: gum.Normal(c.x, 1)}}
		m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "y", "sqrt(x)", in)}}
		for _, trials := range []int64{1_000_000, 2_000_000} {
			r, err := gum.Propagate(context.Background(), m, gum.Settings{Trials: trials})
			if c.bad {
				if err == nil || !strings.Contains(err.Error(), "output y") || !strings.Contains(err.Error(), "undefined") {
					t.Errorf("error %v, want one that names the output", err)
				}
				continue
			}
			if err != nil {
				t.Fatal(err)
			}
			s := r.Outputs[0].MonteCarlo
			want := float64(trials) * 0.5 * math.Erfc(c.x/math.Sqrt2)
			near(t, "undefined trials", float64(s.Undefined), want, 5*math.Sqrt(want))
			if len(s.Warnings) != 1 || s.Trials != int(trials) {
				t.Errorf("%d trials with warnings %v", s.Trials, s.Warnings)
			}
			if !(s.Interval[0] > 0) || s.U-s.U != 0 {
				t.Errorf("the rest is spoilt: %+v", s)
			}
		}
	}
}

// TestNowhereDefined: an output that never has a value says so, and the law too.
func TestNowhereDefined(t *testing.T) {
	in := []gum.Input{{Name: "x", Dist: gum.Normal(-5, 0.1)}}
	m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "y", "log(x)", in)}}
	for _, s := range []gum.Settings{{Trials: 10_000}, {Trials: 2_000_000}, {Adaptive: true}, {LawOnly: true}} {
		if r, err := gum.Propagate(context.Background(), m, s); err == nil || r != nil || !strings.Contains(err.Error(), "output y") {
			t.Errorf("settings %+v: error %v", s, err)
		}
	}
}

// TestNothingUncertain: exact inputs give an exact output, neither an error nor a
// warning that the law fails.
func TestNothingUncertain(t *testing.T) {
	in := []gum.Input{{Name: "x", Dist: gum.Exactly(3)}}
	m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "y", "x*x", in)}}
	for _, trials := range []int64{1000, 2_000_000} {
		o := propagate(t, m, gum.Settings{Trials: trials}).Outputs[0]
		if o.Law.Value != 9 || o.Law.U != 0 || len(o.Law.Warnings) != 0 || o.MonteCarlo.Value != 9 || o.MonteCarlo.U != 0 {
			t.Errorf("law %+v, Monte Carlo %+v", o.Law, o.MonteCarlo)
		}
		near(t, "interval", o.MonteCarlo.Interval[1], 9, 1e-14)
	}
}

// TestInfiniteVariance: t with at most two degrees of freedom is refused by the
// law; Monte Carlo gives the interval only, here of one Student t input.
func TestInfiniteVariance(t *testing.T) {
	for _, c := range []struct{ dof, t95 float64 }{{2, 4.303}, {1, 12.706}} { // t95: JCGM 100:2008 table G.2
		in := []gum.Input{{Name: "x", Dist: gum.StudentT(10, 0.1, c.dof)}, {Name: "idle", Dist: gum.Normal(1, 1)}}
		m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "y", "x + 0*idle", in), compiled(t, "other", "idle", in)}}
		for _, trials := range []int64{1_000_000, 2_000_000} {
			r := propagate(t, m, gum.Settings{Trials: trials, Probability: 0.95})
			o := r.Outputs[0]
			if o.Law != nil || !errors.Is(o.LawError, gum.ErrInfiniteVariance) || o.Comparison != nil {
				t.Errorf("law %v, error %v", o.Law, o.LawError)
			}
			if !math.IsNaN(o.MonteCarlo.U) || math.IsNaN(o.MonteCarlo.Value) != (c.dof == 1) || len(o.MonteCarlo.Warnings) == 0 {
				t.Errorf("value %v and u %v with warnings %v", o.MonteCarlo.Value, o.MonteCarlo.U, o.MonteCarlo.Warnings)
			}
			near(t, "half of the interval over the scale", (o.MonteCarlo.Interval[1]-o.MonteCarlo.Interval[0])/0.2, c.t95, 0.01*c.t95)
			if p := r.Outputs[1]; p.Law == nil || p.MonteCarlo.U-p.MonteCarlo.U != 0 {
				t.Errorf("the other output suffers: %+v", p)
			}
		}
		if _, err := gum.Propagate(context.Background(), m, gum.Settings{LawOnly: true}); !errors.Is(err, gum.ErrInfiniteVariance) {
			t.Errorf("law only: error %v", err)
		}
	}
}

// TestHiddenInfiniteVariance: a factor that is 0 at its estimate does not hide the
// other's missing variance.
func TestHiddenInfiniteVariance(t *testing.T) {
	x := gum.Normal(1, 0.1)
	x.DOF = 2
	in := []gum.Input{{Name: "x", Dist: x}, {Name: "zero", Dist: gum.Normal(0, 1)}}
	m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "y", "x*zero", in)}}
	s := propagate(t, m, gum.Settings{Trials: 20_000}).Outputs[0].MonteCarlo
	if !math.IsNaN(s.U) || len(s.Warnings) != 1 {
		t.Errorf("u %v with warnings %v, want NaN and one", s.U, s.Warnings)
	}
}

// TestAdaptive: the procedure stops when the four averages are settled to δ, and
// with more digits asked for it goes on longer.
func TestAdaptive(t *testing.T) {
	m := gauge(t)
	one := propagate(t, m, gum.Settings{Adaptive: true, Probability: 0.95, Digits: 1})
	two := propagate(t, m, gum.Settings{Adaptive: true, Probability: 0.95, Digits: 2})
	if !one.Converged || !two.Converged || one.Sequences >= two.Sequences || one.Trials != int64(one.Sequences)*10_000 {
		t.Errorf("one digit: %d sequences, %d trials, converged %v; two: %d, converged %v", one.Sequences, one.Trials, one.Converged, two.Sequences, two.Converged)
	}
	near(t, "u", two.Outputs[0].MonteCarlo.U, 35.8, 0.5)
	// Enough sequences to leave the kept trials for bins.
	three := propagate(t, m, gum.Settings{Adaptive: true, Probability: 0.95, Digits: 2, Trials: 3_000_000, Seed: 4})
	near(t, "u", three.Outputs[0].MonteCarlo.U, 35.8, 0.5)
	stopped := propagate(t, m, gum.Settings{Adaptive: true, Probability: 0.95, Digits: 4, Trials: 1_300_000})
	if stopped.Converged || stopped.Trials != 1_300_000 || len(stopped.Warnings) == 0 {
		t.Errorf("stopped at %d trials, converged %v, warnings %v", stopped.Trials, stopped.Converged, stopped.Warnings)
	}
	if stopped.Outputs[0].MonteCarlo.Resolution == 0 {
		t.Error("so many trials stream, and so have a resolution")
	}
	near(t, "u", stopped.Outputs[0].MonteCarlo.U, 35.8, 0.2)
	fixed := propagate(t, m, gum.Settings{Probability: 0.95, Trials: 1_300_000})
	near(t, "u against the fixed run of the same trials", stopped.Outputs[0].MonteCarlo.U, fixed.Outputs[0].MonteCarlo.U, 1e-12)
	// An output without a variance settles by its interval alone.
	in := []gum.Input{{Name: "x", Dist: gum.StudentT(0, 1, 2)}}
	heavy := propagate(t, &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "y", "x", in)}}, gum.Settings{Adaptive: true, Probability: 0.95})
	if !heavy.Converged || !math.IsNaN(heavy.Outputs[0].MonteCarlo.U) {
		t.Errorf("t with two degrees of freedom: converged %v, u = %v", heavy.Converged, heavy.Outputs[0].MonteCarlo.U)
	}
	near(t, "its interval", heavy.Outputs[0].MonteCarlo.Interval[1], 4.303, 0.5)
	if _, err := gum.Propagate(context.Background(), m, gum.Settings{Adaptive: true, Trials: 15_000}); err == nil {
		t.Error("one sequence is accepted")
	}
}

// TestCoverage20000: over 20,000 simulated linear budgets, whose inputs' stated
// values are drawn about the truth as the inputs' distributions say, the 95 % Monte
// Carlo interval holds the truth within three binomial standard deviations.
func TestCoverage20000(t *testing.T) {
	const budgets, trials, p = 20_000, 1_000, 0.95
	src := random.New(11, "coverage of linear budgets", 0)
	y, x := make([]float64, trials), make([]float64, trials)
	hits := [2]int{}
	for range budgets {
		n := 2 + int(4*src.Float64())
		truth := 0.0
		clear(y)
		for range n {
			c := src.Normal()
			var d gum.Distribution
			u := math.Exp(0.5 * src.Normal())
			switch int(6 * src.Float64()) {
			case 0:
				d = gum.Rectangular(0, u)
			case 1:
				d = gum.Arcsine(0, u)
			case 2:
				d = gum.Triangular(0, u)
			case 3:
				d = gum.Trapezoidal(0, u, 0.4)
			default:
				d = gum.Normal(0, u)
			}
			v := src.Normal() // true value of the input
			d.Value = v - d.Sample(&src)
			truth += c * v
			d.Fill(&src, x)
			for i := range y {
				y[i] += c * x[i]
			}
		}
		s, err := gum.Summarise(y, p)
		if err != nil {
			t.Fatal(err)
		}
		if s.Interval[0] <= truth && truth <= s.Interval[1] {
			hits[0]++
		}
		if s.Shortest[0] <= truth && truth <= s.Shortest[1] {
			hits[1]++
		}
	}
	sd := math.Sqrt(p * (1 - p) / budgets)
	near(t, "coverage of the symmetric interval", float64(hits[0])/budgets, p, 3*sd)
	// The shortest of the intervals of finitely many trials is biased short, by about
	// 1/trials^(2/3); it is not held to the three standard deviations.
	near(t, "coverage of the shortest interval", float64(hits[1])/budgets, p, 0.02)
}

// TestHugeTrials: squares that overflow leave intervals and a word, not a NaN alone.
func TestHugeTrials(t *testing.T) {
	in := []gum.Input{{Name: "a", Dist: gum.Rectangular(0, 1e200)}, {Name: "b", Dist: gum.Normal(0, 1)}}
	m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "y", "a + b", in), compiled(t, "z", "b", in)}}
	for _, trials := range []int64{20_000, gum.SelectionTrials + 1} {
		r := propagate(t, m, gum.Settings{Trials: trials})
		s := r.Outputs[0].MonteCarlo
		near(t, "upper end", s.Interval[1]/1e200, 0.9545, 0.01)
		if !math.IsNaN(s.U) || !math.IsNaN(r.Correlation[0][1]) || len(s.Warnings) != 1 || !strings.Contains(s.Warnings[0].Error(), "overflow") {
			t.Errorf("%d trials: u %v, correlation %v, warnings %v; want NaN, NaN and one warning", trials, s.U, r.Correlation[0][1], s.Warnings)
		}
	}
}
