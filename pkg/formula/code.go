package formula

// code is a list of operations that computes one or more outputs, every common
// subexpression once, with the registers that a block of rows needs.
type code struct {
	nodes []node  // arguments stand before their users
	vars  []int32 // those nodes that are variables
	outs  []int32 // node of each output
	dest  []int32 // for each node the output it is written to directly; −1: none
	slot  []int32 // for each operation its register
	slots int     // number of registers
	block int     // rows a block
}

// Bounds of the rows in a block: registers should stay in the first-level
// cache, of which cacheBytes is half or less.
const (
	cacheBytes = 24 << 10
	mostRows   = 512
	fewestRows = 64
)

func newCode(g *graph, outs []int32) *code {
	c := &code{}
	// Keep what the outputs need, in the same order.
	needed := make([]bool, len(g.nodes))
	for _, o := range outs {
		needed[o] = true
	}
	for i := len(g.nodes) - 1; i >= 0; i-- {
		if !needed[i] {
			continue
		}
		n := g.nodes[i]
		if n.op.args() > 0 {
			needed[n.a] = true
		}
		if n.op.args() > 1 {
			needed[n.b] = true
		}
	}
	moved := make([]int32, len(g.nodes))
	for i, n := range g.nodes {
		if !needed[i] {
			continue
		}
		moved[i] = int32(len(c.nodes))
		if n.op.args() > 0 {
			n.a, n.b = moved[n.a], moved[n.b]
		}
		if n.op == opVar {
			c.vars = append(c.vars, moved[i])
		}
		c.nodes = append(c.nodes, n)
	}
	for _, o := range outs {
		c.outs = append(c.outs, moved[o])
	}
	c.registers()
	return c
}

// registers gives every operation a register, taken back after its last use.
func (c *code) registers() {
	n := len(c.nodes)
	c.slot, c.dest = make([]int32, n), make([]int32, n)
	last := make([]int, n)
	for i, x := range c.nodes {
		c.dest[i] = -1
		if x.op.args() > 0 {
			last[x.a] = i
		}
		if x.op.args() > 1 {
			last[x.b] = i
		}
	}
	for k, o := range c.outs {
		last[o] = n // outputs stay to the end
		if c.dest[o] < 0 {
			c.dest[o] = int32(k)
		}
	}
	var free []int32
	for i, x := range c.nodes {
		if x.op.args() == 0 {
			continue
		}
		release := func(j int32) {
			if c.nodes[j].op.args() > 0 && last[j] == i {
				free = append(free, c.slot[j])
			}
		}
		// The result may take the place of an argument: every loop reads
		// element i before it writes it.
		release(x.a)
		if x.op.args() > 1 && x.b != x.a {
			release(x.b)
		}
		if k := len(free); k > 0 {
			c.slot[i], free = free[k-1], free[:k-1]
		} else {
			c.slot[i] = int32(c.slots)
			c.slots++
		}
	}
	c.block = min(max(cacheBytes/8/max(c.slots, 1)&^7, fewestRows), mostRows)
}

// eval computes all nodes at one point.
func (c *code) eval(x, vals []float64) {
	for i := range c.nodes {
		switch n := &c.nodes[i]; n.op {
		case opConst:
			vals[i] = n.val
		case opVar:
			vals[i] = x[n.a]
		default:
			vals[i] = c.one(int32(i), vals)
		}
	}
}

// one computes operation i from the values of its arguments.
func (c *code) one(i int32, vals []float64) float64 {
	n := &c.nodes[i]
	switch a, b := vals[n.a], vals[n.b]; n.op {
	case opAdd:
		return a + b
	case opSub:
		return a - b
	case opMul:
		return a * b
	case opDiv:
		return a / b
	default:
		return apply(n.op, a, b)
	}
}
