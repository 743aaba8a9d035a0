package reduce

import (
	"context"
	"fmt"
	"math"
	"strconv"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/lsq"
)

// Version is the version that records state; the command sets it from its build.
var Version = "0.1.0"

// DefaultTrials is the number of Monte Carlo trials when Settings do not say.
const DefaultTrials = 10000

// Settings say how to reduce. The zero Settings are the defaults.
type Settings struct {
	Seed        uint64  // of the random streams; 0 is a seed
	Trials      int     // Monte Carlo trials; 0: DefaultTrials
	LawOnly     bool    // no Monte Carlo check
	Probability float64 // coverage probability; 0: what the bench says, else 0.9545
	Digits      int     // significant digits of u for the comparison of JCGM 101 clause 8; 0: 1
	Rows        bool    // put the rows into the record
	Command     string  // what the record calls the run; "": "reduce"
}

// Result is a reduction: its record, the rows behind the figures, and the trials.
type Result struct {
	Record Record
	Rows   Rows
	Bench  *bench.Bench
	// Trials holds the Monte Carlo values, SI, [measurand][trial]; nil when law
	// only.
	Trials [][]float64
	// Settings are those of the run.
	Settings Settings

	words func(error) string // puts a warning into words; nil: as it stands
}

// Run reduces a bench. A fit that is singular or has not converged is no error:
// the result says so in Record.Fit.Status and its warnings. Errors are about the
// bench (a model that does not apply, too few rows), name the file, and say what
// would be right; a cancelled context ends the run within some 50 ms.
func Run(ctx context.Context, b *bench.Bench, s Settings) (*Result, error) {
	if s.Trials == 0 {
		s.Trials = DefaultTrials
	}
	if s.Trials < 0 {
		return nil, fmt.Errorf("trials: %d is below zero; use LawOnly for no trials", s.Trials)
	}
	if s.Digits == 0 {
		s.Digits = 1
	}
	if s.Command == "" {
		s.Command = "reduce"
	}
	p := s.Probability
	if p == 0 {
		p = b.Coverage
	}
	if p == 0 {
		p = gum.DefaultCoverage
	}
	if err := gum.CheckCoverage(p); err != nil {
		return nil, err
	}
	switch b.Method {
	case "", leastSquares, errorsInVariables:
	default:
		return nil, fmt.Errorf("%s/bench.toml: method: %q is not known; use %q or %q", b.Dir, b.Method, leastSquares, errorsInVariables)
	}
	c, err := newChain(b)
	if err != nil {
		return nil, err
	}
	estimate := c.estimate
	if b.Method == errorsInVariables {
		estimate = c.estimateInVariables
	}
	fit, err := estimate(ctx)
	if err != nil {
		return nil, c.placed(err)
	}
	res := &Result{Bench: b, Settings: s, words: c.words}
	res.Record = c.header(s)
	res.Record.Fit = c.fitRecord(fit)
	res.warn(b.Warnings...)
	res.warn(c.warnings...)
	res.warn(fit.Warnings...)
	c.rows(fit, &res.Rows)
	res.Record.Diagnosis.Tests = c.tests(fit)
	switch fit.Status {
	case lsq.Converged:
	case lsq.Singular:
		res.warn(fmt.Errorf("no measurand is stated: the fit is singular"))
		return res.finish(s), nil
	default: // where a search stopped is no estimate, and its covariance no uncertainty
		res.warn(fmt.Errorf("no measurand is stated: the fit has not converged (%s: %s)", fit.Status, fit.Reason))
		return res.finish(s), nil
	}
	c.fitU = fit.U
	k, err := c.carry(fit)
	if err != nil {
		res.warn(fmt.Errorf("no measurand is stated: %w", err))
		return res.finish(s), nil
	}
	ms, laws, warnings, err := c.measurands(k, p)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", b.Dir, err)
	}
	res.Record.Measurands = ms
	res.warn(warnings...)
	for j := range c.free {
		e := make([]float64, len(c.free))
		e[j] = 1
		l, err := c.law(k, k.theta[j], e, make([]float64, len(c.inputs)), p)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", b.Dir, err)
		}
		res.Record.Fit.Parameters[j].UTotal = Number(l.U)
	}
	if res.Record.Corrections, err = c.corrections(k); err != nil {
		return nil, err
	}
	res.Record.Hazard = c.hazard(k)
	if res.Record.Series, err = c.seriesRecords(fit, k, p); err != nil {
		return nil, err
	}
	k.weighed, k.slope = nil, nil // the laws are stated
	res.Record.Diagnosis.Causes = c.causes(fit, k)
	res.warn(flagged(res.Rows.Studentised, res.Rows.Excluded, func(i int) string {
		return fmt.Sprintf("reading %d (%s)", res.Rows.Record[i]+1, c.place(res.Rows.Record[i]))
	})...)
	res.warn(judge(&res.Record)...)
	res.warn(notAir(res.Record.Measurands)...)
	if !s.LawOnly {
		if err := c.check(ctx, fit, k, laws, s, p, res); err != nil {
			return nil, err
		}
	}
	return res.finish(s), nil
}

// judge turns what the residuals say into warnings, one sentence each.
func judge(r *Record) []error {
	var w []error
	for i := range r.Measurands {
		m := &r.Measurands[i]
		switch u := float64(m.U); {
		case math.IsNaN(u) || math.IsInf(u, 0):
			w = append(w, fmt.Errorf("no uncertainty of %s can be stated: what bench.toml states for an input, or a reading, is too large or too small to compute with", m.Name))
		case u == 0:
			w = append(w, fmt.Errorf("the uncertainty of %s is zero: nothing that enters it has one; state what is known of the instruments", m.Name))
		}
	}
	for _, p := range r.Fit.Parameters {
		if u := float64(p.U); u == 0 || math.IsNaN(u) || math.IsInf(u, 0) {
			w = append(w, fmt.Errorf("the uncertainty of %s from the fit is unknown or vanishes: the readings and what is stated of them do not bear it out", p.Name))
		}
	}
	switch p := float64(r.Fit.PValue); {
	case p < 0.001:
		w = append(w, fmt.Errorf("the residuals are larger than the stated noise allows (chi-squared probability %s): an effect is missing from the model, or the noise is understated; the uncertainty does not cover it", small(p)))
	case p > 0.999:
		w = append(w, fmt.Errorf("the residuals are smaller than the stated noise makes likely (chi-squared probability above %.6g): the noise may be overstated", min(math.Floor(p*1e4), 9999)/1e4))
	}
	for _, t := range r.Diagnosis.Tests {
		if !t.Passed {
			w = append(w, fmt.Errorf("the residuals fail the test of %s (p %s)", t.Name, equals(float64(t.PValue))))
		}
	}
	for _, s := range r.Series {
		for _, e := range s.Effects {
			if !e.Passed {
				w = append(w, fmt.Errorf("%s: %s of %.2g %% with u = %.1g %% (p %s)", SeriesName(s.Result, s.Name), e.Name, 100*float64(e.Estimate), 100*float64(e.U), equals(float64(e.PValue))))
			}
		}
	}
	if len(r.Diagnosis.Causes) > 0 {
		c := r.Diagnosis.Causes[0]
		w = append(w, fmt.Errorf("the residuals carry the signature of %s (%s; p %s); it has not been applied", c.Name, c.Doc, equals(float64(c.PValue))))
	}
	return w
}

// check runs the Monte Carlo trials and compares them with the law.
func (c *chain) check(ctx context.Context, fit *lsq.Result, k *carried, laws []*gum.Law, s Settings, p float64, res *Result) error {
	trials, failed, err := c.trials(ctx, fit, k, s.Seed, s.Trials)
	if err != nil {
		return fmt.Errorf("%s: %w", c.b.Dir, err)
	}
	if failed > 0 {
		res.warn(fmt.Errorf("%d of %d trials did not converge and are left out", failed, s.Trials))
	}
	if failed*100 > s.Trials {
		return fmt.Errorf("%s: %d of %d trials did not converge: the readings hardly determine the parameters; fix some or take more readings", c.b.Dir, failed, s.Trials)
	}
	res.Trials = trials
	for m := range trials {
		y := trials[m]
		if failed > 0 {
			y = defined(y)
		}
		sum, err := gum.Summarise(y, p)
		if err != nil {
			return fmt.Errorf("%s: Monte Carlo: %w", c.b.Dir, err)
		}
		cmp := gum.Compare(laws[m], sum, s.Digits)
		res.Record.Measurands[m].MonteCarlo = &MonteCarlo{Trials: s.Trials, Failed: failed, Value: Number(sum.Value), U: Number(sum.U),
			Interval: [2]Number{Number(sum.Interval[0]), Number(sum.Interval[1])},
			Shortest: [2]Number{Number(sum.Shortest[0]), Number(sum.Shortest[1])},
			Digits:   cmp.Digits, Delta: Number(cmp.Delta), DLow: Number(cmp.DLow), DHigh: Number(cmp.DHigh), Agrees: cmp.Agrees}
		if m == 0 {
			res.warn(sum.Warnings...)
			if !cmp.Agrees {
				res.warn(res.Record.Measurands[m].MonteCarlo.disagrees(p))
			}
		}
	}
	return nil
}

// defined returns the values that are numbers.
func defined(y []float64) []float64 {
	out := make([]float64, 0, len(y))
	for _, v := range y {
		if !math.IsNaN(v) {
			out = append(out, v)
		}
	}
	return out
}

func (r *Result) warn(errs ...error) {
	for _, e := range errs {
		text := e.Error()
		if r.words != nil {
			text = r.words(e)
		}
		r.Record.Warnings = append(r.Record.Warnings, text)
	}
}

// finish puts in what the settings ask for and makes lists of nothing empty
// rather than null.
func (r *Result) finish(s Settings) *Result {
	if s.Rows {
		r.Record.Rows = r.recordRows()
	}
	if r.Record.Warnings == nil {
		r.Record.Warnings = []string{}
	}
	if r.Record.Measurands == nil {
		r.Record.Measurands = []Measurand{}
	}
	if r.Record.Corrections == nil {
		r.Record.Corrections = []Correction{}
	}
	return r
}

// header fills the parts of the record that do not depend on the fit.
func (c *chain) header(s Settings) Record {
	trials := s.Trials
	options := map[string]string{}
	if s.LawOnly {
		trials = 0
		options["law-only"] = "true"
	}
	if s.Probability != 0 {
		options["probability"] = strconv.FormatFloat(s.Probability, 'g', -1, 64)
	}
	r := Record{Format: 1, Guardring: Version, Model: c.b.Kind.Name, Title: c.b.Title,
		Run: RunRecord{Command: s.Command, Options: options, Seed: s.Seed, Trials: trials}, Exclusions: []Exclusion{}}
	for _, in := range c.b.Inputs {
		r.Inputs = append(r.Inputs, Input{File: in.File, SHA256: in.SHA256, Rows: in.Rows, Excluded: in.Excluded})
	}
	rows := &c.b.Rows
	for i := range rows.N {
		if rows.Excluded[i] {
			file, line := rows.Place(i)
			r.Exclusions = append(r.Exclusions, Exclusion{Row: i + 1, File: file, Line: line, Reason: rows.Reason(i)})
		}
	}
	return r
}

// fitRecord turns the estimator's result into its record.
func (c *chain) fitRecord(r *lsq.Result) Fit {
	f := Fit{Method: c.method(), Status: r.Status.String(), Reason: r.Reason,
		ChiSquared: Number(r.ChiSquared), DOF: r.DOF, PValue: Number(r.PValue), BirgeRatio: Number(r.BirgeRatio),
		ResidualSumOfSquares: Number(r.RSS), ResidualStandardDeviation: Number(r.ResidualSD),
		ResponseUnit: siSymbol(c.b.Channels[c.resp].Unit), Condition: Number(r.Condition), Iterations: r.Iterations,
		Rows: len(c.record), ScaledByResiduals: c.unknownNoise()}
	if c.unknownNoise() {
		f.PValue = Number(math.NaN())
	}
	for k, i := range c.free {
		s := &c.b.Scalars[i]
		p := Parameter{Name: s.Name, Unit: siSymbol(s.Unit), Value: Number(r.Values[k]), U: Number(r.U[k]), UTotal: Number(math.NaN()), Start: Number(c.start[k])}
		if s.HasPrior {
			p.Prior = &Prior{Value: Number(s.Dist.Value), U: Number(s.Dist.U)}
		}
		f.Parameters = append(f.Parameters, p)
		row := make([]Number, len(c.free))
		for l := range c.free {
			row[l] = Number(r.Covariance.At(k, l))
		}
		f.Covariance = append(f.Covariance, row)
	}
	return f
}

// hazard is what the bench stores, with the laboratory's limits.
func (c *chain) hazard(k *carried) Hazard {
	h := c.m.Hazard(k.q, c.x)
	out := Hazard{Voltage: Number(h.Voltage), Energy: Number(h.Energy), Charge: Number(h.Charge), Field: Number(h.Field),
		Breakdown: Number(math.NaN()), EnergyLimit: Number(c.b.Safety.Energy), ChargeLimit: Number(c.b.Safety.Charge)}
	if h.HasBreakdown {
		out.Breakdown = Number(h.Breakdown)
	}
	return out
}
