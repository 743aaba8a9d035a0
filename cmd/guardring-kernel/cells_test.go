package main_test

import (
	"strings"
	"testing"

	"example.org/guardring/pkg/kernel"
)

func TestValues(t *testing.T) {
	s := start(t)
	s.value("1+1", "2")
	s.value("x := 2.5\nx*2", "5")
	s.value("x = 4\nx", "4")
	s.value(`import ("math"; "fmt"; "strings"; "errors"; "os")
math.Sqrt(2)`, "1.4142135623730951")
	s.value(`"µ ± text"`, "µ ± text")
	s.value("[]int{1,2,3}", "[1 2 3]")
	s.value("func sq(v float64) float64 { return v*v }\nsq(3)", "9")
	s.value("type P struct { X, Y int }\nP{1, 2}", "{X:1 Y:2}")
	s.value("func (p P) String() string { return fmt.Sprintf(\"(%d|%d)\", p.X, p.Y) }\nP{1, 2}", "(1|2)")
	s.value("func two() (int, string) { return 1, \"a\" }\ntwo()", "1, a")
	s.value("strings.Repeat(\"ab\", 2)", "abab")
	s.value("func good() (int, error) { return 7, nil }\ngood()", "7")
	s.value("v, err := good()\nv", "7")
	s.value("err", "")
	s.value("fmt.Println(\"seen\")", "")
	s.value("var w strings.Builder\nw.WriteString(\"abc\")", "")
	s.value("import \"gonum.org/v1/gonum/floats\"\nfloats.Sum([]float64{1, 2, 3.5})", "6.5")
	s.value("for i := 0; i < 3; i++ { }", "")
	s.value("type E struct{ code int }\nfunc (e E) Error() string { return fmt.Sprint(\"code \", e.code) }\nfunc fail(n int) error { if n > 0 { return E{n} }; return nil }\nferr := fail(3)\nferr", "code 3")
	s.value("type Ring struct{ w float64 }\nfunc (r *Ring) String() string { return fmt.Sprintf(\"ring of %g mm\", r.w) }\n&Ring{2}", "ring of 2 mm")
	s.value("Ring{3}", "{w:3}")
	s.value("type rendering struct{ n int }\n[]rendering{{1}, {2}}", "[{n:1} {n:2}]")
	s.value("nil", "")
	s.value("m := map[string]int{\"a\": 1}\nm[\"a\"]", "1")
	s.value("", "")
	s.value("// only a comment", "")
	e := s.ok("import \"gonum.org/v1/gonum/mat\"\nmat.NewDense(2, 2, []float64{1, 2, 3, 4})")
	if len(e.Outputs) != 1 || e.Outputs[0].Data["text/html"] == nil || e.Result() != "⎡1  2⎤\n⎣3  4⎦" {
		t.Errorf("a matrix: %q %v", e.Result(), e.Outputs)
	}
	e = s.ok("import (\"gonum.org/v1/plot\"; \"gonum.org/v1/plot/plotter\")\np := plot.New()\nl, lerr := plotter.NewLine(plotter.XYs{{X: 0, Y: 1}, {X: 1, Y: 2}})\nif lerr == nil { p.Add(l) }\np")
	if len(e.Outputs) != 1 || !strings.Contains(toString(e.Outputs[0].Data["image/svg+xml"]), "<svg") {
		t.Errorf("a plot has no SVG form: %v", e.Outputs)
	}
	e = s.ok(`type R struct{}
func (R) SimpleRender() map[string]interface{} { return map[string]interface{}{"text/html": "<b>r</b>"} }
func (R) String() string { return "r in text" }
R{}`)
	if len(e.Outputs) != 1 || e.Outputs[0].Data["text/html"] != "<b>r</b>" || e.Result() != "r in text" {
		t.Errorf("a type of a cell with SimpleRender: %v", e.Outputs)
	}
	e = s.ok("display.HTML(\"<i>x</i>\")")
	if len(e.Outputs) != 1 || e.Outputs[0].Data["text/html"] != "<i>x</i>" || e.Outputs[0].Data["text/plain"] == nil {
		t.Errorf("display.HTML: %v", e.Outputs)
	}
}

func toString(v any) string {
	s, _ := v.(string)
	return s
}

func TestErrors(t *testing.T) {
	s := start(t)
	const c, p, f, x = kernel.CompileError, kernel.Panicked, kernel.CellFailed, kernel.ExitRefused
	s.ok("import (\"errors\"; \"os\"; \"log\"; \"runtime\"; \"fmt\")\nkeep := 41")
	for _, test := range []struct{ code, kind, message, place string }{
		{"a := 1\nnosuch + 1", c, "undefined: nosuch", "line 2"},
		{"a := 1\nb := \"x\" +", c, "", "line 2"},
		{"if true {\n 1 +* 2\n}", c, "", "line 2"},
		{"var n int = \"text\"", c, "", "line 1"},
		{"\n\nf := os.Open(\"no such file\")", c, "os.Open returns 2 values", "line 3"},
		{"func g() (int, error) { return 1, nil }\nvar h = g()", c, "g returns 2 values", "line 2"},
		{"func g() (int, error) { return 1, nil }\nh := 0\nh = g()", c, "g returns 2 values", "line 3"},
		{"func g() (int, error) { return 1, nil }\ng() + 1", c, "g returns 2 values", "line 2"},
		{"func outer() *os.File {\n\tf := os.Open(\"x\")\n\treturn f\n}", c, "os.Open returns 2 values", "line 2"},
		{"1\nos.Open(\"no such file\")", f, "no such file", "line 2"},
		{"os.Remove(\"no such file\")", f, "no such file", "line 1"},
		{"z := []int{1}\nfmt.Sprint(1)\nz[keep]", p, "index out of range", "line 3"},
		{"func deep(k int) int {\n\tif k == 0 {\n\t\tpanic(\"at the bottom\")\n\t}\n\treturn deep(k-1)\n}\ndeep(3)", p, "at the bottom", "line 3"},
		{"for i := 0; i < 3; i++ {\n\tif i == 2 {\n\t\tpanic(errors.New(\"third\"))\n\t}\n}", p, "third", "line 3"},
		{"var m map[string]int\nm[\"a\"] = 1", p, "nil map", "line 2"},
		{"var q *struct{ A int }\nq.A", p, "nil pointer", "line 2"},
		{"os.Exit(3)", x, "os.Exit(3)", "line 1"},
		{"log.Fatal(\"the end\")", x, "log.Fatal", "line 1"},
		{"runtime.Goexit()", x, "runtime.Goexit", "line 1"},
		{"type Bad struct{}\nfunc (Bad) String() string { panic(\"no text\") }\nBad{}", p, "while the value was drawn", "line 3"},
		{"func endless(n int) int { return endless(n+1) + 1 }\nendless(0)", p, "recursion without an end", "line 1"},
		{"func Map[T any](x []T) []T { return x }", c, "can't declare generic", "line 1"},
		{"for i := range 3 { }", c, "can't range over integers", "line 1"},
		{"max(1, 2)", c, "does not have this builtin", "line 1"},
		{"mat.NewDense(1, 1, nil)", c, "import \"gonum.org/v1/gonum/mat\" first", "line 1"},
		{"fmt.Printn(1)", c, "undefined: fmt.Printn", "line 1"},
		{"keep = \"text\"", c, "", "line 1"},
		{"type Q struct{}\nfunc (q *Q) Error() string { return \"q\" }\nfunc e() error { return &Q{} }", c, "receiver is no pointer", "line 3"},
		{"1/0", c, "divide by zero", "line 1"},
	} {
		s.fails(test.code, test.kind, test.message, test.place)
	}
	s.value("keep", "41")
	s.value("errors.New(\"a value, not a failure\") != nil", "true")
}

func TestFailedCellsLeaveNoVariables(t *testing.T) {
	s := start(t)
	s.ok("import \"os\"\ny := 1")
	s.fails("y := \"text\"\nf := os.Open(\"x\")", kernel.CompileError, "os.Open", "line 2")
	s.value("y + 1", "2")
	s.fails("f", kernel.CompileError, "undefined: f", "line 1")
	s.fails("a := 5\nb := []int{}[a]\nc := 7", kernel.Panicked, "", "line 2")
	s.value("a", "5")
	s.fails("b", kernel.CompileError, "undefined: b", "line 1")
	s.fails("c", kernel.CompileError, "undefined: c", "line 1")
}

func TestImportsThatAreNotLinkedIn(t *testing.T) {
	s := start(t)
	e := s.fails("1\nimport \"example.com/lab/unknown\"", kernel.CompileError, "not linked into this kernel", "line 2")
	for _, want := range []string{"gonum.org/v1/gonum/mat", "example.org/guardring/pkg/cell", "github.com/go-gota/gota/dataframe", "strings"} {
		if !strings.Contains(e.EValue, want) {
			t.Errorf("the list of importable packages lacks %s", want)
		}
	}
	s.fails("import \"gonum/mat\"", kernel.CompileError, "Perhaps \"gonum.org/v1/gonum/mat\" is meant", "")
	s.fails("import \"C\"", kernel.CompileError, "can't be imported", "")
	s.fails("import \"plugin\"", kernel.CompileError, "can't be imported", "")
	s.fails("import \"./here\"", kernel.CompileError, "not linked", "")
}

func TestPanicsInGoroutines(t *testing.T) {
	s := start(t)
	s.ok(`import ("fmt"; "sync"; "time"; "os"; "math")
n := 1
var wg sync.WaitGroup
func fall(s string) { defer wg.Done(); panic(s) }
type T struct{ v int }
func (t *T) fall(a float64) { defer wg.Done(); var z []int; _ = z[t.v] }`)
	e := s.ok(`wg.Add(5)
go fall("first")
go func() { defer wg.Done(); panic("second") }()
go func(k int) { defer wg.Done(); if k > 0 { go fall("third") }; wg.Add(1) }(n)
tt := &T{5}
go tt.fall(math.Pi)
if true { go func() { defer wg.Done(); os.Exit(1) }() }
wg.Wait()
time.Sleep(20*time.Millisecond)`)
	text := e.Text("stderr")
	for _, want := range []string{"panic in a goroutine: first", "panic in a goroutine: second", "panic in a goroutine: third", "index out of range", "os.Exit(1) in a goroutine"} {
		if !strings.Contains(text, want) {
			t.Errorf("standard error lacks %q:\n%s", want, text)
		}
	}
	s.ok("time.AfterFunc(time.Millisecond, func() { panic(\"timer\") })\ntime.Sleep(30*time.Millisecond)")
	s.value("n", "1")
	s.value("ch := make(chan int)\nfor i := 0; i < 3; i++ { go func(k int) { ch <- k*k }(i) }\n(<-ch) + (<-ch) + (<-ch)", "5")
	s.value("arg := 10\ngo func() { ch <- arg }()\n<-ch", "10")
}
