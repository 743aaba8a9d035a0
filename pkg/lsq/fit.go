package lsq

import (
	"context"
	"errors"
)

var errTodo = errors.New("lsq: not built yet")

// Fit adjusts the free parameters of p to its readings.
func Fit(ctx context.Context, p *Problem, s Settings) (*Result, error) { return nil, errTodo }

// SolveCovariance sets dst = Σ⁻¹ v at the final weights.
func (r *Result) SolveCovariance(v, dst []float64) {}

// Jacobian returns ∂f_i/∂θ_j at the estimates, one column per free parameter.
func (r *Result) Jacobian() [][]float64 { return nil }

// Sensitivity returns ∂θ/∂y, one row per free parameter.
func (r *Result) Sensitivity() [][]float64 { return nil }

// PriorSensitivity returns ∂θ/∂(prior value): one row per free parameter, one column per parameter of the problem (zero without prior).
func (r *Result) PriorSensitivity() [][]float64 { return nil }

// Refitter repeats a fit for other readings with the weights frozen.
type Refitter struct{}

// NewRefitter returns a Refitter at the weights of r.
func (r *Result) NewRefitter() *Refitter { return &Refitter{} }

// Fit estimates the parameters for readings y.
func (w *Refitter) Fit(y []float64, priors []float64, eval func(theta, f []float64, jac [][]float64) error, theta []float64) (iterations int, err error) {
	return 0, errTodo
}
