package reduce

import (
	"math"
	"testing"

	"example.org/guardring/pkg/random"
)

// TestBaselines checks every method on readings that follow it exactly: the
// baseline must return the drift, and its weights on the coefficients, through the
// coefficients' answers to the readings, the derivative of that value by each
// reading.
func TestBaselines(t *testing.T) {
	drift := map[string]func(float64) float64{
		"mean":        func(float64) float64 { return 3 },
		"linear":      func(t float64) float64 { return 3 - 0.01*t },
		"interpolate": func(t float64) float64 { return 3 - 0.01*t },
		"exponential": func(t float64) float64 { return 3 - 2*math.Exp(-t/70) },
	}
	times := []float64{5, 25, 60, 110, 160, 240}
	for _, method := range baselineMethods {
		z := make([]float64, len(times))
		for k, at := range times {
			z[k] = drift[method](at)
		}
		if method == "mean" || method == "linear" || method == "interpolate" {
			for k := range z {
				z[k] += 1e-3 * float64(k%2)
			}
		}
		b, err := newBaseline(method, times, z, "zero")
		if err != nil {
			t.Fatalf("%s: %v", method, err)
		}
		for _, at := range []float64{5, 33, 110, 200} {
			v, cols, w := b.at(at)
			if math.Abs(v-drift[method](at)) > 1.2e-3 || method == "exponential" && math.Abs(v-drift[method](at)) > 1e-8 {
				t.Errorf("%s at %g: %.12g, want %.12g", method, at, v, drift[method](at))
			}
			var variance, squares float64
			for k := range times {
				const h = 1e-5
				moved := append([]float64(nil), z...)
				moved[k] += h
				up, err := newBaseline(method, times, moved, "zero")
				if err != nil {
					t.Fatal(err)
				}
				vu, _, _ := up.at(at)
				moved[k] -= 2 * h
				down, err := newBaseline(method, times, moved, "zero")
				if err != nil {
					t.Fatal(err)
				}
				vd, _, _ := down.at(at)
				want := (vu - vd) / (2 * h)
				squares += want * want
				got := 0.0
				for n, c := range cols {
					switch {
					case b.answer != nil:
						got += w[n] * b.answer[c][k]
					case c == k:
						got += w[n]
					}
				}
				if math.Abs(got-want) > 1e-5 {
					t.Errorf("%s at %g: derivative by reading %d is %g, difference %g", method, at, k, got, want)
				}
			}
			for n, c := range cols {
				variance += w[n] * w[n] * b.unit[c] * b.unit[c]
			}
			if math.Abs(variance-squares) > 1e-5*squares {
				t.Errorf("%s at %g: variance %g from the coefficients, %g from the readings", method, at, variance, squares)
			}
		}
	}
}

// TestABBA reads A B B A at even times: with a drift linear in time the mean of
// the two B, less the interpolated A, is B.
func TestABBA(t *testing.T) {
	drift := func(t float64) float64 { return 0.7 + 0.13*t }
	b, err := newBaseline("interpolate", []float64{0, 3}, []float64{drift(0), drift(3)}, "zero")
	if err != nil {
		t.Fatal(err)
	}
	const truth = 5.25
	sum := 0.0
	for _, at := range []float64{1, 2} {
		v, _, _ := b.at(at)
		sum += truth + drift(at) - v
	}
	if math.Abs(sum/2-truth) > 1e-14 {
		t.Errorf("mean of ABBA is %.15g, want %g", sum/2, truth)
	}
}

// TestExponentialRefuses: too few readings, or readings that do not settle.
func TestExponentialRefuses(t *testing.T) {
	cases := map[string][2][]float64{
		"three readings": {{0, 1, 2}, {1, 2, 3}},
		"one time":       {{1, 1, 1, 1}, {1, 2, 3, 4}},
		"all the same":   {{0, 1, 2, 3}, {2, 2, 2, 2}},
	}
	for name, c := range cases {
		if _, err := newBaseline("exponential", c[0], c[1], "zero"); err == nil {
			t.Errorf("%s: not refused", name)
		}
	}
}

// TestExponentialScatters makes a settling zero again and again with noise: its
// value between the readings must scatter as its weights say.
func TestExponentialScatters(t *testing.T) {
	const noise, at, runs = 0.01, 90.0, 2000
	times := []float64{0, 20, 40, 80, 120, 180, 240, 320}
	truth := func(t float64) float64 { return -1 + 2*math.Exp(-t/80) }
	src := random.New(3, "zero test", 0)
	var sum, sum2, claimed float64
	z := make([]float64, len(times))
	for range runs {
		for k, s := range times {
			z[k] = truth(s) + noise*src.Normal()
		}
		b, err := newBaseline("exponential", times, z, "zero")
		if err != nil {
			t.Fatal(err)
		}
		v, _, w := b.at(at)
		d := (v - truth(at)) / noise
		sum += d / runs
		sum2 += d * d / runs
		for _, x := range w {
			claimed += x * x / runs
		}
	}
	sd := math.Sqrt(sum2 - sum*sum)
	if want := math.Sqrt(claimed); math.Abs(sd/want-1) > 0.05 {
		t.Errorf("scatter %.4f of the noise, the weights claim %.4f", sd, want)
	}
}
