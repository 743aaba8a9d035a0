package formula_test

import (
	"fmt"

	"example.org/guardring/pkg/formula"
	"example.org/guardring/pkg/si"
)

// The capacitance of a guarded disc against the reading of a micrometer: stray
// capacitance, slope, and the zero of the spacing.
func ExampleCompile() {
	p, err := formula.Compile("c_s + s/(d + d0)", []string{"c_s", "s", "d0", "d"})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(p.Eval([]float64{2e-12, 7e-14, 1e-5, 5e-3}))
	dim, err := p.Dimension([]si.Dimension{si.Capacitance, si.Capacitance.Mul(si.Length), si.Length, si.Length})
	fmt.Println(dim.Unit(), err)
	fmt.Println(p.LinearIn([]int{0, 1}), p.LinearIn([]int{0, 1, 2}))
	// Output:
	// 1.5972055888223554e-11
	// F <nil>
	// true false
}

func ExampleCompile_errors() {
	vars := []string{"force", "gap", "voltage"}
	for _, src := range []string{"gap^2", "2*force*gapp", "sqr(gap)", "1/2 force", "log10(gap)", "max(gap)"} {
		_, err := formula.Compile(src, vars)
		fmt.Println(err)
	}
	// Output:
	// formula "gap^2": column 4: ^ is no operator here; use pow(x, 2)
	// formula "2*force*gapp": column 9: "gapp" is not known; did you mean "gap"?
	// formula "sqr(gap)": column 1: "sqr" is no function; write x*x or pow(x, 2)
	// formula "1/2 force": column 5: 'f' is not expected here; put an operator (+ - * /) between two terms
	// formula "log10(gap)": column 1: "log10" is no function; write log(x)/log(10)
	// formula "max(gap)": column 1: max takes two arguments or more, not 1
}

func ExampleNames() {
	names, err := formula.Names("2*force*pow(gap, 2)/(area*voltage*voltage)/eps0")
	fmt.Println(names, err)
	// Output: [force gap area voltage] <nil>
}

func ExampleProgram_Dimension() {
	p, err := formula.Compile("voltage/(gap + area)", []string{"voltage", "gap", "area"})
	if err != nil {
		fmt.Println(err)
		return
	}
	_, err = p.Dimension([]si.Dimension{si.Voltage, si.Length, si.Area})
	fmt.Println(err)
	// Output: formula "voltage/(gap + area)": column 14: m and m² can't be added
}

// Rows of readings with parameters that are the same in all rows.
func ExampleWorkspace_BlockGradient() {
	p, err := formula.Compile("a*exp(-k*t)", []string{"a", "k", "t"})
	if err != nil {
		fmt.Println(err)
		return
	}
	w := p.Workspace()
	x := [][]float64{{2}, {0.5}, {0, 1, 2}} // a, k, and a column of times
	out := make([]float64, 3)
	grad := [][]float64{make([]float64, 3), make([]float64, 3)}
	w.BlockGradient(x, []int{0, 1}, out, grad)
	fmt.Printf("%.4f\n%.4f\n%.4f\n", out, grad[0], grad[1])
	// Output:
	// [2.0000 1.2131 0.7358]
	// [1.0000 0.6065 0.3679]
	// [-0.0000 -1.2131 -1.4715]
}

func ExampleWorkspace_Hessian() {
	p, err := formula.Compile("x*x*y", []string{"x", "y"})
	if err != nil {
		fmt.Println(err)
		return
	}
	g, h := make([]float64, 2), make([]float64, 4)
	fmt.Println(p.Workspace().Hessian([]float64{3, 5}, g, h), g, h)
	// Output: 45 [30 9] [10 6 6 0]
}
