package lsq

import (
	"fmt"
	"math"
)

// name is how messages call parameter j.
func (p *Problem) name(j int) string {
	if p.Parameters[j].Name != "" {
		return p.Parameters[j].Name
	}
	return fmt.Sprintf("b%d", j+1)
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// validate finds what is wrong with a problem before any work is done. It
// returns the free parameters and the number of priors on them.
func (p *Problem) validate() (free []int, priors int, err error) {
	n := len(p.Y)
	if n == 0 {
		return nil, 0, fmt.Errorf("lsq: there are no readings")
	}
	if p.Eval == nil {
		return nil, 0, fmt.Errorf("lsq: Problem.Eval is nil; it must compute the model's values")
	}
	if i := notFinite(p.Y); i >= 0 {
		return nil, 0, fmt.Errorf("lsq: reading %d is %v; a reading must be finite (exclude the row instead)", i+1, p.Y[i])
	}
	if p.Covariance != nil {
		if p.U != nil || p.Effects != nil {
			return nil, 0, fmt.Errorf("lsq: give either Covariance or U with Effects, not both")
		}
		if p.Reweight != nil {
			return nil, 0, fmt.Errorf("lsq: Reweight works on U and Effects and can't be used with Covariance")
		}
		if m := p.Covariance.SymmetricDim(); m != n {
			return nil, 0, fmt.Errorf("lsq: the covariance is %d×%d but there are %d readings", m, m, n)
		}
		for i := 0; i < n; i++ {
			for j := i; j < n; j++ {
				if !finite(p.Covariance.At(i, j)) {
					return nil, 0, fmt.Errorf("lsq: covariance of readings %d and %d is %v", i+1, j+1, p.Covariance.At(i, j))
				}
			}
		}
	}
	if p.U != nil {
		if len(p.U) != n {
			return nil, 0, fmt.Errorf("lsq: %d uncertainties for %d readings", len(p.U), n)
		}
		for i, u := range p.U {
			if u > 0 && u <= math.MaxFloat64 || (u == 0 && p.Reweight != nil) {
				continue
			}
			return nil, 0, fmt.Errorf("lsq: standard uncertainty of reading %d is %v; it must be positive and finite", i+1, u)
		}
	}
	if p.Effects != nil {
		if err := p.Effects.check(n); err != nil {
			return nil, 0, err
		}
	}
	free = make([]int, 0, len(p.Parameters))
	for j := range p.Parameters {
		q := &p.Parameters[j]
		if !finite(q.Start) {
			return nil, 0, fmt.Errorf("lsq: start of %s is %v; it must be finite", p.name(j), q.Start)
		}
		if q.Prior != nil && (!finite(q.Prior.Value) || !(q.Prior.U > 0) || math.IsInf(q.Prior.U, 0)) {
			return nil, 0, fmt.Errorf("lsq: prior of %s is %v with standard uncertainty %v; the uncertainty must be positive and finite", p.name(j), q.Prior.Value, q.Prior.U)
		}
		if q.Fixed {
			continue
		}
		lo, hi := math.Inf(-1), math.Inf(1)
		if q.Lower != nil {
			lo = *q.Lower
		}
		if q.Upper != nil {
			hi = *q.Upper
		}
		if !(lo < hi) {
			return nil, 0, fmt.Errorf("lsq: bounds of %s are %v to %v; the lower must be below the upper (or fix the parameter)", p.name(j), lo, hi)
		}
		if q.Start < lo || q.Start > hi {
			return nil, 0, fmt.Errorf("lsq: start of %s is %v, outside its bounds %v to %v", p.name(j), q.Start, lo, hi)
		}
		free = append(free, j)
		if q.Prior != nil {
			priors++
		}
	}
	if len(free) == 0 {
		return nil, 0, fmt.Errorf("lsq: every parameter is fixed; there is nothing to estimate")
	}
	if p.Relative && (priors > 0 || p.Effects != nil) {
		return nil, 0, fmt.Errorf("lsq: relative uncertainties can't be used with priors or effects, whose size is known; leave U nil to have the noise found from the residuals")
	}
	if n+priors < len(free) {
		return nil, 0, fmt.Errorf("lsq: %d parameters can't be estimated from %d readings and %d priors; fix some parameters or add readings", len(free), n, priors)
	}
	return free, priors, nil
}

func (g *Effects) check(n int) error {
	if len(g.Start) != n+1 || g.Start[0] != 0 || int(g.Start[n]) != len(g.Column) || len(g.Column) != len(g.Load) {
		return fmt.Errorf("lsq: Effects need %d row starts from 0 to the number of loads; there are %d starts, %d columns, %d loads", n+1, len(g.Start), len(g.Column), len(g.Load))
	}
	if len(g.Load) > math.MaxInt32 {
		return fmt.Errorf("lsq: Effects have %d loads; at most %d can be handled", len(g.Load), math.MaxInt32)
	}
	for i := 0; i < n; i++ {
		if g.Start[i+1] < g.Start[i] || int(g.Start[i+1]) > len(g.Column) {
			return fmt.Errorf("lsq: row starts of Effects decrease or run past the loads at reading %d", i+1)
		}
		row := g.Column[g.Start[i]:g.Start[i+1]]
		for k, c := range row {
			if c < 0 || int(c) >= g.Columns {
				return fmt.Errorf("lsq: reading %d names effect %d; there are %d, counted from 0", i+1, c, g.Columns)
			}
			for _, d := range row[:k] {
				if d == c {
					return fmt.Errorf("lsq: reading %d names effect %d twice; add its loads", i+1, c)
				}
			}
			if v := g.Load[int(g.Start[i])+k]; !finite(v) {
				return fmt.Errorf("lsq: load of effect %d on reading %d is %v", c, i+1, v)
			}
		}
	}
	return nil
}

// possible reports whether the symmetric n×n matrix v, by rows, with correlations
// within ±1, has no negative eigenvalue but for rounding: by the Cholesky factor of
// its correlation matrix.
func possible(v []float64, n int) bool {
	const rounding = 1e-9
	l := make([]float64, n*n)
	for j := range n {
		if v[j*n+j] == 0 {
			continue // its covariances are zero: no correlation lies beyond ±1
		}
		d := 1.0
		for k := range j {
			d -= l[j*n+k] * l[j*n+k]
		}
		if d < -rounding {
			return false
		}
		for i := j + 1; i < n; i++ {
			if v[i*n+i] == 0 {
				continue
			}
			s := v[i*n+j] / (math.Sqrt(v[i*n+i]) * math.Sqrt(v[j*n+j]))
			for k := range j {
				s -= l[i*n+k] * l[j*n+k]
			}
			if d > rounding {
				l[i*n+j] = s / math.Sqrt(d)
			} else if math.Abs(s) > math.Sqrt(rounding) {
				return false
			}
		}
	}
	return true
}

// copy is g with loads of its own; reweighting leaves the pattern as it is.
func (g *Effects) copy() *Effects {
	c := *g
	c.Load = append([]float64(nil), g.Load...)
	return &c
}
