package formula

import (
	"errors"
	"math"
	"strings"
	"testing"
	"unicode/utf8"

	"example.org/guardring/pkg/si"
)

// FuzzFormula: nothing panics; an error is an *Error that points into the
// source and comes without a program; what compiles gives the same bits one by
// one and in blocks, and the names it was found to use suffice.
func FuzzFormula(f *testing.F) {
	for _, s := range []string{"c_s + s/(d+d0)", "x^2", "x**2", "pow(x, 2)", "2x", "1/2", "max(x, y, 1)", "-(-x)", "eps0*pi", "sqrt(abs(x))", "x//2", "0x1p3", "017", "ε*x",
		"atan2(y, x)", "x...", "func(){}", "a.b", "1e999", "x[0]", "\"s\"", "(((x)))", "x\n+y", "pow(x, 1/3)", "pow(x, y)", "tanh(x*y)/x", "min(x, log(y))", "x /* */", "type"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, src string) {
		vars, err := Names(src)
		if err != nil {
			checkError(t, src, err)
			if p, err := Compile(src, nil); err == nil || p != nil {
				t.Fatalf("%q compiles but has no names", src)
			}
			return
		}
		p, err := Compile(src, vars)
		if err != nil {
			checkError(t, src, err)
			if p != nil {
				t.Fatalf("%q: a program comes with %v", src, err)
			}
			return
		}
		dims := make([]si.Dimension, len(vars))
		x, cols := make([]float64, len(vars)), make([][]float64, len(vars))
		for i := range x {
			dims[i] = []si.Dimension{si.Dimensionless, si.Length, si.Voltage}[(i+len(src))%3]
			x[i] = 0.5 + float64(i)
			cols[i] = []float64{x[i], x[i]}
			if !p.Uses(i) {
				t.Fatalf("%q does not use %s", src, vars[i])
			}
		}
		if _, err := p.Dimension(dims); err != nil {
			checkError(t, src, err)
		}
		want, out := p.Eval(x), make([]float64, 2)
		w := p.Workspace()
		w.Block(cols, out)
		if math.Float64bits(out[1]) != math.Float64bits(want) && !(math.IsNaN(out[1]) && math.IsNaN(want)) {
			t.Fatalf("%q is %v, in a block %v", src, want, out[1])
		}
		if g := make([]float64, len(vars)); len(src) < 200 {
			if f := w.Hessian(x, g, make([]float64, len(vars)*len(vars))); math.Float64bits(f) != math.Float64bits(want) && !math.IsNaN(f) {
				t.Fatalf("%q is %v, with derivatives %v", src, want, f)
			}
			for i, d := range g {
				if p.LinearIn([]int{i}) && !math.IsNaN(d) && !math.IsInf(d, 0) {
					y := append([]float64{}, x...)
					y[i]++
					if step := p.Eval(y) - want; math.Abs(step-d) > 1e-9*max(math.Abs(d), math.Abs(want), 1) {
						t.Fatalf("%q is linear in %s with slope %v, but rises by %v", src, vars[i], d, step)
					}
				}
			}
		}
	})
}

func checkError(t *testing.T, src string, err error) {
	var bad *Error
	if !errors.As(err, &bad) {
		t.Fatalf("%q: error is a %T", src, err)
	}
	if bad.Column < 0 || bad.Column > utf8.RuneCountInString(src)+1 || bad.Reason == "" {
		t.Fatalf("%q: %v points to column %d", src, err, bad.Column)
	}
	if len(err.Error()) > 2000 || strings.ContainsRune(err.Error(), 0) {
		t.Fatalf("%q: the message is %q", src, err)
	}
}
