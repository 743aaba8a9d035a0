package gum

import (
	"errors"
	"fmt"
	"math"
	"strings"

	"gonum.org/v1/gonum/mat"

	"example.org/guardring/pkg/random"
)

// A plan is a model checked and made ready for drawing.
type plan struct {
	model    *Model
	names    []string
	estimate []float64     // of each input
	corr     []Correlation // by position
	free     []int         // inputs drawn on their own
	joints   []joint       // inputs drawn together
	warnings []error
}

// A joint is a set of correlated inputs.
type joint struct {
	member []int
	factor [][]float64 // lower triangle L of the correlation matrix R = LLᵀ, by row
	kind   jointKind
	dof    float64 // multivariate t
	stream string  // of its chi-squared
}

type jointKind int

const (
	jointNormal jointKind = iota
	jointT
	jointCopula
)

func newPlan(m *Model) (*plan, error) {
	p := &plan{model: m, names: make([]string, len(m.Inputs)), estimate: make([]float64, len(m.Inputs))}
	if len(m.Outputs) == 0 {
		return nil, errors.New("the model has no outputs: nothing to propagate to")
	}
	at := make(map[string]int, len(m.Inputs))
	for i, in := range m.Inputs {
		if _, ok := at[in.Name]; ok || in.Name == "" {
			return nil, fmt.Errorf("input %d: name %q is empty or already taken", i+1, in.Name)
		}
		if err := in.Dist.Check(); err != nil {
			return nil, fmt.Errorf("input %s: %w", in.Name, err)
		}
		at[in.Name] = i
		p.names[i], p.estimate[i] = in.Name, in.Dist.Value
	}
	seen := make(map[string]bool, len(m.Outputs))
	for i, o := range m.Outputs {
		if o.Name == "" || seen[o.Name] {
			return nil, fmt.Errorf("output %d: name %q is empty or already taken", i+1, o.Name)
		}
		if o.New == nil {
			return nil, fmt.Errorf("output %s has no formula", o.Name)
		}
		seen[o.Name] = true
	}
	for _, c := range m.Correlations {
		i, ok := at[c.A]
		j, ok2 := at[c.B]
		switch {
		case !ok:
			return nil, unknownName("correlation", c.A, p.names)
		case !ok2:
			return nil, unknownName("correlation", c.B, p.names)
		}
		for _, k := range []int{i, j} {
			if m.Inputs[k].Dist.IsExact() && c.R != 0 {
				return nil, fmt.Errorf("correlation between %s and %s: %s is exact, so nothing can be correlated with it", c.A, c.B, p.names[k])
			}
		}
		p.corr = append(p.corr, Correlation{i, j, c.R})
	}
	if err := checkPairs(p.corr, p.names); err != nil {
		return nil, err
	}
	return p, p.group()
}

// group sorts the inputs into those drawn alone and those drawn together.
func (p *plan) group() error {
	in := p.model.Inputs
	links := append([]Correlation(nil), p.corr...)
	first := make(map[string]int)
	for i := range in {
		b := in[i].Block
		if b == "" {
			continue
		}
		j, ok := first[b]
		if !ok {
			first[b] = i
			j = i
		}
		d, e := &in[i].Dist, &in[j].Dist
		if (d.Shape != ShapeNormal && d.Shape != ShapeT) || d.dof() != e.dof() {
			return fmt.Errorf("inputs %s and %s are marked as read together (block %q): they must be normal or t with the same degrees of freedom", in[j].Name, in[i].Name, b)
		}
		if i != j {
			links = append(links, Correlation{j, i, 1})
		}
	}
	root := components(len(in), links, func(int) bool { return true })
	for i := range in {
		if root[i] != i {
			continue
		}
		var members []int
		for j := i; j < len(in); j++ {
			if root[j] == i {
				members = append(members, j)
			}
		}
		if len(members) == 1 {
			if !in[i].Dist.IsExact() {
				p.free = append(p.free, i)
			}
			continue
		}
		p.joints = append(p.joints, p.newJoint(members))
	}
	return nil
}

func (p *plan) newJoint(members []int) joint {
	in := p.model.Inputs
	j := joint{member: members, stream: "gum/chi-squared/" + in[members[0]].Name}
	place := make(map[int]int, len(members))
	var names []string
	normal, block := true, in[members[0]].Block
	_, j.dof = in[members[0]].Dist.draw()
	for k, i := range members {
		place[i] = k
		d := &in[i].Dist
		names = append(names, in[i].Name)
		_, dof := d.draw()
		normal = normal && (d.Shape == ShapeNormal || d.Shape == ShapeT) && math.IsInf(dof, 1)
		if in[i].Block != block || dof != j.dof {
			block = ""
		}
	}
	n := len(members)
	r := mat.NewSymDense(n, nil)
	for k := range n {
		r.SetSym(k, k, 1)
	}
	for _, c := range p.corr {
		a, ok := place[c.I]
		if b, ok2 := place[c.J]; ok && ok2 {
			r.SetSym(a, b, c.R)
		}
	}
	j.factor = choleskySemi(r)
	switch {
	case normal:
		j.kind = jointNormal
	case block != "":
		j.kind = jointT
	default:
		j.kind = jointCopula
		p.warnings = append(p.warnings, fmt.Errorf("the correlated inputs %s are not all normal of known uncertainty: Monte Carlo joins them by a Gaussian copula, an assumption, and takes r as the correlation of the copula's normals", strings.Join(names, ", ")))
	}
	return j
}

// choleskySemi returns the lower factor of a positive semidefinite matrix; a
// column whose pivot vanishes is zero.
func choleskySemi(r *mat.SymDense) [][]float64 {
	n := r.SymmetricDim()
	l := make([][]float64, n)
	for i := range l {
		l[i] = make([]float64, i+1)
	}
	for j := range n {
		d := r.At(j, j)
		for k := range j {
			d -= l[j][k] * l[j][k]
		}
		if d <= 1e-11 {
			continue
		}
		l[j][j] = math.Sqrt(d)
		for i := j + 1; i < n; i++ {
			s := r.At(i, j)
			for k := range j {
				s -= l[i][k] * l[j][k]
			}
			l[i][j] = s / l[j][j]
		}
	}
	return l
}

// chunk is the number of trials drawn and evaluated at a time: small enough that
// the columns of a usual budget stay in the first-level cache.
const chunk = 500

// A worker draws and evaluates on one goroutine.
type worker struct {
	p    *plan
	eval []Evaluator
	x    [][]float64 // current columns, one an input
	base [][]float64 // their backing
	src  []random.Source
	chi  []random.Source // of joints
	t    []float64       // scratch
	out  [][]float64     // current outputs
	full [][]float64     // their backing
}

// newWorker must be called on the goroutine that called Propagate, see Output.New.
func (p *plan) newWorker() (*worker, error) {
	w := &worker{p: p, x: make([][]float64, len(p.names)), base: make([][]float64, len(p.names)),
		src: make([]random.Source, len(p.names)), chi: make([]random.Source, len(p.joints)), t: make([]float64, chunk)}
	for i := range p.names {
		if p.model.Inputs[i].Dist.IsExact() {
			w.base[i] = []float64{p.estimate[i]}
			w.x[i] = w.base[i]
			continue
		}
		w.base[i] = make([]float64, chunk)
	}
	for _, o := range p.model.Outputs {
		e := o.New()
		if e.Block == nil {
			return nil, fmt.Errorf("output %s: its evaluator has no Block function", o.Name)
		}
		w.eval = append(w.eval, e)
		w.full = append(w.full, make([]float64, chunk))
	}
	w.out = make([][]float64, len(w.full))
	return w, nil
}

// start opens the streams of a block.
func (w *worker) start(seed, block uint64) {
	for _, i := range w.p.free {
		w.src[i] = random.New(seed, w.p.names[i], block)
	}
	for k := range w.p.joints {
		j := &w.p.joints[k]
		for _, i := range j.member {
			w.src[i] = random.New(seed, w.p.names[i], block)
		}
		if j.kind == jointT {
			w.chi[k] = random.New(seed, j.stream, block)
		}
	}
}

// next draws n ≤ chunk trials and evaluates the outputs into w.out.
func (w *worker) next(n int) {
	in := w.p.model.Inputs
	for _, i := range w.p.free {
		w.x[i] = w.base[i][:n]
		in[i].Dist.Fill(&w.src[i], w.x[i])
	}
	for k := range w.p.joints {
		w.drawJoint(k, n)
	}
	for o := range w.eval {
		w.out[o] = w.full[o][:n]
		w.eval[o].Block(w.x, w.out[o])
	}
}

func (w *worker) drawJoint(k, n int) {
	j := &w.p.joints[k]
	in := w.p.model.Inputs
	for _, i := range j.member {
		w.x[i] = w.base[i][:n]
		w.src[i].FillNormal(w.x[i])
	}
	if j.kind == jointT {
		for r := range w.t[:n] {
			w.t[r] = math.Sqrt(j.dof / (2 * w.chi[k].Gamma(j.dof/2)))
		}
	}
	// From the last member up, each row needs only the normals not yet replaced.
	for a := len(j.member) - 1; a >= 0; a-- {
		i := j.member[a]
		d := &in[i].Dist
		x, l := w.x[i], j.factor[a]
		for r := range x {
			x[r] *= l[a]
		}
		for b := range a {
			if c := l[b]; c != 0 {
				for r, z := range w.x[j.member[b]] {
					x[r] += c * z
				}
			}
		}
		switch j.kind {
		case jointNormal:
			for r := range x {
				x[r] = d.Value + d.U*x[r]
			}
		case jointT:
			scale, _ := d.draw()
			for r := range x {
				x[r] = d.Value + scale*w.t[r]*x[r]
			}
		case jointCopula:
			for r := range x {
				x[r] = d.quantileNormal(x[r])
			}
		}
	}
}
