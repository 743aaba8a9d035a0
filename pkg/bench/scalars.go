package bench

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/si"
)

// ambientColumn is an environment quantity taken from a column.
type ambientColumn struct {
	node      *node
	header    string
	unit      si.Unit
	u         float64
	source    string
	scalar    int // index into Bench.Scalars, −1: none
	condition int // index into Bench.Environment
}

// corrections reads which corrections are in use.
func (l *loader) corrections() {
	t := l.table(l.root, "corrections")
	for i := range l.kind.Corrections {
		k := &l.kind.Corrections[i]
		n := l.table(t, k.Name)
		l.b.Corrections[k.Name] = l.flag(n, "use", k.Default)
		if n != nil && n.fields["use"] == nil && !k.Default && len(n.keys) > 0 {
			l.warnf(n, "inputs are given but the correction is not in use; write use = true")
		}
	}
}

// scalars reads every quantity that the kind knows.
func (l *loader) scalars() {
	for i := range l.kind.Scalars {
		k := &l.kind.Scalars[i]
		path := k.Table + "." + k.Name
		s := Scalar{Name: k.Key(), Dist: k.Default, Unit: k.Unit, Adjust: k.Sought, Key: path}
		if s.Dist.Shape == "" {
			s.Dist = gum.Exactly(k.Default.Value)
		}
		var n *node
		if t := l.find(k.Table); t != nil {
			n = t.field(k.Name)
		}
		if n == nil {
			if k.Required && l.inUse(k) {
				l.absent(k, path)
			}
		} else {
			s.Given, s.Line = true, n.line
			l.scalar(n, k, &s)
		}
		l.b.Scalars = append(l.b.Scalars, s)
	}
	l.conditions()
}

// inUse reports whether the correction that a scalar belongs to is in use.
func (l *loader) inUse(k *model.Scalar) bool {
	name, ok := strings.CutPrefix(k.Table, "corrections.")
	return !ok || l.b.Corrections[name]
}

// absent notes a required scalar that the bench does not state.
func (l *loader) absent(k *model.Scalar, path string) {
	e := &Error{File: l.file, Line: 1, Key: path,
		Problem: fmt.Sprintf("is missing; model %s needs it: %s, for example { value = \"… %s\", u = \"… %s\" }", l.kind.Name, k.Doc, k.Unit.Symbol, deltaSymbol(k.Unit))}
	if t := l.find(k.Table); t != nil {
		e.Line = t.line
	}
	if strings.HasPrefix(k.Table, "corrections.") {
		e.Problem += ", while the correction is in use"
	}
	l.errs.add(e)
}

// deltaSymbol is the unit in which an uncertainty of a quantity in u is written.
func deltaSymbol(u si.Unit) string {
	if u.Offset != 0 {
		return "K"
	}
	return u.Symbol
}

func (l *loader) scalar(n *node, k *model.Scalar, s *Scalar) {
	if n.shape == isTable && n.fields["column"] != nil {
		l.ambient(n, k.Name, k.Unit, len(l.b.Scalars))
		return
	}
	q, ok := l.quantity(n, wanted{like: k.Unit})
	if !ok {
		return
	}
	s.Dist, s.Unit, s.Instrument, s.Source = q.dist, q.unit, q.instrument, q.source
	s.Start, s.HasStart = q.start, q.hasStart
	adjust := n.field("adjust")
	switch {
	case k.Sought:
		// What is sought has no prior knowledge; a value only says where to begin.
		if q.hasU {
			l.fail(n, "%s is what the fit finds, without prior knowledge; leave its uncertainty out", k.Key())
			return
		}
		if adjust != nil && !q.adjust {
			l.fail(adjust, "%s is always estimated", k.Key())
			return
		}
		if q.hasValue && q.hasStart {
			l.fail(n.field("start"), "value and start are both given; for a quantity that is sought they mean the same")
			return
		}
		if q.hasValue {
			s.Start, s.HasStart = q.dist.Value, true
		}
		s.Dist = gum.Exactly(s.Start)
	case q.adjust:
		if !k.Adjustable {
			l.fail(adjust, "%s can't be estimated from the readings of this kind of bench", k.Key())
			return
		}
		if !q.hasValue && !q.hasStart {
			l.fail(n, "an adjusted quantity needs value and u as prior knowledge, or a start")
			return
		}
		s.Adjust, s.HasPrior = true, q.hasU
		if !s.HasStart {
			s.Start, s.HasStart = q.dist.Value, true
		}
		if !q.hasValue {
			s.Dist = gum.Exactly(s.Start)
		}
		if s.HasPrior && q.dist.Shape != gum.ShapeNormal && q.dist.Shape != gum.ShapeT {
			l.warnf(n, "prior knowledge enters the fit by its value and standard uncertainty alone; Monte Carlo keeps the %s shape", q.dist.Shape)
		}
	default:
		if q.hasStart {
			l.fail(n.field("start"), "a start belongs to a quantity that is estimated; add adjust = true")
			return
		}
		if !q.hasValue {
			l.fail(n, "a value is missing; write value = \"… %s\"", k.Unit.Symbol)
			return
		}
	}
	if k.Positive || k.NotNegative {
		at := n
		if f := n.field("value"); f != nil {
			at = f
		}
		switch {
		case k.NotNegative && q.hasValue && q.dist.Value < 0:
			l.fail(at, "%s: %s can't be negative", shown(at), k.Doc)
		case k.Positive && (q.hasValue && !(q.dist.Value > 0) || s.HasStart && !(s.Start > 0)):
			l.fail(at, "%s: %s must be above zero", shown(at), k.Doc)
		}
	}
}

// ambient reads { column = …, unit = …, u = … }.
func (l *loader) ambient(n *node, name string, like si.Unit, scalar int) {
	a := ambientColumn{node: n, header: l.text(n, "column"), scalar: scalar, condition: -1, source: l.text(n, "source")}
	l.instrument(n)
	u, ok := l.unit(n, "unit")
	if !ok {
		if n.fields["unit"] == nil {
			l.missing(n, "unit", fmt.Sprintf("the unit of the column, for example %s", like.Symbol))
		}
		return
	}
	if !l.measures(n.field("unit"), u, like) {
		return
	}
	a.unit = u
	if f := n.field("u"); f != nil {
		if a.u, ok = l.positive(n, "u", wanted{like: like, interval: true}); !ok {
			return
		}
	}
	for _, k := range n.keys {
		if table := (&columnDoc); !slices.Contains(table.names(), k) {
			l.fail(n.field(k), "%s does not go with column; known here: %s", k, strings.Join(table.names(), ", "))
			return
		}
	}
	if a.header != "" {
		l.use(n.field("column"), a.header, number)
		l.ambients = append(l.ambients, a)
	}
}

// conditions gathers what the bench states of its environment, for the kind's
// own quantities as for those that only the certificate tells.
func (l *loader) conditions() {
	t := l.table(l.root, "environment")
	if t == nil {
		return
	}
	like := map[string]si.Unit{"temperature": si.MustUnit("degC"), "pressure": si.MustUnit("hPa"),
		"humidity": si.MustUnit("%"), "gravity": si.MustUnit("m/s2")}
	for _, name := range t.keys {
		k := l.kind.Scalar("environment." + name)
		if k >= 0 {
			s := &l.b.Scalars[k]
			l.b.Environment = append(l.b.Environment, Condition{name, s.Dist, s.Unit, s.Instrument, s.Source})
			for i := range l.ambients {
				if l.ambients[i].scalar == k {
					l.ambients[i].condition = len(l.b.Environment) - 1
				}
			}
			continue
		}
		u, known := like[name]
		if !known {
			continue // an option, or a key that has been refused
		}
		n := t.field(name)
		if n.shape == isTable && n.fields["column"] != nil {
			before := len(l.ambients)
			l.ambient(n, name, u, -1)
			if len(l.ambients) > before {
				l.ambients[before].condition = len(l.b.Environment)
			}
			l.b.Environment = append(l.b.Environment, Condition{Name: name, Dist: gum.Exactly(0), Unit: u})
			continue
		}
		if q, ok := l.quantity(n, wanted{like: u}); ok {
			if !q.hasValue || q.adjust {
				l.fail(n, "a condition needs a value, and is not adjusted")
				continue
			}
			l.b.Environment = append(l.b.Environment, Condition{name, q.dist, q.unit, q.instrument, q.source})
		}
	}
}

// average fills the environment quantities that come from columns: the mean of
// the column; its u is that of the sensor, shared by all readings, combined with
// the scatter of the column, since the quantity stands for every row.
func (l *loader) average(columns map[string][]float64) {
	for i := range l.ambients {
		a := &l.ambients[i]
		xs := columns[a.header]
		l.b.Ambient = append(l.b.Ambient, Ambient{a.header, a.unit, slices.Clone(xs)})
		mean, s := meanAndScatter(xs)
		if math.IsNaN(mean) {
			l.fail(a.node.field("column"), "column %s holds no value", quoted(a.header))
			continue
		}
		if math.IsNaN(s) {
			s = 0 // one reading has no scatter
		}
		v := a.unit.ToSI(mean)
		scatter := a.unit.DeltaToSI(s)
		u := math.Hypot(a.u, scatter)
		d := gum.Exactly(v)
		if u > 0 {
			d = gum.Normal(v, u)
		}
		if err := d.Check(); err != nil {
			l.fail(a.node.field("column"), "%v", err)
			continue
		}
		source := fmt.Sprintf("mean of column %s; u from its scatter %.2g %s", a.header, s, deltaSymbol(a.unit))
		if a.u > 0 {
			source += fmt.Sprintf(" and %s of the sensor", shown(a.node.field("u")))
		}
		if a.source != "" {
			source = a.source + "; " + source
		}
		instrument := ""
		if f := a.node.field("instrument"); f != nil {
			instrument = f.text
		}
		if a.scalar >= 0 {
			sc := &l.b.Scalars[a.scalar]
			sc.Dist, sc.Unit, sc.Source, sc.Instrument = d, a.unit, source, instrument
			if l.kind.Scalars[a.scalar].Positive && !(v > 0) {
				l.fail(a.node.field("column"), "the mean of column %s must be above zero", quoted(a.header))
			}
		}
		if a.condition >= 0 {
			l.b.Environment[a.condition] = Condition{l.b.Environment[a.condition].Name, d, a.unit, instrument, source}
		}
	}
}
