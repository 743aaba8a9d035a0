package reduce

import (
	"math"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/si"
)

// negligible is the contribution, relative to the combined uncertainty, below
// which a line is rounding and not an input.
const negligible = 1e-9

// readingsGroup is the part of the bench under which the budget lists what
// varies between rows.
const readingsGroup = "readings"

// sensitivities returns value, ∂Y/∂θ and ∂Y/∂s (θ held) of a measurand.
func (c *chain) sensitivities(m *model.Measurand, q []float64) (value float64, byTheta, bySh []float64) {
	np, ni := len(c.free), len(c.inputs)
	space := jet.NewSpace(np+ni, 0)
	qj := constants(q)
	for j, f := range c.free {
		qj[f] = space.Var(j, q[f])
	}
	for s, in := range c.inputs {
		if in.kind == scalarInput {
			qj[in.index] = space.Var(np+s, q[in.index])
		}
	}
	y := m.Value(qj)
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
	w := make([]float64, len(c.record))
	for b := range byTheta {
		var f float64
		for a, v := range byTheta {
			f += v * k.inverse.At(a, b)
		}
		for i, d := range k.weighed[b] {
			w[i] += f * d
		}
	}
	for n := range c.comps {
		comp := &c.comps[n]
		u := c.typicalU(comp)
		contribution := c.contribution(comp, k, w)
		line := gum.Contribution{Input: comp.name, Group: readingsGroup, Unit: comp.unit.Symbol, Shape: gum.ShapeNormal,
			Block: c.block(comp), U: u, DOF: comp.dof}
		if comp.flat {
			line.Shape = gum.ShapeRectangular
		}
		if u > 0 {
			line.Sensitivity = contribution / u
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

// contribution is the standard uncertainty that a component gives to a quantity
// with ∂Y/∂y = w.
func (c *chain) contribution(comp *component, k *carried, w []float64) float64 {
	var sum float64
	switch {
	case comp.channel == zeroComponent:
		s := c.zeroNoise()
		by := make([]float64, len(c.zero.coef))
		for i := range w {
			for j := c.zero.start[i]; j < c.zero.start[i+1]; j++ {
				by[c.zero.column[j]] += w[i] * c.zero.weight[j] * c.zero.unit[c.zero.column[j]] * s
			}
		}
		sum = dot(by, by)
	case comp.group != nil:
		by := make([]float64, comp.count)
		for i, g := range comp.group {
			by[g] += w[i] * c.gainOf(comp, k, i) * comp.u(i)
		}
		sum = dot(by, by)
	default:
		for i := range w {
			d := w[i] * c.gainOf(comp, k, i) * comp.u(i)
			sum += d * d
		}
	}
	return math.Sqrt(sum)
}

// gainOf is the factor by which an error of the component moves the response
// residual of row i.
func (c *chain) gainOf(comp *component, k *carried, i int) float64 {
	if comp.on < 0 {
		return 1
	}
	return -k.slope[comp.on][i]
}

// measurands states every measurand of the bench by the law.
func (c *chain) measurands(k *carried, p float64) ([]Measurand, []*gum.Law, []error, error) {
	var out []Measurand
	var laws []*gum.Law
	var warnings []error
	for n := range c.m.Measurands {
		m := &c.m.Measurands[n]
		value, byTheta, bySh := c.sensitivities(m, k.q)
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
// display unit is u.
func siSymbol(u si.Unit) string { return u.Dim.Unit().Symbol }
