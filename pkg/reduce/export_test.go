package reduce

import (
	"context"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/lsq"
)

// Chain lets benchmarks take the steps of a reduction one by one.
type Chain struct {
	c *chain
	r *lsq.Result
	k *carried
}

// NewChain prepares and fits a bench.
func NewChain(b *bench.Bench) (*Chain, error) {
	c, err := newChain(b)
	if err != nil {
		return nil, err
	}
	r, err := c.estimate(context.Background())
	if err != nil {
		return nil, err
	}
	k, err := c.carry(r)
	return &Chain{c, r, k}, err
}

// Fit fits once.
func (c *Chain) Fit() error {
	_, err := c.c.estimate(context.Background())
	return err
}

// Budget carries the shared inputs and states the measurands.
func (c *Chain) Budget() error {
	k, err := c.c.carry(c.r)
	if err != nil {
		return err
	}
	_, _, _, err = c.c.measurands(k, 0.9545)
	return err
}

// Trials repeats the chain.
func (c *Chain) Trials(n int) error {
	_, _, err := c.c.trials(context.Background(), c.r, c.k, 0, n)
	return err
}
