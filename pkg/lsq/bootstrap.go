package lsq

import (
	"context"
	"fmt"
	"math"
	"sort"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/random"
)

// BootstrapSettings says how to resample. The zero value resamples residuals
// 2,000 times with seed 0.
type BootstrapSettings struct {
	Pairs      bool    // resample whole rows instead of residuals
	Replicates int     // 0: 2000
	Seed       uint64  // 0 is a seed
	Coverage   float64 // probability of the intervals; 0: 0.9545
}

// maxReplicated bounds the values of all replicates that are kept: 800 MB.
const maxReplicated = 100_000_000

// MostReplicates is the largest number of replicates of a bootstrap of that many
// parameters: the estimates of all are kept, 800 MB at most, to find intervals from.
func MostReplicates(parameters int) int { return maxReplicated / max(parameters, 1) }

// Bootstrap is what resampled fits tell about the parameters.
type Bootstrap struct {
	Values   [][]float64  // one row per replicate that converged: all parameters
	Failed   int          // replicates whose fit did not converge
	Bias     []float64    // mean over replicates minus the estimate
	U        []float64    // standard deviation over replicates
	Interval [][2]float64 // percentile interval of each parameter
	Warnings []error
}

// Bootstrap repeats the fit on resampled readings (Efron and Tibshirani, An
// Introduction to the Bootstrap (1993), sections 9.4 and 9.5). Residuals are
// resampled after division by their standard uncertainty and √(1 − leverage)
// and centring; rows are resampled with their weights. The values of priors are
// data like the readings: each replicate draws them from a normal distribution of
// their standard uncertainty, about the estimate (with Pairs: about the value
// stated). Replicate k always uses the same random numbers for a seed. Readings
// must be independent.
func (r *Result) Bootstrap(ctx context.Context, set BootstrapSettings) (*Bootstrap, error) {
	if set.Replicates == 0 {
		set.Replicates = 2000
	}
	if set.Coverage == 0 {
		set.Coverage = 0.9545
	}
	if set.Replicates < 2 || !(set.Coverage > 0 && set.Coverage < 1) {
		return nil, fmt.Errorf("lsq: %d replicates and coverage %v: at least 2 replicates and a probability between 0 and 1 are needed", set.Replicates, set.Coverage)
	}
	if r.Status != Converged {
		return nil, fmt.Errorf("lsq: the fit is %s; a bootstrap needs a converged fit", r.Status)
	}
	if !r.white.diagonal() {
		return nil, fmt.Errorf("lsq: the readings are correlated; the bootstrap needs independent ones")
	}
	n, np := len(r.Fitted), len(r.Values)
	if most := MostReplicates(np); set.Replicates > most {
		return nil, fmt.Errorf("lsq: %d replicates of %d parameters can't be kept to find intervals from; ask for %d at most", set.Replicates, np, most)
	}
	b := &Bootstrap{Bias: make([]float64, np), U: make([]float64, np), Interval: make([][2]float64, np)}
	pick := func(src *random.Source) int { return min(int(src.Float64()*float64(n)), n-1) }
	// values of the priors: nil without any
	var priors []float64
	draw := func(src *random.Source, about func(j int) float64) {
		for _, j := range r.Free {
			if p := r.problem.Parameters[j].Prior; p != nil {
				priors[j] = about(j) + p.U*src.Normal()
			}
		}
	}
	for _, j := range r.Free {
		if r.problem.Parameters[j].Prior != nil {
			priors = make([]float64, np)
		}
	}
	var fit func(src *random.Source, theta []float64) error
	if set.Pairs {
		factors := make([]float64, n)
		a, err := r.repeat(r.problem.Y, r.Free, factors)
		if err != nil {
			return nil, err
		}
		fit = func(src *random.Source, theta []float64) error {
			clear(factors)
			for i := 0; i < n; i++ {
				factors[pick(src)]++
			}
			for i, f := range factors {
				a.w.w[i] = r.white.w[i] * math.Sqrt(f)
			}
			if priors != nil {
				draw(src, func(j int) float64 { return r.problem.Parameters[j].Prior.Value })
				for _, j := range r.Free {
					if r.problem.Parameters[j].Prior != nil {
						a.s.priorV[j] = priors[j]
					}
				}
			}
			if err := a.run(ctx, r.Values); err != nil {
				return err
			}
			// a sample with too few different rows does not determine the parameters
			for k := 0; k < a.s.q; k++ {
				if c := columnNorm(k, a.s.q+1, a.s.now.r); math.Abs(a.s.now.r[k*(a.s.q+1)+k]) <= 1e-11*c {
					return fmt.Errorf("lsq: the resampled rows do not determine the parameters")
				}
			}
			copy(theta, a.s.theta)
			return nil
		}
	} else {
		e := make([]float64, n)
		mean := 0.0
		for i, s := range r.Residuals {
			h := 0.0
			if r.Leverage != nil {
				h = r.Leverage[i]
			}
			if h < 1-1e-9 {
				e[i] = s * r.white.w[i] / math.Sqrt(1-h)
			}
			mean += e[i]
		}
		mean /= float64(n)
		w := r.NewRefitter()
		y := make([]float64, n)
		fit = func(src *random.Source, theta []float64) error {
			for i := range y {
				y[i] = r.Fitted[i] + (e[pick(src)]-mean)/r.white.w[i]
			}
			if priors != nil {
				draw(src, func(j int) float64 { return r.Values[j] })
			}
			copy(theta, r.Values)
			_, err := w.Fit(y, priors, nil, theta)
			return err
		}
	}
	for k := 0; k < set.Replicates; k++ {
		if err := ctx.Err(); err != nil {
			return nil, fmt.Errorf("lsq: bootstrap cancelled: %w", err)
		}
		if k%100 == 0 {
			cell.Report(ctx, "bootstrap", int64(k), int64(set.Replicates))
		}
		src := random.New(set.Seed, "lsq bootstrap", uint64(k))
		theta := make([]float64, np)
		if fit(&src, theta) != nil {
			if err := ctx.Err(); err != nil {
				return nil, fmt.Errorf("lsq: bootstrap cancelled: %w", err)
			}
			b.Failed++
			continue
		}
		b.Values = append(b.Values, theta)
	}
	m := len(b.Values)
	if m < 2 {
		return nil, fmt.Errorf("lsq: %d of %d resampled fits converged; too few for a bootstrap", m, set.Replicates)
	}
	if b.Failed > 0 {
		b.Warnings = append(b.Warnings, fmt.Errorf("%d of %d resampled fits did not converge and are left out", b.Failed, set.Replicates))
	}
	column := make([]float64, m)
	for j := 0; j < np; j++ {
		for k, v := range b.Values {
			column[k] = v[j]
		}
		s, err := Summarise(column)
		if err != nil {
			return nil, err
		}
		b.Bias[j], b.U[j] = s.Mean-r.Values[j], s.SD
		sort.Float64s(column)
		at := func(p float64) float64 { // linear between order statistics
			x := p * float64(m-1)
			i := int(x)
			if i >= m-1 {
				return column[m-1]
			}
			return column[i] + (x-float64(i))*(column[i+1]-column[i])
		}
		b.Interval[j] = [2]float64{at((1 - set.Coverage) / 2), at((1 + set.Coverage) / 2)}
	}
	return b, nil
}
