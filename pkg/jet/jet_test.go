package jet_test

import (
	"fmt"
	"math"
	"testing"

	"example.org/guardring/pkg/jet"
)

// The force between parallel plates and its derivatives by gap and voltage.
func Example() {
	s := jet.NewSpace(2, 2)
	v, d := s.Var(0, 1000), s.Var(1, 0.002)
	f := v.Sqr().Div(d.Sqr())
	fmt.Println(f.V, f.Grad(0), f.Grad(1), f.Hess(0, 1))
	// Output: 2.5e+11 5e+08 -2.5e+14 -5e+11
}

// TestDerivatives compares every operation with central differences of its
// own values: the reference is the definition of a derivative.
func TestDerivatives(t *testing.T) {
	ops := map[string]func(a, b jet.Jet) jet.Jet{
		"add":   func(a, b jet.Jet) jet.Jet { return a.Add(b.Sqr()) },
		"sub":   func(a, b jet.Jet) jet.Jet { return a.Sub(b.Mul(a)) },
		"mul":   func(a, b jet.Jet) jet.Jet { return a.Mul(b).Mul(a) },
		"div":   func(a, b jet.Jet) jet.Jet { return a.Div(b).Div(a.Plus(2)) },
		"neg":   func(a, b jet.Jet) jet.Jet { return a.Neg().Mul(b) },
		"scale": func(a, b jet.Jet) jet.Jet { return a.Scale(3).Mul(b.Scale(-2)) },
		"inv":   func(a, b jet.Jet) jet.Jet { return a.Mul(b).Inv() },
		"sqrt":  func(a, b jet.Jet) jet.Jet { return a.Mul(b).Sqrt() },
		"pow":   func(a, b jet.Jet) jet.Jet { return a.Pow(2.5).Add(b.Pow(-1.5)) },
		"powj":  func(a, b jet.Jet) jet.Jet { return a.PowJet(b) },
		"exp":   func(a, b jet.Jet) jet.Jet { return a.Mul(b).Exp() },
		"log":   func(a, b jet.Jet) jet.Jet { return a.Add(b).Log().Mul(a) },
		"sin":   func(a, b jet.Jet) jet.Jet { return a.Mul(b).Sin() },
		"cos":   func(a, b jet.Jet) jet.Jet { return a.Div(b).Cos() },
		"tan":   func(a, b jet.Jet) jet.Jet { return a.Mul(b).Tan() },
		"atan":  func(a, b jet.Jet) jet.Jet { return a.Mul(b).Atan() },
		"tanh":  func(a, b jet.Jet) jet.Jet { return a.Mul(b).Tanh() },
		"const": func(a, b jet.Jet) jet.Jet { return jet.Const(2).Mul(a).Add(b.Mul(jet.Const(3))) },
		"chainN": func(a, b jet.Jet) jet.Jet {
			x := []jet.Jet{a, b, a.Mul(b)}
			u, v, w := a.V, b.V, a.V*b.V // f = u v² w
			return jet.ChainN(x, u*v*v*w, []float64{v * v * w, 2 * u * v * w, u * v * v},
				[]float64{0, 2 * v * w, v * v, 2 * v * w, 2 * u * w, 2 * u * v, v * v, 2 * u * v, 0})
		},
	}
	const a0, b0, h = 0.7, 0.9, 1e-4
	for name, op := range ops {
		value := func(a, b float64) float64 { return op(jet.Const(a), jet.Const(b)).V }
		s := jet.NewSpace(2, 2)
		f := op(s.Var(0, a0), s.Var(1, b0))
		want := []float64{
			(value(a0+h, b0) - value(a0-h, b0)) / (2 * h),
			(value(a0, b0+h) - value(a0, b0-h)) / (2 * h),
			(value(a0+h, b0) - 2*value(a0, b0) + value(a0-h, b0)) / (h * h),
			(value(a0+h, b0+h) - value(a0+h, b0-h) - value(a0-h, b0+h) + value(a0-h, b0-h)) / (4 * h * h),
			(value(a0, b0+h) - 2*value(a0, b0) + value(a0, b0-h)) / (h * h),
		}
		got := []float64{f.Grad(0), f.Grad(1), f.Hess(0, 0), f.Hess(0, 1), f.Hess(1, 1)}
		for i := range want {
			if math.Abs(got[i]-want[i]) > 2e-6*(1+math.Abs(want[i])) {
				t.Errorf("%s: derivative %d = %g, central difference %g", name, i, got[i], want[i])
			}
		}
		if f.Hess(0, 1) != f.Hess(1, 0) && math.Abs(f.Hess(0, 1)-f.Hess(1, 0)) > 1e-13*math.Abs(f.Hess(0, 1)) {
			t.Errorf("%s: Hessian not symmetric: %g, %g", name, f.Hess(0, 1), f.Hess(1, 0))
		}
	}
}

// TestPartialHessian checks that carrying fewer Hessian rows changes none of
// those that are carried.
func TestPartialHessian(t *testing.T) {
	f := func(s *jet.Space) jet.Jet {
		x, y, z := s.Var(0, 1.3), s.Var(1, 0.4), s.Var(2, 2.2)
		return x.Mul(y).Exp().Div(z.Sqr().Plus(1)).Sub(x.Log().Mul(z))
	}
	full, part := f(jet.NewSpace(3, 3)), f(jet.NewSpace(3, 1))
	for j := range 3 {
		if full.Hess(0, j) != part.Hess(0, j) || full.Grad(j) != part.Grad(j) {
			t.Errorf("seed %d: %g, %g differ from %g, %g", j, part.Hess(0, j), part.Grad(j), full.Hess(0, j), full.Grad(j))
		}
	}
}

// TestReset checks that a space reused for many rows hands out clean storage.
func TestReset(t *testing.T) {
	s := jet.NewSpace(2, 1)
	for range 300 {
		s.Reset()
		x := s.Var(1, 3)
		for range 100 {
			x = x.Plus(1)
		}
		if x.V != 103 || x.Grad(0) != 0 || x.Grad(1) != 1 || x.Hess(0, 1) != 0 {
			t.Fatalf("got %v %v %v %v", x.V, x.Grad(0), x.Grad(1), x.Hess(0, 1))
		}
	}
}
