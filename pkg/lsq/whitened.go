package lsq

import "math"

// Whitened returns W(y − f), one entry a reading, with WᵀW = Σ⁻¹: for a right
// model and right uncertainties they are independent with unit variance, save
// for the few degrees of freedom that the parameters took. Tests of randomness
// and normality want these where readings share errors; for independent readings
// they are the standardised residuals.
func (r *Result) Whitened() []float64 {
	v := append([]float64(nil), r.Residuals...)
	r.white.apply(v)
	if r.scale != 1 {
		s := 1 / math.Sqrt(r.scale)
		for i := range v {
			v[i] *= s
		}
	}
	return v
}
