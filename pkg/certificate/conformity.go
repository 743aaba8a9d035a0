package certificate

import (
	"fmt"
	"math"
	"strings"

	"example.org/guardring/pkg/assess"
	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// Conformity is a statement of conformity as the certificate prints it: which
// result, which specification, which decision rule (ISO/IEC 17025:2017 7.8.6.2),
// with the probability and the risks of JCGM 106:2012.
type Conformity struct {
	Statement *assess.Statement
	Result    string // which result it is about
	Series    string // its series, else the result
	Limits    string // "0.98 to 1.02"
	Source    string // the specification
	Rule      string // the decision rule in words
	Accepted  string // the acceptance interval, at the place of the result
	Verdict   string
	// Probability of conformity and risks, ready to print.
	Probability string
	Risks       []Fact
	Population  string // what the global risks are for
	Warnings    []string
}

// The labels of the risks of JCGM 106:2012, specific and global.
const (
	falseAcceptance = "risk of false acceptance"
	falseRejection  = "risk of false rejection"
	consumersRisk   = "consumer's global risk"
	producersRisk   = "producer's global risk"
)

// decide states the conformity of a result where the bench has limits for it.
func decide(b *bench.Bench, res *Result, m *reduce.Measurand) (*Conformity, error) {
	l := b.Limits
	if l == nil {
		return nil, nil
	}
	base, _, _ := strings.Cut(m.Name, " (")
	if l.Measurand != "" && l.Measurand != base && l.Measurand != m.Name && figure.Words(l.Measurand) != figure.Words(base) {
		return nil, nil
	}
	if l.Measurand == "" && res.Value.Name != figure.Words(base) {
		return nil, nil
	}
	unit, err := si.ParseUnit(m.Unit)
	if err != nil {
		return nil, fmt.Errorf("certificate: %w", err)
	}
	if unit.Dim != l.Unit.Dim {
		return nil, fmt.Errorf("%s/bench.toml: limits.unit: %q does not measure the %s, which is in %s", b.Dir, l.Unit.Symbol, figure.Words(base), m.Unit)
	}
	// Everything in the measurand's own unit, which is SI.
	lim := assess.Limits{Unit: m.Unit, Source: l.Source}
	if l.HasLower {
		v := l.Lower
		lim.Lower = &v
	}
	if l.HasUpper {
		v := l.Upper
		lim.Upper = &v
	}
	s := assess.DecisionSettings{Guard: l.GuardWidth, FalseAccept: l.FalseAccept}
	if l.GuardFactor != 1 {
		s.Factor = l.GuardFactor
	}
	switch l.Rule {
	case "simple":
		s = assess.DecisionSettings{Rule: assess.SimpleAcceptance}
	case "guard-band":
		s.Rule = assess.GuardBand
	case "non-binary":
		s.Rule = assess.NonBinary
	default:
		return nil, fmt.Errorf("%s/bench.toml: limits.rule: %q is no decision rule", b.Dir, l.Rule)
	}
	if p := l.Population; p != nil {
		s.Population = &assess.Population{Mean: p.Mean, SD: p.SD, Source: p.Source}
	}
	name := title(res.Value.Name, res.Name)
	st, err := assess.Decide(assess.Result{Name: name, Value: float64(m.Value), U: res.Value.u(), DOF: float64(m.DOF), K: res.Value.k, Unit: m.Unit}, lim, s)
	if err != nil {
		return nil, fmt.Errorf("certificate: conformity of the %s: %w", name, err)
	}
	c := &Conformity{Statement: st, Result: name, Series: or(res.Name, res.Value.Name), Source: l.Source, Verdict: string(st.Verdict), Limits: limitText(l), Rule: ruleText(l, st), Accepted: accepted(st, &res.Value),
		Probability: assess.Percent(st.Conformity, st.Nonconformity)}
	risk := func(label string, p float64) {
		if !math.IsNaN(p) {
			c.Risks = append(c.Risks, Fact{label, assess.Percent(p, 1-p)})
		}
	}
	risk(falseAcceptance, float64(st.FalseAccept))
	risk(falseRejection, float64(st.FalseReject))
	if g := st.Global; g != nil {
		risk(consumersRisk, g.Consumer)
		risk(producersRisk, g.Producer)
		c.Population = g.PopulationSource
	}
	for _, d := range res.Departures {
		if d.Found {
			c.Warnings = append(c.Warnings, d.Name+" was found: the statement is about the one "+res.Value.Name+" of the series, not about each of its points")
		}
	}
	for _, w := range st.Warnings {
		c.Warnings = append(c.Warnings, w.Error())
	}
	if alike(st, &res.Value) {
		c.Warnings = append(c.Warnings, "the result and an end of an interval that decides are alike in the digits printed; the statement rests on those before rounding")
	}
	return c, nil
}

// limitText writes the limits in the unit of the specification.
func limitText(l *bench.Limits) string {
	n := func(x float64) string { return shown(significant(l.Unit.FromSI(x), 8)) }
	trim := func(s string) string {
		if strings.Contains(s, ".") {
			s = strings.TrimRight(strings.TrimRight(s, "0"), ".")
		}
		return s
	}
	unit := ""
	if t := unitText(l.Unit); t != "" {
		unit = "\u00a0" + t
	}
	switch {
	case l.HasLower && l.HasUpper:
		return trim(n(l.Lower)) + " to " + trim(n(l.Upper)) + unit
	case l.HasLower:
		return "at least " + trim(n(l.Lower)) + unit
	}
	return "at most " + trim(n(l.Upper)) + unit
}

// ruleText tells the decision rule and where its guard band comes from.
func ruleText(l *bench.Limits, s *assess.Statement) string {
	guard := "U"
	switch {
	case l.FalseAccept > 0:
		guard = "what keeps the risk of false acceptance below " + spaced(assess.Percent(l.FalseAccept, 1-l.FalseAccept))
	case l.GuardWidth > 0:
		guard = with(significant(l.Unit.DeltaFromSI(l.GuardWidth), 4), l.Unit)
	case l.GuardFactor > 0 && l.GuardFactor != 1:
		guard = significant(l.GuardFactor, 3) + "\u00a0U"
	}
	switch s.Rule {
	case assess.SimpleAcceptance:
		return "simple acceptance: pass where the result lies within the limits (ILAC-G8:09/2019, 4.2.1)"
	case assess.GuardBand:
		return "guard band: pass where the result lies within the limits moved in by " + guard + " (ILAC-G8:09/2019, 4.2.2)"
	}
	return "non-binary: pass where the result lies within the limits moved in by " + guard +
		"; conditional pass from there to the limits; conditional fail as far outside; else fail (ILAC-G8:09/2019, 4.2.3)"
}

// accepted writes the acceptance interval at the place of the result.
func accepted(s *assess.Statement, q *Quantity) string {
	n := func(x reduce.Number) string { return with(q.beside(float64(x)), q.Unit) }
	low, high := known(s.AcceptLower), known(s.AcceptUpper)
	switch {
	case low && high && s.AcceptLower > s.AcceptUpper: // a non-binary rule with wide guard bands
		return "none without a condition"
	case low && high:
		return n(s.AcceptLower) + " to " + n(s.AcceptUpper)
	case low:
		return "at least " + n(s.AcceptLower)
	}
	return "at most " + n(s.AcceptUpper)
}

// alike reports whether a result that lies beside an end of the acceptance interval,
// or of the limits where these decide too, is printed as that end is.
func alike(s *assess.Statement, q *Quantity) bool {
	ends := []float64{float64(s.AcceptLower), float64(s.AcceptUpper)}
	if s.Rule == assess.NonBinary {
		for _, l := range []*float64{s.Limits.Lower, s.Limits.Upper} {
			if l != nil {
				ends = append(ends, *l)
			}
		}
	}
	for _, x := range ends {
		if known(reduce.Number(x)) && x != q.value && q.beside(x) == q.Value {
			return true
		}
	}
	return false
}
