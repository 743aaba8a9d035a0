package gum_test

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"runtime"
	"slices"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/random"
)

func propagate(t testing.TB, m *gum.Model, s gum.Settings) *gum.Result {
	t.Helper()
	r, err := gum.Propagate(context.Background(), m, s)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// TestAdditive reproduces JCGM 101:2008 9.2.2 and 9.2.3 (values from memory): the
// sum of four inputs, all normal or all rectangular; selected and streamed.
func TestAdditive(t *testing.T) {
	for _, id := range []string{"mc-9.2.2", "mc-9.2.3"} {
		var ref struct {
			Expected struct {
				Y, U  float64
				CI    [2]float64 `json:"ci95"`
				GUM   [2]float64 `json:"gum_ci95"`
				Exact float64    `json:"analytic_endpoint"`
			}
			Tolerance struct{ Abs float64 }
		}
		reference(t, "montecarlo", id, &ref)
		d := gum.Normal(0, 1)
		if id == "mc-9.2.3" {
			d = gum.Rectangular(0, math.Sqrt(3))
		} else {
			ref.Expected.GUM = ref.Expected.CI
		}
		in := []gum.Input{{Name: "X1", Dist: d}, {Name: "X2", Dist: d}, {Name: "X3", Dist: d}, {Name: "X4", Dist: d}}
		m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "Y", "X1+X2+X3+X4", in)}}
		for _, trials := range []int64{1_000_000, 4_000_000} {
			o := propagate(t, m, gum.Settings{Trials: trials, Probability: 0.95}).Outputs[0]
			e, tol := ref.Expected, ref.Tolerance.Abs
			what := fmt.Sprintf("%s with %d trials: ", id, trials)
			near(t, what+"y", o.MonteCarlo.Value, e.Y, 0.005)
			near(t, what+"u", o.MonteCarlo.U, e.U, 0.005)
			near(t, what+"low", o.MonteCarlo.Interval[0], e.CI[0], tol)
			near(t, what+"high", o.MonteCarlo.Interval[1], e.CI[1], tol)
			near(t, what+"law's low", o.Law.Interval[0], e.GUM[0], 0.005)
			near(t, what+"law's high", o.Law.Interval[1], e.GUM[1], 0.005)
			if e.Exact != 0 {
				near(t, what+"exact high", o.MonteCarlo.Interval[1], e.Exact, 0.006)
			}
			near(t, what+"length of the shortest", o.MonteCarlo.Shortest[1]-o.MonteCarlo.Shortest[0], e.CI[1]-e.CI[0], tol)
		}
	}
}

// TestComparisonLoss reproduces JCGM 101:2008 9.4 (values from memory): X1² + X2²,
// in units of 1e-6.
func TestComparisonLoss(t *testing.T) {
	for _, id := range []string{"mc-9.4-rho0-x0", "mc-9.4-rho0-x0.05", "mc-9.4-rho0.9-x0", "mc-9.4-rho0.9-x0.05"} {
		var ref struct {
			Inputs   struct{ X1, X2, U1, U2, Rho float64 }
			Expected struct {
				Y  float64    `json:"y_1e6"`
				U  float64    `json:"u_1e6"`
				S  [2]float64 `json:"mc_ci95_shortest_1e6"`
				Y1 float64    `json:"gum1_y_1e6"`
				U1 float64    `json:"gum1_u_1e6"`
				C1 [2]float64 `json:"gum1_ci_1e6"`
				U2 float64    `json:"gum2_u_1e6"`
			}
			Tolerance struct {
				Y  float64 `json:"y_1e6"`
				U  float64 `json:"u_1e6"`
				CI float64 `json:"ci_1e6"`
			}
		}
		reference(t, "montecarlo", id, &ref)
		n, e, tol := ref.Inputs, ref.Expected, ref.Tolerance
		in := []gum.Input{{Name: "X1", Dist: gum.Normal(n.X1, n.U1)}, {Name: "X2", Dist: gum.Normal(n.X2, n.U2)}}
		m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "Y", "X1*X1 + X2*X2", in)}}
		if n.Rho != 0 {
			m.Correlations = []gum.Pair{{A: "X1", B: "X2", R: n.Rho}}
		}
		o := propagate(t, m, gum.Settings{Trials: 1_000_000, Probability: 0.95, SecondOrder: true}).Outputs[0]
		mc, l := o.MonteCarlo, o.Law
		near(t, id+" y", mc.Value*1e6, e.Y, tol.Y)
		near(t, id+" u", mc.U*1e6, e.U, tol.U)
		// The ends of the shortest interval scatter as M^(-1/3): judged by length, and by coverage below.
		near(t, id+" length", (mc.Shortest[1]-mc.Shortest[0])*1e6, e.S[1]-e.S[0], tol.CI)
		near(t, id+" law's y", l.Value*1e6, e.Y1, 1e-6)
		near(t, id+" law's first-order u", l.FirstOrderU*1e6, e.U1, 0.5)
		near(t, id+" law's second-order u", l.U*1e6, e.U2, 0.5)
		exact := math.Sqrt(4*math.Pow(n.U1, 4)*(1+n.Rho*n.Rho) + 4*n.U1*n.U1*n.X1*n.X1)
		near(t, id+" law's second-order u against the analytic", l.U, exact, 1e-9*exact)
		near(t, id+" second-order shift", (l.Value+l.Shift)*1e6, e.Y, 0.5)
		first := propagateLaw(t, m, gum.Settings{Probability: 0.95})
		near(t, id+" law's low", first.Interval[0]*1e6, e.C1[0], 0.5)
		near(t, id+" law's high", first.Interval[1]*1e6, e.C1[1], 0.5)
		if o.Comparison.Agrees {
			t.Errorf("%s: the law is said to agree, JCGM 101:2008 9.4 shows that it does not", id)
		}
		if e.U1 == 0 && len(first.Warnings) == 0 {
			t.Errorf("%s: no warning that the first order vanishes", id)
		}
	}
}

// gauge is JCGM 101:2008 9.5, in nm.
func gauge(t testing.TB) *gum.Model {
	arcsine := gum.Arcsine(0, 0.5)
	in := []gum.Input{
		{Name: "Ls", Dist: gum.StudentT(50000623, 25, 18)}, {Name: "D", Dist: gum.StudentT(215, 6, 24)},
		{Name: "d1", Dist: gum.StudentT(0, 4, 5)}, {Name: "d2", Dist: gum.StudentT(0, 7, 8)},
		{Name: "alpha", Dist: gum.Rectangular(11.5e-6, 2e-6)},
		{Name: "theta0", Dist: gum.Normal(-0.1, 0.2)}, {Name: "Delta", Dist: arcsine},
		{Name: "dalpha", Dist: gum.CurvilinearTrapezoidal(-1e-6, 1e-6, 0.1e-6)},
		{Name: "dtheta", Dist: gum.CurvilinearTrapezoidal(-0.050, 0.050, 0.025)},
	}
	return &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "dL",
		"(Ls*(1+(alpha-dalpha)*(theta0+Delta-dtheta)) + D + d1 + d2)/(1+alpha*(theta0+Delta)) - 50000000", in)}}
}

// TestGauge reproduces JCGM 101:2008 9.5 (values from memory).
func TestGauge(t *testing.T) {
	var ref struct {
		Expected struct {
			GUM struct {
				Y, U float64
				CI   [2]float64 `json:"ci99"`
			}
			MC struct {
				Y, U float64
				CI   [2]float64 `json:"ci99_shortest"`
			}
		}
		Tolerance struct{ Y, U, CI float64 }
	}
	reference(t, "montecarlo", "mc-9.5-gauge", &ref)
	m := gauge(t)
	tol := ref.Tolerance
	for _, trials := range []int64{1_000_000, 4_000_000} {
		o := propagate(t, m, gum.Settings{Trials: trials, Probability: 0.99}).Outputs[0]
		mc, w := o.MonteCarlo, ref.Expected.MC
		near(t, "y", mc.Value, w.Y, tol.Y)
		near(t, "u", mc.U, w.U, tol.U)
		near(t, "length of the shortest 99 % interval", mc.Shortest[1]-mc.Shortest[0], w.CI[1]-w.CI[0], tol.CI)
		near(t, "low", mc.Interval[0], w.CI[0], tol.CI)
		near(t, "high", mc.Interval[1], w.CI[1], tol.CI)
	}
	l := propagateLaw(t, m, gum.Settings{Probability: 0.99})
	near(t, "law's y", l.Value, ref.Expected.GUM.Y, tol.Y)
	near(t, "law's u", l.U, ref.Expected.GUM.U, 0.5)
	near(t, "law's low", l.Interval[0], ref.Expected.GUM.CI[0], tol.CI)
	near(t, "law's high", l.Interval[1], ref.Expected.GUM.CI[1], tol.CI)
}

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

// twoOutputs has two correlated outputs.
func twoOutputs(t testing.TB) *gum.Model {
	in := []gum.Input{{Name: "a", Dist: gum.Normal(1, 0.1)}, {Name: "b", Dist: gum.Normal(2, 0.1)}, {Name: "c", Dist: gum.Normal(0, 0.2)}}
	return &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "p", "a + c", in), compiled(t, "q", "b + c", in)}}
}

// TestRegions compares with the coverage factors for normals of JCGM 102:2011 table
// 1 (values from memory): k_p of the ellipse holds for any correlation, k_q of the
// rectangle for none.
func TestRegions(t *testing.T) {
	var ref struct {
		Expected struct {
			Full struct{ KP, KQ []float64 }
		}
		Tolerance struct{ Abs float64 }
	}
	reference(t, "gum", "jcgm102-coverage-factors", &ref)
	all := []gum.Input{{Name: "a", Dist: gum.Normal(1, 0.1)}, {Name: "b", Dist: gum.Normal(2, 3)}, {Name: "c", Dist: gum.Normal(0, 1e-6)}}
	for n := 2; n <= 3; n++ {
		in := all[:n]
		m := &gum.Model{Inputs: in}
		for _, i := range in {
			m.Outputs = append(m.Outputs, compiled(t, "out "+i.Name, i.Name, in))
		}
		for _, trials := range []int64{1_000_000, 2_000_000} {
			r := propagate(t, m, gum.Settings{Trials: trials, Probability: 0.95})
			if len(r.Regions) != 2 || r.Regions[0].Kind != "ellipse" || r.Regions[1].Kind != "rectangle" {
				t.Fatalf("regions %+v", r.Regions)
			}
			// Above the selection size the shape is the pilot's, known to 1/√(2·40000).
			tol := 0.01
			near(t, "k_p", r.Regions[0].K, ref.Expected.Full.KP[n-2], tol)
			near(t, "k_q", r.Regions[1].K, ref.Expected.Full.KQ[n-2], tol)
		}
	}
	m := twoOutputs(t)
	for _, trials := range []int64{1_000_000, 2_000_000} {
		r := propagate(t, m, gum.Settings{Trials: trials, Probability: 0.95})
		near(t, "k_p", r.Regions[0].K, ref.Expected.Full.KP[0], 0.01)
		near(t, "correlation", r.Correlation[0][1], 0.8, 0.002) // 0.2²/(0.1² + 0.2²)
		near(t, "covariance", r.Covariance[0][1], 0.04, 0.0002)
		near(t, "variance", r.Covariance[1][1], 0.05, 0.0003)
		if len(r.Points) != 2 || len(r.Points[1]) != 2000 {
			t.Error("no points for a scatter plot")
		}
	}
	l := propagate(t, m, gum.Settings{LawOnly: true})
	near(t, "correlation by the law", l.Correlation[0][1], 0.8, 1e-12)
	m.Outputs = append(m.Outputs, compiled(t, "sum", "a + b + 2*c", m.Inputs))
	r := propagate(t, m, gum.Settings{Trials: 100_000})
	if len(r.Regions) != 1 || len(r.Warnings) == 0 {
		t.Errorf("dependent outputs give regions %v with warnings %v, want the rectangle and a warning", r.Regions, r.Warnings)
	}
}

// TestCorrelated: correlated normals, a multivariate t and a Gaussian copula have
// the spread of their sum that theory gives.
func TestCorrelated(t *testing.T) {
	sum := func(a, b gum.Input, r float64) *gum.Result {
		in := []gum.Input{a, b}
		return propagate(t, &gum.Model{Inputs: in, Correlations: []gum.Pair{{A: "a", B: "b", R: r}},
			Outputs: []gum.Output{compiled(t, "s", "a + b", in), compiled(t, "x", "a", in), compiled(t, "y", "b", in)}}, gum.Settings{Trials: 1_000_000})
	}
	for _, r := range []float64{-1, -0.6, 0.3, 1} {
		m := sum(gum.Input{Name: "a", Dist: gum.Normal(1, 3)}, gum.Input{Name: "b", Dist: gum.Normal(2, 4)}, r)
		want := math.Sqrt(25 + 24*r)
		near(t, "u of the sum of normals", m.Outputs[0].MonteCarlo.U, want, 0.005*want)
		near(t, "law", m.Outputs[0].Law.U, want, 1e-12)
		near(t, "r", m.Correlation[1][2], r, 0.003)
		if len(m.Outputs[0].Law.Warnings) != 0 {
			t.Errorf("warnings %v", m.Outputs[0].Law.Warnings)
		}
	}
	// Rectangular under a Gaussian copula: product-moment correlation (6/π) asin(r/2) (Pearson 1907).
	m := sum(gum.Input{Name: "a", Dist: gum.Rectangular(0, 1)}, gum.Input{Name: "b", Dist: gum.Rectangular(5, 2)}, 0.7)
	near(t, "correlation of the rectangular pair", m.Correlation[1][2], 6/math.Pi*math.Asin(0.35), 0.003)
	near(t, "u of a member", m.Outputs[1].MonteCarlo.U, 1/math.Sqrt(3), 0.002)
	said := false
	for _, w := range m.Warnings {
		said = said || strings.Contains(w.Error(), "copula") && strings.Contains(w.Error(), "a, b")
	}
	if !said {
		t.Errorf("warnings %v do not name the copula and its inputs", m.Warnings)
	}
}

// TestJoint: one draw of several inputs, some correlated.
func TestJoint(t *testing.T) {
	d := []gum.Distribution{gum.Normal(1, 2), gum.Rectangular(0, 1), gum.Normal(5, 3), gum.Exactly(7), gum.Normal(0, 1)}
	j, err := gum.NewJoint(d, []gum.Correlation{{I: 0, J: 2, R: -0.8}, {I: 2, J: 4, R: 0.6}, {I: 0, J: 4, R: -0.48}})
	if err != nil {
		t.Fatal(err)
	}
	const n = 200_000
	src := random.New(12, "joint", 0)
	x := make([]float64, len(d))
	var cov [5][5]float64
	for range n {
		j.Sample(&src, x)
		for a := range x {
			for b := range x {
				cov[a][b] += (x[a] - d[a].Value) * (x[b] - d[b].Value) / n
			}
		}
	}
	r := [5][5]float64{{1, 0, -0.8, 0, -0.48}, {0, 1, 0, 0, 0}, {-0.8, 0, 1, 0, 0.6}, {}, {-0.48, 0, 0.6, 0, 1}}
	for a := range x {
		for b := range x {
			near(t, fmt.Sprintf("covariance of %d and %d", a, b), cov[a][b], r[a][b]*d[a].U*d[b].U, 0.015*d[a].U*d[b].U)
		}
	}
	if _, err := gum.NewJoint(d, []gum.Correlation{{I: 0, J: 2, R: 2}}); err == nil {
		t.Error("r = 2 is accepted")
	}
}

// TestJointReadings reproduces JCGM 100:2008 H.2.2 (values from memory): five
// simultaneous readings of voltage, current and phase, and the resistance from
// them.
func TestJointReadings(t *testing.T) {
	v := []float64{5.007, 4.994, 5.005, 4.990, 4.999}
	i := []float64{19.663e-3, 19.639e-3, 19.640e-3, 19.685e-3, 19.678e-3}
	phi := []float64{1.0456, 1.0438, 1.0468, 1.0428, 1.0433}
	in, pairs, err := gum.JointReadings([]string{"V", "I", "phi"}, [][]float64{v, i, phi})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "V", in[0].Dist.Value, 4.9990, 0.00005)
	near(t, "s(V)", in[0].Dist.U, 0.0032, 0.00005)
	near(t, "I", in[1].Dist.Value, 19.6610e-3, 0.00005e-3)
	near(t, "s(I)", in[1].Dist.U, 0.0095e-3, 0.00005e-3)
	near(t, "phi", in[2].Dist.Value, 1.04446, 0.000005)
	near(t, "s(phi)", in[2].Dist.U, 0.00075, 0.000005)
	for k, want := range []float64{-0.36, 0.86, -0.65} {
		near(t, "r("+pairs[k].A+", "+pairs[k].B+")", pairs[k].R, want, 0.005)
	}
	m := &gum.Model{Inputs: in, Correlations: pairs, Outputs: []gum.Output{
		compiled(t, "R", "V/I*cos(phi)", in), compiled(t, "X", "V/I*sin(phi)", in), compiled(t, "Z", "V/I", in)}}
	r := propagate(t, m, gum.Settings{LawOnly: true})
	for k, want := range [][3]float64{{127.732, 0.071, 4}, {219.847, 0.295, 4}, {254.260, 0.236, 4}} {
		l := r.Outputs[k].Law
		near(t, "value", l.Value, want[0], 0.0005)
		near(t, "u", l.U, want[1], 0.001) // computed there from rounded values: X has 0.2956 in full
		near(t, "degrees of freedom", l.DOF, want[2], 1e-9)
		if len(l.Warnings) != 0 {
			t.Errorf("warnings %v", l.Warnings)
		}
	}
	for k, want := range map[[2]int]float64{{0, 1}: -0.588, {0, 2}: -0.485, {1, 2}: 0.993} {
		near(t, "correlation of outputs", r.Correlation[k[0]][k[1]], want, 0.0005)
	}
	// Five readings of three quantities leave two degrees of freedom: no variance, but an
	// interval, that of t(2) for a single one: scale s/√n·√(4/2).
	single := &gum.Model{Inputs: in, Correlations: pairs, Outputs: []gum.Output{compiled(t, "V only", "V", in), compiled(t, "I only", "I", in)}}
	mc := propagate(t, single, gum.Settings{Trials: 1_000_000, Probability: 0.95})
	near(t, "interval", (mc.Outputs[0].MonteCarlo.Interval[1]-mc.Outputs[0].MonteCarlo.Interval[0])/2, 4.303*math.Sqrt2*in[0].Dist.U, 0.02*4.3*in[0].Dist.U)
	if !math.IsNaN(mc.Outputs[0].MonteCarlo.U) {
		t.Error("a standard deviation is stated that does not exist")
	}
	if _, _, err := gum.JointReadings([]string{"a", "b"}, [][]float64{{1, 2}, {2, 3}}); err == nil {
		t.Error("two readings of two quantities are accepted")
	}
}

// TestMultivariateT: twelve joint readings, ten degrees of freedom: covariance of
// the draws is scale·ν/(ν−2), and the pair is uncorrelated yet dependent when r = 0.
func TestMultivariateT(t *testing.T) {
	d := gum.Normal(0, 1)
	d.DOF = 10
	in := []gum.Input{{Name: "a", Dist: d, Block: "run"}, {Name: "b", Dist: d, Block: "run"}}
	m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "a squared", "a*a", in), compiled(t, "b squared", "b*b", in), compiled(t, "s", "a+b", in)}}
	r := propagate(t, m, gum.Settings{Trials: 1_000_000})
	near(t, "variance of the sum", r.Outputs[2].MonteCarlo.U*r.Outputs[2].MonteCarlo.U, 2*10.0/8, 0.015)
	// Derived: with s = ν/χ², cov(a², b²) = var(s), E s = ν/(ν−2), E s² = ν²/((ν−2)(ν−4)); var(a²) = 3E s² − (E s)².
	es, es2 := 10.0/8, 100.0/48
	near(t, "correlation of squares", r.Correlation[0][1], (es2-es*es)/(3*es2-es*es), 0.02)
}

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
	if _, err := gum.Propagate(context.Background(), m, gum.Settings{Adaptive: true, Trials: 15_000}); err == nil {
		t.Error("one sequence is accepted")
	}
}

// TestCompare: JCGM 101:2008 7.9.2 gives δ for u(y) = 0.00035 V as 0.000005 with two
// digits and 0.00005 with one (example 1 there, from memory).
func TestCompare(t *testing.T) {
	for _, c := range []struct {
		u      float64
		digits int
		delta  float64
	}{{0.00035, 2, 0.000005}, {0.00035, 1, 0.00005}, {2, 1, 0.5}, {0.96, 1, 0.5}, {0.94, 1, 0.05}, {99.7, 2, 5}, {1e-3, 1, 0.5e-3}, {36, 2, 0.5}, {0, 1, 0}} {
		l := &gum.Law{U: c.u, Interval: [2]float64{-c.u, c.u}}
		s := &gum.Sample{Interval: [2]float64{-c.u - 0.9*c.delta, c.u + 1.1*c.delta}}
		got := gum.Compare(l, s, c.digits)
		near(t, "δ", got.Delta, c.delta, 1e-12*c.delta)
		near(t, "d_low", got.DLow, 0.9*c.delta, 1e-9*c.u)
		near(t, "d_high", got.DHigh, 1.1*c.delta, 1e-9*c.u)
		if got.Agrees != (c.delta == 0) {
			t.Errorf("u = %v: agrees is %v", c.u, got.Agrees)
		}
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
		if !strings.Contains(err.Error(), "stopped after 3") {
			t.Errorf("error %q does not say how far the run came", err)
		}
		t.Logf("ended %v after cancel", took)
	}
}

// TestNoAllocationPerBlock: ten times the blocks, the same allocations.
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
	if many > few+5 {
		t.Errorf("%v allocations for 10 blocks, %v for 100", few, many)
	}
}

// TestModelRefuses lists bad models, and a word of each message.
func TestModelRefuses(t *testing.T) {
	in := func() []gum.Input {
		return []gum.Input{{Name: "radius", Dist: gum.Normal(1, 0.1)}, {Name: "gain", Dist: gum.Normal(1, 0.1)}, {Name: "count", Dist: gum.Exactly(3)}}
	}
	for _, c := range []struct {
		change func(m *gum.Model)
		word   string
	}{
		{func(m *gum.Model) { m.Outputs = nil }, "no outputs"},
		{func(m *gum.Model) { m.Inputs[1].Name = "radius" }, "already taken"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Normal(1, 0) }, "input radius: standard uncertainty is 0"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Normal(1, -2) }, "input radius: standard uncertainty is -2"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Normal(math.NaN(), 1) }, "input radius: value"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Rectangular(1, 0) }, "half-width"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Trapezoidal(1, 1, 1.5) }, "beta"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.CurvilinearTrapezoidal(0, 1, 0.6) }, "limits are uncertain"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Exponential(-1) }, "value is -1"},
		{func(m *gum.Model) { m.Inputs[0].Dist = gum.Gamma(0, 1) }, "shape parameter"},
		{func(m *gum.Model) { m.Inputs[0].Dist.Shape = "gaussian" }, "unknown shape"},
		{func(m *gum.Model) { m.Inputs[0].Dist.DOF = -1 }, "degrees of freedom"},
		{func(m *gum.Model) { m.Correlations = []gum.Pair{{A: "radius", B: "gian", R: 0.5}} }, `did you mean "gain"`},
		{func(m *gum.Model) { m.Correlations = []gum.Pair{{A: "voltage", B: "gain", R: 0.5}} }, "known are radius, gain, count"},
		{func(m *gum.Model) { m.Correlations = []gum.Pair{{A: "radius", B: "gain", R: 1.5}} }, "radius and gain is 1.5"},
		{func(m *gum.Model) { m.Correlations = []gum.Pair{{A: "radius", B: "count", R: 0.5}} }, "count is exact"},
		{func(m *gum.Model) { m.Inputs[0].Block, m.Inputs[1].Block = "b", "b"; m.Inputs[1].Dist.DOF = 4 }, "read together"},
		{func(m *gum.Model) { m.Outputs[0].New = nil }, "no formula"},
	} {
		m := &gum.Model{Inputs: in()}
		m.Outputs = []gum.Output{compiled(t, "y", "radius*gain*count", m.Inputs)}
		c.change(m)
		r, err := gum.Propagate(context.Background(), m, gum.Settings{Trials: 1000})
		if err == nil || r != nil || !strings.Contains(err.Error(), c.word) {
			t.Errorf("error %v, want one with %q", err, c.word)
		}
	}
	m := &gum.Model{Inputs: in()}
	m.Outputs = []gum.Output{compiled(t, "y", "radius*gain*count", m.Inputs)}
	for _, s := range []gum.Settings{{Probability: 1}, {Probability: -1}, {Trials: -5}, {Digits: 9}, {Trials: 10}} {
		if r, err := gum.Propagate(context.Background(), m, s); err == nil || r != nil {
			t.Errorf("settings %+v are accepted", s)
		}
	}
}
