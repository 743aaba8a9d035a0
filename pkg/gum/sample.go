package gum

import "math"

// A Sample summarises Monte Carlo trials of one output (JCGM 101:2008 7.6, 7.7).
type Sample struct {
	Trials      int        // that were made
	Undefined   int        // of these, that gave NaN or an infinity and are left out of all else
	Value       float64    // mean; NaN when the output has none
	U           float64    // standard deviation; NaN when the output has none
	Probability float64    // coverage probability p of both intervals
	Interval    [2]float64 // probabilistically symmetric
	Shortest    [2]float64 // shortest
	Min, Max    float64    // extreme trials; in a run that streams, the edges of the bins they lie in
	Resolution  float64    // largest distance of an interval's end from the order statistic it stands for; 0 when exact
	Histogram   Histogram  // for display
	Warnings    []error
}

// A Histogram counts trials in bins of equal width, for display.
type Histogram struct {
	Low, Width   float64 // left edge of the first bin; width of each
	Counts       []int64
	Below, Above int64 // trials outside
}

// A Comparison holds the validation of the law by Monte Carlo, JCGM 101:2008
// clause 8.
type Comparison struct {
	Delta  float64 // numerical tolerance δ of u, half a unit of its last significant digit
	DLow   float64 // |y − U_p − y_low|
	DHigh  float64 // |y + U_p − y_high|
	Agrees bool    // both within Delta
	Digits int     // significant digits of u taken as meaningful
}

// Compare validates the law's interval by the symmetric interval of s: the
// tolerance is half a unit of the last of the given significant digits of the
// law's u (JCGM 101:2008 7.9.2, 8.1). digits below 1 are taken as 1.
func Compare(l *Law, s *Sample, digits int) Comparison {
	digits = max(digits, 1)
	c := Comparison{
		Delta:  tolerance(l.U, digits),
		DLow:   math.Abs(l.Interval[0] - s.Interval[0]),
		DHigh:  math.Abs(l.Interval[1] - s.Interval[1]),
		Digits: digits,
	}
	c.Agrees = c.DLow <= c.Delta && c.DHigh <= c.Delta
	return c
}

// tolerance returns δ = ½·10^l where u = c·10^l, c an integer of the given number
// of digits (JCGM 101:2008 7.9.2). It is 0 for u = 0.
func tolerance(u float64, digits int) float64 {
	if !(u > 0) || math.IsInf(u, 1) {
		return 0
	}
	l := int(math.Floor(math.Log10(u))) - digits + 1
	// Rounding to that many digits may carry into the next decade.
	if c := math.Round(u / math.Pow10(l)); c >= math.Pow10(digits) {
		l++
	}
	return 0.5 * math.Pow10(l)
}
