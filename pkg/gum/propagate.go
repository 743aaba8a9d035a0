package gum

import (
	"context"
	"errors"
	"fmt"
)

// Propagate states the uncertainty of every output by the law and by Monte
// Carlo. It reports progress to the context's cell and ends soon after the
// context does, with the context's error. A law that can't be applied leaves its
// place empty with a warning, unless nothing but the law was asked for.
func Propagate(ctx context.Context, m *Model, s Settings) (*Result, error) {
	s, err := s.withDefaults()
	if err != nil {
		return nil, err
	}
	p, err := newPlan(m)
	if err != nil {
		return nil, err
	}
	if !s.LawOnly && !s.Adaptive && s.Trials > SelectionTrials {
		part, err := p.part(ctx, s, 1, 1)
		if err != nil {
			return nil, err
		}
		return Merge([]*Part{part})
	}
	r := &Result{Probability: s.Probability, Seed: s.Seed, Converged: true}
	if err := p.laws(r, s); err != nil {
		return nil, err
	}
	if s.LawOnly {
		p.lawCovariance(r)
		return r, nil
	}
	run, err := newRunner(p, s)
	if err != nil {
		return nil, err
	}
	r.Warnings = append(r.Warnings, p.warnings...)
	if s.Adaptive {
		if err := run.adaptive(ctx, r); err != nil {
			return nil, err
		}
	} else {
		y, err := run.keep(ctx, s.Trials)
		if err != nil {
			return nil, err
		}
		if err := r.fromTrials(y, s, len(run.worker)); err != nil {
			return nil, err
		}
	}
	p.finish(r, s, run.worker[0])
	return r, nil
}

// laws fills in the law of every output.
func (p *plan) laws(r *Result, s Settings) error {
	for i, o := range p.model.Outputs {
		out := OutputResult{Name: o.Name, Unit: o.Unit, Formula: o.Formula}
		e := o.New()
		if e.Block == nil && (e.Gradient == nil || s.SecondOrder && e.Hessian == nil) {
			return fmt.Errorf("output %s: its evaluator has no Block function", o.Name)
		}
		out.Law, out.LawError = p.law(i, e, s)
		if out.LawError != nil {
			if s.LawOnly {
				return out.LawError
			}
			r.Warnings = append(r.Warnings, out.LawError)
		}
		r.Outputs = append(r.Outputs, out)
	}
	return nil
}

// lawCovariance fills in covariance and correlation of the outputs by the law
// (JCGM 102:2011 6.2: C Σ Cᵀ).
func (p *plan) lawCovariance(r *Result) {
	k := len(r.Outputs)
	r.Covariance = square(k)
	for i := range k {
		a := r.Outputs[i].Law
		for j := range i + 1 {
			b := r.Outputs[j].Law
			var c float64
			for n := range a.Budget {
				c += a.Budget[n].Contribution * b.Budget[n].Contribution
			}
			for _, q := range p.corr {
				c += q.R * (a.Budget[q.I].Contribution*b.Budget[q.J].Contribution + a.Budget[q.J].Contribution*b.Budget[q.I].Contribution)
			}
			r.Covariance[i][j], r.Covariance[j][i] = c, c
		}
	}
	r.Correlation = correlationOf(r.Covariance)
}

// keep runs trials and keeps the outputs of all.
func (r *runner) keep(ctx context.Context, trials int64) ([][]float64, error) {
	y := make([][]float64, len(r.plan.model.Outputs))
	for o := range y {
		y[o] = make([]float64, trials)
	}
	err := r.blocks(ctx, 0, blockCount(trials), trials, true, func(_ int, block int64, from int, out [][]float64) {
		at := block*BlockTrials + int64(from)
		for o := range out {
			copy(y[o][at:], out[o])
		}
	}, nil)
	return y, err
}

// fromTrials fills in what Monte Carlo says from trials that are all at hand.
func (r *Result) fromTrials(y [][]float64, s Settings, workers int) error {
	r.Trials = int64(len(y[0]))
	for o := range y {
		sample, err := summarise(y[o], s.Probability, workers, true)
		if err != nil {
			return fmt.Errorf("output %s: %w", r.Outputs[o].Name, err)
		}
		r.Outputs[o].MonteCarlo = sample
	}
	n := min(s.Points, len(y[0]))
	for o := range y {
		r.Points = append(r.Points, append([]float64(nil), y[o][:n]...))
	}
	if len(y) == 1 {
		u := r.Outputs[0].MonteCarlo.U
		r.Covariance = [][]float64{{u * u}}
	} else {
		var mean []float64
		mean, r.Covariance, _ = covarianceOfTrials(y)
		var warnings []error
		r.Regions, warnings = regionsOfTrials(y, mean, r.Covariance, s.Probability)
		r.Warnings = append(r.Warnings, warnings...)
	}
	r.Correlation = correlationOf(r.Covariance)
	return nil
}

// finish withdraws moments that do not exist and adds the comparisons.
func (p *plan) finish(r *Result, s Settings, w *worker) {
	for o := range r.Outputs {
		mean, variance, names := p.existing(w.eval[o])
		r.withdraw(o, existence{mean, variance, names})
		r.compare(o, s.Digits)
	}
}

func (r *Result) compare(o, digits int) {
	out := &r.Outputs[o]
	if out.Law == nil || out.MonteCarlo == nil {
		return
	}
	c := Compare(out.Law, out.MonteCarlo, digits)
	out.Comparison = &c
}

// errAdaptivePart refuses parts of an adaptive run.
var errAdaptivePart = errors.New("an adaptive run can't be cut into parts: the number of trials is not known beforehand; state the number of trials")
