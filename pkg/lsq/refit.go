package lsq

import "errors"

var errTodo = errors.New("lsq: not built yet")

// Refitter repeats a fit for other readings with the weights frozen.
type Refitter struct{}

// NewRefitter returns a Refitter at the weights of r.
func (r *Result) NewRefitter() *Refitter { return &Refitter{} }

// Fit estimates the parameters for readings y.
func (w *Refitter) Fit(y []float64, priors []float64, eval func(theta, f []float64, jac [][]float64) error, theta []float64) (iterations int, err error) {
	return 0, errTodo
}
