package lsq

import (
	"fmt"
	"math"
)

// LineData are points of a straight line y = a + b·x with errors in both axes.
type LineData struct {
	X, Y   []float64 // readings, any units
	UX, UY []float64 // their standard uncertainties; nil or an element 0: exact, but not both of a point
	R      []float64 // correlation of the errors of x and y of each point; nil: none
}

// LineResult is a fitted straight line.
type LineResult struct {
	Intercept, Slope   float64
	UIntercept, USlope float64 // standard uncertainties, not scaled by residuals
	Covariance         float64 // of intercept and slope
	ChiSquared         float64
	PValue             float64 // NaN without degrees of freedom
	BirgeRatio         float64 // NaN without degrees of freedom
	DOF                int
	Iterations         int
	X, Y               []float64 // adjusted points, on the line
}

// LineFitter fits straight lines one after another without allocating. Its zero
// value is ready. It is for one goroutine.
type LineFitter struct {
	vx, vy, vc, w, beta []float64
}

// Line fits a straight line to points with errors in both axes, correlated or
// not: the maximum-likelihood line of York, Evensen, López Martínez, De Basabe
// Delgado, Am. J. Phys. 72 (2004) 367, section III, with the standard errors of
// its equations (11) and (12) at the adjusted points.
func Line(d *LineData) (*LineResult, error) {
	var f LineFitter
	r := &LineResult{X: make([]float64, len(d.X)), Y: make([]float64, len(d.X))}
	if err := f.Fit(d, r); err != nil {
		return nil, err
	}
	return r, nil
}

// Fit fits a line as Line does and writes it to r; adjusted points only when
// r.X and r.Y have the length of the data. On error r is not to be used.
func (f *LineFitter) Fit(d *LineData, r *LineResult) error {
	n := len(d.X)
	if err := d.check(); err != nil {
		return err
	}
	if cap(f.w) < n {
		slab := make([]float64, 5*n)
		f.vx, f.vy, f.vc, f.w, f.beta = slab[:n:n], slab[n:2*n:2*n], slab[2*n:3*n:3*n], slab[3*n:4*n:4*n], slab[4*n:]
	}
	x, y := d.X, d.Y[:n]
	vx, vy, vc, w := f.vx[:n], f.vy[:n], f.vc[:n], f.w[:n]
	clear(vx)
	clear(vy)
	clear(vc)
	for i, u := range d.UX {
		vx[i] = u * u
	}
	for i, u := range d.UY {
		vy[i] = u * u
	}
	for i, c := range d.R {
		vc[i] = c * d.UX[i] * d.UY[i]
	}
	// first slope: of the unweighted line
	x0, y0 := 0.0, 0.0
	for i, v := range x {
		x0 += v
		y0 += y[i]
	}
	x0 /= float64(n)
	y0 /= float64(n)
	sxx, sxy := 0.0, 0.0
	for i, v := range x {
		sxx += (v - x0) * (v - x0)
		sxy += (v - x0) * (y[i] - y0)
	}
	if sxx == 0 {
		return fmt.Errorf("lsq: all predictors of the line are %v; a slope needs at least two different ones", x[0])
	}
	b := sxy / sxx
	// York's fixed-point iteration, accelerated by the secant method on
	// next(b) − b.
	prevB, prevG := 0.0, 0.0
	var sw, xm, ym float64
	converged := false
	for it := 1; it <= 200; it++ {
		r.Iterations = it
		var next float64
		next, sw, xm, ym = f.next(x, y, b)
		if math.IsNaN(next) || math.IsInf(next, 0) {
			return fmt.Errorf("lsq: the slope of the line overflows: the points lie on a vertical line within their uncertainties; exchange the axes")
		}
		g := next - b
		step := g
		if it > 1 && g != prevG {
			if s := -g * (b - prevB) / (g - prevG); math.Abs(s) <= 10*math.Abs(g) && math.Abs(s) >= 0.1*math.Abs(g) {
				step = s
			}
		}
		prevB, prevG = b, g
		b += step
		if math.Abs(step) <= 1e-13*math.Abs(b) || g == 0 {
			// weights and means belong to the slope before this step
			converged = true
			break
		}
	}
	if !converged {
		return fmt.Errorf("lsq: the line did not converge in %d iterations; the points do not define a slope within their uncertainties", r.Iterations)
	}
	beta := f.beta[:n]
	a := ym - b*xm
	// adjusted x are xm + β (York 2004, eq. 13 and following)
	mean := 0.0
	for i, v := range beta {
		mean += w[i] * v
	}
	mean /= sw
	sbb, chi := 0.0, 0.0
	for i, v := range beta {
		u := v - mean
		sbb += w[i] * u * u
		e := y[i] - a - b*x[i]
		chi += w[i] * e * e
	}
	xbar := xm + mean
	vb := 1 / sbb
	r.Intercept, r.Slope = a, b
	r.USlope = math.Sqrt(vb)
	r.UIntercept = math.Sqrt(1/sw + xbar*xbar*vb)
	r.Covariance = -xbar * vb
	r.ChiSquared = chi
	r.DOF = n - 2
	r.PValue, r.BirgeRatio = math.NaN(), math.NaN()
	if r.DOF > 0 {
		r.BirgeRatio = math.Sqrt(chi / float64(r.DOF))
		r.PValue = chiSquaredTail(chi, r.DOF)
	}
	if len(r.X) == n && len(r.Y) == n {
		for i, v := range beta {
			r.X[i] = xm + v
			r.Y[i] = a + b*r.X[i]
		}
	}
	return nil
}

// next computes weights at slope b, the weighted means, β of each point and the
// next slope (York 2004, eqs. 13b and 14).
func (f *LineFitter) next(x, y []float64, b float64) (slope, sw, xm, ym float64) {
	n := len(x)
	y = y[:n]
	vx, vy, vc, w, beta := f.vx[:n], f.vy[:n], f.vc[:n], f.w[:n], f.beta[:n]
	var sx, sy float64
	for i, v := range x {
		q := 1 / (vy[i] + b*(b*vx[i]-2*vc[i]))
		w[i] = q
		sw += q
		sx += q * v
		sy += q * y[i]
	}
	xm, ym = sx/sw, sy/sw
	var up, down float64
	for i, q := range w {
		u, v := x[i]-xm, y[i]-ym
		t := q * (u*(vy[i]-b*vc[i]) + v*(b*vx[i]-vc[i]))
		beta[i] = t
		up += q * t * v
		down += q * t * u
	}
	return up / down, sw, xm, ym
}

func (d *LineData) check() error {
	n := len(d.X)
	if n < 2 {
		return fmt.Errorf("lsq: a line needs at least 2 points, there are %d", n)
	}
	if len(d.Y) != n || (d.UX != nil && len(d.UX) != n) || (d.UY != nil && len(d.UY) != n) || (d.R != nil && len(d.R) != n) {
		return fmt.Errorf("lsq: the line has %d x, %d y, %d and %d uncertainties, %d correlations; all must be as many (or nil)", n, len(d.Y), len(d.UX), len(d.UY), len(d.R))
	}
	if d.R != nil && (d.UX == nil || d.UY == nil) {
		return fmt.Errorf("lsq: correlations of x and y need the uncertainties of both")
	}
	if i := notFinite(d.X); i >= 0 {
		return fmt.Errorf("lsq: x of point %d is %v; it must be finite", i+1, d.X[i])
	}
	if i := notFinite(d.Y); i >= 0 {
		return fmt.Errorf("lsq: y of point %d is %v; it must be finite", i+1, d.Y[i])
	}
	for i := 0; i < n; i++ {
		ux, uy := 0.0, 0.0
		if d.UX != nil {
			ux = d.UX[i]
		}
		if d.UY != nil {
			uy = d.UY[i]
		}
		if !(ux >= 0) || !(uy >= 0) || ux > math.MaxFloat64 || uy > math.MaxFloat64 || ux+uy == 0 {
			return fmt.Errorf("lsq: standard uncertainties of point %d are %v and %v; they must be finite, not negative and not both zero", i+1, ux, uy)
		}
		if d.R != nil && !(math.Abs(d.R[i]) < 1) {
			return fmt.Errorf("lsq: correlation of point %d is %v; it must lie between −1 and 1", i+1, d.R[i])
		}
	}
	return nil
}
