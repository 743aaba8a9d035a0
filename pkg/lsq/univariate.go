package lsq

import (
	"fmt"
	"math"
)

// Summary describes readings of one quantity.
type Summary struct {
	N               int
	Mean            float64 // unit of the readings
	SD              float64 // standard deviation, divisor N − 1; NaN for one reading
	Autocorrelation float64 // at lag 1; NaN when all readings are equal
}

// Summarise computes mean, standard deviation and lag-1 autocorrelation
// Σ(y_i − m)(y_{i+1} − m)/Σ(y_i − m)² (NIST/SEMATECH e-Handbook of Statistical
// Methods, section 1.3.5.12). Sums are kept in twice the working precision, so
// that the results are as good as the readings' own rounding.
func Summarise(y []float64) (Summary, error) {
	n := len(y)
	if n == 0 {
		return Summary{}, fmt.Errorf("lsq: there are no readings to summarise")
	}
	if i := notFinite(y); i >= 0 {
		return Summary{}, fmt.Errorf("lsq: reading %d is %v; a reading must be finite", i+1, y[i])
	}
	var sum wide
	for _, v := range y {
		sum = sum.add(wide{v, 0})
	}
	mean := sum.div(wide{float64(n), 0})
	var ss, lag, last wide
	for i, v := range y {
		d := wide{v, 0}.sub(mean)
		ss = ss.add(d.mul(d))
		if i > 0 {
			lag = lag.add(d.mul(last))
		}
		last = d
	}
	s := Summary{N: n, Mean: mean.float(), SD: math.NaN(), Autocorrelation: math.NaN()}
	if n > 1 {
		s.SD = ss.div(wide{float64(n - 1), 0}).sqrt().float()
	}
	if ss.hi > 0 {
		s.Autocorrelation = lag.div(ss).float()
	}
	return s, nil
}
