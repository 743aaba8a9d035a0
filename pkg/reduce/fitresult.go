package reduce

import (
	"context"
	"errors"
	"fmt"
	"math"
	"path"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/lsq"
	"example.org/guardring/pkg/si"
)

// formulaOutcome is what both estimators return.
type formulaOutcome struct {
	status                  lsq.Status
	reason, method          string
	values, u               []float64
	free, atBound           []int
	covariance              func(i, j int) float64
	chi2, p, birge, rss, sd float64
	condition               float64
	dof, iterations         int
	confounded              []*lsq.Remark
	scaled, vanish          bool
	warnings                []error
}

// outcome lays out the result.
func (d *fitData) outcome(o *formulaOutcome, rows *Rows) *FormulaFit {
	f := &FormulaFit{Units: map[string]si.Unit{}, UX: d.ux, Line: d.t.Line}
	excluded := d.left
	f.Record = FitRecord{Format: 1, Guardring: Version, Run: d.run(), Formula: d.prog.Source(), Noise: d.noiseWords(),
		Inputs: []Input{{File: d.recordName(), SHA256: d.t.SHA256, Rows: d.t.N, Excluded: excluded}}, Warnings: []string{}}
	if !d.implicit {
		f.Record.Response = d.response.name
	}
	fit := &f.Record.Fit
	*fit = Fit{Method: o.method, Status: o.status.String(), Reason: o.reason, ChiSquared: Number(o.chi2), DOF: o.dof, PValue: Number(o.p),
		BirgeRatio: Number(o.birge), ResidualSumOfSquares: Number(o.rss), ResidualStandardDeviation: Number(o.sd),
		ResponseUnit: d.symbol(d.response), Condition: Number(o.condition), Iterations: o.iterations, Rows: len(d.y), ScaledByResiduals: o.scaled,
		Parameters: []Parameter{}, Covariance: [][]Number{}}
	if o.scaled {
		fit.PValue = Number(math.NaN())
	}
	for _, j := range o.free {
		p := Parameter{Name: d.params[j], Unit: d.units[j], Value: Number(o.values[j]), U: Number(o.u[j]), UTotal: Number(o.u[j]), Start: Number(d.pars[j].Start)}
		if q := d.pars[j].Prior; q != nil {
			p.Prior = &Prior{Value: Number(q.Value), U: Number(q.U)}
		}
		fit.Parameters = append(fit.Parameters, p)
		row := make([]Number, len(o.free))
		for k, i := range o.free {
			row[k] = Number(o.covariance(j, i))
		}
		fit.Covariance = append(fit.Covariance, row)
		if math.IsNaN(o.u[j]) || math.IsInf(o.u[j], 0) {
			f.Record.Missing = append(f.Record.Missing, Missing{d.params[j], d.why(o, j)})
		}
	}
	d.limits(f, o)
	for _, c := range d.predictors {
		if c.stated {
			f.Units[c.name] = c.unit
		}
	}
	if d.response.stated {
		f.Units[d.response.name] = d.response.unit
	}
	rows.N = len(d.y)
	rows.Record = d.record
	rows.Excluded = make([]bool, rows.N)
	rows.ResponseName = d.response.name
	rows.Response = d.y
	for k, c := range d.predictors {
		rows.PredictorNames = append(rows.PredictorNames, c.name)
		rows.Predictors = append(rows.Predictors, d.x[k])
	}
	f.Rows = *rows
	for _, w := range d.warnings {
		f.warn(w)
	}
	for _, w := range o.warnings {
		if r := (*lsq.Remark)(nil); errors.As(w, &r) {
			w = errors.New(d.remark(r))
		}
		f.warn(w)
	}
	d.curve(f, o)
	return f
}

// remark writes what the estimator says of parameters, with their units.
func (d *fitData) remark(r *lsq.Remark) string {
	return r.In(func(j int) string { return d.params[j] }, func(j int, x float64) string {
		u, err := si.ParseUnit(d.units[j])
		if d.units[j] == "" || err != nil { // not known: SI, as the starts
			return fmt.Sprintf("%.6g", x)
		}
		return amount(x, u)
	})
}

func (f *FormulaFit) warn(w error) {
	if s := strings.TrimPrefix(w.Error(), "lsq: "); !slices.Contains(f.Record.Warnings, s) {
		f.Record.Warnings = append(f.Record.Warnings, s)
	}
}

// symbol is the unit in which the record gives the numbers of a column.
func (d *fitData) symbol(c fitColumn) string {
	if !c.stated {
		return ""
	}
	return siSymbol(c.unit)
}

// why tells why the uncertainty of parameter j is unknown.
func (d *fitData) why(o *formulaOutcome, j int) string {
	switch {
	case slices.Contains(o.atBound, j):
		return "it was held at its bound, where the readings would take it beyond"
	case o.scaled && o.dof <= 0:
		return "the noise is not stated, and with as many parameters as readings none is left over to find it from"
	case o.vanish:
		return "the noise is not stated, and the residuals vanish to rounding, so that they do not tell it"
	case len(o.confounded) > 0:
		for _, c := range o.confounded {
			if slices.Contains(c.Parameters, j) {
				return d.remark(c)
			}
		}
		return d.remark(o.confounded[0])
	}
	return "the fit ended as " + o.status.String() + ": " + strings.TrimSuffix(o.reason, ".")
}

// limits lists what held parameters.
func (d *fitData) limits(f *FormulaFit, o *formulaOutcome) {
	for j, q := range d.pars {
		if !q.Fixed && q.Lower == nil && q.Upper == nil {
			continue
		}
		l := Limit{Parameter: q.Name, Unit: d.units[j], Fixed: q.Fixed, Value: Number(o.values[j]), Lower: Number(math.Inf(-1)), Upper: Number(math.Inf(1)),
			Reached: slices.Contains(o.atBound, j)}
		if q.Lower != nil {
			l.Lower = Number(*q.Lower)
		}
		if q.Upper != nil {
			l.Upper = Number(*q.Upper)
		}
		f.Record.Limits = append(f.Record.Limits, l)
	}
}

// noiseWords says where the uncertainty of the readings comes from.
func (d *fitData) noiseWords() string {
	say := func(n noiseSpec) string {
		if n.column != nil {
			return "column " + n.column.header
		}
		if n.value == 0 {
			return "none, exact"
		}
		return n.text
	}
	var s string
	switch {
	case d.implicit:
	case d.weights != nil:
		s = d.response.name + ": weights from column " + d.weights.header + ", their scale from the residuals"
	case d.noise.given:
		s = d.response.name + ": " + say(d.noise)
	default:
		s = d.response.name + ": unknown and equal for all readings, taken from the residuals"
	}
	for k, c := range d.predictors {
		if n, ok := d.noisy[k]; ok {
			if s != "" {
				s += "; "
			}
			s += c.name + ": " + say(n)
		}
	}
	return s
}

// recordName is the file in the record: its name alone, so that the bytes don't
// depend on where the folder lies.
func (d *fitData) recordName() string {
	return path.Base(filepath.ToSlash(d.t.File))
}

// run records the settings, so that the fit can be done again.
func (d *fitData) run() RunRecord {
	r := RunRecord{Command: d.s.Command, Options: map[string]string{"formula": d.s.Formula}, Seed: d.s.Seed}
	if r.Command == "" {
		r.Command = "fit"
	}
	list := func(key string, item func(name string) (string, bool)) {
		var all []string
		for _, n := range d.params {
			if v, ok := item(n); ok {
				all = append(all, v)
			}
		}
		if len(all) > 0 {
			r.Options[key] = strings.Join(all, ",")
		}
	}
	list("start", func(n string) (string, bool) { v, ok := d.s.Start[n]; return n + "=" + si.Exact(v), ok })
	list("fix", func(n string) (string, bool) { return n, slices.Contains(d.s.Fixed, n) })
	list("bound", func(n string) (string, bool) {
		b, ok := d.s.Bounds[n]
		end := func(x float64) string {
			if math.IsInf(x, 0) {
				return ""
			}
			return si.Exact(x)
		}
		return n + "=" + end(b[0]) + ":" + end(b[1]), ok
	})
	list("prior", func(n string) (string, bool) {
		p, ok := d.s.Priors[n]
		return n + "=" + si.Exact(float64(p.Value)) + "±" + si.Exact(float64(p.U)), ok
	})
	set := func(key, v string) {
		if v != "" {
			r.Options[key] = v
		}
	}
	set("response", d.s.Response)
	set("noise", d.s.Noise)
	var pn []string
	for k, c := range d.predictors {
		if n, ok := d.noisy[k]; ok {
			pn = append(pn, c.name+"="+n.text)
		}
	}
	set("predictor-noise", strings.Join(pn, ","))
	set("weights", d.s.Weights)
	on := func(key string, b bool) {
		if b {
			r.Options[key] = "true"
		}
	}
	on("effective-variance", d.s.EffectiveVariance)
	on("profile", d.s.Profile)
	on("robust", d.s.Robust)
	if d.s.Bootstrap > 0 {
		r.Options["bootstrap"] = strconv.Itoa(d.s.Bootstrap)
	}
	if d.s.Probability != gum.DefaultCoverage {
		r.Options["probability"] = si.Exact(d.s.Probability)
	}
	for key, v := range csvOptions(d.s.CSV) {
		r.Options[key] = v
	}
	return r
}

// test runs the tests of the residuals, in the order of the table.
func (d *fitData) test(f *FormulaFit, e []float64, neighbours func() (lsq.Test, error)) {
	f.Record.Diagnosis.Tests = []Test{}
	for _, v := range e {
		if math.IsNaN(v) {
			return
		}
	}
	add := func(name, doc string, t lsq.Test, err error) {
		if err == nil && !math.IsNaN(t.PValue) {
			f.Record.Diagnosis.Tests = append(f.Record.Diagnosis.Tests, Test{Name: name, Doc: doc, Statistic: Number(t.Statistic), PValue: Number(t.PValue), Passed: t.PValue >= causeLevel})
		}
	}
	// A test that these residuals do not admit, such as for being too few, is left
	// out.
	t, err := lsq.RunsTest(e)
	add("runs", "runs of equal sign in the order of the table", t, err)
	if neighbours != nil {
		t, err = neighbours()
		add("durbin_watson", "correlation of neighbours in that order", t, err)
	}
	t, err = lsq.AndersonDarling(e)
	add("anderson_darling", "normal distribution", t, err)
}

// second adds the opinions that the settings ask for.
func (d *fitData) second(ctx context.Context, f *FormulaFit, r *lsq.Result) error {
	// Readings that share the error of a predictor are no replicates.
	if l, err := r.LackOfFit(d.replicates()); err == nil && len(d.predictors) > 0 && len(d.noisy) == 0 {
		f.Record.LackOfFit = &LackOfFit{F: Number(l.F), ModelDOF: l.ModelDOF, PureDOF: l.PureDOF, PValue: Number(l.PValue)}
		f.Record.Diagnosis.Tests = append(f.Record.Diagnosis.Tests, Test{Name: "lack_of_fit", Doc: "means of replicates about the formula (F)", Statistic: Number(l.F), PValue: Number(l.PValue), Passed: l.PValue >= causeLevel})
	}
	if r.Status == lsq.Singular {
		if d.s.Profile || d.s.Robust || d.s.Bootstrap > 0 {
			f.warn(fmt.Errorf("no profile, robust or bootstrap opinion: the fit is singular"))
		}
		return nil
	}
	if d.s.Profile {
		for _, j := range r.Free {
			p, err := r.Profile(ctx, j, d.s.Probability)
			if err != nil {
				if ctx.Err() != nil {
					return err
				}
				f.warn(fmt.Errorf("no profile interval of %s: %w", d.params[j], d.placed(err)))
				continue
			}
			f.Record.Intervals = append(f.Record.Intervals, Interval{Parameter: d.params[j], Method: "profile", Probability: Number(d.s.Probability),
				Interval: [2]Number{Number(p.Lower), Number(p.Upper)}, U: Number(math.NaN())})
			if p.AtLower || p.AtUpper {
				f.warn(fmt.Errorf("the profile interval of %s ends at a bound", d.params[j]))
			}
		}
	}
	if d.s.Bootstrap > 0 {
		b, err := r.Bootstrap(ctx, lsq.BootstrapSettings{Replicates: d.s.Bootstrap, Seed: d.s.Seed, Coverage: d.s.Probability})
		if err != nil {
			if ctx.Err() != nil {
				return err
			}
			f.warn(fmt.Errorf("no bootstrap: %w", d.placed(err)))
		} else {
			for _, j := range r.Free {
				f.Record.Intervals = append(f.Record.Intervals, Interval{Parameter: d.params[j], Method: "bootstrap", Probability: Number(d.s.Probability),
					Interval: [2]Number{Number(b.Interval[j][0]), Number(b.Interval[j][1])}, U: Number(b.U[j])})
			}
			for _, w := range b.Warnings {
				f.warn(w)
			}
		}
	}
	if d.s.Robust {
		o, err := r.Robust(ctx, lsq.Bisquare)
		if err != nil {
			if ctx.Err() != nil {
				return err
			}
			f.warn(fmt.Errorf("no robust opinion: %w", d.placed(err)))
			return nil
		}
		rec := &Robust{Kind: "bisquare", Scale: Number(o.Scale), Outliers: []int{}, Converged: o.Converged}
		worst, at := 0.0, 0
		for _, j := range r.Free {
			rec.Values, rec.U, rec.Shift = append(rec.Values, Number(o.Values[j])), append(rec.U, Number(o.U[j])), append(rec.Shift, Number(o.Shift[j]))
			if s := math.Abs(o.Shift[j]); s > worst {
				worst, at = s, j
			}
		}
		for _, i := range o.Outliers {
			rec.Outliers = append(rec.Outliers, d.record[i]+1)
		}
		f.Record.Robust = rec
		if worst > 2 {
			f.warn(fmt.Errorf("robust weights move %s by %.1f of its standard uncertainties: some readings pull on the result", d.params[at], worst))
		}
	}
	return nil
}

// replicates numbers the readings by equal predictors.
func (d *fitData) replicates() []int {
	of := map[string]int{}
	out := make([]int, len(d.y))
	var key []byte
	for i := range out {
		key = key[:0]
		for k := range d.x {
			key = strconv.AppendUint(key, math.Float64bits(d.x[k][i]), 16)
			key = append(key, ' ')
		}
		g, ok := of[string(key)]
		if !ok {
			g = len(of)
			of[string(key)] = g
		}
		out[i] = g
	}
	return out
}

// finish adds what the residuals say.
func (d *fitData) finish(f *FormulaFit) *FormulaFit {
	named := f.Record.Reduction()
	named.Diagnosis.Tests = slices.Clone(named.Diagnosis.Tests)
	for i := range named.Diagnosis.Tests {
		t := &named.Diagnosis.Tests[i]
		if n, ok := map[string]string{"durbin_watson": "Durbin and Watson", "anderson_darling": "Anderson and Darling", "lack_of_fit": "lack of fit against replicates"}[t.Name]; ok {
			t.Name = n
		}
	}
	for _, w := range judge(named) {
		f.warn(w)
	}
	for _, w := range flagged(f.Rows.Studentised, nil, func(i int) string {
		return fmt.Sprintf("reading %d (line %d)", d.record[i]+1, d.t.Line(d.record[i]))
	}) {
		f.warn(w)
	}
	if d.s.Rows {
		f.Record.Rows = d.recordRows(f)
	}
	return f
}

// recordRows lists the rows for the record.
func (d *fitData) recordRows(f *FormulaFit) []RecordRow {
	out := make([]RecordRow, f.Rows.N)
	for i := range out {
		row := RecordRow{Row: d.record[i] + 1, File: d.recordName(), Line: d.t.Line(d.record[i]), Kind: "reading", Channels: map[string]Number{},
			Response: Number(f.Rows.Response[i]), Fitted: Number(f.Rows.Fitted[i]), U: Number(f.Rows.U[i]), Residual: Number(f.Rows.Residual[i]),
			Standardised: Number(f.Rows.Standardised[i]), Leverage: Number(f.Rows.Leverage[i]), Studentised: Number(f.Rows.Studentised[i])}
		for k, name := range f.Rows.PredictorNames {
			row.Channels[name] = Number(f.Rows.Predictors[k][i])
		}
		out[i] = row
	}
	return out
}

// curvePoints is how finely the fitted curve is drawn.
const curvePoints = 400

// curve evaluates the fitted formula between the readings of its only predictor.
func (d *fitData) curve(f *FormulaFit, o *formulaOutcome) {
	if len(d.predictors) != 1 {
		return
	}
	lo, hi := slices.Min(d.x[0]), slices.Max(d.x[0])
	if !(hi > lo) {
		return
	}
	c := &Curve{X: make([]float64, curvePoints+1), F: make([]float64, curvePoints+1), U: make([]float64, curvePoints+1)}
	ratio := hi / lo
	for i := range c.X {
		t := float64(i) / curvePoints
		c.X[i] = lo + (hi-lo)*t
		if lo > 0 && ratio > 30 { // even steps on the logarithmic axis such data are shown on
			c.X[i] = lo * math.Pow(ratio, t)
		}
	}
	c.X[curvePoints] = hi
	cols := append([][]float64(nil), d.cols...)
	cols[d.varOfPred[0]] = c.X
	var wrt []int
	for _, j := range o.free {
		wrt = append(wrt, d.varOfParam[j])
	}
	for j, v := range o.values {
		d.theta[j][0] = v
	}
	grad := grid(len(wrt), len(c.X))
	d.prog.Workspace().BlockGradient(cols, wrt, c.F, grad)
	for i := range c.U {
		v := 0.0
		for a := range wrt {
			for b := range wrt {
				v += grad[a][i] * o.covariance(o.free[a], o.free[b]) * grad[b][i]
			}
		}
		c.U[i] = math.Sqrt(v)
	}
	f.Curve = c
}
