package formula

import (
	"encoding/binary"
	"slices"
	"sync"
)

// Program is a compiled formula. It does not change, and may be used from many
// goroutines at once; the Workspaces made from it may not.
type Program struct {
	src  string
	vars []string
	tree *tree
	main *code

	equation bool // the last operation is left − right of one

	mu     sync.Mutex // guards what follows: derivatives are compiled when first asked for
	graph  *graph
	out    int32
	byVars map[string]*code // gradients by the variables they are taken by
	second *code
}

// Compile reads a formula in the variables vars, which are numbered as they
// stand there. Not all need occur. The language is that of Go expressions:
// names, decimal numbers, + - * /, parentheses, the functions sqrt pow exp log
// sin cos tan asin acos atan atan2 sinh cosh tanh abs min max and the constants
// pi eps0 qe ke g0 (SI values of pkg/si). All numbers are float64: 1/2 is 0.5.
//
// Errors are *Error and tell the column.
func Compile(src string, vars []string) (*Program, error) {
	if err := checkNames(src, vars); err != nil {
		return nil, err
	}
	r := reader{src: src, vars: slices.Clone(vars)}
	t, err := r.read()
	if err != nil {
		return nil, err
	}
	p := &Program{src: src, vars: r.vars, tree: t, graph: newGraph(), byVars: map[string]*code{}}
	p.out = p.graph.build(t)
	p.main = newCode(p.graph, []int32{p.out})
	return p, nil
}

// Names returns the names of the variables in a formula in the order in which
// they first occur. What is neither a constant nor called as a function is one.
func Names(src string) ([]string, error) {
	r := reader{src: src, free: true}
	if _, err := r.read(); err != nil {
		return nil, err
	}
	return r.vars, nil
}

// Source returns the formula as it was given.
func (p *Program) Source() string { return p.src }

// Vars returns the variables as given to Compile.
func (p *Program) Vars() []string { return slices.Clone(p.vars) }

// Uses reports whether variable i occurs in the formula.
func (p *Program) Uses(i int) bool { return p.tree.uses(i) }

func (t *tree) uses(i int) bool {
	for t.kind == kindBinary { // down the left spine without recursion
		if t.args[1].uses(i) {
			return true
		}
		t = t.args[0]
	}
	if t.kind == kindVar {
		return t.index == i
	}
	return slices.ContainsFunc(t.args, func(a *tree) bool { return a.uses(i) })
}

// LinearIn reports whether the formula is of the first degree in the variables
// wrt taken together: a + b x in a and b, a constant part included. It looks at
// the form, and so misses what only algebra shows, such as x*x/x.
func (p *Program) LinearIn(wrt []int) bool {
	p.mu.Lock()
	defer p.mu.Unlock()
	return p.graph.affine(p.out, wrt)
}

// gradientCode compiles the formula with its derivatives by wrt, once.
func (p *Program) gradientCode(wrt []int) *code {
	k := make([]byte, 0, 4*len(wrt))
	for _, v := range wrt {
		k = binary.LittleEndian.AppendUint32(k, uint32(v))
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	c := p.byVars[string(k)]
	if c == nil {
		c = newCode(p.graph, append([]int32{p.out}, p.graph.gradient(p.out, wrt)...))
		p.byVars[string(k)] = c
	}
	return c
}

// hessianCode compiles the formula with all first and second derivatives, once.
// Its outputs are the value, the gradient, and the upper triangle by rows.
func (p *Program) hessianCode() *code {
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.second == nil {
		all := upTo(len(p.vars))
		first := p.graph.gradient(p.out, all)
		outs := append([]int32{p.out}, first...)
		for i, d := range first {
			outs = append(outs, p.graph.gradient(d, all[i:])...)
		}
		p.second = newCode(p.graph, outs)
	}
	return p.second
}

// upTo returns 0, 1, …, n−1.
func upTo(n int) []int {
	all := make([]int, n)
	for i := range all {
		all[i] = i
	}
	return all
}

// Eval returns the value of the formula at x, which has one number for each
// variable. Where it is undefined (the logarithm of a negative number) the
// result is NaN or infinite as the operations of IEEE 754 have it.
func (p *Program) Eval(x []float64) float64 {
	const most = 64
	var stack [most]float64
	vals := stack[:]
	if n := len(p.main.nodes); n > most {
		vals = make([]float64, n)
	}
	p.main.eval(x, vals)
	return vals[p.main.outs[0]]
}
