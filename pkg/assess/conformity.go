package assess

import (
	"errors"
	"fmt"
	"math"
	"strings"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// Rule is a decision rule: how measurement uncertainty is taken into account
// when conformity is stated (ISO/IEC 17025:2017 3.7).
type Rule string

// The decision rules.
const (
	// SimpleAcceptance accepts a measured value inside the limits
	// (ILAC-G8:09/2019 4.2.1; JCGM 106:2012 8.2).
	SimpleAcceptance Rule = "simple-acceptance"
	// GuardBand accepts a measured value inside limits moved in by w
	// (ILAC-G8:09/2019 4.2.2; JCGM 106:2012 8.3.2).
	GuardBand Rule = "guard-band"
	// NonBinary divides the values by the limits and by w on both sides of each
	// into four verdicts (ILAC-G8:09/2019 4.2.3).
	NonBinary Rule = "non-binary"
)

var rules = []string{string(SimpleAcceptance), string(GuardBand), string(NonBinary)}

// Verdict is the outcome of a decision rule.
type Verdict string

// The verdicts; the conditional ones belong to the non-binary rule.
const (
	Pass            Verdict = "pass"
	ConditionalPass Verdict = "conditional pass"
	ConditionalFail Verdict = "conditional fail"
	Fail            Verdict = "fail"
)

// Accepted reports whether the verdict lets the item through.
func (v Verdict) Accepted() bool { return v == Pass || v == ConditionalPass }

// DecisionSettings is the decision rule agreed with the client. There is no
// default rule: one has to be stated (ISO/IEC 17025:2017 7.1.3).
type DecisionSettings struct {
	Rule Rule
	// The guard band is w = U (expanded) unless exactly one of these chooses it:
	Guard        float64 // w itself, in the unit of the limits, > 0
	Factor       float64 // r in w = rU, > 0 (JCGM 106:2012 8.3.2.2)
	FalseAccept  float64 // largest specific risk of false acceptance (with Rejection: of false rejection), 0 … 0.5
	ConsumerRisk float64 // largest global consumer's risk, 0 … 0.5; needs Population
	// Rejection moves the limits of the guard-band rule out instead of in: only
	// values proved not to conform are refused (JCGM 106:2012 8.3.3).
	Rejection bool
	// Population is what is known of such items before the measurement. Global
	// risks are stated only with it.
	Population *Population
}

// Statement is a statement of conformity. Numbers are in the result's unit.
type Statement struct {
	Result  Result  `json:"result"`
	Limits  Limits  `json:"limits"`  // as specified, in the result's unit
	Rule    Rule    `json:"rule"`    // rule applied
	Verdict Verdict `json:"verdict"` // its outcome
	Guard   float64 `json:"guard"`   // w, negative for guarded rejection, 0 for simple acceptance
	// Acceptance limits: values between them are accepted (non-binary: pass
	// without condition); null where there is no limit.
	AcceptLower reduce.Number `json:"accept_lower"`
	AcceptUpper reduce.Number `json:"accept_upper"`
	// Conformity is the probability that the true value lies within the limits
	// (JCGM 106:2012 7.2–7.4), Nonconformity that it does not.
	Conformity    float64 `json:"probability_of_conformity"`
	Nonconformity float64 `json:"probability_of_nonconformity"`
	// FalseAccept and FalseReject are the specific risks of this decision (JCGM
	// 106:2012 9.3.2); null for the one that does not apply.
	FalseAccept reduce.Number `json:"specific_risk_of_false_acceptance"`
	FalseReject reduce.Number `json:"specific_risk_of_false_rejection"`
	// WorstFalseAccept is the specific risk for a measured value that lies on an
	// acceptance limit: the most the rule admits (pass, for non-binary).
	WorstFalseAccept float64 `json:"worst_specific_risk_of_false_acceptance"`
	// Capability is (upper − lower)/(4u), the measurement capability index C_m
	// (JCGM 106:2012 7.6.3); null with a single limit.
	Capability reduce.Number `json:"capability_index"`
	Global     *GlobalRisk   `json:"global_risk,omitempty"`
	Warnings   []error       `json:"-"`
}

// ProbabilityOfConformity returns the probability that the true value of r lies
// within l: JCGM 106:2012 7.2 (one limit), 7.4 (two limits)
//
//	p_c = F((T_U − y)/u) − F((T_L − y)/u)
//
// with F the standard normal distribution, or Student's t for finite degrees of
// freedom.
func ProbabilityOfConformity(r Result, l Limits) (float64, error) {
	if err := r.check(true); err != nil {
		return 0, err
	}
	lower, upper, err := l.ends(r.Unit)
	if err != nil {
		return 0, err
	}
	return between((lower-r.Value)/r.U, (upper-r.Value)/r.U, r.dof()), nil
}

// Decide states whether r conforms to l by the rule in s. It refuses a rule not
// stated, limits without a unit, the wrong way round or of another dimension, a
// result without an uncertainty, a risk that no guard band can reach, and guard
// bands that leave no acceptance interval.
func Decide(r Result, l Limits, s DecisionSettings) (*Statement, error) {
	if err := r.check(true); err != nil {
		return nil, err
	}
	lower, upper, err := l.ends(r.Unit)
	if err != nil {
		return nil, err
	}
	population, err := s.Population.to(l.Unit, r.Unit)
	if err != nil {
		return nil, err
	}
	st := &Statement{Result: r, Rule: s.Rule, Limits: Limits{Unit: r.Unit, Source: l.Source},
		AcceptLower: reduce.Number(math.NaN()), AcceptUpper: reduce.Number(math.NaN()),
		FalseAccept: reduce.Number(math.NaN()), FalseReject: reduce.Number(math.NaN()), Capability: reduce.Number(math.NaN())}
	if l.Lower != nil {
		st.Limits.Lower = &lower
	}
	if l.Upper != nil {
		st.Limits.Upper = &upper
	}
	if st.Guard, err = s.guard(r, l.Unit, lower, upper, population); err != nil {
		return nil, err
	}
	al, au := lower+st.Guard, upper-st.Guard
	y, w := r.Value, st.Guard
	if al > au {
		if s.Rule != NonBinary {
			return nil, fmt.Errorf("guard bands of %s on both sides leave nothing between %s and %s: the measurement uncertainty is too large for this rule",
				short(w, r.Unit), short(lower, r.Unit), short(upper, r.Unit))
		}
		st.Warnings = append(st.Warnings, fmt.Errorf("the limits are closer than twice the guard band %s: no value can pass without a condition", short(w, r.Unit)))
	}
	switch inside := y >= lower && y <= upper; {
	case y >= al && y <= au:
		st.Verdict = Pass
	case s.Rule != NonBinary:
		st.Verdict = Fail
	case inside:
		st.Verdict = ConditionalPass
	case y >= lower-w && y <= upper+w:
		st.Verdict = ConditionalFail
	default:
		st.Verdict = Fail
	}
	if l.Lower != nil {
		st.AcceptLower = reduce.Number(al)
	}
	if l.Upper != nil {
		st.AcceptUpper = reduce.Number(au)
	}
	nonconforming := func(at float64) float64 { return outside((lower-at)/r.U, (upper-at)/r.U, r.dof()) }
	st.Conformity = between((lower-y)/r.U, (upper-y)/r.U, r.dof())
	st.Nonconformity = nonconforming(y)
	if st.Verdict.Accepted() {
		st.FalseAccept = reduce.Number(st.Nonconformity) // JCGM 106:2012 9.3.2: R*_C = 1 − p_c
	} else {
		st.FalseReject = reduce.Number(st.Conformity) // R*_P = p_c
	}
	for _, at := range []float64{al, au} {
		if !math.IsInf(at, 0) {
			st.WorstFalseAccept = math.Max(st.WorstFalseAccept, nonconforming(at))
		}
	}
	if !math.IsInf(lower, 0) && !math.IsInf(upper, 0) {
		c := (upper - lower) / (4 * r.U)
		st.Capability = reduce.Number(c)
		if s.Rule == SimpleAcceptance && c < 3 {
			st.Warnings = append(st.Warnings, fmt.Errorf("the limits are only %.2g expanded uncertainties (k = 2) from their middle; simple acceptance supposes that the uncertainty is small against them (JCGM 106:2012 8.2)", c))
		}
	}
	if population != nil {
		if s.Rule == NonBinary { // both passes let the item through
			al, au = lower, upper
		}
		if st.Global, err = global(lower, upper, al, au, r.U, *population); err != nil {
			return nil, err
		}
		if !math.IsInf(r.dof(), 1) {
			st.Warnings = append(st.Warnings, fmt.Errorf("global risks take the measurement error as normal; the result has %.3g degrees of freedom", r.dof()))
		}
	}
	return st, nil
}

// guard returns the guard band in the unit of the result.
func (s DecisionSettings) guard(r Result, unit string, lower, upper float64, population *Population) (float64, error) {
	chosen := 0
	for _, x := range []float64{s.Guard, s.Factor, s.FalseAccept, s.ConsumerRisk} {
		if x != 0 {
			chosen++
		}
	}
	if s.Rejection && s.Rule != GuardBand {
		return 0, fmt.Errorf("guarded rejection belongs to the rule %q, not to %q", GuardBand, s.Rule)
	}
	switch s.Rule {
	case SimpleAcceptance:
		if chosen > 0 {
			return 0, fmt.Errorf("rule %q has no guard band; with one the rule is %q or %q", SimpleAcceptance, GuardBand, NonBinary)
		}
		return 0, nil
	case GuardBand, NonBinary:
	case "":
		return 0, fmt.Errorf("no decision rule; state one of %s", strings.Join(rules, ", "))
	default:
		hint := ""
		if near := si.Suggest(string(s.Rule), rules); near != "" {
			hint = fmt.Sprintf("; did you mean %q?", near)
		}
		return 0, fmt.Errorf("decision rule %q is unknown%s (rules: %s)", s.Rule, hint, strings.Join(rules, ", "))
	}
	if chosen > 1 {
		return 0, errors.New("the guard band is chosen more than once; give its width, or a multiple of U, or a specific risk, or a global consumer's risk")
	}
	sign := 1.0
	if s.Rejection {
		sign = -1
	}
	switch {
	case s.Guard != 0:
		if !(s.Guard > 0) || math.IsInf(s.Guard, 0) {
			return 0, fmt.Errorf("guard band %v must be a width above zero; moving limits out is asked for with guarded rejection", s.Guard)
		}
		w := s.Guard
		if unit != r.Unit {
			from, to, err := convertible(unit, r.Unit)
			if err != nil {
				return 0, err
			}
			w = to.DeltaFromSI(from.DeltaToSI(w))
		}
		return sign * w, nil
	case s.Factor != 0:
		if !(s.Factor > 0) || math.IsInf(s.Factor, 0) {
			return 0, fmt.Errorf("guard band of %v expanded uncertainties: the factor must be above zero", s.Factor)
		}
		return sign * s.Factor * r.Expanded(), nil
	case s.FalseAccept != 0:
		if s.Rejection { // risk of refusing an item that conforms; one limit decides
			w, err := guardForRisk(s.FalseAccept, r, math.Inf(-1), 0)
			return -w, err
		}
		return guardForRisk(s.FalseAccept, r, lower, upper)
	case s.ConsumerRisk != 0:
		if population == nil {
			return 0, errors.New("a guard band from the global consumer's risk needs a stated population of such items: its mean and standard deviation")
		}
		if s.Rejection {
			return 0, errors.New("a global consumer's risk chooses a guard band inside the limits; guarded rejection takes its width or a specific risk")
		}
		return guardForConsumer(s.ConsumerRisk, r.U, lower, upper, *population)
	}
	return sign * r.Expanded(), nil
}

// String returns the statement as one sentence.
func (s *Statement) String() string {
	var b strings.Builder
	unit := s.Result.Unit
	v, u := si.Round(s.Result.Value, s.Result.Expanded())
	if unit == "1" {
		fmt.Fprintf(&b, "%s: %s ± %s against ", s.Verdict, v, u)
	} else {
		fmt.Fprintf(&b, "%s: (%s ± %s) %s against ", s.Verdict, v, u, unit)
	}
	switch {
	case s.Limits.Lower == nil:
		fmt.Fprintf(&b, "at most %s", short(*s.Limits.Upper, unit))
	case s.Limits.Upper == nil:
		fmt.Fprintf(&b, "at least %s", short(*s.Limits.Lower, unit))
	default:
		fmt.Fprintf(&b, "%s to %s", short(*s.Limits.Lower, unit), short(*s.Limits.Upper, unit))
	}
	fmt.Fprintf(&b, ", rule %s", s.Rule)
	if s.Guard != 0 {
		fmt.Fprintf(&b, ", guard band %s", short(s.Guard, unit))
	}
	fmt.Fprintf(&b, ", probability of conformity %s", Percent(s.Conformity, s.Nonconformity))
	return b.String()
}

// Percent prints a probability for people without ever rounding it to certainty:
// "97.3 %", "99.99 %", "> 99.99 %", "< 0.01 %". complement is 1 − p, given apart
// because it may be too small to be seen in p.
func Percent(p, complement float64) string {
	switch {
	case p == 0:
		return "0 %"
	case p < 1e-4:
		return "< 0.01 %"
	case complement < 1e-4:
		return "> 99.99 %"
	case p < 0.1 || complement < 0.1:
		return fmt.Sprintf("%.2f %%", 100*p)
	}
	return fmt.Sprintf("%.1f %%", 100*p)
}

func short(x float64, unit string) string {
	return strings.TrimSuffix(fmt.Sprintf("%.6g %s", x, unit), " 1")
}
