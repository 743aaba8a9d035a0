package lsq

import (
	"context"
	"errors"
	"math"
	"sort"
	"strings"
	"testing"

	"example.org/guardring/pkg/random"
	"gonum.org/v1/gonum/mat"
)

// decay is an invented bench: a leaking charge q0·exp(−t/τ) + offset.
func decay(n int, seed uint64) (*Problem, []float64) {
	src := random.New(seed, "decay", 0)
	t := make([]float64, n)
	y := make([]float64, n)
	u := make([]float64, n)
	truth := []float64{5e-9, 300, 2e-11}
	for i := range t {
		t[i] = 20 * float64(i)
		u[i] = 1e-11 * (1 + 0.5*float64(i%3))
		y[i] = truth[0]*math.Exp(-t[i]/truth[1]) + truth[2] + u[i]*src.Normal()
	}
	p := &Problem{
		Parameters: []Parameter{{Name: "charge", Start: 3e-9}, {Name: "tau", Start: 100}, {Name: "offset", Start: 0}},
		Y:          y, U: u,
		Eval: func(th, f []float64, jac [][]float64) error {
			for i := range f {
				e := math.Exp(-t[i] / th[1])
				f[i] = th[0]*e + th[2]
				if jac != nil {
					if jac[0] != nil {
						jac[0][i] = e
					}
					if jac[1] != nil {
						jac[1][i] = th[0] * e * t[i] / (th[1] * th[1])
					}
					if jac[2] != nil {
						jac[2][i] = 1
					}
				}
			}
			return nil
		},
	}
	return p, truth
}

func fit(t testing.TB, p *Problem) *Result {
	t.Helper()
	r, err := Fit(context.Background(), p, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func near(t testing.TB, what string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Abs(want)) {
		t.Errorf("%s: got %.15g, want %.15g (relative %.2g)", what, got, want, math.Abs(got-want)/math.Abs(want))
	}
}

// sameFit compares two fits that must be the same by algebra.
func sameFit(t *testing.T, a, b *Result, rel float64) {
	t.Helper()
	for j := range a.Values {
		near(t, "value", a.Values[j], b.Values[j], rel)
		near(t, "uncertainty", a.U[j], b.U[j], rel)
	}
	near(t, "chi-squared", a.ChiSquared, b.ChiSquared, rel)
	for i := range a.Studentised {
		near(t, "studentised", a.Studentised[i], b.Studentised[i], 1e3*rel)
		near(t, "leverage", a.Leverage[i], b.Leverage[i], 1e3*rel)
	}
}

// effects and their covariance written out must give the same fit: disjoint,
// nested, crossed, and an effect on all rows.
func TestEffectsAgainstFullCovariance(t *testing.T) {
	p, _ := decay(30, 1)
	full, _ := decay(30, 1)
	g := &Effects{Columns: 10 + 3 + 4 + 1, Start: []int32{0}}
	for i := range p.Y {
		add := func(c int, load float64) {
			g.Column = append(g.Column, int32(c))
			g.Load = append(g.Load, load)
		}
		add(i/3, 2e-11)                     // ten groups
		add(10+i/10, 1e-11)                 // nested
		add(13+i%4, 1.5e-11*float64(1+i%2)) // crossed
		add(17, 0.01*p.Y[i])                // a gain shared by all
		g.Start = append(g.Start, int32(len(g.Load)))
	}
	p.Effects = g
	n := len(p.Y)
	c := mat.NewSymDense(n, nil)
	for i := 0; i < n; i++ {
		for j := i; j < n; j++ {
			s := 0.0
			for k := g.Start[i]; k < g.Start[i+1]; k++ {
				for l := g.Start[j]; l < g.Start[j+1]; l++ {
					if g.Column[k] == g.Column[l] {
						s += g.Load[k] * g.Load[l]
					}
				}
			}
			if i == j {
				s += p.U[i] * p.U[i]
			}
			c.SetSym(i, j, s)
		}
	}
	full.U, full.Covariance = nil, c
	a, b := fit(t, p), fit(t, full)
	sameFit(t, a, b, 1e-9)
	v, sa, sb := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range v {
		v[i] = math.Sin(float64(i)) * 1e-11
	}
	a.SolveCovariance(v, sa)
	b.SolveCovariance(v, sb)
	var back mat.VecDense
	back.MulVec(c, mat.NewVecDense(n, sa))
	for i := range v {
		near(t, "Σ⁻¹v", sa[i], sb[i], 1e-9)
		if math.Abs(back.AtVec(i)-v[i]) > 1e-20 {
			t.Errorf("Σ Σ⁻¹ v differs from v at %d by %g", i, back.AtVec(i)-v[i])
		}
	}
	// the sensitivities carry the readings' covariance to that of the estimates
	s := a.Sensitivity()
	for k := range s {
		for l := range s {
			sum := 0.0
			for i := range v {
				for j := range v {
					sum += s[k][i] * c.At(i, j) * s[l][j]
				}
			}
			if d := math.Abs(sum - a.Covariance.At(k, l)); d > 1e-9*a.U[k]*a.U[l] {
				t.Errorf("S Σ Sᵀ differs at %d, %d by %g of the uncertainties", k, l, d/(a.U[k]*a.U[l]))
			}
		}
	}
}

// A prior is the same as one more reading of the parameter.
func TestPriorIsAReading(t *testing.T) {
	p, _ := decay(20, 2)
	p.Parameters[1].Prior = &Prior{Value: 290, U: 5}
	q, _ := decay(20, 2)
	q.Y = append(q.Y, 290)
	q.U = append(q.U, 5)
	inner := p.Eval
	n := len(p.Y)
	q.Eval = func(th, f []float64, jac [][]float64) error {
		var cut [][]float64
		for _, c := range jac {
			cut = append(cut, c[:n])
		}
		if err := inner(th, f[:n], cut); err != nil {
			return err
		}
		f[n] = th[1]
		for j := range jac {
			jac[j][n] = 0
			if j == 1 {
				jac[j][n] = 1
			}
		}
		return nil
	}
	a, b := fit(t, p), fit(t, q)
	if a.DOF != b.DOF {
		t.Errorf("degrees of freedom %d and %d", a.DOF, b.DOF)
	}
	for j := range a.Values {
		near(t, "value", a.Values[j], b.Values[j], 1e-10)
		near(t, "uncertainty", a.U[j], b.U[j], 1e-10)
		near(t, "∂θ/∂prior", a.PriorSensitivity()[j][1], b.Sensitivity()[j][n], 1e-8)
	}
	near(t, "chi-squared", a.ChiSquared, b.ChiSquared, 1e-12)
}

func TestFixedBoundsAndNumeric(t *testing.T) {
	p, _ := decay(20, 3)
	free := fit(t, p)
	p.Numeric = true
	num := fit(t, p)
	for j := range free.Values {
		near(t, "numeric value", num.Values[j], free.Values[j], 1e-8)
		near(t, "numeric uncertainty", num.U[j], free.U[j], 1e-7)
	}
	p.Numeric = false
	p.Parameters[2].Fixed = true
	fixed := fit(t, p)
	if fixed.Values[2] != 0 || fixed.U[2] != 0 || len(fixed.Free) != 2 || fixed.DOF != 18 {
		t.Errorf("fixed: %v ± %v, free %v, dof %d", fixed.Values, fixed.U, fixed.Free, fixed.DOF)
	}
	p.Parameters[2].Fixed = false
	zero := 0.0
	limit := 0.9 * free.Values[2]
	p.Parameters[2].Upper, p.Parameters[2].Lower = &limit, &zero
	b := fit(t, p)
	if b.Values[2] != limit || len(b.AtBound) != 1 || !math.IsNaN(b.U[2]) || math.IsNaN(b.U[0]) || b.Status != Converged {
		t.Errorf("bounded: %s %v ± %v at bound %v", b.Status, b.Values, b.U, b.AtBound)
	}
	p.Parameters[2].Upper, p.Parameters[2].Lower = nil, nil
	p.Parameters[2].Start, p.Parameters[2].Fixed = limit, true
	c := fit(t, p)
	near(t, "held", b.Values[0], c.Values[0], 1e-9)
	near(t, "held", b.U[1], c.U[1], 1e-8)
	// wide bounds change nothing
	p.Parameters[2].Fixed = false
	lo, hi := -1.0, 1e4
	p.Parameters[1].Lower, p.Parameters[1].Upper = &lo, &hi
	w := fit(t, p)
	near(t, "wide bounds", w.Values[1], free.Values[1], 1e-10)
}

func TestConfounded(t *testing.T) {
	p := &Problem{
		Parameters: []Parameter{{Name: "gain", Start: 1}, {Name: "area", Start: 2}, {Name: "zero", Start: 0}},
		Y:          []float64{2.1, 3.9, 6.2, 7.8, 10.1},
		U:          []float64{.1, .1, .1, .1, .1},
		Eval: func(th, f []float64, jac [][]float64) error {
			for i := range f {
				x := float64(i + 1)
				f[i] = th[0]*th[1]*x + th[2]
				if jac != nil {
					jac[0][i], jac[1][i], jac[2][i] = th[1]*x, th[0]*x, 1
				}
			}
			return nil
		},
	}
	for _, numeric := range []bool{false, true} {
		p.Numeric = numeric
		r := fit(t, p)
		if r.Status != Singular || len(r.Confounded) != 1 || !strings.Contains(r.Confounded[0].Error(), "gain and area can't be told apart") {
			t.Fatalf("status %s, confounded %q", r.Status, r.Confounded)
		}
		if !math.IsNaN(r.U[0]) || !math.IsNaN(r.U[1]) || math.IsNaN(r.U[2]) {
			t.Errorf("uncertainties %v", r.U)
		}
		near(t, "product", r.Values[0]*r.Values[1], 1.99, 1e-6)
		if r.DOF != 3 {
			t.Errorf("dof %d", r.DOF)
		}
	}
	// a prior tells them apart
	p.Numeric = false
	p.Parameters[1].Prior = &Prior{Value: 2, U: 0.01}
	if r := fit(t, p); r.Status != Converged || math.IsNaN(r.U[0]) {
		t.Errorf("with prior: %s %v", r.Status, r.U)
	}
}

// Effective variance: weights that depend on the fit end where the fit and the
// weights agree.
func TestReweight(t *testing.T) {
	p, _ := decay(25, 4)
	const ut = 1.0 // s, of the times
	base := append([]float64(nil), p.U...)
	at := func(th []float64, i int) float64 {
		s := th[0] / th[1] * math.Exp(-20*float64(i)/th[1]) * ut
		return math.Hypot(base[i], s)
	}
	p.Reweight = func(th, f, u []float64, g *Effects) error {
		for i := range u {
			u[i] = at(th, i)
		}
		return nil
	}
	r := fit(t, p)
	for i := range r.Weights {
		u := at(r.Values, i)
		near(t, "weight", r.Weights[i], 1/(u*u), 1e-9)
	}
	q, _ := decay(25, 4)
	for i := range q.U {
		q.U[i] = at(r.Values, i)
	}
	b := fit(t, q)
	for j := range b.Values {
		near(t, "value", r.Values[j], b.Values[j], 1e-9)
	}
	if r.Reweighting < 2 {
		t.Errorf("reweighted %d times", r.Reweighting)
	}
}

func TestRefitter(t *testing.T) {
	p, _ := decay(40, 5)
	p.Parameters[1].Prior = &Prior{Value: 300, U: 10}
	r := fit(t, p)
	w := r.NewRefitter()
	src := random.New(7, "trial", 0)
	y := make([]float64, len(p.Y))
	for trial := 0; trial < 50; trial++ {
		for i := range y {
			y[i] = r.Fitted[i] + p.U[i]*src.Normal()
		}
		pri := []float64{0, 300 + 10*src.Normal(), 0}
		theta := append([]float64(nil), r.Values...)
		if _, err := w.Fit(y, pri, nil, theta); err != nil {
			t.Fatal(err)
		}
		q := *p
		q.Y = y
		q.Parameters = append([]Parameter(nil), p.Parameters...)
		q.Parameters[1].Prior = &Prior{Value: pri[1], U: 10}
		full := fit(t, &q)
		for j := range theta {
			if d := math.Abs(theta[j] - full.Values[j]); d > 1e-7*full.U[j] {
				t.Errorf("trial %d parameter %d differs by %g of its uncertainty", trial, j, d/full.U[j])
			}
		}
	}
	theta := make([]float64, 3)
	if a := testing.AllocsPerRun(100, func() {
		copy(theta, r.Values)
		if _, err := w.Fit(y, nil, nil, theta); err != nil {
			t.Fatal(err)
		}
	}); a != 0 {
		t.Errorf("%v allocations a refit", a)
	}
	// far from the fit the full search takes over
	copy(theta, []float64{1e-10, 5000, 0})
	if _, err := w.Fit(p.Y, nil, nil, theta); err != nil {
		t.Fatal(err)
	}
	for j := range theta {
		near(t, "from afar", theta[j], r.Values[j], 1e-7)
	}
}

func TestUnknownNoise(t *testing.T) {
	p, _ := decay(20, 6)
	p.U = nil
	r := fit(t, p)
	if !r.ScaledByResiduals || !math.IsNaN(r.PValue) || len(r.Warnings) == 0 {
		t.Errorf("scaled %v, p %v, warnings %v", r.ScaledByResiduals, r.PValue, r.Warnings)
	}
	q, _ := decay(20, 6)
	for i := range q.U {
		q.U[i] = r.ResidualSD
	}
	b := fit(t, q)
	for j := range b.U {
		near(t, "uncertainty", r.U[j], b.U[j], 1e-9)
	}
	near(t, "Birge ratio at that noise", b.BirgeRatio, 1, 1e-12)
	// with a prior the noise is found so that chi-squared is its degrees of freedom
	p.Parameters[1].Prior = &Prior{Value: 310, U: 3}
	c := fit(t, p)
	near(t, "chi-squared", c.ChiSquared, float64(c.DOF), 1e-9)
}

func TestBadInput(t *testing.T) {
	lo := 400.0
	for _, c := range []struct {
		change func(p *Problem)
		want   string
	}{
		{func(p *Problem) { p.Y[3] = math.NaN() }, "reading 4 is NaN"},
		{func(p *Problem) { p.Y[3] = math.Inf(1) }, "reading 4 is +Inf"},
		{func(p *Problem) { p.U[2] = 0 }, "uncertainty of reading 3 is 0"},
		{func(p *Problem) { p.U[2] = -1 }, "uncertainty of reading 3 is -1"},
		{func(p *Problem) { p.U = p.U[:4] }, "4 uncertainties for 5 readings"},
		{func(p *Problem) { p.Y, p.U = nil, nil }, "no readings"},
		{func(p *Problem) { p.Y, p.U = p.Y[:2], p.U[:2] }, "3 parameters can't be estimated from 2 readings"},
		{func(p *Problem) { p.Parameters[1].Lower = &lo }, "start of tau is 100, outside its bounds"},
		{func(p *Problem) { p.Parameters[0].Prior = &Prior{1, 0} }, "prior of charge"},
		{func(p *Problem) { p.Eval = nil }, "Eval is nil"},
		{func(p *Problem) {
			p.Eval = func(th, f []float64, jac [][]float64) error { f[0] = math.NaN(); return nil }
		}, "model is NaN for reading 1 at the start"},
		{func(p *Problem) {
			p.Eval = func(th, f []float64, jac [][]float64) error { return errors.New("log of a negative") }
		}, "log of a negative"},
		{func(p *Problem) {
			p.U, p.Covariance = nil, mat.NewSymDense(5, []float64{1, 2, 0, 0, 0, 2, 1, 0, 0, 0, 0, 0, 1, 0, 0, 0, 0, 0, 1, 0, 0, 0, 0, 0, 1})
		}, "not positive definite"},
	} {
		p, _ := decay(5, 1)
		c.change(p)
		r, err := Fit(context.Background(), p, Settings{})
		if err == nil || r != nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("want %q, got %v", c.want, err)
		}
	}
}

func TestCancel(t *testing.T) {
	p, _ := decay(40, 1)
	ctx, cancel := context.WithCancel(context.Background())
	inner, calls := p.Eval, 0
	p.Eval = func(th, f []float64, jac [][]float64) error {
		if calls++; calls == 3 {
			cancel()
		}
		return inner(th, f, jac)
	}
	r, err := Fit(ctx, p, Settings{})
	if !errors.Is(err, context.Canceled) || r != nil || calls > 4 {
		t.Errorf("cancelled fit returned %v, %v after %d calls", r, err, calls)
	}
}

// A start from which the readings do not respond at all: scaled starts find the
// peak, and the result says so.
func TestRestart(t *testing.T) {
	x := make([]float64, 41)
	p := &Problem{Y: make([]float64, 41), U: make([]float64, 41), Parameters: []Parameter{{Name: "height", Start: 10}, {Name: "centre", Start: 60}}}
	for i := range x {
		x[i] = 0.5 * float64(i)
		p.Y[i] = 3*math.Exp(-(x[i]-7)*(x[i]-7)/4) + 0.01*math.Sin(float64(7*i*i))
		p.U[i] = 0.01
	}
	p.Eval = func(b, f []float64, jac [][]float64) error {
		for i, v := range x {
			d := v - b[1]
			e := math.Exp(-d * d / 4)
			f[i] = b[0] * e
			if jac != nil {
				jac[0][i], jac[1][i] = e, b[0]*e*d/2
			}
		}
		return nil
	}
	r := fit(t, p)
	if r.Status != Converged || r.Restarts == 0 || len(r.Warnings) == 0 || !strings.Contains(r.Warnings[0].Error(), "scaled starts") {
		t.Fatalf("%s (%s), %d restarts, %v", r.Status, r.Reason, r.Restarts, r.Warnings)
	}
	near(t, "centre", r.Values[1], 7, 1e-2)
	again := fit(t, p)
	for j := range r.Values {
		if r.Values[j] != again.Values[j] {
			t.Errorf("two runs gave %v and %v", r.Values[j], again.Values[j])
		}
	}
	s, err := Fit(context.Background(), p, Settings{NoRestarts: true})
	if err != nil || s.Status == Converged {
		t.Errorf("without restarts: %v %v", s.Status, err)
	}
	for j := range s.U {
		if !math.IsNaN(s.U[j]) {
			t.Errorf("uncertainty %v where nothing is known", s.U[j])
		}
	}
}

// Overflow, errors and undefined values during the search shorten the step and
// never reach the result.
func TestHostileModels(t *testing.T) {
	x := []float64{1, 2, 3, 4, 5, 6, 7, 8}
	for name, f := range map[string]func(b []float64, x float64) float64{
		"exponential": func(b []float64, x float64) float64 { return b[0] * math.Exp(b[1]*x) },
		"logarithm":   func(b []float64, x float64) float64 { return b[0] * math.Log(b[1]*x) },
		"root":        func(b []float64, x float64) float64 { return b[0] * math.Sqrt(b[1]-x) },
		"pole":        func(b []float64, x float64) float64 { return b[0] / (x - b[1]) },
	} {
		for _, start := range [][]float64{{1, 20}, {1e6, 9}, {-3, 100}, {1, 0.5}, {1e-300, 1e3}} {
			p := &Problem{Numeric: true, Parameters: []Parameter{{Name: "a", Start: start[0]}, {Name: "b", Start: start[1]}}, Y: make([]float64, len(x)), U: make([]float64, len(x))}
			for i := range x {
				p.Y[i] = f([]float64{2, 8.5}, x[i])
				if name == "exponential" {
					p.Y[i] = f([]float64{2, -0.5}, x[i])
				}
				p.U[i] = 0.01 * math.Abs(p.Y[i])
			}
			calls := 0
			p.Eval = func(b, out []float64, _ [][]float64) error {
				calls++
				for i, v := range x {
					out[i] = f(b, v)
				}
				return nil
			}
			r, err := Fit(context.Background(), p, Settings{})
			if err != nil {
				continue // the start is outside the domain and the error says so
			}
			if calls > 200000 {
				t.Errorf("%s from %v: %d calls", name, start, calls)
			}
			for j := range r.Values {
				if !finite(r.Values[j]) || math.IsInf(r.U[j], 0) || (math.IsNaN(r.U[j]) && len(r.Warnings) == 0) {
					t.Errorf("%s from %v: %s, %v ± %v, warnings %v", name, start, r.Status, r.Values, r.U, r.Warnings)
				}
			}
			if r.Status == Converged && r.PValue < 0.99 && math.Abs(r.Values[0]-2) < 0.01 {
				t.Errorf("%s from %v: %s with chi-squared %v at %v", name, start, r.Status, r.ChiSquared, r.Values)
			}
		}
	}
}

// Effects that overlap in a long chain are refused with the limit, not worked
// on for ever.
func TestTooManyOverlappingEffects(t *testing.T) {
	const n = 2000
	p, _ := decay(n, 1)
	g := &Effects{Columns: n + 1, Start: []int32{0}}
	for i := 0; i < n; i++ {
		g.Column = append(g.Column, int32(i), int32(i+1))
		g.Load = append(g.Load, 1e-12, 1e-12)
		g.Start = append(g.Start, int32(len(g.Load)))
	}
	p.Effects = g
	if r, err := Fit(context.Background(), p, Settings{}); err == nil || r != nil || !strings.Contains(err.Error(), "at most 400") {
		t.Errorf("%v, %v", r, err)
	}
	// as many groups as one likes, when no two share a reading
	for i := 0; i < n; i++ {
		g.Column[i] = int32(i / 2)
	}
	g.Column, g.Load = g.Column[:n], g.Load[:n]
	for i := range g.Start {
		g.Start[i] = int32(i)
	}
	if r, err := Fit(context.Background(), p, Settings{}); err != nil || r.Status != Converged {
		t.Errorf("%v, %v", r, err)
	}
}

// Stated uncertainties must be the scatter of the estimates: the truth is fixed
// and readings, group errors and priors are drawn about it. Pulls have mean 0
// and standard deviation 1, chi-squared probabilities are uniform.
func TestPulls(t *testing.T) {
	const runs, n = 2000, 24
	g := &Effects{Columns: n/4 + 1, Start: []int32{0}}
	for i := 0; i < n; i++ {
		g.Column = append(g.Column, int32(i/4), n/4)
		g.Load = append(g.Load, 2e-11, 1e-11)
		g.Start = append(g.Start, int32(len(g.Load)))
	}
	var sum, square [3]float64
	var probabilities []float64
	for run := 0; run < runs; run++ {
		p, truth := decay(n, uint64(1000+run))
		src := random.New(42, "pulls", uint64(run))
		e := make([]float64, g.Columns)
		src.FillNormal(e)
		for i := range p.Y {
			for k := g.Start[i]; k < g.Start[i+1]; k++ {
				p.Y[i] += g.Load[k] * e[g.Column[k]]
			}
		}
		p.Effects = g
		p.Parameters[1].Prior = &Prior{Value: truth[1] + 4*src.Normal(), U: 4}
		r := fit(t, p)
		for j := range sum {
			pull := (r.Values[j] - truth[j]) / r.U[j]
			sum[j] += pull
			square[j] += pull * pull
		}
		probabilities = append(probabilities, r.PValue)
	}
	for j := range sum {
		mean := sum[j] / runs
		sd := math.Sqrt(square[j]/runs - mean*mean)
		if math.Abs(mean) > 0.08 || sd < 0.95 || sd > 1.05 {
			t.Errorf("pulls of parameter %d: mean %.3f, standard deviation %.3f", j, mean, sd)
		}
	}
	sort.Float64s(probabilities)
	d := 0.0
	for i, p := range probabilities {
		d = math.Max(d, math.Max(p-float64(i)/runs, float64(i+1)/runs-p))
	}
	if d > 1.95/math.Sqrt(runs) { // Kolmogorov's 0.001 point
		t.Errorf("chi-squared probabilities are not uniform: distance %.4f", d)
	}
}
