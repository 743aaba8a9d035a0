package gum

import (
	"context"
	"fmt"
	"math"
)

// tallies is what a run that streams keeps of all outputs.
type tallies struct {
	output []*tally
	joint  *jointTally // nil for a single output
	points [][]float64 // of the pilot
}

// newTallies draws the pilot and lays out the bins.
func (r *runner) newTallies(ctx context.Context) (*tallies, error) {
	y := make([][]float64, len(r.plan.model.Outputs))
	for o := range y {
		y[o] = make([]float64, PilotTrials)
	}
	err := r.blocks(ctx, 0, PilotTrials/BlockTrials, PilotTrials, false, func(_ int, block int64, from int, out [][]float64) {
		for o := range out {
			copy(y[o][int(block)*BlockTrials+from:], out[o])
		}
	}, nil)
	if err != nil {
		return nil, err
	}
	p := r.s.Probability
	t := &tallies{}
	for o := range y {
		t.output = append(t.output, newTally(newGrid(y[o], p, Bins)))
		t.points = append(t.points, append([]float64(nil), y[o][:min(r.s.Points, PilotTrials)]...))
	}
	if len(y) > 1 {
		mean, cov, _ := covarianceOfTrials(y)
		m := newMetric(mean, cov)
		e, q := make([]float64, PilotTrials), make([]float64, PilotTrials)
		for k := range e {
			e[k], q[k] = m.distances(y, k)
		}
		t.joint = newJointTally(m, gridFor(e, p), gridFor(q, p))
	}
	return t, nil
}

// empty returns tallies with the same bins and nothing in them.
func (t *tallies) empty() *tallies {
	n := &tallies{points: t.points}
	for _, o := range t.output {
		n.output = append(n.output, newTally(o.grid))
	}
	if t.joint != nil {
		n.joint = newJointTally(t.joint.metric, t.joint.ellipse.grid, t.joint.rectangle.grid)
	}
	return n
}

// add counts trials y[output], any number of them.
func (t *tallies) add(y [][]float64) {
	c := make([][]float64, len(y))
	for from := 0; from < len(y[0]); from += chunk {
		for o := range y {
			c[o] = y[o][from:min(from+chunk, len(y[o]))]
		}
		t.addChunk(c)
	}
}

func (t *tallies) addChunk(y [][]float64) {
	for o := range y {
		t.output[o].add(y[o])
	}
	if t.joint != nil {
		t.joint.add(y)
	}
}

func (t *tallies) merge(u *tallies) {
	for o := range t.output {
		t.output[o].merge(u.output[o])
	}
	if t.joint != nil {
		t.joint.merge(u.joint)
	}
}

// run counts blocks first to last−1 of a run of trials in all.
func (t *tallies) run(ctx context.Context, r *runner, first, last, trials int64) error {
	own := make([]*tallies, len(r.worker))
	own[0] = t
	for k := 1; k < len(own) && int64(k) < last-first; k++ {
		own[k] = t.empty()
	}
	err := r.blocks(ctx, first, last, trials, true, func(k int, _ int64, _ int, out [][]float64) {
		own[k].addChunk(out)
	}, nil)
	if err != nil {
		return err
	}
	for _, o := range own[1:] {
		if o != nil {
			t.merge(o)
		}
	}
	return nil
}

// fill states what the tallies found.
func (t *tallies) fill(r *Result, s Settings) error {
	for o := range t.output {
		sample, err := t.output[o].sample(s.Probability)
		if err != nil {
			return fmt.Errorf("output %s: %w", r.Outputs[o].Name, err)
		}
		r.Outputs[o].MonteCarlo = sample
		r.Trials = t.output[o].n + t.output[o].undefined
	}
	r.Points = t.points
	if t.joint == nil {
		u := r.Outputs[0].MonteCarlo.U
		r.Covariance = [][]float64{{u * u}}
	} else {
		var warnings []error
		r.Covariance, r.Regions, warnings = t.joint.result(s.Probability)
		r.Warnings = append(r.Warnings, warnings...)
	}
	r.Correlation = correlationOf(r.Covariance)
	for o := range r.Outputs {
		if math.IsNaN(r.Outputs[o].MonteCarlo.U) {
			r.Correlation[o][o] = math.NaN()
		}
	}
	return nil
}
