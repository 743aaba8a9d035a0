package formula_test

import (
	"math"
	"strings"
	"testing"

	"example.org/guardring/pkg/formula"
	"example.org/guardring/pkg/si"
)

// An equation is the difference of its sides, keeps its columns, and its sides must
// be alike (derived).
func TestEquation(t *testing.T) {
	vars := []string{"x", "y", "r"}
	p, err := formula.CompileEquation("x*x -1=r*r- y*y +2", vars)
	if err != nil {
		t.Fatal(err)
	}
	if got, want := p.Eval([]float64{3, 4, 7}), 9.0-1-(49-16+2); math.Abs(got-want) > 1e-12 {
		t.Errorf("left − right = %v, want %v", got, want)
	}
	if p.Source() != "x*x -1 = r*r- y*y +2" {
		t.Errorf("source %q", p.Source())
	}
	names, err := formula.NamesOfEquation("y + x = r*x")
	if err != nil || strings.Join(names, " ") != "y x r" {
		t.Errorf("names %v, %v", names, err)
	}
	for _, c := range []struct{ in, want string }{
		{"x", "no equals sign"},
		{"x = ", "column 3: one side of the equation is empty"},
		{"x = y = r", "column 7: a second equals sign"},
		{"x = q", `column 5: "q" is not known`},
		{"q = x", `column 1: "q" is not known`},
		{"x == y", "column 4: a second equals sign"},
		{"(x = y)", "column"},
	} {
		if _, err := formula.CompileEquation(c.in, vars); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%q: %v, want %q", c.in, err, c.want)
		}
	}
	m := si.MustUnit("m").Dim
	p, err = formula.CompileEquation("x*y = r*x + 1", vars)
	if err != nil {
		t.Fatal(err)
	}
	if _, _, err := p.InferAny([]si.Dimension{m, m, {}}, []int{2}); err == nil || !strings.Contains(err.Error(), "column 5: ") || !strings.Contains(err.Error(), "the sides of this equation differ") {
		t.Errorf("m² and 1 are alike: %v", err)
	}
	p, err = formula.CompileEquation("x*y = r*x", vars)
	if err != nil {
		t.Fatal(err)
	}
	found, known, err := p.InferAny([]si.Dimension{m, m, {}}, []int{2})
	if err != nil || !known[0] || found[0] != m {
		t.Errorf("dimension of r: %v %v %v, want m", found, known, err)
	}
}
