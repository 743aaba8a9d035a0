package assess

import (
	"context"
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"
)

// SubsetSettings adjusts the search for a largest consistent subset. The zero
// value is the default.
type SubsetSettings struct {
	Level      float64 // significance level of consistency; 0: 0.05
	Exhaustive int     // most results for which every subset is tried; 0: 20, at most 24
	// Greedy lets larger sets be searched by leaving out, one after the other,
	// the result whose absence lowers chi-squared most. That finds a consistent
	// subset, not surely a largest one, and a warning says so. Without it a
	// larger set is refused.
	Greedy bool
}

// Subset is a consistent subset of results.
type Subset struct {
	Members  []int `json:"members"`  // indices of the results kept, rising
	Excluded []int `json:"excluded"` // indices of the others, rising
	// Mean is the weighted mean of the members. Its Results and Weights cover all
	// results, so that Mean.Degrees gives those of the excluded ones too.
	Mean *Mean `json:"mean"`
	// Others counts further subsets of the same size that are consistent too;
	// Members has the smallest chi-squared of them.
	Others   int     `json:"others"`
	Tried    int     `json:"tried"`
	Searched bool    `json:"exhaustive"` // every subset that could be larger was tried
	Warnings []error `json:"-"`
}

// LargestConsistentSubset returns the largest subset of results whose weighted
// mean is consistent by chi-squared, of several the one with the smallest
// chi-squared (Cox 2007, Metrologia 44, 187). cov as for WeightedMean. It fails
// when no two results are consistent. A subset is a proposal: leaving a result
// out of a reference value needs a reason beyond its distance.
func LargestConsistentSubset(ctx context.Context, results []Result, cov *mat.SymDense, s SubsetSettings) (*Subset, error) {
	if s.Level == 0 {
		s.Level = defaultLevel
	}
	if !(s.Level > 0 && s.Level < 1) {
		return nil, fmt.Errorf("significance level %v must lie between 0 and 1", s.Level)
	}
	if s.Exhaustive == 0 {
		s.Exhaustive = 20
	}
	if s.Exhaustive < 2 || s.Exhaustive > 24 {
		return nil, fmt.Errorf("exhaustive search up to %d results: the bound must lie between 2 and 24 (2^24 subsets)", s.Exhaustive)
	}
	rs, err := alike(results, 2, "a consistent subset")
	if err != nil {
		return nil, err
	}
	v, _, err := covariance(rs, cov)
	if err != nil {
		return nil, err
	}
	n := len(rs)
	if n > s.Exhaustive && !s.Greedy {
		return nil, fmt.Errorf("%d results have too many subsets to try each (bound %d); ask for the greedy search, which may miss the largest", n, s.Exhaustive)
	}
	out := &Subset{Searched: n <= s.Exhaustive}
	chi := newSubsetChi(rs, v, cov != nil)
	bound := func(m int) float64 { return distuv.ChiSquared{K: float64(m - 1)}.Quantile(1 - s.Level) }
	if out.Searched {
		out.Members, out.Others, err = exhaustive(ctx, n, chi, bound, &out.Tried)
	} else {
		out.Members, err = greedy(ctx, n, chi, bound, &out.Tried)
		out.Warnings = append(out.Warnings, fmt.Errorf("%d results: searched greedily, a larger consistent subset may exist", n))
	}
	if err != nil {
		return nil, err
	}
	kept := make([]bool, n)
	for _, i := range out.Members {
		kept[i] = true
	}
	for i, k := range kept {
		if !k {
			out.Excluded = append(out.Excluded, i)
		}
	}
	var part []Result
	for _, i := range out.Members {
		part = append(part, rs[i])
	}
	sub := mat.NewSymDense(len(part), nil)
	for a, i := range out.Members {
		for b, j := range out.Members {
			sub.SetSym(a, b, v.At(i, j))
		}
	}
	_, chol, err := covariance(part, sub)
	if err != nil {
		return nil, err
	}
	// chi-squared was within its quantile: rounding of the p-value does not undo that
	if out.Mean, err = mean(rs, v, chol, out.Members, s.Level*(1-1e-9)); err != nil {
		return nil, err
	}
	out.Mean.Level = s.Level
	if out.Others > 0 {
		out.Warnings = append(out.Warnings, fmt.Errorf("%d other subset(s) of %d results are consistent as well; this one has the smallest chi-squared", out.Others, len(out.Members)))
	}
	return out, nil
}

var errNoSubset = errors.New("no two results are consistent with each other at this level: there is no consistent subset")

func exhaustive(ctx context.Context, n int, chi *subsetChi, bound func(int) float64, tried *int) ([]int, int, error) {
	for m := n; m >= 2; m-- {
		var best []int
		least, limit, count := math.Inf(1), bound(m), 0
		set := make([]int, m)
		for i := range set {
			set[i] = i
		}
		for more := true; more; more = next(set, n) {
			if *tried++; *tried&4095 == 0 && ctx.Err() != nil {
				return nil, 0, context.Cause(ctx)
			}
			if x := chi.of(set); x <= limit {
				count++
				if x < least {
					least, best = x, append(best[:0], set...)
				}
			}
		}
		if best != nil {
			return best, count - 1, nil
		}
	}
	return nil, 0, errNoSubset
}

// next steps set to the next combination of 0 … n−1 in lexicographic order.
func next(set []int, n int) bool {
	m := len(set)
	i := m - 1
	for i >= 0 && set[i] == n-m+i {
		i--
	}
	if i < 0 {
		return false
	}
	set[i]++
	for j := i + 1; j < m; j++ {
		set[j] = set[j-1] + 1
	}
	return true
}

func greedy(ctx context.Context, n int, chi *subsetChi, bound func(int) float64, tried *int) ([]int, error) {
	set := make([]int, n)
	for i := range set {
		set[i] = i
	}
	*tried++
	for now := chi.of(set); now > bound(len(set)); {
		if len(set) == 2 {
			return nil, errNoSubset
		}
		drop := 0
		now = math.Inf(1)
		for k := range set {
			if ctx.Err() != nil {
				return nil, context.Cause(ctx)
			}
			rest := append(append([]int(nil), set[:k]...), set[k+1:]...)
			*tried++
			if x := chi.of(rest); x < now {
				now, drop = x, k
			}
		}
		set = append(set[:drop], set[drop+1:]...)
	}
	return set, nil
}

// subsetChi computes chi-squared of subsets without allocating: a Cholesky
// factor L of the subset's correlation matrix is built row by row, and the
// whitened columns of 1/u and x/u with it.
type subsetChi struct {
	n          int
	correlated bool
	r          []float64 // correlation matrix, row-major
	a, b       []float64 // 1/u, (x − x₀)/u
	l          []float64 // workspace: factor, row-major
	wa, wb     []float64 // workspace: whitened columns
}

func newSubsetChi(rs []Result, v *mat.SymDense, correlated bool) *subsetChi {
	n := len(rs)
	c := &subsetChi{n: n, correlated: correlated, r: make([]float64, n*n), l: make([]float64, n*n),
		a: make([]float64, n), b: make([]float64, n), wa: make([]float64, n), wb: make([]float64, n)}
	for i, r := range rs {
		c.a[i], c.b[i] = 1/r.U, (r.Value-rs[0].Value)/r.U
		for j := range n {
			c.r[i*n+j] = v.At(i, j) / (r.U * rs[j].U)
		}
	}
	return c
}

func (c *subsetChi) of(set []int) float64 {
	var aa, ab float64
	for k, i := range set {
		a, b, d := c.a[i], c.b[i], 1.0
		if c.correlated {
			row := c.l[k*c.n:]
			for q := range k {
				s := c.r[i*c.n+set[q]]
				for t := range q {
					s -= row[t] * c.l[q*c.n+t]
				}
				row[q] = s / c.l[q*c.n+q]
				a -= row[q] * c.wa[q]
				b -= row[q] * c.wb[q]
				d -= row[q] * row[q]
			}
			d = math.Sqrt(d)
			row[k] = d
		}
		c.wa[k], c.wb[k] = a/d, b/d
		aa += c.wa[k] * c.wa[k]
		ab += c.wa[k] * c.wb[k]
	}
	mean, sum := ab/aa, 0.0
	for k := range set {
		e := c.wb[k] - mean*c.wa[k]
		sum += e * e
	}
	return sum
}
