package certificate

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// found says where one number does not describe a series, so that nobody takes
// it for the whole range without looking at the points.
func (c *Certificate) found() {
	for i := range c.Results {
		r := &c.Results[i]
		for _, d := range r.Departures {
			if d.Found {
				c.Observations = append(c.Observations, fmt.Sprintf("%s%s of (%s ± %s)\u00a0%% found: one %s does not describe this series, and its U does not cover the departure; the points show it",
					lead(r.Name), d.Name, shown(d.Size), d.Expanded, r.Value.Name))
			}
		}
	}
}

// results states every series, its conformity and the shifts by adjustment.
func (c *Certificate) results(r *reduce.Result) error {
	b, rec := r.Bench, &r.Record
	base, err := stated(r)
	if err != nil {
		return err
	}
	c.base = base
	least, err := leastOf(b.Capability, rec, base)
	if err != nil {
		return err
	}
	for i, name := range series(r) {
		m := rec.Measurand(reduce.SeriesName(base, name))
		if m == nil {
			return fmt.Errorf("certificate: the reduction states no %s for %q", base, name)
		}
		unit, err := unitFor(m)
		if err != nil {
			return err
		}
		words := figure.Words(base)
		if i == 0 {
			c.Definition = Fact{words, m.Doc}
		}
		res := Result{Name: name, Phase: phase(name), Value: quantity(words, m.Doc, float64(m.Value), float64(m.U), float64(m.K), unit, least)}
		if z := rec.Measurand(reduce.SeriesName("zero_offset", name)); z != nil && base != "zero_offset" {
			zu, err := unitFor(z)
			if err != nil {
				return err
			}
			q := quantity("zero offset", z.Doc, float64(z.Value), float64(z.U), float64(z.K), zu, nil)
			res.Zero = &q
		}
		if i < len(rec.Series) {
			if err := res.points(&rec.Series[i], rec, base, words, unit, least); err != nil {
				return err
			}
			c.scope(b.Capability, &rec.Series[i])
		}
		if res.Conformity, err = decide(b, &res, m); err != nil {
			return err
		}
		low := 0
		for _, p := range res.Points {
			if p.Value.Raised {
				low++
			}
		}
		at := ""
		if !res.Value.Raised {
			at = fmt.Sprintf(" at %d of %d points", low, len(res.Points))
		}
		if res.Value.Raised || low > 0 {
			c.Observations = append(c.Observations, fmt.Sprintf("%s: the uncertainty found is below the laboratory's stated capability%s, which is stated in its place",
				title(words, name), at))
		}
		c.Results = append(c.Results, res)
	}
	if len(rec.Series) == 0 {
		// A kind without series states all its measurands.
		for i := range rec.Measurands {
			m := &rec.Measurands[i]
			if m.Name == base {
				continue
			}
			unit, err := unitFor(m)
			if err != nil {
				return err
			}
			res := Result{Value: quantity(figure.Words(m.Name), m.Doc, float64(m.Value), float64(m.U), float64(m.K), unit, nil)}
			if res.Conformity, err = decide(b, &res, m); err != nil {
				return err
			}
			c.Results = append(c.Results, res)
		}
	}
	for i := range rec.Measurands {
		m := &rec.Measurands[i]
		rest, ok := strings.CutPrefix(m.Name, "shift of ")
		if !ok {
			continue
		}
		unit, err := unitFor(m)
		if err != nil {
			return err
		}
		// A shift of the result itself needs no more than its series; one of the
		// other definition of the factor says so.
		of, name, _ := strings.Cut(rest, " (")
		name = strings.TrimSuffix(name, ")")
		if of != base {
			name = title(figure.Words(of), name)
		}
		c.Shifts = append(c.Shifts, quantity(name, m.Doc, float64(m.Value), float64(m.U), float64(m.K), unit, nil))
	}
	return nil
}

// points states a series at each level.
func (res *Result) points(s *reduce.Series, rec *reduce.Record, base, words string, unit si.Unit, least *capability) error {
	// The other definition of the factor is the inverse, with the same relative
	// uncertainty: |d(1/N)/dN| u = u/N².
	inverse := s.Result == "correction_factor" && base == "response"
	if s.Result != base && !inverse {
		return fmt.Errorf("certificate: points are stated as %s; report.definition = %q can't be stated point by point", figure.Words(s.Result), base)
	}
	var level, indication float64
	for _, p := range s.Points {
		level = math.Max(level, math.Abs(float64(p.Level)))
		indication = math.Max(indication, math.Abs(float64(p.Indication)))
	}
	var err error
	if res.LevelUnit, err = prefixed(level, s.LevelUnit); err != nil {
		return err
	}
	if res.Indicated, err = prefixed(indication, rec.Fit.ResponseUnit); err != nil {
		return err
	}
	res.Level = Fact{s.Level, "indication"}
	// Five digits of the largest, the same place for all.
	levelPlace, indicationPlace := fifth(res.LevelUnit.FromSI(level)), fifth(res.Indicated.FromSI(indication))
	for _, p := range s.Points {
		value, u, observed := float64(p.Value), float64(p.U), float64(p.Observed)
		if inverse {
			value, u, observed = 1/value, u/(value*value), 1/observed
		}
		q := quantity(words, "", value, u, float64(p.K), unit, least)
		place := 0
		if _, frac, ok := strings.Cut(q.Value, "."); ok {
			place = -len(frac)
		}
		res.Points = append(res.Points, Point{Level: at(res.LevelUnit.FromSI(float64(p.Level)), levelPlace), Readings: p.Rows,
			Indication: at(res.Indicated.FromSI(float64(p.Indication)), indicationPlace), Observed: at(unit.FromSI(observed), place), Value: q})
	}
	percent := func(x reduce.Number) string { return significant(100*float64(x), 2) + "\u00a0%" }
	if known(s.NonLinearity) && s.FullScale > 0 {
		res.Scatter = append(res.Scatter, Fact{"non-linearity", percent(s.NonLinearity) + " of " +
			with(significant(res.Indicated.FromSI(float64(s.FullScale)), 4), res.Indicated) + ", the largest departure of a point from the fit"})
	}
	if known(s.Repeatability) {
		res.Scatter = append(res.Scatter, Fact{"repeatability", fmt.Sprintf("%s of the reading, standard deviation with %d degrees of freedom", percent(s.Repeatability), s.RepeatabilityDOF)})
	}
	if known(s.Reproducibility) {
		res.Scatter = append(res.Scatter, Fact{"reproducibility", fmt.Sprintf("%s, standard deviation between %d mountings", percent(s.Reproducibility), s.Mountings)})
	}
	for _, e := range s.Effects {
		v, u := round(100*float64(e.Estimate), 200*float64(e.U), 0)
		p := fixed(float64(e.PValue), 3)
		if e.PValue < 0.001 {
			p = "< 0.001"
		}
		res.Departures = append(res.Departures, Departure{e.Name, e.Doc, v, u, p, !e.Passed})
	}
	return nil
}

func known(n reduce.Number) bool { return !math.IsNaN(float64(n)) && !math.IsInf(float64(n), 0) }

// scope says which levels lie outside the range of the stated capability.
func (c *Certificate) scope(k *bench.Capability, s *reduce.Series) {
	if k == nil {
		return
	}
	unit, err := si.ParseUnit(s.LevelUnit)
	if err != nil {
		return // points has refused such a unit before
	}
	var out []string
	seen := map[string]bool{}
	for _, p := range s.Points {
		x := math.Abs(float64(p.Level))
		low := k.Lower.Given && k.Lower.Unit.Dim == unit.Dim && x < k.Lower.Dist.Value
		high := k.Upper.Given && k.Upper.Unit.Dim == unit.Dim && x > k.Upper.Dist.Value
		if low || high {
			du, err := prefixed(x, s.LevelUnit)
			if err != nil {
				return
			}
			if t := with(significant(du.FromSI(x), 3), du); !seen[t] {
				seen[t] = true
				out = append(out, t)
			}
		}
	}
	if len(out) > 0 {
		c.Observations = append(c.Observations, fmt.Sprintf("%slevels outside the range of the laboratory's stated capability: %s", lead(s.Name), strings.Join(out, ", ")))
	}
}

func lead(name string) string {
	if name == "" {
		return ""
	}
	return name + ": "
}

// title is a result's name with its series.
func title(words, name string) string {
	if name == "" {
		return words
	}
	return words + ", " + name
}

// phase is the phase that the name of a series begins with.
func phase(name string) string {
	for _, p := range []string{reduce.AsFound, reduce.AsLeft} {
		if name == p || strings.HasPrefix(name, p+", ") {
			return p
		}
	}
	return ""
}

// stated is the name of the measurand that the certificate is about: what
// [report] definition says, else the first.
func stated(r *reduce.Result) (string, error) {
	var bases []string
	for i := range r.Record.Measurands {
		m := r.Record.Measurands[i].Name
		for _, s := range series(r) {
			if b, ok := strings.CutSuffix(m, reduce.SeriesName("", s)); ok && !strings.HasPrefix(b, "shift of ") && !slices.Contains(bases, b) {
				bases = append(bases, b)
			}
		}
	}
	def := r.Bench.Report.Definition
	if def == "" {
		return bases[0], nil
	}
	for _, b := range bases {
		if def == b || def == figure.Words(b) {
			return b, nil
		}
	}
	return "", fmt.Errorf("%s/bench.toml: report.definition: %q is no result of this bench; it may be %s", r.Bench.Dir, def, strings.Join(bases, ", "))
}

// unitFor chooses the unit in which a measurand is stated: its own, with the
// prefix that suits it.
func unitFor(m *reduce.Measurand) (si.Unit, error) {
	u, err := si.ParseUnit(m.Unit)
	if err != nil {
		return u, fmt.Errorf("certificate: %w", err)
	}
	return u.Suited(float64(m.Value), float64(m.K*m.U)), nil
}

func prefixed(x float64, symbol string) (si.Unit, error) {
	u, err := si.ParseUnit(symbol)
	if err != nil {
		return u, fmt.Errorf("certificate: %w", err)
	}
	_, u = si.Prefixed(x, u)
	return u, nil
}

// leastOf is the stated capability for a measurand.
func leastOf(k *bench.Capability, rec *reduce.Record, base string) (*capability, error) {
	if k == nil {
		return nil, nil
	}
	if k.U > 0 {
		for i := range rec.Measurands {
			if m := &rec.Measurands[i]; strings.HasPrefix(m.Name, base) {
				u, err := si.ParseUnit(m.Unit)
				if err != nil {
					return nil, fmt.Errorf("certificate: %w", err)
				}
				if u.Dim != k.Unit.Dim {
					return nil, fmt.Errorf("certificate: capability.expanded is in %s, the %s in %s", k.Unit.Symbol, figure.Words(base), m.Unit)
				}
			}
		}
	}
	return &capability{u: k.U, relative: k.Relative, k: k.K}, nil
}
