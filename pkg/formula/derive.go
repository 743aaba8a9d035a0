package formula

// gradient adds the partial derivatives of node out by the variables wrt and
// returns their nodes. It is reverse accumulation, written down instead of
// carried out: each node's adjoint is the sum over its users of theirs times
// the local derivative. The result is a graph like the formula's own, in which
// what they share is computed once.
//
// Only nodes that exist when it is called are walked, and only those that
// depend on wrt.
func (g *graph) gradient(out int32, wrt []int) []int32 {
	wanted := make(map[int32]bool, len(wrt))
	for _, v := range wrt {
		wanted[int32(v)] = true
	}
	// Nodes below out that out needs and that depend on wrt.
	n := int(out) + 1
	active := make([]bool, n)
	for i := range n {
		switch x := g.nodes[i]; x.op.args() {
		case 0:
			active[i] = x.op == opVar && wanted[x.a]
		case 1:
			active[i] = active[x.a]
		case 2:
			active[i] = active[x.a] || active[x.b]
		}
	}
	adjoint := make([]int32, n)
	for i := range adjoint {
		adjoint[i] = -1
	}
	adjoint[out] = g.num(1)
	to := func(i, t int32) {
		switch {
		case !active[i] || g.is(t, 0):
		case adjoint[i] < 0:
			adjoint[i] = t
		default:
			adjoint[i] = g.add(adjoint[i], t)
		}
	}
	for i := out; i >= 0; i-- {
		if adjoint[i] >= 0 && active[i] {
			g.spread(i, adjoint[i], to, active)
		}
	}
	result := make([]int32, len(wrt))
	for k, v := range wrt {
		x := g.variable(v)
		if int(x) < n && adjoint[x] >= 0 {
			result[k] = adjoint[x]
		} else {
			result[k] = g.num(0)
		}
	}
	return result
}

// spread hands the adjoint t of node i on to its arguments. The derivatives are
// the elementary ones.
func (g *graph) spread(i, t int32, to func(i, t int32), active []bool) {
	x := g.nodes[i]
	a, b := x.a, x.b
	one, two := g.num(1), g.num(2)
	switch x.op {
	case opNeg:
		to(a, g.neg(t))
	case opAdd:
		to(a, t)
		to(b, t)
	case opSub:
		to(a, t)
		to(b, g.neg(t))
	case opMul:
		if a == b {
			to(a, g.mul(t, g.mul(two, a)))
			return
		}
		if active[a] {
			to(a, g.mul(t, b))
		}
		if active[b] {
			to(b, g.mul(t, a))
		}
	case opDiv:
		s := g.div(t, b)
		to(a, s)
		if active[b] {
			to(b, g.neg(g.mul(s, i)))
		}
	case opSqrt:
		to(a, g.div(t, g.mul(two, i)))
	case opPow:
		if active[a] {
			to(a, g.mul(t, g.mul(b, g.pow(a, g.sub(b, one)))))
		}
		if active[b] {
			to(b, g.mul(t, g.raw(opPowLog, a, b)))
		}
	case opExp:
		to(a, g.mul(t, i))
	case opLog:
		to(a, g.div(t, a))
	case opSin:
		to(a, g.mul(t, g.raw(opCos, a, a)))
	case opCos:
		to(a, g.neg(g.mul(t, g.raw(opSin, a, a))))
	case opTan:
		to(a, g.mul(t, g.add(one, g.mul(i, i))))
	case opAsin, opAcos:
		s := g.div(t, g.raw(opSqrt, g.mul(g.sub(one, a), g.add(one, a)), 0))
		if x.op == opAcos {
			s = g.neg(s)
		}
		to(a, s)
	case opAtan:
		to(a, g.div(t, g.add(one, g.mul(a, a))))
	case opAtan2: // of y = a and x = b
		s := g.div(t, g.add(g.mul(a, a), g.mul(b, b)))
		if active[a] {
			to(a, g.mul(s, b))
		}
		if active[b] {
			to(b, g.neg(g.mul(s, a)))
		}
	case opSinh:
		to(a, g.mul(t, g.raw(opCosh, a, a)))
	case opCosh:
		to(a, g.mul(t, g.raw(opSinh, a, a)))
	case opTanh:
		to(a, g.mul(t, g.raw(opSech2, a, a)))
	case opAbs:
		to(a, g.mul(t, g.raw(opSign, a, a)))
	case opMin, opMax:
		first := g.raw(opGE, a, b)
		if x.op == opMin {
			first = g.raw(opGE, b, a)
		}
		to(a, g.mul(t, first))
		to(b, g.mul(t, g.sub(one, first)))
	case opSech2:
		to(a, g.neg(g.mul(t, g.mul(two, g.mul(i, g.raw(opTanh, a, a))))))
	case opPowLog:
		if active[a] {
			less := g.sub(b, one)
			to(a, g.mul(t, g.add(g.mul(b, g.raw(opPowLog, a, less)), g.pow(a, less))))
		}
		if active[b] {
			to(b, g.mul(t, g.raw(opPowLog2, a, b)))
		}
	case opSign, opGE, opPowLog2, opConst, opVar:
		// Steps are flat; opPowLog2 stands in second derivatives only, and
		// there is no third.
	}
}

// affine reports whether node out is at most of first degree in the variables
// wrt together.
func (g *graph) affine(out int32, wrt []int) bool {
	const beyond = 2
	degree := make([]int, out+1)
	wanted := make(map[int32]bool, len(wrt))
	for _, v := range wrt {
		wanted[int32(v)] = true
	}
	for i := range degree {
		x := g.nodes[i]
		switch x.op {
		case opConst:
		case opVar:
			if wanted[x.a] {
				degree[i] = 1
			}
		case opNeg:
			degree[i] = degree[x.a]
		case opAdd, opSub:
			degree[i] = max(degree[x.a], degree[x.b])
		case opMul:
			degree[i] = min(degree[x.a]+degree[x.b], beyond)
		case opDiv:
			degree[i] = degree[x.a]
			if degree[x.b] > 0 {
				degree[i] = beyond
			}
		default:
			if degree[x.a] > 0 || x.op.args() == 2 && degree[x.b] > 0 {
				degree[i] = beyond
			}
		}
	}
	return degree[out] <= 1
}
