package reduce

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/lsq"
	"example.org/guardring/pkg/si"
)

// component is one source of differences between rows: independent from row to
// row, or shared by the rows of a group. It acts on the response reading, or on
// the true value of a predictor and through ∂f/∂x on the response.
type component struct {
	name    string
	channel string
	unit    si.Unit
	on      int // −1 the response, else the predictor
	dof     float64
	flat    bool // rectangular (resolution), else normal
	// The standard uncertainty of a row, SI, on the scale it acts on, is
	// gain·√(fixed² + (relative·reading)²).
	gain, fixed, relative float64
	readings              []float64
	at                    []int   // where the reading of a row stands in readings; nil: in order
	group                 []int32 // group of each row; nil: independent
	count                 int     // number of groups
	column                int     // first column in the effects
	unknown               bool    // noise of the response, from the residuals
}

// u is the standard uncertainty of row i; for a relative error of a group it has
// the sign of the reading.
func (k *component) u(i int) float64 {
	if k.relative == 0 {
		return k.gain * k.fixed
	}
	if k.at != nil {
		i = k.at[i]
	}
	r := k.relative * k.readings[i]
	if k.group != nil {
		return k.gain * r
	}
	return k.gain * math.Sqrt(k.fixed*k.fixed+r*r)
}

// zeroComponent marks the component of the zero correction.
const zeroComponent = "zero"

// listComponents gathers noise, resolution and grouped effects.
func (c *chain) listComponents() error {
	n := len(c.record)
	rows := append([]int{c.resp}, c.pred...)
	for k, ci := range rows {
		ch := &c.b.Channels[ci]
		on := k - 1
		readings, at, gain := ch.Readings, c.record, 1.0
		if on >= 0 {
			readings, at = c.xr[on], nil
			gain, _ = gainOffset(ch)
			gain = math.Abs(gain)
		}
		if on < 0 && ch.FromResiduals {
			c.comps = append(c.comps, component{name: ch.Name + " noise", channel: ch.Name, unit: ch.Unit, on: on,
				gain: 1, unknown: true, dof: math.NaN()})
		} else if ch.FromResiduals {
			return fmt.Errorf("%s/bench.toml: channels.%s.noise: \"from-residuals\" is for the response (%s); state the noise of a predictor, or leave it out when it is part of the scatter",
				c.b.Dir, ch.Name, c.m.Response)
		} else if ch.Noise > 0 || ch.RelativeNoise > 0 {
			c.comps = append(c.comps, component{name: ch.Name + " noise", channel: ch.Name, unit: ch.Unit, on: on, dof: ch.NoiseDOF,
				gain: gain, fixed: ch.Noise, relative: ch.RelativeNoise, readings: readings, at: at})
		}
		if ch.Resolution > 0 {
			comp := component{name: ch.Name + " resolution", channel: ch.Name, unit: ch.Unit, on: on, flat: true, dof: math.Inf(1),
				gain: gain, fixed: ch.Resolution / math.Sqrt(12)}
			if ch.ResolutionPer == "setting" {
				g := groupOf(c.b, "setting")
				if g == nil {
					return fmt.Errorf("%s/bench.toml: channels.%s.resolution_kind: \"setting\" needs a column in [rows] setting", c.b.Dir, ch.Name)
				}
				comp.group, comp.count = compact(g, c.record)
			}
			c.comps = append(c.comps, comp)
		}
		for _, g := range ch.Grouped {
			comp := component{name: ch.Name + " per " + g.By, channel: ch.Name, unit: ch.Unit, on: on, dof: g.DOF, gain: gain}
			comp.group, comp.count = compact(g.Group, c.record)
			if g.U > 0 {
				comp.fixed = g.U
				c.comps = append(c.comps, comp)
			}
			if g.Relative > 0 {
				// One relative error a group: it changes sign with the reading, and
				// for the response it is built from fitted values, since readings
				// would pull the fit down (weights that follow the noise).
				comp.fixed, comp.relative, comp.readings, comp.at = 0, g.Relative, readings, at
				if on < 0 {
					if c.fitted == nil {
						c.fitted = append([]float64(nil), c.y...)
					}
					comp.readings, comp.at = c.fitted, nil
				}
				c.comps = append(c.comps, comp)
			}
		}
	}
	if c.zero != nil {
		ch := &c.b.Channels[c.resp]
		c.comps = append(c.comps, component{name: ch.Name + " " + c.zero.name(), channel: zeroComponent, unit: ch.Unit, on: -1,
			dof: ch.NoiseDOF, count: len(c.zero.coef), unknown: ch.FromResiduals})
	}
	// Every row needs an independent part, or the weights are infinite.
	if !c.unknownNoise() {
		for i := range n {
			var total float64
			for k := range c.comps {
				if comp := &c.comps[k]; comp.group == nil && comp.channel != zeroComponent {
					total += comp.u(i)
				}
			}
			if !(total > 0) {
				return fmt.Errorf("%s: the reading has no stated noise: give channels.%s.noise (a value with unit, or \"from-residuals\") in bench.toml",
					c.place(c.record[i]), c.m.Response)
			}
		}
	}
	return nil
}

// groupOf returns the group of each data record by a row column, or nil when the
// bench names no such column.
func groupOf(b *bench.Bench, by string) []int32 {
	labels := b.Rows.Labels[by]
	if labels == nil {
		return nil
	}
	return labels.Index
}

// compact renumbers the groups of the rows in use from 0.
func compact(all []int32, record []int) (group []int32, count int) {
	seen := map[int32]int32{}
	group = make([]int32, len(record))
	for i, r := range record {
		k, ok := seen[all[r]]
		if !ok {
			k = int32(len(seen))
			seen[all[r]] = k
		}
		group[i] = k
	}
	return group, len(seen)
}

// effects lays out the columns of the low-rank covariance; loads are filled by
// reweight.
func (c *chain) effects() *lsq.Effects {
	e := &lsq.Effects{}
	for k := range c.comps {
		if c.comps[k].group != nil || c.comps[k].channel == zeroComponent {
			c.comps[k].column = e.Columns
			e.Columns += c.comps[k].count
		}
	}
	if e.Columns == 0 {
		return nil
	}
	entries := 0
	for k := range c.comps {
		switch {
		case c.comps[k].channel == zeroComponent:
			entries += c.zero.entries
		case c.comps[k].group != nil:
			entries += len(c.record)
		}
	}
	e.Start, e.Column = make([]int32, 0, len(c.record)+1), make([]int32, 0, entries)
	shares := c.zero.shares()
	for i := range c.record {
		e.Start = append(e.Start, int32(len(e.Column)))
		for k := range c.comps {
			comp := &c.comps[k]
			switch {
			case comp.channel == zeroComponent:
				column, _ := shares.row(i)
				for _, col := range column {
					e.Column = append(e.Column, int32(comp.column)+col)
				}
			case comp.group != nil:
				e.Column = append(e.Column, int32(comp.column)+comp.group[i])
			}
		}
	}
	e.Start = append(e.Start, int32(len(e.Column)))
	e.Load = make([]float64, len(e.Column))
	return e
}

// zeroNoise is the standard uncertainty of one zero reading.
func (c *chain) zeroNoise() float64 {
	ch := &c.b.Channels[c.resp]
	if ch.FromResiduals {
		return c.scale
	}
	return math.Hypot(ch.Noise, ch.Resolution/math.Sqrt(12))
}

// wanted says through which predictors errors of readings come in.
func (c *chain) wanted() []bool {
	w := make([]bool, len(c.pred))
	for _, k := range c.comps {
		if k.on >= 0 {
			w[k.on] = true
		}
	}
	return w
}

// reweight fills the independent standard uncertainties u and the loads of e at
// scalars q: the covariance of the readings there.
func (c *chain) reweight(q []float64, u []float64, e *lsq.Effects) {
	if c.fitted != nil {
		c.indication(q, c.fitted, nil)
	}
	for k := range c.comps {
		if c.comps[k].unknown {
			c.comps[k].fixed = c.scale
		}
	}
	want := c.wanted()
	parallel(len(u), chunkRows, func(lo, hi int) {
		c.reweightRows(q, u, e, want, lo, hi)
	})
}

// reweightRows does so for rows lo to hi−1.
func (c *chain) reweightRows(q, u []float64, e *lsq.Effects, want []bool, lo, hi int) {
	slope := c.slopesOf(q, want, lo, hi)
	clear(u[lo:hi])
	for k := range c.comps {
		comp := &c.comps[k]
		if comp.group != nil || comp.channel == zeroComponent {
			continue
		}
		for i := lo; i < hi; i++ {
			v := comp.u(i)
			if comp.on >= 0 {
				v *= slope[comp.on][i-lo]
			}
			u[i] += v * v
		}
	}
	for i := lo; i < hi; i++ {
		u[i] = math.Sqrt(u[i])
	}
	if e == nil {
		return
	}
	shares := c.zero.shares()
	at := e.Start[lo]
	for i := lo; i < hi; i++ {
		for k := range c.comps {
			comp := &c.comps[k]
			switch {
			case comp.channel == zeroComponent:
				s := c.zeroNoise()
				column, weight := shares.row(i)
				for j, col := range column {
					e.Load[at] = -weight[j] * c.zero.unit[col] * s
					at++
				}
			case comp.group != nil:
				v := comp.u(i)
				if comp.on >= 0 {
					v *= slope[comp.on][i-lo]
				}
				e.Load[at] = v
				at++
			}
		}
	}
}
