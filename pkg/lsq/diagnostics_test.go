package lsq

import (
	"context"
	"encoding/json"
	"math"
	"sort"
	"strings"
	"testing"

	"example.org/guardring/pkg/random"
	"gonum.org/v1/gonum/mathext"
)

// Swed and Eisenhart, Ann. Math. Stat. 14 (1943) 66, table I (value from
// memory): with 5 signs of each kind the probability of 3 runs or fewer is
// 0.040, and by symmetry of 9 or more too.
func TestRunsTable(t *testing.T) {
	r := []float64{1, 1, 1, -1, -1, -1, -1, -1, 1, 1}
	got, err := RunsTest(r)
	if err != nil || got.Statistic != 3 || math.Abs(got.PValue-2*0.040) > 0.001 {
		t.Errorf("%+v, %v", got, err)
	}
	// a sequence of one sign has no test
	if got, err := RunsTest([]float64{1, 2, 3}); err != nil || !math.IsNaN(got.PValue) {
		t.Errorf("%+v, %v", got, err)
	}
	if _, err := RunsTest([]float64{1, math.NaN()}); err == nil {
		t.Error("NaN accepted")
	}
}

// NIST/SEMATECH e-Handbook, section 1.3.5.13 (value from memory): runs of
// Lew's data about their median, Z = 2.6938.
func TestRunsLew(t *testing.T) {
	raw := map[string]json.RawMessage{}
	readJSON(t, "nist_univariate_data.json", &raw)
	var y []float64
	decode(t, raw["Lew"], &y)
	s := append([]float64(nil), y...)
	sort.Float64s(s)
	median := 0.5 * (s[99] + s[100])
	for i := range y {
		y[i] -= median
	}
	got, err := RunsTest(y)
	if err != nil {
		t.Fatal(err)
	}
	// 100 signs of each kind: 101 ± 7.0533 runs expected
	near(t, "Z", (got.Statistic-101)/math.Sqrt(2e4*(2e4-200)/(4e4*199)), 2.6938, 1e-4)
	near(t, "p", got.PValue, math.Erfc((19-0.5)/7.0533/math.Sqrt2), 0.03)
	// the approximation for many signs joins the exact sum
	long := append(append(append([]float64(nil), y...), y...), y...)
	plus, minus := 0, 0
	for _, v := range long {
		if v > 0 {
			plus++
		} else if v < 0 {
			minus++
		}
	}
	l, err := RunsTest(long)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "approximation", l.PValue, exactRuns(plus, minus, int(l.Statistic)), 0.2)
}

// Savin and White's tables of the Durbin–Watson bounds (Econometrica 45 (1977)
// 1989; values from memory): n = 15, one regressor and a constant, 5 % one-sided,
// between 1.077 and 1.361; n = 50: 1.503 and 1.585.
func TestDurbinWatsonBounds(t *testing.T) {
	for _, c := range []struct {
		n          int
		low, upper float64
	}{{15, 1.077, 1.361}, {50, 1.503, 1.585}} {
		p := &Problem{Y: make([]float64, c.n), Parameters: make([]Parameter, 2)}
		for i := range p.Y {
			p.Y[i] = math.Sin(float64(i * i))
		}
		p.Eval = func(b, f []float64, jac [][]float64) error {
			for i := range f {
				x := float64(i)
				f[i] = b[0] + b[1]*x
				if jac != nil {
					jac[0][i], jac[1][i] = 1, x
				}
			}
			return nil
		}
		r := fit(t, p)
		basis := make([][]float64, len(r.factor))
		for k, b := range r.factor {
			basis[k] = make([]float64, c.n)
			for i := range basis[k] {
				basis[k][i] = b[0]*r.jac[0][i] + b[1]*r.jac[1][i]
			}
		}
		if pl, pu := durbinWatsonP(c.low, c.n, basis), durbinWatsonP(c.upper, c.n, basis); !(pl <= 0.1 && pu >= 0.1) {
			t.Errorf("n = %d: two-sided p %v and %v at the 5 %% bounds", c.n, pl, pu)
		}
		if d, err := r.DurbinWatson(); err != nil || !(d.PValue > 0 && d.PValue <= 1) {
			t.Errorf("%+v, %v", d, err)
		}
	}
}

// Stephens' critical values of the corrected statistic (J. Am. Stat. Assoc. 69
// (1974) 730, table 1A, case 3; from memory): 0.631 at 10 %, 0.752 at 5 %,
// 0.873 at 2.5 %, 1.035 at 1 %.
func TestAndersonDarling(t *testing.T) {
	for a, p := range map[float64]float64{0.631: 0.10, 0.752: 0.05, 0.873: 0.025, 1.035: 0.01} {
		near(t, "p", andersonDarlingP(a), p, 0.03)
	}
	src := random.New(11, "normality", 0)
	y := make([]float64, 400)
	src.FillNormal(y)
	if got, err := AndersonDarling(y); err != nil || got.PValue < 0.01 {
		t.Errorf("normal: %+v, %v", got, err)
	}
	for i := range y {
		y[i] = src.Exponential()
	}
	if got, err := AndersonDarling(y); err != nil || got.PValue > 1e-6 {
		t.Errorf("exponential: %+v, %v", got, err)
	}
	if _, err := AndersonDarling(y[:7]); err == nil {
		t.Error("7 residuals accepted")
	}
}

// NIST/SEMATECH e-Handbook, section 4.6.1, load cell calibration (the Pontius
// data; from memory): lack-of-fit F of the straight line 214.746 with 18 and 20
// degrees of freedom, of the parabola 0.8107 with 17 and 20. The further digits
// are computed independently, in exact rational arithmetic.
func TestLackOfFitPontius(t *testing.T) {
	d := linearSets(t)["Pontius"]
	cols, _ := design("Pontius", d)
	group := make([]int, len(d.Y))
	for i := range group {
		group[i] = int(d.X[i][0])
	}
	line := fit(t, linearProblem(cols[:2], d.Y, true))
	parabola := fit(t, linearProblem(cols, d.Y, true))
	a, err := line.LackOfFit(group)
	if err != nil {
		t.Fatal(err)
	}
	b, err := parabola.LackOfFit(group)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "F of the line", a.F, 214.74692365390877, 1e-9)
	near(t, "F of the parabola", b.F, 0.8107239003096023, 1e-9)
	if a.ModelDOF != 18 || a.PureDOF != 20 || b.ModelDOF != 17 || a.PValue > 1e-10 {
		t.Errorf("%+v", a)
	}
	near(t, "p of the parabola", b.PValue, 0.666172944808458, 1e-9)
	// the nested test tells the same story
	c, err := CompareNested(line, parabola)
	if err != nil {
		t.Fatal(err)
	}
	tt := parabola.Values[2] / parabola.U[2]
	near(t, "F = t²", c.F, tt*tt, 1e-9)
	if !math.IsNaN(c.DeltaChi2) || c.PValueF > 1e-10 {
		t.Errorf("%+v", c)
	}
	if line.AICc() <= parabola.AICc() {
		t.Errorf("AICc %v and %v", line.AICc(), parabola.AICc())
	}
	if _, err := CompareNested(parabola, line); err == nil {
		t.Error("exchanged models accepted")
	}
}

// The F distribution's 5 % point for 2 and 10 degrees of freedom is 4.103
// (tables, from memory).
func TestFTail(t *testing.T) {
	near(t, "p", fTail(4.1028, 2, 10), 0.05, 1e-4)
}

// The finite sums agree with the incomplete gamma function, and with the usual
// tables: 3.841 at 5 % for one degree of freedom, 18.307 for ten (from memory).
func TestChiSquaredTail(t *testing.T) {
	near(t, "1", chiSquaredTail(3.841459, 1), 0.05, 1e-6)
	near(t, "10", chiSquaredTail(18.307038, 10), 0.05, 1e-6)
	for dof := 1; dof <= 60; dof++ {
		for _, x := range []float64{1e-6, 0.3, 1, 7, 40, 90, 400} {
			near(t, "tail", chiSquaredTail(x, dof), mathext.GammaIncRegComp(float64(dof)/2, x/2), 1e-10)
		}
	}
}

// puromycin is the data set of Bates and Watts, Nonlinear Regression Analysis
// and Its Applications (1988), appendix A1.3 (from memory), reaction velocity
// against concentration, treated.
func puromycin() *Problem {
	x := []float64{.02, .02, .06, .06, .11, .11, .22, .22, .56, .56, 1.1, 1.1}
	return &Problem{
		Y:          []float64{76, 47, 97, 107, 123, 139, 159, 152, 191, 201, 207, 200},
		Parameters: []Parameter{{Name: "theta1", Start: 200}, {Name: "theta2", Start: 0.1}},
		Eval: func(b, f []float64, jac [][]float64) error {
			for i := range f {
				d := b[1] + x[i]
				f[i] = b[0] * x[i] / d
				if jac != nil {
					if jac[0] != nil {
						jac[0][i] = x[i] / d
					}
					if jac[1] != nil {
						jac[1][i] = -b[0] * x[i] / (d * d)
					}
				}
			}
			return nil
		},
	}
}

// Estimates of Bates and Watts, example "Puromycin 7": 212.7, 0.06412, s =
// 10.93; 95 % profile intervals 197.3 … 229.3 and 0.0469 … 0.0862 (values from
// memory; their further digits computed independently).
func TestProfile(t *testing.T) {
	r := fit(t, puromycin())
	near(t, "theta1", r.Values[0], 212.7, 1e-4)
	near(t, "theta2", r.Values[1], 0.06412, 1e-4)
	near(t, "s", r.ResidualSD, 10.93, 1e-3)
	for j, want := range [][2]float64{{197.301932900284, 229.2890550550531}, {0.04692034203517076, 0.08615691342713873}} {
		p, err := r.Profile(context.Background(), j, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "lower", p.Lower, want[0], 1e-7)
		near(t, "upper", p.Upper, want[1], 1e-7)
	}
	// linear model: the usual symmetric interval, with and without a prior
	q := linearProblem([][]float64{{1, 1, 1, 1, 1}, {0, 1, 2, 3, 4}}, []float64{1, 3.1, 4.9, 7.2, 8.8}, false)
	q.U = []float64{.1, .1, .2, .1, .1}
	for _, prior := range []*Prior{nil, {Value: 1.9, U: 0.05}} {
		q.Parameters[1].Prior = prior
		l := fit(t, q)
		p, err := l.Profile(context.Background(), 1, 0.9545)
		if err != nil {
			t.Fatal(err)
		}
		k := 2.000002443899604 // of the normal distribution at 0.9545
		near(t, "linear lower", p.Lower, l.Values[1]-k*l.U[1], 1e-6)
		near(t, "linear upper", p.Upper, l.Values[1]+k*l.U[1], 1e-6)
	}
	// a bound ends the interval
	lo := 0.06
	b := puromycin()
	b.Parameters[1].Lower = &lo
	p, err := fit(t, b).Profile(context.Background(), 1, 0.95)
	if err != nil || !p.AtLower || p.Lower != lo || p.AtUpper {
		t.Errorf("%+v, %v", p, err)
	}
}

// A profile that walks from a local minimum into the true one says so: chi-squared
// (b² − 1)² + (b − 1)²/4 is 0 at b = 1 and has a minimum near −0.9.
func TestProfileOfLocalMinimum(t *testing.T) {
	p := &Problem{Y: []float64{0, 1}, U: []float64{1, 2}, Parameters: []Parameter{{Name: "b", Start: -0.9}},
		Eval: func(b, f []float64, jac [][]float64) error {
			f[0], f[1] = b[0]*b[0]-1, b[0]
			if jac != nil && jac[0] != nil { // nil for a fixed parameter
				jac[0][0], jac[0][1] = 2*b[0], 1
			}
			return nil
		}}
	r := fit(t, p)
	if !(r.Values[0] < 0) || r.Status != Converged {
		t.Fatalf("%s at %v", r.Status, r.Values)
	}
	if i, err := r.Profile(context.Background(), 0, 0.9545); err == nil || !strings.Contains(err.Error(), "with b at") {
		t.Errorf("interval %+v, %v", i, err)
	}
}

func TestBootstrap(t *testing.T) {
	p, _ := decay(40, 12)
	r := fit(t, p)
	for _, pairs := range []bool{false, true} {
		b, err := r.Bootstrap(context.Background(), BootstrapSettings{Pairs: pairs, Replicates: 1000, Seed: 3})
		if err != nil {
			t.Fatal(err)
		}
		for j := range b.U {
			// the bootstrap's own uncertainty is 2 %, and the residuals' scatter
			// of 40 readings is known to 11 %
			near(t, "u", b.U[j], r.U[j]*r.BirgeRatio, 0.25)
			if math.Abs(b.Bias[j]) > 0.3*r.U[j] || !(b.Interval[j][0] < r.Values[j] && r.Values[j] < b.Interval[j][1]) {
				t.Errorf("bias %v of %v, interval %v", b.Bias[j], r.U[j], b.Interval[j])
			}
		}
		again, err := r.Bootstrap(context.Background(), BootstrapSettings{Pairs: pairs, Replicates: 1000, Seed: 3})
		if err != nil {
			t.Fatal(err)
		}
		for j := range b.U {
			if b.U[j] != again.U[j] {
				t.Errorf("the same seed gave %v and %v", b.U[j], again.U[j])
			}
		}
	}
}

func TestBootstrapIsBounded(t *testing.T) {
	p, _ := decay(40, 12)
	if b, err := fit(t, p).Bootstrap(context.Background(), BootstrapSettings{Replicates: 1_000_000_000}); b != nil || err == nil || !strings.Contains(err.Error(), "ask for 33333333 at most") {
		t.Errorf("%v, %v", b, err)
	}
}

// The stack loss data (Brownlee, Statistical Theory and Methodology (1965);
// from memory): readings 1, 3, 4 and 21 are outliers (Andrews, Technometrics 16
// (1974) 523), and least squares gives −39.92, 0.7156, 1.2953, −0.1521.
func TestRobustStackLoss(t *testing.T) {
	air := []float64{80, 80, 75, 62, 62, 62, 62, 62, 58, 58, 58, 58, 58, 58, 50, 50, 50, 50, 50, 56, 70}
	water := []float64{27, 27, 25, 24, 22, 23, 24, 24, 23, 18, 18, 17, 18, 19, 18, 18, 19, 19, 20, 20, 20}
	acid := []float64{89, 88, 90, 87, 87, 87, 93, 93, 87, 80, 89, 88, 82, 93, 89, 86, 72, 79, 80, 82, 91}
	loss := []float64{42, 37, 37, 28, 18, 18, 19, 20, 15, 14, 14, 13, 11, 12, 8, 7, 8, 8, 9, 15, 15}
	one := make([]float64, 21)
	fill(one, 1)
	r := fit(t, linearProblem([][]float64{one, air, water, acid}, loss, true))
	for j, want := range []float64{-39.92, 0.7156, 1.2953, -0.1521} {
		near(t, "least squares", r.Values[j], want, 3e-4)
	}
	// M-estimates with these weights and the median absolute residual as scale
	// (values from memory)
	hu, err := r.Robust(context.Background(), Huber)
	if err != nil {
		t.Fatal(err)
	}
	for j, want := range []float64{-41.0265, 0.829374, 0.926108, -0.127849} {
		near(t, "Huber", hu.Values[j], want, 3e-4)
	}
	near(t, "Huber scale", hu.Scale*r.ResidualSD, 2.441, 1e-3)
	o, err := r.Robust(context.Background(), Bisquare)
	if err != nil {
		t.Fatal(err)
	}
	flagged := map[int]bool{}
	for _, i := range o.Outliers {
		flagged[i+1] = true
	}
	if !o.Converged || !flagged[4] || !flagged[21] || len(o.Outliers) > 5 {
		t.Errorf("converged %v, outliers %v", o.Converged, o.Outliers)
	}
	for j, want := range []float64{-42.2853, 0.9275, 0.6507, -0.1123} {
		near(t, "bisquare", o.Values[j], want, 1e-3)
	}
	// clean readings: the second opinion confirms the first
	p, _ := decay(60, 9)
	g := fit(t, p)
	for _, kind := range []RobustKind{Huber, Bisquare} {
		h, err := g.Robust(context.Background(), kind)
		if err != nil {
			t.Fatal(err)
		}
		for j := range h.Values {
			if math.Abs(h.Shift[j]) > 1.5 {
				t.Errorf("parameter %d moved by %v of its uncertainty", j, h.Shift[j])
			}
			near(t, "robust u", h.U[j], g.U[j]*g.BirgeRatio, 0.35)
		}
	}
}

// A parameter at its bound has no uncertainty in the second opinion either, and the
// others have that of the fit with it fixed there.
func TestRobustAtBound(t *testing.T) {
	p, _ := decay(60, 9)
	limit := 0.9 * fit(t, p).Values[2]
	p.Parameters[2].Upper = &limit
	b, err := fit(t, p).Robust(context.Background(), Huber)
	if err != nil {
		t.Fatal(err)
	}
	p.Parameters[2] = Parameter{Name: "offset", Start: limit, Fixed: true}
	f, err := fit(t, p).Robust(context.Background(), Huber)
	if err != nil {
		t.Fatal(err)
	}
	if b.Values[2] != limit || !math.IsNaN(b.U[2]) || !math.IsNaN(b.Shift[2]) {
		t.Errorf("at the bound %v ± %v, shift %v", b.Values[2], b.U[2], b.Shift[2])
	}
	for j := range 2 {
		near(t, "value", b.Values[j], f.Values[j], 1e-6)
		near(t, "u", b.U[j], f.U[j], 1e-5)
	}
}
