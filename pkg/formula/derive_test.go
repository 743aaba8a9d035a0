package formula

import (
	"fmt"
	"math"
	"math/big"
	"math/rand/v2"
	"strings"
	"testing"
)

// randomFormula writes an expression of about size operations in the variables.
func randomFormula(r *rand.Rand, size int, vars []string) string {
	if size <= 0 {
		switch r.IntN(6) {
		case 0:
			return fmt.Sprintf("%.2f", 0.2+2*r.Float64())
		case 1:
			return "pi"
		}
		return vars[r.IntN(len(vars))]
	}
	sub := func(n int) string { return randomFormula(r, n, vars) }
	left := r.IntN(size)
	switch k := r.IntN(12); k {
	case 0, 1, 2, 3, 4, 5, 6:
		op := "+-*/*+-"[k : k+1]
		return "(" + sub(left) + " " + op + " " + sub(size-1-left) + ")"
	case 7:
		return "-(" + sub(size-1) + ")"
	default:
		f := functions[r.IntN(len(functions))]
		switch {
		case f.name == "pow" && r.IntN(2) == 0:
			return fmt.Sprintf("pow(%s, %d)", sub(size-1), r.IntN(14)-4)
		case f.name == "pow":
			return fmt.Sprintf("pow(abs(%s), %s)", sub(left), sub(size-1-left))
		case f.args == 1 && (f.name == "sqrt" || f.name == "log"):
			return f.name + "(abs(" + sub(size-1) + "))"
		case f.args == 1 && (f.name == "asin" || f.name == "acos"):
			return f.name + "(sin(" + sub(size-1) + ")*0.9)"
		case f.args == 1:
			return f.name + "(" + sub(size-1) + ")"
		}
		return f.name + "(" + sub(left) + ", " + sub(size-1-left) + ")"
	}
}

// shift returns x moved by a h in variable i and b h in variable j.
func shift(x []float64, i, a, j, b int, h *big.Float) []*big.Float {
	y := make([]*big.Float, len(x))
	for k, v := range x {
		y[k] = num(v)
	}
	y[i] = bigAdd(y[i], bigMul(num(float64(a)), h))
	y[j] = bigAdd(y[j], bigMul(num(float64(b)), h))
	return y
}

// TestDerivatives compares first and second derivatives of 200 random formulas
// with central differences in 320-bit arithmetic (computed independently), whose
// own error is below 1e-20 of the sizes met. What remains is the rounding of
// double precision: measured by moving the arguments in their last bits.
func TestDerivatives(t *testing.T) {
	vars := []string{"x", "y", "z"}
	r := rand.New(rand.NewPCG(20, 26))
	h := fresh().SetMantExp(num(1), -60)
	n := len(vars)
	done, worst1, worst2 := 0, 0.0, 0.0
	for tries := 0; done < 200; tries++ {
		if tries > 5000 {
			t.Fatalf("only %d formulas of %d were defined", done, tries)
		}
		src := randomFormula(r, 1+r.IntN(12), vars)
		p, err := Compile(src, vars)
		if err != nil {
			t.Fatal(err)
		}
		x := make([]float64, n)
		for i := range x {
			x[i] = 0.3 + 1.5*r.Float64()
		}
		at := func(i, a, j, b int) *big.Float { return bigEval(p.tree, shift(x, i, a, j, b, h)) }
		w := p.Workspace()
		g, hess := make([]float64, n), make([]float64, n*n)
		value := w.Hessian(x, g, hess)
		mid := at(0, 0, 0, 0)
		if mid == nil || math.IsNaN(value) || math.Abs(value) > 1e8 {
			continue
		}
		if f, _ := mid.Float64(); f == 0 || math.Abs(f) < 1e-8 {
			continue
		}
		// Rounding: how far the results move when arguments move by an ulp or two.
		noise := 0.0
		for s := range 6 {
			y := make([]float64, n)
			for i := range y {
				y[i] = x[i] * (1 + float64((s*(i+3)+i)%5-2)*0x1p-52)
			}
			g2, h2 := make([]float64, n), make([]float64, n*n)
			noise = max(noise, math.Abs(w.Hessian(y, g2, h2)-value))
			for i := range g {
				noise = max(noise, math.Abs(g2[i]-g[i]))
			}
			for i := range hess {
				noise = max(noise, math.Abs(h2[i]-hess[i]))
			}
		}
		if !(noise < 1e-9) { // ill-conditioned here, or undefined close by
			continue
		}
		defined := true
		check := func(what string, got float64, want *big.Float, worst *float64) {
			f, _ := want.Float64()
			size := max(math.Abs(f), math.Abs(value), 1)
			err := math.Abs(got-f) / size
			*worst = max(*worst, err)
			if !(math.Abs(got-f) <= 1e-13*size+64*noise) {
				t.Errorf("%s at %v: %s is %v, want %v (noise %g)", src, x, what, got, f, noise)
			}
		}
		type entry struct {
			name string
			got  float64
			want *big.Float
			l    int
		}
		var entries []entry
		for i := range n {
			a, b := at(i, 1, i, 0), at(i, -1, i, 0)
			if a == nil || b == nil {
				defined = false
				break
			}
			entries = append(entries, entry{"∂/∂" + vars[i], g[i], bigQuo(bigSub(a, b), bigMul(num(2), h)), 1})
			second := bigAdd(bigSub(a, bigMul(num(2), mid)), b)
			entries = append(entries, entry{"∂²/∂" + vars[i] + "²", hess[i*n+i], bigQuo(second, bigMul(h, h)), 2})
			for j := range i {
				pp, pm, mp, mm := at(i, 1, j, 1), at(i, 1, j, -1), at(i, -1, j, 1), at(i, -1, j, -1)
				if pp == nil || pm == nil || mp == nil || mm == nil {
					defined = false
					break
				}
				d := bigQuo(bigAdd(bigSub(bigSub(pp, pm), mp), mm), bigMul(num(4), bigMul(h, h)))
				entries = append(entries, entry{"∂²/∂" + vars[i] + "∂" + vars[j], hess[i*n+j], d, 2})
			}
		}
		if !defined {
			continue
		}
		check("the value", value, mid, &worst1)
		for _, e := range entries {
			if e.l == 1 {
				check(e.name, e.got, e.want, &worst1)
			} else {
				check(e.name, e.got, e.want, &worst2)
			}
		}
		done++
	}
	t.Logf("200 formulas; largest difference relative to max(|derivative|, |value|, 1): first %.1g, second %.1g", worst1, worst2)
}

// TestElementaryDerivatives compares each function's derivatives with those of
// the tables (common practice; computed by hand), far from and at the edges of
// its range.
func TestElementaryDerivatives(t *testing.T) {
	inf := math.Inf(1)
	for _, c := range []struct {
		src           string
		x             float64
		first, second float64
	}{
		{"sqrt(x)", 4, 0.25, -1.0 / 32}, {"sqrt(x)", 0, inf, -inf}, {"exp(x)", 0, 1, 1}, {"log(x)", 2, 0.5, -0.25},
		{"sin(x)", 0, 1, 0}, {"cos(x)", 0, 0, -1}, {"tan(x)", 0, 1, 0}, {"asin(x)", 0, 1, 0}, {"acos(x)", 0, -1, 0},
		{"atan(x)", 1, 0.5, -0.5}, {"atan2(x, 1)", 1, 0.5, -0.5}, {"atan2(1, x)", 1, -0.5, 0.5}, {"sinh(x)", 0, 1, 0}, {"cosh(x)", 0, 0, 1},
		{"tanh(x)", 0, 1, 0}, {"tanh(x)", 400, 0, 0}, {"tanh(x)", -2000, 0, 0}, {"pow(x, 3)", 2, 12, 12}, {"pow(x, -2)", 2, -0.25, 0.375},
		{"pow(x, 0)", 2, 0, 0}, {"pow(x, 1)", 2, 1, 0}, {"pow(x, 1/2)", 4, 0.25, -1.0 / 32}, {"pow(x, 1.5)", 4, 3, 0.375}, {"pow(2, x)", 0, math.Ln2, math.Ln2 * math.Ln2},
		{"pow(0, x)", 2, 0, 0}, {"pow(x, 20)", 1, 20, 380}, {"pow(x, 2)", 0, 0, 2}, {"pow(x, 2.0)", -3, -6, 2}, {"x*x*x", -1, 3, -6}, {"1/x", 2, -0.25, 0.25},
		{"x/x", 3, 0, 0}, {"-(-x)", 3, 1, 0}, {"x - x", 3, 0, 0}, {"x + x", 3, 2, 0}, {"7", 3, 0, 0}, {"x", 3, 1, 0}, {"2 - 3*x", 3, -3, 0},
		// kinks: abs counts as rising at 0, of equal arguments the first counts
		{"abs(x)", 0, 1, 0}, {"abs(x)", -2, -1, 0}, {"abs(x)", 2, 1, 0}, {"max(x, 1)", 1, 1, 0}, {"max(1, x)", 1, 0, 0}, {"min(x, 1)", 1, 1, 0},
		{"min(1, x)", 1, 0, 0}, {"max(x, 1)", 2, 1, 0}, {"max(x, 1)", 0, 0, 0}, {"min(x, 1)", 0, 1, 0}, {"min(x, 1)", 2, 0, 0},
		{"max(x, 2*x, 3*x)", 1, 3, 0}, {"abs(x*x - 1)", 2, 4, 2}, {"abs(x*x - 1)", 0, 0, -2},
	} {
		p, err := Compile(c.src, []string{"x"})
		if err != nil {
			t.Error(err)
			continue
		}
		g, h := make([]float64, 1), make([]float64, 1)
		f := p.Workspace().Hessian([]float64{c.x}, g, h)
		if want := p.Eval([]float64{c.x}); f != want {
			t.Errorf("%s at %v: Hessian's value is %v, Eval's %v", c.src, c.x, f, want)
		}
		near := func(a, b float64) bool { return a == b || math.Abs(a-b) <= 4e-16*max(1, math.Abs(b)) }
		if !near(g[0], c.first) || !near(h[0], c.second) {
			t.Errorf("%s at %v: derivatives %v, %v; want %v, %v", c.src, c.x, g[0], h[0], c.first, c.second)
		}
	}
}

// TestPowerOfTwoVariables covers the derivatives by the exponent and at base 0.
func TestPowerOfTwoVariables(t *testing.T) {
	p, err := Compile("pow(x, y)", []string{"x", "y"})
	if err != nil {
		t.Fatal(err)
	}
	w, g, h := p.Workspace(), make([]float64, 2), make([]float64, 4)
	w.Hessian([]float64{2, 3}, g, h)
	l := math.Ln2
	for i, want := range []float64{12, 8 * l, 12, 4 + 12*l, 4 + 12*l, 8 * l * l} {
		got := append(append([]float64{}, g...), h...)[i]
		if math.Abs(got-want) > 1e-14*want {
			t.Errorf("2^3: entry %d is %v, want %v", i, got, want)
		}
	}
	if w.Gradient([]float64{0, 3}, g); g[0] != 0 || g[1] != 0 {
		t.Errorf("0^3: gradient %v, want 0 0", g)
	}
}

// TestLongFormula: large formulas keep their derivatives.
func TestLongFormula(t *testing.T) {
	const n = 300
	var b strings.Builder
	vars := make([]string, n)
	x := make([]float64, n)
	for i := range vars {
		vars[i] = fmt.Sprintf("v%d", i)
		x[i] = float64(i)
		if i > 0 {
			b.WriteString(" + ")
		}
		fmt.Fprintf(&b, "%s*%s", vars[i], vars[i])
	}
	p, err := Compile(b.String(), vars)
	if err != nil {
		t.Fatal(err)
	}
	g, h := make([]float64, n), make([]float64, n*n)
	p.Workspace().Hessian(x, g, h)
	for i := range n {
		for j := range n {
			want := 0.0
			if i == j {
				want = 2
			}
			if h[i*n+j] != want {
				t.Fatalf("∂²/∂v%d∂v%d is %v, want %v", i, j, h[i*n+j], want)
			}
		}
		if g[i] != 2*x[i] {
			t.Fatalf("∂/∂v%d is %v, want %v", i, g[i], 2*x[i])
		}
	}
}
