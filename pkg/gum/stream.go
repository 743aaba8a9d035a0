package gum

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
)

// A grid is the bins of one quantity in a run that streams.
type grid struct {
	low, width float64 // left edge of bin 0; width of each
	centre     float64 // deviations are summed about it
}

// newGrid lays that many bins over what the pilot's trials show of a quantity: their range
// and a tenth of the symmetric interval on either side (all of it where a tail holds
// fewer than 20 trials), but no further out from that interval than one and a half
// times its width, so that rare far trials do not coarsen the bins.
func newGrid(pilot []float64, p float64, bins int) grid {
	y := slices.DeleteFunc(slices.Clone(pilot), func(v float64) bool { return v-v != 0 })
	if len(y) == 0 {
		return grid{low: -1, width: 2 / float64(bins)}
	}
	slices.Sort(y)
	n := len(y)
	tail := (1 - p) / 2 * float64(n)
	k := min(int(tail), (n-1)/2)
	a, b := y[k], y[n-1-k]
	span := b - a
	margin := 0.1 * span
	if tail < 20 {
		margin = span
	}
	lo := max(y[0]-margin, a-1.5*span)
	hi := min(y[n-1]+margin, b+1.5*span)
	g := grid{low: lo, width: hi/float64(bins) - lo/float64(bins), centre: y[n/2]}
	// Bins narrower than the spacing of numbers there would only blur their own edges; a
	// constant output has one spacing.
	least := max(math.Abs(lo), math.Abs(hi), 1e-280) * 0x1p-52
	if !(g.width >= least) {
		g.width = least
		g.low = lo - (least*float64(bins)-(hi-lo))/2
	}
	return g
}

// A tally is what a run that streams keeps of one output. Tallies of disjoint
// trials merge exactly.
type tally struct {
	grid
	counts       []int64
	below, above int64
	min, max     float64 // of the trials in below and above
	undefined    int64
	n            int64 // trials counted
	huge         bool  // a square overflowed: the sums mean nothing
	s1, s2       exactSum
}

func newTally(g grid) *tally {
	return &tally{grid: g, counts: make([]int64, Bins), min: math.Inf(1), max: math.Inf(-1)}
}

// add counts the trials y, at most a chunk of them.
func (t *tally) add(y []float64) {
	a, b := deviations(y, t.centre)
	if b-b != 0 {
		t.addCarefully(y)
	} else {
		t.s1.add(a)
		t.s2.add(b)
		t.n += int64(len(y))
	}
	inverse := 1 / t.width
	low := t.low
	counts := (*[Bins]int64)(t.counts)
	for _, v := range y {
		if x := (v - low) * inverse; x >= 0 && x < Bins {
			counts[int(x)&(Bins-1)]++
		} else {
			t.outside(v)
		}
	}
}

// deviations sums y − c and its square. Four running sums each keep the
// processor's adders busy; their order is fixed.
func deviations(y []float64, c float64) (sum, squares float64) {
	var a0, a1, a2, a3, b0, b1, b2, b3 float64
	i := 0
	for ; i+4 <= len(y); i += 4 {
		q := y[i : i+4 : i+4]
		d0, d1, d2, d3 := q[0]-c, q[1]-c, q[2]-c, q[3]-c
		a0 += d0
		a1 += d1
		a2 += d2
		a3 += d3
		b0 += d0 * d0
		b1 += d1 * d1
		b2 += d2 * d2
		b3 += d3 * d3
	}
	for ; i < len(y); i++ {
		d := y[i] - c
		a0 += d
		b0 += d * d
	}
	return (a0 + a1) + (a2 + a3), (b0 + b1) + (b2 + b3)
}

// addCarefully sums what is finite of y.
func (t *tally) addCarefully(y []float64) {
	var a, b float64
	for _, v := range y {
		if v-v != 0 {
			continue
		}
		t.n++
		d := v - t.centre
		a += d
		b += d * d
	}
	if b-b != 0 || a-a != 0 {
		t.huge = true
		return
	}
	t.s1.add(a)
	t.s2.add(b)
}

func (t *tally) outside(v float64) {
	switch {
	case v-v != 0:
		t.undefined++
		return
	case v < t.low:
		t.below++
	default:
		t.above++
	}
	t.min, t.max = min(t.min, v), max(t.max, v)
}

func (t *tally) merge(o *tally) {
	for i, c := range o.counts {
		t.counts[i] += c
	}
	t.below += o.below
	t.above += o.above
	t.min, t.max = min(t.min, o.min), max(t.max, o.max)
	t.undefined += o.undefined
	t.n += o.n
	t.huge = t.huge || o.huge
	t.s1.merge(&o.s1)
	t.s2.merge(&o.s2)
}

// sample states what the tally found.
func (t *tally) sample(p float64) (*Sample, error) {
	s := &Sample{Trials: int(t.n + t.undefined), Undefined: int(t.undefined), Probability: p}
	if err := s.checkUndefined(); err != nil {
		return nil, err
	}
	var variance float64
	s.Value, variance = momentsOf(t.n, t.centre, &t.s1, &t.s2)
	s.U = math.Sqrt(max(variance, 0))
	if t.huge {
		s.withoutSquares()
	}
	q, err := coverCount(int(t.n), p)
	if err != nil {
		return nil, err
	}
	c := t.cumulate()
	s.Min, s.Max = c.edge[0], c.edge[len(c.edge)-1]
	tails := t.n - int64(q)
	r := (tails + 1) / 2 // counted from 1
	var wa, wb float64
	s.Interval[0], wa = c.order(r)
	s.Interval[1], wb = c.order(r + int64(q))
	s.Resolution = max(wa, wb)
	s.Shortest, wa = c.shortest(tails, int64(q))
	s.Resolution = max(s.Resolution, wa)
	s.Histogram = displayHistogram(s, &t.grid, t.counts, t.below, t.above)
	return s, nil
}

// A cumulation is the occupied bins of a tally in order.
type cumulation struct {
	edge []float64 // bin i lies between edge[2i] and edge[2i+1]
	upTo []int64   // trials in bins before i; one more entry than bins
}

func (t *tally) cumulate() *cumulation {
	c := &cumulation{upTo: []int64{0}}
	put := func(lo, hi float64, n int64) {
		if n > 0 {
			c.edge = append(c.edge, lo, hi)
			c.upTo = append(c.upTo, c.upTo[len(c.upTo)-1]+n)
		}
	}
	put(t.min, t.low, t.below)
	for i, n := range t.counts {
		put(t.low+t.width*float64(i), t.low+t.width*float64(i+1), n)
	}
	put(t.low+t.width*Bins, t.max, t.above)
	return c
}

// share returns the value that a share p of the trials does not exceed; NaN without any.
func (t *tally) share(p float64) float64 {
	if t.n == 0 {
		return math.NaN()
	}
	v, _ := t.cumulate().order(rankFor(t.n, p))
	return v
}

// order estimates the k-th order statistic, counted from 1: trials are taken as
// evenly spread over their bin. It also returns the bin's width, which bounds the
// error.
func (c *cumulation) order(k int64) (value, width float64) {
	i, _ := slices.BinarySearch(c.upTo, k)
	return c.in(i-1, k)
}

// in is order for the k-th trial known to be in bin i.
func (c *cumulation) in(i int, k int64) (value, width float64) {
	lo, hi := c.edge[2*i], c.edge[2*i+1]
	f := (float64(k-c.upTo[i]) - 0.5) / float64(c.upTo[i+1]-c.upTo[i])
	return lo + f*(hi-lo), hi - lo
}

// shortest returns the shortest of the intervals that span q of the order
// statistics and begin at one of the first tails, tried where either end is the first
// trial of a bin, and the widest bin that its ends lie in. Its length exceeds the
// shortest's of all by at most twice that width.
func (c *cumulation) shortest(tails, q int64) (interval [2]float64, width float64) {
	best := math.Inf(1)
	try := func(i int, a int64, j int, b int64) {
		lo, w1 := c.in(i, a)
		hi, w2 := c.in(j, b)
		if hi-lo < best {
			best, interval, width = hi-lo, [2]float64{lo, hi}, max(w1, w2)
		}
	}
	bins := len(c.upTo) - 1
	// Left ends that begin a bin.
	j := 0
	for i := 0; i < bins && c.upTo[i] < tails; i++ {
		a := c.upTo[i] + 1
		for c.upTo[j+1] < a+q {
			j++
		}
		try(i, a, j, a+q)
	}
	// Right ends that begin a bin.
	i := 0
	for j := 0; j < bins; j++ {
		b := c.upTo[j] + 1
		a := b - q
		if a < 1 || a > tails {
			continue
		}
		for c.upTo[i+1] < a {
			i++
		}
		try(i, a, j, b)
	}
	return interval, width
}

// withoutSquares withdraws mean and standard deviation of trials whose squares
// overflow.
func (s *Sample) withoutSquares() {
	s.Value, s.U = math.NaN(), math.NaN()
	s.Warnings = append(s.Warnings, errors.New("some trials are so large that their squares overflow: no mean or standard deviation is stated"))
}

// withoutMoments withdraws the mean or the standard deviation of a sample that has
// none in the limit.
func (s *Sample) withoutMoments(mean, variance bool, names []string) {
	if variance {
		return
	}
	s.U = math.NaN()
	what := "standard deviation"
	if !mean {
		s.Value = math.NaN()
		what = "mean or standard deviation"
	}
	s.Warnings = append(s.Warnings, fmt.Errorf("no %s is stated: it does not exist for %s, whose t distribution has too few degrees of freedom; the intervals hold", what, strings.Join(names, ", ")))
}
