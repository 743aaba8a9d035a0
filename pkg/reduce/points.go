package reduce

import (
	"math"
	"sort"

	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/lsq"
)

// levelWidth is the relative width within which levels are one point: set
// points that were set again.
const levelWidth = 0.03

// seriesRecords states, for a kind with a curve, every series point by point.
func (c *chain) seriesRecords(fit *lsq.Result, k *carried, p float64) ([]Series, error) {
	curve := c.one.Curve
	if curve == nil {
		return nil, nil
	}
	names := []string{""}
	if c.series != nil {
		names = c.series.names
	}
	level := make([]float64, len(c.record))
	x := make([]float64, len(c.pred))
	for i := range level {
		for p := range c.pred {
			x[p] = c.x[p][i]
		}
		level[i] = curve.LevelOf(c.scalarsOf(k.q, c.seriesOfRow(i)), x)
	}
	var out []Series
	for n, name := range names {
		var rows []int
		for i := range c.record {
			if c.seriesOfRow(i) == n {
				rows = append(rows, i)
			}
		}
		s := Series{Name: name, Result: curve.Name, Unit: siSymbol(curve.Unit), Level: curve.Level, LevelUnit: siSymbol(curve.LevelUnit)}
		q := c.scalarsOf(k.q, n)
		if curve.FullScale != "" {
			if v := q[c.kind.Scalar(curve.FullScale)]; v > 0 {
				s.FullScale = Number(v)
			}
		}
		points := c.cluster(rows, level)
		for _, at := range points {
			pt, err := c.point(n, at, level, fit, k, p)
			if err != nil {
				return nil, err
			}
			s.Points = append(s.Points, *pt)
		}
		if !(s.FullScale > 0) {
			for _, pt := range s.Points {
				s.FullScale = Number(math.Max(float64(s.FullScale), math.Abs(float64(pt.Indication))))
			}
		}
		c.scatter(&s, points, fit)
		s.Effects = c.effectsOf(rows, level, fit)
		out = append(out, s)
	}
	return out, nil
}

// seriesOfRow is the series of row i.
func (c *chain) seriesOfRow(i int) int {
	if c.series == nil {
		return 0
	}
	return c.series.of[c.record[i]]
}

// scalarsOf is the scalars of series n in the kind's order.
func (c *chain) scalarsOf(q []float64, n int) []float64 {
	if c.series == nil {
		return q
	}
	return view(c.series, n, q)
}

// cluster groups rows whose levels are the same set point, in ascending order.
func (c *chain) cluster(rows []int, level []float64) [][]int {
	order := append([]int(nil), rows...)
	sort.SliceStable(order, func(a, b int) bool { return level[order[a]] < level[order[b]] })
	var out [][]int
	for _, i := range order {
		if n := len(out); n > 0 {
			first := level[out[n-1][0]]
			if math.Abs(level[i]-first) <= levelWidth*math.Max(math.Abs(first), math.Abs(level[i])) {
				out[n-1] = append(out[n-1], i)
				continue
			}
		}
		out = append(out, []int{i})
	}
	return out
}

// point states the result at the mean level of some rows.
func (c *chain) point(n int, rows []int, level []float64, fit *lsq.Result, k *carried, p float64) (*Point, error) {
	curve := c.one.Curve
	g, o := gainOffset(&c.b.Channels[c.resp])
	var mean, y, f float64
	for _, i := range rows {
		mean += level[i]
		y += g*c.y[i] + o
		f += g*fit.Fitted[i] + o
	}
	m := float64(len(rows))
	mean, y, f = mean/m, y/m, f/m
	value, byTheta, bySh := c.sensitivities(func(q []jet.Jet) jet.Jet {
		if c.series != nil {
			q = view(c.series, n, q)
		}
		return curve.Value(q, jet.Const(mean))
	}, k.q)
	l, err := c.law(k, value, byTheta, bySh, p)
	if err != nil {
		return nil, err
	}
	observed := l.Value * y / f
	if curve.Inverse {
		observed = l.Value * f / y
	}
	return &Point{Level: Number(mean), Rows: len(rows), Indication: Number(y), Fitted: Number(f),
		Observed: Number(observed), Value: Number(l.Value), U: Number(l.U), K: Number(l.K), Expanded: Number(l.K * l.U)}, nil
}

// scatter fills non-linearity, repeatability and reproducibility of a series.
// The mounting of a row is its word in the row column "mount".
func (c *chain) scatter(s *Series, points [][]int, fit *lsq.Result) {
	mounts := c.b.Rows.Labels["mount"]
	mountOf := func(i int) int {
		if mounts == nil {
			return 0
		}
		return int(mounts.Index[c.record[i]])
	}
	for _, pt := range s.Points {
		d := math.Abs(float64(pt.Indication-pt.Fitted)) / float64(s.FullScale)
		s.NonLinearity = Number(math.Max(float64(s.NonLinearity), d))
	}
	var ss float64
	mean := map[int][2]float64{} // of the relative residuals of a mounting: sum, count
	var order []int
	for _, rows := range points {
		cells := map[int][]float64{}
		var keys []int
		for _, i := range rows {
			if fit.Fitted[i] == 0 {
				continue
			}
			r := fit.Residuals[i] / math.Abs(fit.Fitted[i])
			m := mountOf(i)
			if cells[m] == nil {
				keys = append(keys, m)
			}
			cells[m] = append(cells[m], r)
			if _, ok := mean[m]; !ok {
				order = append(order, m)
			}
			v := mean[m]
			mean[m] = [2]float64{v[0] + r, v[1] + 1}
		}
		for _, m := range keys {
			v := cells[m]
			var a float64
			for _, r := range v {
				a += r / float64(len(v))
			}
			for _, r := range v {
				ss += (r - a) * (r - a)
			}
			s.RepeatabilityDOF += len(v) - 1
		}
	}
	s.Repeatability, s.Reproducibility = Number(math.NaN()), Number(math.NaN())
	if s.RepeatabilityDOF > 0 {
		s.Repeatability = Number(math.Sqrt(ss / float64(s.RepeatabilityDOF)))
	}
	s.Mountings = len(order)
	if len(order) > 1 {
		var all, v float64
		for _, m := range order {
			all += mean[m][0] / mean[m][1] / float64(len(order))
		}
		for _, m := range order {
			d := mean[m][0]/mean[m][1] - all
			v += d * d
		}
		s.Reproducibility = Number(math.Sqrt(v / float64(len(order)-1)))
	}
}

// effectsOf estimates what could set the readings of a series apart from the
// model, each by itself: the factor a of a response f(1 + a·h) with h of known
// form, with the standard uncertainty that the covariance of the readings gives
// and a two-sided normal test of zero. The form is taken free of what the
// parameters can follow (score test, as for the causes).
func (c *chain) effectsOf(rows []int, level []float64, fit *lsq.Result) []Effect {
	top := 0.0
	for _, i := range rows {
		top = math.Max(top, math.Abs(level[i]))
	}
	direction := c.b.Rows.Labels["direction"]
	forms := []struct {
		name, doc string
		h         func(i int) float64
	}{
		{"polarity asymmetry", "half the relative difference between positive and negative fields",
			func(i int) float64 { return math.Copysign(1, level[i]) }},
		{"curvature", "relative change of the response from zero to full field",
			func(i int) float64 { return math.Abs(level[i])/top - 0.5 }},
		{"hysteresis", "half the relative difference between rising and falling steps",
			func(i int) float64 {
				if direction == nil {
					return 0
				}
				switch direction.At(c.record[i]) {
				case "up":
					return 1
				case "down":
					return -1
				}
				return 0
			}},
		{"spacing", "relative difference of the response for a doubling of the spacing",
			func(i int) float64 {
				if c.spacingOf() < 0 {
					return 0
				}
				return math.Log2(c.x[c.spacingOf()][i])
			}},
	}
	var out []Effect
	for _, form := range forms {
		g := make([]float64, len(c.record))
		first, varies := 0.0, false
		for n, i := range rows {
			h := form.h(i)
			if n == 0 {
				first = h
			}
			varies = varies || h != first
			g[i] = h * fit.Fitted[i]
		}
		if !varies {
			continue
		}
		num, den, whole := c.score(g, fit)
		if !(den > 1e-6*whole) {
			continue // the parameters follow it, or it is not in these readings
		}
		u := 1 / math.Sqrt(den)
		p := math.Erfc(math.Abs(num/den) / u / math.Sqrt2)
		out = append(out, Effect{Name: form.name, Doc: form.doc, Estimate: Number(num / den), U: Number(u), PValue: Number(p), Passed: p >= causeLevel})
	}
	return out
}

// spacingOf is the predictor named gap or distance, or −1.
func (c *chain) spacingOf() int {
	for p, name := range c.m.Predictors {
		if name == "gap" || name == "distance" {
			return p
		}
	}
	return -1
}

// score returns gᵀΣ⁻¹r, gᵀΣ⁻¹g − gᵀΣ⁻¹J A⁻¹ JᵀΣ⁻¹g, and gᵀΣ⁻¹g.
func (c *chain) score(g []float64, fit *lsq.Result) (num, den, whole float64) {
	sg := make([]float64, len(g))
	fit.SolveCovariance(g, sg)
	num, den = dot(sg, fit.Residuals), dot(sg, g)
	whole = den
	jac := fit.Jacobian()
	jg := make([]float64, len(jac))
	for j := range jac {
		jg[j] = dot(sg, jac[j])
	}
	for a := range jg {
		for b := range jg {
			den -= jg[a] * fit.Covariance.At(a, b) * jg[b]
		}
	}
	return num, den, whole
}
