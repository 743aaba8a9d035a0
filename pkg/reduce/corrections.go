package reduce

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// corrections lists every correction of the kind with its mean size over the
// rows in use and what remains uncertain of it. A correction of the model is
// given relative to the response, found by predicting with and without it; the
// zero and the blank as the root mean square of what was subtracted.
func (c *chain) corrections(k *carried) ([]Correction, error) {
	var out []Correction
	for _, corr := range c.b.Kind.Corrections {
		r := Correction{Name: corr.Name, Doc: corr.Doc, Unit: "1", Used: c.b.Corrections[corr.Name]}
		if corr.Name == "balance" && c.b.Channels[c.resp].Unit.Dim != si.Mass {
			r.Used = false // nothing was weighed
		}
		switch {
		case corr.Name == "zero" || corr.Name == "blank":
			r.Unit = siSymbol(c.b.Channels[c.resp].Unit)
			r.Size, r.U = c.zero.subtracted(corr.Name, c.zeroNoise())
		case r.Used:
			size, u, err := c.correctionSize(corr.Name, k)
			if err != nil {
				return nil, err
			}
			r.Size, r.U = Number(size), Number(u)
		}
		out = append(out, r)
	}
	return out, nil
}

// correctionSize is the mean of prediction with over prediction without a
// correction, less one, and its standard uncertainty from the correction's own
// inputs.
func (c *chain) correctionSize(name string, k *carried) (size, u float64, err error) {
	if f := c.m.Factors[name]; f != nil {
		size, u = c.factorSize(f, k)
		return size, u, nil
	}
	off := *c.setup
	off.On = map[string]bool{}
	for n, on := range c.setup.On {
		off.On[n] = on && n != name
	}
	without, err := c.kind.Prepare(c.kind, &off)
	if err != nil {
		return 0, 0, fmt.Errorf("%s/bench.toml: without corrections.%s: %w", c.b.Dir, name, err)
	}
	if c.series != nil {
		without = c.series.wrap(without)
	}
	if without.Response != c.m.Response {
		return 0, 0, fmt.Errorf("corrections.%s changes the response of the model", name)
	}
	// Whatever moves the ratio counts, inputs and estimates alike; what only
	// scales the response drops out of it.
	ni := len(c.inputs)
	us := make([]float64, ni, ni+len(c.free))
	for s, in := range c.inputs {
		us[s] = in.u
	}
	var estimates []int
	for k, f := range c.free {
		if u := c.fitU[k]; u > 0 && !math.IsInf(u, 0) {
			estimates = append(estimates, f)
			us = append(us, u)
		}
	}
	// A bench with very many rows is sampled evenly: the size is for people.
	step := 1 + len(c.record)/1000
	space := jet.NewSpace(len(us), 0)
	grad := make([]float64, len(us))
	rows := 0.0
	qj := jet.Consts(k.q)
	xj := make([]jet.Jet, len(c.x))
	for i := 0; i < len(c.record); i += step {
		space.Reset()
		for p := range c.x {
			xj[p] = jet.Const(c.x[p][i])
		}
		c.seedScalars(space, k.q, qj, 0)
		for n, f := range estimates {
			qj[f] = space.Var(ni+n, k.q[f])
		}
		f0 := without.Row(qj, xj)
		if f0.V == 0 {
			continue
		}
		f := c.m.Row(qj, xj).Div(f0)
		rows++
		size += f.V - 1
		for n := range us {
			grad[n] += f.Grad(n)
		}
	}
	if rows == 0 {
		return 0, 0, nil
	}
	var v float64
	for n, un := range us {
		d := grad[n] / rows * un
		v += d * d
	}
	u = math.Sqrt(v)
	if u < negligible*math.Abs(size/rows) {
		u = 0 // rounding: what scales the response alone drops out of the ratio
	}
	return size / rows, u, nil
}

// factorSize is a correction of a measurand and its standard uncertainty from
// all inputs.
func (c *chain) factorSize(factor func(q []jet.Jet) jet.Jet, k *carried) (size, u float64) {
	space := jet.NewSpace(len(c.inputs), 0)
	qj := jet.Consts(k.q)
	c.seedScalars(space, k.q, qj, 0)
	f := factor(qj)
	var v float64
	for s, in := range c.inputs {
		d := f.Grad(s) * in.u
		v += d * d
	}
	return f.V, math.Sqrt(v)
}
