package report

import (
	"fmt"
	"io"
	"math"
	"sort"
	"strconv"
	"strings"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// FitText writes the report of a formula's fit for a terminal.
func FitText(w io.Writer, f *reduce.FormulaFit) error {
	p := &printer{}
	p.document(buildFit(&f.Record, nil))
	return p.to(w)
}

// FitHTML writes the report of a formula's fit as one self-contained page with its
// figures.
func FitHTML(w io.Writer, f *reduce.FormulaFit) error {
	p := &pager{}
	p.document(buildFit(&f.Record, f))
	return p.to(w)
}

// FitSheet is the report of a formula's fit, for a notebook; with figures or without.
func FitSheet(f *reduce.FormulaFit, figures bool) *Sheet {
	s := &Sheet{}
	if figures {
		s.d = *buildFit(&f.Record, f)
	} else {
		s.d = *buildFit(&f.Record, nil)
	}
	return s
}

// buildFit makes the document; drawn is where figures come from, nil for none.
func buildFit(rec *reduce.FitRecord, drawn *reduce.FormulaFit) *document {
	d := &document{title: rec.Title(), subtitle: fitSubtitle(rec)}
	if rec.Fit.Status != "converged" {
		d.notice([]string{"The fit has not converged (" + rec.Fit.Status + because(rec.Fit.Reason) + "); these numbers are where it stopped."})
	}
	if len(rec.Warnings) > 0 {
		d.head("Warnings")
		d.notice(rec.Warnings)
	}
	d.fitParameters(rec)
	if t := FitCorrelations(rec); t != nil {
		d.head("Correlations of the parameters")
		d.show(t)
	}
	as := rec.Reduction()
	d.fitGoodness(rec)
	if drawn != nil && drawn.Rows.N > 1 {
		d.head("Fit and residuals")
		d.picture(figure.Curve(drawn))
		d.picture(figure.OfFit(drawn).Residuals())
	}
	d.tests(as)
	d.secondOpinion(rec)
	d.fitProvenance(rec.Inputs, rec.Guardring, rec.Run)
	return d
}

// fitGoodness tells how well the formula describes the readings.
func (d *document) fitGoodness(rec *reduce.FitRecord) {
	f := &rec.Fit
	d.head("Goodness of the fit")
	facts := []fact{{"noise of the readings", rec.Noise}}
	if f.ScaledByResiduals {
		facts = append(facts, fact{"chi-squared", plural(f.DOF, "degree of freedom", "degrees of freedom") + "; it can't be tested, since the noise comes from the residuals"},
			fact{"Birge ratio", "not defined without stated noise"})
	} else {
		facts = append(facts, fact{"chi-squared", chiSquared(f)}, fact{"Birge ratio", digits(float64(f.BirgeRatio), 3) + " (nothing has been rescaled by it)"})
	}
	if finite(f.ResidualStandardDeviation) {
		label := "residual standard deviation"
		if rec.Response == "" { // of an equation
			label = "standard deviation of left − right side"
		}
		facts = append(facts, fact{label, one(f.ResidualStandardDeviation, f.ResponseUnit, 3)})
	}
	if finite(f.Condition) && f.Condition > 0 {
		facts = append(facts, fact{"condition number", digits(float64(f.Condition), 2)})
	}
	if finite(rec.AICc) {
		facts = append(facts, fact{"Akaike's criterion", minus(digits(float64(rec.AICc), 5)) + " (corrected for few readings; of formulas for the same readings the smaller is better)"})
	}
	facts = append(facts, fact{"search", f.Status + " after " + plural(f.Iterations, "step", "steps") + because(f.Reason)})
	d.list(facts)
}

func fitSubtitle(rec *reduce.FitRecord) string {
	var parts []string
	for _, in := range rec.Inputs {
		parts = append(parts, in.File)
		if in.Excluded > 0 {
			parts = append(parts, whole(in.Excluded)+" left out")
		}
	}
	method := map[string]string{"least-squares": "least squares", "effective-variance": "least squares with effective variance", "errors-in-variables": "errors in variables"}[rec.Fit.Method]
	parts = append(parts, plural(rec.Fit.Rows, "reading", "readings")+" in the fit", method+", "+rec.Fit.Status)
	return strings.Join(parts, " · ")
}

// FitParameters is the table of a formula's parameters: estimates with their
// uncertainties and starts, what was known before, what held them, and intervals
// where they were asked for.
func FitParameters(rec *reduce.FitRecord) *Table {
	t := &Table{Columns: []Column{{Name: "parameter"}, {Name: "unit"}, {Name: "estimate", Align: Decimal}, {Name: "u", Align: Decimal}, {Name: "start", Align: Decimal}}}
	limit := map[string]*reduce.Limit{}
	for i := range rec.Limits {
		limit[rec.Limits[i].Parameter] = &rec.Limits[i]
	}
	prior, held := false, len(rec.Limits) > 0
	for _, p := range rec.Fit.Parameters {
		prior = prior || p.Prior != nil
	}
	var methods []string
	interval := map[string]*reduce.Interval{}
	for i := range rec.Intervals {
		v := &rec.Intervals[i]
		if k := v.Method; len(methods) == 0 || methods[len(methods)-1] != k {
			methods = append(methods, k)
		}
		interval[v.Method+" "+v.Parameter] = v
	}
	if prior {
		t.Columns = append(t.Columns, Column{Name: "known before", Align: Right})
	}
	if held {
		t.Columns = append(t.Columns, Column{Name: "held", Most: 26})
	}
	for _, m := range methods {
		t.Columns = append(t.Columns, Column{Name: m + " interval", Most: 30})
	}
	row := func(name, symbol string, value, u, start reduce.Number, fixed bool, known *reduce.Prior) {
		v, du, unit := measured(value, u, symbol)
		if !finite(u) {
			_, unit = si.Prefixed(math.Abs(float64(value)), unitOf(symbol))
			v, du = minus(short(unit.FromSI(float64(value)), 6)), "unknown"
		}
		if fixed {
			v, du = minus(short(unit.FromSI(float64(value)), 12)), "fixed"
		}
		cells := []string{name, unitText(unit), v, du, minus(short(unit.FromSI(float64(start)), 6))}
		if prior {
			s := "–"
			if known != nil {
				pv, pu := si.Round(unit.FromSI(float64(known.Value)), unit.DeltaFromSI(float64(known.U)))
				s = rounded(pv) + " ± " + power(pu)
			}
			cells = append(cells, s)
		}
		if held {
			s := ""
			if l := limit[name]; l != nil && !l.Fixed {
				s = span(l.Lower, l.Upper, unit, math.NaN())
				if l.Reached {
					s += ", reached"
				}
			}
			cells = append(cells, s)
		}
		for _, m := range methods {
			s := ""
			if v := interval[m+" "+name]; v != nil {
				s = span(v.Interval[0], v.Interval[1], unit, float64(u))
			}
			cells = append(cells, s)
		}
		t.Rows = append(t.Rows, cells)
	}
	for _, p := range rec.Fit.Parameters {
		row(p.Name, p.Unit, p.Value, p.U, p.Start, false, p.Prior)
	}
	for _, l := range rec.Limits {
		if l.Fixed {
			row(l.Parameter, l.Unit, l.Value, 0, l.Value, true, nil)
		}
	}
	return t
}

// span writes an interval in a unit, to the digits of u when it is known.
func span(lo, hi reduce.Number, unit si.Unit, u float64) string {
	end := func(x reduce.Number) string {
		if math.IsNaN(u) {
			return minus(short(unit.FromSI(float64(x)), 6))
		}
		d := unit.DeltaFromSI(u)
		if d >= 99.5 && d < 1e6 { // 590 is read more easily than 5.9×10²
			return minus(strconv.FormatFloat(unit.FromSI(float64(x)), 'f', 0, 64))
		}
		v, _ := si.Round(unit.FromSI(float64(x)), d)
		return rounded(v)
	}
	if a, b := unit.FromSI(float64(lo)), unit.FromSI(float64(hi)); finite(lo) && finite(hi) && unit.DeltaFromSI(u) < 1e-4 {
		// Both ends with one power of ten.
		k := math.Floor(math.Log10(math.Max(math.Abs(a), math.Abs(b))))
		p := math.Pow(10, -k)
		if k < -3 && !math.IsInf(p, 0) {
			x, _ := si.Round(a*p, unit.DeltaFromSI(u)*p)
			y, _ := si.Round(b*p, unit.DeltaFromSI(u)*p)
			return "(" + rounded(x) + " to " + rounded(y) + ")×10" + super(int(k))
		}
	}
	switch {
	case !finite(lo) && !finite(hi):
		return "open"
	case !finite(lo):
		return "up to " + end(hi)
	case !finite(hi):
		return "from " + end(lo)
	}
	return end(lo) + " to " + end(hi)
}

func (d *document) fitParameters(rec *reduce.FitRecord) {
	d.head("Parameters")
	d.show(FitParameters(rec))
	var why []string
	for _, m := range rec.Missing {
		why = append(why, "The uncertainty of "+m.Parameter+" is unknown: "+strings.TrimSuffix(m.Reason, ".")+".")
	}
	if len(why) > 0 {
		d.notice(why)
	}
	if len(rec.Intervals) > 0 {
		d.say("Intervals hold the parameter with a probability of " + strings.ReplaceAll(si.Percent(float64(rec.Intervals[0].Probability)), " ", nbsp) +
			"; those of the profile of chi-squared and of the bootstrap don't rest on the formula being linear near the estimate.")
	}
	if rec.Fit.ResponseUnit == "" {
		d.say("Not every header states a unit, so that dimensions are not checked: numbers are those of the table, in SI where its header has a unit.")
		return
	}
	for _, p := range rec.Fit.Parameters {
		if p.Unit == "" {
			d.say("A parameter without a unit is in SI: its unit does not follow from the headers.")
			return
		}
	}
}

// FitCorrelations is the table of all correlations of a formula's parameters; nil
// for fewer than two.
func FitCorrelations(rec *reduce.FitRecord) *Table {
	return correlationTable(&rec.Fit, func(name string) string { return name }) // as in the formula
}

func (d *document) secondOpinion(rec *reduce.FitRecord) {
	r := rec.Robust
	if r == nil {
		return
	}
	d.head("Second opinion: robust weights")
	t := &Table{Columns: []Column{{Name: "parameter"}, {Name: "unit"}, {Name: "estimate", Align: Decimal}, {Name: "u", Align: Decimal}, {Name: "shift", Unit: "u of the fit", Align: Decimal}}}
	for i, p := range rec.Fit.Parameters {
		if i >= len(r.Values) {
			break
		}
		v, du, unit := measured(r.Values[i], r.U[i], p.Unit)
		t.Rows = append(t.Rows, []string{p.Name, unitText(unit), v, du, fixed(float64(r.Shift[i]), 2)})
	}
	d.show(t)
	s := fmt.Sprintf("Bisquare weights (Beaton and Tukey 1974), size of the residuals %s times their stated size. ", digits(float64(r.Scale), 2))
	if rec.Fit.ScaledByResiduals {
		s = "Bisquare weights (Beaton and Tukey 1974). "
	}
	switch n := len(r.Outliers); {
	case n == 0:
		s += "No reading lies beyond three times that size."
	default:
		var list []string
		for i, o := range r.Outliers {
			if i == 12 {
				list = append(list, fmt.Sprintf("and %d more", n-i))
				break
			}
			list = append(list, strconv.Itoa(o))
		}
		s += "Beyond three times that size: " + map[bool]string{true: "reading ", false: "readings "}[n == 1] + strings.Join(list, ", ") + ", flagged and not left out."
	}
	if !r.Converged {
		s += " The iteration did not converge."
	}
	d.say(s + " The result above does not rest on this.")
}

// fitProvenance lists the files and how to run it again.
func (d *document) fitProvenance(inputs []reduce.Input, version string, run reduce.RunRecord) {
	d.head("Inputs and run")
	d.show(files(inputs))
	s := "guardring " + version + ", command " + run.Command
	keys := make([]string, 0, len(run.Options))
	for k := range run.Options {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	for _, k := range keys {
		s += " --" + k
		if v := run.Options[k]; v != "" && v != "true" {
			if strings.ContainsAny(v, " ()*/<>|&;$'\"") {
				v = "'" + v + "'"
			}
			s += "=" + v
		}
	}
	s += fmt.Sprintf(", seed %d", run.Seed)
	if run.Trials > 0 {
		s += ", " + plural(run.Trials, "trial", "trials")
	}
	d.say(s + ".")
}
