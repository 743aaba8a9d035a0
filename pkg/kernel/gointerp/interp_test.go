package gointerp

import (
	"context"
	"errors"
	"strings"
	"testing"

	"example.org/guardring/pkg/kernel"
)

func TestParenthesise(t *testing.T) {
	for code, want := range map[string]string{
		"func() { f() }()":                        "(func() { f() })()",
		"x := 1\nfunc(a int) int { return a }(x)": "x := 1\n(func(a int) int { return a })(x)",
		"func() (int, error) { return 1, nil }()": "(func() (int, error) { return 1, nil })()",
		"func() struct{ A int } { return s }().A": "(func() struct{ A int } { return s })().A",
		"func f() { func() { }() }":               "func f() { func() { }() }",
		"func (t T) M() { }":                      "func (t T) M() { }",
		"func (t *T) M(f func()) (int, error) {}": "func (t *T) M(f func()) (int, error) {}",
		"go func() { }()":                         "go func() { }()",
		"x := func() { }":                         "x := func() { }",
		"f(func() { })":                           "f(func() { })",
		"func(":                                   "func(",
		"func()":                                  "func()",
		"func() {":                                "func() {",
		"// func() {}()":                          "// func() {}()",
		"`func() {}()`":                           "`func() {}()`",
	} {
		if got := parenthesise(code); got != want {
			t.Errorf("%q becomes %q, want %q", code, got, want)
		}
	}
}

func TestWantsOperand(t *testing.T) {
	for code, want := range map[string]bool{
		"a +": true, "a :=": true, "f(a,": true, "a.": true, "if": true, "a + // note": true, "a +\n\n": true,
		"a": false, "f()": false, "a++": false, "a[1]": false, "return": false, "": false, "a;": false,
	} {
		if got := wantsOperand(code); got != want {
			t.Errorf("%q: %v, want %v", code, got, want)
		}
	}
}

func newInterp(t *testing.T) *Interp {
	t.Helper()
	in, err := New([]string{"example.org/lab/ring"}, nil)
	if err != nil {
		t.Fatal(err)
	}
	return in
}

func TestRun(t *testing.T) {
	in := newInterp(t)
	for i, c := range []struct{ code, value, kind, message, place string }{
		{"import (\"strings\"; \"strconv\")\n2 * 3.5", "7", "", "", ""},
		{"strconv.Atoi(\"12\")", "12", "", "", ""},
		{"1\nstrconv.Atoi(\"x\")", "", kernel.CellFailed, "invalid syntax", "cell 3, line 2"},
		{"\nn := strconv.Atoi(\"3\")", "", kernel.CompileError, "strconv.Atoi returns 2 values", "cell 4, line 2"},
		{"n", "", kernel.CompileError, "undefined: n", "cell 5, line 1"},
		{"import \"ring\"", "", kernel.CompileError, "Perhaps \"example.org/lab/ring\" is meant", "cell 6, line 1"},
		{"ring.Guard()", "", kernel.CompileError, "import \"example.org/lab/ring\" first", "cell 7, line 1"},
		{"func f(k int) int {\n\treturn []int{1}[k]\n}\nf(0)", "1", "", "", ""},
		{"0\n\nf(4)", "", kernel.Panicked, "out of range", "cell 8, line 2"},
	} {
		res, err := in.Run(context.Background(), kernel.Cell{Code: c.code, Count: i + 1})
		var e *kernel.CellError
		switch {
		case c.kind == "":
			if err != nil || res.Forms["text/plain"] != c.value {
				t.Errorf("%q: %v, %v, want %q", c.code, res, err, c.value)
			}
		case !errors.As(err, &e) || e.Kind != c.kind || !strings.Contains(e.Message, c.message) || len(e.Places) == 0 || !strings.HasPrefix(e.Places[0].String(), c.place):
			t.Errorf("%q: %v, want %s … %s at %s", c.code, err, c.kind, c.message, c.place)
		}
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	var e *kernel.CellError
	if _, err := in.Run(ctx, kernel.Cell{Code: "1"}); !errors.As(err, &e) || e.Kind != kernel.Interrupted {
		t.Errorf("a cell interrupted before it began: %v", err)
	}
}

func TestDescribe(t *testing.T) {
	in := newInterp(t)
	if _, err := in.Run(context.Background(), kernel.Cell{Code: "import \"strings\"\nimport \"time\"\nnow := time.Now()\ntype T struct{ A, b int }\nfunc (t T) M(x float64) error { return nil }\nv := T{1, 2}\nfunc mk() (T, error) { return v, nil }"}); err != nil {
		t.Fatal(err)
	}
	for expr, want := range map[string]kernel.Description{
		"strings":         {Kind: "package", Type: "strings", Path: "strings"},
		"strings.ToUpper": {Kind: "func", Type: "func(string) string", Path: "strings", Symbol: "ToUpper"},
		"now":             {Kind: "var", Type: "time.Time", Path: "time", Symbol: "Time"},
		"now.Add":         {Kind: "method", Type: "func(time.Duration) time.Time", Path: "time", Symbol: "Time.Add"},
		"now.Add(3)":      {Kind: "value", Type: "time.Time", Path: "time", Symbol: "Time"},
		"time.Time":       {Kind: "type", Type: "time.Time", Path: "time", Symbol: "Time"},
		"time.Second":     {Kind: "const", Type: "time.Duration", Path: "time", Symbol: "Second"},
		"v":               {Kind: "var", Type: "T"},
		"mk()":            {Kind: "value", Type: "T"},
		"mk":              {Kind: "func", Type: "func() (T, error)"},
	} {
		d, err := in.Describe(expr)
		if err != nil || d.Kind != want.Kind || d.Type != want.Type || d.Path != want.Path || d.Symbol != want.Symbol {
			t.Errorf("%s: %+v, %v, want %+v", expr, d, err, want)
		}
	}
	for _, expr := range []string{"nosuch", "v.", "1 +", "v v", "strings.Nosuch", ""} {
		if d, err := in.Describe(expr); err == nil {
			t.Errorf("%q: %+v", expr, d)
		}
	}
	d, err := in.Describe("mk()")
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, m := range d.Members {
		names = append(names, m.Kind+" "+m.Name)
	}
	if got := strings.Join(names, ", "); got != "field A, method M, field b" {
		t.Errorf("members of a cell's type: %s", got)
	}
	if s, ok := in.Value("v"); !ok || s != "{A:1 b:2}" {
		t.Errorf("value %q %v", s, ok)
	}
	if s, ok := in.Value("strings"); ok {
		t.Errorf("the value of a package is %q", s)
	}
}

func TestNamesHideTheKernelsOwn(t *testing.T) {
	for _, n := range newInterp(t).Names() {
		if strings.HasPrefix(n.Name, "guardring_") {
			t.Errorf("%s is offered to cells", n.Name)
		}
	}
}

func FuzzParenthesise(f *testing.F) {
	for _, s := range []string{"func() {}()", "func (t T) M() {}", "func() { `x`", "func(){}();func(){}", "µ func("} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, code string) {
		got := parenthesise(code)
		strip := func(s string) string { return strings.NewReplacer("(", "", ")", "").Replace(s) }
		if strip(got) != strip(code) || strings.Count(got, "\n") != strings.Count(code, "\n") {
			t.Errorf("%q becomes %q", code, got)
		}
	})
}
