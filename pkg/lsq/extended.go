package lsq

import (
	"context"
	"math"
)

// wide is an unevaluated sum hi + lo of about 106 bits (Dekker, Numer. Math. 18
// (1971) 224; Knuth, The Art of Computer Programming 2, section 4.2.2).
type wide struct{ hi, lo float64 }

func twoSum(a, b float64) wide {
	s := a + b
	t := s - a
	return wide{s, (a - (s - t)) + (b - t)}
}

func quick(a, b float64) wide {
	s := a + b
	return wide{s, b - (s - a)}
}

func twoProd(a, b float64) wide {
	p := a * b
	return wide{p, math.FMA(a, b, -p)}
}

func (a wide) add(b wide) wide {
	s := twoSum(a.hi, b.hi)
	t := twoSum(a.lo, b.lo)
	s = quick(s.hi, s.lo+t.hi)
	return quick(s.hi, s.lo+t.lo)
}

func (a wide) neg() wide { return wide{-a.hi, -a.lo} }

func (a wide) sub(b wide) wide { return a.add(b.neg()) }

func (a wide) mul(b wide) wide {
	p := twoProd(a.hi, b.hi)
	return quick(p.hi, p.lo+(a.hi*b.lo+a.lo*b.hi))
}

func (a wide) div(b wide) wide {
	q := a.hi / b.hi
	r := a.sub(b.mul(wide{q, 0}))
	q2 := r.hi / b.hi
	r = r.sub(b.mul(wide{q2, 0}))
	return quick(q, q2).add(wide{r.hi / b.hi, 0})
}

func (a wide) sqrt() wide {
	if a.hi <= 0 {
		return wide{}
	}
	x := math.Sqrt(a.hi)
	r := a.sub(twoProd(x, x))
	return quick(x, r.hi/(2*x))
}

func (a wide) float() float64 { return a.hi + a.lo }

// extended is a linear least-squares solution in wide arithmetic: Householder
// QR of the whole matrix.
type extended struct {
	q         int
	r         [][]wide // columns of the triangle
	theta     []wide
	residuals []float64 // whitened right-hand side minus J θ, rounded
	chi2      float64
}

// solveWide finds min ‖rhs − cols·θ‖; cols and rhs are overwritten. It gives
// nil when a column depends on those before it, and the context's error when it
// is cancelled.
func solveWide(ctx context.Context, cols [][]wide, rhs []wide) (*extended, error) {
	q, n := len(cols), len(rhs)
	heads := make([]wide, q) // first element of each reflection vector
	gains := make([]wide, q)
	e := &extended{q: q, r: make([][]wide, q), theta: make([]wide, q)}
	for k := 0; k < q && k < n; k++ {
		x := cols[k]
		var nn wide
		for _, v := range x[k:] {
			nn = nn.add(v.mul(v))
		}
		if nn.hi == 0 {
			return nil, nil
		}
		alpha := nn.sqrt()
		if x[k].hi > 0 {
			alpha = alpha.neg()
		}
		v0 := x[k].sub(alpha)
		heads[k] = v0
		gains[k] = wide{1, 0}.div(alpha.mul(v0)).neg()
		for j := k + 1; j <= q; j++ {
			c := rhs
			if j < q {
				c = cols[j]
			}
			if err := ctx.Err(); err != nil {
				return nil, err
			}
			reflectWide(x, c, k, v0, gains[k])
		}
		e.r[k] = make([]wide, k+1)
		copy(e.r[k], x[:k])
		e.r[k][k] = alpha
	}
	copy(e.theta, rhs[:q])
	for k := q - 1; k >= 0; k-- {
		if math.Abs(e.r[k][k].hi) == 0 {
			return nil, nil
		}
		e.theta[k] = e.theta[k].div(e.r[k][k])
		for i := 0; i < k; i++ {
			e.theta[i] = e.theta[i].sub(e.r[k][i].mul(e.theta[k]))
		}
	}
	// residuals: reflect (0, rhs below) back
	var total wide
	for _, v := range rhs[min(q, n):] {
		total = total.add(v.mul(v))
	}
	e.chi2 = total.float()
	for i := 0; i < q && i < n; i++ {
		rhs[i] = wide{}
	}
	for k := min(q, n) - 1; k >= 0; k-- {
		reflectWide(cols[k], rhs, k, heads[k], gains[k])
	}
	e.residuals = make([]float64, n)
	for i, v := range rhs {
		e.residuals[i] = v.float()
	}
	return e, nil
}

// reflectWide applies I − 2vvᵀ/vᵀv, v = (v0, x[k+1:]), to c[k:].
func reflectWide(x, c []wide, k int, v0, g wide) {
	s := v0.mul(c[k])
	for i := k + 1; i < len(c); i++ {
		s = s.add(x[i].mul(c[i]))
	}
	s = s.mul(g)
	c[k] = c[k].sub(s.mul(v0))
	for i := k + 1; i < len(c); i++ {
		c[i] = c[i].sub(s.mul(x[i]))
	}
}
