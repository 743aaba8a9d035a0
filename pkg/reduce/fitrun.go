package reduce

import (
	"context"
	"errors"
	"fmt"
	"math"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/formula"
	"example.org/guardring/pkg/lsq"
	"example.org/guardring/pkg/si"
)

// fitData is a plan with the readings that have all their values, SI.
type fitData struct {
	*fitPlan
	t      *bench.Table
	record []int       // data record of each row
	y, u   []float64   // u nil: unknown
	x, ux  [][]float64 // by predictor; ux[k] nil: exact
	left   int         // records left out for a missing value
	pars   []lsq.Parameter
	cols   [][]float64 // columns of the program's variables
	theta  [][]float64 // of the parameters: length one each, in cols too
}

// data takes the columns in use from the table.
func (p *fitPlan) data(t *bench.Table) (*fitData, error) {
	d := &fitData{fitPlan: p, t: t}
	for _, h := range p.headers() {
		c := t.Column(h)
		if c < 0 || t.Number[c] == nil {
			return nil, fmt.Errorf("%s: column %s was not read as numbers", t.File, h)
		}
	}
	number := func(c *fitColumn) []float64 { return t.Number[t.Column(c.header)] }
	needed := [][]float64{}
	for _, h := range p.headers() {
		needed = append(needed, t.Number[t.Column(h)])
	}
	for i := range t.N {
		whole := true
		for _, v := range needed {
			whole = whole && !math.IsNaN(v[i])
		}
		if whole {
			d.record = append(d.record, i)
		}
	}
	d.left = t.N - len(d.record)
	if len(d.record) == 0 {
		return nil, fmt.Errorf("%s: no reading has a value in each of the columns %s", t.File, strings.Join(p.headers(), ", "))
	}
	if d.left > 0 {
		noun := "readings are"
		if d.left == 1 {
			noun = "reading is"
		}
		d.warnings = append(d.warnings, fmt.Errorf("%d of %d %s left out for a missing value", d.left, t.N, noun))
	}
	take := func(c *fitColumn, delta bool) []float64 {
		v := number(c)
		out := make([]float64, len(d.record))
		for i, r := range d.record {
			if delta {
				out[i] = c.unit.DeltaToSI(v[r])
			} else {
				out[i] = c.unit.ToSI(v[r])
			}
		}
		return out
	}
	spread := func(n noiseSpec, what string, least float64) ([]float64, error) {
		if n.column == nil {
			out := make([]float64, len(d.record))
			for i := range out {
				out[i] = n.value
			}
			return out, nil
		}
		out := take(n.column, true)
		for i, v := range out {
			if !(v >= least) || v == 0 && least > 0 {
				return nil, &bench.Error{File: t.File, Line: t.Line(d.record[i]), Key: "column " + n.column.header,
					Problem: fmt.Sprintf("%s is %s; it must be above zero", what, si.Exact(number(n.column)[d.record[i]]))}
			}
		}
		return out, nil
	}
	if d.y = make([]float64, len(d.record)); !p.implicit {
		d.y = take(&p.response, false)
	}
	var err error
	for k := range p.predictors {
		d.x = append(d.x, take(&p.predictors[k], false))
		d.ux = append(d.ux, nil)
		if n, ok := p.noisy[k]; ok {
			if d.ux[k], err = spread(n, "the noise of "+p.predictors[k].name, 0); err != nil {
				return nil, err
			}
		}
	}
	least := math.SmallestNonzeroFloat64
	if len(p.noisy) > 0 {
		least = 0
	}
	switch {
	case p.weights != nil:
		for i, w := range take(p.weights, true) {
			if !(w > 0) {
				return nil, &bench.Error{File: t.File, Line: t.Line(d.record[i]), Key: "column " + p.weights.header,
					Problem: fmt.Sprintf("the weight is %s; it must be above zero", si.Exact(w))}
			}
			d.u = append(d.u, 1/math.Sqrt(w))
		}
	case p.noise.given:
		if d.u, err = spread(p.noise, "the noise of "+p.response.name, least); err != nil {
			return nil, err
		}
	}
	if err := d.parameters(); err != nil {
		return nil, err
	}
	return d, d.defined()
}

// parameters states the parameters for the estimator.
func (d *fitData) parameters() error {
	n := len(d.params)
	d.cols = make([][]float64, n+len(d.predictors))
	for k, v := range d.varOfPred {
		d.cols[v] = d.x[k]
	}
	for j, name := range d.params {
		q := lsq.Parameter{Name: name}
		if b, ok := d.s.Bounds[name]; ok {
			if !math.IsInf(b[0], -1) {
				q.Lower = &b[0]
			}
			if !math.IsInf(b[1], 1) {
				q.Upper = &b[1]
			}
		}
		if p, ok := d.s.Priors[name]; ok {
			q.Prior = &lsq.Prior{Value: float64(p.Value), U: float64(p.U)}
			q.Start = q.Prior.Value
		}
		if v, ok := d.s.Start[name]; ok {
			q.Start = v
		}
		for _, f := range d.s.Fixed {
			q.Fixed = q.Fixed || f == name
		}
		if b, ok := d.s.Bounds[name]; ok && !q.Fixed {
			if !(b[0] < b[1]) {
				return fmt.Errorf("the bounds of %s (--bound) are %s to %s; the lower must be below the upper, or fix the parameter (--fix)", name, si.Exact(b[0]), si.Exact(b[1]))
			}
			if q.Start < b[0] || q.Start > b[1] {
				return fmt.Errorf("%s starts at %s (--start), outside its bounds %s (--bound); move the start or the bound", name, si.Exact(q.Start), between(b))
			}
		}
		d.pars = append(d.pars, q)
		one := []float64{q.Start}
		d.theta = append(d.theta, one)
		d.cols[d.varOfParam[j]] = one
	}
	return nil
}

// between says a pair of bounds in words.
func between(b [2]float64) string {
	switch {
	case math.IsInf(b[0], -1):
		return "up to " + si.Exact(b[1])
	case math.IsInf(b[1], 1):
		return si.Exact(b[0]) + " and above"
	}
	return si.Exact(b[0]) + " to " + si.Exact(b[1])
}

// defined checks that the formula has a value at the start for every reading.
func (d *fitData) defined() error {
	f := make([]float64, len(d.y))
	d.prog.Workspace().Block(d.cols, f)
	for i, v := range f {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			continue
		}
		var at []string
		for j, n := range d.params {
			at = append(at, n+" = "+si.Exact(d.pars[j].Start))
		}
		for k, c := range d.predictors {
			at = append(at, c.name+" = "+si.Exact(d.x[k][i]))
		}
		what := "not a number"
		if math.IsInf(v, 0) {
			what = "infinite"
		}
		return &bench.Error{File: d.file, Line: d.t.Line(d.record[i]), Problem: fmt.Sprintf("the formula is %s at the start (%s); choose another start, or leave the reading out", what, strings.Join(at, ", "))}
	}
	return nil
}

// evaluator fills values and derivatives by parameters of the formula at theta.
func (d *fitData) evaluator() func(theta, f []float64, jac [][]float64) error {
	w := d.prog.Workspace()
	wrt := make([]int, 0, len(d.params))
	grad := make([][]float64, 0, len(d.params))
	return func(theta, f []float64, jac [][]float64) error {
		for j, v := range theta {
			d.theta[j][0] = v
		}
		if jac == nil {
			w.Block(d.cols, f)
			return nil
		}
		wrt, grad = wrt[:0], grad[:0]
		for j := range d.params {
			if jac[j] != nil {
				wrt, grad = append(wrt, d.varOfParam[j]), append(grad, jac[j])
			}
		}
		w.BlockGradient(d.cols, wrt, f, grad)
		return nil
	}
}

// slopes fills the derivatives by the noisy predictors, beside ux, and returns them.
func (d *fitData) slopes(w *formula.Workspace, theta []float64, dx [][]float64) {
	for j, v := range theta {
		d.theta[j][0] = v
	}
	var wrt []int
	var grad [][]float64
	for k := range d.predictors {
		if d.ux[k] != nil {
			wrt, grad = append(wrt, d.varOfPred[k]), append(grad, dx[k])
		}
	}
	w.BlockGradient(d.cols, wrt, nil, grad)
}

// effective returns the standard uncertainty of y − f with that of the predictors.
func (d *fitData) effective(w *formula.Workspace, theta []float64, dx [][]float64, u []float64) {
	d.slopes(w, theta, dx)
	for i := range u {
		v := 0.0
		if d.u != nil {
			v = d.u[i] * d.u[i]
		}
		for k := range d.predictors {
			if d.ux[k] != nil {
				s := dx[k][i] * d.ux[k][i]
				v += s * s
			}
		}
		u[i] = math.Sqrt(v)
	}
}

// leastSquares fits with errors of the response alone, or effective variance.
func (d *fitData) leastSquares(ctx context.Context) (*FormulaFit, error) {
	p := &lsq.Problem{Parameters: d.pars, Y: d.y, U: d.u, Relative: d.weights != nil, Eval: d.evaluator(), Linear: d.linear()}
	method := "least-squares"
	if len(d.noisy) > 0 {
		method = "effective-variance"
		w := d.prog.Workspace()
		dx := grid(len(d.predictors), len(d.y))
		p.U = append([]float64(nil), d.u...)
		p.Reweight = func(theta, _, u []float64, _ *lsq.Effects) error {
			d.effective(w, theta, dx, u)
			return nil
		}
	}
	r, err := lsq.Fit(ctx, p, lsq.Settings{})
	if err != nil {
		return nil, d.placed(err)
	}
	o := &formulaOutcome{status: r.Status, reason: r.Reason, values: r.Values, u: r.U, free: r.Free, chi2: r.ChiSquared, p: r.PValue,
		birge: r.BirgeRatio, rss: r.RSS, sd: r.ResidualSD, dof: r.DOF, iterations: r.Iterations, condition: r.Condition,
		confounded: r.Confounded, atBound: r.AtBound, scaled: r.ScaledByResiduals, warnings: r.Warnings, method: method, covariance: r.Covariance.At}
	if o.vanish = r.ResidualsVanish; o.vanish {
		unknown := math.NaN()
		o.u = append([]float64(nil), r.U...)
		for _, j := range r.Free {
			o.u[j] = unknown
		}
		o.covariance = func(int, int) float64 { return unknown }
	}
	rows := &Rows{Fitted: r.Fitted, Residual: r.Residuals, Standardised: r.Standardised, Leverage: r.Leverage, Studentised: r.Studentised}
	for _, w := range r.Weights {
		rows.U = append(rows.U, 1/math.Sqrt(w))
	}
	f := d.outcome(o, rows)
	f.Record.AICc = Number(r.AICc())
	d.test(f, r.Whitened(), r.DurbinWatson)
	if err := d.second(ctx, f, r); err != nil {
		return nil, err
	}
	return d.finish(f), nil
}

// linear reports whether the formula is linear in its free parameters.
func (d *fitData) linear() bool {
	var wrt []int
	for j := range d.pars {
		if !d.pars[j].Fixed {
			wrt = append(wrt, d.varOfParam[j])
		}
	}
	return len(wrt) > 0 && d.prog.LinearIn(wrt)
}

// errorsInVariables fits with errors of the response and of predictors.
func (d *fitData) errorsInVariables(ctx context.Context) (*FormulaFit, error) {
	w := d.prog.Workspace()
	cols := append([][]float64(nil), d.cols...)
	p := &lsq.EIVProblem{Parameters: d.pars, X: d.x, UX: d.ux, Eval: func(theta []float64, x [][]float64, f []float64, jac, dx [][]float64) error {
		for j, v := range theta {
			d.theta[j][0] = v
		}
		for k, v := range d.varOfPred {
			cols[v] = x[k]
		}
		var wrt []int
		var grad [][]float64
		for j := range jac {
			if jac[j] != nil {
				wrt, grad = append(wrt, d.varOfParam[j]), append(grad, jac[j])
			}
		}
		for k := range dx {
			if dx[k] != nil {
				wrt, grad = append(wrt, d.varOfPred[k]), append(grad, dx[k])
			}
		}
		if len(wrt) == 0 {
			w.Block(cols, f)
			return nil
		}
		w.BlockGradient(cols, wrt, f, grad)
		return nil
	}}
	if !d.implicit {
		p.Y, p.UY = d.y, d.u
	}
	r, err := lsq.FitEIV(ctx, p, lsq.Settings{})
	if err != nil {
		return nil, d.placed(err)
	}
	n := len(d.y)
	rows := &Rows{Fitted: make([]float64, n), Residual: make([]float64, n), U: make([]float64, n), Standardised: r.Standardised,
		Leverage: make([]float64, n), Studentised: make([]float64, n)}
	// The rows of the record are those of the equivalent fit with effective variance
	// at the estimates: residuals along the response, leverage of J/u. The
	// response of an equation is left − right, which it makes 0.
	jac := grid(len(d.pars), n)
	if err := d.evaluator()(r.Values, rows.Fitted, jac); err != nil {
		return nil, err
	}
	if d.effective(w, r.Values, grid(len(d.predictors), n), rows.U); d.implicit {
		d.y, rows.Fitted = rows.Fitted, d.y
		for i, v := range r.Standardised {
			r.Standardised[i] = -v
		}
	}
	rss := 0.0
	for i := range d.y {
		rows.Residual[i] = d.y[i] - rows.Fitted[i]
		rss += rows.Residual[i] * rows.Residual[i]
		h := 0.0
		for _, a := range r.Free {
			for _, b := range r.Free {
				h += jac[a][i] * r.Covariance.At(a, b) * jac[b][i]
			}
		}
		rows.Leverage[i] = h / (rows.U[i] * rows.U[i])
		rows.Studentised[i] = math.NaN()
		if v := 1 - rows.Leverage[i]; v > 1e-12 {
			rows.Studentised[i] = r.Standardised[i] / math.Sqrt(v)
		}
	}
	sd := math.NaN()
	if r.DOF > 0 {
		sd = math.Sqrt(rss / float64(r.DOF))
	}
	o := &formulaOutcome{status: r.Status, reason: r.Reason, values: r.Values, u: r.U, free: r.Free, chi2: r.ChiSquared, p: r.PValue,
		birge: r.BirgeRatio, rss: rss, sd: sd, dof: r.DOF, iterations: r.Iterations, condition: r.Condition, confounded: r.Confounded,
		atBound: r.AtBound, scaled: r.ScaledByResiduals, warnings: r.Warnings, method: "errors-in-variables", covariance: r.Covariance.At}
	f := d.outcome(o, rows)
	f.Record.AICc = Number(math.NaN())
	if k := float64(len(r.Free)); float64(n)-k-1 > 0 {
		f.Record.AICc = Number(r.ChiSquared + 2*k + 2*k*(k+1)/(float64(n)-k-1))
	}
	d.test(f, r.Standardised, nil)
	return d.finish(f), nil
}

// placed says it in the terms of the table.
func (d *fitData) placed(err error) error {
	if errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded) {
		return err
	}
	return errors.New(strings.TrimPrefix(err.Error(), "lsq: "))
}
