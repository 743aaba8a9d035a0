package reduce

import (
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/model"
)

// series are the parts of a bench that have parameters of their own.
type series struct {
	names []string // words of the row columns, e.g. "as-left, 20 kV/m"
	of    []int    // series of each data record
	// own[s][j] is where series s keeps the kind's scalar j; scalars that are not
	// its own stand at j.
	own  [][]int
	swap []int // the kind's scalars that are a series' own
	base int   // scalars of the kind
}

// SeriesOf splits the data records of a bench by the words in the row columns
// that its kind names (model.Kind.SeriesBy): the series of each record and the
// names in order of first appearance. A bench without such columns, or with one
// word in each, is one series without a name.
func SeriesOf(b *bench.Bench) (of []int, names []string) {
	var labels []*bench.Labels
	for _, role := range b.Kind.SeriesBy {
		if l := b.Rows.Labels[role]; l != nil {
			labels = append(labels, l)
		}
	}
	of = make([]int, b.Rows.N)
	if len(labels) == 0 {
		return of, []string{""}
	}
	seen := map[string]int{}
	for i := range of {
		words := make([]string, 0, len(labels))
		for _, l := range labels {
			if w := l.At(i); w != "" {
				words = append(words, w)
			}
		}
		name := strings.Join(words, ", ")
		s, ok := seen[name]
		if !ok {
			// Zeros and blanks may serve every series and make none of their own.
			if b.Rows.Kind[i] != bench.Reading {
				of[i] = 0
				continue
			}
			s = len(names)
			seen[name] = s
			names = append(names, name)
		}
		of[i] = s
	}
	if len(names) <= 1 {
		clear(of)
		return of, []string{""}
	}
	return of, names
}

// SeriesName is the name of a scalar or measurand of a series.
func SeriesName(name, series string) string {
	if series == "" {
		return name
	}
	return name + " (" + series + ")"
}

// expandSeries gives every series its own copy of the scalars marked Own: the
// kind and the bench of the chain become longer, and the model takes one more
// column, the series of the row, by which it picks the scalars of a prediction.
func (c *chain) expandSeries() {
	of, names := SeriesOf(c.b)
	if len(names) < 2 {
		return
	}
	kind, b := *c.b.Kind, *c.b
	s := &series{names: names, of: of, base: len(kind.Scalars)}
	kind.Scalars = append([]model.Scalar(nil), kind.Scalars...)
	b.Scalars = append([]bench.Scalar(nil), b.Scalars...)
	for j := range c.b.Kind.Scalars {
		if c.b.Kind.Scalars[j].Own {
			s.swap = append(s.swap, j)
		}
	}
	for n, name := range names {
		own := make([]int, s.base)
		for j := range own {
			own[j] = j
			if !c.b.Kind.Scalars[j].Own {
				continue
			}
			if n > 0 {
				own[j] = len(kind.Scalars)
				kind.Scalars = append(kind.Scalars, kind.Scalars[j])
				b.Scalars = append(b.Scalars, c.b.Scalars[j])
				c.q = append(c.q, c.q[j])
			}
			b.Scalars[own[j]].Name = SeriesName(c.b.Scalars[j].Name, name)
			kind.Scalars[own[j]].Name = SeriesName(kind.Scalars[own[j]].Name, name)
		}
		s.own = append(s.own, own)
	}
	b.Kind = &kind
	c.b, c.series = &b, s
	c.q = append([]float64(nil), c.q...)
	c.m = s.wrap(c.m)
}

// view is the scalars that series n sees, in the kind's order.
func view[T any](s *series, n int, q []T) []T {
	v := make([]T, s.base)
	for j, i := range s.own[n] {
		v[j] = q[i]
	}
	return v
}

// wrap makes the model of all series from the model of one.
func (s *series) wrap(m *model.Model) *model.Model {
	w := *m
	w.Row = func(q, x []jet.Jet) jet.Jet {
		// The scalars of the series change places with those of the first for the
		// length of the call: a prediction is the innermost loop and q is its
		// caller's own.
		last := len(x) - 1
		own := s.own[int(x[last].V)]
		for _, j := range s.swap {
			q[j], q[own[j]] = q[own[j]], q[j]
		}
		f := m.Row(q[:s.base], x[:last])
		for _, j := range s.swap {
			q[j], q[own[j]] = q[own[j]], q[j]
		}
		return f
	}
	w.Block = s.block(m)
	w.Start = func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
		start := make([]float64, len(free))
		last := len(x) - 1
		for n := range s.names {
			rows := s.rows(n, x[last])
			at := map[int]int{} // place in q to place in the kind
			for j, i := range s.own[n] {
				at[i] = j
			}
			var part, where []int
			for k, f := range free {
				if j, ok := at[f]; ok {
					part = append(part, j)
					where = append(where, k)
				}
			}
			v, err := m.Start(view(s, n, q), part, pickAll(x[:last], rows), pick(y, rows))
			if err != nil {
				return nil, err
			}
			for k, w := range where {
				start[w] = v[k]
			}
		}
		return start, nil
	}
	w.Check = func(q []float64, x [][]float64, y []float64) ([]error, error) {
		last := len(x) - 1
		var warn []error
		said := map[string]bool{}
		for n := range s.names {
			rows := s.rows(n, x[last])
			ws, err := m.Check(view(s, n, q), pickAll(x[:last], rows), pick(y, rows))
			if re, ok := err.(*model.RowError); ok {
				return nil, &model.RowError{Row: rows[re.Row], Err: re.Err}
			} else if err != nil {
				return nil, err
			}
			for _, e := range ws {
				if !said[e.Error()] {
					said[e.Error()] = true
					warn = append(warn, e)
				}
			}
		}
		return warn, nil
	}
	w.Hazard = func(q []float64, x [][]float64) model.Hazard { return m.Hazard(view(s, 0, q), x[:len(x)-1]) }
	w.Factors = map[string]func(q []jet.Jet) jet.Jet{}
	for name, f := range m.Factors {
		w.Factors[name] = func(q []jet.Jet) jet.Jet { return f(view(s, 0, q)) }
	}
	w.Measurands = nil
	for n, name := range s.names {
		for _, d := range m.Measurands {
			value := d.Value
			d.Name = SeriesName(d.Name, name)
			d.Value = func(q []jet.Jet) jet.Jet { return value(view(s, n, q)) }
			w.Measurands = append(w.Measurands, d)
		}
	}
	w.Measurands = append(w.Measurands, s.shifts(m)...)
	w.Curve = nil // taken series by series
	w.Causes = nil
	for _, cause := range m.Causes {
		signature := cause.Signature
		cause.Signature = func(q, x []float64, f, t float64) float64 {
			last := len(x) - 1
			return signature(view(s, int(x[last]), q), x[:last], f, t)
		}
		w.Causes = append(w.Causes, cause)
	}
	return &w
}

// block predicts runs of rows of one series at a time.
func (s *series) block(m *model.Model) func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
	if m.Block == nil {
		return nil
	}
	return func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
		last := len(x) - 1
		var wrtSpace [8]int
		var jacSpace [8][]float64
		for a := lo; a < hi; {
			n := int(x[last][a])
			b := a + 1
			for b < hi && x[last][b] == x[last][a] {
				b++
			}
			part, columns := wrtSpace[:0], jacSpace[:0]
			for k, j := range wrt {
				local := s.local(n, j)
				if jac != nil {
					if local < 0 {
						clear(jac[k][a:b]) // another series' own
						continue
					}
					columns = append(columns, jac[k])
				}
				if local >= 0 {
					part = append(part, local)
				}
			}
			if jac == nil {
				columns = nil
			}
			own := s.own[n]
			for _, j := range s.swap {
				q[j], q[own[j]] = q[own[j]], q[j]
			}
			ok := m.Block(q[:s.base], x[:last], a, b, part, f, columns)
			for _, j := range s.swap {
				q[j], q[own[j]] = q[own[j]], q[j]
			}
			if !ok {
				return false
			}
			a = b
		}
		return true
	}
}

// local is the place in the kind of scalar i as series n sees it, or −1 when it
// is another series' own.
func (s *series) local(n, i int) int {
	if i < s.base {
		if s.own[n][i] == i {
			return i
		}
		return -1
	}
	for _, j := range s.swap {
		if s.own[n][j] == i {
			return j
		}
	}
	return -1
}

// The words of the row column "phase" for readings before and after adjustment.
const (
	AsFound = "as-found"
	AsLeft  = "as-left"
)

// shifts are the changes of the first measurand by adjustment: as left less as
// found, for every pair of series that differ in nothing else. What both share
// (divider, spacing) cancels in their budget.
func (s *series) shifts(m *model.Model) []model.Measurand {
	var out []model.Measurand
	for left, name := range s.names {
		before := strings.Replace(name, AsLeft, AsFound, 1)
		if before == name {
			continue
		}
		for found, other := range s.names {
			if other != before {
				continue
			}
			d := m.Measurands[0]
			value := d.Value
			rest := strings.Trim(strings.Replace(name, AsLeft, "", 1), ", ")
			d.Name = SeriesName("shift of "+d.Name, rest)
			d.Doc = "change by adjustment, " + AsLeft + " less " + AsFound
			d.Value = func(q []jet.Jet) jet.Jet { return value(view(s, left, q)).Sub(value(view(s, found, q))) }
			out = append(out, d)
		}
	}
	return out
}

// rows lists the rows of series n.
func (s *series) rows(n int, of []float64) []int {
	var rows []int
	for i, v := range of {
		if int(v) == n {
			rows = append(rows, i)
		}
	}
	return rows
}

func pick(v []float64, rows []int) []float64 {
	out := make([]float64, len(rows))
	for k, i := range rows {
		out[k] = v[i]
	}
	return out
}

func pickAll(x [][]float64, rows []int) [][]float64 {
	out := make([][]float64, len(x))
	for p := range x {
		out[p] = pick(x[p], rows)
	}
	return out
}
