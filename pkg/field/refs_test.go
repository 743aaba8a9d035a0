package field_test

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"example.org/guardring/pkg/jet"
)

// ref is one item of testdata/refs: a check value with its published source.
type ref struct {
	ID, Source, Obtained        string
	Inputs, Expected, Tolerance map[string]any
}

func loadRefs(t testing.TB, name string) []ref {
	t.Helper()
	data, err := os.ReadFile(filepath.Join("..", "..", "testdata", "refs", name+".json"))
	if err != nil {
		t.Fatal(err)
	}
	var items []ref
	if err := json.Unmarshal(data, &items); err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	if len(items) == 0 {
		t.Fatalf("%s: no items", name)
	}
	return items
}

func findRef(t testing.TB, name, id string) ref {
	t.Helper()
	for _, r := range loadRefs(t, name) {
		if r.ID == id {
			return r
		}
	}
	t.Fatalf("%s: no item %q", name, id)
	return ref{}
}

// num reads a number; a missing one fails the test.
func num(t testing.TB, m map[string]any, key string) float64 {
	t.Helper()
	v, ok := m[key].(float64)
	if !ok {
		t.Fatalf("%q is %v, want a number", key, m[key])
	}
	return v
}

func nums(t testing.TB, m map[string]any, key string) []float64 {
	t.Helper()
	a, ok := m[key].([]any)
	if !ok {
		t.Fatalf("%q is %v, want numbers", key, m[key])
	}
	out := make([]float64, len(a))
	for i, v := range a {
		out[i] = v.(float64)
	}
	return out
}

func near(t *testing.T, what string, got, want, rel, abs float64) {
	t.Helper()
	if d := math.Abs(got - want); !(d <= rel*math.Abs(want)+abs) {
		t.Errorf("%s = %.15g, want %.15g (off by %.2g)", what, got, want, d)
	}
}

func must(t testing.TB) func(v float64, err error) float64 {
	return func(v float64, err error) float64 {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
}

// checkDerivatives compares gradient and Hessian of f at x with central
// differences, of values for the gradient and of exact gradients for the
// Hessian, Richardson-extrapolated once. scale are the lengths over which f
// varies. The reference is the definition of a derivative.
func checkDerivatives(t *testing.T, what string, f func(x []jet.Jet) jet.Jet, x, scale []float64, tol float64) {
	t.Helper()
	n := len(x)
	s := jet.NewSpace(n, n)
	at := func(y []float64) (float64, []float64, []float64) {
		s.Reset()
		v := make([]jet.Jet, n)
		for i := range v {
			v[i] = s.Var(i, y[i])
		}
		r := f(v)
		g, h := make([]float64, n), make([]float64, n*n)
		r.Gradient(g)
		for i := range n {
			for j := range n {
				h[i*n+j] = r.Hess(i, j)
			}
		}
		return r.V, g, h
	}
	v0, g, h := at(x)
	consts := make([]jet.Jet, n)
	for i := range consts {
		consts[i] = jet.Const(x[i])
	}
	if c := f(consts).V; math.Abs(c-v0) > 1e-12*math.Abs(v0) {
		t.Errorf("%s: value %g with derivatives, %g without", what, v0, c)
	}
	step := func(i int, by float64) (float64, []float64) {
		y := append([]float64(nil), x...)
		y[i] += by
		v, g, _ := at(y)
		return v, g
	}
	diff := func(i int, d float64) (float64, []float64) {
		vp, gp := step(i, d)
		vm, gm := step(i, -d)
		dg := make([]float64, n)
		for j := range dg {
			dg[j] = (gp[j] - gm[j]) / (2 * d)
		}
		return (vp - vm) / (2 * d), dg
	}
	gscale := 0.0 // |f| or, where f is near 0, the largest scaled derivative
	for i := range n {
		gscale = math.Max(gscale, math.Abs(g[i]*scale[i]))
	}
	ref := math.Max(math.Abs(v0), gscale)
	for i := range n {
		d := 1e-3 * scale[i]
		f1, h1 := diff(i, d)
		f2, h2 := diff(i, 2*d)
		if w := (4*f1 - f2) / 3; math.Abs(g[i]-w)*scale[i] > tol*ref {
			t.Errorf("%s: derivative %d = %.10g, central difference %.10g", what, i, g[i], w)
		}
		for j := range n {
			w := (4*h1[j] - h2[j]) / 3
			if math.Abs(h[i*n+j]-w)*scale[i]*scale[j] > 10*tol*ref {
				t.Errorf("%s: second derivative %d,%d = %.10g, central difference %.10g", what, i, j, h[i*n+j], w)
			}
		}
	}
}

// scales gives each argument a scale of its own size.
func scales(x []float64) []float64 {
	s := make([]float64, len(x))
	for i, v := range x {
		s[i] = math.Abs(v)
		if v == 0 {
			s[i] = 1
		}
	}
	return s
}

func name(format string, a ...any) string { return fmt.Sprintf(format, a...) }
