package reduce

import (
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/model"
)

// chunkRows is how many rows one core takes at a time; it fixes the order of
// sums, so that results do not depend on the number of cores.
const chunkRows = 4096

// predictor evaluates a model over rows with derivatives by chosen scalars. It
// belongs to one goroutine and allocates nothing after the first row.
type predictor struct {
	m     *model.Model
	wrt   []int
	space *jet.Space
	q, x  []jet.Jet
}

func newPredictor(m *model.Model, scalars int, predictors int, wrt []int) *predictor {
	return &predictor{m: m, wrt: wrt, space: jet.NewSpace(len(wrt), 0), q: make([]jet.Jet, scalars), x: make([]jet.Jet, predictors)}
}

// rows fills f (and jac, when not nil) for rows lo to hi−1 with the true value
// of the response, from scalars q and true predictors x.
func (p *predictor) rows(q []float64, x [][]float64, lo, hi int, f []float64, jac [][]float64) {
	if p.m.Block != nil && p.m.Block(q, x, lo, hi, p.wrt, f, jac) {
		return
	}
	for i := lo; i < hi; i++ {
		p.space.Reset()
		for k, v := range q {
			p.q[k] = jet.Const(v)
		}
		if jac != nil {
			for k, j := range p.wrt {
				p.q[j] = p.space.Var(k, q[j])
			}
		}
		for c := range x {
			p.x[c] = jet.Const(x[c][i])
		}
		r := p.m.Row(p.q, p.x)
		f[i] = r.V
		for k := range jac {
			jac[k][i] = r.Grad(k)
		}
	}
}

// indication predicts the readings of the response (on its own scale) for
// scalars q over all rows, with derivatives by the estimated scalars.
func (c *chain) indication(q []float64, f []float64, jac [][]float64) {
	g, o := gainOffset(&c.b.Channels[c.resp])
	parallel(len(f), chunkRows, func(lo, hi int) {
		own := q
		if c.series != nil {
			own = append([]float64(nil), q...) // a prediction of series moves scalars about
		}
		newPredictor(c.m, len(q), len(c.x), c.free).rows(own, c.x, lo, hi, f, jac)
		toIndication(g, o, lo, hi, f, jac)
	})
}

// toIndication turns true values of the response into readings.
func toIndication(gain, offset float64, lo, hi int, f []float64, jac [][]float64) {
	if gain == 1 && offset == 0 {
		return
	}
	for i := lo; i < hi; i++ {
		f[i] = (f[i] - offset) / gain
	}
	for k := range jac {
		for i := lo; i < hi; i++ {
			jac[k][i] /= gain
		}
	}
}

// slopes returns ∂(indication)/∂(true value of predictor p) for the predictors
// in want, over all rows, at scalars q.
func (c *chain) slopes(q []float64, want []bool) [][]float64 {
	out := make([][]float64, len(c.pred))
	for p, w := range want {
		if w {
			out[p] = make([]float64, len(c.record))
		}
	}
	parallel(len(c.record), chunkRows, func(lo, hi int) {
		for p, s := range c.slopesOf(q, want, lo, hi) {
			if want[p] {
				copy(out[p][lo:hi], s)
			}
		}
	})
	return out
}

// slopesOf returns the slopes of rows lo to hi−1.
func (c *chain) slopesOf(q []float64, want []bool, lo, hi int) [][]float64 {
	out := make([][]float64, len(c.pred))
	seeds := 0
	for p, w := range want {
		if w {
			out[p] = make([]float64, hi-lo)
			seeds++
		}
	}
	if seeds == 0 {
		return out
	}
	g, _ := gainOffset(&c.b.Channels[c.resp])
	space := jet.NewSpace(seeds, 0)
	qj := jet.Consts(q)
	xj := make([]jet.Jet, len(c.x))
	for i := lo; i < hi; i++ {
		space.Reset()
		s := 0
		for p := range c.x {
			if p < len(want) && want[p] {
				xj[p] = space.Var(s, c.x[p][i])
				s++
			} else {
				xj[p] = jet.Const(c.x[p][i])
			}
		}
		r := c.m.Row(qj, xj)
		s = 0
		for p := range want {
			if want[p] {
				out[p][i-lo] = r.Grad(s) / g
				s++
			}
		}
	}
	return out
}
