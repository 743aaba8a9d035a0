package gum_test

import (
	"context"
	"fmt"
	"log"

	"gonum.org/v1/gonum/mat"

	"example.org/guardring/pkg/formula"
	"example.org/guardring/pkg/gum"
)

// The field between two plates, E = V/d: an invented divider and spacing.
func ExamplePropagate() {
	inputs := []gum.Input{
		{Name: "V", Group: "voltage", Unit: "V", Dist: gum.Normal(1000, 0.2)},
		{Name: "d", Group: "spacing", Unit: "m", Dist: gum.Rectangular(0.1, 50e-6)},
	}
	field, err := formula.Compile("V/d", []string{"V", "d"})
	if err != nil {
		log.Fatal(err)
	}
	model := &gum.Model{Inputs: inputs, Outputs: []gum.Output{{Name: "E", Unit: "V/m", Formula: field.Source(),
		New: func() gum.Evaluator {
			w := field.Workspace()
			return gum.Evaluator{Block: w.Block, Gradient: w.Gradient, Hessian: w.Hessian}
		}}}}
	r, err := gum.Propagate(context.Background(), model, gum.Settings{Trials: 200_000})
	if err != nil {
		log.Fatal(err)
	}
	out := r.Outputs[0]
	fmt.Printf("law:         E = %.1f, u = %.2f, k = %.2f, from %.1f to %.1f\n", out.Law.Value, out.Law.U, out.Law.K, out.Law.Interval[0], out.Law.Interval[1])
	for _, c := range out.Law.Budget {
		fmt.Printf("  %s: c = %.4g, contribution %.2f, share %.3f\n", c.Input, c.Sensitivity, c.Contribution, c.Share)
	}
	mc := out.MonteCarlo
	fmt.Printf("Monte Carlo: E = %.1f, u = %.2f, from %.1f to %.1f\n", mc.Value, mc.U, mc.Interval[0], mc.Interval[1])
	fmt.Printf("agrees: %v (δ = %g)\n", out.Comparison.Agrees, out.Comparison.Delta)
	for _, w := range out.Law.Warnings {
		fmt.Println(w)
	}
	// Output:
	// law:         E = 10000.0, u = 3.51, k = 2.00, from 9993.0 to 10007.0
	//   V: c = 10, contribution 2.00, share 0.324
	//   d: c = -1e+05, contribution -2.89, share 0.676
	// Monte Carlo: E = 10000.0, u = 3.51, from 9993.4 to 10006.7
	// agrees: true (δ = 0.5)
}

// Ten readings of 5 V, and their mean as an input with nine degrees of freedom.
func ExampleFromReadings() {
	d, err := gum.FromReadings([]float64{5.012, 5.009, 5.013, 5.010, 5.011, 5.008, 5.012, 5.010, 5.011, 5.009})
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("%.4f, u = %.5f, %v degrees of freedom\n", d.Value, d.U, d.DOF)
	// Output:
	// 5.0105, u = 0.00050, 9 degrees of freedom
}

// A run cut into parts that could be computed anywhere.
func ExampleMerge() {
	inputs := []gum.Input{{Name: "x", Dist: gum.Normal(3, 0.1)}}
	square, err := formula.Compile("x*x", []string{"x"})
	if err != nil {
		log.Fatal(err)
	}
	model := &gum.Model{Inputs: inputs, Outputs: []gum.Output{{Name: "y", Formula: square.Source(), New: func() gum.Evaluator {
		return gum.Evaluator{Block: square.Workspace().Block}
	}}}}
	var parts []*gum.Part
	for i := 1; i <= 3; i++ {
		p, err := gum.RunPart(context.Background(), model, gum.Settings{Trials: 300_000}, i, 3)
		if err != nil {
			log.Fatal(err)
		}
		parts = append(parts, p)
	}
	r, err := gum.Merge(parts)
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("%d trials: y = %.3f, u = %.3f\n", r.Trials, r.Outputs[0].MonteCarlo.Value, r.Outputs[0].MonteCarlo.U)
	_, err = gum.Merge(parts[:2])
	fmt.Println(err)
	// Output:
	// 300000 trials: y = 9.009, u = 0.601
	// part 3 of 3 is missing
}

// A budget combined by hand: two lines of known uncertainty and one of ten readings.
func ExampleCombine() {
	law, err := gum.Combine(8.85e-12, []gum.Contribution{
		{Input: "force", U: 1.0e-5, Sensitivity: 8.4e-10},
		{Input: "spacing", U: 2.0e-6, Sensitivity: 8.6e-9},
		{Input: "readings", U: 1.2e-14, DOF: 9, Sensitivity: 1},
	}, nil, 0.95)
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("u = %.3g, degrees of freedom %.1f, k = %.2f\n", law.U, law.DOF, law.K)
	for _, c := range law.Budget {
		fmt.Printf("%-9s %4.1f %%\n", c.Input, 100*c.Share)
	}
	// Output:
	// u = 2.26e-14, degrees of freedom 113.1, k = 1.98
	// force     13.8 %
	// spacing   58.0 %
	// readings  28.2 %
}

// Three correlations that can't hold at once.
func ExampleCheckCorrelation() {
	r := mat.NewSymDense(3, []float64{1, 0.9, -0.9, 0.9, 1, 0.9, -0.9, 0.9, 1})
	fmt.Println(gum.CheckCorrelation(r, []string{"radius", "gain", "offset"}))
	// Output:
	// the correlations of radius, gain, offset can't all hold: smallest eigenvalue of their matrix is -0.8, of 3, and none may be negative; the nearest possible ones are radius–gain 0.5 instead of 0.9, radius–offset -0.5 instead of -0.9, gain–offset 0.5 instead of 0.9
}
