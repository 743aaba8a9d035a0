package formula

import (
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"example.org/guardring/pkg/si"
)

var names = []string{"x", "y", "c_s", "gap", "µ", "log"}

// TestValues: what formulas mean. Expected values are arithmetic, or the
// constants of package si.
func TestValues(t *testing.T) {
	k, _ := si.KE()
	for src, want := range map[string]float64{
		"1/2": 0.5, "3/2*2": 3, "2 - 3 - 4": -5, "12/3/2": 2, "2 + 3*4": 14, "(2+3)*4": 20, "-2*3": -6, "2*-3": -6, "2 - -3": 5, "+2": 2, "- -2": 2,
		"1e3": 1000, "1.5e-6": 1.5e-6, ".5": 0.5, "5.": 5, "0": 0, "0.5": 0.5, "00.5": 0.5, "1E3": 1000, "pi": math.Pi, "eps0": si.Eps0, "qe": si.ElementaryCharge,
		"ke": k, "g0": si.StandardGravity, "x": 2, "y": 3, "c_s": 5, "gap": 7, "µ": 11, "log": 13, "log(log)": math.Log(13), "x*y": 6, "x/y": 2.0 / 3, "\nx\n+\ny\t": 5, "((((x))))": 2,
		"sqrt(x)": math.Sqrt2, "pow(x, 10)": 1024, "pow(x, -3)": 0.125, "pow(x, 0.5)": math.Sqrt2, "pow(x, -1/2)": 1 / math.Sqrt2, "pow(x, y)": 8, "pow(y, 2.5)": math.Pow(3, 2.5),
		"exp(1)": math.E, "log(x)": math.Ln2, "sin(x)": math.Sin(2), "cos(x)": math.Cos(2), "tan(x)": math.Tan(2), "asin(1/x)": math.Asin(0.5), "acos(1/x)": math.Acos(0.5),
		"atan(x)": math.Atan(2), "atan2(x, y)": math.Atan2(2, 3), "sinh(x)": math.Sinh(2), "cosh(x)": math.Cosh(2), "tanh(x)": math.Tanh(2), "abs(-x)": 2, "min(x, y)": 2, "max(x, y)": 3,
		"min(y, x, 1)": 1, "max(x, y, 4, 1)": 4, "x - x": 0, "x/x": 1, "pow(x, 3)*pow(x, 2)": 32, "x/4": 0.5, "x*1 + 0": 2, "0 - x": -2, "x/-1": -2, "(-x)*(-y)": 6, "(-x)/y": -2.0 / 3, "x/(-y)": -2.0 / 3,
	} {
		p, err := Compile(src, names)
		if err != nil {
			t.Error(err)
			continue
		}
		if got := p.Eval([]float64{2, 3, 5, 7, 11, 13}); got != want && math.Abs(got-want) > 2e-16*math.Abs(want) {
			t.Errorf("%s is %v, want %v", src, got, want)
		}
	}
}

// TestUndefined: where a formula is undefined the value says so, as IEEE 754.
func TestUndefined(t *testing.T) {
	for _, c := range []struct {
		src  string
		x    float64
		want float64
	}{
		{"log(x)", -1, math.NaN()}, {"log(x)", 0, math.Inf(-1)}, {"sqrt(x)", -1, math.NaN()}, {"1/x", 0, math.Inf(1)}, {"x/x", 0, math.NaN()}, {"asin(x)", 2, math.NaN()},
		{"pow(x, 0.3)", -1, math.NaN()}, {"exp(x)", 1000, math.Inf(1)}, {"max(x, 1)", math.NaN(), math.NaN()}, {"min(x, 1)", math.NaN(), math.NaN()}, {"abs(x)", math.NaN(), math.NaN()},
		{"0*x", math.Inf(1), math.NaN()}, {"x - x", math.Inf(1), math.NaN()},
	} {
		p, err := Compile(c.src, []string{"x"})
		if err != nil {
			t.Error(err)
			continue
		}
		if got := p.Eval([]float64{c.x}); got != c.want && !(math.IsNaN(got) && math.IsNaN(c.want)) {
			t.Errorf("%s at %v is %v, want %v", c.src, c.x, got, c.want)
		}
	}
}

func TestBadFormulas(t *testing.T) {
	for _, c := range []struct {
		src    string
		column int
		want   string
	}{
		{"", 0, "empty"}, {" \n", 0, "empty"}, {"x^2", 2, "use pow(x, 2)"}, {"x**2", 3, "use pow(x, 2)"}, {"x ** 2", 4, "use pow(x, 2)"}, {"(x+y)**2", 7, "use pow(x, 2)"},
		{"^x", 1, "use pow(x, 2)"}, {"x//2", 2, "one /"}, {"x/*c*/", 2, "comments"}, {"2x", 2, "operator"}, {"x y", 3, "operator"}, {"x(y)", 1, "x*(…)"}, {"2(x)", 1, "between two factors"},
		{"(x)(y)", 1, "between two factors"}, {"x +", 4, "the end"}, {"(x", 3, "the end"}, {"x)", 2, "not expected"}, {"gapp + x", 1, `did you mean "gap"`}, {"x + µµ", 5, "not known"}, {"x + zz", 5, "known are x y"},
		{"Pi*x", 1, `did you mean "pi"`}, {"sqrt", 1, "is a function"}, {"sqrt + x", 1, "write sqrt(…)"}, {"sqrt(x, y)", 1, "takes 1 argument, not 2"}, {"sqrt()", 1, "not 0"}, {"pow(x)", 1, "takes 2 arguments, not 1"}, {"max(x)", 1, "two arguments or more"},
		{"ln(x)", 1, "log(x)"}, {"log10(x)", 1, "log(x)/log(10)"}, {"Sqrt(x)", 1, `did you mean "sqrt"`}, {"foo(x)", 1, "known are sqrt"}, {"x + eps0(2)", 5, "eps0 is no function"},
		{"0x10", 1, "decimal"}, {"0b1", 1, "decimal"}, {"1_000", 1, "decimal"}, {"017", 1, "octal"}, {"1i", 1, "decimal"}, {"'a'", 1, "decimal"}, {`"a"`, 1, "decimal"}, {"1e999", 1, "too large"}, {"0x1p3", 1, "decimal"},
		{"x % 2", 3, "fraction"}, {"x == y", 3, "operator"}, {"x < y", 3, "operator"}, {"x && y", 3, "operator"}, {"!x", 1, "signs"}, {"&x", 1, "signs"}, {"*x", 1, "pow"}, {"<-x", 1, "signs"}, {"x.y", 3, "no point"},
		{"x[1]", 1, "brackets"}, {"x[1:2]", 1, "brackets"}, {"[]int{1}", 1, "not part"}, {"func() {}", 1, "not part"}, {"x.(y)", 1, "not part"}, {"struct{}", 1, "not part"}, {"x; y", 2, "not expected"}, {"x, y", 2, "not expected"}, {"x--y", 2, "parentheses or a blank"},
		{"max(x...)", 6, "no meaning"}, {"range", 1, "word of the Go language"}, {"x + type", 5, "word of the Go language"}, {"if + 1", 1, "word of the Go language"}, {"x = 2", 3, "not expected"}, {"x\x00", 2, "code 0"}, {"x\xff", 0, "UTF-8"}, {"x $ y", 3, "not expected"},
		{strings.Repeat("x+", 3000) + "x", 0, "longer"}, {strings.Repeat("(", 70) + "x" + strings.Repeat(")", 70), 65, "nested"}, {strings.Repeat("sin(", 70) + "x" + strings.Repeat(")", 70), 0, "nested"},
		{strings.Repeat("- ", 200) + "x", 0, "nested"}, {"x≠y", 2, "not expected"}, {"√x", 1, "not expected"}, {"x²", 2, ""},
	} {
		p, err := Compile(c.src, names)
		var bad *Error
		switch {
		case err == nil:
			t.Errorf("%q is compiled to %v", c.src, p)
		case !errors.As(err, &bad):
			t.Errorf("%q: error is a %T", c.src, err)
		case p != nil:
			t.Errorf("%q: a program comes with the error", c.src)
		case !strings.Contains(err.Error(), c.want):
			t.Errorf("%q: %v; want %q in it", c.src, err, c.want)
		case c.column != 0 && bad.Column != c.column:
			t.Errorf("%q: %v; want column %d", c.src, err, c.column)
		}
	}
}

func TestBadNames(t *testing.T) {
	for _, c := range []struct {
		vars []string
		want string
	}{
		{[]string{"x", "range"}, "word of the Go language"}, {[]string{"pi"}, "constant"}, {[]string{"eps0"}, "constant"}, {[]string{"x", "x"}, "twice"}, {[]string{"1x"}, "no name"},
		{[]string{""}, "no name"}, {[]string{"a b"}, "no name"}, {[]string{"V/kV"}, "no name"}, {[]string{"_"}, "no name"}, {make([]string, 2000), "more than"},
	} {
		if p, err := Compile("1", c.vars); err == nil || p != nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%q: %v; want %q in it", c.vars[:1], err, c.want)
		}
	}
}

func TestNames(t *testing.T) {
	got, err := Names("a*log(b) + pi + c/exp(a) - log")
	if err != nil || !slices.Equal(got, []string{"a", "b", "c", "log"}) {
		t.Errorf("names %q, %v", got, err)
	}
	if got, err := Names("a +"); err == nil || got != nil {
		t.Errorf("names %q of half a formula", got)
	}
	if got, err := Names("1 + pi"); err != nil || len(got) != 0 {
		t.Errorf("names %q, %v of a constant", got, err)
	}
}

func TestProgramTells(t *testing.T) {
	p, err := Compile("x*(y + 1) - abs(-gap)", names)
	if err != nil {
		t.Fatal(err)
	}
	if p.Source() != "x*(y + 1) - abs(-gap)" || !slices.Equal(p.Vars(), names) {
		t.Errorf("source %q, variables %q", p.Source(), p.Vars())
	}
	for i, want := range []bool{true, true, false, true, false, false} {
		if p.Uses(i) != want {
			t.Errorf("Uses(%s) = %v", names[i], !want)
		}
	}
	p.Vars()[0] = "changed"
	if p.Vars()[0] != "x" {
		t.Error("Vars hands out the program's own slice")
	}
}

// TestSharing: common subexpressions stand once, constants are folded.
func TestSharing(t *testing.T) {
	for src, want := range map[string]int{
		"x": 1, "2*3 + pi": 1, "(x+y)*(x+y)": 4, "(x+y)*(y+x)": 4, "sin(x*y) - sin(y*x)": 5, "pow(x, 2)": 2, "pow(x, 4)": 3, "x + 0": 1, "1*x": 1, "- -x": 1, "sqrt(x)*pow(x, 1/2)": 3, "x/1": 1,
	} {
		p, err := Compile(src, names)
		if err != nil {
			t.Error(err)
		} else if got := len(p.main.nodes); got != want {
			t.Errorf("%s has %d operations with its arguments, want %d", src, got, want)
		}
	}
}

func TestLinear(t *testing.T) {
	vars := []string{"a", "b", "x"}
	for _, c := range []struct {
		src  string
		wrt  []int
		want bool
	}{
		{"a + b*x", []int{0, 1}, true}, {"a + b*x", []int{0, 1, 2}, false}, {"a*b", []int{0}, true}, {"a*b", []int{0, 1}, false}, {"a/x + b*sin(x) - 3", []int{0, 1}, true}, {"x/a", []int{0}, false},
		{"pow(a, 2)", []int{0}, false}, {"pow(a, 1)", []int{0}, true}, {"-(a - 2*b)/4", []int{0, 1}, true}, {"a*exp(b*x)", []int{0}, true}, {"a*exp(b*x)", []int{0, 1}, false}, {"abs(a)", []int{0}, false},
		{"max(a, x)", []int{0}, false}, {"5", []int{0, 1, 2}, true}, {"x", []int{0}, true}, {"a + a", []int{0}, true}, {"sqrt(a)", nil, true}, {"pow(x, a)", []int{0}, false}, {"a*a*0", []int{0}, false},
	} {
		p, err := Compile(c.src, vars)
		if err != nil {
			t.Error(err)
		} else if got := p.LinearIn(c.wrt); got != c.want {
			t.Errorf("%s linear in %v: %v", c.src, c.wrt, got)
		}
	}
}

func TestDimensions(t *testing.T) {
	vars := []string{"u", "d", "f", "a", "n"}
	dims := []si.Dimension{si.Voltage, si.Length, si.Force, si.Area, si.Dimensionless}
	for _, c := range []struct {
		src    string
		unit   string // of the result; "" for an error
		column int
		want   string
	}{
		{"u/d", "V/m", 0, ""}, {"2*f*pow(d, 2)/(a*u*u)", "F/m", 0, ""}, {"eps0*a*u*u/(2*d*d)", "N", 0, ""}, {"sqrt(2*f*d*d/(eps0*a))", "V", 0, ""}, {"ke*qe*qe/(d*d)", "N", 0, ""},
		{"f/g0", "kg", 0, ""}, {"pow(a, 1/2)", "m", 0, ""}, {"pow(a*d, 1/3)", "m", 0, ""}, {"pow(d, -2)", "m⁻²", 0, ""}, {"exp(n)*u", "V", 0, ""}, {"pow(n, n)", "1", 0, ""}, {"sin(d/d)", "1", 0, ""},
		{"atan2(d, d)", "1", 0, ""}, {"max(u, 0)", "V", 0, ""}, {"max(0, u, -0)", "V", 0, ""}, {"0 + u", "V", 0, ""}, {"min(d, sqrt(a))", "m", 0, ""}, {"abs(u)", "V", 0, ""}, {"-u", "V", 0, ""}, {"1 + n", "1", 0, ""}, {"pi*n", "1", 0, ""},
		{"pow(d, 4/2)", "m²", 0, ""}, {"pow(d, n*0 + 2)", "", 12, "must be a number"}, {"0*u + d", "m", 0, ""},
		{"u + d", "", 3, "V and m can't be added"}, {"u - 1", "", 3, "V and a pure number can't be subtracted"}, {"1 + u*d/d", "", 3, "a pure number and V"}, {"exp(u)", "", 5, "exp needs a pure number, not V"}, {"sin(2*d)", "", 6, "needs a pure number"},
		{"pow(u, n)", "", 8, "must be a number"}, {"pow(2, d)", "", 8, "not m"}, {"pow(d, 1/7)", "", 9, "1/12"}, {"pow(d, 1000)", "", 8, "1/12"}, {"atan2(u, d)", "", 10, "compares V with m"}, {"max(u, d)", "", 8, "compares V with m"}, {"max(u, 2)", "", 8, "a pure number"},
		{"d + u + d", "", 3, "m and V"}, {"pow(pow(d, 1/12), 1/2)", "", 20, "twelfths"}, {"sqrt(pow(d, 1/12))", "", 1, "twelfths"},
	} {
		p, err := Compile(c.src, vars)
		if err != nil {
			t.Error(err)
			continue
		}
		d, err := p.Dimension(dims)
		var bad *Error
		switch {
		case c.unit != "" && (err != nil || d != si.MustUnit(c.unit).Dim):
			t.Errorf("%s has dimension %v (%v), want %s", c.src, d, err, c.unit)
		case c.unit == "" && err == nil:
			t.Errorf("%s has dimension %v, want an error", c.src, d)
		case c.unit == "" && (!errors.As(err, &bad) || !strings.Contains(err.Error(), c.want) || bad.Column != c.column || d != si.Dimension{}):
			t.Errorf("%s: %v (%v); want column %d and %q", c.src, err, d, c.column, c.want)
		}
	}
	p, err := Compile("u", vars)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := p.Dimension(dims[:2]); err == nil || !strings.Contains(err.Error(), "2 dimensions are given for 5 variables") {
		t.Errorf("too few dimensions: %v", err)
	}
}
