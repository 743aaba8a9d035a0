package reduce_test

import (
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/random"
	"example.org/guardring/pkg/reduce"
)

// world is a dataset with its truth: an invented bench whose readings can be
// made again and again.
type world struct {
	name   string
	b      *bench.Bench
	truth  *plan.Truth
	model  *model.Model
	series []string
	q      []float64 // true scalars of the first series, Δ² for squared ones
}

// worlds opens every dataset that states its truth.
func worlds(t testing.TB) []*world {
	paths, err := filepath.Glob(filepath.Join("..", "..", "datasets", "*", plan.TruthFile))
	if err != nil || len(paths) == 0 {
		t.Fatalf("no dataset with a truth found (%v)", err)
	}
	var all []*world
	for _, p := range paths {
		all = append(all, openWorld(t, filepath.Base(filepath.Dir(p))))
	}
	return all
}

func openWorld(t testing.TB, name string) *world {
	dir := filepath.Join("..", "..", "datasets", name)
	if _, err := os.Stat(dir); err != nil {
		t.Fatal(err)
	}
	b, err := bench.Open(dir)
	if err != nil {
		t.Fatal(err)
	}
	w := &world{name: name, b: b}
	if w.truth, err = plan.ReadTruth(b); err != nil {
		t.Fatal(err)
	}
	_, w.series = reduce.SeriesOf(b)
	if w.q, err = w.truth.Scalars(b, w.series[0]); err != nil {
		t.Fatal(err)
	}
	if w.model, err = w.truth.Model(b, w.q); err != nil {
		t.Fatal(err)
	}
	return w
}

// trueScalar is the true value of a scalar: as the truth says, else as stated and
// moved by its instrument.
func (w *world) trueScalar(i int) float64 {
	if v, ok := w.truth.Values[w.b.Scalars[i].Name]; ok {
		return v
	}
	if w.b.Kind.Scalars[i].Squared {
		return w.b.Scalars[i].Dist.Value
	}
	return w.q[i]
}

// trueMeasurand is the true value of the n-th measurand of the reduction: those
// of the first series, then those of the next.
func (w *world) trueMeasurand(t testing.TB, n int) float64 {
	each := len(w.model.Measurands)
	if n >= each*len(w.series) {
		return w.trueShift(t, n-each*len(w.series))
	}
	truth, err := w.truth.Scalars(w.b, w.series[n/each])
	if err != nil {
		t.Fatal(err)
	}
	q := make([]jet.Jet, len(truth))
	for i, v := range truth {
		q[i] = jet.Const(v)
	}
	return w.model.Measurands[n%each].Value(q).V
}

// trueShift is the true value of the n-th shift by adjustment.
func (w *world) trueShift(t testing.TB, n int) float64 {
	each := len(w.model.Measurands)
	for left, name := range w.series {
		for found, other := range w.series {
			if other != name && other == strings.Replace(name, reduce.AsLeft, reduce.AsFound, 1) {
				if n == 0 {
					return w.trueMeasurand(t, left*each) - w.trueMeasurand(t, found*each)
				}
				n--
			}
		}
	}
	t.Fatalf("%s: there is no shift %d", w.name, n)
	return 0
}

// draw makes one laboratory's bench of the world: what is stated scatters about
// the truth as it claims to, and the readings are made anew.
func (w *world) draw(t testing.TB, seed uint64) *bench.Bench {
	src := random.New(seed, "coverage", 0)
	b := *w.b
	b.Scalars = append([]bench.Scalar(nil), w.b.Scalars...)
	b.Channels = append([]bench.Channel(nil), w.b.Channels...)
	truth := *w.truth
	truth.Values, truth.Faults, truth.Defects = map[string]float64{}, nil, nil
	for k, v := range w.truth.Values {
		truth.Values[k] = v
	}
	about := func(d gum.Distribution, centre float64) gum.Distribution {
		v := d.Sample(&src)
		d.Value, v = centre, v-d.Value
		d.Value += v
		return d
	}
	// What an instrument has moved by is stated as zero: the truth lies anywhere.
	// The values that it gave were then stated so much off.
	for i := range b.Instruments {
		for _, a := range b.Instruments[i].Allowances {
			truth.Values[a.Name] = a.Dist.Sample(&src)
		}
	}
	centre, moved := make([]float64, len(b.Scalars)), make([]bool, len(b.Scalars))
	for i := range b.Scalars {
		centre[i] = w.trueScalar(i)
		for n := range b.Instruments {
			in := &b.Instruments[n]
			if !b.Scalars[i].From(in.Name) || len(in.Allowances) == 0 {
				continue
			}
			truth.Values[b.Scalars[i].Name], moved[i] = w.trueScalar(i), true
			for _, a := range in.Allowances {
				if e := truth.Values[a.Name]; a.Relative {
					centre[i] /= 1 + e
				} else {
					centre[i] -= e
				}
			}
		}
	}
	for i := range b.Scalars {
		s := &b.Scalars[i]
		switch {
		case s.Adjust && !s.HasPrior:
		case s.Dist.U == 0 && !moved[i]:
		case s.Dist.U == 0:
			s.Dist.Value = centre[i]
		case w.b.Kind.Scalars[i].Squared:
			// Stated as a range about zero: it is the truth that lies anywhere in it.
			truth.Values[s.Name] = s.Dist.Sample(&src)
		default:
			s.Dist = about(s.Dist, centre[i])
		}
	}
	y, err := plan.Simulate(w.b, &truth, seed)
	if err != nil {
		t.Fatal(err)
	}
	for i := range b.Channels {
		ch := &b.Channels[i]
		if ch.Name == w.model.Response {
			ch.Readings = y
		}
		if v, ok := truth.Values["channels."+ch.Name+".gain"]; ch.HasGain {
			if !ok {
				v = ch.Gain.Value
			}
			ch.Gain = about(ch.Gain, v)
		}
		if v, ok := truth.Values["channels."+ch.Name+".offset"]; ch.HasOffset {
			if !ok {
				v = ch.Offset.Value
			}
			ch.Offset = about(ch.Offset, v)
		}
	}
	return &b
}

// TestBlockAgreesWithRow compares the fast prediction of a kind with its jets.
func TestBlockAgreesWithRow(t *testing.T) {
	for _, w := range worlds(t) {
		if w.model.Block == nil {
			continue
		}
		x := w.predictors()
		n := w.b.Rows.N
		for i := range w.q {
			f, jac := make([]float64, n), [][]float64{make([]float64, n)}
			if !w.model.Block(w.q, x, 0, n, []int{i}, f, jac) {
				continue
			}
			space := jet.NewSpace(1, 0)
			for r := range n {
				space.Reset()
				got := w.row(space, i, r)
				scale := math.Abs(got.V) + 1e-300
				if math.Abs(f[r]-got.V) > 1e-12*scale {
					t.Fatalf("%s row %d: block %g, row %g", w.name, r+1, f[r], got.V)
				}
				if d := math.Abs(jac[0][r] - got.Grad(0)); d > 1e-11*math.Abs(got.Grad(0))+1e-300 {
					t.Fatalf("%s row %d: derivative by %s: block %g, row %g", w.name, r+1, w.b.Scalars[i].Name, jac[0][r], got.Grad(0))
				}
			}
		}
	}
}

// predictors are the readings of the model's predictors.
func (w *world) predictors() [][]float64 {
	var x [][]float64
	for _, name := range w.model.Predictors {
		for i := range w.b.Channels {
			if w.b.Channels[i].Name == name {
				x = append(x, w.b.Channels[i].Readings)
			}
		}
	}
	if w.model.TimeDependent {
		x = append(x, w.b.Rows.Time)
	}
	return x
}

// row predicts record r with scalar i as the seed.
func (w *world) row(space *jet.Space, i, r int) jet.Jet {
	q := make([]jet.Jet, len(w.q))
	for k, v := range w.q {
		q[k] = jet.Const(v)
	}
	q[i] = space.Var(0, w.q[i])
	var x []jet.Jet
	for _, c := range w.predictors() {
		x = append(x, jet.Const(c[r]))
	}
	return w.model.Row(q, x)
}

// TestDerivatives compares the derivative of every kind's prediction by every
// scalar and predictor with central differences of its values.
func TestDerivatives(t *testing.T) {
	for _, w := range worlds(t) {
		x := w.predictors()
		n := len(w.q) + len(x)
		value := func(r, k int, by float64) float64 {
			q, xr := make([]jet.Jet, len(w.q)), make([]jet.Jet, len(x))
			for i, v := range w.q {
				q[i] = jet.Const(v)
			}
			for p := range x {
				xr[p] = jet.Const(x[p][r])
			}
			if k < len(q) {
				q[k].V += by
			} else {
				xr[k-len(q)].V += by
			}
			return w.model.Row(q, xr).V
		}
		for _, r := range []int{1, w.b.Rows.N / 3, w.b.Rows.N - 2} {
			space := jet.NewSpace(n, 0)
			q, xr := make([]jet.Jet, len(w.q)), make([]jet.Jet, len(x))
			for i, v := range w.q {
				q[i] = space.Var(i, v)
			}
			for p := range x {
				xr[p] = space.Var(len(q)+p, x[p][r])
			}
			f := w.model.Row(q, xr)
			for k := range n {
				at, name := 0.0, ""
				if k < len(q) {
					at, name = w.q[k], w.b.Scalars[k].Name
					if at == 0 {
						at = math.Max(w.b.Scalars[k].Dist.U, 1e-6*math.Abs(w.b.Scalars[k].Unit.DeltaToSI(1)))
					}
				} else {
					at, name = x[k-len(q)][r], w.model.Predictors[min(k-len(q), len(w.model.Predictors)-1)]
					if at == 0 {
						continue // a zero reading: nothing to scale a step by
					}
				}
				h := 1e-4 * math.Abs(at)
				want := (8*(value(r, k, h)-value(r, k, -h)) - (value(r, k, 2*h) - value(r, k, -2*h))) / (12 * h)
				if d := math.Abs(f.Grad(k) - want); d > 2e-7*math.Abs(want)+1e-11*math.Abs(f.V/at) {
					t.Errorf("%s record %d: derivative by %s is %g, central difference %g", w.name, r+1, name, f.Grad(k), want)
				}
			}
		}
	}
}
