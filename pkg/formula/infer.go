package formula

import (
	"fmt"
	"go/token"
	"math"
	"math/big"
	"slices"
	"strings"

	"example.org/guardring/pkg/si"
)

// Infer finds the dimensions of the variables unknown from those of all others
// and of the result: in c + s/(d + d0) with d a length and the result a
// capacitance, d0 is a length, c a capacitance and s their product. dims has the
// length of the program's variables; entries of unknown ones are not looked at.
// known[k] is false where the formula leaves the dimension of unknown[k] open, as
// in a*b*x. A formula that no dimensions fit is an *Error that points to the
// operation.
//
// Every operation that needs like dimensions gives a linear equation in the
// logarithms of the unknown ones, with rational coefficients (derived from the
// rules of Dimension); they are solved by elimination.
func (p *Program) Infer(dims []si.Dimension, unknown []int, result si.Dimension) (found []si.Dimension, known []bool, err error) {
	return p.infer(dims, unknown, &result)
}

// InferAny is Infer for a result of whatever dimension, as that of an equation: its
// sides must be alike, and nothing else is asked of them.
func (p *Program) InferAny(dims []si.Dimension, unknown []int) (found []si.Dimension, known []bool, err error) {
	return p.infer(dims, unknown, nil)
}

func (p *Program) infer(dims []si.Dimension, unknown []int, result *si.Dimension) (found []si.Dimension, known []bool, err error) {
	if len(dims) != len(p.vars) {
		return nil, nil, &Error{Source: p.src, Reason: fmt.Sprintf("%d dimensions are given for %d variables", len(dims), len(p.vars))}
	}
	f := finder{p: p, dims: dims, at: make([]int, len(p.vars)), unknown: unknown}
	for i := range f.at {
		f.at[i] = slices.Index(unknown, i)
	}
	m, err := f.walk(p.tree)
	if err != nil {
		return nil, nil, err
	}
	if result != nil {
		if err := f.like(p.tree, m, power{dim: *result, coef: f.none()}, "the formula and the result"); err != nil {
			return nil, nil, err
		}
	}
	found, known = make([]si.Dimension, len(unknown)), make([]bool, len(unknown))
	for _, e := range f.equations {
		free := false
		for j, c := range e.coef {
			free = free || j != e.pivot && c.Sign() != 0
		}
		if !free {
			found[e.pivot], known[e.pivot] = e.dim, true
		}
	}
	return found, known, nil
}

// power is a dimension times unknown ones to rational powers; any is that of 0.
type power struct {
	dim  si.Dimension
	coef []*big.Rat // beside finder.unknown
	any  bool
}

// equation says that the unknown dimensions to the powers coef give dim. Its
// pivot has the coefficient one, and zero in all others.
type equation struct {
	power
	pivot int
}

type finder struct {
	p         *Program
	dims      []si.Dimension
	at        []int // position in unknown of every variable, or −1
	unknown   []int
	equations []equation
}

func (f *finder) none() []*big.Rat {
	c := make([]*big.Rat, len(f.unknown))
	for i := range c {
		c[i] = new(big.Rat)
	}
	return c
}

func (f *finder) fail(t *tree, format string, args ...any) error {
	return &Error{Source: f.p.src, Column: t.col, Reason: fmt.Sprintf(format, args...)}
}

// times returns a·b^q.
func (f *finder) times(t *tree, a, b power, q *big.Rat) (power, error) {
	d, ok := root(b.dim, q)
	if !ok {
		return power{}, f.fail(t, "%s to the power of %s has no dimension in twelfths", unitName(b.dim), q.RatString())
	}
	out := power{dim: a.dim.Mul(d), coef: f.none(), any: a.any}
	for i := range out.coef {
		out.coef[i].Mul(b.coef[i], q)
		out.coef[i].Add(out.coef[i], a.coef[i])
	}
	return out, nil
}

// root is a dimension to a rational power.
func root(d si.Dimension, q *big.Rat) (si.Dimension, bool) {
	if d.IsOne() || q.Sign() == 0 {
		return si.Dimension{}, true
	}
	if !q.Num().IsInt64() || !q.Denom().IsInt64() || q.Num().Int64() > math.MaxInt16 || q.Num().Int64() < math.MinInt16 || q.Denom().Int64() > math.MaxInt16 {
		return si.Dimension{}, false
	}
	return d.Root(int(q.Num().Int64()), int(q.Denom().Int64()))
}

// like adds the equation a = b.
func (f *finder) like(t *tree, a, b power, what string) error {
	if a.any || b.any {
		return nil
	}
	d, err := f.times(t, a, b, big.NewRat(-1, 1))
	if err != nil {
		return err
	}
	// d to the power one must be a pure number: Σ coef·X = 1/dim.
	e := power{coef: d.coef}
	e.dim = si.Dimension{}.Div(d.dim)
	for _, old := range f.equations {
		q := new(big.Rat).Neg(e.coef[old.pivot])
		if e, err = f.times(t, e, old.power, q); err != nil {
			return err
		}
	}
	pivot := -1
	for j, c := range e.coef {
		if c.Sign() != 0 {
			pivot = j
			break
		}
	}
	if pivot < 0 {
		if e.dim.IsOne() {
			return nil
		}
		if !f.open(a) && !f.open(b) {
			return f.fail(t, "%s differ: %s and %s", what, unitName(a.dim), unitName(b.dim))
		}
		ra, errA := f.resolve(t, a)
		rb, errB := f.resolve(t, b)
		if errA == nil && errB == nil && !f.open(ra) && !f.open(rb) {
			return f.fail(t, "no units of %s fit: %s differ, %s and %s, which can be neither equal nor added", f.names(a, b), what, unitName(ra.dim), unitName(rb.dim))
		}
		return f.fail(t, "no units of %s fit: %s differ by %s", f.names(a, b), what, unitName(e.dim))
	}
	if e, err = f.times(t, power{coef: f.none()}, e, new(big.Rat).Inv(e.coef[pivot])); err != nil {
		return err
	}
	for i := range f.equations {
		q := new(big.Rat).Neg(f.equations[i].coef[pivot])
		if f.equations[i].power, err = f.times(t, f.equations[i].power, e, q); err != nil {
			return err
		}
	}
	f.equations = append(f.equations, equation{e, pivot})
	return nil
}

// resolve puts what the equations say of the unknowns into a.
func (f *finder) resolve(t *tree, a power) (power, error) {
	var err error
	for _, old := range f.equations {
		one := power{dim: si.Dimension{}.Div(old.dim), coef: old.coef} // an equation says that its unknowns make its dimension
		if a, err = f.times(t, a, one, new(big.Rat).Neg(a.coef[old.pivot])); err != nil {
			return a, err
		}
	}
	return a, nil
}

// open reports whether a holds an unknown.
func (f *finder) open(a power) bool {
	return slices.ContainsFunc(a.coef, func(c *big.Rat) bool { return c.Sign() != 0 })
}

// names lists the unknowns in a and b.
func (f *finder) names(a, b power) string {
	var list []string
	for j, v := range f.unknown {
		if a.coef[j].Sign() != 0 || b.coef[j].Sign() != 0 {
			list = append(list, f.p.vars[v])
		}
	}
	return strings.Join(list, ", ")
}

func (f *finder) walk(t *tree) (power, error) {
	switch t.kind {
	case kindNumber:
		return power{coef: f.none(), any: t.value == 0}, nil
	case kindConst:
		return power{dim: constants[t.index].dim, coef: f.none()}, nil
	case kindVar:
		m := power{coef: f.none()}
		if j := f.at[t.index]; j >= 0 {
			m.coef[j].SetInt64(1)
		} else {
			m.dim = f.dims[t.index]
		}
		return m, nil
	case kindSign:
		return f.walk(t.args[0])
	case kindBinary:
		return f.binary(t)
	}
	return f.call(t)
}

// binary follows the left spine without recursion, as the reader does.
func (f *finder) binary(t *tree) (power, error) {
	var spine []*tree
	left := t
	for left.kind == kindBinary {
		spine = append(spine, left)
		left = left.args[0]
	}
	m, err := f.walk(left)
	if err != nil {
		return m, err
	}
	for i := len(spine) - 1; i >= 0; i-- {
		b := spine[i]
		r, err := f.walk(b.args[1])
		if err != nil {
			return m, err
		}
		switch b.op {
		case token.MUL:
			any := m.any || r.any
			m, err = f.times(b, m, r, big.NewRat(1, 1))
			m.any = any
		case token.QUO:
			m, err = f.times(b, m, r, big.NewRat(-1, 1))
		default:
			what := "the terms of this sum"
			if b.op == token.SUB {
				what = "the terms of this difference"
			}
			if f.p.equation && b == f.p.tree {
				what = "the sides of this equation"
			}
			err = f.like(b, m, r, what)
			if m.any {
				m = r
			}
		}
		if err != nil {
			return m, err
		}
	}
	return m, nil
}

func (f *finder) call(t *tree) (power, error) {
	args := make([]power, len(t.args))
	for i, a := range t.args {
		m, err := f.walk(a)
		if err != nil {
			return m, err
		}
		args[i] = m
	}
	one := power{coef: f.none()}
	switch t.fun.rule {
	case ruleSame, ruleAtan2:
		m := args[0]
		for i := range args[1:] {
			if err := f.like(t.args[i+1], m, args[i+1], "the arguments of "+t.fun.name); err != nil {
				return m, err
			}
			if m.any {
				m = args[i+1]
			}
		}
		if t.fun.rule == ruleAtan2 {
			return one, nil
		}
		return m, nil
	case ruleSqrt:
		m, err := f.times(t, one, args[0], big.NewRat(1, 2))
		m.any = args[0].any
		return m, err
	case rulePow:
		if err := f.like(t.args[1], args[1], one, "an exponent and a pure number"); err != nil {
			return one, err
		}
		if args[0].any {
			return one, nil
		}
		e, ok := fixedValue(t.args[1])
		// Thirds and sixths come rounded to doubles.
		n := math.Round(e * 12)
		if !ok || math.Abs(n-e*12) > 1e-9 || math.Abs(n) > 12*100 {
			// Only a pure number has every power.
			return one, f.like(t.args[0], args[0], one, "what is raised to a power that is no constant in twelfths, and a pure number")
		}
		return f.times(t, one, args[0], big.NewRat(int64(n), 12))
	}
	return one, f.like(t.args[0], args[0], one, "the argument of "+t.fun.name+" and a pure number")
}
