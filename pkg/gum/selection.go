package gum

import (
	"errors"
	"fmt"
	"math"
	"slices"
)

// Summarise returns mean, standard deviation and both coverage intervals for the
// probability p of the trials y, exact by selection (JCGM 101:2008 7.5 to 7.7). It
// leaves y as it is. Trials that are NaN or infinite are counted and left out;
// more than MaxUndefined of them is an error, as are fewer than two trials left
// or fewer than p needs.
func Summarise(y []float64, p float64) (*Sample, error) {
	if err := checkProbability(p); err != nil {
		return nil, err
	}
	s := &Sample{Trials: len(y), Probability: p}
	work := make([]float64, 0, len(y))
	for _, v := range y {
		if v-v == 0 {
			work = append(work, v)
		}
	}
	s.Undefined = len(y) - len(work)
	if err := s.checkUndefined(); err != nil {
		return nil, err
	}
	s.moments(work)
	return s, s.selectIntervals(work)
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

// moments sets Value and U by JCGM 101:2008 (16) and (17), in two passes, and the
// extremes.
func (s *Sample) moments(y []float64) {
	n := float64(len(y))
	s.Min, s.Max = math.Inf(1), math.Inf(-1)
	var sum float64
	centre := 0.0
	if len(y) > 0 {
		centre = y[0]
	}
	for _, v := range y {
		sum += v - centre
		s.Min, s.Max = min(s.Min, v), max(s.Max, v)
	}
	s.Value = centre + sum/n
	var d1, d2 float64
	for _, v := range y {
		d := v - s.Value
		d1 += d
		d2 += d * d
	}
	s.Value += d1 / n
	s.U = math.Sqrt(max(0, d2-d1*d1/n) / (n - 1))
}

// selectIntervals sets both intervals from the trials y, which it reorders.
func (s *Sample) selectIntervals(y []float64) error {
	n := len(y)
	q, err := coverCount(n, s.Probability)
	if err != nil {
		return err
	}
	tails := n - q // how many order statistics can be a left end, and a right end
	partition(y, tails, q)
	low, high := y[:tails], y[q:]
	slices.Sort(low)
	slices.Sort(high)
	s.Interval, s.Shortest = intervalsOf(low, high)
	s.Histogram = histogramOf(y, s.Min, s.Max, s.Interval)
	return nil
}

// coverCount returns q, the number of trials that an interval for probability p of
// n trials spans: the integer part of pn + 1/2 (JCGM 101:2008 7.7.1). Too few
// trials for a p is an error.
func coverCount(n int, p float64) (int, error) {
	if n < 2 {
		return 0, errors.New("fewer than two trials: an interval needs more")
	}
	q := int(p*float64(n) + 0.5)
	if q < 1 || q >= n {
		return 0, fmt.Errorf("%d trials are too few for a coverage probability of %v: at least %.0f are needed, and 1e4 or 100/(1-p) are recommended (JCGM 101:2008 7.9.4)",
			n, p, math.Ceil(1/min(1-p, p)))
	}
	return q, nil
}

// intervalsOf takes the lowest n−q order statistics and the highest n−q, each in
// order, and returns the probabilistically symmetric interval (JCGM 101:2008 7.7.2,
// with r the integer part of (n−q+1)/2) and the shortest (7.7.3).
func intervalsOf(low, high []float64) (symmetric, shortest [2]float64) {
	tails := len(low)
	r := (tails+1)/2 - 1 // counted from 0
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

// partition reorders y so that its lowest a values come first and its highest
// len(y)−b last.
func partition(y []float64, a, b int) {
	if a >= b {
		slices.Sort(y)
		return
	}
	selectNth(y, a)
	selectNth(y[a:], b-a)
}

// selectNth reorders y so that y[k] is the k-th order statistic, nothing before it
// is larger and nothing after it smaller: Hoare's selection with the pivot of Floyd
// and Rivest, "Expected time bounds for selection", Commun. ACM 18 (1975) 165–172.
func selectNth(y []float64, k int) {
	lo, hi := 0, len(y)-1
	if k > hi {
		return
	}
	for lo < hi {
		if hi-lo < 32 {
			slices.Sort(y[lo : hi+1])
			return
		}
		if n := float64(hi - lo + 1); n > 600 {
			// Order a sample first, so that the pivot falls close to the rank sought.
			i := float64(k - lo + 1)
			z := math.Log(n)
			size := 0.5 * math.Exp(2*z/3)
			sd := 0.5 * math.Sqrt(z*size*(n-size)/n)
			if i < n/2 {
				sd = -sd
			}
			from := max(lo, int(float64(k)-i*size/n+sd))
			to := min(hi, int(float64(k)+(n-i)*size/n+sd))
			if from <= k && k <= to && to-from < hi-lo {
				selectNth(y[from:to+1], k-from)
			}
		}
		pivot := y[k]
		i, j := lo, hi
		for i <= j {
			for y[i] < pivot {
				i++
			}
			for y[j] > pivot {
				j--
			}
			if i <= j {
				y[i], y[j] = y[j], y[i]
				i++
				j--
			}
		}
		switch {
		case k <= j:
			hi = j
		case k >= i:
			lo = i
		default:
			return
		}
	}
}

// displayBins is the number of bins of a histogram for display.
const displayBins = 200

// histogramOf counts y for display over one and a half times the symmetric
// interval, or the range of y where that is less.
func histogramOf(y []float64, lowest, highest float64, interval [2]float64) Histogram {
	h := displayRange(lowest, highest, interval)
	for _, v := range y {
		t := (v - h.Low) / h.Width
		switch {
		case t < 0:
			h.Below++
		case t < float64(len(h.Counts)):
			h.Counts[int(t)]++
		case v <= h.Low+h.Width*float64(len(h.Counts)):
			h.Counts[len(h.Counts)-1]++
		default:
			h.Above++
		}
	}
	return h
}

// displayRange lays out an empty histogram.
func displayRange(lowest, highest float64, interval [2]float64) Histogram {
	margin := (interval[1] - interval[0]) / 2
	lo, hi := max(lowest, interval[0]-margin), min(highest, interval[1]+margin)
	if !(hi > lo) { // all trials equal
		return Histogram{Low: lo - 0.5*math.Max(math.Abs(lo), 1)*1e-12, Width: math.Max(math.Abs(lo), 1) * 1e-12, Counts: make([]int64, 1)}
	}
	return Histogram{Low: lo, Width: (hi - lo) / displayBins, Counts: make([]int64, displayBins)}
}
