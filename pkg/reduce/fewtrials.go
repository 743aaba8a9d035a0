package reduce

import (
	"errors"
	"fmt"
	"math"

	"example.org/guardring/pkg/si"
)

// TooFew reports whether the trials are fewer than JCGM 101:2008 7.9.4 recommends
// for the coverage probability p, 100/(1−p), so that under 50 lie beyond each end
// of the interval: its ends are then too uncertain to judge the law by.
func (m *MonteCarlo) TooFew(p float64) bool {
	return float64(m.Trials-m.Failed) < 100/(1-p)*(1-1e-9)
}

// disagrees words the difference between law and Monte Carlo.
func (m *MonteCarlo) disagrees(p float64) error {
	if m.TooFew(p) {
		return fmt.Errorf("the law of propagation and Monte Carlo differ by more than the tolerance of JCGM 101 clause 8, but so few trials can't tell: ask for %.0f or more for an interval of %s (JCGM 101 7.9.4)",
			math.Ceil(100/(1-p)*(1-1e-9)), si.Percent(p))
	}
	return errors.New("the law of propagation and Monte Carlo differ by more than the tolerance of JCGM 101 clause 8: use the Monte Carlo interval")
}
