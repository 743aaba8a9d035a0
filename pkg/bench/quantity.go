package bench

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/si"
)

// stated is a quantity as a file states it.
type stated struct {
	dist       gum.Distribution
	unit       si.Unit
	hasValue   bool
	hasU       bool
	adjust     bool
	start      float64
	hasStart   bool
	instrument string
	source     string
	readings   []float64 // of a Type A evaluation, SI
}

// quantity reads n in any of its forms; the dimension is that of want.like
// unless want.any. ok is false when something was wrong (it has been noted).
func (r *reader) quantity(n *node, want wanted) (q stated, ok bool) {
	q.unit = want.like
	q.dist = gum.Exactly(0)
	if n.shape != isTable {
		v, u, ok := r.number(n, want)
		q.dist, q.unit, q.hasValue = gum.Exactly(v), u, ok
		return q, ok
	}
	before := len(r.errs.list)
	q.source = r.text(n, "source")
	q.instrument = r.instrument(n)
	q.adjust = r.flag(n, "adjust", false)

	if n.fields["readings"] != nil {
		r.typeA(n, want, &q)
		return q, len(r.errs.list) == before
	}

	if v, u, ok := r.amount(n, "value", want); ok {
		q.dist, q.unit, q.hasValue = gum.Exactly(v), u, true
		if want.any {
			want.any, want.like = false, u
		}
	}
	if f := n.field("start"); f != nil {
		if v, u, ok := r.number(f, want); ok {
			q.start, q.hasStart = v, true
			if !q.hasValue {
				q.unit = u
			}
		}
	}
	if len(r.errs.list) > before {
		return q, false
	}
	if q.hasValue {
		r.spread(n, want, &q)
	} else if f := firstField(n, uncertaintyForms); f != nil {
		r.fail(f, "an uncertainty stands without a value; write value too")
	}
	return q, len(r.errs.list) == before
}

// uncertaintyForms are the keys that state how well a value is known, of which
// a quantity has at most one.
var uncertaintyForms = []string{"u", "relative_u", "expanded", "relative_expanded", "half_width", "relative_half_width"}

func firstField(n *node, keys []string) *node {
	var first *node
	for _, k := range keys {
		if f := n.fields[k]; f != nil && (first == nil || f.vline < first.vline || f.vline == first.vline && f.vcol < first.vcol) {
			first = f
		}
	}
	return first
}

// spread reads the uncertainty of the value already in q.
func (r *reader) spread(n *node, want wanted, q *stated) {
	v := q.dist.Value
	form := ""
	for _, k := range uncertaintyForms {
		if n.fields[k] == nil {
			continue
		}
		if form != "" {
			r.fail(n.field(k), "%s and %s are both given; state one of them", form, k)
			return
		}
		form = k
	}
	before := len(r.errs.list)
	dof := r.dof(n, "dof")
	shape := r.word(n, "shape", "", gum.Shapes()[1:]...)
	if len(r.errs.list) > before {
		return
	}

	width := 0.0
	if form != "" {
		w, ok := 0.0, false
		if strings.HasPrefix(form, "relative_") {
			if w, ok = r.ratio(n, form); ok && v == 0 {
				r.fail(n.field(form), "the value is zero, so that a relative uncertainty says nothing; state %s", strings.TrimPrefix(form, "relative_"))
				return
			}
			w *= math.Abs(v)
		} else {
			w, ok = r.positive(n, form, wanted{like: want.like, interval: true})
		}
		if !ok {
			return
		}
		if width = w; math.IsInf(w, 0) || w == 0 {
			r.fail(n.field(form), "%s is beyond the range of numbers", shown(n.field(form)))
			return
		}
	}

	unfit := func(key, why string) {
		if f := n.field(key); f != nil {
			r.fail(f, "%s", why)
		}
	}
	if !strings.HasSuffix(form, "expanded") {
		unfit("k", "k belongs to expanded, which is not given")
		unfit("probability", "probability belongs to expanded, which is not given")
	}
	if shape != gum.ShapeTrapezoidal {
		unfit("beta", "beta belongs to shape = \"trapezoidal\"")
	}
	if shape != gum.ShapeCurvilinear {
		unfit("inexactness", "inexactness belongs to shape = \"curvilinear-trapezoid\"")
	}

	switch {
	case form == "" && (shape == gum.ShapeExponential || shape == gum.ShapeGamma):
		r.oneSided(n, shape, q)
	case form == "":
		switch {
		case shape != "":
			r.fail(n.field("shape"), "a shape stands without an uncertainty; state u or half_width")
		case n.fields["dof"] != nil:
			r.fail(n.field("dof"), "degrees of freedom stand without an uncertainty; state u")
		}
		return
	case strings.HasSuffix(form, "half_width"):
		r.bounded(n, shape, width, q)
	default:
		u := width
		if strings.HasSuffix(form, "expanded") {
			if u = r.standard(n, width, dof); u == 0 {
				return
			}
		}
		switch shape {
		case "", gum.ShapeNormal:
			q.dist = gum.Normal(v, u)
		case gum.ShapeT:
			if math.IsInf(dof, 1) {
				r.fail(n.field("shape"), "the t distribution needs dof")
				return
			}
			q.dist = gum.StudentT(v, u, dof)
		default:
			q.dist = fromStandard(n, r, shape, v, u)
		}
	}
	if n.fields["dof"] != nil {
		q.dist.DOF = dof
	}
	q.hasU = !q.dist.IsExact()
	if err := q.dist.Check(); err != nil && len(r.errs.list) == before {
		r.fail(n, "%v", err)
	}
}

// standard divides an expanded uncertainty by its coverage factor; 0 after an
// error.
func (r *reader) standard(n *node, U, dof float64) float64 {
	k, p := n.field("k"), n.field("probability")
	switch {
	case k != nil && p != nil:
		r.fail(p, "k and probability are both given; state one of them")
	case k != nil:
		if f, ok := r.coverageFactor(k); ok {
			return U / f
		}
	case p != nil:
		if q, ok := r.coverage(n, "probability"); ok {
			return U / gum.CoverageFactor(q, dof)
		}
	default:
		r.fail(n, "an expanded uncertainty needs its k or its probability")
	}
	return 0
}

// coverageFactor reads a coverage factor: from less than that of half the
// probability to that of Student's t with one degree of freedom at 99.9 %.
func (r *reader) coverageFactor(k *node) (float64, bool) {
	if k.shape != isNumber || !(k.number >= 0.5 && k.number <= 1000) {
		r.fail(k, "%s where a coverage factor is due, a number from 0.5 to 1000 such as 2", shown(k))
		return 0, false
	}
	return k.number, true
}

// bounded makes the distributions that a half-width describes.
func (r *reader) bounded(n *node, shape string, half float64, q *stated) {
	v := q.dist.Value
	switch shape {
	case "":
		r.fail(n, "half_width needs a shape: rectangular, triangular, trapezoidal, curvilinear-trapezoid or arcsine")
	case gum.ShapeRectangular:
		q.dist = gum.Rectangular(v, half)
	case gum.ShapeTriangular:
		q.dist = gum.Triangular(v, half)
	case gum.ShapeArcsine:
		q.dist = gum.Arcsine(v, half)
	case gum.ShapeTrapezoidal:
		if beta, ok := r.beta(n); ok {
			q.dist = gum.Trapezoidal(v, half, beta)
		}
	case gum.ShapeCurvilinear:
		d, ok := r.positive(n, "inexactness", wanted{like: q.unit, interval: true})
		if n.fields["inexactness"] == nil {
			r.fail(n.field("shape"), "the curvilinear trapezoid needs inexactness: how well half_width is known")
		}
		if !ok {
			return
		}
		if d > half {
			r.fail(n.field("inexactness"), "%s is larger than half_width", shown(n.field("inexactness")))
			return
		}
		q.dist = gum.CurvilinearTrapezoidal(-half, half, d)
		q.dist.Value = v // set afterwards, so that nothing is rounded by way of the limits
	default:
		r.fail(n.field("shape"), "shape %s is not stated by half_width; use u", quoted(shape))
	}
}

func (r *reader) beta(n *node) (float64, bool) {
	f := n.field("beta")
	if f == nil {
		r.fail(n.field("shape"), "a trapezoid needs beta: the width of its top over that of its base")
		return 0, false
	}
	if f.shape != isNumber || !(f.number >= 0 && f.number <= 1) {
		r.fail(f, "%s where a number from 0 (triangle) to 1 (rectangle) is due", shown(f))
		return 0, false
	}
	return f.number, true
}

// fromStandard makes a bounded distribution from its standard uncertainty:
// JCGM 100:2008 4.3.7 and 4.3.9, JCGM 101:2008 table 1.
func fromStandard(n *node, r *reader, shape string, v, u float64) gum.Distribution {
	switch shape {
	case gum.ShapeRectangular:
		return exactU(gum.Rectangular(v, u*math.Sqrt(3)), u)
	case gum.ShapeTriangular:
		return exactU(gum.Triangular(v, u*math.Sqrt(6)), u)
	case gum.ShapeArcsine:
		return exactU(gum.Arcsine(v, u*math.Sqrt2), u)
	case gum.ShapeTrapezoidal:
		if beta, ok := r.beta(n); ok {
			return exactU(gum.Trapezoidal(v, u*math.Sqrt(6/(1+beta*beta)), beta), u)
		}
		return gum.Exactly(v)
	}
	r.fail(n.field("shape"), "shape %s can't be stated by a standard uncertainty alone", quoted(shape))
	return gum.Exactly(v)
}

// exactU keeps the u that was stated from being rounded by way of a half-width.
func exactU(d gum.Distribution, u float64) gum.Distribution {
	d.U = u
	return d
}

// oneSided makes the distributions that a value alone describes.
func (r *reader) oneSided(n *node, shape string, q *stated) {
	v := q.dist.Value
	if shape == gum.ShapeExponential {
		if !(v > 0) {
			r.fail(n.field("value"), "the exponential distribution needs a value above zero")
			return
		}
		q.dist = gum.Exponential(v)
		return
	}
	if !q.unit.Dim.IsOne() || v < 0 || v != math.Trunc(v) {
		r.fail(n.field("value"), "the gamma distribution is that of a count: value must be a whole number from 0 (JCGM 101 6.4.11)")
		return
	}
	q.dist = gum.Counted(v)
}

// typeA evaluates repeated readings (GUM 4.2): the mean, s/√n, n − 1 degrees of
// freedom.
func (r *reader) typeA(n *node, want wanted, q *stated) {
	list := n.field("readings")
	for _, k := range append([]string{"value", "shape", "dof", "k", "probability", "beta", "inexactness"}, uncertaintyForms...) {
		if f := n.field(k); f != nil {
			r.fail(f, "%s and readings are both given; state one of them", k)
			return
		}
	}
	if list.shape != isArray {
		r.fail(list, `%s where readings are due, like ["1.02 V", "1.03 V"]`, shown(list))
		return
	}
	if len(list.items) < 2 {
		r.fail(list, "a Type A evaluation needs two readings or more; there are %d", len(list.items))
		return
	}
	xs := make([]float64, 0, len(list.items))
	plain, hasUnit := si.One, false
	if f := n.fields["unit"]; f != nil { // in budget files
		if plain, hasUnit = r.unit(n, "unit"); !hasUnit || !want.any && !r.measures(f, plain, want.like) {
			return
		}
	}
	for i, e := range list.items {
		if e.shape == isNumber && hasUnit {
			if math.IsNaN(e.number) || math.IsInf(e.number, 0) {
				r.fail(e, "%s is not a finite number", e.text)
				return
			}
			xs = append(xs, plain.ToSI(e.number))
			q.unit = plain
			continue
		}
		x, u, ok := r.number(e, want)
		if !ok {
			return
		}
		if i == 0 {
			q.unit, want.any, want.like = u, false, u
		}
		xs = append(xs, x)
	}
	r.fromReadings(list, xs, q)
	if f := n.field("start"); f != nil {
		want.any, want.like = false, q.unit
		q.start, _, q.hasStart = r.number(f, want)
	}
}

// fromReadings fills q from repeated readings.
func (r *reader) fromReadings(n *node, xs []float64, q *stated) {
	d, err := gum.FromReadings(xs)
	if err != nil {
		r.fail(n, "%v", err)
		return
	}
	q.dist, q.readings = d, xs
	q.hasValue, q.hasU = true, true
	if q.source == "" {
		q.source = fmt.Sprintf("mean of %d readings", len(xs))
	}
	if err := q.dist.Check(); err != nil {
		r.fail(n, "%v", err)
	}
}

// meanAndScatter returns the mean and the experimental standard deviation of
// one reading (GUM 4.2.1, 4.2.2), in two passes; NaN readings are left out.
func meanAndScatter(xs []float64) (mean, s float64) {
	n := 0
	for _, x := range xs {
		if !math.IsNaN(x) {
			mean += x
			n++
		}
	}
	mean /= float64(n)
	var d1, d2 float64
	for _, x := range xs {
		if !math.IsNaN(x) {
			d := x - mean
			d1 += d
			d2 += d * d
		}
	}
	return mean + d1/float64(n), math.Sqrt((d2 - d1*d1/float64(n)) / float64(n-1))
}

// instrument returns the instrument that a table cites and keeps the place, to
// check the name when all instruments are known.
func (r *reader) instrument(t *node) string {
	s := r.text(t, "instrument")
	if s != "" {
		r.cited = append(r.cited, t.field("instrument"))
	}
	return s
}

// checkCited refuses instruments that have no table.
func (r *reader) checkCited(known []string) {
	for _, n := range r.cited {
		if !slices.Contains(known, n.text) {
			hint := didYouMean(n.text, known)
			if len(known) == 0 {
				hint = fmt.Sprintf("; add a table [instruments.%s]", n.text)
			}
			r.fail(n, "instrument %s has no table [instruments.%s]%s", quoted(n.text), n.text, hint)
		}
	}
}
