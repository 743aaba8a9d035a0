package gum_test

import (
	"fmt"
	"math"
	"testing"

	"example.org/guardring/pkg/gum"
)

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

// TestMass reproduces JCGM 101:2008 9.3 (values from memory): mass calibration in
// air; mg and kg/m³. First order misses the product of air density and density
// difference; second order has it.
func TestMass(t *testing.T) {
	in := []gum.Input{
		{Name: "mRc", Dist: gum.Normal(100_000, 0.050)}, {Name: "dmRc", Dist: gum.Normal(1.234, 0.020)},
		{Name: "ra", Dist: gum.Rectangular(1.20, 0.10)}, {Name: "rW", Dist: gum.Rectangular(8000, 1000)}, {Name: "rR", Dist: gum.Rectangular(8000, 50)},
	}
	m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "dm", "(mRc+dmRc)*(1+(ra-1.2)*(1/rW-1/rR)) - 100000", in)}}
	o := propagate(t, m, gum.Settings{Trials: 1_000_000, Probability: 0.95}).Outputs[0]
	near(t, "law's value", o.Law.Value, 1.2340, 0.00005)
	near(t, "law's u", o.Law.U, 0.0539, 0.00005)
	near(t, "law's low", o.Law.Interval[0], 1.1285, 0.0001)
	near(t, "law's high", o.Law.Interval[1], 1.3395, 0.0001)
	near(t, "u", o.MonteCarlo.U, 0.0754, 0.0002)
	near(t, "length of the shortest", o.MonteCarlo.Shortest[1]-o.MonteCarlo.Shortest[0], 1.3825-1.0834, 0.002)
	if o.Comparison.Agrees {
		t.Error("the law is said to agree; JCGM 101:2008 table 6 says that it does not")
	}
	second := propagate(t, m, gum.Settings{Trials: 1_000_000, Probability: 0.95, SecondOrder: true}).Outputs[0]
	near(t, "u to second order", second.Law.U, 0.0750, 0.00005)
	near(t, "low to second order", second.Law.Interval[0], 1.0870, 0.0001)
	near(t, "high to second order", second.Law.Interval[1], 1.3810, 0.0001)
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
