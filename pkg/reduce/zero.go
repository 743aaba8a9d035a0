package reduce

import (
	"fmt"
	"math"
	"sort"

	"example.org/guardring/pkg/bench"
)

// zeroModel is the zero of the response in time, found from the readings of
// kind "zero". Row i is corrected by Σ_k w_k z_k over the zeros it uses; the
// noise of those zeros is shared by all rows that use them.
type zeroModel struct {
	method string
	record []int     // data records of the zeros
	t      []float64 // s; the record's number when there is no time
	z      []float64 // readings, SI
	// The correction is a sum of independent coefficients: row i is lowered by
	// Σ weight[i][j]·coef[column[i][j]], and coefficient j has standard uncertainty
	// noise of one zero × unit[j].
	start  []int
	column []int
	weight []float64
	coef   []float64
	unit   []float64
}

// fitZero prepares the zero correction, or returns nil when the bench has none.
func (c *chain) fitZero() (*zeroModel, error) {
	on := c.b.Corrections["zero"]
	r := &c.b.Rows
	ch := &c.b.Channels[c.resp]
	z := &zeroModel{method: c.b.Options["corrections.zero.method"]}
	for i := range r.N {
		if r.Kind[i] == bench.Zero && !r.Excluded[i] && !math.IsNaN(ch.Readings[i]) {
			z.record = append(z.record, i)
		}
	}
	if !on {
		if len(z.record) > 0 {
			c.warnings = append(c.warnings, fmt.Errorf("%d zero readings are not used: switch the zero correction on ([corrections.zero] use = true) or leave them out", len(z.record)))
		}
		return nil, nil
	}
	if len(z.record) == 0 {
		return nil, fmt.Errorf("%s/bench.toml: corrections.zero: there are no rows of kind \"zero\" to find the zero from; name the column in [rows] kind, or switch the correction off", c.b.Dir)
	}
	time := func(i int) float64 {
		if r.HasTime && !math.IsNaN(r.Time[i]) {
			return r.Time[i]
		}
		return float64(i)
	}
	sort.SliceStable(z.record, func(a, b int) bool { return time(z.record[a]) < time(z.record[b]) })
	for _, i := range z.record {
		z.t = append(z.t, time(i))
		z.z = append(z.z, ch.Readings[i])
	}
	rows := make([]float64, len(c.record))
	for k, i := range c.record {
		rows[k] = time(i)
	}
	switch z.method {
	case "interpolate":
		z.interpolate(rows)
	case "mean", "linear":
		if err := z.line(rows); err != nil {
			return nil, fmt.Errorf("%s/bench.toml: corrections.zero.method: %w", c.b.Dir, err)
		}
	default:
		return nil, fmt.Errorf("%s/bench.toml: corrections.zero.method: %q is not known; use interpolate, linear or mean", c.b.Dir, z.method)
	}
	return z, nil
}

// interpolate gives each row the zeros before and after it, weighted by time;
// rows outside the zeros take the nearest one.
func (z *zeroModel) interpolate(rows []float64) {
	z.coef = z.z
	z.unit = make([]float64, len(z.z))
	for k := range z.unit {
		z.unit[k] = 1
	}
	for _, t := range rows {
		z.start = append(z.start, len(z.column))
		k := sort.SearchFloat64s(z.t, t)
		switch {
		case k == 0:
			z.column, z.weight = append(z.column, 0), append(z.weight, 1)
		case k == len(z.t):
			z.column, z.weight = append(z.column, k-1), append(z.weight, 1)
		default:
			w := 0.5
			if d := z.t[k] - z.t[k-1]; d > 0 {
				w = (t - z.t[k-1]) / d
			}
			z.column = append(z.column, k-1, k)
			z.weight = append(z.weight, 1-w, w)
		}
	}
	z.start = append(z.start, len(z.column))
}

// line fits a mean or a straight line in time; its coefficients, the mean at the
// mean time and the slope, are independent.
func (z *zeroModel) line(rows []float64) error {
	n := float64(len(z.z))
	var mt, mz float64
	for k := range z.z {
		mt += z.t[k] / n
		mz += z.z[k] / n
	}
	z.coef, z.unit = []float64{mz}, []float64{1 / math.Sqrt(n)}
	linear := z.method == "linear"
	if linear {
		var sxx, sxz float64
		for k := range z.z {
			sxx += (z.t[k] - mt) * (z.t[k] - mt)
			sxz += (z.t[k] - mt) * (z.z[k] - mz)
		}
		if len(z.z) < 2 || sxx == 0 {
			return fmt.Errorf("a linear drift needs zeros at two times or more; there are %d zero readings; use mean", len(z.z))
		}
		z.coef, z.unit = append(z.coef, sxz/sxx), append(z.unit, 1/math.Sqrt(sxx))
	}
	for _, t := range rows {
		z.start = append(z.start, len(z.column))
		z.column, z.weight = append(z.column, 0), append(z.weight, 1)
		if linear {
			z.column, z.weight = append(z.column, 1), append(z.weight, t-mt)
		}
	}
	z.start = append(z.start, len(z.column))
	return nil
}

// at returns the zero of row i.
func (z *zeroModel) at(i int) float64 {
	var v float64
	for k := z.start[i]; k < z.start[i+1]; k++ {
		v += z.weight[k] * z.coef[z.column[k]]
	}
	return v
}

// applyZero subtracts the zero from the response readings.
func (c *chain) applyZero() {
	c.y = append([]float64(nil), c.yr...)
	if c.zero == nil {
		return
	}
	for i := range c.y {
		c.y[i] -= c.zero.at(i)
	}
}
