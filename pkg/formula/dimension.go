package formula

import (
	"fmt"
	"go/token"
	"math"

	"example.org/guardring/pkg/si"
)

// Dimension returns the dimension of the formula's result when variable i has
// dims[i], or an *Error that points to the operation that joins what can't be
// joined. Sums, differences, abs, min, max and atan2 need like dimensions; sqrt
// halves; pow of a quantity with a dimension needs a constant exponent in
// twelfths; the other functions need pure numbers. A number is a pure number,
// except that a literal 0 goes with every dimension: max(x, 0).
func (p *Program) Dimension(dims []si.Dimension) (si.Dimension, error) {
	if len(dims) != len(p.vars) {
		return si.Dimension{}, &Error{Source: p.src,
			Reason: fmt.Sprintf("%d dimensions are given for %d variables", len(dims), len(p.vars))}
	}
	c := checker{p: p, dims: dims}
	d, err := c.walk(p.tree)
	if err != nil {
		return si.Dimension{}, err
	}
	return d.Dimension, nil
}

// measure is a dimension, or that of 0, which is any.
type measure struct {
	si.Dimension
	any bool
}

type checker struct {
	p    *Program
	dims []si.Dimension
}

func (c *checker) fail(t *tree, format string, args ...any) (measure, error) {
	return measure{}, &Error{Source: c.p.src, Column: t.col, Reason: fmt.Sprintf(format, args...)}
}

// unitName is a dimension in the unit that people know it by.
func unitName(d si.Dimension) string {
	if d.IsOne() {
		return "a pure number"
	}
	return d.Unit().String()
}

func (c *checker) walk(t *tree) (measure, error) {
	switch t.kind {
	case kindNumber:
		return measure{any: t.value == 0}, nil
	case kindConst:
		return measure{Dimension: constants[t.index].dim}, nil
	case kindVar:
		return measure{Dimension: c.dims[t.index]}, nil
	case kindSign:
		return c.walk(t.args[0])
	case kindBinary:
		return c.binary(t)
	}
	return c.call(t)
}

// binary follows the left spine without recursion, as the reader does.
func (c *checker) binary(t *tree) (measure, error) {
	var spine []*tree
	left := t
	for left.kind == kindBinary {
		spine = append(spine, left)
		left = left.args[0]
	}
	m, err := c.walk(left)
	if err != nil {
		return measure{}, err
	}
	for i := len(spine) - 1; i >= 0; i-- {
		b := spine[i]
		r, err := c.walk(b.args[1])
		if err != nil {
			return measure{}, err
		}
		switch b.op {
		case token.MUL:
			m = measure{m.Mul(r.Dimension), m.any || r.any}
		case token.QUO:
			m = measure{m.Div(r.Dimension), m.any}
		default:
			j, ok := same(m, r)
			if !ok {
				word := "added"
				if b.op == token.SUB {
					word = "subtracted"
				}
				return c.fail(b, "%s and %s can't be %s", unitName(m.Dimension), unitName(r.Dimension), word)
			}
			m = j
		}
	}
	return m, nil
}

// same joins two measures that must be alike.
func same(a, b measure) (measure, bool) {
	switch {
	case a.any:
		return b, true
	case b.any, a.Dimension == b.Dimension:
		return a, true
	}
	return measure{}, false
}

func (c *checker) call(t *tree) (measure, error) {
	args := make([]measure, len(t.args))
	for i, a := range t.args {
		m, err := c.walk(a)
		if err != nil {
			return measure{}, err
		}
		args[i] = m
	}
	f := t.fun
	switch f.rule {
	case ruleSame, ruleAtan2:
		m := args[0]
		for i := range args[1:] {
			j, ok := same(m, args[i+1])
			if !ok {
				return c.fail(t.args[i+1], "%s compares %s with %s", f.name, unitName(m.Dimension), unitName(args[i+1].Dimension))
			}
			m = j
		}
		if f.rule == ruleAtan2 {
			return measure{}, nil
		}
		return m, nil
	case ruleSqrt:
		d, ok := args[0].Root(1, 2)
		if !ok {
			return c.fail(t, "the square root of %s has no dimension in twelfths", unitName(args[0].Dimension))
		}
		return measure{d, args[0].any}, nil
	case rulePow:
		return c.pow(t, args)
	}
	if !args[0].any && !args[0].IsOne() {
		return c.fail(t.args[0], "%s needs a pure number, not %s", f.name, unitName(args[0].Dimension))
	}
	return measure{}, nil
}

func (c *checker) pow(t *tree, args []measure) (measure, error) {
	if !args[1].any && !args[1].IsOne() {
		return c.fail(t.args[1], "an exponent is a pure number, not %s", unitName(args[1].Dimension))
	}
	if args[0].IsOne() || args[0].any {
		return measure{}, nil
	}
	e, ok := fixedValue(t.args[1])
	if !ok {
		return c.fail(t.args[1], "the exponent of a quantity in %s must be a number, so that the result has a dimension", unitName(args[0].Dimension))
	}
	// Thirds and sixths come rounded to doubles.
	n := math.Round(e * 12)
	if math.Abs(n-e*12) > 1e-9 || math.Abs(n) > 12*100 {
		return c.fail(t.args[1], "the exponent %s of a quantity in %s is no multiple of 1/12 up to 100", si.Exact(e), unitName(args[0].Dimension))
	}
	d, ok := args[0].Root(int(n), 12)
	if !ok {
		return c.fail(t.args[1], "%s to the power of %s has no dimension in twelfths", unitName(args[0].Dimension), si.Exact(e))
	}
	return measure{Dimension: d}, nil
}

// fixedValue evaluates a tree without variables.
func fixedValue(t *tree) (float64, bool) {
	g := newGraph()
	n := g.node(g.build(t))
	return n.val, n.op == opConst
}
