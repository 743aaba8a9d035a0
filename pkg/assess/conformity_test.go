package assess

import (
	"encoding/json"
	"math"
	"testing"

	"example.org/guardring/pkg/random"
)

// ILAC-G8:09/2019 4.2.3: the four verdicts on both sides of two limits, and the
// binary rules on the same values. Limits ±1, U = 0.2.
func TestVerdicts(t *testing.T) {
	for _, c := range []struct {
		y                       float64
		simple, guard, fourfold Verdict
	}{
		{0, Pass, Pass, Pass},
		{0.79, Pass, Pass, Pass},
		{0.81, Pass, Fail, ConditionalPass},
		{1, Pass, Fail, ConditionalPass},
		{1.01, Fail, Fail, ConditionalFail},
		{1.19, Fail, Fail, ConditionalFail},
		{1.21, Fail, Fail, Fail},
		{-0.81, Pass, Fail, ConditionalPass},
		{-1.01, Fail, Fail, ConditionalFail},
		{-1.21, Fail, Fail, Fail},
	} {
		for rule, want := range map[Rule]Verdict{SimpleAcceptance: c.simple, GuardBand: c.guard, NonBinary: c.fourfold} {
			s, err := Decide(Result{Value: c.y, U: 0.1, Unit: "%"}, Between(-1, 1, "%"), DecisionSettings{Rule: rule})
			if err != nil {
				t.Fatal(err)
			}
			if s.Verdict != want {
				t.Errorf("%v by %s: %s, want %s", c.y, rule, s.Verdict, want)
			}
			if a := s.Verdict.Accepted(); a == math.IsNaN(float64(s.FalseAccept)) || a != math.IsNaN(float64(s.FalseReject)) {
				t.Errorf("%v by %s: risks %v and %v do not belong to %s", c.y, rule, s.FalseAccept, s.FalseReject, s.Verdict)
			}
		}
	}
}

// JCGM 106:2012 8.3.2.2: a single limit and w = U (k = 2) admit a specific risk
// of at most 2.3 % (normal), simple acceptance 50 %.
func TestWorstRisk(t *testing.T) {
	r := Result{Value: 3, U: 0.1, Unit: "mm"}
	for _, c := range []struct {
		s    DecisionSettings
		want float64
	}{
		{DecisionSettings{Rule: SimpleAcceptance}, 0.5},
		{DecisionSettings{Rule: GuardBand}, 0.022750131948179},
		{DecisionSettings{Rule: GuardBand, FalseAccept: 0.01}, 0.01},
		{DecisionSettings{Rule: GuardBand, Factor: 0.5}, 0.158655253931457},
		{DecisionSettings{Rule: NonBinary, FalseAccept: 1e-6}, 1e-6},
	} {
		s, err := Decide(r, AtMost(5, "mm"), c.s)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "worst risk", s.WorstFalseAccept, c.want, 1e-10*c.want+1e-15)
	}
	// two limits, close: both tails count
	s, err := Decide(Result{Value: 0, U: 0.4, DOF: 5, Unit: "mm"}, Between(-1, 1, "mm"), DecisionSettings{Rule: GuardBand, FalseAccept: 0.08})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "two limits, t", s.WorstFalseAccept, 0.08, 1e-12)
}

// Student's t, tables (Fisher and Yates; from memory): t(0.975, 4) = 2.776,
// t(0.95, 10) = 1.812, t(0.995, 1) = 63.657.
func TestStudentTable(t *testing.T) {
	for _, c := range []struct{ p, dof, want float64 }{{0.975, 4, 2.776}, {0.95, 10, 1.812}, {0.995, 1, 63.657}} {
		near(t, "quantile", quantile(c.p, c.dof), c.want, 0.0006)
		near(t, "round trip", below(quantile(c.p, c.dof), c.dof), c.p, 1e-14)
	}
	for _, dof := range []float64{1e-10, math.SmallestNonzeroFloat64} { // next to no knowledge of u
		near(t, "p", below(-3, dof), 0.5, 1e-9)
		if q := quantile(0.05, dof); !(q < -1e100) {
			t.Errorf("quantile with %v degrees of freedom is %v, want one beyond reach", dof, q)
		}
	}
	for _, p := range []float64{1e-12, 1e-4, 0.3, 0.5, 0.9999} { // joins the normal
		near(t, "large dof", quantile(p, 1e7), quantile(p, math.Inf(1)), 1e-5)
	}
}

// The probability of conformity by t against draws of the true value.
func TestConformityMonteCarlo(t *testing.T) {
	r := Result{Value: 9.2, U: 0.5, DOF: 4, Unit: "1"}
	p, err := ProbabilityOfConformity(r, Between(8, 10, "1"))
	if err != nil {
		t.Fatal(err)
	}
	const n = 400000
	src := random.New(7, "conformity", 0)
	in := 0
	for range n {
		if y := r.Value + r.U*src.StudentT(r.DOF); y >= 8 && y <= 10 {
			in++
		}
	}
	near(t, "p_c", float64(in)/n, p, 4.5*math.Sqrt(p*(1-p)/n))
}

// Global risks against items drawn from the population, then measured
// (JCGM 106:2012 9.5).
func TestGlobalRiskMonteCarlo(t *testing.T) {
	const n = 400000
	for i, c := range []struct {
		limits, accept Limits
		u              float64
		p              Population
	}{
		{Between(-1, 1, "V"), Between(-0.9, 0.9, "V"), 0.2, Population{Mean: 0.1, SD: 0.6}},
		{Between(-1, 1, "V"), Between(-1, 1, "V"), 0.5, Population{Mean: -0.7, SD: 0.3}},
		{AtMost(2, "V"), AtMost(1.7, "V"), 0.15, Population{Mean: 1.2, SD: 0.5}},
		{AtLeast(2, "V"), AtLeast(2.4, "V"), 0.2, Population{Mean: 3, SD: 0.7}},
	} {
		g, err := GlobalRisks(c.limits, c.accept, c.u, c.p)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "sum", g.Consumer+g.Producer+g.RightlyAccepted+g.RightlyRejected, 1, 1e-13)
		near(t, "conforming", g.Producer+g.RightlyAccepted, g.PopulationConform, 1e-13)
		lo, up, _ := c.limits.ends("V")
		al, au, _ := c.accept.ends("V")
		src := random.New(11, "global-risk", uint64(i))
		var consumer, producer int
		for range n {
			eta := c.p.Mean + c.p.SD*src.Normal()
			y := eta + c.u*src.Normal()
			conforms, accepted := eta >= lo && eta <= up, y >= al && y <= au
			if accepted && !conforms {
				consumer++
			}
			if !accepted && conforms {
				producer++
			}
		}
		near(t, "consumer", float64(consumer)/n, g.Consumer, 4.5*math.Sqrt(g.Consumer*(1-g.Consumer)/n))
		near(t, "producer", float64(producer)/n, g.Producer, 4.5*math.Sqrt(g.Producer*(1-g.Producer)/n))
	}
}

// Closed form of the bivariate normal quadrant: limit, acceptance limit and
// population mean at zero give Pr(η > 0, η_m ≤ 0) = arccos(ρ)/2π (Sheppard 1899).
func TestGlobalRiskQuadrant(t *testing.T) {
	for _, u := range []float64{1e-3, 0.1, 1, 7, 300} {
		g, err := GlobalRisks(AtMost(0, "1"), AtMost(0, "1"), u, Population{SD: 1})
		if err != nil {
			t.Fatal(err)
		}
		want := math.Atan(u) / (2 * math.Pi) // ρ = 1/√(1 + u²)
		near(t, "consumer", g.Consumer, want, 1e-12*want)
		near(t, "producer", g.Producer, want, 1e-12*want)
	}
}

func TestGuardFromConsumerRisk(t *testing.T) {
	s, err := Decide(Result{Value: 9.99, U: 0.02, Unit: "V"}, Between(9.9, 10.1, "V"),
		DecisionSettings{Rule: GuardBand, ConsumerRisk: 0.005, Population: &Population{Mean: 10, SD: 0.06}})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "consumer's risk", s.Global.Consumer, 0.005, 1e-9)
	if s.Guard <= 0 || s.Verdict != Pass {
		t.Errorf("guard %v, %s", s.Guard, s.Verdict)
	}
}

// Guarded rejection, JCGM 106:2012 8.3.3: only a value proved to be outside fails.
func TestGuardedRejection(t *testing.T) {
	for y, want := range map[float64]Verdict{1.19: Pass, 1.21: Fail} {
		s, err := Decide(Result{Value: y, U: 0.1, Unit: "V"}, AtMost(1, "V"), DecisionSettings{Rule: GuardBand, Rejection: true})
		if err != nil {
			t.Fatal(err)
		}
		if s.Verdict != want || float64(s.AcceptUpper) != 1.2 {
			t.Errorf("%v: %s, acceptance up to %v", y, s.Verdict, s.AcceptUpper)
		}
	}
}

// Limits, population and guard band in another unit than the result.
func TestLimitsConverted(t *testing.T) {
	a, err := Decide(Result{Value: 4990, U: 40, Unit: "V/m"}, Between(4.9, 5.1, "kV/m"),
		DecisionSettings{Rule: GuardBand, Guard: 0.05, Population: &Population{Mean: 5, SD: 0.06}})
	if err != nil {
		t.Fatal(err)
	}
	b, err := Decide(Result{Value: 4.990, U: 0.040, Unit: "kV/m"}, Between(4.9, 5.1, "kV/m"),
		DecisionSettings{Rule: GuardBand, Guard: 0.05, Population: &Population{Mean: 5, SD: 0.06}})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "p_c", a.Conformity, b.Conformity, 1e-12)
	near(t, "guard", a.Guard, 50, 1e-9)
	near(t, "consumer", a.Global.Consumer, b.Global.Consumer, 1e-12)
}

// Statements are written whole: absent ends and infinite degrees of freedom as
// null, and a result is read again as it was.
func TestStatementJSON(t *testing.T) {
	for _, r := range []Result{{Name: "x", Value: 1, U: 0.1, Unit: "V/m"}, {Value: 1, U: 0.1, DOF: 7.5, K: 2.4, Unit: "1"}} {
		s, err := Decide(r, AtMost(2, r.Unit), DecisionSettings{Rule: NonBinary})
		if err != nil {
			t.Fatal(err)
		}
		b, err := json.Marshal(s)
		if err != nil {
			t.Fatal(err)
		}
		var back Statement
		if err := json.Unmarshal(b, &back); err != nil {
			t.Fatal(err)
		}
		r.K = r.factor()
		if back.Result != r || back.Verdict != Pass || !math.IsNaN(float64(back.AcceptLower)) || back.AcceptUpper != s.AcceptUpper {
			t.Errorf("%s came back as %+v", b, back)
		}
	}
}

// The unit of a record is written with superscripts or slashes.
func TestUnitSpellings(t *testing.T) {
	for _, unit := range []string{"V m⁻¹", "V/m", "V m-1", "kg m s⁻³ A⁻¹"} {
		r, err := Result{Value: 5000, U: 10, Unit: unit}.to("kV/m")
		if err != nil || r.Value != 5 || r.U != 0.01 {
			t.Errorf("%s: %+v, %v", unit, r, err)
		}
	}
}

// The reading that belongs to a probability, put back into the probability.
func TestReadingAt(t *testing.T) {
	for _, s := range []Spread{{U: 0.3}, {Relative: 0.02}, {U: 0.3, Relative: 0.02, DOF: 6}} {
		for _, p := range []float64{0.001, 0.3, 0.5, 0.95} {
			for _, limit := range []float64{-20, 0.5, 100} {
				y, err := s.ReadingAt(limit, p)
				if err != nil {
					t.Fatal(err)
				}
				u := math.Hypot(s.U, s.Relative*y)
				near(t, "p", below((y-limit)/u, Result{DOF: s.DOF}.dof()), p, 1e-11)
			}
		}
	}
	_, err := Spread{Relative: 0.5}.ReadingAt(100, 0.999)
	refuses(t, "spread too wide", err, "no reading")
}

func TestDecideRefuses(t *testing.T) {
	good, limits := Result{Name: "factor", Value: 1, U: 0.1, Unit: "1"}, Between(0, 2, "1")
	population := &Population{Mean: 1, SD: 1}
	nan := math.NaN()
	for _, c := range []struct {
		what  string
		r     Result
		l     Limits
		s     DecisionSettings
		words string
	}{
		{"wrong way round", good, Between(2, 0, "1"), DecisionSettings{Rule: GuardBand}, "wrong way round"},
		{"equal limits", good, Between(2, 2, "1"), DecisionSettings{Rule: GuardBand}, "no room"},
		{"no limit", good, Limits{Unit: "1"}, DecisionSettings{Rule: GuardBand}, "neither"},
		{"infinite limit", good, AtMost(math.Inf(1), "1"), DecisionSettings{Rule: GuardBand}, "leave it out"},
		{"no unit", good, Between(0, 2, ""), DecisionSettings{Rule: GuardBand}, "no unit"},
		{"other dimension", good, Between(0, 2, "kV"), DecisionSettings{Rule: GuardBand}, "dimension"},
		{"unknown unit", good, Between(0, 2, "blorp"), DecisionSettings{Rule: GuardBand}, "blorp"},
		{"result without unit", Result{Value: 1, U: 0.1}, limits, DecisionSettings{Rule: GuardBand}, "no unit"},
		{"result without uncertainty", Result{Value: 1, Unit: "1"}, limits, DecisionSettings{Rule: GuardBand}, "above zero"},
		{"unknown uncertainty", Result{Value: 1, U: nan, Unit: "1"}, limits, DecisionSettings{Rule: GuardBand}, "not a finite"},
		{"value not a number", Result{Value: nan, U: 1, Unit: "1"}, limits, DecisionSettings{Rule: GuardBand}, "not a finite"},
		{"no rule", good, limits, DecisionSettings{}, "state one of"},
		{"misspelt rule", good, limits, DecisionSettings{Rule: "gard-band"}, `did you mean "guard-band"`},
		{"guard with simple acceptance", good, limits, DecisionSettings{Rule: SimpleAcceptance, Guard: 0.1}, "no guard band"},
		{"negative guard", good, limits, DecisionSettings{Rule: GuardBand, Guard: -0.1}, "above zero"},
		{"negative factor", good, limits, DecisionSettings{Rule: GuardBand, Factor: -1}, "above zero"},
		{"guard twice", good, limits, DecisionSettings{Rule: GuardBand, Guard: 0.1, FalseAccept: 0.05}, "more than once"},
		{"risk as percent", good, limits, DecisionSettings{Rule: GuardBand, FalseAccept: 5}, "0.05"},
		{"risk not a number", good, limits, DecisionSettings{Rule: GuardBand, FalseAccept: nan}, "between 0 and 0.5"},
		{"risk out of reach", Result{Value: 1, U: 2, Unit: "1"}, limits, DecisionSettings{Rule: GuardBand, FalseAccept: 0.05}, "too large"},
		{"no acceptance interval", Result{Value: 1, U: 2, Unit: "1"}, limits, DecisionSettings{Rule: GuardBand}, "leave nothing"},
		{"consumer's risk without population", good, limits, DecisionSettings{Rule: GuardBand, ConsumerRisk: 0.01}, "stated population"},
		{"population without spread", good, limits, DecisionSettings{Rule: GuardBand, Population: &Population{Mean: 1}}, "above zero"},
		{"rejection by simple acceptance", good, limits, DecisionSettings{Rule: SimpleAcceptance, Rejection: true}, "guarded rejection"},
		{"rejection by global risk", good, limits, DecisionSettings{Rule: GuardBand, Rejection: true, ConsumerRisk: 0.1, Population: population}, "inside the limits"},
		{"negative dof", Result{Value: 1, U: 1, DOF: -2, Unit: "1"}, limits, DecisionSettings{Rule: GuardBand}, "degrees of freedom"},
	} {
		s, err := Decide(c.r, c.l, c.s)
		refuses(t, c.what, err, c.words)
		if s != nil {
			t.Errorf("%s: a statement beside the error", c.what)
		}
	}
}
