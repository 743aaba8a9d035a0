package report

import (
	"fmt"
	"io"
	"math"
	"strings"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// PropagationText writes the report of a budget's propagation for a terminal.
func PropagationText(w io.Writer, p *reduce.Propagation) error {
	out := &printer{}
	out.document(buildPropagation(&p.Record, nil))
	return out.to(w)
}

// PropagationHTML writes the report of a budget's propagation as one self-contained
// page with its figures; those that need trials are left out when p was read from a
// record.
func PropagationHTML(w io.Writer, p *reduce.Propagation) error {
	out := &pager{}
	out.document(buildPropagation(&p.Record, p))
	return out.to(w)
}

// PropagationSheet is the report of a budget's propagation, for a notebook; with
// figures or without.
func PropagationSheet(p *reduce.Propagation, figures bool) *Sheet {
	s := &Sheet{}
	if figures {
		s.d = *buildPropagation(&p.Record, p)
	} else {
		s.d = *buildPropagation(&p.Record, nil)
	}
	return s
}

func buildPropagation(rec *reduce.PropagationRecord, drawn *reduce.Propagation) *document {
	d := &document{title: rec.Title, subtitle: propagationSubtitle(rec)}
	if figure.OneLine(rec.Title) == "" {
		d.title = "Propagation of uncertainty"
	}
	d.head("Result")
	var rs []result
	for i := range rec.Outputs {
		rs = append(rs, statedOutput(&rec.Outputs[i]))
	}
	d.blocks = append(d.blocks, block{results: rs})
	if len(rec.Warnings) > 0 {
		d.head("Warnings")
		d.notice(rec.Warnings)
	}
	for i := range rec.Outputs {
		o := &rec.Outputs[i]
		if o.Law == nil || len(o.Law.Budget) == 0 {
			continue
		}
		d.head("Uncertainty budget of " + o.Name)
		d.show(BudgetTable(o))
		if drawn != nil && o.Law.U > 0 {
			d.picture(figure.BudgetShares(drawn, o.Name))
		}
		if s := o.Law.SecondOrder; s != nil {
			u := outputUnit(o)
			d.say(fmt.Sprintf("With the second-order terms of JCGM 100 5.1.2: u is %s where the first order gives %s; the expectation lies %s from the value stated.",
				quantity(float64(o.Law.U), u, 2), quantity(float64(s.FirstOrderU), u, 2), quantity(float64(s.Shift), u, 2)))
		}
	}
	d.propagationTrials(rec, drawn)
	d.jointly(rec, drawn)
	d.sources(rec)
	d.fitProvenance(rec.Inputs, rec.Guardring, rec.Run)
	return d
}

func propagationSubtitle(rec *reduce.PropagationRecord) string {
	inputs := 0
	for i := range rec.Outputs {
		if l := rec.Outputs[i].Law; l != nil {
			inputs = max(inputs, len(l.Budget))
		}
	}
	var parts []string
	if inputs > 0 {
		parts = append(parts, plural(inputs, "input", "inputs"))
	}
	parts = append(parts, plural(len(rec.Outputs), "output", "outputs"))
	switch {
	case rec.Run.Trials == 0:
		parts = append(parts, "law of propagation alone")
	case rec.Sequences > 0:
		parts = append(parts, fmt.Sprintf("%s trials in %s, as many as JCGM 101 7.9 asks for", whole(rec.Run.Trials), plural(rec.Sequences, "sequence", "sequences")))
	default:
		parts = append(parts, plural(rec.Run.Trials, "trial", "trials"))
	}
	return strings.Join(parts, " · ")
}

// outputUnit is the unit in which an output is shown: the one that the budget
// states, unless its expanded uncertainty would need a power of ten there.
func outputUnit(o *reduce.BudgetResult) si.Unit {
	u := unitOf(o.Unit)
	if o.StatedUnit != "" {
		u = unitOf(o.StatedUnit)
	}
	if l := o.Law; l != nil {
		du := math.Max(float64(l.U), float64(l.K)*float64(l.U))
		if _, t := si.Round(0, u.DeltaFromSI(du)); strings.ContainsRune(t, 'e') {
			return u.Suited(float64(l.Value), du)
		}
	}
	return u
}

// statedOutput gives the two lines of an output.
func statedOutput(o *reduce.BudgetResult) result {
	u := outputUnit(o)
	r := result{name: o.Name, doc: "= " + o.Formula}
	mc := o.MonteCarlo
	mute := unstated(o.Law)
	if mute != "" && mc == nil {
		r.short = "not stated by the law (" + mute + ")"
		r.expanded = "the value at the estimates is " + minus(si.Short(float64(o.Law.Value), 0, u)) + "; its uncertainty needs Monte Carlo or second-order terms"
		r.expanded = strings.Replace(r.expanded, " (exact)", "", 1)
		return r
	}
	if l := o.Law; l != nil && (l.U > 0 || mc == nil || !(mc.U > 0)) {
		r.short = minus(si.Short(float64(l.Value), float64(l.U), u))
		r.expanded = minus(si.Expanded(float64(l.Value), float64(l.K)*float64(l.U), u, float64(l.K), float64(l.Probability)))
		if mc != nil && mc.Digits > 0 && !mc.Agrees {
			r.expanded += "; not confirmed, Monte Carlo: " + intervalText(mc.Interval, u, mc)
		}
		return r
	}
	if mc == nil {
		r.short = "no result"
		return r
	}
	// No law, or one that finds no uncertainty where there is some.
	r.short = intervalText(mc.Interval, u, mc)
	if finite(mc.Value) && finite(mc.U) {
		r.expanded = "interval by Monte Carlo; mean and standard uncertainty " + minus(si.Short(float64(mc.Value), float64(mc.U), u))
	} else {
		r.expanded = "Monte Carlo interval; there is no finite standard uncertainty"
	}
	if mute != "" {
		r.expanded += "; not stated by the law (" + mute + ")"
	}
	return r
}

// unstated says why a law finds no uncertainty although inputs have some; "" when it
// finds one, or nothing has any.
func unstated(l *reduce.LawRecord) string {
	if l == nil || l.U != 0 {
		return ""
	}
	uncertain, moved := false, false
	for _, b := range l.Budget {
		uncertain = uncertain || b.U > 0
		moved = moved || b.U > 0 && b.Sensitivity != 0
	}
	switch {
	case !uncertain:
		return ""
	case moved:
		return "the contributions cancel to first order"
	}
	return "all first-order sensitivities vanish"
}

// spread is what the digits of an interval's ends follow.
func spread(mc *reduce.MonteCarlo) float64 {
	if finite(mc.U) && mc.U > 0 {
		return float64(mc.U)
	}
	return float64(mc.Interval[1]-mc.Interval[0]) / 4
}

func intervalText(ends [2]reduce.Number, u si.Unit, mc *reduce.MonteCarlo) string {
	s := span(ends[0], ends[1], u, spread(mc))
	if t := unitText(u); t != "" {
		s += nbsp + t
	}
	return s
}

// BudgetTable is the table of an output with the columns of EA-4/02 section 4, by
// parts of the bench, the weightiest first.
func BudgetTable(o *reduce.BudgetResult) *Table {
	l := o.Law
	if l == nil {
		return nil
	}
	mu := outputUnit(o)
	_, cu := si.Prefixed(float64(l.U), deltaUnit(mu))
	row := func(b *reduce.StatedLine) (name, v, du string, unit si.Unit) {
		unit = unitOf(b.StatedUnit)
		v, du = minus(short(unit.FromSI(float64(b.Value)), 12)), "0"
		if b.U > 0 {
			rv, ru := si.Round(unit.FromSI(float64(b.Value)), unit.DeltaFromSI(float64(b.U)))
			v, du = rounded(rv), power(ru)
		}
		return b.Input, v, du, unit
	}
	v, du := si.Round(mu.FromSI(float64(l.Value)), mu.DeltaFromSI(float64(l.U)))
	nu := freedom(l.DOF)
	if l.DOFUnknown {
		nu = "–"
	}
	return budgetTable(l.Budget, mu, cu, figure.OneLine, row, l.U, [3]string{rounded(v), power(du), nu})
}

// deltaUnit is the unit of differences of a unit with an offset.
func deltaUnit(u si.Unit) si.Unit {
	if u.Offset != 0 {
		return u.Dim.Unit()
	}
	return u
}

// propagationTrials sets law and Monte Carlo side by side for every output.
func (d *document) propagationTrials(rec *reduce.PropagationRecord, drawn *reduce.Propagation) {
	d.head("Law and Monte Carlo")
	if rec.Run.Trials == 0 {
		d.say("No trials were made: these results rest on the law of propagation alone.")
		return
	}
	t := &Table{Columns: []Column{{Name: "interval", Most: 34}, {Name: "y", Align: Right}, {Name: "u", Align: Right}, {Name: "from", Align: Right}, {Name: "to", Align: Right},
		{Name: "length", Align: Right}, {Name: "unit", Close: true}}}
	var verdicts []string
	for i := range rec.Outputs {
		o := &rec.Outputs[i]
		mc := o.MonteCarlo
		if mc == nil {
			continue
		}
		u := outputUnit(o)
		t.Sections = append(t.Sections, Section{Before: len(t.Rows), Name: o.Name})
		scale := u.DeltaFromSI(spread(mc)) / 10 // one more digit than the statement has, to compare with
		line := func(name string, y, su reduce.Number, ends [2]reduce.Number) {
			end := func(x reduce.Number) string {
				if !finite(x) {
					return "–"
				}
				v, _ := si.Round(u.FromSI(float64(x)), scale)
				return rounded(v)
			}
			length, _ := si.Round(u.DeltaFromSI(float64(ends[1]-ends[0])), scale)
			us := "–"
			if finite(su) {
				r, _ := si.Round(u.DeltaFromSI(float64(su)), scale)
				us = rounded(r)
			}
			t.Rows = append(t.Rows, []string{name, end(y), us, end(ends[0]), end(ends[1]), rounded(length), unitText(u)})
		}
		if l := o.Law; l != nil {
			line("law", l.Value, l.U, l.Interval)
		}
		line("Monte Carlo, symmetric", mc.Value, mc.U, mc.Interval)
		line("Monte Carlo, shortest", mc.Value, mc.U, mc.Shortest)
		name := ""
		if len(rec.Outputs) > 1 {
			name = o.Name + ": "
		}
		if mc.Digits > 0 {
			_, small := si.Prefixed(float64(mc.Delta), deltaUnit(u))
			verdict := "which confirms the law"
			if !mc.Agrees {
				verdict = "so that the law is NOT confirmed and the Monte Carlo interval should be used"
				if mc.TooFew(float64(o.Law.Probability)) {
					verdict = "so that the law is NOT confirmed, but so few trials can't tell"
				}
			}
			s := fmt.Sprintf("%sthe ends of the law's interval lie %s and %s from those of the symmetric one, where %s is allowed (JCGM 101 clause 8, %s of u), %s.",
				name, quantity(float64(mc.DLow), small, 2), quantity(float64(mc.DHigh), small, 2), quantity(float64(mc.Delta), small, 1),
				plural(mc.Digits, "significant digit", "significant digits"), verdict)
			verdicts = append(verdicts, capital(s, name == ""))
		}
		if mc.Failed > 0 {
			verdicts = append(verdicts, fmt.Sprintf("%s%s had no defined value and are left out.", name, plural(mc.Failed, "trial", "trials")))
		}
	}
	p := reduce.Number(math.NaN())
	for i := range rec.Outputs {
		if l := rec.Outputs[i].Law; l != nil {
			p = l.Probability
		}
	}
	d.show(t)
	if finite(p) {
		d.say("Intervals of " + strings.ReplaceAll(si.Percent(float64(p)), " ", nbsp) + "; the symmetric one leaves as much probability below as above it.")
	}
	for _, v := range verdicts {
		d.say(v)
	}
	if drawn != nil && drawn.Result != nil {
		for i := range rec.Outputs {
			d.picture(figure.Density(drawn, rec.Outputs[i].Name))
		}
	}
}

// capital begins a sentence.
func capital(s string, yes bool) string {
	if !yes || s == "" {
		return s
	}
	return strings.ToUpper(s[:1]) + s[1:]
}

// jointly tells how outputs belong together.
func (d *document) jointly(rec *reduce.PropagationRecord, drawn *reduce.Propagation) {
	n := len(rec.Outputs)
	if n < 2 || len(rec.Correlation) != n {
		return
	}
	d.head("Outputs together")
	names := make([]string, n)
	for i := range names {
		names[i] = rec.Outputs[i].Name
	}
	t := pairwise("output", names, n > widestMatrix+1, func(i, j int) string {
		if r := rec.Correlation[i][j]; finite(r) {
			return minus(fmt.Sprintf("%+.4f", float64(r)))
		}
		return "unknown"
	})
	t.Caption = "Correlation of the outputs"
	d.show(t)
	for i := range n {
		if !finite(rec.Correlation[i][i]) {
			d.say("An unknown correlation is that of trials without a standard deviation; without trials the law's is stated.")
			break
		}
	}
	for _, g := range rec.Regions {
		prob := strings.ReplaceAll(si.Percent(float64(g.Probability)), " ", nbsp)
		switch g.Kind {
		case "ellipse":
			d.say(fmt.Sprintf("Joint region, ellipse: k = %s standard uncertainties about the mean hold all outputs together with %s (JCGM 102 7.7.2).", digits(float64(g.K), 3), prob))
		case "rectangle":
			d.say(fmt.Sprintf("Joint region, rectangle: each output within k = %s of its standard uncertainties holds with %s for all together (JCGM 102 7.7.3).", digits(float64(g.K), 3), prob))
		}
	}
	if drawn != nil && drawn.Result != nil && len(drawn.Result.Points) > 0 {
		d.picture(figure.Joint(drawn))
	}
}

// sources lists where inputs come from.
func (d *document) sources(rec *reduce.PropagationRecord) {
	t := &Table{Columns: []Column{{Name: "input", Most: 24}, {Name: "where it comes from", Most: 70}}}
	seen := map[string]bool{}
	for i := range rec.Outputs {
		if rec.Outputs[i].Law == nil {
			continue
		}
		for _, b := range rec.Outputs[i].Law.Budget {
			if b.Source != "" && !seen[b.Input] {
				seen[b.Input] = true
				t.Rows = append(t.Rows, []string{b.Input, b.Source})
			}
		}
	}
	if len(t.Rows) > 0 {
		d.head("Sources")
		d.show(t)
	}
}
