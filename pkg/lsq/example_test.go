package lsq_test

import (
	"context"
	"fmt"

	"example.org/guardring/pkg/lsq"
)

// Misra1a of the NIST Statistical Reference Datasets from its first start:
// certified b1 = 238.94212918 ± 2.7070075241, b2 = 5.5015643181e-4 ±
// 7.2668688436e-6.
func ExampleFit() {
	x := []float64{77.6, 114.9, 141.1, 190.8, 239.9, 289.0, 332.8, 378.4, 434.8, 477.3, 536.8, 593.1, 689.1, 760.0}
	y := []float64{10.07, 14.73, 17.94, 23.93, 29.61, 35.18, 40.02, 44.82, 50.76, 55.05, 61.01, 66.40, 75.47, 81.78}
	p := &lsq.Problem{
		Parameters: []lsq.Parameter{{Name: "b1", Start: 500}, {Name: "b2", Start: 0.0001}},
		Y:          y,
		Numeric:    true,
		Eval: func(b, f []float64, _ [][]float64) error {
			for i := range f {
				// b1·(1 − exp(−b2·x)) by its series would lose digits; this does not
				f[i] = b[0] * -expm1(-b[1]*x[i])
			}
			return nil
		},
	}
	r, err := lsq.Fit(context.Background(), p, lsq.Settings{})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(r.Status)
	fmt.Printf("b1 = %.6f ± %.6f\n", r.Values[0], r.U[0])
	fmt.Printf("b2 = %.8e ± %.5e\n", r.Values[1], r.U[1])
	fmt.Printf("residual sum of squares %.8f, %d degrees of freedom\n", r.RSS, r.DOF)
	for _, w := range r.Warnings {
		fmt.Println(w)
	}
	// Output:
	// converged
	// b1 = 238.942129 ± 2.707008
	// b2 = 5.50156432e-04 ± 7.26687e-06
	// residual sum of squares 0.12455139, 12 degrees of freedom
	// the readings' uncertainty was not stated: it was taken from the residual standard deviation, so that chi-squared has no probability
}

// Pearson's points with York's weights: York et al., Am. J. Phys. 72 (2004) 367,
// give a = 5.47991 ± 0.29497 and b = −0.480533 ± 0.057985.
func ExampleLine() {
	wx := []float64{1000, 1000, 500, 800, 200, 80, 60, 20, 1.8, 1}
	wy := []float64{1, 1.8, 4, 8, 20, 20, 70, 70, 100, 500}
	d := &lsq.LineData{
		X: []float64{0, 0.9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4},
		Y: []float64{5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5},
	}
	for i := range wx {
		d.UX = append(d.UX, rsqrt(wx[i]))
		d.UY = append(d.UY, rsqrt(wy[i]))
	}
	r, err := lsq.Line(d)
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("a = %.5f ± %.5f, b = %.6f ± %.6f, Birge ratio %.4f\n", r.Intercept, r.UIntercept, r.Slope, r.USlope, r.BirgeRatio)
	// Output:
	// a = 5.47991 ± 0.29497, b = -0.480533 ± 0.057985, Birge ratio 1.2179
}

// Two factors that only enter as a product can't be told apart; a prior on one
// of them settles it.
func ExampleResult_confounded() {
	p := &lsq.Problem{
		Parameters: []lsq.Parameter{{Name: "gain", Start: 1}, {Name: "area", Start: 2}},
		Y:          []float64{2.1, 3.9, 6.2, 7.8},
		U:          []float64{0.1, 0.1, 0.1, 0.1},
		Eval: func(b, f []float64, jac [][]float64) error {
			for i := range f {
				x := float64(i + 1)
				f[i] = b[0] * b[1] * x
				if jac != nil {
					jac[0][i], jac[1][i] = b[1]*x, b[0]*x
				}
			}
			return nil
		},
	}
	r, _ := lsq.Fit(context.Background(), p, lsq.Settings{})
	fmt.Println(r.Status, r.U[0])
	fmt.Println(r.Confounded[0])
	p.Parameters[1].Prior = &lsq.Prior{Value: 2, U: 0.01}
	r, _ = lsq.Fit(context.Background(), p, lsq.Settings{})
	fmt.Printf("%s: gain = %.4f ± %.4f\n", r.Status, r.Values[0], r.U[0])
	// Output:
	// singular NaN
	// gain and area can't be told apart: changing gain by +1 % and area by -1 % together leaves the fit as it is
	// converged: gain = 0.9950 ± 0.0104
}

// A gain shared by two groups of readings is an effect, not noise: it does not
// average out.
func ExampleEffects() {
	y := []float64{10.1, 9.9, 10.0, 10.2, 9.8}
	p := &lsq.Problem{
		Parameters: []lsq.Parameter{{Name: "mean", Start: 0}},
		Y:          y,
		U:          []float64{0.1, 0.1, 0.1, 0.1, 0.1},
		Linear:     true,
		Eval: func(b, f []float64, jac [][]float64) error {
			for i := range f {
				f[i] = b[0]
				if jac != nil {
					jac[0][i] = 1
				}
			}
			return nil
		},
	}
	r, _ := lsq.Fit(context.Background(), p, lsq.Settings{})
	fmt.Printf("independent: %.3f ± %.3f\n", r.Values[0], r.U[0])
	p.Effects = &lsq.Effects{
		Columns: 1,
		Start:   []int32{0, 1, 2, 3, 4, 5},
		Column:  []int32{0, 0, 0, 0, 0},
		Load:    []float64{0.2, 0.2, 0.2, 0.2, 0.2},
	}
	r, _ = lsq.Fit(context.Background(), p, lsq.Settings{})
	fmt.Printf("with a shared error of 0.2: %.3f ± %.3f\n", r.Values[0], r.U[0])
	// Output:
	// independent: 10.000 ± 0.045
	// with a shared error of 0.2: 10.000 ± 0.205
}
