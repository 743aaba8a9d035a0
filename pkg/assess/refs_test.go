package assess

import (
	"encoding/json"
	"math"
	"os"
	"strings"
	"testing"
)

// reference decodes inputs and expected of one item of testdata/refs.
func reference(t *testing.T, file, id string, inputs, expected any) {
	t.Helper()
	b, err := os.ReadFile("../../testdata/refs/" + file)
	if err != nil {
		t.Fatal(err)
	}
	var items []struct {
		ID       string
		Inputs   json.RawMessage
		Expected json.RawMessage
	}
	if err := json.Unmarshal(b, &items); err != nil {
		t.Fatal(err)
	}
	for _, it := range items {
		if it.ID != id {
			continue
		}
		if err := json.Unmarshal(it.Inputs, inputs); err != nil {
			t.Fatal(err)
		}
		if err := json.Unmarshal(it.Expected, expected); err != nil {
			t.Fatal(err)
		}
		return
	}
	t.Fatalf("%s has no item %q", file, id)
}

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %.15g, want %.15g within %.2g", what, got, want, tolerance)
	}
}

func refuses(t *testing.T, what string, err error, words ...string) {
	t.Helper()
	if err == nil {
		t.Errorf("%s: accepted", what)
		return
	}
	for _, w := range words {
		if !strings.Contains(err.Error(), w) {
			t.Errorf("%s: message %q does not say %q", what, err, w)
		}
	}
}

// JCGM 106:2012 clause 7, Zener diode: printed probability from memory, full
// precision computed independently.
func TestZenerDiode(t *testing.T) {
	var in struct{ Y, U, TU float64 }
	var want struct {
		PC   float64 `json:"pc"`
		Full float64 `json:"pc_full"`
	}
	reference(t, "jcgm106.json", "106-zener", &in, &want)
	p, err := ProbabilityOfConformity(Result{Value: in.Y, U: in.U, Unit: "V"}, AtMost(in.TU, "V"))
	if err != nil {
		t.Fatal(err)
	}
	near(t, "printed", p, want.PC, 0.005)
	near(t, "full", p, want.Full, 1e-12)
}

// JCGM 106:2012 clause 8, speed enforcement: printed limit from memory, full
// precision computed independently.
func TestSpeedEnforcement(t *testing.T) {
	var in struct {
		Limit float64 `json:"limit_kmh"`
		URel  float64 `json:"u_rel"`
		P     float64
	}
	var want struct {
		Full    float64 `json:"vmax_full"`
		Rounded float64 `json:"vmax_rounded"`
		Guard   float64
	}
	reference(t, "jcgm106.json", "106-speed", &in, &want)
	y, err := Spread{Relative: in.URel}.ReadingAt(in.Limit, in.P)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "full", y, want.Full, 1e-9*want.Full)
	if math.Ceil(y) != want.Rounded || math.Ceil(y)-in.Limit != want.Guard {
		t.Errorf("rounded up: got %v, want %v", math.Ceil(y), want.Rounded)
	}
}

// JCGM 106:2012 7.4: formula computed independently.
func TestTwoSidedConformity(t *testing.T) {
	var in struct{ Cases [][4]float64 }
	var want struct{ PC []float64 }
	reference(t, "jcgm106.json", "106-twosided", &in, &want)
	if len(in.Cases) == 0 {
		t.Fatal("no cases")
	}
	for i, c := range in.Cases {
		p, err := ProbabilityOfConformity(Result{Value: c[2], U: c[3], Unit: "1"}, Between(c[0], c[1], "1"))
		if err != nil {
			t.Fatal(err)
		}
		near(t, "p_c", p, want.PC[i], 1e-12)
	}
}

// Particle Data Group, neutron mean life: mean, uncertainty and scale factor
// published; the rest computed independently.
func TestNeutronMeanLife(t *testing.T) {
	var in struct{ X, U []float64 }
	var want struct {
		Printed       struct{ Mean, U, Scale float64 }
		Mean, Chi2, P float64
		UInternal     float64 `json:"u_internal"`
		UExternal     float64 `json:"u_external"`
		Birge         float64
		DOF           int
		ConsistentAt5 bool `json:"consistent_at_5pct"`
		D             []float64
		UD            []float64 `json:"U_d"`
		En            []float64
	}
	reference(t, "interlab.json", "pdg-neutron-2016", &in, &want)
	m, err := WeightedMean(independent(in.X, in.U, "s"), nil)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "mean, printed", m.Value, want.Printed.Mean, 0.05)
	near(t, "u, printed", m.UExternal, want.Printed.U, 0.05)
	near(t, "scale, printed", m.BirgeRatio, want.Printed.Scale, 0.05)
	for _, c := range []struct {
		what      string
		got, want float64
	}{{"mean", m.Value, want.Mean}, {"u internal", m.U, want.UInternal}, {"u external", m.UExternal, want.UExternal},
		{"chi-squared", m.ChiSquared, want.Chi2}, {"p", m.PValue, want.P}, {"Birge ratio", m.BirgeRatio, want.Birge}} {
		near(t, c.what, c.got, c.want, 1e-8*math.Abs(c.want))
	}
	if m.DOF != want.DOF || m.Consistent != want.ConsistentAt5 || len(m.Warnings) == 0 {
		t.Errorf("dof %d, consistent %v, warnings %v", m.DOF, m.Consistent, m.Warnings)
	}
	for i, d := range m.Degrees().Unilateral {
		near(t, "d", d.D, want.D[i], 1e-8*math.Abs(want.D[i])+1e-9)
		near(t, "U(d)", d.Expanded, want.UD[i], 1e-8*want.UD[i])
		near(t, "E_n", d.En, want.En[i], 1e-7*math.Abs(want.En[i])+1e-8)
	}
}

// BIPM.EM-K14.a, 10 pF at 1592 Hz: degrees of equivalence published, ratios
// computed independently.
func TestCapacitanceComparison(t *testing.T) {
	var in struct{ D, U []float64 }
	var want struct {
		En  []float64
		All bool `json:"all_equivalent"`
	}
	reference(t, "interlab.json", "kcdb-EM-K14-10pF-1592", &in, &want)
	all := true
	for i := range in.D {
		e, err := En(Result{Value: in.D[i], U: in.U[i] / 2, Unit: "1"}, Result{Unit: "1"}, 0)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "E_n", e, want.En[i], 1e-9)
		all = all && math.Abs(e) <= 1
	}
	if all != want.All {
		t.Errorf("all equivalent: %v", all)
	}
}

// Analytical Methods Committee 1989, copper: data published, robust values
// computed independently.
func TestCopperAlgorithmA(t *testing.T) {
	var in struct{ X []float64 }
	var want struct {
		Median    float64
		MAD       float64 `json:"nMAD_1483"`
		Mean      float64 `json:"algA_mean"`
		SD        float64 `json:"algA_sd"`
		HuberMean float64 `json:"huber_mean"`
		HuberSD   float64 `json:"huber_sd"`
	}
	reference(t, "interlab.json", "amc-copper-algorithmA", &in, &want)
	r, err := AlgorithmA(in.X, RobustSettings{})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "median", r.Median, want.Median, 1e-12)
	near(t, "scaled MAD", r.ScaledMAD, want.MAD, 1e-6)
	near(t, "mean", r.Mean, want.Mean, 1e-6)
	near(t, "sd", r.SD, want.SD, 1e-6)
	near(t, "u", r.U, 1.25*want.SD/math.Sqrt(24), 1e-6)
	h, err := AlgorithmA(in.X, RobustSettings{Exact: true})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "Huber mean", h.Mean, want.HuberMean, 1e-6)
	near(t, "Huber sd", h.SD, want.HuberSD, 1e-6)
	three, err := AlgorithmA(in.X, RobustSettings{Digits: 3})
	if err != nil {
		t.Fatal(err)
	}
	if three.Iterations >= r.Iterations || three.Criterion == r.Criterion {
		t.Errorf("three figures took %d iterations (%s), full precision %d", three.Iterations, three.Criterion, r.Iterations)
	}
	near(t, "mean to three figures", three.Mean, want.Mean, 0.002)
}

func independent(x, u []float64, unit string) []Result {
	var rs []Result
	for i := range x {
		rs = append(rs, Result{Value: x[i], U: u[i], Unit: unit})
	}
	return rs
}
