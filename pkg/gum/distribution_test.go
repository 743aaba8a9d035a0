package gum_test

import (
	"math"
	"strings"
	"testing"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/random"
)

func withDOF(d gum.Distribution, dof float64) gum.Distribution {
	d.DOF = dof
	return d
}

var shapes = []struct {
	name string
	d    gum.Distribution
	u    float64 // standard deviation by JCGM 101:2008 6.4
}{
	{"normal", gum.Normal(5, 2), 2},
	{"normal with 8 degrees of freedom", withDOF(gum.Normal(5, 2), 8), 2 * math.Sqrt(8.0/6)},
	{"t", gum.StudentT(-1, 3, 12), 3 * math.Sqrt(12.0/10)},
	{"rectangular", gum.Rectangular(1, 3), math.Sqrt(3)},
	{"triangular", gum.Triangular(1, 3), 3 / math.Sqrt(6)},
	{"trapezoidal", gum.Trapezoidal(1, 3, 0.4), 3 * math.Sqrt(1.16/6)},
	{"trapezoidal, beta 0", gum.Trapezoidal(1, 3, 0), 3 / math.Sqrt(6)},
	{"trapezoidal, beta 1", gum.Trapezoidal(1, 3, 1), math.Sqrt(3)},
	{"curvilinear trapezoid", gum.CurvilinearTrapezoidal(-2, 4, 1), math.Sqrt(3 + 1.0/9)},
	{"curvilinear trapezoid, widest limits", gum.CurvilinearTrapezoidal(-2, 4, 3), math.Sqrt(3 + 1)},
	{"curvilinear trapezoid, exact limits", gum.CurvilinearTrapezoidal(-2, 4, 0), math.Sqrt(3)},
	{"arcsine", gum.Arcsine(2, 0.5), 0.5 / math.Sqrt2},
	{"exponential", gum.Exponential(0.7), 0.7},
	{"gamma", gum.Gamma(2.5, 3), 3 * math.Sqrt(2.5)},
	{"counted", gum.Counted(6), math.Sqrt(7)},
}

// TestShapes checks draws against the quantile function, moments against the
// formulas of JCGM 101:2008 6.4, and fills against single draws.
func TestShapes(t *testing.T) {
	const n = 400_000
	x := make([]float64, n)
	for _, c := range shapes {
		if err := c.d.Check(); err != nil {
			t.Errorf("%s: %v", c.name, err)
		}
		near(t, c.name+": standard deviation", c.d.StandardDeviation(), c.u, 1e-12*c.u)
		src := random.New(30, c.name, 0)
		again := src
		c.d.Fill(&src, x)
		for i := range 5000 {
			if y := c.d.Sample(&again); y != x[i] {
				t.Fatalf("%s: draw %d is %v filled and %v alone", c.name, i, x[i], y)
			}
		}
		var mean, ss float64
		for _, v := range x {
			mean += v / n
		}
		for _, v := range x {
			ss += (v - mean) * (v - mean) / n
		}
		near(t, c.name+": mean", mean, c.d.Value, 4*c.u/math.Sqrt(n))
		near(t, c.name+": scatter", math.Sqrt(ss), c.u, 0.01*c.u)
		for _, p := range []float64{1e-4, 0.01, 0.05, 0.2, 0.35, 0.5, 0.65, 0.8, 0.95, 0.99, 0.9999} {
			q := c.d.Quantile(p)
			below := 0
			for _, v := range x {
				if v <= q {
					below++
				}
			}
			near(t, c.name+": share below the quantile", float64(below)/n, p, 4.5*math.Sqrt(p*(1-p)/n))
		}
		// Quantiles beyond what draws can show.
		last := math.Inf(-1)
		for _, p := range []float64{1e-12, 1e-6, 0.3, 0.5, 1 - 1e-6, 1 - 1e-12} {
			if q := c.d.Quantile(p); !(q > last) {
				t.Errorf("%s: quantile %v at %v is not above %v", c.name, q, p, last)
			} else {
				last = q
			}
		}
		for _, p := range []float64{0, 1, -0.1, math.NaN()} {
			if q := c.d.Quantile(p); !math.IsNaN(q) {
				t.Errorf("%s: quantile at %v is %v, want NaN", c.name, p, q)
			}
		}
	}
}

func TestZeroDistribution(t *testing.T) {
	var d gum.Distribution
	src := random.New(0, "", 0)
	if err := d.Check(); err != nil || !d.IsExact() || d.Sample(&src) != 0 || d.StandardDeviation() != 0 || d.Quantile(0.3) != 0 {
		t.Errorf("the zero distribution is not exactly 0: %+v, %v", d, err)
	}
	d.U = 1
	if err := d.Check(); err == nil {
		t.Error("an exact value with an uncertainty is accepted")
	}
}

// TestFromReadings reproduces JCGM 100:2008 4.4.3, table 1 (values from memory):
// twenty temperatures; in °C mean 100.145, s 1.489, s of the mean 0.333.
func TestFromReadings(t *testing.T) {
	x := []float64{96.90, 98.18, 98.25, 98.61, 99.03, 99.49, 99.56, 99.74, 99.89, 100.07, 100.33, 100.42, 100.68, 100.95, 101.11, 101.20, 101.57, 101.84, 102.36, 102.72}
	d, err := gum.FromReadings(x)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "mean", d.Value, 100.145, 0.0005)
	near(t, "s of the mean", d.U, 0.333, 0.0005)
	near(t, "degrees of freedom", d.DOF, 19, 0)
	for _, c := range []struct {
		x    []float64
		word string
	}{{nil, "two or more"}, {[]float64{1}, "two or more"}, {[]float64{1, math.NaN()}, "reading 2"}, {[]float64{1, math.Inf(1)}, "reading 2"}, {[]float64{2, 2, 2}, "all equal"}} {
		if _, err := gum.FromReadings(c.x); err == nil || !strings.Contains(err.Error(), c.word) {
			t.Errorf("readings %v: error %v, want one with %q", c.x, err, c.word)
		}
	}
}
