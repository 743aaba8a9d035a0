package gum

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"sync"
	"sync/atomic"
)

// Summarise returns mean, standard deviation and both coverage intervals for the
// probability p of the trials y, exact by selection (JCGM 101:2008 7.5 to 7.7). It
// leaves y as it is. Trials that are NaN or infinite are counted and left out;
// more than MaxUndefined of them is an error, as are fewer trials than p needs.
func Summarise(y []float64, p float64) (*Sample, error) {
	if !(p > 0 && p < 1) {
		return nil, fmt.Errorf("probability %v must lie between 0 and 1", p)
	}
	return summarise(y, p, 1, true)
}

// checkUndefined reports too many undefined trials, and warns of any.
func (s *Sample) checkUndefined() error {
	if s.Undefined == 0 {
		return nil
	}
	err := fmt.Errorf("the output is undefined (NaN or infinite) in %d of %d trials: an input's distribution reaches where the formula has no value", s.Undefined, s.Trials)
	if float64(s.Undefined) > MaxUndefined*float64(s.Trials) {
		return fmt.Errorf("%w; more than %g of the trials is too many for a result: narrow the distribution or restate the formula", err, MaxUndefined)
	}
	s.Warnings = append(s.Warnings, fmt.Errorf("%w; they are left out", err))
	return nil
}

// coverCount returns q, the number of trials that an interval for probability p of
// n trials spans: the integer part of pn + 1/2 (JCGM 101:2008 7.7.2). Too few
// trials for a p is an error.
func coverCount(n int, p float64) (int, error) {
	if n < 2 {
		return 0, errors.New("fewer than two trials: an interval needs more")
	}
	q := int(p*float64(n) + 0.5)
	if q < 1 || q >= n {
		return 0, fmt.Errorf("%d trials are too few for a coverage probability of %v: at least %.0f are needed, and 10000 or 100/(1-p) are recommended (JCGM 101:2008 7.9.4)",
			n, p, math.Ceil(1/min(1-p, p)))
	}
	return q, nil
}

// selectionBins is the number of bins that sort trials roughly before the tails
// are put in order, selectionSample how many trials lay them out.
const (
	selectionBins   = 1 << 13
	selectionSample = 2000
)

// A segment is what one run of trials contributes to a summary.
type segment struct {
	n         int
	mean, m2  float64 // mean, and sum of squared deviations from it
	lo, hi    float64
	undefined int
}

// binOf returns the bin of v: 0 below the grid, selectionBins+1 above. It never
// falls as v grows, so that bins are in the order of the values.
func binOf(g *grid, inverse, v float64) int {
	x := (v-g.low)*inverse + 1
	if x < 1 {
		return 0
	}
	if x < selectionBins+1 {
		return int(x)
	}
	return selectionBins + 1
}

// summarise is Summarise on several processors; their number does not change a bit
// of the answer. Whether there are too many undefined trials is judged on request.
// Trials are counted in rough bins; the bins that hold the two tails
// are gathered and ordered, which gives the order statistics that the intervals
// need without ordering the rest.
func summarise(y []float64, p float64, workers int, judge bool) (*Sample, error) {
	s := &Sample{Trials: len(y), Probability: p}
	g := roughGrid(y, p)
	inverse := 1 / g.width
	segments := make([]segment, (len(y)+BlockTrials-1)/BlockTrials)
	workers = max(1, min(workers, len(segments)))
	counts := make([][]int32, workers)
	parallel(workers, len(segments), func(w, i int) {
		if counts[w] == nil {
			counts[w] = make([]int32, selectionBins+2)
		}
		segments[i] = segmentOf(y[i*BlockTrials:min((i+1)*BlockTrials, len(y))], &g, inverse, counts[w])
	})
	all := make([]int, selectionBins+2)
	for _, c := range counts {
		for b, n := range c {
			all[b] += int(n)
		}
	}
	s.combine(segments)
	if judge {
		if err := s.checkUndefined(); err != nil {
			return nil, err
		}
	}
	n := len(y) - s.Undefined
	q, err := coverCount(n, p)
	if err != nil {
		return nil, err
	}
	tails := n - q // how many order statistics can be a left end, and a right end
	var low, high []float64
	parallel(min(workers, 2), 2, func(_, side int) {
		if side == 0 {
			low = lowest(y, &g, inverse, all, tails)
		} else {
			high = highest(y, &g, inverse, all, tails)
		}
	})
	s.Interval, s.Shortest = intervalsOf(low, high)
	s.Histogram = displayHistogram(s, &g, all[1:selectionBins+1], all[0], all[selectionBins+1])
	return s, nil
}

// parallel calls do(worker, i) for i from 0 to n−1.
func parallel(workers, n int, do func(w, i int)) {
	if workers <= 1 {
		for i := range n {
			do(0, i)
		}
		return
	}
	var next atomic.Int64
	var wg sync.WaitGroup
	for w := range workers {
		wg.Go(func() {
			for i := int(next.Add(1)) - 1; i < n; i = int(next.Add(1)) - 1 {
				do(w, i)
			}
		})
	}
	wg.Wait()
}

// roughGrid lays selectionBins bins over y by trials spread evenly through it.
func roughGrid(y []float64, p float64) grid {
	step := max(1, len(y)/selectionSample)
	few := make([]float64, 0, len(y)/step+1)
	for i := 0; i < len(y); i += step {
		few = append(few, y[i])
	}
	return newGrid(few, p, selectionBins)
}

// segmentOf sums up y about its own mean and counts it in bins.
func segmentOf(y []float64, g *grid, inverse float64, counts []int32) segment {
	g0, c := *g, counts[:selectionBins+2]
	s := segment{lo: math.Inf(1), hi: math.Inf(-1)}
	var sum float64
	for _, v := range y {
		if v-v != 0 {
			s.undefined++
			continue
		}
		if v < s.lo {
			s.lo = v
		}
		if v > s.hi {
			s.hi = v
		}
		sum += v - g0.centre
		c[binOf(&g0, inverse, v)]++
	}
	s.n = len(y) - s.undefined
	if s.n == 0 {
		return s
	}
	n := float64(s.n)
	m := g0.centre + sum/n
	d1, d2 := deviations(y, m)
	if d2-d2 != 0 { // undefined trials, or squares that overflow
		d1, d2 = 0, 0
		for _, v := range y {
			if d := v - m; d-d == 0 {
				d1 += d
				d2 += d * d
			}
		}
	}
	s.mean = m + d1/n
	s.m2 = d2 - d1*d1/n
	return s
}

// combine joins segments in order: Chan, Golub and LeVeque, "Algorithms for
// computing the sample variance", Amer. Statist. 37 (1983) 242–247, equations (1.5a,
// b).
func (s *Sample) combine(segments []segment) {
	var n, mean, m2 float64
	s.Min, s.Max = math.Inf(1), math.Inf(-1)
	for _, g := range segments {
		s.Undefined += g.undefined
		if g.n == 0 {
			continue
		}
		b := float64(g.n)
		d := g.mean - mean
		m2 += g.m2 + d*d*n*b/(n+b)
		mean += d * b / (n + b)
		n += b
		s.Min, s.Max = min(s.Min, g.lo), max(s.Max, g.hi)
	}
	s.Value, s.U = mean, math.Sqrt(max(0, m2)/(n-1))
	if m2-m2 != 0 {
		s.withoutSquares()
	}
}

// lowest returns the lowest k trials in order.
func lowest(y []float64, g *grid, inverse float64, counts []int, k int) []float64 {
	last, n := 0, counts[0]
	for n < k {
		last++
		n += counts[last]
	}
	limit := math.Inf(1) // nothing above it is in the bins up to last
	if last <= selectionBins {
		limit = g.low + g.width*float64(last+1)
	}
	at := make([]int, last+1) // where the next trial of each bin goes
	for b := 1; b <= last; b++ {
		at[b] = at[b-1] + counts[b-1]
	}
	tail := make([]float64, n)
	for _, v := range y {
		if v <= limit && v-v == 0 {
			if b := binOf(g, inverse, v); b <= last {
				tail[at[b]] = v
				at[b]++
			}
		}
	}
	orderBins(tail, at)
	return tail[:k]
}

// highest returns the highest k trials in order.
func highest(y []float64, g *grid, inverse float64, counts []int, k int) []float64 {
	first, n := selectionBins+1, counts[selectionBins+1]
	for n < k {
		first--
		n += counts[first]
	}
	limit := math.Inf(-1)
	if first > 0 {
		limit = g.low + g.width*float64(first-2)
	}
	at := make([]int, selectionBins+2-first)
	for b := 1; b < len(at); b++ {
		at[b] = at[b-1] + counts[first+b-1]
	}
	tail := make([]float64, n)
	for _, v := range y {
		if v >= limit && v-v == 0 {
			if b := binOf(g, inverse, v) - first; b >= 0 {
				tail[at[b]] = v
				at[b]++
			}
		}
	}
	orderBins(tail, at)
	return tail[n-k:]
}

// orderBins sorts each bin of tail; end holds where each ends.
func orderBins(tail []float64, end []int) {
	from := 0
	for _, to := range end {
		if to-from > 1 {
			slices.Sort(tail[from:to])
		}
		from = to
	}
}

// intervalsOf takes the lowest n−q order statistics and the highest n−q, each in
// order, and returns the probabilistically symmetric interval (JCGM 101:2008 7.7.2,
// with r the integer part of (n−q+1)/2) and the shortest (same clause).
func intervalsOf(low, high []float64) (symmetric, shortest [2]float64) {
	r := (len(low)+1)/2 - 1 // counted from 0
	symmetric = [2]float64{low[r], high[r]}
	best := math.Inf(1)
	for i, a := range low {
		if w := high[i] - a; w < best {
			best = w
			shortest = [2]float64{a, high[i]}
		}
	}
	return symmetric, shortest
}

// kth returns the k-th smallest of the finite numbers y, counted from 0.
func kth(y []float64, k int) float64 {
	g := roughGrid(y, 0.95)
	inverse := 1 / g.width
	counts := make([]int, selectionBins+2)
	for _, v := range y {
		counts[binOf(&g, inverse, v)]++
	}
	b, before := 0, 0
	for before+counts[b] <= k {
		before += counts[b]
		b++
	}
	in := make([]float64, 0, counts[b])
	for _, v := range y {
		if binOf(&g, inverse, v) == b {
			in = append(in, v)
		}
	}
	slices.Sort(in)
	return in[k-before]
}

// displayBins is about how many bins a histogram for display has.
const displayBins = 200

// displayHistogram gathers bins into a histogram for display over the symmetric
// interval and half of it on either side, or the range of the trials where that is
// less.
func displayHistogram[T int | int64](s *Sample, g *grid, counts []T, below, above T) Histogram {
	bins := len(counts)
	margin := (s.Interval[1] - s.Interval[0]) / 2
	bin := func(x float64) int { return int(max(0, min(float64(bins-1), math.Floor((x-g.low)/g.width)))) }
	first, last := bin(max(s.Min, s.Interval[0]-margin)), bin(min(s.Max, s.Interval[1]+margin))
	group := (last-first)/displayBins + 1
	h := Histogram{Low: g.low + g.width*float64(first), Width: g.width * float64(group), Below: int64(below), Above: int64(above)}
	h.Counts = make([]int64, (last-first)/group+1)
	for i, n := range counts {
		switch k := (i - first) / group; {
		case i < first:
			h.Below += int64(n)
		case k < len(h.Counts):
			h.Counts[k] += int64(n)
		default:
			h.Above += int64(n)
		}
	}
	return h
}
