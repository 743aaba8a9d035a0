package gum

import (
	"context"
	"fmt"
	"math"
)

// batch is how many sequences of the adaptive procedure are drawn before its
// criterion is looked at again. Sequences beyond the one that meets it are dropped,
// so that the result does not depend on how many were drawn at a time.
const batch = 8

// adaptive is the procedure of JCGM 101:2008 7.9.4, for several outputs with the
// criterion met by all of them: sequences of M trials, M the larger of 10⁴ and the
// smallest integer not below 100/(1−p), here rounded up to whole blocks, until twice
// the standard deviation of the average over the sequences is at most δ for the
// estimate, the standard uncertainty and both ends of the symmetric interval. δ is
// that of the average standard uncertainty. Where an output has no mean or no standard
// deviation the criterion does without, and δ is that of the half-width of the interval
// over the k of a normal.
func (r *runner) adaptive(ctx context.Context, res *Result) error {
	s := r.s
	per := blockCount(max(10_000, int64(math.Ceil(100/(1-s.Probability)*(1-1e-12))))) // blocks a sequence
	m := per * BlockTrials
	most := s.Trials / m
	if most < 2 {
		return fmt.Errorf("adaptive Monte Carlo at a coverage probability of %v needs at least two sequences of %d trials: allow more trials than %d", s.Probability, m, s.Trials)
	}
	if m > SelectionTrials {
		return fmt.Errorf("adaptive Monte Carlo at a coverage probability of %v needs sequences of %d trials, more than %d: state a fixed number of trials instead", s.Probability, m, int64(SelectionTrials))
	}
	outputs := len(r.plan.model.Outputs)
	y := make([][]float64, outputs) // all trials so far, while they are few
	buffer := make([][]float64, outputs)
	for o := range buffer {
		buffer[o] = make([]float64, batch*m)
	}
	track := make([]tracker, outputs)
	for o := range track {
		mean, variance, _ := r.plan.existing(r.worker[0].eval[o])
		track[o] = tracker{k: CoverageFactor(s.Probability, math.Inf(1)), use: [4]bool{mean, variance, true, true}}
	}
	var tallies *tallies
	r.total = 0 // unknown
	h := int64(0)
	res.Converged = false
	for h < most && !res.Converged {
		n := min(batch, most-h)
		first := h * per
		err := r.blocks(ctx, first, first+n*per, math.MaxInt64, true, func(_ int, block int64, from int, out [][]float64) {
			at := (block-first)*BlockTrials + int64(from)
			for o := range out {
				copy(buffer[o][at:], out[o])
			}
		}, nil)
		if err != nil {
			return err
		}
		for k := int64(0); k < n && !res.Converged; k++ {
			if tallies == nil && (h+1)*m > SelectionTrials {
				if tallies, err = r.newTallies(ctx); err != nil {
					return err
				}
				tallies.add(y)
				y = nil
			}
			met := true
			seq := make([][]float64, outputs)
			for o := range seq {
				seq[o] = buffer[o][k*m : (k+1)*m]
				sample, err := summarise(seq[o], s.Probability, 1, false)
				if err != nil {
					return fmt.Errorf("output %s: %w", res.Outputs[o].Name, err)
				}
				met = track[o].met(sample, s.Digits) && met
			}
			if tallies != nil {
				tallies.add(seq)
			} else {
				for o := range seq {
					y[o] = append(y[o], seq[o]...)
				}
			}
			h++
			res.Converged = met
		}
	}
	res.Sequences = int(h)
	if !res.Converged {
		res.Warnings = append(res.Warnings, fmt.Errorf("adaptive Monte Carlo stopped at %d trials without meeting its tolerance for %d significant digits of the uncertainty", h*m, s.Digits))
	}
	if tallies == nil {
		return res.fromTrials(y, s, len(r.worker))
	}
	return tallies.fill(res, s)
}

// A tracker follows one output over the sequences.
type tracker struct {
	k    float64
	use  [4]bool // which of the four exist
	h    float64
	mean [4]float64 // of estimate, u, and the interval's ends
	ss   [4]float64
}

// met takes in a sequence and reports whether the averages have settled.
func (t *tracker) met(s *Sample, digits int) bool {
	t.h++
	for i, v := range [4]float64{s.Value, s.U, s.Interval[0], s.Interval[1]} {
		d := v - t.mean[i]
		t.mean[i] += d / t.h
		t.ss[i] += d * (v - t.mean[i])
	}
	if t.h < 2 {
		return false
	}
	u := t.mean[1]
	if !t.use[1] {
		u = (t.mean[3] - t.mean[2]) / (2 * t.k)
	}
	delta := tolerance(u, digits)
	for i, ss := range t.ss {
		if t.use[i] && !(2*math.Sqrt(ss/(t.h*(t.h-1))) <= delta) {
			return false
		}
	}
	return true
}
