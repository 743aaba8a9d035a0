package gum

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// A Region is a joint coverage region of all outputs (JCGM 102:2011 7.7). Up to
// SelectionTrials its centre and shape are those of the trials; above, those of the
// pilot, and K is what makes the region hold its share of all trials.
type Region struct {
	Kind        string      // "ellipse": hyper-ellipsoid, 7.7.2; "rectangle": hyper-rectangle, 7.7.3
	Probability float64     // the share of the trials it holds
	Centre      []float64   // c, one for each output
	Shape       [][]float64 // V: {y: (y−c)ᵀV⁻¹(y−c) ≤ K²}, or {y: |y_j−c_j| ≤ K·√V_jj for all j}
	K           float64     // k_p, or k_q
}

// A metric measures how far outputs lie from a centre.
type metric struct {
	centre []float64
	shape  [][]float64 // covariance
	factor [][]float64 // inverse of its lower Cholesky factor, by row; nil when singular
	u      []float64
	d      []float64 // scratch
}

func newMetric(centre []float64, shape [][]float64) *metric {
	n := len(centre)
	m := &metric{centre: centre, shape: shape, u: make([]float64, n), d: make([]float64, n)}
	r := mat.NewSymDense(n, nil)
	ok := true
	for i := range n {
		m.u[i] = math.Sqrt(shape[i][i])
		ok = ok && m.u[i] > 0 && !math.IsInf(m.u[i], 1)
	}
	if !ok {
		return m
	}
	for i := range n {
		for j := range i + 1 {
			r.SetSym(i, j, shape[i][j]/(m.u[i]*m.u[j]))
		}
	}
	var c mat.Cholesky
	if !c.Factorize(r) || c.Cond() > 1e12 {
		return m
	}
	var l, inv mat.TriDense
	c.LTo(&l)
	if err := inv.InverseTri(&l); err != nil {
		return m
	}
	for i := range n {
		row := make([]float64, i+1)
		for j := range row {
			row[j] = inv.At(i, j) / m.u[j]
		}
		m.factor = append(m.factor, row)
	}
	return m
}

// distances returns the ellipse's and the rectangle's k of trial r; NaN for the
// ellipse of a singular shape.
func (m *metric) distances(y [][]float64, r int) (ellipse, rectangle float64) {
	for j, c := range m.centre {
		m.d[j] = y[j][r] - c
		if m.u[j] > 0 {
			rectangle = max(rectangle, math.Abs(m.d[j])/m.u[j])
		}
	}
	if m.factor == nil {
		return math.NaN(), rectangle
	}
	for _, row := range m.factor {
		var s float64
		for j, f := range row {
			s += f * m.d[j]
		}
		ellipse += s * s
	}
	return math.Sqrt(ellipse), rectangle
}

// regions returns the regions of the metric with the given coverage factors.
func (m *metric) regions(p, kp, kq float64) (regions []Region, warnings []error) {
	if m.factor != nil {
		regions = append(regions, Region{Kind: "ellipse", Probability: p, Centre: m.centre, Shape: m.shape, K: kp})
	} else {
		warnings = append(warnings, fmt.Errorf("the outputs depend on each other linearly: their covariance matrix is singular, and no ellipsoidal coverage region is stated"))
	}
	return append(regions, Region{Kind: "rectangle", Probability: p, Centre: m.centre, Shape: m.shape, K: kq}), warnings
}

// covarianceOfTrials returns means and covariance matrix of the trials y[output]
// in which all outputs are defined, and their number. Sums over a block are about the
// block's own means, joined by pairwise updates in order, as in Sample.combine.
func covarianceOfTrials(y [][]float64) (mean []float64, cov [][]float64, n int) {
	k := len(y)
	mean, cov = make([]float64, k), square(k)
	m, d := make([]float64, k), make([]float64, k)
	cols := make([][]float64, k)
	for from := 0; from < len(y[0]); from += BlockTrials {
		to := min(from+BlockTrials, len(y[0]))
		for j := range y {
			cols[j] = y[j][from:to]
		}
		finite := blockMeans(cols, m)
		if !finite {
			keepDefined(cols)
			blockMeans(cols, m)
		}
		b := len(cols[0])
		if b == 0 {
			continue
		}
		w := float64(n) * float64(b) / float64(n+b)
		for j := range cols {
			d[j] = m[j] - mean[j]
			for i := range j + 1 {
				mj, mi, ci := m[j], m[i], cols[i][:b]
				var s float64
				for r, v := range cols[j] {
					s += (v - mj) * (ci[r] - mi)
				}
				cov[j][i] += s + d[j]*d[i]*w
			}
		}
		for j := range mean {
			mean[j] += d[j] * float64(b) / float64(n+b)
		}
		n += b
	}
	for j := range cov {
		for i := range j + 1 {
			cov[j][i] /= float64(n - 1)
			cov[i][j] = cov[j][i]
		}
	}
	return mean, cov, n
}

// blockMeans fills m with the means of the columns and reports whether all are
// finite.
func blockMeans(cols [][]float64, m []float64) bool {
	finite := true
	for j, c := range cols {
		if len(c) == 0 {
			return true
		}
		var s float64
		for _, v := range c {
			s += v - c[0]
		}
		m[j] = c[0] + s/float64(len(c))
		finite = finite && m[j]-m[j] == 0
	}
	return finite
}

// keepDefined replaces the columns by copies of the rows in which all are finite.
func keepDefined(cols [][]float64) {
	kept := make([][]float64, len(cols))
rows:
	for r := range cols[0] {
		for _, c := range cols {
			if c[r]-c[r] != 0 {
				continue rows
			}
		}
		for j, c := range cols {
			kept[j] = append(kept[j], c[r])
		}
	}
	copy(cols, kept)
}

func square(n int) [][]float64 {
	m := make([][]float64, n)
	for i := range m {
		m[i] = make([]float64, n)
	}
	return m
}

// correlationOf scales a covariance matrix; coefficients with a quantity that does
// not vary are 0, those of unknown covariance NaN.
func correlationOf(cov [][]float64) [][]float64 {
	r := square(len(cov))
	for i := range cov {
		r[i][i] = 1
		for j := range i {
			switch s := math.Sqrt(cov[i][i]) * math.Sqrt(cov[j][j]); {
			case math.IsNaN(s):
				r[i][j], r[j][i] = s, s
			case s > 0:
				r[i][j] = max(-1, min(1, cov[i][j]/s))
				r[j][i] = r[i][j]
			}
		}
	}
	return r
}

// rankFor returns the rank, from 1, of the order statistic of n that a share p of
// them does not exceed.
func rankFor(n int64, p float64) int64 {
	return max(1, min(n, int64(math.Ceil(p*float64(n)))))
}

// regionsOfTrials finds the regions of trials that are all at hand.
func regionsOfTrials(y [][]float64, mean []float64, cov [][]float64, p float64) ([]Region, []error) {
	m := newMetric(mean, cov)
	var e, q []float64
	for r := range y[0] {
		a, b := m.distances(y, r)
		if b-b == 0 {
			q = append(q, b)
			e = append(e, a)
		}
	}
	if len(q) == 0 {
		return nil, nil
	}
	k := int(rankFor(int64(len(q)), p)) - 1
	kp := math.NaN()
	if m.factor != nil {
		kp = kth(e, k)
	}
	return m.regions(p, kp, kth(q, k))
}

// A jointTally is what a run that streams keeps of several outputs together.
type jointTally struct {
	metric    *metric
	n         int64
	s1        []exactSum   // deviations from the metric's centre
	s2        [][]exactSum // products, lower triangle by row
	ellipse   *tally
	rectangle *tally
	d         []float64
	e, q      []float64 // scratch
	p2        []float64
}

func newJointTally(m *metric, ellipse, rectangle grid) *jointTally {
	k := len(m.centre)
	mm := *m
	mm.d = make([]float64, k) // a metric's scratch is not shared
	t := &jointTally{metric: &mm, s1: make([]exactSum, k), ellipse: newTally(ellipse), rectangle: newTally(rectangle),
		d: make([]float64, k), e: make([]float64, chunk), q: make([]float64, chunk), p2: make([]float64, k*(k+1)/2)}
	for j := range k {
		t.s2 = append(t.s2, make([]exactSum, j+1))
	}
	return t
}

// add counts a chunk of joint trials.
func (t *jointTally) add(y [][]float64) {
	e, q := t.e[:0], t.q[:0]
	s1 := t.d
	clear(s1)
	clear(t.p2)
	d := t.metric.d
	for r := range y[0] {
		a, b := t.metric.distances(y, r)
		defined := true
		for _, v := range d {
			defined = defined && v-v == 0
		}
		if !defined {
			continue
		}
		e, q = append(e, a), append(q, b)
		i := 0
		for j := range d {
			s1[j] += d[j]
			for k := range j + 1 {
				t.p2[i] += d[j] * d[k]
				i++
			}
		}
	}
	finite := true
	for _, v := range t.p2 {
		finite = finite && v-v == 0
	}
	if !finite { // squares overflow: these trials keep their rank only
		t.ellipse.huge = true
	} else {
		i := 0
		for j := range s1 {
			t.s1[j].add(s1[j])
			for k := range j + 1 {
				t.s2[j][k].add(t.p2[i])
				i++
			}
		}
	}
	t.n += int64(len(q))
	if t.metric.factor != nil {
		t.ellipse.add(e)
	}
	t.rectangle.add(q)
}

func (t *jointTally) merge(o *jointTally) {
	t.n += o.n
	for j := range t.s1 {
		t.s1[j].merge(&o.s1[j])
		for k := range t.s2[j] {
			t.s2[j][k].merge(&o.s2[j][k])
		}
	}
	t.ellipse.merge(o.ellipse)
	t.rectangle.merge(o.rectangle)
}

// result returns the covariance matrix of all trials and the regions.
func (t *jointTally) result(p float64) (cov [][]float64, regions []Region, warnings []error) {
	k := len(t.s1)
	cov = square(k)
	for i := range k {
		for j := range i + 1 {
			c := math.NaN()
			if t.n > 1 && !t.ellipse.huge {
				c = covarianceOf(t.n, &t.s1[i], &t.s1[j], &t.s2[i][j])
			}
			cov[i][j], cov[j][i] = c, c
		}
	}
	kp := math.NaN()
	if t.metric.factor != nil {
		kp = t.ellipse.share(p)
	}
	regions, warnings = t.metric.regions(p, kp, t.rectangle.share(p))
	return cov, regions, warnings
}

// gridFor lays bins over the k of a region.
func gridFor(pilot []float64, p float64) grid {
	k := slices.DeleteFunc(slices.Clone(pilot), func(v float64) bool { return v-v != 0 })
	hi := 1.0
	if len(k) > 0 {
		i := int(rankFor(int64(len(k)), p)) - 1
		slices.Sort(k)
		hi = min(4*k[i], 2*k[len(k)-1])
	}
	if !(hi > 0) {
		hi = 1
	}
	return grid{low: 0, width: hi / Bins, centre: 0}
}
