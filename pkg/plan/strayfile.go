package plan

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"sort"
	"strings"

	"github.com/pelletier/go-toml/v2"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/si"
)

// StrayBench is what makes a stray field at a meter: charged bodies, an earthed
// plane, the medium, and the meter's place.
//
// The file, all lengths, charges and potentials as quantities with their units:
//
//	format = 1
//	title  = "…"
//	[medium] relative_permittivity = "1.0006"          # 1 when not stated
//	[plane]  point = ["0 m", "0 m", "0 m"], normal = [0, 0, 1]
//	[[point]]  name, charge, at
//	[[sphere]] name, radius, charge or potential, at
//	[[edge]]   name, charge (in total), from, to
//	[meter]  name, at, direction = [0, 0, 1]            # the component it senses; without it the magnitude
//	[bench]  field                                     # the field that the meter is there to measure
//	[search] from, to                                  # box for places without field; around everything when not stated
//	[report] coverage = "95.45 %"
//
// charge, potential and radius may be tables { value, u, dof } or { value,
// half_width }; place_u is the standard uncertainty of each coordinate of a body or
// of the meter.
type StrayBench struct {
	File, SHA256, Title string
	Medium              gum.Distribution // relative permittivity
	Plane               *field.Plane
	Bodies              []StrayBody
	Meter               string
	At                  field.Vec // m
	AtU                 float64   // m, of each coordinate
	Direction           *field.Vec
	BenchField          float64 // V/m, 0: not stated
	From, To            field.Vec
	Coverage            float64
}

// StrayBody is one charged body.
type StrayBody struct {
	Name         string
	Shape        string // "point", "sphere" or "edge"
	Charge       gum.Distribution
	Potential    gum.Distribution
	HasPotential bool // Potential is stated and not Charge
	Radius       gum.Distribution
	From, To     field.Vec // m; equal but for an edge
	PlaceU       float64   // m, of each coordinate
}

// strayFile is the layout of the file.
type strayFile struct {
	Format int    `toml:"format"`
	Title  string `toml:"title"`
	Medium struct {
		Relative any `toml:"relative_permittivity"`
	} `toml:"medium"`
	Plane *struct {
		Point  any       `toml:"point"`
		Normal []float64 `toml:"normal"`
	} `toml:"plane"`
	Point  []strayBodyFile `toml:"point"`
	Sphere []strayBodyFile `toml:"sphere"`
	Edge   []strayBodyFile `toml:"edge"`
	Meter  *struct {
		Name      string    `toml:"name"`
		At        any       `toml:"at"`
		PlaceU    any       `toml:"place_u"`
		Direction []float64 `toml:"direction"`
	} `toml:"meter"`
	Bench struct {
		Field any `toml:"field"`
	} `toml:"bench"`
	Search *struct {
		From any `toml:"from"`
		To   any `toml:"to"`
	} `toml:"search"`
	Report struct {
		Coverage any `toml:"coverage"`
	} `toml:"report"`
}

type strayBodyFile struct {
	Name      string `toml:"name"`
	Charge    any    `toml:"charge"`
	Potential any    `toml:"potential"`
	Radius    any    `toml:"radius"`
	At        any    `toml:"at"`
	From      any    `toml:"from"`
	To        any    `toml:"to"`
	PlaceU    any    `toml:"place_u"`
}

// strayKeys are the keys of the file, for hints.
var strayKeys = []string{"format", "title", "medium", "relative_permittivity", "plane", "point", "normal", "sphere", "edge", "name", "charge", "potential", "radius",
	"at", "from", "to", "place_u", "meter", "direction", "bench", "field", "search", "report", "coverage", "value", "u", "dof", "half_width"}

var (
	lengthUnit  = si.MustUnit("m")
	chargeUnit  = si.MustUnit("C")
	voltUnit    = si.MustUnit("V")
	fieldUnit   = si.MustUnit("V/m")
	pureUnit    = si.MustUnit("1")
	strayLimit  = int64(1 << 20)
	strayBodies = 200
)

// strayReader reads one file and knows the places of its values for messages.
type strayReader struct {
	path   string
	places *bench.Places
	// A body is told by its name, and found by its number: what begins with shown
	// in messages begins with found in the file.
	shown, found string
}

// errorf is an error about a key; elements of arrays are counted from 1.
func (r *strayReader) errorf(key, format string, a ...any) error {
	path := key
	if rest, ok := strings.CutPrefix(key, r.shown); ok && r.shown != "" {
		path = r.found + rest
	}
	return r.places.Errorf(path, key, format, a...)
}

// OpenStray reads the description of a stray field.
func OpenStray(path string) (*StrayBench, error) {
	info, err := os.Stat(path)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return nil, &bench.Error{File: path, Problem: "there is no such file; name one that describes the charged bodies", Err: err}
	case err != nil:
		return nil, err
	case info.IsDir():
		return nil, fmt.Errorf("%s: this is a folder; name the file", path)
	case !info.Mode().IsRegular() || info.Size() > strayLimit:
		return nil, fmt.Errorf("%s: want a file of at most %d bytes", path, strayLimit)
	}
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	return ParseStray(path, data)
}

// ParseStray is OpenStray for a text already read; path is for messages.
func ParseStray(path string, data []byte) (*StrayBench, error) {
	places, err := bench.FindPlaces(path, data)
	if err != nil {
		return nil, err
	}
	var f strayFile
	d := toml.NewDecoder(strings.NewReader(strings.TrimPrefix(string(data), "\ufeff")))
	d.DisallowUnknownFields()
	if err := d.Decode(&f); err != nil {
		return nil, places.Undecoded(err, strayKeys)
	}
	r := &strayReader{path: path, places: places}
	if f.Format != 1 {
		return nil, r.errorf("format", "format %d is not known; this version reads format = 1", f.Format)
	}
	sum := sha256.Sum256(data)
	b := &StrayBench{File: filepath.ToSlash(path), SHA256: hex.EncodeToString(sum[:]), Title: f.Title, Medium: gum.Exactly(1), Coverage: gum.DefaultCoverage}
	if f.Medium.Relative != nil {
		if b.Medium, err = r.quantity("medium.relative_permittivity", f.Medium.Relative, pureUnit); err != nil {
			return nil, err
		}
		if !(b.Medium.Value >= 1) {
			return nil, r.errorf("medium.relative_permittivity", "%g is below that of vacuum, 1", b.Medium.Value)
		}
	}
	if f.Plane != nil {
		b.Plane = &field.Plane{}
		if b.Plane.Point, err = r.place("plane.point", f.Plane.Point); err != nil {
			return nil, err
		}
		if b.Plane.Normal, err = r.direction("plane.normal", f.Plane.Normal); err != nil {
			return nil, err
		}
	}
	if err := r.meter(b, &f); err != nil {
		return nil, err
	}
	for _, g := range []struct {
		shape string
		list  []strayBodyFile
	}{{"point", f.Point}, {"sphere", f.Sphere}, {"edge", f.Edge}} {
		for i := range g.list {
			body, err := r.body(g.shape, i, &g.list[i])
			if err != nil {
				return nil, err
			}
			b.Bodies = append(b.Bodies, body)
		}
	}
	if err := r.names(b, &f); err != nil {
		return nil, err
	}
	if f.Report.Coverage != nil {
		q, err := r.exact("report.coverage", f.Report.Coverage, pureUnit, "it is chosen")
		if err != nil {
			return nil, err
		}
		b.Coverage = q.Value
		if err := gum.CheckCoverage(b.Coverage); err != nil {
			return nil, r.errorf("report.coverage", "%v", err)
		}
	}
	if f.Search == nil {
		b.around()
		return b, nil
	}
	if b.From, err = r.place("search.from", f.Search.From); err != nil {
		return nil, err
	}
	if b.To, err = r.place("search.to", f.Search.To); err != nil {
		return nil, err
	}
	for i := range 3 {
		if b.From[i] > b.To[i] {
			b.From[i], b.To[i] = b.To[i], b.From[i]
		}
	}
	return b, nil
}

// meter reads the meter and the bench it serves.
func (r *strayReader) meter(b *StrayBench, f *strayFile) error {
	if f.Meter == nil {
		return r.errorf("meter", "is missing; say where the field is wanted: [meter] at = [\"0 mm\", \"0 mm\", \"300 mm\"]")
	}
	b.Meter = f.Meter.Name
	if b.Meter == "" {
		b.Meter = "meter"
	}
	var err error
	if b.At, err = r.place("meter.at", f.Meter.At); err != nil {
		return err
	}
	if b.AtU, err = r.length("meter.place_u", f.Meter.PlaceU); err != nil {
		return err
	}
	if f.Meter.Direction != nil {
		n, err := r.direction("meter.direction", f.Meter.Direction)
		if err != nil {
			return err
		}
		b.Direction = &n
	}
	if f.Bench.Field == nil {
		return nil
	}
	q, err := r.exact("bench.field", f.Bench.Field, fieldUnit, "only its size is asked for, to compare with")
	if err != nil {
		return err
	}
	if b.BenchField = math.Abs(q.Value); b.BenchField == 0 {
		return r.errorf("bench.field", "is zero; state the field that the stray field adds to, or leave the table out")
	}
	return nil
}

// body reads one charged body.
func (r *strayReader) body(shape string, i int, f *strayBodyFile) (StrayBody, error) {
	b := StrayBody{Name: f.Name, Shape: shape}
	if b.Name == "" {
		b.Name = fmt.Sprintf("%s %d", shape, i+1)
	}
	r.shown, r.found = fmt.Sprintf("%s %q: ", shape, b.Name), fmt.Sprintf("%s[%d].", shape, i+1)
	key := func(k string) string { return r.shown + k }
	var err error
	switch {
	case f.Charge != nil && f.Potential != nil:
		return b, r.errorf(key("charge"), "a body has a charge or a potential; state one of the two")
	case f.Potential != nil && shape != "sphere":
		return b, r.errorf(key("potential"), "the charge that a potential makes is known for a sphere only; state charge")
	case f.Potential != nil:
		b.HasPotential = true
		b.Potential, err = r.quantity(key("potential"), f.Potential, voltUnit)
	case f.Charge == nil:
		return b, r.errorf(key("charge"), "is missing; state it, for example { value = \"3 nC\", u = \"0.1 nC\" }")
	default:
		b.Charge, err = r.quantity(key("charge"), f.Charge, chargeUnit)
	}
	if err != nil {
		return b, err
	}
	if shape == "sphere" {
		if f.Radius == nil {
			return b, r.errorf(key("radius"), "is missing")
		}
		if b.Radius, err = r.quantity(key("radius"), f.Radius, lengthUnit); err != nil {
			return b, err
		}
		if !(b.Radius.Value > 0) {
			return b, r.errorf(key("radius"), "%g m must be above zero", b.Radius.Value)
		}
	} else if f.Radius != nil {
		return b, r.errorf(key("radius"), "is for a [[sphere]]")
	}
	ends := map[string]any{"from": f.From, "to": f.To}
	if shape != "edge" {
		if f.From != nil || f.To != nil {
			return b, r.errorf(key("from"), "is for an [[edge]]; this body has its place in at")
		}
		ends = map[string]any{"at": f.At}
	} else if f.At != nil {
		return b, r.errorf(key("at"), "an edge runs from one end to the other; state from and to")
	}
	for _, k := range []string{"at", "from", "to"} {
		text, ok := ends[k]
		if !ok {
			continue
		}
		v, err := r.place(key(k), text)
		if err != nil {
			return b, err
		}
		if k != "to" {
			b.From = v
		}
		if k != "from" {
			b.To = v
		}
	}
	if shape == "edge" && b.From == b.To {
		return b, r.errorf(key("to"), "is the same place as from; an edge has a length: state a [[point]]")
	}
	b.PlaceU, err = r.length(key("place_u"), f.PlaceU)
	return b, err
}

// names refuses a file without bodies, two bodies of one name, and a sphere that
// another body is in.
func (r *strayReader) names(b *StrayBench, f *strayFile) error {
	switch n := len(b.Bodies); {
	case n == 0:
		return fmt.Errorf("%s: there is no charged body; describe them in [[point]], [[sphere]] and [[edge]]", r.path)
	case n > strayBodies:
		return fmt.Errorf("%s: %d charged bodies; at most %d", r.path, n, strayBodies)
	}
	// path is where body i stands in the file.
	path := func(i int) string {
		for _, g := range []struct {
			shape string
			n     int
		}{{"point", len(f.Point)}, {"sphere", len(f.Sphere)}} {
			if i < g.n {
				return fmt.Sprintf("%s[%d]", g.shape, i+1)
			}
			i -= g.n
		}
		return fmt.Sprintf("edge[%d]", i+1)
	}
	first := map[string]bool{}
	for i := range b.Bodies {
		name := b.Bodies[i].Name
		if first[name] {
			return r.places.Errorf(path(i)+".name", "name", "two bodies are called %q; give each a name of its own", name)
		}
		first[name] = true
	}
	if i, problem := b.overlap(); problem != "" {
		return r.places.Errorf(path(i), "", "%s", problem)
	}
	return nil
}

// around sets the search box to what surrounds bodies and meter, by half of its
// longest side.
func (b *StrayBench) around() {
	b.From, b.To = b.At, b.At
	for i := range b.Bodies {
		a := b.Bodies[i].Radius.Value
		for _, p := range []field.Vec{b.Bodies[i].From, b.Bodies[i].To} {
			for k := range 3 {
				b.From[k] = math.Min(b.From[k], p[k]-a)
				b.To[k] = math.Max(b.To[k], p[k]+a)
			}
		}
	}
	side := 0.0
	for k := range 3 {
		side = math.Max(side, b.To[k]-b.From[k])
	}
	if side == 0 {
		side = 1 // refused later: the meter is on a body
	}
	for k := range 3 {
		b.From[k] -= 0.5 * side
		b.To[k] += 0.5 * side
	}
}

// quantity reads a text or a table as what is known of a quantity.
func (r *strayReader) quantity(key string, v any, unit si.Unit) (gum.Distribution, error) {
	number := func(key string, v any, interval bool) (float64, error) {
		switch t := v.(type) {
		case string:
			parse := si.ParseQuantity
			if interval {
				parse = si.ParseInterval
			}
			x, u, err := parse(t)
			if err != nil {
				return 0, r.errorf(key, "%v", err)
			}
			if u.Dim != unit.Dim {
				return 0, r.errorf(key, "%s", bench.WrongDimension(t, u, unit))
			}
			return x, nil
		case float64, int64:
			if !unit.Dim.IsOne() {
				return 0, r.errorf(key, "%v has no unit; write for example \"%v %s\"", t, t, unit.Symbol)
			}
			if n, ok := t.(int64); ok {
				return float64(n), nil
			}
			return t.(float64), nil
		}
		return 0, r.errorf(key, "want a text with a unit, such as \"1 %s\"", unit.Symbol)
	}
	finite := func(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }
	table, ok := v.(map[string]any)
	if !ok {
		x, err := number(key, v, false)
		if err == nil && !finite(x) {
			err = r.errorf(key, "%g is not a finite number", x)
		}
		return gum.Exactly(x), err
	}
	known := []string{"value", "u", "dof", "half_width"}
	names := make([]string, 0, len(table))
	for k := range table {
		names = append(names, k)
	}
	sort.Strings(names)
	got := map[string]float64{}
	for _, k := range names {
		found := false
		for _, w := range known {
			found = found || w == k
		}
		if !found {
			hint := ""
			if s := si.Suggest(k, known); s != "" {
				hint = fmt.Sprintf("; did you mean %q?", s)
			}
			return gum.Distribution{}, r.errorf(key+"."+k, "this key is not known%s", hint)
		}
		var x float64
		var err error
		if k == "dof" {
			switch n := table[k].(type) {
			case int64:
				x = float64(n)
			case float64:
				x = n
			default:
				return gum.Distribution{}, r.errorf(key+".dof", "want a number")
			}
		} else if x, err = number(key+"."+k, table[k], k != "value"); err != nil {
			return gum.Distribution{}, err
		}
		if !finite(x) || k != "value" && !(x > 0) {
			return gum.Distribution{}, r.errorf(key+"."+k, "%g must be a finite number above zero; leave it out for an exact value", x)
		}
		got[k] = x
	}
	value, hasValue := got["value"]
	u, hasU := got["u"]
	half, hasHalf := got["half_width"]
	dof, hasDOF := got["dof"]
	switch {
	case !hasValue:
		return gum.Distribution{}, r.errorf(key+".value", "is missing")
	case hasU && hasHalf:
		return gum.Distribution{}, r.errorf(key, "state u or half_width, not both")
	case hasDOF && !hasU:
		return gum.Distribution{}, r.errorf(key+".dof", "degrees of freedom are those of u, which is missing")
	case hasHalf:
		return gum.Rectangular(value, half), nil
	case hasU:
		n := gum.Normal(value, u)
		if hasDOF {
			n.DOF = dof
		}
		return n, nil
	}
	return gum.Exactly(value), nil
}

// exact is quantity where no uncertainty has a meaning, for the reason given: one that
// is stated would be lost.
func (r *strayReader) exact(key string, v any, unit si.Unit, why string) (gum.Distribution, error) {
	q, err := r.quantity(key, v, unit)
	if err == nil && q.U > 0 {
		err = r.errorf(key, "takes no uncertainty: %s", why)
	}
	return q, err
}

// length reads a standard uncertainty of a place; nil is none.
func (r *strayReader) length(key string, v any) (float64, error) {
	if v == nil {
		return 0, nil
	}
	q, err := r.exact(key, v, lengthUnit, "it is one itself")
	if err == nil && !(q.Value >= 0) {
		err = r.errorf(key, "%g m must not be below zero", q.Value)
	}
	return q.Value, err
}

// place reads three lengths.
func (r *strayReader) place(key string, v any) (field.Vec, error) {
	var p field.Vec
	list, ok := v.([]any)
	if !ok || len(list) != 3 {
		return p, r.errorf(key, "want three lengths, such as [\"0 mm\", \"0 mm\", \"300 mm\"]")
	}
	for i, e := range list {
		q, err := r.exact(fmt.Sprintf("%s[%d]", key, i+1), e, lengthUnit, "that of a body's or the meter's place is stated as place_u, for each coordinate")
		if err != nil {
			return p, err
		}
		p[i] = q.Value
	}
	return p, nil
}

// direction reads a direction and makes it a unit vector.
func (r *strayReader) direction(key string, v []float64) (field.Vec, error) {
	if len(v) != 3 {
		return field.Vec{}, r.errorf(key, "want three numbers, such as [0, 0, 1]")
	}
	l := math.Sqrt(v[0]*v[0] + v[1]*v[1] + v[2]*v[2])
	if !(l > 0) || math.IsInf(l, 0) {
		return field.Vec{}, r.errorf(key, "%v has no direction; want for example [0, 0, 1]", v)
	}
	return field.Vec{v[0] / l, v[1] / l, v[2] / l}, nil
}
