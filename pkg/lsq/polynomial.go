package lsq

import (
	"context"
	"fmt"
)

// Polynomial fits y = Σ b_k x^k, k = 0 … degree, to readings y with standard
// uncertainties u (nil: unknown and equal). Powers of x are formed and the fit
// is done in extended precision, so that even a badly conditioned polynomial
// keeps its digits. Parameters are named b0, b1, …
func Polynomial(ctx context.Context, x, y, u []float64, degree int, s Settings) (*Result, error) {
	if degree < 0 {
		return nil, fmt.Errorf("lsq: a polynomial can't have the degree %d", degree)
	}
	if len(x) != len(y) {
		return nil, fmt.Errorf("lsq: %d predictors for %d readings of the polynomial", len(x), len(y))
	}
	if i := notFinite(x); i >= 0 {
		return nil, fmt.Errorf("lsq: predictor %d of the polynomial is %v; it must be finite", i+1, x[i])
	}
	p := &Problem{Y: y, U: u, Linear: true}
	for k := 0; k <= degree; k++ {
		p.Parameters = append(p.Parameters, Parameter{Name: fmt.Sprintf("b%d", k)})
	}
	p.Eval = func(b, f []float64, jac [][]float64) error {
		for i, v := range x {
			sum := 0.0
			for k := degree; k >= 0; k-- {
				sum = sum*v + b[k]
			}
			f[i] = sum
			if jac != nil {
				q := 1.0
				for k := range jac {
					jac[k][i] = q
					q *= v
				}
			}
		}
		return nil
	}
	p.powers = func(cols [][]wide) {
		for i, v := range x {
			q := wide{1, 0}
			for k := range cols {
				cols[k][i] = q
				q = q.mul(wide{v, 0})
			}
		}
	}
	return Fit(ctx, p, s)
}
