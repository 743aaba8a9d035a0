package gum_test

import (
	"context"
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"

	"example.org/guardring/pkg/gum"
)

// endGauge is JCGM 100:2008 H.1: lengths in nm.
func endGauge(t testing.TB) (*gum.Model, map[string]float64, map[string]float64) {
	var ref struct {
		Inputs   map[string]any
		Expected map[string]any
	}
	reference(t, "gum", "gum-H1", &ref)
	n := func(name string) float64 { return ref.Inputs[name].(float64) }
	d := gum.Normal(n("d_nm"), n("u_d"))
	d.DOF = ref.Expected["nu_eff_d"].(float64)
	ls := gum.Normal(n("ls_nm"), n("u_ls"))
	ls.DOF = n("dof_ls")
	da := gum.Normal(n("da"), n("u_da"))
	da.DOF = n("dof_da")
	dtheta := gum.Normal(n("dtheta"), n("u_dtheta"))
	dtheta.DOF = n("dof_dtheta")
	in := []gum.Input{
		{Name: "ls", Dist: ls}, {Name: "d", Dist: d}, {Name: "da", Dist: da},
		{Name: "theta", Dist: gum.Normal(n("theta"), n("u_theta"))},
		{Name: "alpha", Dist: gum.Normal(n("alpha_s"), n("u_alpha_s"))},
		{Name: "dtheta", Dist: dtheta},
	}
	want := map[string]float64{}
	for k, v := range ref.Expected {
		if f, ok := v.(float64); ok {
			want[k] = f
		}
	}
	contributions := map[string]float64{}
	for k, v := range ref.Expected["contributions_nm"].(map[string]any) {
		contributions[k] = v.(float64)
	}
	return &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "l", "ls + d - ls*(da*theta + alpha*dtheta)", in)}}, want, contributions
}

func propagateLaw(t testing.TB, m *gum.Model, s gum.Settings) *gum.Law {
	t.Helper()
	s.LawOnly = true
	r, err := gum.Propagate(context.Background(), m, s)
	if err != nil {
		t.Fatal(err)
	}
	return r.Outputs[0].Law
}

// TestEndGauge reproduces JCGM 100:2008 H.1 (values from memory): printed in nm.
func TestEndGauge(t *testing.T) {
	m, want, contributions := endGauge(t)
	l := propagateLaw(t, m, gum.Settings{Probability: 0.99})
	near(t, "l/mm", l.Value*1e-6, want["l_mm"], 0.5e-6)
	near(t, "u", l.U, want["uc_nm"], 0.6)
	near(t, "effective degrees of freedom", math.Floor(l.DOF), want["nu_eff"], 0)
	near(t, "k", l.K, want["k99"], 0.005)
	near(t, "U", l.K*l.U, want["U99_nm"], 1)
	for _, c := range l.Budget {
		if w, ok := contributions[c.Input]; ok {
			near(t, "contribution of "+c.Input, math.Abs(c.Contribution), w, 0.05+0.005*w)
		}
	}
	second := propagateLaw(t, m, gum.Settings{Probability: 0.99, SecondOrder: true})
	near(t, "u to second order", second.U, want["uc_second_order_nm"], 0.5)
	near(t, "u to first order", second.FirstOrderU, l.U, 1e-9)
}

// TestEndGaugeSecondOrderTerms holds the general second-order expression to the two
// terms that JCGM 100:2008 H.1.7 names: products u(da)u(theta) and u(alpha)u(dtheta),
// times ls.
func TestEndGaugeSecondOrderTerms(t *testing.T) {
	m, _, _ := endGauge(t)
	l := propagateLaw(t, m, gum.Settings{SecondOrder: true})
	u := func(i int) float64 { return m.Inputs[i].Dist.U }
	ls := m.Inputs[0].Dist.Value
	// H.1.7 leaves out u(ls), whose second derivatives are of the relative order 1e-7.
	want := math.Sqrt(l.FirstOrderU*l.FirstOrderU + math.Pow(ls*u(2)*u(3), 2) + math.Pow(ls*u(4)*u(5), 2))
	near(t, "u to second order", l.U, want, 1e-6*want)
}

// TestWithoutDerivatives: an evaluator that only evaluates gets the same law by
// differences.
func TestWithoutDerivatives(t *testing.T) {
	m, _, _ := endGauge(t)
	want := propagateLaw(t, m, gum.Settings{SecondOrder: true})
	with := m.Outputs[0].New
	m.Outputs[0].New = func() gum.Evaluator { return gum.Evaluator{Block: with().Block} }
	got := propagateLaw(t, m, gum.Settings{SecondOrder: true})
	near(t, "u to first order", got.FirstOrderU, want.FirstOrderU, 1e-5*want.U)
	near(t, "u to second order", got.U, want.U, 1e-3*want.U)
}

// TestThermometerLine reproduces the predicted correction of JCGM 100:2008 H.3
// (values from memory): intercept and slope of one fit are correlated and share
// their degrees of freedom.
func TestThermometerLine(t *testing.T) {
	var ref struct {
		Expected, Full_Precision map[string]float64
	}
	reference(t, "gum", "gum-H3", &ref)
	f := ref.Full_Precision
	lines := []gum.Contribution{
		{Input: "y1", Block: "fit", Value: f["y1"], U: f["u1"], DOF: 9, Sensitivity: 1},
		{Input: "y2", Block: "fit", Value: f["y2"], U: f["u2"], DOF: 9, Sensitivity: 10},
	}
	corr := []gum.Correlation{{I: 0, J: 1, R: f["r"]}}
	l, err := gum.Combine(f["y1"]+10*f["y2"], lines, corr, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "b(30)", l.Value, ref.Expected["b30"], 0.00005)
	near(t, "u", l.U, ref.Expected["u_b30"], 0.00005)
	near(t, "u in full", l.U, f["u_b30"], 1e-11)
	near(t, "degrees of freedom", l.DOF, ref.Expected["dof"], 1e-9)
	near(t, "k", l.K, 2.262, 0.0005) // Student's t, 9 degrees of freedom, 95 %: JCGM 100:2008 table G.2 has 2.26
	near(t, "sum of shares", l.Budget[0].Share+l.Budget[1].Share, 1, 1e-12)

	// Not from one evaluation: refused, with the reason.
	lines[1].Block = "another"
	l, err = gum.Combine(f["y1"]+10*f["y2"], lines, corr, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	if !math.IsNaN(l.DOF) || len(l.Warnings) != 1 || !errors.Is(l.Warnings[0], gum.ErrCorrelatedDOF) || !strings.Contains(l.Warnings[0].Error(), "y1 (9 degrees") {
		t.Errorf("degrees of freedom %v with warnings %v, want NaN and a refusal that names the inputs", l.DOF, l.Warnings)
	}
	near(t, "k", l.K, 1.96, 0.0005)
}

// TestNested reproduces JCGM 100:2008 H.5 (values from memory): analysis of
// variance of a Zener voltage standard.
func TestNested(t *testing.T) {
	var ref struct {
		Inputs struct {
			Mean []float64 `json:"day_mean_uV_above_10V"`
			SD   []float64 `json:"day_sd_uV"`
			K    int
		}
		Expected       map[string]float64
		Full_Precision map[string]float64
	}
	reference(t, "gum", "gum-H5", &ref)
	n, err := gum.AnalyseMeans(ref.Inputs.Mean, ref.Inputs.SD, ref.Inputs.K)
	if err != nil {
		t.Fatal(err)
	}
	w, f := ref.Expected, ref.Full_Precision
	near(t, "mean/V", 10+n.Mean*1e-6, w["mean_V"], 0.5e-6)
	near(t, "s_a", n.SA, f["sa"], 0.0005)
	near(t, "s_b", n.SB, f["sb"], 0.0005)
	near(t, "F", n.F, f["F"], 0.000005)
	near(t, "s_B", n.Effect, f["sB"], 0.00005)
	near(t, "u", n.Between.U, f["u"], 0.00005)
	near(t, "pooled u", n.Pooled.U, f["u_pooled"], 0.00005)
	for what, x := range map[string][2]float64{"sa_uV": {n.SA, 0.6}, "sb_uV": {n.SB, 0.6}, "F": {n.F, 0.02}, "sB_uV": {n.Effect, 0.6},
		"u_between_uV": {n.Between.U, 0.6}, "u_pooled_uV": {n.Pooled.U, 0.6}, "nu_a": {n.Between.DOF, 0}, "nu_b": {n.DOFB, 0}, "nu_pooled": {n.Pooled.DOF, 0}} {
		near(t, what, x[0], w[what], x[1])
	}
	// The critical values of F printed there: 5 % at 2.12, 2.5 % at 2.45.
	if !(n.PValue < 0.05 && n.PValue > 0.025) {
		t.Errorf("p-value of F is %v, want between 2.5 %% and 5 %%", n.PValue)
	}
	groups := [][]float64{{1, 2, 4}, {2, 5, 6}, {9, 3, 3}}
	g, err := gum.AnalyseGroups(groups)
	if err != nil {
		t.Fatal(err)
	}
	// Computed independently by hand: means 7/3, 13/3, 5; grand mean 35/9.
	near(t, "grand mean", g.Mean, 35.0/9, 1e-12)
	near(t, "s_a²", g.SA*g.SA, 3*((7.0/3-35.0/9)*(7.0/3-35.0/9)+(13.0/3-35.0/9)*(13.0/3-35.0/9)+(5-35.0/9)*(5-35.0/9))/2, 1e-12)
	near(t, "s_b²", g.SB*g.SB, (7.0/3+13.0/3+12)/3, 1e-12)
}

// TestWeight reproduces EA-4/02 S2 (values from memory): calibration of a weight of
// 10 kg; masses in g.
func TestWeight(t *testing.T) {
	var ref struct{ Inputs, Expected map[string]float64 }
	reference(t, "ea402", "ea-S2", &ref)
	n := ref.Inputs
	in := []gum.Input{
		{Name: "mS", Dist: gum.Normal(n["mS_g"], n["u_mS_mg"]*1e-3)},
		{Name: "dmD", Dist: gum.Rectangular(0, n["dmD_rect_mg"]*1e-3)},
		{Name: "dm", Dist: gum.Normal(n["dm_g"], n["u_dm_mg"]*1e-3)},
		{Name: "dmC", Dist: gum.Rectangular(0, n["dmC_rect_mg"]*1e-3)},
		{Name: "dB", Dist: gum.Rectangular(0, n["dB_rect_mg"]*1e-3)},
	}
	m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "mX", "mS + dmD + dm + dmC + dB", in)}}
	l := propagateLaw(t, m, gum.Settings{})
	near(t, "m", l.Value, ref.Expected["m_g"], 1e-9)
	near(t, "u", l.U*1e3, ref.Expected["u_mg"], 0.1)
	near(t, "k", l.K, ref.Expected["k"], 1e-4)
	near(t, "U", l.K*l.U*1e3, ref.Expected["U_mg"], 1)
}

// TestContributions reproduces the combined uncertainties of EA-4/02 S4 (gauge
// block, nm) and S11 (block calibrator, mK) from their printed contributions (values
// from memory).
func TestContributions(t *testing.T) {
	for _, c := range []struct {
		id, contributions, u string
		tolerance            float64
	}{{"ea-S4", "contrib_nm", "u_nm", 0.1}, {"ea-S11", "contrib_mK", "u_mK", 1}} {
		var ref struct {
			Inputs   map[string]any
			Expected map[string]float64
		}
		reference(t, "ea402", c.id, &ref)
		var lines []gum.Contribution
		for _, v := range ref.Inputs[c.contributions].([]any) {
			x := v.(float64)
			lines = append(lines, gum.Contribution{Input: "x", U: math.Abs(x), Sensitivity: math.Copysign(1, x)})
		}
		l, err := gum.Combine(0, lines, nil, 0.9545)
		if err != nil {
			t.Fatal(err)
		}
		near(t, c.id+" u", l.U, ref.Expected[c.u], c.tolerance)
	}
}

// TestCalliper reproduces EA-4/02 S10 (values from memory): two rectangular inputs
// of different widths make a trapezoid, whose coverage factor is not 2; mm.
func TestCalliper(t *testing.T) {
	var ref struct{ Inputs, Expected map[string]float64 }
	reference(t, "ea402", "ea-S10", &ref)
	n := ref.Inputs
	in := []gum.Input{
		{Name: "liX", Dist: gum.Exactly(n["liX"])},
		{Name: "lS", Dist: gum.Normal(n["lS"], n["u_lS_um"]*1e-3)},
		{Name: "dt", Dist: gum.Rectangular(0, n["dt_contrib_um"]*1e-3*math.Sqrt(3))},
		{Name: "dliX", Dist: gum.Rectangular(0, n["liX_rect_um"]*1e-3)},
		{Name: "dlM", Dist: gum.Rectangular(0, n["lM_rect_um"]*1e-3)},
	}
	m := &gum.Model{Inputs: in, Outputs: []gum.Output{compiled(t, "EX", "liX - lS + dt + dliX + dlM", in)}}
	l := propagateLaw(t, m, gum.Settings{Probability: 0.95})
	w := ref.Expected
	near(t, "E", l.Value, w["EX"], 1e-9)
	near(t, "u", l.U, 0.03234, 0.000005) // computed independently; the 0.033 printed there follows from contributions rounded to 15 µm and 29 µm:
	printed, err := gum.Combine(0, []gum.Contribution{{U: n["u_lS_um"], Sensitivity: 1e-3}, {U: n["dt_contrib_um"], Sensitivity: 1e-3}, {U: 15, Sensitivity: 1e-3}, {U: 29, Sensitivity: 1e-3}}, nil, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "u from printed contributions", printed.U, w["u_mm"], 0.0005)
	beta := (n["lM_rect_um"] - n["liX_rect_um"]) / (n["lM_rect_um"] + n["liX_rect_um"])
	near(t, "beta", beta, w["beta"], 0.005)
	k := gum.TrapezoidFactor(0.95, beta)
	near(t, "k of the trapezoid", k, w["k"], 0.01)
	near(t, "U", k*l.U, w["U"], 0.005)
	if len(l.Warnings) != 1 || !strings.Contains(l.Warnings[0].Error(), "dlM and dliX, both rectangular") {
		t.Errorf("warnings are %v, want one that names both rectangular inputs", l.Warnings)
	}
	// Monte Carlo finds that interval by itself.
	r, err := gum.Propagate(context.Background(), m, gum.Settings{Probability: 0.95, Trials: 400_000, Digits: 2})
	if err != nil {
		t.Fatal(err)
	}
	mc := r.Outputs[0].MonteCarlo
	near(t, "half the Monte Carlo interval over u", (mc.Interval[1]-mc.Interval[0])/2/mc.U, w["k"], 0.01)
	if r.Outputs[0].Comparison.Agrees {
		t.Error("the law is said to agree with Monte Carlo, but it overstates this interval")
	}
}

// TestBlockCalibrator: the coverage factor of EA-4/02 S11 (from memory, least sure):
// two rectangular inputs of 144 and 58 mK at 95.45 %.
func TestBlockCalibrator(t *testing.T) {
	var ref struct{ Expected map[string]float64 }
	reference(t, "ea402", "ea-S11", &ref)
	near(t, "k", gum.TrapezoidFactor(0.9545, (144.0-58)/(144+58)), ref.Expected["k"], 0.01)
}

// TestCoverageFactor compares with JCGM 100:2008 table G.2 (values from memory).
func TestCoverageFactor(t *testing.T) {
	inf := math.Inf(1)
	sigma := func(k float64) float64 { return math.Erf(k / math.Sqrt2) } // 68.27 %, 95.45 % and 99.73 % stand for k = 1, 2, 3 there
	for _, c := range []struct{ p, dof, k float64 }{
		{sigma(1), 1, 1.84}, {0.9, 1, 6.31}, {0.95, 1, 12.71}, {sigma(2), 1, 13.97}, {0.99, 1, 63.66}, {sigma(3), 1, 235.80},
		{0.95, 2, 4.30}, {sigma(2), 2, 4.53}, {0.99, 2, 9.92}, {0.95, 3, 3.18}, {sigma(2), 3, 3.31}, {sigma(2), 5, 2.65}, {0.95, 10, 2.23},
		{sigma(2), 10, 2.28}, {0.99, 10, 3.17}, {sigma(2), 20, 2.13}, {sigma(2), 50, 2.05}, {0.95, inf, 1.96}, {sigma(2), inf, 2}, {0.99, inf, 2.576}, {sigma(3), inf, 3},
		{0.95, 9.7, 2.26}, // truncated
	} {
		near(t, "k", gum.CoverageFactor(c.p, c.dof), c.k, 0.005)
	}
	// Full precision, 0.95: computed independently.
	near(t, "t(16), 99 %", gum.CoverageFactor(0.99, 16), 2.920781622425, 1e-11)
	near(t, "t(4), 95 %", gum.CoverageFactor(0.95, 4), 2.776445105198, 1e-11)
	near(t, "normal, 95 %", gum.CoverageFactor(0.95, inf), 1.959963984540, 1e-11)
	near(t, "t(1e6) against normal", gum.CoverageFactor(0.95, 1e6), 1.959963984540*(1+(1.959963984540*1.959963984540+1)/4e6), 1e-9)
	for _, p := range []float64{0, 1, -1, math.NaN()} {
		if k := gum.CoverageFactor(p, 5); !math.IsNaN(k) {
			t.Errorf("k for p = %v is %v, want NaN", p, k)
		}
	}
	for _, dof := range []float64{0, -1, -inf} {
		if k := gum.CoverageFactor(0.95, dof); !math.IsNaN(k) {
			t.Errorf("k with %v degrees of freedom is %v, want NaN", dof, k)
		}
	}
	if k := gum.CoverageFactor(0.95, math.SmallestNonzeroFloat64); !math.IsInf(k, 1) {
		t.Errorf("k with next to no degrees of freedom is %v, want +Inf", k)
	}
	for _, d := range []gum.Distribution{withDOF(gum.Normal(0, 1), -1), gum.Gamma(-2, 1), gum.Normal(0, -1), {Shape: "odd"}} {
		if q := d.Quantile(0.3); !math.IsNaN(q) {
			t.Errorf("quantile of %+v is %v, want NaN", d, q)
		}
	}
}

// TestCoverageFactorManyDOF: a budget whose Type A part is small has any number of
// effective degrees of freedom; k then falls steadily to that of a normal. The values
// are those of SciPy 1.10's t.isf.
func TestCoverageFactorManyDOF(t *testing.T) {
	for _, c := range []struct{ p, dof, k float64 }{
		{0.9545, 1e3, 2.002505517218672}, {0.9545, 9.9e4, 2.0000276968175585}, {0.9545, 1e5, 2.0000274442852843}, {0.9545, 1e6, 2.000004943910609},
		{0.9545, 1e9, 2.0000024463996118}, {0.9545, 1e11, 2.000002443924604}, {0.9545, 1e13, 2.000002443899854}, {0.9545, 9e14, 2.0000024438996067},
		{0.99, 1e11, 2.5758293035980664}, {0.99, 9e14, 2.575829303548906}, {0.5, 1e13, 0.6744897501961061}, {0.999999, 1e5, 4.891943340715112}, {0.999999, 9e14, 4.891638475698624},
	} {
		near(t, fmt.Sprintf("k for %v with %g degrees of freedom", c.p, c.dof), gum.CoverageFactor(c.p, c.dof), c.k, 2e-11*c.k)
	}
	for _, p := range []float64{0.5, 0.683, 0.9545, 0.9973, 0.999999} {
		last := math.Inf(1)
		for e := 0.0; e < 16; e += 0.25 {
			k := gum.CoverageFactor(p, math.Pow(10, e))
			if !(k <= last*(1+1e-11)) {
				t.Errorf("k for %v rises from %v to %v at 10^%v degrees of freedom", p, last, k, e)
			}
			last = k
		}
		near(t, "k at the last", last, gum.CoverageFactor(p, math.Inf(1)), 1e-11)
	}
	// Far tail of a normal: SciPy's norm.sf(10).
	near(t, "quantile", gum.Normal(0, 1).Quantile(7.61985302416e-24), -10, 1e-9)
}

// TestCombineRefuses lists what Combine has to refuse, and a word of each message.
func TestCombineRefuses(t *testing.T) {
	two := func(change func(l []gum.Contribution)) []gum.Contribution {
		l := []gum.Contribution{{Input: "radius", U: 1, Sensitivity: 1}, {Input: "gain", U: 1, Sensitivity: 1}, {Input: "offset", U: 1, Sensitivity: 1}}
		change(l)
		return l
	}
	same := func([]gum.Contribution) {}
	for _, c := range []struct {
		lines []gum.Contribution
		corr  []gum.Correlation
		p     float64
		word  string
	}{
		{two(same), nil, 0, "between 0.5 and 0.999999"},
		{two(same), nil, 2e-308, "between 0.5 and 0.999999"},
		{two(same), nil, 0.4999, "between 0.5 and 0.999999"},
		{two(same), nil, 1 - 1e-9, "between 0.5 and 0.999999"},
		{two(same), nil, 1, "between 0.5 and 0.999999"},
		{two(same), nil, math.NaN(), "between 0.5 and 0.999999"},
		{two(func(l []gum.Contribution) { l[1].U = -1 }), nil, 0.95, "gain"},
		{two(func(l []gum.Contribution) { l[1].U = math.NaN() }), nil, 0.95, "gain"},
		{two(func(l []gum.Contribution) { l[0].Sensitivity = math.Inf(1) }), nil, 0.95, "radius"},
		{two(func(l []gum.Contribution) { l[0].DOF = -1 }), nil, 0.95, "degrees of freedom"},
		{two(func(l []gum.Contribution) { l[0].Shape, l[0].DOF = gum.ShapeT, 2 }), nil, 0.95, "no variance"},
		{two(same), []gum.Correlation{{I: 0, J: 1, R: 1.01}}, 0.95, "between -1 and 1"},
		{two(same), []gum.Correlation{{I: 0, J: 1, R: math.NaN()}}, 0.95, "between -1 and 1"},
		{two(same), []gum.Correlation{{I: 0, J: 3, R: 0.1}}, 0.95, "counted from 0"},
		{two(same), []gum.Correlation{{I: 1, J: 1, R: 1}}, 0.95, "itself"},
		{two(same), []gum.Correlation{{I: 0, J: 1, R: 0.1}, {I: 1, J: 0, R: 0.1}}, 0.95, "twice"},
		{two(same), []gum.Correlation{{I: 0, J: 1, R: 0.9}, {I: 1, J: 2, R: 0.9}, {I: 0, J: 2, R: -0.9}}, 0.95, "eigenvalue"},
	} {
		l, err := gum.Combine(1, c.lines, c.corr, c.p)
		if err == nil || l != nil || !strings.Contains(err.Error(), c.word) {
			t.Errorf("law %v, error %v: want an error with %q", l, err, c.word)
		}
	}
	if _, err := gum.Combine(math.NaN(), nil, nil, 0.95); err == nil {
		t.Error("a value that is not a number is accepted")
	}
}

// TestCorrelatedDOF: correlated inputs of known uncertainty are one component that
// adds no doubt; the formula goes on with the others (JCGM 100:2008 G.4.1, derived for
// the component).
func TestCorrelatedDOF(t *testing.T) {
	lines := []gum.Contribution{{Input: "a", U: 3, Sensitivity: 1}, {Input: "b", U: 4, Sensitivity: 1}, {Input: "c", U: 2, Sensitivity: 1, DOF: 5},
		{Input: "idle", U: 1, DOF: 3}}
	// idle has no sensitivity, so its correlation with c is nothing to the output
	l, err := gum.Combine(0, lines, []gum.Correlation{{I: 0, J: 1, R: 0.5}, {I: 2, J: 3, R: 0.9}}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	u2 := 9 + 16 + 12 + 4.0
	near(t, "u", l.U, math.Sqrt(u2), 1e-12)
	near(t, "degrees of freedom", l.DOF, u2*u2/(16/5.0), 1e-9)
	if len(l.Warnings) != 0 {
		t.Errorf("warnings %v", l.Warnings)
	}
	var shares float64
	for _, c := range l.Budget {
		shares += c.Share
	}
	near(t, "sum of shares", shares, 1, 1e-12)
}

func TestGroups(t *testing.T) {
	l, err := gum.Combine(0, []gum.Contribution{{Input: "a", Group: "voltage", U: 3, Sensitivity: 1}, {Input: "b", Group: "spacing", U: 4, Sensitivity: 1},
		{Input: "c", Group: "voltage", U: 5, Sensitivity: 1}}, nil, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	g := l.Groups()
	if len(g) != 2 || g[0].Group != "voltage" || len(g[0].Lines) != 2 || g[0].Lines[1] != 2 {
		t.Fatalf("groups %+v", g)
	}
	near(t, "share of the voltage", g[0].Share, 34.0/50, 1e-12)
	near(t, "share of the spacing", g[1].Share, 16.0/50, 1e-12)
}

// TestFullCorrelation: JCGM 100:2008 5.2.2 note 1, all inputs correlated with r = 1:
// contributions add linearly; with opposite signs they cancel. The example is that
// of ten resistors of 1000 Ω in series, each u = 0.1 Ω: u = 1 Ω.
func TestFullCorrelation(t *testing.T) {
	var lines []gum.Contribution
	var corr []gum.Correlation
	for i := range 10 {
		lines = append(lines, gum.Contribution{Input: "R", Value: 1000, U: 0.1, Sensitivity: 1})
		for j := range i {
			corr = append(corr, gum.Correlation{I: i, J: j, R: 1})
		}
	}
	l, err := gum.Combine(10_000, lines, corr, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "u", l.U, 1, 1e-12)
	lines = lines[:2]
	lines[1].Sensitivity = -1
	if l, err = gum.Combine(0, lines, corr[:1], 0.95); err != nil {
		t.Fatal(err)
	}
	if l.U != 0 || len(l.Warnings) == 0 {
		t.Errorf("u is %v with warnings %v, want 0 and a warning", l.U, l.Warnings)
	}
}

// TestScaleFree: budgets in femtocoulombs or in units that make squares overflow
// are no different.
func TestScaleFree(t *testing.T) {
	for _, s := range []float64{1e-200, 1e-30, 1, 1e200} {
		lines := []gum.Contribution{{Input: "a", U: 3 * s, DOF: 5, Sensitivity: 1}, {Input: "b", U: 4 * s, DOF: 7, Sensitivity: -1}}
		l, err := gum.Combine(0, lines, nil, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "u", l.U/s, 5, 1e-14)
		near(t, "degrees of freedom", l.DOF, 625/(81.0/5+256.0/7), 1e-12)
	}
}
