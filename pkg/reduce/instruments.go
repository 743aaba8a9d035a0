package reduce

import "example.org/guardring/pkg/jet"

// instrumentsGroup is the part of the bench under which the budget lists what
// instruments may have moved by.
const instrumentsGroup = "instruments"

// target is a place that the error of an instrument moves.
type target struct {
	kind  inputKind // scalarInput, priorInput, gainInput or offsetInput
	index int       // as of an input of that kind
}

// listInstruments adds what the instruments may have moved by to the shared
// inputs, after all others. A relative error e multiplies the gains of the channels
// and the stated values that the instrument gives by 1 + e; another one adds to
// their offsets and to the values.
func (c *chain) listInstruments(isFree []bool) {
	for n := range c.b.Instruments {
		instrument := &c.b.Instruments[n]
		for k := range instrument.Allowances {
			a := &instrument.Allowances[k]
			if a.Dist.U == 0 {
				continue
			}
			in := input{kind: instrumentInput, name: a.Name, group: instrumentsGroup, source: a.Source, unit: a.Unit, index: -1,
				dist: a.Dist, value: a.Dist.Value, u: a.Dist.U, dof: a.Dist.DOF, relative: a.Relative}
			channel := offsetInput
			if a.Relative {
				channel = gainInput
			}
			for m, ci := range append([]int{c.resp}, c.pred...) {
				if c.b.Channels[ci].From(instrument.Name) {
					in.targets = append(in.targets, target{channel, m - 1})
				}
			}
			for i := range c.b.Scalars {
				if !c.b.Scalars[i].From(instrument.Name) || !c.active(i) {
					continue
				}
				kind := scalarInput
				if isFree[i] {
					kind = priorInput
				}
				in.targets = append(in.targets, target{kind, i})
			}
			if len(in.targets) > 0 {
				c.inputs = append(c.inputs, in)
			}
		}
	}
}

// seedScalars makes seeds of the inputs that move scalars: input s is seed
// first+s. Scalars that no input moves are left as they are in qj.
func (c *chain) seedScalars(space *jet.Space, q []float64, qj []jet.Jet, first int) {
	for s := range c.inputs {
		in := &c.inputs[s]
		for _, t := range in.targets {
			if t.kind == scalarInput {
				qj[t.index] = jet.Const(q[t.index])
			}
		}
	}
	for s := range c.inputs {
		if in := &c.inputs[s]; in.kind == scalarInput {
			qj[in.index] = space.Var(first+s, q[in.index])
		}
	}
	for s := range c.inputs {
		in := &c.inputs[s]
		if in.kind != instrumentInput {
			continue
		}
		e := space.Var(first+s, in.value)
		for _, t := range in.targets {
			if t.kind == scalarInput {
				qj[t.index] = c.movedJet(in, t.index, qj[t.index], e)
			}
		}
	}
}

// movedJet is scalar i as the error e of an instrument leaves it; the square of
// one that enters squared goes as (1 + e)².
func (c *chain) movedJet(in *input, i int, v, e jet.Jet) jet.Jet {
	switch {
	case !in.relative:
		return v.Add(e)
	case c.b.Kind.Scalars[i].Squared:
		return v.Mul(e.Plus(1).Sqr())
	}
	return v.Mul(e.Plus(1))
}

// moveScales multiplies gains and adds to offsets the errors of the instruments;
// input s is seed first+s.
func (c *chain) moveScales(space *jet.Space, scales []scaleJet, first int) {
	for s := range c.inputs {
		in := &c.inputs[s]
		for _, t := range in.targets {
			switch t.kind {
			case gainInput:
				scales[1+t.index].gain = scales[1+t.index].gain.Mul(space.Var(first+s, in.value).Plus(1))
			case offsetInput:
				scales[1+t.index].offset = scales[1+t.index].offset.Add(space.Var(first+s, in.value))
			}
		}
	}
}

// moved is movedJet in numbers.
func (c *chain) moved(in *input, i int, v, e float64) float64 {
	switch {
	case !in.relative:
		return v + e
	case c.b.Kind.Scalars[i].Squared:
		return v * (1 + e) * (1 + e)
	}
	return v * (1 + e)
}

// priorSlope is the derivative of the stated value of the estimated scalar i by the
// error of an instrument: a prior value moves with the instrument it was found
// with.
func (c *chain) priorSlope(in *input, i int) float64 {
	var d float64
	for _, t := range in.targets {
		switch {
		case t.kind != priorInput || t.index != i:
		case in.relative:
			d += c.b.Scalars[i].Dist.Value
		default:
			d++
		}
	}
	return d
}

// moveDraws applies the drawn errors of the instruments to the scalars, priors,
// gains and offsets drawn before.
func (w *worker) moveDraws() {
	c := w.c
	for s := range c.inputs {
		in, e := &c.inputs[s], w.draws[s]
		for _, t := range in.targets {
			switch t.kind {
			case scalarInput:
				w.q[t.index] = c.moved(in, t.index, w.q[t.index], e)
			case priorInput:
				for j, f := range c.free {
					if f == t.index {
						w.prior[j] = c.moved(in, t.index, w.prior[j], e)
					}
				}
			case gainInput:
				if t.index < 0 {
					w.gain *= 1 + e
				} else {
					w.gains[t.index] *= 1 + e
				}
			case offsetInput:
				if t.index < 0 {
					w.offset += e
				} else {
					w.offsets[t.index] += e
				}
			}
		}
	}
}
