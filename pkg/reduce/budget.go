package reduce

import (
	"math"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// negligible is the contribution, relative to the combined uncertainty, below
// which a line is rounding and not an input.
const negligible = 1e-9

// readingsGroup is the part of the bench under which the budget lists what
// varies between rows.
const readingsGroup = "readings"

// sensitivities returns value, ∂Y/∂θ and ∂Y/∂s (θ held) of a quantity Y at scalars q.
func (c *chain) sensitivities(quantity func(q []jet.Jet) jet.Jet, q []float64) (value float64, byTheta, bySh []float64) {
	np, ni := len(c.free), len(c.inputs)
	space := jet.NewSpace(np+ni, 0)
	qj := jet.Consts(q)
	for j, f := range c.free {
		qj[f] = space.Var(j, q[f])
	}
	c.seedScalars(space, q, qj, np)
	y := quantity(qj)
	byTheta, bySh = make([]float64, np), make([]float64, ni)
	for j := range byTheta {
		byTheta[j] = y.Grad(j)
	}
	for s := range bySh {
		bySh[s] = y.Grad(np + s)
	}
	return y.V, byTheta, bySh
}

// law combines the inputs and components of a quantity with the given direct
// sensitivities.
func (c *chain) law(k *carried, value float64, byTheta, bySh []float64, p float64) (*gum.Law, error) {
	var lines []gum.Contribution
	for s, in := range c.inputs {
		sens := bySh[s] + dot(byTheta, k.bySh[s])
		shape := in.dist.Shape
		lines = append(lines, gum.Contribution{Input: in.name, Group: in.group, Unit: in.unit.Symbol, Shape: shape,
			Value: in.value, U: in.u, DOF: in.dof, Sensitivity: sens})
	}
	contributions := c.contributions(k, byTheta)
	for n := range c.comps {
		comp := &c.comps[n]
		u := c.typicalU(comp)
		line := gum.Contribution{Input: comp.name, Group: readingsGroup, Unit: comp.unit.Symbol, Shape: gum.ShapeNormal,
			Block: c.block(comp), U: u, DOF: comp.dof}
		if comp.flat {
			line.Shape = gum.ShapeRectangular
		}
		if u > 0 {
			line.Sensitivity = contributions[n] / u
		}
		lines = append(lines, line)
	}
	var corr []gum.Correlation
	for _, r := range c.b.Correlations {
		i, j := c.inputNamed(r.A), c.inputNamed(r.B)
		if i >= 0 && j >= 0 {
			corr = append(corr, gum.Correlation{I: i, J: j, R: r.R})
		}
	}
	return gum.Combine(value, lines, corr, p)
}

// inputNamed returns the index of the input of that name, or −1 when it carries
// no uncertainty here.
func (c *chain) inputNamed(name string) int {
	for i := range c.inputs {
		if c.inputs[i].name == name {
			return i
		}
	}
	return -1
}

// block names the Type A evaluation that a component belongs to: all noise of
// one channel has one origin.
func (c *chain) block(comp *component) string {
	switch {
	case comp.flat || math.IsInf(comp.dof, 1):
		return ""
	case comp.channel == zeroComponent:
		return c.m.Response + " noise"
	}
	return comp.name
}

// typicalU is the root mean square of a component over its rows.
func (c *chain) typicalU(comp *component) float64 {
	if comp.channel == zeroComponent {
		return c.zeroNoise()
	}
	var s float64
	for i := range c.record {
		u := comp.u(i)
		s += u * u
	}
	return math.Sqrt(s / float64(len(c.record)))
}

// contributions is the standard uncertainty that each component gives to a
// quantity with ∂Y/∂θ = byTheta, through ∂Y/∂y = w, chunk by chunk of rows.
func (c *chain) contributions(k *carried, byTheta []float64) []float64 {
	n := len(c.record)
	factor := make([]float64, len(byTheta))
	for b := range byTheta {
		for a, v := range byTheta {
			factor[b] += v * k.inverse.At(a, b)
		}
	}
	sum := make([]float64, len(c.comps))
	by := make([][]float64, len(c.comps)) // of each group, or column of the zero
	for j := range c.comps {
		if comp := &c.comps[j]; comp.group != nil || comp.channel == zeroComponent {
			by[j] = make([]float64, comp.count)
		}
	}
	shares, zeroNoise, want := c.zero.shares(), c.zeroNoise(), c.wanted()
	w := make([]float64, min(n, chunkRows))
	for lo := 0; lo < n; lo += chunkRows {
		hi := min(lo+chunkRows, n)
		w := w[:hi-lo]
		clear(w)
		for b, f := range factor {
			for i, d := range k.weighed[b][lo:hi] {
				w[i] += f * d
			}
		}
		slope := k.slopes(c, want, lo, hi)
		for j := range c.comps {
			comp := &c.comps[j]
			if comp.channel == zeroComponent {
				for i, wi := range w {
					column, weight := shares.row(lo + i)
					for m, col := range column {
						by[j][col] += wi * weight[m] * c.zero.unit[col] * zeroNoise
					}
				}
				continue
			}
			for i, wi := range w {
				// the factor by which an error of the component moves the
				// response residual of its row
				gain := 1.0
				if comp.on >= 0 {
					gain = -slope[comp.on][i]
				}
				d := wi * gain * comp.u(lo+i)
				if comp.group != nil {
					by[j][comp.group[lo+i]] += d
				} else {
					sum[j] += d * d
				}
			}
		}
	}
	for j := range sum {
		if by[j] != nil {
			sum[j] = dot(by[j], by[j])
		}
		sum[j] = math.Sqrt(sum[j])
	}
	return sum
}

// slopes is ∂f/∂x at the estimates of rows lo to hi−1.
func (k *carried) slopes(c *chain, want []bool, lo, hi int) [][]float64 {
	if k.slope == nil {
		return c.slopesOf(k.q, want, lo, hi)
	}
	out := make([][]float64, len(k.slope))
	for p, s := range k.slope {
		if s != nil {
			out[p] = s[lo:hi]
		}
	}
	return out
}

// measurands states every measurand of the bench by the law.
func (c *chain) measurands(k *carried, p float64) ([]Measurand, []*gum.Law, []error, error) {
	var out []Measurand
	var laws []*gum.Law
	var warnings []error
	for n := range c.m.Measurands {
		m := &c.m.Measurands[n]
		value, byTheta, bySh := c.sensitivities(m.Value, k.q)
		l, err := c.law(k, value, byTheta, bySh, p)
		if err != nil {
			return nil, nil, nil, err
		}
		laws = append(laws, l)
		if n == 0 {
			warnings = append(warnings, l.Warnings...)
		}
		r := Measurand{Name: m.Name, Doc: m.Doc, Unit: siSymbol(m.Unit), Value: Number(l.Value), U: Number(l.U), DOF: Number(l.DOF),
			K: Number(l.K), Probability: Number(l.Probability), Interval: [2]Number{Number(l.Interval[0]), Number(l.Interval[1])}}
		for i, b := range l.Budget {
			if math.Abs(b.Contribution) <= negligible*l.U {
				continue // it does not enter this measurand, or the fit takes it up whole
			}
			line := BudgetLine{Input: b.Input, Group: b.Group, Value: Number(b.Value), U: Number(b.U), Shape: b.Shape, DOF: Number(b.DOF),
				Sensitivity: Number(b.Sensitivity), Contribution: Number(math.Abs(b.Contribution)), Share: Number(b.Share)}
			if i < len(c.inputs) {
				line.Unit, line.Source = siSymbol(c.inputs[i].unit), c.inputs[i].source
			} else {
				line.Unit = siSymbol(c.comps[i-len(c.inputs)].unit)
			}
			r.Budget = append(r.Budget, line)
		}
		out = append(out, r)
	}
	return out, laws, warnings, nil
}

// siSymbol names the coherent SI unit in which the record gives a number whose
// display unit is u; angles and torques keep theirs.
func siSymbol(u si.Unit) string { return u.Coherent().Symbol }
