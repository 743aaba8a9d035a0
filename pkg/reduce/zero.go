package reduce

import (
	"context"
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/gonum/mat"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/lsq"
)

// zeroModel is what is subtracted from the response readings: the zero in time,
// found from the rows of kind "zero", and the blank, found from the rows of kind
// "blank" after the zero has been taken off them.
//
// Row i is lowered by at(i). Its error is −Σ_k weight[k]·unit[column[k]]·ε over the
// columns and weights of its shares, with independent ε of the standard uncertainty
// of one reading, shared by all rows that use the same column: the noise of zeros
// and blanks does not average out over the rows they serve.
type zeroModel struct {
	zero, blank *baseline   // nil: not in use
	through     [][]float64 // see blankThroughZero
	time        func(row int) float64
	rows        int
	entries     int // columns of all rows together
	unit        []float64
	coef        []float64 // one entry a column; the coefficients that have noise
	parts       []zeroPart

	// The shares of all rows, where memory allows; else nil, and they are found
	// again where they are wanted.
	start, column []int32
	weight        []float64
}

// keptShares is the number of rows up to which their shares are kept.
const keptShares = 1 << 17

// zeroPart is the share of one correction: the sums over the rows of its square,
// and of its variance in units of that of one reading.
type zeroPart struct {
	name              string
	squares, variance float64
}

// baseline is a zero or blank as a function of time, found from readings of it. At
// any time it is a value and weights on independent coefficients, whose errors
// are answer·(errors of the readings).
type baseline struct {
	unit   []float64   // standard uncertainty of each coefficient over that of one reading
	answer [][]float64 // ∂coefficient/∂reading [coefficient][reading]; nil: the identity
	at     func(t float64) (value float64, column []int, weight []float64)
}

// The methods of a baseline. Between two groups of zeros, "interpolate" is what
// weighing by the sequence ABA does, and with two readings between two zeros,
// evenly spaced, what ABBA does: a drift linear in time leaves the mean of the
// readings.
var baselineMethods = []string{"interpolate", "linear", "mean", "exponential"}

// fitZero prepares the zero and the blank, or returns nil when the bench has
// neither.
func (c *chain) fitZero() (*zeroModel, error) {
	zero, _, err := c.baselineOf("zero", bench.Zero, nil)
	if err != nil {
		return nil, err
	}
	blank, blankTimes, err := c.baselineOf("blank", bench.Blank, zero)
	if err != nil {
		return nil, err
	}
	if zero == nil && blank == nil {
		return nil, nil
	}
	z := &zeroModel{zero: zero, blank: blank, rows: len(c.record), time: func(row int) float64 { return c.timeOf(c.record[row]) }}
	if zero != nil {
		z.unit = append(z.unit, zero.unit...)
		z.parts = append(z.parts, zeroPart{name: "zero"})
	}
	if blank != nil {
		z.unit = append(z.unit, blank.unit...)
		z.parts = append(z.parts, zeroPart{name: "blank"})
	}
	z.coef = make([]float64, len(z.unit))
	z.through = blankThroughZero(blank, zero, blankTimes)
	keep := z.rows <= keptShares
	if keep {
		z.start = make([]int32, 1, z.rows+1)
		z.column, z.weight = make([]int32, 0, 2*z.rows), make([]float64, 0, 2*z.rows)
	}
	shares := z.newShares()
	for i := range z.rows {
		column, weight := shares.find(i, z.parts)
		z.entries += len(column)
		if keep {
			z.column, z.weight = append(z.column, column...), append(z.weight, weight...)
			z.start = append(z.start, int32(len(z.column)))
		}
	}
	return z, nil
}

// zeroShares finds the shares of rows; each goroutine has its own.
type zeroShares struct {
	z         *zeroModel
	sum, part *sparse
	column    []int32
	weight    []float64
}

func (z *zeroModel) newShares() *zeroShares {
	return &zeroShares{z: z, sum: newSparse(len(z.unit)), part: newSparse(len(z.unit))}
}

// shares returns what tells the shares of rows; nil when there is no zero model.
func (z *zeroModel) shares() *zeroShares {
	switch {
	case z == nil:
		return nil
	case z.start != nil:
		return &zeroShares{z: z}
	}
	return z.newShares()
}

// row is the columns and weights of row i, until the next call.
func (s *zeroShares) row(i int) (column []int32, weight []float64) {
	if z := s.z; z.start != nil {
		lo, hi := z.start[i], z.start[i+1]
		return z.column[lo:hi], z.weight[lo:hi]
	}
	return s.find(i, nil)
}

// find works out the shares of row i and, where parts are given, adds to them
// what each takes off this row.
func (s *zeroShares) find(i int, parts []zeroPart) (column []int32, weight []float64) {
	z, t := s.z, s.z.time(i)
	p, nz := 0, 0
	if z.zero != nil {
		nz = len(z.zero.unit)
		v, cols, w := z.zero.at(t)
		for k, col := range cols {
			s.sum.add(col, w[k])
			s.part.add(col, w[k])
		}
		s.take(parts, p, v)
		p++
	}
	if z.blank != nil {
		v, cols, w := z.blank.at(t)
		for k, col := range cols {
			s.sum.add(nz+col, w[k])
			s.part.add(nz+col, w[k])
			for j, f := range z.through[col] {
				if f != 0 {
					s.sum.add(j, -w[k]*f)
					s.part.add(j, -w[k]*f)
				}
			}
		}
		s.take(parts, p, v)
	}
	s.column, s.weight = s.sum.flush(s.column[:0], s.weight[:0])
	return s.column, s.weight
}

// take adds the value v of a part at one row, and its uncertainty from the
// weights gathered in s.part, which is emptied.
func (s *zeroShares) take(parts []zeroPart, p int, v float64) {
	if parts != nil {
		parts[p].squares += v * v
		var sum float64
		for _, col := range s.part.used {
			f := s.part.sum[col] * s.z.unit[col]
			sum += f * f
		}
		parts[p].variance += sum
	}
	s.part.clear()
}

// blankThroughZero is how the coefficients of the blank hang on those of the zero
// that was taken off its readings: [blank coefficient][zero coefficient].
func blankThroughZero(blank, zero *baseline, times []float64) [][]float64 {
	if blank == nil {
		return nil
	}
	out := make([][]float64, len(blank.unit))
	if zero == nil {
		return out
	}
	for c := range out {
		out[c] = make([]float64, len(zero.unit))
		for k, t := range times {
			l := 0.0
			switch {
			case blank.answer != nil:
				l = blank.answer[c][k]
			case c == k:
				l = 1
			}
			if l == 0 {
				continue
			}
			_, cols, w := zero.at(t)
			for n, col := range cols {
				out[c][col] += l * w[n]
			}
		}
	}
	return out
}

// timeOf is the time of a data record, or its number when there is no time.
func (c *chain) timeOf(i int) float64 {
	if r := &c.b.Rows; r.HasTime && !math.IsNaN(r.Time[i]) {
		return r.Time[i]
	}
	return float64(i)
}

// baselineOf finds the zero or the blank from the rows of one kind, less the
// baseline given. It returns nil when the bench does not use the correction.
func (c *chain) baselineOf(name string, kind bench.RowKind, less *baseline) (b *baseline, times []float64, err error) {
	r := &c.b.Rows
	ch := &c.b.Channels[c.resp]
	var records []int
	var readings []float64
	for i := range r.N {
		if r.Kind[i] == kind && !r.Excluded[i] && !math.IsNaN(ch.Readings[i]) {
			records = append(records, i)
		}
	}
	if !c.b.Corrections[name] {
		if len(records) > 0 {
			c.warnings = append(c.warnings, fmt.Errorf("%d %s readings are not used: switch the %s correction on ([corrections.%s] use = true) or leave them out", len(records), name, name, name))
		}
		return nil, nil, nil
	}
	if len(records) == 0 {
		return nil, nil, fmt.Errorf("%s/bench.toml: corrections.%s: there are no rows of kind %q to find the %s from; name the column in [rows] kind, or switch the correction off", c.b.Dir, name, name, name)
	}
	sort.SliceStable(records, func(a, b int) bool { return c.timeOf(records[a]) < c.timeOf(records[b]) })
	for _, i := range records {
		t, y := c.timeOf(i), ch.Readings[i]
		if less != nil {
			v, _, _ := less.at(t)
			y -= v
		}
		times, readings = append(times, t), append(readings, y)
	}
	if b, err = newBaseline(c.b.Options["corrections."+name+".method"], times, readings, name); err != nil {
		return nil, nil, fmt.Errorf("%s/bench.toml: corrections.%s.method: %w", c.b.Dir, name, err)
	}
	return b, times, nil
}

// newBaseline fits readings z at times t, in order of time.
func newBaseline(method string, t, z []float64, name string) (*baseline, error) {
	switch method {
	case "interpolate":
		return interpolated(t, z), nil
	case "mean", "linear":
		return straight(t, z, method == "linear", name)
	case "exponential":
		return exponential(t, z, name)
	}
	return nil, fmt.Errorf("%q is not known; use one of %v", method, baselineMethods)
}

// interpolated gives each time the readings before and after it, weighted by
// time; times outside take the nearest one.
func interpolated(t, z []float64) *baseline {
	b := &baseline{unit: make([]float64, len(z))}
	for k := range b.unit {
		b.unit[k] = 1
	}
	b.at = func(at float64) (float64, []int, []float64) {
		k := sort.SearchFloat64s(t, at)
		switch {
		case k == 0:
			return z[0], []int{0}, []float64{1}
		case k == len(t):
			return z[k-1], []int{k - 1}, []float64{1}
		}
		w := 0.5
		if d := t[k] - t[k-1]; d > 0 {
			w = (at - t[k-1]) / d
		}
		return (1-w)*z[k-1] + w*z[k], []int{k - 1, k}, []float64{1 - w, w}
	}
	return b
}

// straight is a mean or a straight line in time; its coefficients, the mean at the
// mean time and the slope, are independent.
func straight(t, z []float64, linear bool, name string) (*baseline, error) {
	n := float64(len(z))
	var mt, mz float64
	for k := range z {
		mt += t[k] / n
		mz += z[k] / n
	}
	b := &baseline{unit: []float64{1 / math.Sqrt(n)}, answer: [][]float64{make([]float64, len(z))}}
	for k := range z {
		b.answer[0][k] = 1 / n
	}
	if !linear {
		b.at = func(float64) (float64, []int, []float64) { return mz, []int{0}, []float64{1} }
		return b, nil
	}
	var sxx, sxz float64
	for k := range z {
		sxx += (t[k] - mt) * (t[k] - mt)
		sxz += (t[k] - mt) * (z[k] - mz)
	}
	if len(z) < 2 || sxx == 0 {
		return nil, fmt.Errorf("a linear drift needs %ss at two times or more; there are %d %s readings; use mean", name, len(z), name)
	}
	slope := sxz / sxx
	b.unit = append(b.unit, 1/math.Sqrt(sxx))
	row := make([]float64, len(z))
	for k := range z {
		row[k] = (t[k] - mt) / sxx
	}
	b.answer = append(b.answer, row)
	b.at = func(at float64) (float64, []int, []float64) {
		return mz + slope*(at-mt), []int{0, 1}, []float64{1, at - mt}
	}
	return b, nil
}

// exponential is a zero that settles, a + b·exp(−(t − t₀)/T), t₀ being the first
// reading of it, fitted with all three unknown. The coefficients carried are
// rotated by the Cholesky factor of their covariance, which makes them
// independent with unit variance.
func exponential(t, z []float64, name string) (*baseline, error) {
	n := len(z)
	span := t[n-1] - t[0]
	if n < 4 || !(span > 0) {
		return nil, fmt.Errorf("an exponential drift has three unknowns and needs four %s readings or more, spread in time; there are %d; use linear or interpolate", name, n)
	}
	u := make([]float64, n)
	for k := range u {
		u[k] = 1
	}
	// Times in units of the span, readings in units of their range, so that one
	// tolerance suits all; 1/T is fitted since the curve is smoother in it.
	lo, hi := z[0], z[0]
	for _, v := range z {
		lo, hi = math.Min(lo, v), math.Max(hi, v)
	}
	if !(hi > lo) {
		return nil, fmt.Errorf("an exponential drift can't be found from %s readings that are all the same; use mean", name)
	}
	scale := hi - lo
	s, y := make([]float64, n), make([]float64, n)
	for k := range z {
		s[k], y[k] = (t[k]-t[0])/span, (z[k]-z[n-1])/scale
	}
	fit := func(rate float64) (*lsq.Result, error) {
		p := &lsq.Problem{Y: y, U: u, Parameters: []lsq.Parameter{{Name: "zero"}, {Name: "amplitude", Start: y[0]}, {Name: "rate", Start: rate}},
			Eval: func(theta, f []float64, jac [][]float64) error {
				for k, x := range s {
					e := math.Exp(-theta[2] * x)
					f[k] = theta[0] + theta[1]*e
					if jac != nil {
						jac[0][k], jac[1][k], jac[2][k] = 1, e, -theta[1]*x*e
					}
				}
				return nil
			}}
		return lsq.Fit(context.Background(), p, lsq.Settings{})
	}
	var best *lsq.Result
	for _, rate := range []float64{0.5, 2, 8, 30} {
		r, err := fit(rate)
		if err != nil {
			return nil, err
		}
		if r.Status == lsq.Converged && (best == nil || r.ChiSquared < best.ChiSquared) {
			best = r
		}
	}
	if best == nil {
		return nil, fmt.Errorf("the %s readings do not settle exponentially: the fit finds no time constant; use linear or interpolate", name)
	}
	var chol mat.Cholesky
	if !chol.Factorize(best.Covariance) {
		return nil, fmt.Errorf("the %s readings can't tell an exponential drift from a straight line; use linear", name)
	}
	var l mat.TriDense
	chol.LTo(&l)
	// θ moves by (∂θ/∂y)·(errors of z)/scale and the baseline by scale·g·δθ, so
	// the scale cancels: answer = L⁻¹ ∂θ/∂y, by forward substitution.
	b := &baseline{unit: []float64{1, 1, 1}, answer: make([][]float64, 3)}
	sens := best.Sensitivity()
	for c := range 3 {
		row := make([]float64, n)
		for k := range n {
			v := sens[c][k]
			for j := range c {
				v -= l.At(c, j) * b.answer[j][k]
			}
			row[k] = v / l.At(c, c)
		}
		b.answer[c] = row
	}
	a, amp, rate := best.Values[0], best.Values[1], best.Values[2]
	b.at = func(at float64) (float64, []int, []float64) {
		x := (at - t[0]) / span
		e := math.Exp(-rate * x)
		g := [3]float64{1, e, -amp * x * e}
		w := make([]float64, 3)
		for c := range 3 {
			for j := c; j < 3; j++ {
				w[c] += g[j] * l.At(j, c)
			}
		}
		return z[n-1] + scale*(a+amp*e), []int{0, 1, 2}, w
	}
	return b, nil
}

// sparse gathers a few sums by column.
type sparse struct {
	sum  []float64
	seen []bool
	used []int
}

func newSparse(n int) *sparse { return &sparse{sum: make([]float64, n), seen: make([]bool, n)} }

func (s *sparse) add(column int, v float64) {
	if !s.seen[column] {
		s.seen[column] = true
		s.used = append(s.used, column)
	}
	s.sum[column] += v
}

func (s *sparse) clear() {
	for _, c := range s.used {
		s.sum[c], s.seen[c] = 0, false
	}
	s.used = s.used[:0]
}

// flush appends columns and sums, in order of column, and empties the sums.
func (s *sparse) flush(column []int32, weight []float64) ([]int32, []float64) {
	sort.Ints(s.used)
	for _, c := range s.used {
		column, weight = append(column, int32(c)), append(weight, s.sum[c])
	}
	s.clear()
	return column, weight
}

// at returns what row i is lowered by.
func (z *zeroModel) at(i int) float64 {
	t := z.time(i)
	var sum float64
	if z.zero != nil {
		v, _, _ := z.zero.at(t)
		sum += v
	}
	if z.blank != nil {
		v, _, _ := z.blank.at(t)
		sum += v
	}
	return sum
}

// name says what the model takes off, for the budget.
func (z *zeroModel) name() string {
	if len(z.parts) > 1 {
		return "zero and blank"
	}
	return z.parts[0].name
}

// subtracted is the root mean square of what a correction took off, and of its
// standard uncertainty for readings of the given noise; 0 when it is not in use.
func (z *zeroModel) subtracted(name string, noise float64) (size, u Number) {
	if z == nil {
		return 0, 0
	}
	for _, p := range z.parts {
		if p.name != name {
			continue
		}
		n := float64(z.rows)
		return Number(math.Sqrt(p.squares / n)), Number(noise * math.Sqrt(p.variance/n))
	}
	return 0, 0
}

// applyZero subtracts zero and blank from the response readings.
func (c *chain) applyZero() {
	if c.zero == nil {
		return
	}
	for i := range c.y {
		c.y[i] -= c.zero.at(i)
	}
}
