package assess

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// worstCondition is the condition number of a correlation matrix above which
// fewer than about four digits of a generalised mean can be trusted.
const worstCondition = 1e12

// covariance returns the covariance matrix of results (all in one unit) and its
// Cholesky factor. given nil: independent. It refuses a matrix that isn't that
// of these results or isn't positive definite.
func covariance(results []Result, given *mat.SymDense) (*mat.SymDense, *mat.Cholesky, error) {
	n := len(results)
	v := mat.NewSymDense(n, nil)
	if given == nil {
		for i, r := range results {
			v.SetSym(i, i, r.U*r.U)
		}
	} else {
		if given.SymmetricDim() != n {
			return nil, nil, fmt.Errorf("the covariance matrix is %d×%d for %d results", given.SymmetricDim(), given.SymmetricDim(), n)
		}
		for i, r := range results {
			if d := given.At(i, i); !(math.Abs(d-r.U*r.U) <= 1e-6*r.U*r.U) {
				return nil, nil, fmt.Errorf("the covariance matrix has variance %v for %s, whose standard uncertainty %v squared is %v", d, r.label(), r.U, r.U*r.U)
			}
		}
		v.CopySym(given)
	}
	// factorise the correlation matrix: its condition is free of the units
	corr := mat.NewSymDense(n, nil)
	for i := range n {
		for j := range i + 1 {
			c := v.At(i, j) / (math.Sqrt(v.At(i, i)) * math.Sqrt(v.At(j, j)))
			if math.IsNaN(c) || math.IsInf(c, 0) {
				return nil, nil, fmt.Errorf("the covariance of %s and %s is %v", results[i].label(), results[j].label(), v.At(i, j))
			}
			corr.SetSym(i, j, c)
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(corr) || chol.Cond() > worstCondition {
		var eig mat.EigenSym
		eig.Factorize(corr, false)
		return nil, nil, fmt.Errorf("the correlation matrix of the results is not positive definite (smallest eigenvalue %.3g): some covariances are too large for the uncertainties, or results are fully correlated", eig.Values(nil)[0])
	}
	return v, &chol, nil
}
