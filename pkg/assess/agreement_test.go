package assess

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"sort"
	"testing"

	"example.org/guardring/pkg/random"
	"example.org/guardring/pkg/reduce"
	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat"
)

func symmetric(rows ...[]float64) *mat.SymDense {
	v := mat.NewSymDense(len(rows), nil)
	for i, r := range rows {
		for j := range i + 1 {
			v.SetSym(i, j, r[j])
		}
	}
	return v
}

// Two laboratories with one divider: 2·E_n has standard deviation 1 with the
// covariance that their budgets give, and clearly less without it; ζ likewise.
func TestEnSharedDivider(t *testing.T) {
	const uDivider, ca, cb, ra, rb = 2e-4, 1.0, 0.98, 1.2e-4, 1.5e-4
	budget := func(title string, c, own float64) *reduce.Record {
		return &reduce.Record{Title: title, Measurands: []reduce.Measurand{{
			Name: "correction_factor", Unit: "1", Value: 1, U: reduce.Number(math.Hypot(c*uDivider, own)), K: 2,
			Budget: []reduce.BudgetLine{
				{Input: "channels.voltage.gain", Unit: "1", U: uDivider, Sensitivity: reduce.Number(-c), Contribution: reduce.Number(c * uDivider), Source: "divider certificate D-7"},
				{Input: "spacing", Unit: "m", U: reduce.Number(own), Sensitivity: 1, Contribution: reduce.Number(own), Source: "gauge " + title},
			}}}}
	}
	shared, err := SharedCovariance([]*reduce.Record{budget("laboratory A", ca, ra), budget("laboratory B", cb, rb)}, nil)
	if err != nil {
		t.Fatal(err)
	}
	cov := shared.Covariance.At(0, 1)
	near(t, "covariance", cov, ca*cb*uDivider*uDivider, 1e-12*cov)
	if len(shared.Inputs) != 1 || shared.Inputs[0].Input != "channels.voltage.gain" {
		t.Fatalf("common inputs %+v", shared.Inputs)
	}
	const n = 40000
	src := random.New(3, "shared-divider", 0)
	with, without, zeta := make([]float64, n), make([]float64, n), make([]float64, n)
	for k := range n {
		a, b := shared.Results[0], shared.Results[1]
		d := uDivider * src.Normal()
		a.Value += -ca*d + ra*src.Normal()
		b.Value += -cb*d + rb*src.Normal()
		for _, c := range []struct {
			dst   []float64
			score func(a, b Result, cov float64) (float64, error)
			cov   float64
		}{{with, En, cov}, {without, En, 0}, {zeta, Zeta, cov}} {
			if c.dst[k], err = c.score(a, b, c.cov); err != nil {
				t.Fatal(err)
			}
		}
	}
	// sd of a sample standard deviation: 1/√(2n) = 0.0035
	near(t, "spread of 2·E_n with covariance", 2*stat.StdDev(with, nil), 1, 0.015)
	near(t, "spread of ζ", stat.StdDev(zeta, nil), 1, 0.015)
	if s := 2 * stat.StdDev(without, nil); s > 0.75 { // derived: √(ra² + rb² + (ca−cb)²u²)/√(ua² + ub²) = 0.565
		t.Errorf("spread of 2·E_n without covariance %.3f: the shared divider should make it far too small", s)
	}
}

// Generalised least squares against the explicit inverse, and its degrees of
// equivalence against simulation.
func TestWeightedMeanCorrelated(t *testing.T) {
	x := []float64{1.0000012, 1.0000003, 0.9999991, 1.0000030}
	u := []float64{1e-6, 2e-6, 1.5e-6, 1e-6}
	r := symmetric([]float64{1}, []float64{0.6, 1}, []float64{0, 0, 1}, []float64{0.2, 0.3, -0.4, 1})
	v := mat.NewSymDense(4, nil)
	for i := range 4 {
		for j := range i + 1 {
			v.SetSym(i, j, r.At(i, j)*u[i]*u[j])
		}
	}
	m, err := WeightedMean(independent(x, u, "V"), v)
	if err != nil {
		t.Fatal(err)
	}
	var inverse mat.Dense
	if err := inverse.Inverse(v); err != nil {
		t.Fatal(err)
	}
	one, xs := mat.NewVecDense(4, []float64{1, 1, 1, 1}), mat.NewVecDense(4, x)
	info := mat.Inner(one, &inverse, one)
	mean := mat.Inner(one, &inverse, xs) / info
	near(t, "mean", m.Value, mean, 1e-14)
	near(t, "u", m.U, 1/math.Sqrt(info), 1e-12*m.U)
	e := mat.NewVecDense(4, nil)
	e.AddScaledVec(xs, -mean, one)
	near(t, "chi-squared", m.ChiSquared, mat.Inner(e, &inverse, e), 1e-8)
	d := m.Degrees()
	for i, g := range d.Unilateral { // var(d_i) = V_ii − u²(x̄) for a GLS mean
		near(t, "u(d)", g.U, math.Sqrt(u[i]*u[i]-m.U*m.U), 1e-10*u[i])
	}
	near(t, "bilateral", d.Bilateral[0][1].U, math.Sqrt(1+4-2*0.6*2)*1e-6, 1e-18)
	near(t, "antisymmetric", d.Bilateral[0][1].D, -d.Bilateral[1][0].D, 0)
}

// A pilot laboratory's value as reference, correlated with one participant.
func TestDegreesAgainst(t *testing.T) {
	rs := independent([]float64{10.1, 9.8}, []float64{0.1, 0.2}, "V")
	d, err := DegreesAgainst(rs, nil, Result{Value: 10000, U: 50, Unit: "mV"}, []float64{0.003, 0})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "u(d)", d.Unilateral[0].U, math.Sqrt(0.01+0.0025-0.006), 1e-15)
	near(t, "E_n", d.Unilateral[1].En, -0.2/(2*math.Sqrt(0.04+0.0025)), 1e-12)
}

// Largest consistent subset against a plain enumeration that computes chi-squared
// its own way, correlated and not.
func TestLargestConsistentSubset(t *testing.T) {
	src := random.New(5, "subset", 0)
	for round := range 30 {
		n := 3 + round%6
		x, u := make([]float64, n), make([]float64, n)
		s := 0.0
		if round%2 == 1 {
			s = 0.3
		}
		for i := range x {
			u[i] = 0.5 + src.Float64()
			x[i] = 100 + 3*src.Normal()
		}
		v := mat.NewSymDense(n, nil)
		for i := range n {
			for j := range i + 1 {
				v.SetSym(i, j, s*s)
			}
			v.SetSym(i, i, u[i]*u[i])
		}
		cov := v
		if s == 0 {
			cov = nil
		}
		got, err := LargestConsistentSubset(context.Background(), independent(x, u, "V"), cov, SubsetSettings{})
		var best []int
		least := math.Inf(1)
		for mask := 1; mask < 1<<n; mask++ {
			var set []int
			for i := range n {
				if mask>>i&1 == 1 {
					set = append(set, i)
				}
			}
			if len(set) < 2 || len(set) < len(best) {
				continue
			}
			chi := explicitChi(t, x, v, set)
			if chiTail(chi, len(set)-1) >= 0.05 && (len(set) > len(best) || chi < least) {
				best, least = set, chi
			}
		}
		if best == nil {
			refuses(t, "no subset", err, "no two results")
			continue
		}
		if err != nil {
			t.Fatal(err)
		}
		if fmt.Sprint(got.Members) != fmt.Sprint(best) {
			t.Errorf("round %d: subset %v, want %v", round, got.Members, best)
		}
		near(t, "chi-squared", got.Mean.ChiSquared, least, 1e-9*(1+least))
		if len(got.Members)+len(got.Excluded) != n || len(got.Mean.Degrees().Unilateral) != n {
			t.Errorf("round %d: %v and %v of %d", round, got.Members, got.Excluded, n)
		}
		for _, i := range got.Excluded { // independent: a result left out has u² = u_i² + u²(x̄)
			if s == 0 {
				near(t, "u(d) left out", got.Mean.Degrees().Unilateral[i].U, math.Hypot(u[i], got.Mean.U), 1e-12)
			}
		}
		greedy, err := LargestConsistentSubset(context.Background(), independent(x, u, "V"), cov, SubsetSettings{Exhaustive: 2, Greedy: true})
		if err == nil && (len(greedy.Members) > len(best) || greedy.Searched || len(greedy.Warnings) == 0) {
			t.Errorf("round %d: greedy %v (exhaustive %v)", round, greedy.Members, greedy.Searched)
		}
	}
}

func explicitChi(t *testing.T, x []float64, v *mat.SymDense, set []int) float64 {
	t.Helper()
	m := len(set)
	sub, one, xs := mat.NewDense(m, m, nil), mat.NewVecDense(m, nil), mat.NewVecDense(m, nil)
	for a, i := range set {
		one.SetVec(a, 1)
		xs.SetVec(a, x[i])
		for b, j := range set {
			sub.Set(a, b, v.At(i, j))
		}
	}
	var inverse mat.Dense
	if err := inverse.Inverse(sub); err != nil {
		t.Fatal(err)
	}
	mean := mat.Inner(one, &inverse, xs) / mat.Inner(one, &inverse, one)
	xs.AddScaledVec(xs, -mean, one)
	return mat.Inner(xs, &inverse, xs)
}

// A subset consistent at the level asked for is not called inconsistent at 5 %.
func TestSubsetLevel(t *testing.T) {
	// chi-squared (1.5² + 1.5²) = 4.5 for one degree of freedom: p = 0.034
	rs := independent([]float64{10, 13}, []float64{1, 1}, "V")
	s, err := LargestConsistentSubset(context.Background(), rs, nil, SubsetSettings{Level: 0.01})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "p", s.Mean.PValue, 0.0338948535246893, 1e-12)
	if !s.Mean.Consistent || s.Mean.Level != 0.01 || len(s.Mean.Warnings) != 0 {
		t.Errorf("consistent %v at %v, warnings %v", s.Mean.Consistent, s.Mean.Level, s.Mean.Warnings)
	}
	if _, err := LargestConsistentSubset(context.Background(), rs, nil, SubsetSettings{}); err == nil {
		t.Error("consistent at 5 %")
	}
}

func TestSubsetStops(t *testing.T) {
	ctx, cancel := context.WithCancelCause(context.Background())
	stop := errors.New("interrupted")
	cancel(stop)
	x, u := make([]float64, 18), make([]float64, 18)
	for i := range x {
		x[i], u[i] = float64(10*i), 1
	}
	if _, err := LargestConsistentSubset(ctx, independent(x, u, "V"), nil, SubsetSettings{}); !errors.Is(err, stop) {
		t.Errorf("got %v", err)
	}
}

// Algorithm A against an independent computation: bisection of the two estimating
// equations instead of the fixed-point iteration.
func TestAlgorithmAIndependent(t *testing.T) {
	src := random.New(9, "algorithm-a", 0)
	for round := range 20 {
		x := make([]float64, 5+3*round)
		for i := range x {
			x[i] = 1e-9 * (5 + 0.1*src.Normal())
			if i%7 == 3 {
				x[i] += 1e-9 * src.StudentT(1)
			}
		}
		before := append([]float64(nil), x...)
		got, err := AlgorithmA(x, RobustSettings{})
		if err != nil {
			t.Fatal(err)
		}
		if fmt.Sprint(x) != fmt.Sprint(before) {
			t.Fatal("the caller's values were changed")
		}
		mean, sd := solveAlgorithmA(x)
		near(t, "mean", got.Mean, mean, 1e-9*sd)
		near(t, "sd", got.SD, sd, 1e-9*sd)
	}
}

// solveAlgorithmA solves mean(ψ) = 0 for given s by bisection in the mean, and
// s = 1.134 sd of the pulled-in values by bisection in s.
func solveAlgorithmA(x []float64) (mean, sd float64) {
	lo, hi := x[0], x[0]
	for _, v := range x {
		lo, hi = math.Min(lo, v), math.Max(hi, v)
	}
	centre := func(s float64) float64 {
		a, b := lo, hi
		for range 200 {
			m := (a + b) / 2
			total := 0.0
			for _, v := range x {
				total += math.Max(-1.5*s, math.Min(1.5*s, v-m))
			}
			if total > 0 {
				a = m
			} else {
				b = m
			}
		}
		return (a + b) / 2
	}
	excess := func(s float64) float64 {
		m := centre(s)
		q := 0.0
		for _, v := range x {
			d := math.Max(-1.5*s, math.Min(1.5*s, v-m))
			q += d * d
		}
		return 1.134*math.Sqrt(q/float64(len(x)-1)) - s
	}
	a, b := 1e-6*(hi-lo), 2*(hi-lo)
	for range 200 {
		m := (a + b) / 2
		if excess(m) > 0 {
			a = m
		} else {
			b = m
		}
	}
	return centre(a), a
}

// Scores follow shifts, units and order as they must.
func TestScores(t *testing.T) {
	a, b := Result{Value: 5.02, U: 0.01, Unit: "kV/m"}, Result{Value: 5000, U: 15, K: 3, Unit: "V/m"}
	e, err := En(a, b, 0)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "E_n", e, 0.02/math.Hypot(0.02, 0.045), 1e-12)
	z, err := Z(a, Result{Value: 5, U: 0.03, Unit: "kV/m"}, 0.04)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "z′", z, 0.4, 1e-12)
	for z, want := range map[float64]Signal{2: Acceptable, -2.5: Warning, 3: Action, -7: Action} {
		if got, err := Judge(z); err != nil || got != want {
			t.Errorf("z = %v: %v, %v", z, got, err)
		}
	}
}

func TestAgreementRefuses(t *testing.T) {
	a, b := Result{Name: "A", Value: 1, U: 0.1, Unit: "V"}, Result{Name: "B", Value: 2, U: 0.1, Unit: "V"}
	nan := math.NaN()
	_, err := En(a, b, 0.02)
	refuses(t, "covariance too large", err, "larger than the product")
	_, err = En(a, b, 0.01)
	refuses(t, "fully correlated", err, "fully correlated")
	_, err = En(a, b, nan)
	refuses(t, "covariance not a number", err, "covariance")
	_, err = Zeta(a, Result{Value: 1, U: 1, Unit: "m"}, 0)
	refuses(t, "other dimension", err, "dimension")
	_, err = Z(a, b, 0)
	refuses(t, "no standard deviation", err, "above zero")
	_, err = Judge(nan)
	refuses(t, "score not a number", err, "not a number")
	_, err = WeightedMean([]Result{a}, nil)
	refuses(t, "one result", err, "at least 2")
	_, err = WeightedMean([]Result{a, {Value: 1, Unit: "V"}}, nil)
	refuses(t, "no uncertainty", err, "result 2", "above zero")
	_, err = WeightedMean([]Result{a, b}, symmetric([]float64{0.01}, []float64{0.0099999999999999999, 0.01}))
	refuses(t, "singular", err, "not positive definite")
	_, err = WeightedMean([]Result{a, b}, symmetric([]float64{0.01}, []float64{0, 0.04}))
	refuses(t, "variance differs", err, "B", "squared")
	_, err = WeightedMean([]Result{a, b}, symmetric([]float64{0.01}))
	refuses(t, "wrong size", err, "1×1 for 2")
	_, err = DegreesAgainst([]Result{a, b}, nil, a, []float64{0})
	refuses(t, "wrong length", err, "1 covariances")
	_, err = LargestConsistentSubset(context.Background(), []Result{a, {Value: 90, U: 0.1, Unit: "V"}}, nil, SubsetSettings{})
	refuses(t, "nothing consistent", err, "no two results")
	_, err = LargestConsistentSubset(context.Background(), make([]Result, 0), nil, SubsetSettings{})
	refuses(t, "no result", err, "at least 2")
	many := make([]Result, 21)
	for i := range many {
		many[i] = a
	}
	_, err = LargestConsistentSubset(context.Background(), many, nil, SubsetSettings{})
	refuses(t, "too many", err, "greedy")
	_, err = LargestConsistentSubset(context.Background(), many, nil, SubsetSettings{Level: 5})
	refuses(t, "level as percent", err, "between 0 and 1")
	_, err = AlgorithmA([]float64{1, 2}, RobustSettings{})
	refuses(t, "two values", err, "at least 3")
	_, err = AlgorithmA([]float64{1, 2, nan}, RobustSettings{})
	refuses(t, "not a number", err, "value 3")
	_, err = AlgorithmA([]float64{2, 2, 2, 2}, RobustSettings{})
	refuses(t, "all equal", err, "all values are equal")
	_, err = AlgorithmA([]float64{1, 2, 3}, RobustSettings{Digits: 40})
	refuses(t, "too many digits", err, "12")
}

// Half the values equal: a warning when an estimate exists, a refusal when not.
func TestAlgorithmATies(t *testing.T) {
	r, err := AlgorithmA([]float64{2, 2, 2, 1.9, 2.2, 2.3}, RobustSettings{})
	if err == nil && len(r.Warnings) == 0 && r.ScaledMAD == 0 {
		t.Error("a zero start without a warning")
	}
	if _, err := AlgorithmA([]float64{2, 2, 2, 2, 2, 2, 2, 5}, RobustSettings{}); err != nil {
		refuses(t, "ties", err, "shrinks to zero")
	}
}

func TestSharedCovarianceNames(t *testing.T) {
	line := func(input, source string, u, c float64) reduce.BudgetLine {
		return reduce.BudgetLine{Input: input, Source: source, U: reduce.Number(u), Sensitivity: reduce.Number(c), Contribution: reduce.Number(math.Abs(c) * u)}
	}
	record := func(title string, lines ...reduce.BudgetLine) *reduce.Record {
		s := 0.0
		for _, l := range lines {
			s += float64(l.Contribution) * float64(l.Contribution)
		}
		return &reduce.Record{Title: title, Measurands: []reduce.Measurand{{Name: "factor", Unit: "1", Value: 1, U: reduce.Number(math.Sqrt(s)), Budget: lines}}}
	}
	a := record("A", line("voltage.gain", "D-7", 1, 2), line("spacing", "G-1", 1, 1))
	b := record("B", line("hv.gain", "D-7", 1.5, -1), line("spacing", "G-2", 1, 1))
	c := record("C", line("voltage.gain", "D-9", 1, 1))
	// nothing in common by input and source together
	s, err := SharedCovariance([]*reduce.Record{a, b, c}, nil)
	if err != nil || len(s.Inputs) != 0 || s.Covariance.At(0, 1) != 0 {
		t.Errorf("found %+v, %v", s, err)
	}
	// by source: one line each, named differently; the smaller u is common
	s, err = SharedCovariance([]*reduce.Record{a, b, c}, []string{"D-7"})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "by source", s.Covariance.At(0, 1), -2, 1e-12)
	if len(s.Warnings) != 1 || s.Covariance.At(0, 2) != 0 {
		t.Errorf("warnings %v, covariance with C %v", s.Warnings, s.Covariance.At(0, 2))
	}
	// by input, though the sources differ: done, with a word
	s, err = SharedCovariance([]*reduce.Record{a, b, c}, []string{"spacing", "spacing"})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "by input", s.Covariance.At(0, 1), 1, 1e-12)
	if len(s.Warnings) == 0 {
		t.Error("differing sources without a warning")
	}
	_, err = SharedCovariance([]*reduce.Record{a, b}, []string{"spacin"})
	refuses(t, "misspelt", err, `did you mean "spacing"`)
	_, err = SharedCovariance([]*reduce.Record{a, b}, []string{"hv.gain"})
	refuses(t, "one record only", err, "1 of 2")
	_, err = SharedCovariance([]*reduce.Record{a}, nil)
	refuses(t, "one record", err, "two records")
	_, err = SharedCovarianceOf([]*reduce.Record{a, b}, "offset", nil)
	refuses(t, "no such measurand", err, "offset", "factor")
	_, err = SharedCovariance([]*reduce.Record{a, nil}, nil)
	refuses(t, "nil record", err, "no record")
	wrong := record("W", line("spacing", "G-1", 1, 1))
	wrong.Measurands[0].U *= 1000
	_, err = SharedCovariance([]*reduce.Record{a, wrong}, nil)
	refuses(t, "budget of another unit", err, "add up")
	_, err = SharedCovariance([]*reduce.Record{c, c}, nil)
	refuses(t, "a record twice", err, "fully correlated")
}

// Three records, two with one divider: the parts of a comparison belong together.
func TestCompare(t *testing.T) {
	record := func(title string, value float64, source string) *reduce.Record {
		return &reduce.Record{Title: title, Measurands: []reduce.Measurand{{Name: "factor", Unit: "1", Value: reduce.Number(value), U: 5e-4, K: 2,
			Budget: []reduce.BudgetLine{
				{Input: "channels.voltage.gain", U: 4e-4, Sensitivity: 1, Contribution: 4e-4, Source: source},
				{Input: "spacing", U: 3e-4, Sensitivity: 1, Contribution: 3e-4},
			}}}}
	}
	records := []*reduce.Record{record("A", 1.0000, "D-7"), record("B", 1.0012, "D-7"), record("C", 1.0003, "D-8")}
	a, err := Compare(context.Background(), records, AgreementSettings{})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "covariance", a.Shared.Covariance.At(0, 1), 1.6e-7, 1e-20)
	near(t, "E_n of the pair", a.Degrees.Bilateral[1][0].En, 1.2e-3/(2*math.Sqrt(2)*3e-4), 1e-9)
	if a.Agrees || a.Robust == nil {
		t.Errorf("agrees %v, robust %v", a.Agrees, a.Robust)
	}
	apart, err := Compare(context.Background(), records, AgreementSettings{Independent: true})
	if err != nil {
		t.Fatal(err)
	}
	if len(apart.Shared.Inputs) != 0 || !apart.Agrees {
		t.Errorf("independent: common %v, agrees %v", apart.Shared.Inputs, apart.Agrees)
	}
	if _, err := json.Marshal(a); err != nil {
		t.Error(err)
	}
	_, err = Compare(context.Background(), records, AgreementSettings{Independent: true, Shared: []string{"D-7"}})
	refuses(t, "independent with common inputs", err, "independent")
	far := []*reduce.Record{records[0], record("B", 1.0003, "D-7"), record("D", 1.01, "D-9")}
	if a, err = Compare(context.Background(), far, AgreementSettings{}); err != nil {
		t.Fatal(err)
	}
	if a.Subset == nil || fmt.Sprint(a.Subset.Excluded) != "[2]" || a.SubsetDegrees == nil {
		t.Errorf("subset %+v", a.Subset)
	}
}

func BenchmarkLargestConsistentSubset(b *testing.B) {
	x, u := make([]float64, 16), make([]float64, 16)
	src := random.New(1, "bench", 0)
	for i := range x {
		x[i], u[i] = 6*src.Normal(), 1
	}
	sort.Float64s(x)
	rs := independent(x, u, "V")
	for b.Loop() {
		if _, err := LargestConsistentSubset(context.Background(), rs, nil, SubsetSettings{}); err != nil {
			b.Fatal(err)
		}
	}
}
