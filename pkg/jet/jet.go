package jet

import "math"

// Space owns the storage of the jets made from it: n seeds, of which the first
// p have Hessian rows.
type Space struct {
	n, p   int
	size   int
	blocks [][]float64
	block  int // index of the block in use
	used   int // floats used in it
}

// blockJets is how many jets one block of storage holds.
const blockJets = 64

// NewSpace makes a space of n seeds with second derivatives of the first p with
// respect to all n. It panics when 0 ≤ p ≤ n does not hold: the two numbers are
// the programmer's, never the user's.
func NewSpace(n, p int) *Space {
	if p < 0 || n < p {
		panic("jet: NewSpace wants 0 <= p <= n")
	}
	return &Space{n: n, p: p, size: n + p*n}
}

// Seeds returns the number of seeds n and of Hessian rows p.
func (s *Space) Seeds() (n, p int) { return s.n, s.p }

// Reset takes back the storage of every jet made from the space. Jets made
// before must not be used after.
func (s *Space) Reset() { s.block, s.used = 0, 0 }

func (s *Space) alloc() []float64 {
	if s.size == 0 {
		return nil
	}
	for {
		if s.block == len(s.blocks) {
			s.blocks = append(s.blocks, make([]float64, s.size*blockJets))
		}
		b := s.blocks[s.block]
		if s.used+s.size <= len(b) {
			d := b[s.used : s.used+s.size : s.used+s.size]
			s.used += s.size
			return d
		}
		s.block++
		s.used = 0
	}
}

// Jet is a value with its derivatives. The zero Jet is the constant 0.
type Jet struct {
	// V is the value, in whatever unit the calculation is in.
	V float64
	d []float64 // gradient (n), then Hessian rows (p × n); nil for a constant
	s *Space
}

// Const is a number without derivatives.
func Const(v float64) Jet { return Jet{V: v} }

// Consts are numbers without derivatives.
func Consts(v []float64) []Jet {
	q := make([]Jet, len(v))
	for i, x := range v {
		q[i] = Jet{V: x}
	}
	return q
}

// Var is the value v of seed i.
func (s *Space) Var(i int, v float64) Jet {
	d := s.alloc()
	clear(d)
	d[i] = 1
	return Jet{V: v, d: d, s: s}
}

// IsConst reports whether the jet carries no derivatives.
func (a Jet) IsConst() bool { return a.d == nil }

// Grad returns ∂a/∂seed i.
func (a Jet) Grad(i int) float64 {
	if a.d == nil {
		return 0
	}
	return a.d[i]
}

// Hess returns ∂²a/∂seed i ∂seed j; i must be below p.
func (a Jet) Hess(i, j int) float64 {
	if a.d == nil {
		return 0
	}
	return a.d[a.s.n+i*a.s.n+j]
}

// Gradient copies the n first derivatives into dst.
func (a Jet) Gradient(dst []float64) {
	if a.d == nil {
		clear(dst)
		return
	}
	copy(dst, a.d[:a.s.n])
}

// Chain applies a function of one argument, given its value f and its first
// and second derivatives f1 and f2 at a.V.
func (a Jet) Chain(f, f1, f2 float64) Jet {
	if a.d == nil {
		return Jet{V: f}
	}
	s := a.s
	n := s.n
	out := s.alloc()
	g := a.d[:n]
	for k, v := range g {
		out[k] = f1 * v
	}
	for i := range s.p {
		h := a.d[n+i*n : n+i*n+n]
		o := out[n+i*n : n+i*n+n]
		c := f2 * g[i]
		for j := range o {
			o[j] = f1*h[j] + c*g[j]
		}
	}
	return Jet{V: f, d: out, s: s}
}

// chain2 applies a function of two arguments, given its value, first (fa, fb)
// and second (faa, fab, fbb) derivatives.
func chain2(a, b Jet, f, fa, fb, faa, fab, fbb float64) Jet {
	switch {
	case b.d == nil:
		return a.Chain(f, fa, faa)
	case a.d == nil:
		return b.Chain(f, fb, fbb)
	}
	s := a.s
	n := s.n
	out := s.alloc()
	ga, gb := a.d[:n], b.d[:n]
	for k := range n {
		out[k] = fa*ga[k] + fb*gb[k]
	}
	for i := range s.p {
		ha := a.d[n+i*n : n+i*n+n]
		hb := b.d[n+i*n : n+i*n+n]
		o := out[n+i*n : n+i*n+n]
		ca := faa*ga[i] + fab*gb[i]
		cb := fab*ga[i] + fbb*gb[i]
		for j := range o {
			o[j] = fa*ha[j] + fb*hb[j] + ca*ga[j] + cb*gb[j]
		}
	}
	return Jet{V: f, d: out, s: s}
}

// ChainN applies a function of len(x) arguments, given its value f, gradient g
// (len(x)) and Hessian h (len(x)², row-major, symmetric).
func ChainN(x []Jet, f float64, g, h []float64) Jet {
	var s *Space
	for _, a := range x {
		if a.d != nil {
			s = a.s
			break
		}
	}
	if s == nil {
		return Jet{V: f}
	}
	n, m := s.n, len(x)
	out := s.alloc()
	clear(out)
	for k, a := range x {
		if a.d == nil {
			continue
		}
		for i, v := range a.d {
			out[i] += g[k] * v
		}
	}
	for i := range s.p {
		o := out[n+i*n : n+i*n+n]
		for l, b := range x {
			if b.d == nil {
				continue
			}
			var c float64
			for k, a := range x {
				if a.d != nil {
					c += h[k*m+l] * a.d[i]
				}
			}
			for j := range o {
				o[j] += c * b.d[j]
			}
		}
	}
	return Jet{V: f, d: out, s: s}
}

// Add returns a + b.
func (a Jet) Add(b Jet) Jet { return chain2(a, b, a.V+b.V, 1, 1, 0, 0, 0) }

// Sub returns a − b.
func (a Jet) Sub(b Jet) Jet { return chain2(a, b, a.V-b.V, 1, -1, 0, 0, 0) }

// Mul returns a·b.
func (a Jet) Mul(b Jet) Jet { return chain2(a, b, a.V*b.V, b.V, a.V, 0, 1, 0) }

// Div returns a/b.
func (a Jet) Div(b Jet) Jet {
	r := 1 / b.V
	q := a.V / b.V
	return chain2(a, b, q, r, -q*r, 0, -r*r, 2*q*r*r)
}

// Neg returns −a.
func (a Jet) Neg() Jet { return a.Chain(-a.V, -1, 0) }

// Scale returns k·a.
func (a Jet) Scale(k float64) Jet { return a.Chain(k*a.V, k, 0) }

// Plus returns a + k.
func (a Jet) Plus(k float64) Jet { return a.Chain(a.V+k, 1, 0) }

// Inv returns 1/a.
func (a Jet) Inv() Jet {
	r := 1 / a.V
	return a.Chain(r, -r*r, 2*r*r*r)
}

// Sqr returns a².
func (a Jet) Sqr() Jet { return a.Chain(a.V*a.V, 2*a.V, 2) }

// Sqrt returns √a.
func (a Jet) Sqrt() Jet {
	r := math.Sqrt(a.V)
	return a.Chain(r, 0.5/r, -0.25/(r*a.V))
}

// Pow returns a to the constant power k.
func (a Jet) Pow(k float64) Jet {
	return a.Chain(math.Pow(a.V, k), k*math.Pow(a.V, k-1), k*(k-1)*math.Pow(a.V, k-2))
}

// PowJet returns a to the power b, for a > 0.
func (a Jet) PowJet(b Jet) Jet { return a.Log().Mul(b).Exp() }

// Exp returns e to the power a.
func (a Jet) Exp() Jet {
	e := math.Exp(a.V)
	return a.Chain(e, e, e)
}

// Log returns the natural logarithm of a.
func (a Jet) Log() Jet {
	r := 1 / a.V
	return a.Chain(math.Log(a.V), r, -r*r)
}

// Sin returns the sine of a, in radians.
func (a Jet) Sin() Jet {
	s, c := math.Sincos(a.V)
	return a.Chain(s, c, -s)
}

// Cos returns the cosine of a, in radians.
func (a Jet) Cos() Jet {
	s, c := math.Sincos(a.V)
	return a.Chain(c, -s, -c)
}

// Tan returns the tangent of a, in radians.
func (a Jet) Tan() Jet {
	t := math.Tan(a.V)
	q := 1 + t*t
	return a.Chain(t, q, 2*t*q)
}

// Atan returns the arc tangent of a, in radians.
func (a Jet) Atan() Jet {
	q := 1 / (1 + a.V*a.V)
	return a.Chain(math.Atan(a.V), q, -2*a.V*q*q)
}

// Tanh returns the hyperbolic tangent of a.
func (a Jet) Tanh() Jet {
	t := math.Tanh(a.V)
	q := 1 - t*t
	return a.Chain(t, q, -2*t*q)
}
