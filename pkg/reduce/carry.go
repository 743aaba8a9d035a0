package reduce

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/lsq"
)

// carried is how the estimates answer to everything that went into them.
type carried struct {
	theta   []float64   // estimates
	q       []float64   // scalars with the estimates in place
	inverse *mat.Dense  // H⁻¹, full Hessian
	bySh    [][]float64 // dθ/d(input): [input][parameter]; priors included
	weighed [][]float64 // Σ⁻¹J: [parameter][row]; dθ/dy = H⁻¹(Σ⁻¹J)ᵀ
	slope   [][]float64 // ∂f/∂x at the estimates, of predictors with errors; nil with very many rows
}

// carry differentiates the estimates implicitly (see the package comment).
func (c *chain) carry(r *lsq.Result) (*carried, error) {
	n, np, ni := len(c.record), len(c.free), len(c.inputs)
	k := &carried{theta: append([]float64(nil), r.Values...), q: append([]float64(nil), c.q...)}
	for j, f := range c.free {
		k.q[f] = k.theta[j]
	}
	v := make([]float64, n)
	r.SolveCovariance(r.Residuals, v)

	// J and Σ⁻¹J, column by column.
	jac := r.Derivatives()
	wj := make([][]float64, np)
	for j := range wj {
		wj[j] = make([]float64, n)
		r.SolveCovariance(jac[j], wj[j])
	}
	cross, curve := c.derivatives(k.q, v, wj)
	h := mat.NewDense(np, np, nil)
	for a := range np {
		for b := range np {
			h.Set(a, b, dot(wj[a], jac[b])-curve[a][b])
		}
		if s := &c.b.Scalars[c.free[a]]; s.HasPrior {
			h.Set(a, a, h.At(a, a)+1/(s.Dist.U*s.Dist.U))
		}
	}
	var err error
	if k.inverse, err = invertScaled(h); err != nil {
		return nil, err
	}
	k.weighed = wj
	k.bySh = make([][]float64, ni)
	for s, in := range c.inputs {
		rhs := make([]float64, np)
		for a := range np {
			if in.kind == priorInput {
				if c.free[a] == in.index {
					rhs[a] = 1 / (in.u * in.u)
				}
				continue
			}
			rhs[a] = -(cross[a][s] - curve[a][np+s])
			if d := c.priorSlope(&c.inputs[s], c.free[a]); d != 0 {
				u := c.b.Scalars[c.free[a]].Dist.U
				rhs[a] += d / (u * u)
			}
		}
		d := make([]float64, np)
		for a := range np {
			for b := range np {
				d[a] += k.inverse.At(a, b) * rhs[b]
			}
		}
		k.bySh[s] = d
	}
	if n <= keptShares {
		k.slope = c.slopes(k.q, c.wanted())
	}
	return k, nil
}

// derivatives returns JᵀΣ⁻¹ ∂f/∂s [parameter][input] from w = Σ⁻¹J, and
// Σ_i v_i ∂²f_i/∂θ∂(θ, s) [parameter][parameter, then input], f being the
// indication. Sums run in chunks of rows added in order, so that they do not
// depend on the number of cores.
func (c *chain) derivatives(q, v []float64, w [][]float64) (cross, curve [][]float64) {
	n, np, ni := len(c.record), len(c.free), len(c.inputs)
	cross, curve = grid(np, ni), grid(np, np+ni)
	chunks := (n + chunkRows - 1) / chunkRows
	partial := make([][][]float64, chunks)
	parallel(n, chunkRows, func(lo, hi int) {
		part := grid(2*np, np+ni)
		partial[lo/chunkRows] = part
		space := jet.NewSpace(np+ni, np)
		row := c.newRowJets(q)
		for i := lo; i < hi; i++ {
			space.Reset()
			f := row.at(space, i)
			for j := range np {
				for l := range np + ni {
					part[j][l] += v[i] * f.Hess(j, l)
				}
				for s := range ni {
					part[np+j][s] += w[j][i] * f.Grad(np+s)
				}
			}
		}
	})
	for _, part := range partial {
		for j := range np {
			for l, x := range part[j] {
				curve[j][l] += x
			}
			for s := range ni {
				cross[j][s] += part[np+j][s]
			}
		}
	}
	return cross, curve
}

// rowJets predicts indications with the parameters as seeds 0 to p−1 and the
// inputs after them.
type rowJets struct {
	c      *chain
	q      []float64
	qj, xj []jet.Jet
	scales []scaleJet // the response, then the predictors
	stated []scaleJet // without derivatives
}

// scaleJet is the gain and offset of a channel.
type scaleJet struct{ gain, offset jet.Jet }

func (c *chain) newRowJets(q []float64) *rowJets {
	r := &rowJets{c: c, q: q, qj: jet.Consts(q), xj: make([]jet.Jet, len(c.x)), scales: make([]scaleJet, 1+len(c.pred)), stated: make([]scaleJet, 1+len(c.pred))}
	for k, ci := range append([]int{c.resp}, c.pred...) {
		g, o := gainOffset(&c.b.Channels[ci])
		r.stated[k] = scaleJet{jet.Const(g), jet.Const(o)}
	}
	return r
}

// at is the indication of row i.
func (r *rowJets) at(space *jet.Space, i int) jet.Jet {
	c, q, qj, xj, scales := r.c, r.q, r.qj, r.xj, r.scales
	np := len(c.free)
	for j, f := range c.free {
		qj[f] = space.Var(j, q[f])
	}
	c.seedScalars(space, q, qj, np)
	copy(scales, r.stated)
	for s := range c.inputs {
		switch in := &c.inputs[s]; in.kind {
		case gainInput:
			scales[1+in.index].gain = space.Var(np+s, in.value)
		case offsetInput:
			scales[1+in.index].offset = space.Var(np+s, in.value)
		}
	}
	c.moveScales(space, scales, np)
	for p := range c.x {
		if p < len(c.pred) {
			xj[p] = scales[1+p].gain.Scale(c.xr[p][i]).Add(scales[1+p].offset)
		} else {
			xj[p] = jet.Const(c.x[p][i])
		}
	}
	return c.m.Row(qj, xj).Sub(scales[0].offset).Div(scales[0].gain)
}

// invertScaled inverts a symmetric matrix after scaling its diagonal to one,
// because its parameters differ by many orders of magnitude.
func invertScaled(h *mat.Dense) (*mat.Dense, error) {
	n, _ := h.Dims()
	d := make([]float64, n)
	for i := range d {
		d[i] = math.Sqrt(math.Abs(h.At(i, i)))
		if !(d[i] > 0) || math.IsInf(d[i], 0) {
			return nil, fmt.Errorf("the curvature of chi-squared vanishes along parameter %d: it can't be told from these readings", i+1)
		}
	}
	s := mat.NewDense(n, n, nil)
	for i := range n {
		for j := range n {
			s.Set(i, j, h.At(i, j)/(d[i]*d[j]))
		}
	}
	inv := mat.NewDense(n, n, nil)
	if err := inv.Inverse(s); err != nil {
		if _, ill := err.(mat.Condition); !ill || math.IsInf(float64(err.(mat.Condition)), 1) {
			return nil, fmt.Errorf("the parameters can't be told apart: %w", err)
		}
	}
	for i := range n {
		for j := range n {
			inv.Set(i, j, inv.At(i, j)/(d[i]*d[j]))
		}
	}
	return inv, nil
}

func dot(a, b []float64) float64 {
	var s float64
	for i, v := range a {
		s += v * b[i]
	}
	return s
}

func grid(rows, cols int) [][]float64 {
	all := make([]float64, rows*cols)
	g := make([][]float64, rows)
	for i := range g {
		g[i] = all[i*cols : (i+1)*cols : (i+1)*cols]
	}
	return g
}
