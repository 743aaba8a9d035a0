package reduce

import (
	"math"
	"sort"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/lsq"
)

// Rows are the readings as they stand after the fit, in acquisition order, one
// entry a data record of kind "reading" (zero and blank records serve the
// corrections and have no residual). Excluded rows stay, marked; their
// residuals are against the fit that left them out.
type Rows struct {
	N        int
	Record   []int // index into the bench's records
	Excluded []bool
	// Predictors[c][i] is the true value of predictor c (named by
	// PredictorNames), SI; Response the corrected reading; Fitted the prediction;
	// U the effective standard uncertainty of one reading, independent part.
	PredictorNames []string
	ResponseName   string
	Predictors     [][]float64
	Response       []float64
	Fitted         []float64
	U              []float64
	// Residual is Response − Fitted, SI; Standardised is that in units of
	// its standard uncertainty, freed of what readings share (W(y − f) with
	// WᵀW = Σ⁻¹; for excluded rows over the marginal uncertainty); Leverage and
	// Studentised are those of the whitened fit (NaN for excluded rows).
	Residual, Standardised, Leverage, Studentised []float64
}

// rows lays out the readings as they stand after the fit, excluded ones too.
func (c *chain) rows(r *lsq.Result, out *Rows) {
	b := c.b
	q := append([]float64(nil), c.q...)
	for j, f := range c.free {
		q[f] = r.Values[j]
	}
	out.ResponseName = c.m.Response
	out.PredictorNames = append([]string(nil), c.m.Predictors...)
	used := make([]int, b.Rows.N) // index in the fit plus one
	for i, rec := range c.record {
		used[rec] = i + 1
	}
	for rec := range b.Rows.N {
		if used[rec] > 0 || (b.Rows.Excluded[rec] && c.complete(rec)) {
			out.Record = append(out.Record, rec)
		}
	}
	out.N = len(out.Record)
	out.Excluded = make([]bool, out.N)
	if out.N == len(c.record) && c.readY == nil {
		// Nothing was left out: the rows are those of the fit, shared with it.
		out.Record, out.Predictors, out.Response, out.Fitted = c.record, c.x[:len(c.pred):len(c.pred)], c.y, r.Fitted
		out.Residual, out.Leverage, out.Studentised, out.U = r.Residuals, r.Leverage, r.Studentised, r.Weights
		for i, w := range r.Weights {
			out.U[i] = 1 / math.Sqrt(w)
		}
		r.Weights, r.Standardised, r.CooksDistance = nil, nil, nil // what is left has no use here
		out.Standardised = r.Whitened()
		return
	}
	all := grid(8, out.N)
	out.Response, out.Fitted, out.U, out.Residual = all[0], all[1], all[2], all[3]
	out.Standardised, out.Leverage, out.Studentised = all[4], all[5], all[6]
	out.Predictors = grid(len(c.pred), out.N)
	x := make([][]float64, len(c.x))
	for p := range x {
		x[p] = make([]float64, 1)
	}
	whitened := r.Whitened()
	one := newPredictor(c.m, len(q), len(c.x), nil)
	g, o := gainOffset(&b.Channels[c.resp])
	f := make([]float64, 1)
	for n, rec := range out.Record {
		if i := used[rec] - 1; i >= 0 {
			for p := range c.pred {
				out.Predictors[p][n] = c.x[p][i]
			}
			out.Response[n], out.Fitted[n], out.Residual[n] = c.y[i], r.Fitted[i], r.Residuals[i]
			if c.readY != nil {
				for p := range c.pred {
					out.Predictors[p][n] = c.readX[p][i]
				}
				out.Response[n], out.Fitted[n] = c.readY[i], c.readY[i]-r.Residuals[i]
			}
			out.U[n] = 1 / math.Sqrt(r.Weights[i])
			out.Standardised[n], out.Leverage[n], out.Studentised[n] = whitened[i], r.Leverage[i], r.Studentised[i]
			continue
		}
		out.Excluded[n] = true
		for p, ci := range c.pred {
			gp, op := gainOffset(&b.Channels[ci])
			x[p][0] = gp*b.Channels[ci].Readings[rec] + op
			out.Predictors[p][n] = x[p][0]
		}
		extra := x[len(c.pred):]
		if c.m.TimeDependent {
			extra[0][0] = b.Rows.Time[rec]
			extra = extra[1:]
		}
		if c.series != nil {
			extra[0][0] = float64(c.series.of[rec])
		}
		one.rows(q, x, 0, 1, f, nil)
		toIndication(g, o, 0, 1, f, nil)
		y := b.Channels[c.resp].Readings[rec] - c.zeroNear(rec)
		out.Response[n], out.Fitted[n], out.Residual[n] = y, f[0], y-f[0]
		out.U[n], out.Leverage[n], out.Studentised[n] = math.NaN(), math.NaN(), math.NaN()
		out.Standardised[n] = math.NaN()
		if i := c.nearest(rec); i >= 0 {
			out.U[n] = 1 / math.Sqrt(r.Weights[i])
			out.Standardised[n] = out.Residual[n] / out.U[n]
		}
	}
}

// complete reports whether an excluded record is a reading with all its values.
func (c *chain) complete(rec int) bool {
	b := c.b
	if k := b.Rows.Kind[rec]; k != bench.Reading && k != bench.Overrange {
		return false
	}
	for _, p := range append([]int{c.resp}, c.pred...) {
		if v := b.Channels[p].Readings[rec]; math.IsNaN(v) {
			return false
		}
	}
	if c.m.TimeDependent && math.IsNaN(b.Rows.Time[rec]) {
		return false
	}
	return true
}

// nearest is the row of the fit next to a record that was left out; its weight
// and zero stand in for those the record would have had.
func (c *chain) nearest(rec int) int {
	i := sort.SearchInts(c.record, rec)
	if i == len(c.record) || (i > 0 && rec-c.record[i-1] <= c.record[i]-rec) {
		i--
	}
	return i
}

// zeroNear is the zero correction at a record that was left out.
func (c *chain) zeroNear(rec int) float64 {
	if c.zero == nil {
		return 0
	}
	if i := c.nearest(rec); i >= 0 {
		return c.zero.at(i)
	}
	return 0
}

// recordRows lists the rows for the record.
func (r *Result) recordRows() []RecordRow {
	b := r.Bench
	out := make([]RecordRow, r.Rows.N)
	for n := range out {
		rec := r.Rows.Record[n]
		file, line := b.Rows.Place(rec)
		row := RecordRow{Row: rec + 1, File: file, Line: line, Kind: b.Rows.Kind[rec].String(),
			Excluded: r.Rows.Excluded[n], Channels: map[string]Number{}, Response: Number(r.Rows.Response[n]), Fitted: Number(r.Rows.Fitted[n]),
			U: Number(r.Rows.U[n]), Residual: Number(r.Rows.Residual[n]), Standardised: Number(r.Rows.Standardised[n]),
			Leverage: Number(r.Rows.Leverage[n]), Studentised: Number(r.Rows.Studentised[n])}
		for p, name := range r.Rows.PredictorNames {
			row.Channels[name] = Number(r.Rows.Predictors[p][n])
		}
		out[n] = row
	}
	return out
}
