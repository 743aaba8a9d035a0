package formula

import (
	"fmt"
	"slices"
)

// Workspace evaluates a Program and its derivatives. It holds the registers, so
// that nothing is allocated after the first call of a kind. It is not safe for
// concurrent use: make one for each goroutine.
type Workspace struct {
	p     *Program
	value *runner
	grads []*runner // by wrt, the last used first
	all   *runner   // gradient by all variables
	hess  *runner
	one   [1][]float64 // the single output of Block
	many  [][]float64  // the outputs of BlockGradient
}

// Workspace returns a new workspace.
func (p *Program) Workspace() *Workspace {
	return &Workspace{p: p, value: newRunner(p.main, nil)}
}

// Program returns what the workspace evaluates.
func (w *Workspace) Program() *Program { return w.p }

// runner is code with its registers.
type runner struct {
	c       *code
	wrt     []int
	vals    []float64 // of nodes that are the same in all rows
	uniform []bool
	once    []int32     // operations that are the same in all rows
	todo    []int32     // operations that differ from row to row
	sorted  bool        // once and todo fit the columns that uniform tells of
	regs    [][]float64 // by slot; made with the first block
	memory  []float64
}

func newRunner(c *code, wrt []int) *runner {
	n := len(c.nodes)
	r := &runner{c: c, wrt: wrt, vals: make([]float64, n), uniform: make([]bool, n),
		once: make([]int32, 0, n), todo: make([]int32, 0, n)}
	for i, nd := range c.nodes {
		if nd.op == opConst {
			r.vals[i], r.uniform[i] = nd.val, true
		}
	}
	return r
}

// Block fills out with the values of the formula at len(out) rows. x[v] is the
// column of variable v: as long as out, or of length 1 when the variable has
// the same value in all rows, in which case what depends on such variables
// alone is computed once. Columns of variables that do not occur may be nil.
// out must not overlap the columns. Columns of another length are a mistake of
// the caller, and panic.
//
// Rows are computed independently: a row's result does not depend on its place
// or on the other rows, to the bit.
func (w *Workspace) Block(x [][]float64, out []float64) {
	w.one[0] = out
	w.value.run(x, w.one[:], len(out))
	w.one[0] = nil
}

// Gradient fills g, which has a place for each variable, with the partial
// derivatives at x and returns the value. They are exact: the derivatives of
// the elementary operations, composed. At the kinks of abs, min and max it is
// that of one side: abs counts as rising at 0; of equal arguments of min and
// max the first counts.
func (w *Workspace) Gradient(x []float64, g []float64) float64 {
	if w.all == nil {
		wrt := upTo(len(w.p.vars))
		w.all = newRunner(w.p.gradientCode(wrt), wrt)
	}
	r := w.all
	r.c.eval(x, r.vals)
	for i := range g {
		g[i] = r.vals[r.c.outs[1+i]]
	}
	return r.vals[r.c.outs[0]]
}

// BlockGradient is Block with partial derivatives: grad[k][row] is that by
// variable wrt[k]. out, or any grad[k], may be nil when it is not wanted; the
// others have one length, the number of rows. They must overlap neither each
// other nor the columns. Other lengths panic.
func (w *Workspace) BlockGradient(x [][]float64, wrt []int, out []float64, grad [][]float64) {
	r := w.gradient(wrt)
	w.many = append(w.many[:0], out)
	w.many = append(w.many, grad[:len(wrt)]...)
	n := 0
	for _, o := range w.many {
		n = max(n, len(o))
	}
	r.run(x, w.many, n)
	clear(w.many)
}

// mostRunners bounds what a workspace keeps for different wrt.
const mostRunners = 8

// gradient finds or makes the runner for wrt.
func (w *Workspace) gradient(wrt []int) *runner {
	for i, r := range w.grads {
		if slices.Equal(r.wrt, wrt) {
			if i > 0 {
				copy(w.grads[1:i+1], w.grads[:i])
				w.grads[0] = r
			}
			return r
		}
	}
	r := newRunner(w.p.gradientCode(wrt), slices.Clone(wrt))
	if len(w.grads) == mostRunners {
		w.grads = w.grads[:mostRunners-1]
	}
	w.grads = slices.Insert(w.grads, 0, r)
	return r
}

// Hessian fills g with the gradient and h with the second derivatives at x,
// row by row (h[i*n+j], n variables), and returns the value. Conventions are
// those of Gradient; the second derivatives of abs, min and max vanish.
func (w *Workspace) Hessian(x []float64, g []float64, h []float64) float64 {
	if w.hess == nil {
		w.hess = newRunner(w.p.hessianCode(), nil)
	}
	r, n := w.hess, len(w.p.vars)
	r.c.eval(x, r.vals)
	for i := range g {
		g[i] = r.vals[r.c.outs[1+i]]
	}
	k := 1 + n
	for i := range n {
		for j := i; j < n; j++ {
			v := r.vals[r.c.outs[k]]
			h[i*n+j], h[j*n+i] = v, v
			k++
		}
	}
	return r.vals[r.c.outs[0]]
}

// columns notes which variables are the same in all rows, and their values, and
// sorts the operations by that when it has changed.
func (r *runner) columns(x [][]float64, n int) {
	c := r.c
	for _, i := range c.vars {
		col := x[c.nodes[i].a]
		u := len(col) == 1
		if !u && len(col) != n {
			panic(fmt.Sprintf("formula: column %d has %d rows, not 1 or %d", c.nodes[i].a, len(col), n))
		}
		if u {
			r.vals[i] = col[0]
		}
		if u != r.uniform[i] {
			r.uniform[i], r.sorted = u, false
		}
	}
	if r.sorted {
		return
	}
	r.once, r.todo, r.sorted = r.once[:0], r.todo[:0], true
	for i := range c.nodes {
		nd := &c.nodes[i]
		args := nd.op.args()
		if args == 0 {
			continue
		}
		u := r.uniform[nd.a] && (args == 1 || r.uniform[nd.b])
		if r.uniform[i] = u; u {
			r.once = append(r.once, int32(i))
		} else {
			r.todo = append(r.todo, int32(i))
		}
	}
}

// run computes n rows of all outputs that are not nil.
func (r *runner) run(x [][]float64, out [][]float64, n int) {
	c := r.c
	if n == 0 {
		return
	}
	for k, o := range out {
		if o != nil && len(o) != n {
			panic(fmt.Sprintf("formula: output %d has %d rows, not %d", k, len(o), n))
		}
	}
	r.columns(x, n)
	for _, i := range r.once {
		r.vals[i] = c.one(i, r.vals)
	}
	for k, o := range c.outs {
		if out[k] != nil && r.uniform[o] {
			fill(out[k][:n], r.vals[o])
		}
	}
	if len(r.todo) > 0 && r.regs == nil {
		r.memory = make([]float64, c.slots*c.block)
		for s := range c.slots {
			r.regs = append(r.regs, r.memory[s*c.block:(s+1)*c.block])
		}
	}
	for from := 0; from < n; from += c.block {
		r.rows(x, out, from, min(from+c.block, n))
	}
}

// rows computes one block.
func (r *runner) rows(x, out [][]float64, from, to int) {
	c := r.c
	for _, i := range r.todo {
		nd := &c.nodes[i]
		d := r.view(i, x, out, from, to)
		switch {
		case nd.op.args() == 1:
			unary(nd.op, d, r.view(nd.a, x, out, from, to))
		case r.uniform[nd.a]:
			scalarVector(nd.op, d, r.vals[nd.a], r.view(nd.b, x, out, from, to))
		case r.uniform[nd.b]:
			vectorScalar(nd.op, d, r.view(nd.a, x, out, from, to), r.vals[nd.b])
		default:
			vectors(nd.op, d, r.view(nd.a, x, out, from, to), r.view(nd.b, x, out, from, to))
		}
	}
	for k, o := range c.outs {
		if out[k] == nil || r.uniform[o] {
			continue
		}
		if d := out[k][from:to]; c.nodes[o].op == opVar || c.dest[o] != int32(k) {
			copy(d, r.view(o, x, out, from, to))
		}
	}
}

// view is where the rows of a node are: in its column, in an output, or in a
// register.
func (r *runner) view(i int32, x, out [][]float64, from, to int) []float64 {
	c := r.c
	if n := &c.nodes[i]; n.op == opVar {
		return x[n.a][from:to]
	}
	if k := c.dest[i]; k >= 0 && out[k] != nil {
		return out[k][from:to]
	}
	return r.regs[c.slot[i]][:to-from]
}
