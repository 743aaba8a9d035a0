package figure

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

func TestAxes(t *testing.T) {
	labels := func(a Axis, v ...float64) (string, string) {
		var s spanner
		for _, x := range v {
			s.add(x)
		}
		sc, err := newScale(a, s, 5)
		if err != nil {
			return "", err.Error()
		}
		var out []string
		for _, t := range sc.ticks {
			if !t.minor {
				out = append(out, t.label)
			}
		}
		return sc.title, strings.Join(out, " ")
	}
	for _, c := range []struct {
		axis  Axis
		data  []float64
		title string
		ticks string
	}{
		// SI Brochure 9th ed., section 5.4.1: quantity divided by unit.
		{Axis{Name: "E", Unit: si.MustUnit("V/m")}, []float64{0, 50000}, "E / (kV m⁻¹)", "0 10 20 30 40 50"},
		{Axis{Name: "V", Unit: si.MustUnit("kV")}, []float64{-10000, 10000}, "V / kV", "−10 −5 0 5 10"},
		{Axis{Name: "count"}, []float64{0, 4}, "count", "0 1 2 3 4"},
		{Axis{Name: "ε", Unit: si.MustUnit("F/m")}, []float64{8.8541e-12, 8.8545e-12}, "ε / (pF m⁻¹)", "8.8541 8.8542 8.8543 8.8544 8.8545"},
		{Axis{Name: "d", Unit: si.MustUnit("m"), Log: true}, []float64{0.004, 0.012}, "d / mm", "4 5 6 8 10"},
		{Axis{Name: "d", Unit: si.MustUnit("m"), Log: true}, []float64{0.010, 0.012}, "d / mm", "10.0 10.5 11.0 11.5 12.0"},
		{Axis{Name: "R", Unit: si.MustUnit("Ohm"), Log: true}, []float64{1e3, 1e12}, "R / MΩ", "10⁻² 10⁰ 10² 10⁴ 10⁶"},
		{Axis{Name: "x", Log: true}, []float64{0, 1}, "", "figure: x is 0, which a logarithmic axis can't show: leave out values that are not above zero, or use a linear axis"},
		{Axis{Name: "x", Log: true}, []float64{-2, 1}, "", "figure: x is -2, which a logarithmic axis can't show: leave out values that are not above zero, or use a linear axis"},
		{Axis{Name: "x"}, nil, "", "figure: nothing to draw: x has no finite value"},
		{Axis{Name: "x"}, []float64{math.NaN(), math.Inf(1)}, "", "figure: nothing to draw: x has no finite value"},
		{Axis{Name: "x"}, []float64{-1e308, 1e308}, "", "figure: x runs from -1e+308 to 1e+308, too far for an axis"},
	} {
		title, ticks := labels(c.axis, c.data...)
		if title != c.title || ticks != c.ticks {
			t.Errorf("%+v over %v: %q, %q; want %q, %q", c.axis, c.data, title, ticks, c.title, c.ticks)
		}
	}
}

func TestThinning(t *testing.T) {
	const n = 100000
	x, y := make([]float64, n), make([]float64, n)
	for i := range x {
		x[i] = float64(i)
		y[i] = math.Sin(float64(i) * float64(i))
	}
	y[71234] = 9
	hollow := make([]bool, n)
	hollow[500] = true
	y[500] = 0.01
	p := Plot{X: Axis{Name: "i"}, Y: Axis{Name: "y"}, Series: []Series{{X: x, Y: y, Hollow: hollow}}}
	f, err := p.Draw()
	if err != nil {
		t.Fatal(err)
	}
	said := false
	for _, s := range wellFormed(t, f.SVG()) {
		said = said || strings.Contains(s, "of 100\u2009000 points drawn")
	}
	if !said {
		t.Error("the figure does not say that it was thinned")
	}
	if len(f.SVG()) > 400000 {
		t.Errorf("%d bytes of SVG", len(f.SVG()))
	}
	xs, err := newScale(Axis{}, spanner{lo: 0, hi: n - 1, n: n}, 5)
	if err != nil {
		t.Fatal(err)
	}
	ys := again(xs)
	xs.from, xs.to = 0, 400
	keep := thin(x, y, xs, ys, hollow, thinAbove)
	found := map[int]bool{}
	for i, k := range keep {
		found[k] = true
		if i > 0 && keep[i-1] >= k {
			t.Fatal("the order is lost")
		}
	}
	if !found[71234] || !found[500] {
		t.Error("an outlier or a marked point is lost")
	}
	// What is kept has the range of what was given, in every column of the page.
	for c := range 400 {
		all, some := spanner{}, spanner{}
		for i := range x {
			if int(2*math.Abs(xs.pos(x[i])-xs.from))/2 == c {
				all.add(y[i])
				if found[i] {
					some.add(y[i])
				}
			}
		}
		if all.lo != some.lo || all.hi != some.hi {
			t.Fatalf("column %d spans %g to %g, drawn %g to %g", c, all.lo, all.hi, some.lo, some.hi)
		}
	}
	few := thin(x[:thinAbove], y[:thinAbove], xs, ys, nil, thinAbove)
	if len(few) != thinAbove {
		t.Errorf("%d of %d points kept where none need go", len(few), thinAbove)
	}
}

// Legends cover no data: keys stand above the panels, and no marker or bar
// reaches above the highest panel.
func TestKeysCoverNothing(t *testing.T) {
	f, err := fixture(t).Fit()
	if err != nil {
		t.Fatal(err)
	}
	lowestKey, title := 0.0, math.Inf(1)
	for _, o := range f.c.ops {
		if o.text != nil && strings.HasPrefix(o.text.s, "gap ") {
			lowestKey = math.Max(lowestKey, o.text.y)
		}
		if o.text != nil && strings.HasPrefix(o.text.s, "force / ") {
			title = o.text.y
		}
	}
	if lowestKey == 0 || lowestKey >= title {
		t.Fatalf("keys down to %g, axis title at %g", lowestKey, title)
	}
	for _, o := range f.c.ops {
		if o.text != nil || o.pen.fill == paper && len(o.path) == 5 && o.path[0].x == 0 {
			continue
		}
		for _, s := range o.path {
			if s.y > lowestKey+1 && s.y < title-labelSize {
				t.Errorf("something is drawn at %g, between the key and the panel", s.y)
			}
		}
	}
}

func TestErrorBars(t *testing.T) {
	p := Plot{X: Axis{Name: "x"}, Y: Axis{Name: "y"}, Series: []Series{{X: []float64{1, 2}, Y: []float64{1, 2}, UX: []float64{0.3, 0.3}, UY: []float64{0.2, 0}}}}
	f, err := p.Draw()
	if err != nil {
		t.Fatal(err)
	}
	across, down := 0, 0
	for _, o := range f.c.ops {
		if o.pen != (pen{stroke: blue, width: 0.7}) {
			continue
		}
		for i := 1; i < len(o.path); i++ {
			a, b := o.path[i-1], o.path[i]
			if b.verb == 'L' && math.Abs(b.x-a.x) > 10 {
				across++
			}
			if b.verb == 'L' && math.Abs(b.y-a.y) > 10 {
				down++
			}
		}
	}
	if across != 2 || down != 1 {
		t.Errorf("%d bars across and %d down; want 2 and 1", across, down)
	}
}

// The line between fitted values follows the law that they obey.
func TestGuide(t *testing.T) {
	s := &scale{lo: -10, hi: 10, to: 100}
	square := func(x float64) float64 { return 3 * (x - 0.1) * (x - 0.1) }
	inverse := func(x float64) float64 { return 7 / (x * x) }
	for _, c := range []struct {
		x []float64
		f func(float64) float64
	}{{[]float64{-10, -7, -4, 4, 7, 10}, square}, {[]float64{4, 6, 8, 12}, inverse}} {
		var y []float64
		for _, x := range c.x {
			y = append(y, c.f(x))
		}
		gx, gy, ok := guide(c.x, y, make([]bool, len(c.x)), s)
		if !ok {
			t.Fatal("no line")
		}
		for i := range gx {
			if math.Abs(gy[i]-c.f(gx[i])) > 1e-6*(math.Abs(c.f(gx[i]))+1) {
				t.Errorf("at %g the line is at %g, want %g", gx[i], gy[i], c.f(gx[i]))
			}
		}
	}
	// Values that x alone does not tell apart get no line.
	if _, _, ok := guide([]float64{1, 1, 2, 2}, []float64{1, 5, 2, 9}, make([]bool, 4), s); ok {
		t.Error("a line through a cloud")
	}
}

// Ellipses hold the stated share of a normal distribution: r² is −2 ln(1 − p)
// for two degrees of freedom, 5.99 at 95 % (chi-squared tables, common practice).
func TestPairs(t *testing.T) {
	axes := []Axis{{Name: "a"}, {Name: "b"}}
	f, err := Pairs("pairs", "Pairs", "", axes, nil, []float64{0, 0}, [][]float64{{1, 0}, {0, 1}}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	wellFormed(t, f.SVG())
	for _, bad := range [][][]float64{{{1, 0}}, {{0, 0}, {0, 1}}, {{math.NaN(), 0}, {0, 1}}, {{1}, {0, 1}}} {
		if _, err := Pairs("", "", "", axes, nil, []float64{0, 0}, bad, 0.95); err == nil {
			t.Errorf("covariance %v was drawn", bad)
		}
	}
}

func ExamplePlot() {
	kVm := si.MustUnit("kV/m")
	p := Plot{
		Title:  "Correction factor",
		X:      Axis{Name: "E", Unit: kVm},
		Y:      Axis{Name: "correction factor"},
		Series: []Series{{X: []float64{5e3, 10e3, 20e3}, Y: []float64{1.016, 1.015, 1.017}, UY: []float64{0.003, 0.003, 0.003}}},
	}
	f, err := p.Draw()
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(f, len(f.SVG()) > 1000)
	// Output: Correction factor true
}

// Of many readings in a rhythm, enough of each kind are looked at to find the
// lines they lie on.
func TestLinesOfManyReadings(t *testing.T) {
	d := fixture(t)
	r := d.Rows
	grow := func(v []float64) []float64 {
		out := make([]float64, 0, 500*len(v))
		for range 500 {
			out = append(out, v...)
		}
		return out
	}
	for c := range r.Predictors {
		r.Predictors[c] = grow(r.Predictors[c])
	}
	r.Response, r.Fitted, r.U, r.Residual = grow(r.Response), grow(r.Fitted), grow(r.U), grow(r.Residual)
	r.Standardised, r.Leverage, r.Studentised = grow(r.Standardised), grow(r.Leverage), grow(r.Studentised)
	r.N = len(r.Response)
	r.Excluded = make([]bool, r.N)
	d.Number, d.Groups = nil, nil
	v := d.choose()
	if v.x != 0 || len(v.series) != 4 || v.joined != 4 {
		t.Fatalf("axis %d with %d series, %d of them lines", v.x, len(v.series), v.joined)
	}
	for _, s := range v.series {
		rows := sparse(s.rows)
		x, y, ok := guide(pick(r.Predictors[0], rows), pick(r.Fitted, rows), make([]bool, len(rows)), &scale{})
		if !ok {
			t.Fatalf("no line for %s", s.name)
		}
		if low, high := slices.Min(x), slices.Max(x); high < 5.9e3 || low > -5.9e3 || math.Abs(y[0]-y[len(y)-1]) > 0.02*y[0] {
			t.Errorf("%s: a line from %g to %g, %g to %g", s.name, low, high, y[0], y[len(y)-1])
		}
	}
}

// TestLinesOfTwoGaps: a meter between plates at two gaps, whose settings are chosen for
// the same fields, gives a staircase against the voltage; the lines are those of the
// two gaps, E = V/d, straight through all their points.
func TestLinesOfTwoGaps(t *testing.T) {
	d := fixture(t)
	var v, gap, e []float64
	for _, k := range []float64{-18e3, -12e3, -8e3, -4e3, 4e3, 8e3, 12e3, 18e3} {
		for _, g := range []float64{0.25, 0.35} {
			v, gap, e = append(v, k*g), append(gap, g), append(e, k)
		}
	}
	n := len(v)
	none := make([]float64, n)
	*d.Rows = reduce.Rows{N: n, ResponseName: "indication", PredictorNames: []string{"voltage", "gap"}, Predictors: [][]float64{v, gap},
		Response: e, Fitted: e, U: none, Residual: none, Standardised: none, Leverage: none, Studentised: none, Excluded: make([]bool, n)}
	d.Number, d.Groups = nil, nil
	got := d.choose()
	if got.x != 0 || len(got.series) != 2 || got.joined != 2 || got.plain != 2 {
		t.Fatalf("axis %d with %d series, %d of them lines, %d plain; want those of two gaps", got.x, len(got.series), got.joined, got.plain)
	}
	for k, want := range []string{"gap 250 mm", "gap 350 mm"} {
		if got.series[k].name != want {
			t.Errorf("series %q; want %q", got.series[k].name, want)
		}
	}
}
