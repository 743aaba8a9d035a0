package gum

import (
	"errors"
	"fmt"
	"math"
)

// law applies the law of propagation to output o.
func (p *plan) law(o int, e Evaluator, s Settings) (*Law, error) {
	in := p.model.Inputs
	n := len(in)
	g := make([]float64, n)
	var h []float64
	var value float64
	if s.SecondOrder {
		h = make([]float64, n*n)
		value = p.hessian(e, p.estimate, g, h)
	} else {
		value = p.gradient(e, p.estimate, g)
	}
	lines := make([]Contribution, n)
	for i := range in {
		d := &in[i].Dist
		lines[i] = Contribution{Input: in[i].Name, Group: in[i].Group, Unit: in[i].Unit, Shape: d.Shape, Block: in[i].Block,
			Value: d.Value, U: d.U, DOF: d.dof(), Sensitivity: g[i]}
		if d.IsExact() {
			lines[i].Shape = ShapeExact
			if math.IsNaN(g[i]) || math.IsInf(g[i], 0) {
				lines[i].Sensitivity = 0 // an exact value needs no derivative
			}
		}
	}
	l, err := Combine(value, lines, p.corr, s.Probability)
	if err != nil {
		return nil, fmt.Errorf("output %s: %w", p.model.Outputs[o].Name, err)
	}
	if s.SecondOrder {
		if err := p.secondOrder(l, e, g, h); err != nil {
			return nil, fmt.Errorf("output %s: %w", p.model.Outputs[o].Name, err)
		}
	}
	return l, nil
}

// secondOrder adds to l the terms stated in the package comment.
func (p *plan) secondOrder(l *Law, e Evaluator, g, h []float64) error {
	n := len(g)
	cov := make([]float64, n*n)
	for i := range n {
		cov[i*n+i] = p.model.Inputs[i].Dist.U * p.model.Inputs[i].Dist.U
	}
	for _, c := range p.corr {
		q := c.R * p.model.Inputs[c.I].Dist.U * p.model.Inputs[c.J].Dist.U
		cov[c.I*n+c.J], cov[c.J*n+c.I] = q, q
	}
	// A = HΣ; ½ tr(AA) and the shift ½ tr(A).
	a := make([]float64, n*n)
	trace := func(h []float64) (t float64) {
		for i := range n {
			for k := range n {
				if q := cov[k*n+i]; q != 0 {
					t += h[i*n+k] * q
				}
			}
		}
		return t
	}
	for i := range n {
		for k := range n {
			for j := range n {
				if q := cov[k*n+j]; q != 0 {
					a[i*n+j] += h[i*n+k] * q
				}
			}
		}
	}
	var extra float64
	for i := range n {
		for j := range n {
			extra += 0.5 * a[i*n+j] * a[j*n+i]
		}
	}
	l.Shift = 0.5 * trace(h)
	if l.FirstOrderU > 0 {
		// d/dt tr(H(x + tΣg)Σ): along v = Σg/u, which is at most one standard
		// uncertainty long in every input, in steps of a tenth and a twentieth.
		v := make([]float64, n)
		for i := range n {
			for j := range n {
				v[i] += cov[i*n+j] * g[j]
			}
			v[i] /= l.FirstOrderU
		}
		x, gg, hh := make([]float64, n), make([]float64, n), make([]float64, n*n)
		at := func(t float64) float64 {
			for i := range x {
				x[i] = p.estimate[i] + t*v[i]
			}
			p.hessian(e, x, gg, hh)
			return trace(hh)
		}
		const t = 0.1
		coarse := (at(t) - at(-t)) / (2 * t)
		fine := (at(t/2) - at(-t/2)) / t
		extra += l.FirstOrderU * (4*fine - coarse) / 3
	}
	if math.IsNaN(extra) || math.IsInf(extra, 0) {
		return errors.New("the second-order terms are not finite: the model has no second or third derivative at the estimates")
	}
	u2 := l.FirstOrderU*l.FirstOrderU + extra
	if u2 < 0 {
		l.Warnings = append(l.Warnings, fmt.Errorf("the second-order terms make the variance negative (%.3g), so that the series does not converge at these uncertainties: first order kept; prefer Monte Carlo", u2))
		return nil
	}
	l.U = math.Sqrt(u2)
	if extra > l.FirstOrderU*l.FirstOrderU {
		l.unseenDOF(a)
	}
	l.cover()
	return nil
}

// unseenDOF withdraws the degrees of freedom when the second-order terms carry most of
// the variance and a line in them has fewer: the Welch–Satterthwaite formula goes by
// first-order contributions. a is HΣ, row by row.
func (l *Law) unseenDOF(a []float64) {
	n := len(l.Budget)
	for j, c := range l.Budget {
		if math.IsInf(c.DOF, 1) || l.DOF <= c.DOF {
			continue
		}
		for i := range n {
			if a[i*n+j] != 0 {
				l.DOF = math.NaN()
				l.Warnings = append(l.Warnings, fmt.Errorf("no effective degrees of freedom: most of the variance is of second order, and the Welch–Satterthwaite formula does not see there that %s has %s; k is that of a normal, which may be too small: prefer the Monte Carlo interval", c.Input, dofText(c.DOF)))
				return
			}
		}
	}
}

// gradient fills g with the derivatives of the output at x and returns its value.
func (p *plan) gradient(e Evaluator, x, g []float64) float64 {
	if e.Gradient != nil {
		return e.Gradient(x, g)
	}
	f := p.scalar(e)
	y := append([]float64(nil), x...)
	for i := range g {
		h := p.step(i)
		at := func(t float64) float64 {
			y[i] = x[i] + t
			v := f(y)
			y[i] = x[i]
			return v
		}
		coarse := (at(h) - at(-h)) / (2 * h)
		fine := (at(h/2) - at(-h/2)) / h
		g[i] = (4*fine - coarse) / 3
	}
	return f(x)
}

// hessian fills g and h (row by row) and returns the value.
func (p *plan) hessian(e Evaluator, x, g, h []float64) float64 {
	if e.Hessian != nil {
		return e.Hessian(x, g, h)
	}
	n := len(x)
	y := append([]float64(nil), x...)
	up, down := make([]float64, n), make([]float64, n)
	for i := range n {
		// Differences of first derivatives: wider steps than the first derivatives' own, which
		// leaves their rounding behind.
		d := 2 * p.step(i)
		y[i] = x[i] + d
		p.gradient(e, y, up)
		y[i] = x[i] - d
		p.gradient(e, y, down)
		y[i] = x[i]
		for j := range n {
			h[i*n+j] = (up[j] - down[j]) / (2 * d)
		}
	}
	for i := range n {
		for j := range i {
			m := (h[i*n+j] + h[j*n+i]) / 2
			h[i*n+j], h[j*n+i] = m, m
		}
	}
	return p.gradient(e, x, g)
}

// step is the step of differences in input i: a tenth of its standard
// uncertainty, or 1e-4 of its value when it is exact, whatever its unit; 1e-7 at an
// exact 0.
func (p *plan) step(i int) float64 {
	if u := p.model.Inputs[i].Dist.U; u > 0 {
		return 0.1 * u
	}
	if x := math.Abs(p.estimate[i]); x > 0 {
		return 1e-4 * x
	}
	return 1e-7
}

// scalar returns a function of one point made from e.
func (p *plan) scalar(e Evaluator) func([]float64) float64 {
	cols := make([][]float64, len(p.names))
	out := make([]float64, 1)
	return func(x []float64) float64 {
		for i := range cols {
			cols[i] = x[i : i+1]
		}
		e.Block(cols, out)
		return out[0]
	}
}

// existing says for output o whether its mean and its variance exist, as far as
// the inputs' t distributions go: an input with at most one degree of freedom has no
// mean, one with at most two no variance. An output depends on an input if shifting
// that by its uncertainty, up or down, changes the output at the estimates or where all
// inputs lie a little above theirs: a factor that is 0 at its estimate hides another.
func (p *plan) existing(e Evaluator) (mean, variance bool, names []string) {
	mean, variance = true, true
	f := p.scalar(e)
	beside := append([]float64(nil), p.estimate...)
	for i := range beside {
		beside[i] += 0.3 * p.model.Inputs[i].Dist.U
	}
	places := [][]float64{append([]float64(nil), p.estimate...), beside}
	centre := []float64{f(places[0]), f(places[1])}
	for i := range p.model.Inputs {
		d := &p.model.Inputs[i].Dist
		if d.Shape != ShapeNormal && d.Shape != ShapeT {
			continue
		}
		scale, dof := d.draw()
		if dof > 2 {
			continue
		}
		depends := false
		for k, x := range places {
			if k > 0 && math.IsNaN(centre[k]) { // undefined there: says nothing
				continue
			}
			was := x[i]
			for _, s := range []float64{scale, -scale} {
				x[i] = was + s
				depends = depends || f(x) != centre[k]
			}
			x[i] = was
		}
		if depends {
			variance = false
			mean = mean && dof > 1
			names = append(names, p.names[i])
		}
	}
	return mean, variance, names
}
