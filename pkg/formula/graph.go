package formula

import (
	"go/token"
	"math"
)

// op is an operation of a compiled formula.
type op uint8

const (
	opConst op = iota
	opVar
	opNeg
	opAdd
	opSub
	opMul
	opDiv
	opSqrt
	opPow
	opExp
	opLog
	opSin
	opCos
	opTan
	opAsin
	opAcos
	opAtan
	opAtan2
	opSinh
	opCosh
	opTanh
	opAbs
	opMin
	opMax

	// These occur in derivatives only.
	opSign    // −1 below zero, otherwise 1
	opGE      // 1 where a ≥ b, otherwise 0
	opSech2   // 1/cosh²
	opPowLog  // a^b log a
	opPowLog2 // a^b log² a
)

// arguments is the number of arguments of each operation.
var arguments = func() (n [opPowLog2 + 1]uint8) {
	for o := range n {
		n[o] = 1
	}
	for _, o := range []op{opAdd, opSub, opMul, opDiv, opPow, opAtan2, opMin, opMax, opGE, opPowLog, opPowLog2} {
		n[o] = 2
	}
	n[opConst], n[opVar] = 0, 0
	return n
}()

func (o op) args() int { return int(arguments[o]) }

// node is one operation; its arguments stand before it.
type node struct {
	op   op
	a, b int32   // arguments; of opVar, a is the variable
	val  float64 // of opConst
}

// graph holds the nodes of a formula, every one once: building the same
// operation again finds it, so that common subexpressions are shared.
type graph struct {
	nodes []node
	found map[key]int32
}

type key struct {
	op   op
	a, b int32
	bits uint64
}

func newGraph() *graph { return &graph{found: map[key]int32{}} }

func (g *graph) node(i int32) node { return g.nodes[i] }

func (g *graph) put(n node) int32 {
	k := key{n.op, n.a, n.b, math.Float64bits(n.val)}
	if i, ok := g.found[k]; ok {
		return i
	}
	i := int32(len(g.nodes))
	g.nodes = append(g.nodes, n)
	g.found[k] = i
	return i
}

func (g *graph) num(v float64) int32  { return g.put(node{op: opConst, val: v}) }
func (g *graph) variable(i int) int32 { return g.put(node{op: opVar, a: int32(i)}) }

// is reports whether node i is the constant v.
func (g *graph) is(i int32, v float64) bool {
	return g.nodes[i].op == opConst && g.nodes[i].val == v
}

// build adds a tree and returns its node.
func (g *graph) build(t *tree) int32 {
	switch t.kind {
	case kindNumber, kindConst:
		return g.num(t.value)
	case kindVar:
		return g.variable(t.index)
	case kindSign:
		return g.neg(g.build(t.args[0]))
	case kindBinary:
		return g.binary(t)
	}
	a := g.build(t.args[0])
	if len(t.args) == 1 {
		return g.apply(t.fun.op, a, a)
	}
	for _, x := range t.args[1:] { // min and max of many fold from the left
		a = g.apply(t.fun.op, a, g.build(x))
	}
	return a
}

func (g *graph) binary(t *tree) int32 {
	var spine []*tree
	for t.kind == kindBinary {
		spine = append(spine, t)
		t = t.args[0]
	}
	a := g.build(t)
	for i := len(spine) - 1; i >= 0; i-- {
		b := g.build(spine[i].args[1])
		switch spine[i].op {
		case token.ADD:
			a = g.add(a, b)
		case token.SUB:
			a = g.sub(a, b)
		case token.MUL:
			a = g.mul(a, b)
		case token.QUO:
			a = g.div(a, b)
		}
	}
	return a
}

// apply adds the operation o of a (and b). Constants are folded, and forms that
// round alike are written the cheaper way.
func (g *graph) apply(o op, a, b int32) int32 {
	switch o {
	case opNeg:
		return g.neg(a)
	case opAdd:
		return g.add(a, b)
	case opSub:
		return g.sub(a, b)
	case opMul:
		return g.mul(a, b)
	case opDiv:
		return g.div(a, b)
	case opPow:
		return g.pow(a, b)
	}
	return g.raw(o, a, b)
}

// raw adds the operation as it is, folded when its arguments are constants.
func (g *graph) raw(o op, a, b int32) int32 {
	x, y := g.nodes[a], g.nodes[b]
	if o.args() == 1 {
		b = 0
		if x.op == opConst {
			return g.num(apply(o, x.val, 0))
		}
	} else if x.op == opConst && y.op == opConst {
		return g.num(apply(o, x.val, y.val))
	}
	return g.put(node{op: o, a: a, b: b})
}

func (g *graph) neg(a int32) int32 {
	if g.nodes[a].op == opNeg {
		return g.nodes[a].a
	}
	return g.raw(opNeg, a, a)
}

func (g *graph) add(a, b int32) int32 {
	switch {
	case g.is(a, 0):
		return b
	case g.is(b, 0):
		return a
	case a == b:
		return g.mul(g.num(2), a)
	case g.nodes[b].op == opNeg:
		return g.sub(a, g.nodes[b].a)
	case g.nodes[a].op == opNeg:
		return g.sub(b, g.nodes[a].a)
	case a > b: // addition commutes to the bit: one order finds both
		a, b = b, a
	}
	return g.raw(opAdd, a, b)
}

func (g *graph) sub(a, b int32) int32 {
	switch {
	case g.is(b, 0):
		return a
	case g.is(a, 0):
		return g.neg(b)
	case g.nodes[b].op == opNeg:
		return g.add(a, g.nodes[b].a)
	}
	return g.raw(opSub, a, b)
}

func (g *graph) mul(a, b int32) int32 {
	if a > b {
		a, b = b, a
	}
	x, y := g.nodes[a], g.nodes[b]
	switch {
	case g.is(a, 1):
		return b
	case g.is(b, 1):
		return a
	case g.is(a, -1):
		return g.neg(b)
	case g.is(b, -1):
		return g.neg(a)
	case x.op == opNeg && y.op == opNeg:
		return g.mul(x.a, y.a)
	case x.op == opNeg:
		return g.neg(g.mul(x.a, b))
	case y.op == opNeg:
		return g.neg(g.mul(a, y.a))
	}
	return g.raw(opMul, a, b)
}

func (g *graph) div(a, b int32) int32 {
	x, y := g.nodes[a], g.nodes[b]
	switch {
	case g.is(b, 1):
		return a
	case g.is(b, -1):
		return g.neg(a)
	case x.op == opNeg && y.op == opNeg:
		return g.div(x.a, y.a)
	case x.op == opNeg:
		return g.neg(g.div(x.a, b))
	case y.op == opNeg:
		return g.neg(g.div(a, y.a))
	case y.op == opConst && x.op != opConst:
		// Dividing by a power of two is multiplying by its exact reciprocal.
		if f, e := math.Frexp(y.val); math.Abs(f) == 0.5 && e > -1000 && e < 1000 {
			return g.mul(a, g.num(1/y.val))
		}
	}
	return g.raw(opDiv, a, b)
}

// mostMultiplied is the largest whole exponent that becomes multiplications.
const mostMultiplied = 8

func (g *graph) pow(a, b int32) int32 {
	if g.nodes[b].op != opConst || g.nodes[a].op == opConst {
		return g.raw(opPow, a, b)
	}
	e := g.nodes[b].val
	switch n := int(e); {
	case e == 0:
		return g.num(1)
	case e == 0.5:
		return g.raw(opSqrt, a, a)
	case e == -0.5:
		return g.div(g.num(1), g.raw(opSqrt, a, a))
	case e != math.Trunc(e) || math.Abs(e) > mostMultiplied:
		return g.raw(opPow, a, b)
	case n < 0:
		return g.div(g.num(1), g.times(a, -n))
	default:
		return g.times(a, n)
	}
}

// times is a multiplied by itself, n ≥ 1 factors.
func (g *graph) times(a int32, n int) int32 {
	if n == 1 {
		return a
	}
	half := g.times(a, n/2)
	sq := g.mul(half, half)
	if n%2 == 1 {
		return g.mul(sq, a)
	}
	return sq
}

// apply computes one operation on numbers.
func apply(o op, a, b float64) float64 {
	switch o {
	case opNeg:
		return -a
	case opAdd:
		return a + b
	case opSub:
		return a - b
	case opMul:
		return a * b
	case opDiv:
		return a / b
	case opSqrt:
		return math.Sqrt(a)
	case opPow:
		return math.Pow(a, b)
	case opExp:
		return math.Exp(a)
	case opLog:
		return math.Log(a)
	case opSin:
		return math.Sin(a)
	case opCos:
		return math.Cos(a)
	case opTan:
		return math.Tan(a)
	case opAsin:
		return math.Asin(a)
	case opAcos:
		return math.Acos(a)
	case opAtan:
		return math.Atan(a)
	case opAtan2:
		return math.Atan2(a, b)
	case opSinh:
		return math.Sinh(a)
	case opCosh:
		return math.Cosh(a)
	case opTanh:
		return math.Tanh(a)
	case opAbs:
		return math.Abs(a)
	case opMin:
		return min(a, b)
	case opMax:
		return max(a, b)
	case opSign:
		return sign(a)
	case opGE:
		return atLeast(a, b)
	case opSech2:
		return sech2(a)
	case opPowLog:
		return powLog(a, b)
	case opPowLog2:
		return powLog2(a, b)
	}
	panic("formula: unknown operation") // every op stands above
}

// sign is the derivative of abs: −1 below zero and, by convention, 1 at and
// above it (the derivative from the right).
func sign(a float64) float64 {
	switch {
	case a < 0:
		return -1
	case a >= 0:
		return 1
	}
	return a // NaN
}

// atLeast is 1 where a ≥ b and 0 where a < b.
func atLeast(a, b float64) float64 {
	switch {
	case a >= b:
		return 1
	case a < b:
		return 0
	}
	return math.NaN()
}

// sech2 is 1/cosh², the derivative of tanh, without the cancellation of 1 −
// tanh².
func sech2(a float64) float64 {
	c := math.Cosh(a)
	return 1 / (c * c)
}

// powLog is a^b log a, the derivative of a^b by b, with its limit 0 at a = 0
// for b > 0.
func powLog(a, b float64) float64 {
	if a == 0 && b > 0 {
		return 0
	}
	return math.Pow(a, b) * math.Log(a)
}

// powLog2 is a^b log² a, the second derivative, likewise.
func powLog2(a, b float64) float64 {
	if a == 0 && b > 0 {
		return 0
	}
	l := math.Log(a)
	return math.Pow(a, b) * l * l
}
