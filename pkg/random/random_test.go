package random

import (
	"fmt"
	"math"
	"slices"
	"sort"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

// TestGenerator holds the generator to the algorithm of its authors: xoshiro256++
// from the state {1, 2, 3, 4}, stepped by hand from the published definition
// (computed independently, with the recurrence written in another language).
func TestGenerator(t *testing.T) {
	s := Source{1, 2, 3, 4}
	want := []uint64{41943041, 58720359, 3588806011781223, 3591011842654386, 9228616714210784205,
		9973669472204895162, 14011001112246962877, 12406186145184390807, 15849039046786891736, 10450023813501588000}
	for i, w := range want {
		if got := s.Uint64(); got != w {
			t.Fatalf("number %d is %d, want %d", i, got, w)
		}
	}
}

// TestStreams checks that every part of a stream's address matters and that equal
// addresses give equal streams.
func TestStreams(t *testing.T) {
	seen := map[Source]string{}
	for _, seed := range []uint64{0, 1, 2, math.MaxUint64} {
		for _, stream := range []string{"", "a", "b", "aa", "a\x00", "channel", "channel.gain", "channel.gain ", "eightlet", "eightlet\x00", "x\x01"} {
			for _, block := range []uint64{0, 1, 2, 1 << 40, math.MaxUint64} {
				s := New(seed, stream, block)
				at := fmt.Sprintf("%d %q %d", seed, stream, block)
				if o, ok := seen[s]; ok {
					t.Errorf("%s and %s share a stream", o, at)
				}
				seen[s] = at
				if s != New(seed, stream, block) {
					t.Errorf("%s is not the same twice", at)
				}
			}
		}
	}
}

// TestUniformEnds feeds the extreme words of the generator through the map to (0, 1).
func TestUniformEnds(t *testing.T) {
	for _, u := range []uint64{0, 1, 2, 1 << 10, 1 << 62, 1<<63 - 1, 1 << 63, math.MaxUint64 - 1<<10, math.MaxUint64} {
		if x := unit(u); !(x > 0 && x < 1) {
			t.Errorf("word %#x gives %v, outside (0, 1)", u, x)
		}
	}
	if unit(0) != 0x1p-63 || unit(math.MaxUint64) != 1-0x1p-53 {
		t.Errorf("ends are %v and %v", unit(0), unit(math.MaxUint64))
	}
}

// TestNormalLayers recomputes the generated table from its definition.
func TestNormalLayers(t *testing.T) {
	// r and v as printed by Marsaglia and Tsang (2000) for 256 layers; v is right to 12
	// digits there (value from memory).
	const r, v = 3.6541528853610088, 0.00492867323399
	f := func(x float64) float64 { return math.Exp(-x * x / 2) }
	area := r*f(r) + math.Sqrt(math.Pi/2)*math.Erfc(r/math.Sqrt2)
	if math.Abs(area-v) > 5e-14 {
		t.Fatalf("area of a layer is %.16g, published %.16g", area, v)
	}
	x := normalLayers
	if math.Abs(x[1]-r) > 1e-15*r {
		t.Errorf("base strip ends at %.17g, published %.17g", x[1], r)
	}
	if math.Abs(x[0]-area/f(r)) > 1e-14 {
		t.Errorf("equivalent width of the base is %.17g, want %.17g", x[0], area/f(r))
	}
	// Each layer above the base has the same area; the last closes at the mode.
	for i := 1; i < layers; i++ {
		if a := x[i] * (f(x[i+1]) - f(x[i])); math.Abs(a-area) > 2e-14 && i < layers-1 {
			t.Errorf("layer %d has area %.16g, want %.16g", i, a, area)
		}
	}
	if a := x[layers-1] * (1 - f(x[layers-1])); math.Abs(a-area) > 1e-13 || x[layers] != 0 {
		t.Errorf("top layer has area %.16g, want %.16g", a, area)
	}
}

// TestStudentLayers checks the layout for several degrees of freedom: equal areas,
// with the base strip's from the distribution function of an independent library.
func TestStudentLayers(t *testing.T) {
	for _, nu := range []float64{0.3, 1, 2, 3, 9, 49.5, 1e3, 1e6} {
		st := newStudent(nu)
		d := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: nu}
		r := math.Sqrt(nu * math.Expm1(st.sr))
		f := func(x float64) float64 { return math.Exp(st.log(x)) }
		area := r*f(r) + d.Survival(r)/d.Prob(0)
		var x [layers + 1]float64
		for i := range layers {
			x[i] = st.z.width[i] * fraction
		}
		// The library's density loses digits in proportion to nu, by a difference of two
		// logarithms of gamma functions.
		tolerance := 1e-10 + 1e-14*nu
		if math.Abs(x[0]*f(r)/area-1) > tolerance {
			t.Errorf("nu %v: base strip has area %v, want %v", nu, x[0]*f(r), area)
		}
		for i := 1; i < layers; i++ {
			if a := x[i] * (st.z.height[i+1] - st.z.height[i]); math.Abs(a/area-1) > tolerance {
				t.Errorf("nu %v: layer %d has area %v, want %v", nu, i, a, area)
			}
		}
	}
}

func TestArcsineSine(t *testing.T) {
	for i := -5000; i <= 5000; i++ {
		x := float64(i) / 10000
		if e := math.Abs(sine(x) - math.Sin(math.Pi*x)); e > 5e-16 {
			t.Errorf("sin(%v pi) is off by %v", x, e)
		}
	}
}

// kolmogorov returns the probability of a Kolmogorov–Smirnov distance at least as
// large as that between x and the distribution function (the limit distribution,
// with Stephens' correction for the number of data).
func kolmogorov(x []float64, cdf func(float64) float64) float64 {
	slices.Sort(x)
	n := float64(len(x))
	var d float64
	for i, v := range x {
		p := cdf(v)
		d = max(d, p-float64(i)/n, float64(i+1)/n-p)
	}
	l := (math.Sqrt(n) + 0.12 + 0.11/math.Sqrt(n)) * d
	var q float64
	for k := 1.0; k < 100; k++ {
		q += 2 * math.Pow(-1, k-1) * math.Exp(-2*k*k*l*l)
	}
	return q
}

type variate struct {
	name           string
	draw           func(*Source) float64
	cdf            func(float64) float64
	mean, variance float64
	kurtosis       float64 // fourth central moment over the variance squared, for the spread of the sample variance
}

func variates() []variate {
	phi := func(x float64) float64 { return 0.5 * math.Erfc(-x/math.Sqrt2) }
	v := []variate{
		{"uniform", (*Source).Float64, func(x float64) float64 { return x }, 0.5, 1.0 / 12, 1.8},
		{"normal", (*Source).Normal, phi, 0, 1, 3},
		{"exponential", (*Source).Exponential, func(x float64) float64 { return -math.Expm1(-x) }, 1, 1, 9},
		{"arcsine", (*Source).Arcsine, func(x float64) float64 { return 0.5 + math.Asin(x)/math.Pi }, 0, 0.5, 1.5},
	}
	for _, k := range []float64{0.3, 1, 4.5, 50} {
		g := distuv.Gamma{Alpha: k, Beta: 1}
		v = append(v, variate{fmt.Sprintf("gamma %v", k), func(s *Source) float64 { return s.Gamma(k) }, g.CDF, k, k, 3 + 6/k})
	}
	for _, nu := range []float64{0.5, 1, 2, 3.5, 5, 9, 30, 1e4} {
		d := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: nu}
		x := variate{fmt.Sprintf("t %v", nu), func(s *Source) float64 { return s.StudentT(nu) }, d.CDF, math.NaN(), math.NaN(), math.NaN()}
		if nu > 4 {
			x.mean, x.variance, x.kurtosis = 0, nu/(nu-2), 3+6/(nu-4)
		}
		v = append(v, x)
	}
	return v
}

// TestDistributions compares moments and the whole distribution of every variate
// with theory. The seed is fixed, so that the outcome is.
func TestDistributions(t *testing.T) {
	const n = 400_000
	for _, v := range variates() {
		s := New(20, "distributions "+v.name, 0)
		x := make([]float64, n)
		var m, q float64
		for i := range x {
			x[i] = v.draw(&s)
			m += x[i] / n
		}
		for _, a := range x {
			q += (a - m) * (a - m) / (n - 1)
		}
		if !math.IsNaN(v.mean) {
			if z := (m - v.mean) / math.Sqrt(v.variance/n); math.Abs(z) > 4 {
				t.Errorf("%s: mean %v, %.1f standard errors from %v", v.name, m, z, v.mean)
			}
			if z := (q/v.variance - 1) / math.Sqrt((v.kurtosis-1)/n); math.Abs(z) > 4 {
				t.Errorf("%s: variance %v, %.1f standard errors from %v", v.name, q, z, v.variance)
			}
		}
		if p := kolmogorov(x[:100_000], v.cdf); p < 0.001 {
			t.Errorf("%s: Kolmogorov–Smirnov probability %v", v.name, p)
		}
	}
}

// TestNormalTails counts draws beyond several sigma, and follows the tail itself
// past six, where counting is hopeless, through the conditional draws.
func TestNormalTails(t *testing.T) {
	const n = 20_000_000
	s := New(21, "tails", 0)
	x := make([]float64, 10_000)
	at := []float64{2, 3, 3.6541528853610088, 4, 4.5, 5}
	count := make([][2]int, len(at))
	for range n / len(x) {
		s.FillNormal(x)
		for _, v := range x {
			if math.Abs(v) < 2 {
				continue
			}
			for k, a := range at {
				if v > a {
					count[k][1]++
				} else if v < -a {
					count[k][0]++
				}
			}
		}
	}
	for k, a := range at {
		want := n * 0.5 * math.Erfc(a/math.Sqrt2)
		for side, c := range count[k] {
			if z := (float64(c) - want) / math.Sqrt(want); math.Abs(z) > 4 {
				t.Errorf("beyond %v on side %d: %d draws, %.1f expected (%.1f standard errors)", a, side, c, want, z)
			}
		}
	}
	// Given that a draw lies in the tail, how often is it beyond 5, 6, 6.5?
	const m = 40_000_000
	beyond := map[float64]int{5: 0, 6: 0, 6.5: 0}
	for range m {
		v := s.normalTail()
		if v > 5 {
			for a := range beyond {
				if v > a {
					beyond[a]++
				}
			}
		}
	}
	base := math.Erfc(normalLayers[1] / math.Sqrt2)
	for a, c := range beyond {
		want := m * math.Erfc(a/math.Sqrt2) / base
		if z := (float64(c) - want) / math.Sqrt(want); math.Abs(z) > 4 {
			t.Errorf("beyond %v in the tail: %d draws, %.1f expected (%.1f standard errors)", a, c, want, z)
		}
	}
}

// TestStudentTails compares the conditional tail draws with the distribution
// function.
func TestStudentTails(t *testing.T) {
	for _, nu := range []float64{1, 3, 9, 100, 1e6} {
		st := newStudent(nu)
		d := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: nu}
		r := math.Sqrt(nu * math.Expm1(st.sr))
		base := d.Survival(r)
		s := New(22, "student tails", uint64(nu))
		x := make([]float64, 100_000)
		for i := range x {
			x[i] = st.tail(&s)
		}
		if p := kolmogorov(x, func(v float64) float64 { return 1 - d.Survival(v)/base }); p < 0.001 {
			t.Errorf("tail of t with %v degrees of freedom: Kolmogorov–Smirnov probability %v", nu, p)
		}
	}
}

// TestResolution checks that fine structure is there: the low bits of normals and
// uniforms behave as random bits, and close to no two draws are equal.
func TestResolution(t *testing.T) {
	const n = 1_000_000
	s := New(23, "resolution", 0)
	x := make([]float64, n)
	s.FillNormal(x)
	ones := 0
	for _, v := range x {
		// 2^-52 of the interval's scale is below all layers' spacing of 2^-54·x_i
		ones += int(math.Float64bits(v) >> 3 & 1)
	}
	if z := (float64(ones) - n/2) / math.Sqrt(n/4); math.Abs(z) > 4 {
		t.Errorf("fourth lowest bit of normals is set %d times in %d", ones, n)
	}
	sort.Float64s(x)
	equal := 0
	for i := 1; i < n; i++ {
		if x[i] == x[i-1] {
			equal++
		}
	}
	// n²/2 pairs at a spacing of at most 2^-52 and a density of at most 0.4.
	if equal > 2 {
		t.Errorf("%d equal pairs among %d normals", equal, n)
	}
}

// TestBlocksIndependent correlates streams of neighbouring blocks, seeds and
// purposes, at lags too, and sums across blocks: each is standard normal when
// streams are independent.
func TestBlocksIndependent(t *testing.T) {
	const n = 20_000
	stream := func(seed uint64, purpose string, block uint64) []float64 {
		s := New(seed, purpose, block)
		x := make([]float64, n)
		s.FillNormal(x)
		return x
	}
	base := stream(1, "voltage", 0)
	others := map[string][]float64{
		"next block": stream(1, "voltage", 1), "block 2": stream(1, "voltage", 2), "next seed": stream(2, "voltage", 0),
		"seed 0": stream(0, "voltage", 0), "other purpose": stream(1, "voltagf", 0), "longer purpose": stream(1, "voltage ", 0),
	}
	for name, x := range others {
		for _, lag := range []int{0, 1, 2, 3} {
			var r float64
			for i := lag; i < n; i++ {
				r += base[i] * x[i-lag]
			}
			if z := r / math.Sqrt(float64(n-lag)); math.Abs(z) > 4 {
				t.Errorf("%s at lag %d: correlation of %.1f standard errors", name, lag, z)
			}
		}
	}
	// The first draws of many blocks form a sample by themselves.
	first := make([]float64, n)
	for b := range first {
		s := New(1, "voltage", uint64(b))
		first[b] = s.Float64()
	}
	var r float64
	for i := 1; i < n; i++ {
		r += (first[i] - 0.5) * (first[i-1] - 0.5) * 12
	}
	if z := r / math.Sqrt(n); math.Abs(z) > 4 {
		t.Errorf("first draws of neighbouring blocks: correlation of %.1f standard errors", z)
	}
	if p := kolmogorov(first, func(x float64) float64 { return x }); p < 0.001 {
		t.Errorf("first draws over blocks: Kolmogorov–Smirnov probability %v", p)
	}
}

// TestFills checks that fills give the numbers of single draws.
func TestFills(t *testing.T) {
	const n = 20_000
	x := make([]float64, n)
	for name, c := range map[string]struct {
		fill func(*Source)
		one  func(*Source) float64
	}{
		"uniform": {func(s *Source) { s.FillUniform(x) }, (*Source).Float64},
		"normal":  {func(s *Source) { s.FillNormal(x) }, (*Source).Normal},
		"t":       {func(s *Source) { s.FillStudentT(x, 4, 0, 1) }, func(s *Source) float64 { return s.StudentT(4) }},
		"t inf":   {func(s *Source) { s.FillStudentT(x, math.Inf(1), 0, 1) }, (*Source).Normal},
		"arcsine": {func(s *Source) { s.FillArcsine(x, 0, 1) }, (*Source).Arcsine},
	} {
		a := New(3, name, 9)
		b := a
		c.fill(&a)
		for i := range x {
			if y := c.one(&b); y != x[i] {
				t.Fatalf("%s: number %d is %v filled and %v alone", name, i, x[i], y)
			}
		}
		if a != b {
			t.Errorf("%s: the streams stand at different places afterwards", name)
		}
	}
}

func TestRefusals(t *testing.T) {
	s := New(1, "refusals", 0)
	for _, x := range []float64{s.Gamma(0), s.Gamma(-1), s.Gamma(math.NaN()), s.Gamma(math.Inf(1)), s.StudentT(0), s.StudentT(-3), s.StudentT(math.NaN())} {
		if !math.IsNaN(x) {
			t.Errorf("an impossible parameter gives %v, want NaN", x)
		}
	}
	for _, nu := range []float64{0.01, 1e-300, math.SmallestNonzeroFloat64} {
		if v := s.StudentT(nu); math.IsNaN(v) {
			t.Errorf("t with %v degrees of freedom gives NaN", nu)
		}
	}
	x := []float64{1}
	s.FillStudentT(x, -1, 0, 1)
	if !math.IsNaN(x[0]) {
		t.Errorf("an impossible parameter fills %v, want NaN", x[0])
	}
}

// TestNoAllocations: drawing never touches the heap.
func TestNoAllocations(t *testing.T) {
	x := make([]float64, 1000)
	s := New(1, "allocations", 0)
	s.StudentT(9)
	if n := testing.AllocsPerRun(10, func() {
		q := New(1, "a purpose longer than eight letters", 7)
		q.FillNormal(x)
		q.FillStudentT(x, 9, 0, 1)
		q.FillArcsine(x, 0, 1)
		q.Gamma(2)
	}); n != 0 {
		t.Errorf("%v allocations", n)
	}
}

func ExampleNew() {
	// One stream for each block of work: the numbers depend neither on the order of the
	// blocks nor on who draws them.
	for block := range uint64(3) {
		s := New(0, "disc radius", block)
		fmt.Printf("%.6f %.6f\n", s.Normal(), s.Normal())
	}
	// Output:
	// -0.086226 0.970538
	// 0.372926 -0.437740
	// -1.250451 0.586817
}

func BenchmarkFill(b *testing.B) {
	x := make([]float64, 500)
	s := New(1, "bench", 0)
	for _, c := range []struct {
		name string
		fill func()
	}{
		{"uniform", func() { s.FillUniformIn(x, 1, 2) }},
		{"normal", func() { s.FillNormalAt(x, 1, 2) }},
		{"t9", func() { s.FillStudentT(x, 9, 1, 2) }},
		{"arcsine", func() { s.FillArcsine(x, 1, 2) }},
	} {
		b.Run(c.name, func(b *testing.B) {
			for b.Loop() {
				c.fill()
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(len(x)), "ns/draw")
		})
	}
}
