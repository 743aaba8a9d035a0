package reduce

import (
	"context"
	"fmt"
	"math"

	"example.org/guardring/pkg/lsq"
)

// The methods of a fit.
const (
	leastSquares      = "least-squares"
	errorsInVariables = "errors-in-variables"
)

func (c *chain) method() string {
	if c.b.Method == errorsInVariables {
		return errorsInVariables
	}
	return leastSquares
}

// estimateInVariables fits with the true predictors estimated too: it minimises
//
//	(y − f(x̂, θ))ᵀ Σ_y⁻¹ (y − f(x̂, θ)) + Σ_ip (x_ip − x̂_ip)²/u_ip²
//
// over θ and x̂, where Σ_y holds everything but the independent errors of the
// predictors. At given x̂ the response y − f′(x̂)(x − x̂) has the covariance
// Σ = Σ_y + f′ diag(u²) f′ᵀ, and a fit with it gives θ; then x̂ = x + u² f′ λ with
// λ = Σ⁻¹ r (derived: the stationary point of the sum in x̂). Both alternate until
// x̂ stands still. The chain is left at x̂, where the later steps linearise.
//
// Effective variance differs from this in where f and f′ are taken: at the
// readings instead of the estimates of the true predictors.
func (c *chain) estimateInVariables(ctx context.Context) (*lsq.Result, error) {
	n := len(c.record)
	u2 := make([][]float64, len(c.pred)) // variance of the independent errors
	any := false
	for k := range c.comps {
		comp := &c.comps[k]
		if comp.on < 0 || comp.group != nil {
			continue
		}
		any = true
		if u2[comp.on] == nil {
			u2[comp.on] = make([]float64, n)
		}
		for i := range n {
			u := comp.u(i)
			u2[comp.on][i] += u * u
		}
	}
	if !any {
		c.warnings = append(c.warnings, fmt.Errorf("method = %q: no predictor has noise or resolution stated, so that it is the same as %q", errorsInVariables, leastSquares))
		return c.estimate(ctx)
	}
	c.readX, c.readY = c.x, c.y
	c.x = append([][]float64(nil), c.x...)
	c.xr = append([][]float64(nil), c.xr...)
	c.y = append([]float64(nil), c.y...)
	for p := range c.pred {
		c.x[p] = append([]float64(nil), c.x[p]...)
		c.xr[p] = append([]float64(nil), c.xr[p]...)
	}
	want := make([]bool, len(c.pred))
	for p := range want {
		want[p] = u2[p] != nil
	}
	q := append([]float64(nil), c.q...)
	lambda := make([]float64, n)
	const rounds = 50
	for round := 1; ; round++ {
		r, err := c.estimate(ctx)
		if err != nil || r.Status != lsq.Converged {
			return r, err
		}
		for k, f := range c.free {
			q[f] = r.Values[k]
		}
		r.SolveCovariance(r.Residuals, lambda)
		slope := c.slopes(q, want)
		var moved float64
		for p, ci := range c.pred {
			if u2[p] == nil {
				continue
			}
			g, o := gainOffset(&c.b.Channels[ci])
			for i := range n {
				if u2[p][i] == 0 {
					continue
				}
				x := c.readX[p][i] + u2[p][i]*slope[p][i]*lambda[i]
				moved = math.Max(moved, math.Abs(x-c.x[p][i])/math.Sqrt(u2[p][i]))
				c.x[p][i] = x
				c.xr[p][i] = (x - o) / g
			}
		}
		// The response as the next fit takes it, linear about the new x̂.
		slope = c.slopes(q, want)
		copy(c.y, c.readY)
		for p := range c.pred {
			if u2[p] == nil {
				continue
			}
			for i := range n {
				c.y[i] -= slope[p][i] * (c.readX[p][i] - c.x[p][i])
			}
		}
		copy(c.start, r.Values)
		if moved < 1e-9 {
			return r, nil
		}
		if round == rounds {
			c.warnings = append(c.warnings, fmt.Errorf("errors in variables: the true predictors still move by %.1g of their uncertainty after %d rounds", moved, rounds))
			return r, nil
		}
	}
}
