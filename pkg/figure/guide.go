package figure

import (
	"math"
	"sort"

	"gonum.org/v1/gonum/interp"
	"gonum.org/v1/gonum/mat"
)

// guide returns a smooth line through fitted values against x: a polynomial or
// a power law where one of few terms passes through all of them (a force goes as
// the square of a voltage, as the inverse square of a gap), else the monotone
// cubic of Fritsch and Butland (1984), which can't overshoot. ok is false where x
// alone does not tell the fitted values apart.
func guide(x, f []float64, skip []bool, s *scale) (cx, cy []float64, ok bool) {
	kx, ky, height, ok := knots(x, f, skip)
	if !ok {
		return nil, nil, false
	}
	predict := shape(kx, ky, 1e-3*height)
	if predict == nil {
		var fb interp.FritschButland
		if err := fb.Fit(kx, ky); err != nil {
			return nil, nil, false // the caller draws no line and mentions none
		}
		predict = fb.Predict
	}
	const steps = 120
	for i := 0; i <= steps; i++ {
		t := kx[0] + (kx[len(kx)-1]-kx[0])*float64(i)/steps
		if s.log {
			t = kx[0] * math.Pow(kx[len(kx)-1]/kx[0], float64(i)/steps)
		}
		t = clamp(t, kx[0], kx[len(kx)-1])
		cx, cy = append(cx, t), append(cy, predict(t))
	}
	return cx, cy, true
}

// plain reports whether fitted values lie within a thirtieth of their height of a
// polynomial or power law of few terms. A line through others may be an accident of
// the settings chosen, such as a staircase of two gaps taken for one.
func plain(x, f []float64, skip []bool) bool {
	kx, ky, height, ok := knots(x, f, skip)
	return ok && shape(kx, ky, height/30) != nil
}

// knots are the points that a line through fitted values has to pass; height is the
// range of these. ok is false where x alone does not tell the fitted values apart.
func knots(x, f []float64, skip []bool) (kx, ky []float64, height float64, ok bool) {
	type point struct{ x, y float64 }
	var pts []point
	var span spanner
	for i := range x {
		if !skip[i] && finite(x[i], f[i]) {
			pts = append(pts, point{x[i], f[i]})
			span.add(f[i])
		}
	}
	if len(pts) < 2 {
		return nil, nil, 0, false
	}
	sort.SliceStable(pts, func(a, b int) bool { return pts[a].x < pts[b].x })
	// Readings at nearly one x become one point.
	near := 0.01 * (pts[len(pts)-1].x - pts[0].x)
	worst := 0.0
	for i := 0; i < len(pts); {
		j, mx, my := i, 0.0, 0.0
		for j < len(pts) && pts[j].x-pts[i].x <= near {
			mx += pts[j].x
			my += pts[j].y
			j++
		}
		n := float64(j - i)
		mx, my = mx/n, my/n
		for k := i; k < j; k++ {
			worst = math.Max(worst, math.Abs(pts[k].y-my))
		}
		kx, ky = append(kx, mx), append(ky, my)
		i = j
	}
	height = span.hi - span.lo
	if worst > 0.03*height || len(kx) < 2 {
		return nil, nil, 0, false
	}
	return kx, ky, height, true
}

// shape finds a polynomial of degree one or two, in x or between logarithms,
// that passes all points within a tolerance, with at least one point to spare; nil
// when there is none.
func shape(x, y []float64, within float64) func(float64) float64 {
	same := func(v float64) float64 { return v }
	positive := true
	for i := range x {
		positive = positive && x[i] > 0 && y[i] > 0
	}
	for degree := 1; degree <= 2; degree++ {
		for _, logs := range []bool{false, true} {
			if logs && !positive || len(x) < degree+2 {
				continue
			}
			in, out := same, same
			if logs {
				in, out = math.Log, math.Exp
			}
			// Scaled to ±1 so that powers of x stay tame.
			lo, hi := in(x[0]), in(x[len(x)-1])
			unit := func(v float64) float64 { return (2*in(v) - lo - hi) / (hi - lo) }
			a := mat.NewDense(len(x), degree+1, nil)
			b := mat.NewVecDense(len(x), nil)
			for i := range x {
				p := 1.0
				for k := 0; k <= degree; k++ {
					a.Set(i, k, p)
					p *= unit(x[i])
				}
				if logs {
					b.SetVec(i, math.Log(y[i]))
				} else {
					b.SetVec(i, y[i])
				}
			}
			var c mat.VecDense
			if err := c.SolveVec(a, b); err != nil {
				continue // collinear: another shape may do
			}
			f := func(v float64) float64 {
				t, p, sum := unit(v), 1.0, 0.0
				for k := 0; k <= degree; k++ {
					sum += c.AtVec(k) * p
					p *= t
				}
				return out(sum)
			}
			good := true
			for i := range x {
				good = good && math.Abs(f(x[i])-y[i]) <= within
			}
			if good {
				return f
			}
		}
	}
	return nil
}
