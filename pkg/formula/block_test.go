package formula

import (
	"math"
	"math/rand/v2"
	"sync"
	"testing"
)

// TestBlocksAreEval: every way to evaluate gives the same bits, for any number
// of rows and any choice of columns that are the same in all of them.
func TestBlocksAreEval(t *testing.T) {
	vars := []string{"x", "y", "z"}
	r := rand.New(rand.NewPCG(1, 2))
	wrt := []int{2, 0}
	same := func(a, b float64) bool {
		return math.Float64bits(a) == math.Float64bits(b) || math.IsNaN(a) && math.IsNaN(b)
	}
	for range 150 {
		src := randomFormula(r, 1+r.IntN(25), vars)
		p, err := Compile(src, vars)
		if err != nil {
			t.Fatal(err)
		}
		w, single := p.Workspace(), p.Workspace()
		for _, n := range []int{0, 1, 2, p.main.block - 1, p.main.block, p.main.block + 1, 3*p.main.block + 5} {
			x := make([][]float64, len(vars))
			for i := range x {
				if x[i] = make([]float64, n); r.IntN(3) == 0 {
					x[i] = make([]float64, 1)
				}
				for k := range x[i] {
					x[i][k] = r.NormFloat64()
				}
			}
			out, out2 := make([]float64, n), make([]float64, n)
			grad := [][]float64{make([]float64, n), make([]float64, n)}
			w.Block(x, out)
			w.BlockGradient(x, wrt, out2, grad)
			only := make([]float64, n)
			w.BlockGradient(x, wrt, nil, [][]float64{only, nil})
			g, h, g2 := make([]float64, 3), make([]float64, 9), make([]float64, 3)
			for k := range n {
				at := make([]float64, len(vars))
				for i := range at {
					at[i] = x[i][min(k, len(x[i])-1)]
				}
				want := p.Eval(at)
				f1, f2 := single.Gradient(at, g), 0.0
				if k < 3 {
					f2 = single.Hessian(at, g2, h)
				} else {
					f2, g2 = f1, g
				}
				if !same(out[k], want) || !same(out2[k], want) || !same(f1, want) || !same(f2, want) {
					t.Fatalf("%s at %v, row %d of %d: Eval %v, Block %v, BlockGradient %v, Gradient %v, Hessian %v", src, at, k, n, want, out[k], out2[k], f1, f2)
				}
				for j, v := range wrt {
					if !same(grad[j][k], g[v]) || !same(g2[v], g[v]) || j == 0 && !same(only[k], g[v]) {
						t.Fatalf("%s at %v, row %d of %d: ∂/∂%s by BlockGradient %v, Gradient %v, Hessian %v", src, at, k, n, vars[v], grad[j][k], g[v], g2[v])
					}
				}
			}
		}
	}
}

// TestOutputsOfEveryKind: outputs that are variables, constants, each other.
func TestOutputsOfEveryKind(t *testing.T) {
	p, err := Compile("x*y + 2*z + x", []string{"x", "y", "z", "unused"})
	if err != nil {
		t.Fatal(err)
	}
	x := [][]float64{{1, 2, 3}, {4, 5, 6}, {7}, nil}
	grad := make([][]float64, 5)
	for i := range grad {
		grad[i] = make([]float64, 3)
	}
	out := make([]float64, 3)
	p.Workspace().BlockGradient(x, []int{0, 1, 2, 3, 1}, out, grad)
	want := [][]float64{{5, 6, 7}, {1, 2, 3}, {2, 2, 2}, {0, 0, 0}, {1, 2, 3}, {19, 26, 35}}
	for i, got := range append(grad, out) {
		for k := range got {
			if got[k] != want[i][k] {
				t.Errorf("output %d is %v, want %v", i, got, want[i])
				break
			}
		}
	}
}

// TestNoAllocations: after the first call nothing is allocated, also when the
// number of rows and the variables of the gradient change.
func TestNoAllocations(t *testing.T) {
	p, err := Compile("c_s + s/(d + d0) + exp(-d)*pow(s, d) + max(d, s)", []string{"c_s", "s", "d0", "d"})
	if err != nil {
		t.Fatal(err)
	}
	const n = 1000
	x := [][]float64{{1}, {2}, {0.5}, make([]float64, n)}
	for i := range x[3] {
		x[3][i] = 1 + float64(i)
	}
	out := make([]float64, n)
	grad := [][]float64{make([]float64, n), make([]float64, n), make([]float64, n)}
	a, b := []int{0, 1, 2}, []int{3}
	at, g, h := []float64{1, 2, 0.5, 3}, make([]float64, 4), make([]float64, 16)
	short := [][]float64{x[0], x[1], x[2], x[3][:40]}
	w := p.Workspace()
	all := func() {
		w.Block(x, out)
		w.Block(short, out[:40])
		w.BlockGradient(x, a, out, grad)
		w.BlockGradient(x, b, nil, grad[:1])
		w.Gradient(at, g)
		w.Hessian(at, g, h)
		p.Eval(at)
	}
	all()
	if got := testing.AllocsPerRun(20, all); got != 0 {
		t.Errorf("%v allocations a run", got)
	}
}

// TestShared: one program, many goroutines (run with -race).
func TestShared(t *testing.T) {
	p, err := Compile("x*exp(y) - pow(x, y)", []string{"x", "y"})
	if err != nil {
		t.Fatal(err)
	}
	want := p.Eval([]float64{1.5, 0.5})
	var group sync.WaitGroup
	for range 8 {
		group.Go(func() {
			w := p.Workspace()
			g, h := make([]float64, 2), make([]float64, 4)
			for i := range 50 {
				out := make([]float64, 3)
				w.BlockGradient([][]float64{{1.5}, {0.5, 0.5, 0.5}}, []int{i % 2}, out, [][]float64{make([]float64, 3)})
				if f := w.Hessian([]float64{1.5, 0.5}, g, h); f != want || out[1] != want || p.Eval([]float64{1.5, 0.5}) != want || p.LinearIn([]int{0}) {
					t.Errorf("Hessian's value %v, block's %v, want %v", f, out[1], want)
					return
				}
			}
		})
	}
	group.Wait()
}

// TestWrongLengths: columns and outputs that do not fit panic, even where there
// is room behind their end.
func TestWrongLengths(t *testing.T) {
	p, err := Compile("x + y", []string{"x", "y"})
	if err != nil {
		t.Fatal(err)
	}
	room := make([]float64, 8)
	for name, call := range map[string]func(){
		"short column": func() { p.Workspace().Block([][]float64{room[:3], room}, make([]float64, 8)) },
		"long column":  func() { p.Workspace().Block([][]float64{room, room}, make([]float64, 4)) },
		"nil column":   func() { p.Workspace().Block([][]float64{room, nil}, make([]float64, 8)) },
		"short output": func() {
			p.Workspace().BlockGradient([][]float64{room, room}, []int{0}, make([]float64, 8), [][]float64{make([]float64, 8)[:3]})
		},
	} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("a %s passes", name)
				}
			}()
			call()
		}()
	}
}
