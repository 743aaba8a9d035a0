package report

import (
	"fmt"
	"math"
	"sort"
	"strconv"
	"strings"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// build makes the document of a record. figures may be nil.
func build(rec *reduce.Record, figures *figure.Data) *document {
	d := &document{title: rec.Title}
	if figure.OneLine(rec.Title) == "" {
		d.title = "Reduction of a bench of kind " + rec.Model
	}
	d.subtitle = subtitle(rec)
	if c := cautions(&rec.Hazard); c != nil {
		d.blocks = append(d.blocks, block{caution: c})
	}
	d.results(rec)
	if len(rec.Warnings) > 0 {
		d.head("Warnings")
		d.notice(rec.Warnings)
	}
	d.series(rec, figures)
	d.parameters(rec)
	d.correlations(rec)
	d.goodness(rec)
	if figures != nil && figures.Rows != nil && figures.Rows.N > 0 {
		d.head("Fit and residuals")
		d.picture(figures.Fit())
		d.picture(figures.Residuals())
	}
	d.tests(rec)
	d.causes(rec)
	d.corrections(rec)
	d.budgets(rec)
	d.monteCarlo(rec)
	if figures != nil {
		for i := range rec.Measurands {
			if i < len(figures.Trials) && i < 1 && rec.Measurands[i].MonteCarlo != nil {
				d.picture(figures.Histogram(rec.Measurands[i].Name))
			}
		}
	}
	d.exclusions(rec)
	d.provenance(rec)
	return d
}

// picture adds a figure, or the sentence that says why there is none.
func (d *document) picture(f *figure.Figure, err error) {
	if err != nil {
		d.say("No figure here: " + strings.TrimPrefix(err.Error(), "figure: ") + ".")
		return
	}
	d.draw(f)
}

func subtitle(rec *reduce.Record) string {
	var parts []string
	if rec.Model != "" {
		parts = append(parts, words(rec.Model))
	}
	parts = append(parts, plural(rec.Fit.Rows, "reading", "readings")+" in the fit")
	if n := len(rec.Exclusions); n > 0 {
		parts = append(parts, whole(n)+" left out")
	}
	method := strings.ReplaceAll(rec.Fit.Method, "-", " ")
	if method == "" {
		method = "fit"
	}
	parts = append(parts, method+" "+rec.Fit.Status)
	return strings.Join(parts, " · ")
}

// nearBreakdown is the part of the breakdown field from which a report says so.
const nearBreakdown = 0.8

// cautions are the usual ones of high-voltage work (common practice, no source),
// with what this bench stores and where that exceeds the laboratory's limits;
// nil when the bench holds no voltage.
func cautions(h *reduce.Hazard) *caution {
	v := float64(h.Voltage)
	if !(v > 0) {
		return nil
	}
	c := &caution{}
	var b strings.Builder
	b.WriteString("High voltage. Barrier or interlock, current limit and bleed resistor; discharge rod, then earth, before touching; " +
		"two persons; what has been charged can recharge by absorption. ")
	fmt.Fprintf(&b, "At %s this bench stores %s", one(h.Voltage, "V", 3), one(h.Energy, "J", 2))
	limit := func(l reduce.Number, unit string) {
		if l > 0 {
			fmt.Fprintf(&b, " (limit %s)", one(l, unit, 2))
		}
	}
	limit(h.EnergyLimit, "J")
	if h.Charge > 0 {
		fmt.Fprintf(&b, " and holds %s", one(h.Charge, "C", 2))
		limit(h.ChargeLimit, "C")
	}
	if h.Field > 0 {
		fmt.Fprintf(&b, "; the field at an electrode reaches %s", one(h.Field, "V/m", 2))
		if h.Breakdown > 0 {
			fmt.Fprintf(&b, ", %s\u00a0%% of the breakdown expected there", digits(100*float64(h.Field/h.Breakdown), 2))
		}
	}
	b.WriteString(". The limits are the laboratory's entry: local codes and licensed practice prevail.")
	c.text = b.String()
	if h.EnergyLimit > 0 && h.Energy > h.EnergyLimit {
		c.above = append(c.above, fmt.Sprintf("The stored energy, %s, exceeds the limit of %s.", one(h.Energy, "J", 2), one(h.EnergyLimit, "J", 2)))
	}
	if h.ChargeLimit > 0 && h.Charge > h.ChargeLimit {
		c.above = append(c.above, fmt.Sprintf("The charge, %s, exceeds the limit of %s.", one(h.Charge, "C", 2), one(h.ChargeLimit, "C", 2)))
	}
	if h.Breakdown > 0 && float64(h.Field) >= nearBreakdown*float64(h.Breakdown) {
		c.above = append(c.above, fmt.Sprintf("The field, %s, is near the breakdown of the gas, about %s.", one(h.Field, "V/m", 2), one(h.Breakdown, "V/m", 2)))
	}
	return c
}

// stated gives the two lines of a measurand.
func stated(m *reduce.Measurand) result {
	du := shown(m)
	r := result{name: words(m.Name), doc: m.Doc}
	r.short = minus(si.Short(float64(m.Value), float64(m.U), du))
	r.expanded = minus(si.Expanded(float64(m.Value), float64(m.K)*float64(m.U), du, float64(m.K), float64(m.Probability)))
	return r
}

func (d *document) results(rec *reduce.Record) {
	d.head("Result")
	if len(rec.Measurands) == 0 {
		d.say("No measurand is stated: the fit ended as " + rec.Fit.Status + because(rec.Fit.Reason) + ".")
		return
	}
	var rs []result
	for i := range rec.Measurands {
		rs = append(rs, stated(&rec.Measurands[i]))
	}
	d.blocks = append(d.blocks, block{results: rs})
	if rec.Fit.Status != "converged" {
		d.notice([]string{"The fit has not converged (" + rec.Fit.Status + because(rec.Fit.Reason) + "); these numbers are where it stopped."})
	}
}

func because(reason string) string {
	if reason == "" {
		return ""
	}
	return ": " + strings.TrimSuffix(reason, ".")
}

// Parameters is the table of the estimates with their uncertainties, starts and
// what was known before; nil when nothing was estimated.
func Parameters(rec *reduce.Record) *Table {
	if len(rec.Fit.Parameters) == 0 {
		return nil
	}
	t := &Table{Columns: []Column{{Name: "parameter"}, {Name: "unit"}, {Name: "estimate", Align: Decimal}, {Name: "u of the fit", Align: Decimal},
		{Name: "u in all", Align: Decimal}, {Name: "start", Align: Decimal}, {Name: "known before", Align: Right}}}
	total := false
	for i := range rec.Fit.Parameters {
		p := &rec.Fit.Parameters[i]
		u := p.U
		if finite(p.UTotal) && p.UTotal > u || !finite(u) {
			u = p.UTotal
		}
		v, _, unit := measured(p.Value, u, p.Unit)
		total = total || finite(p.UTotal)
		prior := "–"
		if p.Prior != nil {
			// One unit for both, where the estimate stays a plain decimal in it.
			both := unitOf(p.Unit).Suited(float64(p.Value), math.Max(float64(u), float64(p.Prior.U)))
			if bv, bu := si.Round(both.FromSI(float64(p.Value)), both.DeltaFromSI(float64(u))); !strings.ContainsRune(bv+bu, 'e') && finite(u) {
				v, unit = minus(bv), both
			}
			pv, pu := si.Round(unit.FromSI(float64(p.Prior.Value)), unit.DeltaFromSI(float64(p.Prior.U)))
			prior = rounded(pv) + " ± " + power(pu)
		}
		t.Rows = append(t.Rows, []string{words(p.Name), unitText(unit), v, uncertain(p.U, unit), uncertain(p.UTotal, unit),
			minus(short(unit.FromSI(float64(p.Start)), 5)), prior})
	}
	if !total {
		for i := range t.Rows {
			t.Rows[i] = append(t.Rows[i][:4], t.Rows[i][5:]...)
		}
		t.Columns = append(t.Columns[:4], t.Columns[5:]...)
	}
	return t
}

func (d *document) parameters(rec *reduce.Record) {
	t := Parameters(rec)
	if t == nil {
		return
	}
	missing, total := false, false
	for i := range rec.Fit.Parameters {
		missing = missing || !finite(rec.Fit.Parameters[i].U)
		total = total || finite(rec.Fit.Parameters[i].UTotal)
	}
	d.head("Parameters")
	d.show(t)
	switch {
	case missing:
		d.say("An uncertainty is unknown where the readings do not determine the parameter" + because(rec.Fit.Reason) + "; the warnings say which.")
	case total:
		d.say("u of the fit comes from the readings and from what was known before; u in all carries the inputs that every reading shares.")
	}
}

// uncertain writes an uncertainty, SI, with two digits in a display unit.
func uncertain(u reduce.Number, unit si.Unit) string {
	if !finite(u) {
		return "unknown"
	}
	if u == 0 {
		return "0"
	}
	_, du := si.Round(0, unit.DeltaFromSI(float64(u)))
	return power(du)
}

func finite(n reduce.Number) bool { return !math.IsNaN(float64(n)) && !math.IsInf(float64(n), 0) }

// widestMatrix is the number of parameters up to which correlations are a
// triangle; more become a list of pairs.
const widestMatrix = 10

func (d *document) correlations(rec *reduce.Record) {
	if t := Correlations(rec); t != nil {
		d.head("Correlations of the parameters")
		d.show(t)
	}
}

// Correlations is the table of all correlations of the parameters, statistical
// part: a triangle, or a list of pairs when there are many; nil for fewer than
// two parameters.
func Correlations(rec *reduce.Record) *Table { return correlationTable(&rec.Fit, words) }

// correlationTable is the table of correlations with the parameters named by name.
func correlationTable(fit *reduce.Fit, name func(key string) string) *Table {
	ps, cov := fit.Parameters, fit.Covariance
	if len(ps) < 2 || len(cov) != len(ps) {
		return nil
	}
	r := func(i, j int) string {
		if len(cov[i]) != len(ps) || len(cov[j]) != len(ps) {
			return "unknown"
		}
		v := float64(cov[i][j]) / (math.Sqrt(float64(cov[i][i])) * math.Sqrt(float64(cov[j][j])))
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return "unknown"
		}
		return minus(fmt.Sprintf("%+.3f", v))
	}
	names := make([]string, len(ps))
	for i := range ps {
		names[i] = name(ps[i].Name)
	}
	return pairwise("parameter", names, len(ps) > widestMatrix, r)
}

// pairwise is a table of what r says of every two of the things named: a triangle, or
// a list of pairs. kind heads the names of the triangle.
func pairwise(kind string, names []string, list bool, r func(i, j int) string) *Table {
	if list {
		t := &Table{Columns: []Column{{Name: "between"}, {Name: "and"}, {Name: "r", Align: Right}}}
		for i := range names {
			for j := range i {
				t.Rows = append(t.Rows, []string{names[j], names[i], r(i, j)})
			}
		}
		return t
	}
	t := &Table{Columns: []Column{{Name: ""}, {Name: kind, Most: 30}}}
	for i := range names[:len(names)-1] {
		t.Columns = append(t.Columns, Column{Name: strconv.Itoa(i + 1), Align: Right})
	}
	for i, name := range names {
		row := []string{strconv.Itoa(i + 1), name}
		for j := range i {
			row = append(row, r(i, j))
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

func (d *document) goodness(rec *reduce.Record) {
	f := &rec.Fit
	d.head("Goodness of the fit")
	var facts []fact
	facts = append(facts, fact{"chi-squared", chiSquared(f)})
	birge := digits(float64(f.BirgeRatio), 3)
	if !f.ScaledByResiduals {
		birge += " (nothing has been rescaled by it)"
	}
	facts = append(facts, fact{"Birge ratio", birge})
	if finite(f.ResidualStandardDeviation) {
		facts = append(facts, fact{"residual standard deviation", one(f.ResidualStandardDeviation, f.ResponseUnit, 3)})
	}
	if finite(f.Condition) && f.Condition > 0 {
		facts = append(facts, fact{"condition number", digits(float64(f.Condition), 2)})
	}
	end := f.Status + " after " + plural(f.Iterations, "step", "steps") + because(f.Reason)
	facts = append(facts, fact{"search", end})
	d.list(facts)
	if f.ScaledByResiduals {
		d.say("The noise of the readings was not stated. It was taken from the scatter about the fit, so that chi-squared can't test it: " +
			"one component of type A with the degrees of freedom above.")
	}
}

func (d *document) tests(rec *reduce.Record) {
	if t := Tests(rec); t != nil {
		d.head("Residuals")
		d.show(t)
	}
}

// Tests is the table of the tests of the residuals with their verdicts at 1 %;
// nil when none was made.
func Tests(rec *reduce.Record) *Table {
	if len(rec.Diagnosis.Tests) == 0 {
		return nil
	}
	t := &Table{Columns: []Column{{Name: "test of the residuals", Most: 22}, {Name: "looks at", Most: 44}, {Name: "statistic", Align: Decimal},
		{Name: "p", Align: Decimal}, {Name: "at 1 %"}}}
	for _, x := range rec.Diagnosis.Tests {
		verdict := "holds"
		switch {
		case !finite(x.PValue):
			verdict = "–"
		case !x.Passed:
			verdict = "FAILS"
		}
		t.Rows = append(t.Rows, []string{testName(x.Name), x.Doc, statistic(x.Name, x.Statistic), probability(x.PValue), verdict})
	}
	return t
}

// statistic writes the statistic of a test with three digits; runs are counted.
func statistic(test string, x reduce.Number) string {
	if n := float64(x); test == "runs" && n == math.Trunc(n) && math.Abs(n) < 1e9 {
		return whole(int(n))
	}
	return minus(digits(float64(x), 3))
}

// testName gives a test the name that people know.
func testName(key string) string {
	switch key {
	case "chi_squared":
		return "chi-squared"
	case "durbin_watson":
		return "Durbin–Watson"
	case "anderson_darling":
		return "Anderson–Darling"
	}
	return words(key)
}

func (d *document) causes(rec *reduce.Record) {
	if len(rec.Diagnosis.Causes) == 0 {
		return
	}
	d.head("What the residuals point at")
	var lines []string
	for _, c := range rec.Diagnosis.Causes {
		s := fmt.Sprintf("%s (%s): one parameter for it would lower chi-squared by %s (p = %s)", words(c.Name), figure.OneLine(c.Doc),
			digits(float64(c.Improvement), 2), probability(c.PValue))
		s = strings.ReplaceAll(s, "p = <", "p <")
		if len(rec.Measurands) > 0 && finite(c.Shift) {
			m := &rec.Measurands[0]
			du := shown(m)
			shift := minus(digits(du.DeltaFromSI(float64(c.Shift)), 2))
			if x := unitText(du); x != "" {
				shift += nbsp + x
			}
			s += fmt.Sprintf(" and move %s by %s", words(m.Name), shift)
			if m.U > 0 {
				s += fmt.Sprintf(" (%s%su)", minus(digits(float64(c.Shift/m.U), 2)), nbsp)
			}
		}
		lines = append(lines, s+". It has not been applied.")
	}
	d.notice(lines)
}

func (d *document) corrections(rec *reduce.Record) {
	t := Corrections(rec)
	if t == nil {
		return
	}
	d.head("Corrections")
	d.show(t)
	for _, c := range rec.Corrections {
		if c.Used && (c.Unit == "1" || c.Unit == "") {
			d.say("Sizes are means over the readings in use; those in % and ppm are relative to the response.")
			return
		}
	}
}

// Corrections is the table of every correction of the bench with its mean size
// and what remains uncertain of it; nil when the bench has none.
func Corrections(rec *reduce.Record) *Table {
	if len(rec.Corrections) == 0 {
		return nil
	}
	t := &Table{Columns: []Column{{Name: "correction", Most: 20}, {Name: "what it is", Most: 46}, {Name: "size", Align: Decimal},
		{Name: "u", Align: Decimal}, {Name: "unit"}}}
	for _, c := range rec.Corrections {
		if !c.Used {
			t.Rows = append(t.Rows, []string{words(c.Name), c.Doc, "off", "", ""})
			continue
		}
		size, u, unit := float64(c.Size), float64(c.U), c.Unit
		if unit == "1" || unit == "" {
			f, name := 1e6, "ppm"
			if math.Max(math.Abs(size), u) >= 1e-4 {
				f, name = 100, "%"
			}
			var v, du string
			if u > 0 {
				v, du = si.Round(f*size, f*u)
			} else {
				v, du = short(f*size, 3), short(f*u, 2)
			}
			t.Rows = append(t.Rows, []string{words(c.Name), c.Doc, rounded(v), power(du), name})
			continue
		}
		v, du, shown := measured(c.Size, c.U, unit)
		t.Rows = append(t.Rows, []string{words(c.Name), c.Doc, v, du, unitText(shown)})
	}
	return t
}

func (d *document) monteCarlo(rec *reduce.Record) {
	var lines []string
	for i := range rec.Measurands {
		m := &rec.Measurands[i]
		mc := m.MonteCarlo
		if mc == nil {
			continue
		}
		du := shown(m)
		unit := ""
		if x := unitText(du); x != "" {
			unit = nbsp + x
		}
		v, u := si.Round(du.FromSI(float64(mc.Value)), du.DeltaFromSI(float64(mc.U)))
		lo, _ := si.Round(du.FromSI(float64(mc.Interval[0])), du.DeltaFromSI(float64(mc.U)))
		hi, _ := si.Round(du.FromSI(float64(mc.Interval[1])), du.DeltaFromSI(float64(mc.U)))
		end := func(x reduce.Number) string { return digits(du.DeltaFromSI(float64(x)), 2) }
		verdict := "which confirms the law"
		if !mc.Agrees {
			verdict = "so that the law is NOT confirmed and the Monte Carlo interval should be used"
			if mc.TooFew(float64(m.Probability)) {
				verdict = "so that the law is NOT confirmed, but so few trials can't tell"
			}
		}
		s := fmt.Sprintf("%s: %s trials of the whole chain give %s with u = %s%s and a %s interval from %s to %s%s; "+
			"its ends lie %s and %s%s from those of the law, where %s is allowed (JCGM 101 clause 8, %s of u), %s.",
			words(m.Name), whole(mc.Trials), minus(power(v)), power(u), unit, strings.ReplaceAll(si.Percent(float64(m.Probability)), " ", nbsp),
			minus(power(lo)), minus(power(hi)), unit, end(mc.DLow), end(mc.DHigh), unit, end(mc.Delta),
			plural(mc.Digits, "significant digit", "significant digits"), verdict)
		if mc.Failed > 0 {
			s += fmt.Sprintf(" %s did not converge and are left out.", plural(mc.Failed, "trial", "trials"))
		}
		lines = append(lines, s)
	}
	if len(rec.Measurands) == 0 {
		return
	}
	d.head("Monte Carlo check")
	if len(lines) == 0 {
		d.say("Not made: this reduction rests on the law of propagation alone.")
		return
	}
	for _, s := range lines {
		d.say(s)
	}
}

func (d *document) exclusions(rec *reduce.Record) {
	if len(rec.Exclusions) == 0 {
		return
	}
	t := &Table{Columns: []Column{{Name: "reading", Align: Right}, {Name: "file", Most: 30}, {Name: "line", Align: Right}, {Name: "why it was left out", Most: 50}}}
	const most = 40
	for i, e := range rec.Exclusions {
		if i == most && len(rec.Exclusions) > most+1 {
			break
		}
		why := e.Reason
		if figure.OneLine(why) == "" {
			why = "no reason stated"
		}
		t.Rows = append(t.Rows, []string{strconv.Itoa(e.Row), e.File, strconv.Itoa(e.Line), why})
	}
	d.head("Left out")
	d.show(t)
	if n := len(rec.Exclusions) - len(t.Rows); n > 0 {
		d.say(fmt.Sprintf("%s further readings were left out; the record lists them all.", whole(n)))
	}
}

func (d *document) provenance(rec *reduce.Record) {
	d.head("Inputs and run")
	if len(rec.Inputs) > 0 {
		d.show(files(rec.Inputs))
	}
	run := "guardring " + rec.Guardring + ", command " + rec.Run.Command
	var keys []string
	for k := range rec.Run.Options {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	for _, k := range keys {
		run += " --" + k
		if v := rec.Run.Options[k]; v != "" {
			run += "=" + v
		}
	}
	run += fmt.Sprintf(", seed %d", rec.Run.Seed)
	if rec.Run.Trials > 0 {
		run += ", " + plural(rec.Run.Trials, "trial", "trials")
	} else {
		run += ", law only"
	}
	d.say(run + ".")
}

// files is the table of the files that a result depends on.
func files(inputs []reduce.Input) *Table {
	t := &Table{Columns: []Column{{Name: "file", Most: 24}, {Name: "rows", Align: Right}, {Name: "SHA-256", Most: 64}}}
	for _, in := range inputs {
		rows := ""
		if in.Rows > 0 {
			rows = strconv.Itoa(in.Rows)
		}
		t.Rows = append(t.Rows, []string{in.File, rows, in.SHA256})
	}
	return t
}

// chiSquared says chi-squared with its degrees of freedom and its probability.
func chiSquared(f *reduce.Fit) string {
	s := fmt.Sprintf("%s with %s", digits(float64(f.ChiSquared), 4), plural(f.DOF, "degree of freedom", "degrees of freedom"))
	if finite(f.PValue) {
		s += ", p " + equals(float64(f.PValue))
	}
	return s
}
