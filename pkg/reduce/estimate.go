package reduce

import (
	"context"
	"errors"
	"fmt"
	"math"
	"regexp"
	"strconv"
	"strings"

	"example.org/guardring/pkg/lsq"
)

// estimate fits the chain at its stated inputs.
func (c *chain) estimate(ctx context.Context) (*lsq.Result, error) {
	p := &lsq.Problem{Y: c.y, U: make([]float64, len(c.y)), Scratch: true}
	for k, f := range c.free {
		s := &c.b.Scalars[f]
		par := lsq.Parameter{Name: s.Name, Start: c.start[k]}
		if s.HasPrior {
			par.Prior = &lsq.Prior{Value: s.Dist.Value, U: s.Dist.U}
		}
		p.Parameters = append(p.Parameters, par)
	}
	q := append([]float64(nil), c.q...)
	at := func(theta []float64) []float64 {
		for k, f := range c.free {
			q[f] = theta[k]
		}
		return q
	}
	p.Eval = func(theta, f []float64, jac [][]float64) error {
		c.indication(at(theta), f, jac)
		return nil
	}
	p.Effects = c.effects()
	p.Reweight = func(theta, f, u []float64, e *lsq.Effects) error {
		c.reweight(at(theta), u, e)
		return c.weighable(u)
	}
	if !c.unknownNoise() {
		c.reweight(at(c.start), p.U, p.Effects)
		if err := c.weighable(p.U); err != nil {
			return nil, err
		}
		r, err := lsq.Fit(ctx, p, lsq.Settings{})
		p.U, p.Effects = nil, nil // the result carries the weights
		return r, err
	}
	r, err := c.estimateNoise(ctx, p, at)
	p.U, p.Effects = nil, nil
	return r, err
}

// rowError is an error that has its place already.
type rowError struct{ err error }

func (e *rowError) Error() string { return e.err.Error() }
func (e *rowError) Unwrap() error { return e.err }

// weighable finds the reading whose noise is no weight.
func (c *chain) weighable(u []float64) error {
	for i, v := range u {
		if v > 0 && v <= math.MaxFloat64 {
			continue
		}
		what := "can't be computed"
		switch {
		case v == 0:
			what = "vanishes there"
		case math.IsInf(v, 0):
			what = "is too large to compute with"
		}
		return &rowError{fmt.Errorf("%s: the standard uncertainty of the reading %s: look at what the row holds and at the noise, relative noise and resolution of the channels in bench.toml", c.place(c.record[i]), what)}
	}
	return nil
}

// nth finds which row an estimator's message is about.
var nth = regexp.MustCompile(`\breading (\d+)\b`)

// placed gives an estimator's error the place of its reading, else that of the bench.
func (c *chain) placed(err error) error {
	var row *rowError
	if errors.As(err, &row) {
		return row
	}
	if errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded) {
		return fmt.Errorf("%s: %w", c.b.Dir, err)
	}
	where, text := c.b.Dir, strings.TrimPrefix(err.Error(), "lsq: ")
	if m := nth.FindStringSubmatch(text); m != nil {
		if n, e := strconv.Atoi(m[1]); e == nil && n >= 1 && n <= len(c.record) {
			where, text = c.place(c.record[n-1]), strings.Replace(text, m[0], "the reading", 1)
		}
	}
	if strings.HasPrefix(text, where+":") { // said already
		return errors.New(text)
	}
	return fmt.Errorf("%s: %s", where, text)
}

// unknownNoise reports whether the noise of the response is to come from the
// residuals.
func (c *chain) unknownNoise() bool {
	for _, k := range c.comps {
		if k.unknown {
			return true
		}
	}
	return false
}

// estimateNoise fits with the noise of the response unknown: an ordinary fit
// gives a first value, which is adjusted until chi-squared of the readings
// equals their degrees of freedom. Without predictor noise and groups that is
// the familiar s² = RSS/(n − p).
func (c *chain) estimateNoise(ctx context.Context, p *lsq.Problem, at func([]float64) []float64) (*lsq.Result, error) {
	rough := *p
	rough.U, rough.Reweight, rough.Effects = nil, nil, nil
	r, err := lsq.Fit(ctx, &rough, lsq.Settings{})
	if err != nil {
		return nil, err
	}
	priors := 0
	for k := range p.Parameters {
		if p.Parameters[k].Prior != nil {
			priors++
		}
	}
	dof := len(c.y) + priors - len(p.Parameters)
	if dof < 1 {
		return nil, fmt.Errorf("noise from the residuals needs more readings than parameters; there are %d rows for %d parameters", len(c.y), len(p.Parameters))
	}
	c.scale = math.Sqrt(r.RSS / float64(dof))
	if !(c.scale > 0) || r.ResidualsVanish {
		return nil, fmt.Errorf("the residuals vanish, so they give no noise; state channels.%s.noise", c.m.Response)
	}
	// With any other noise in the covariance, chi-squared falls more slowly than
	// 1/scale²; the fixed point is still where it equals its expectation, or the
	// other noise alone already explains the scatter.
	const rounds = 50
	for round := range rounds {
		for k := range p.Parameters {
			p.Parameters[k].Start = r.Values[k]
		}
		c.reweight(at(r.Values), p.U, p.Effects)
		if err := c.weighable(p.U); err != nil {
			return nil, err
		}
		if r, err = lsq.Fit(ctx, p, lsq.Settings{}); err != nil {
			return nil, err
		}
		ratio := math.Sqrt(r.ChiSquared / float64(dof))
		if math.Abs(ratio-1) < 1e-9 {
			break
		}
		if round == rounds-1 {
			c.warnings = append(c.warnings, fmt.Errorf("the noise found from the residuals has not settled: the stated uncertainties of predictors and groups already explain the scatter"))
		}
		c.scale *= ratio
	}
	for k := range c.comps {
		if c.comps[k].unknown {
			c.comps[k].dof = float64(dof)
		}
	}
	c.warnings = append(c.warnings, fmt.Errorf("the noise of %s comes from the residuals (%d degrees of freedom): chi-squared cannot test the fit", c.m.Response, dof))
	return r, nil
}
