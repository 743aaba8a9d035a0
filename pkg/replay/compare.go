package replay

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// DefaultTolerance is the tolerance when Settings do not say.
const DefaultTolerance = 1e-9

// A Difference is something that is not the same as it is stored.
type Difference struct {
	Place  string `json:"place"` // cell and output, "" in a record by itself
	Name   string `json:"name"`  // of the number
	Stored string `json:"stored"`
	Now    string `json:"now"`
	// Difference is now − stored in the unit of the two; null where they are not
	// two numbers.
	Difference *float64 `json:"difference"`
	// U is the standard uncertainty that is known of the number, null where none is;
	// InU is Difference in units of it.
	U   *float64 `json:"u"`
	InU *float64 `json:"in_u"`
	// Within says that the two agree within the tolerance.
	Within bool `json:"within"`
}

// A Comparison is what a replay found.
type Comparison struct {
	File      string  `json:"file"`
	Tolerance float64 `json:"tolerance"` // |now − stored| over the larger of |now|, |stored| and u
	Cells     int     `json:"cells"`     // code cells that were run
	Records   int     `json:"records"`   // result records compared
	// Identical, Within and Different count what was compared: numbers, words,
	// figures.
	Identical int `json:"identical"`
	Within    int `json:"within"`
	Different int `json:"different"`
	// Differences lists what is not identical, in the order of the file.
	Differences []Difference `json:"differences"`
	// Notes must be shown: what could not be compared, other versions.
	Notes []string `json:"notes"`
}

func newComparison(file string, tolerance float64) (*Comparison, error) {
	if tolerance == 0 {
		tolerance = DefaultTolerance
	}
	if !(tolerance > 0) || math.IsInf(tolerance, 0) {
		return nil, fmt.Errorf("tolerance %g: a positive number is due", tolerance)
	}
	return &Comparison{File: file, Tolerance: tolerance, Differences: []Difference{}, Notes: []string{}}, nil
}

// Same reports whether something was compared and nothing differs by more than the
// tolerance.
func (c *Comparison) Same() bool { return c.Different == 0 && c.Identical+c.Within > 0 }

// note adds a note once.
func (c *Comparison) note(format string, args ...any) {
	s := fmt.Sprintf(format, args...)
	for _, n := range c.Notes {
		if n == s {
			return
		}
	}
	c.Notes = append(c.Notes, s)
}

// words compares two texts that are not numbers.
func (c *Comparison) words(place, name, stored, now string) {
	if stored == now {
		c.Identical++
		return
	}
	c.Different++
	c.Differences = append(c.Differences, Difference{Place: place, Name: name, Stored: clip(stored), Now: clip(now)})
}

// numbers compares two numbers. u is the standard uncertainty known of them, 0
// when there is none; scale is a size against which they count besides their own.
func (c *Comparison) numbers(place, name, stored, now string, a, b, u, scale float64) {
	if stored == now || a == b {
		c.Identical++
		return
	}
	delta := b - a
	d := Difference{Place: place, Name: name, Stored: stored, Now: now, Difference: &delta}
	size := math.Max(math.Max(math.Abs(a), math.Abs(b)), math.Max(u, scale))
	if u > 0 {
		in := delta / u
		d.U, d.InU = &u, &in
	}
	d.Within = math.Abs(delta) <= c.Tolerance*size
	if d.Within {
		c.Within++
	} else {
		c.Different++
	}
	c.Differences = append(c.Differences, d)
}

// clip shortens a text for a message.
func clip(s string) string {
	const most = 120
	r := []rune(s)
	if len(r) <= most {
		return s
	}
	return string(r[:most-1]) + "…"
}

// statesU are the keys of numbers that are in the unit of the "u" beside them.
var statesU = map[string]bool{"value": true, "size": true, "estimate": true, "start": true, "interval": true, "shortest": true,
	"u": true, "u_total": true, "delta": true, "d_low": true, "d_high": true, "expanded": true, "observed": true}

// records compares two result records leaf by leaf.
func (c *Comparison) records(place string, stored, now *value) {
	c.Records++
	c.tree(treeAt{place: place}, stored, now)
}

// treeAt is where in a record a comparison stands.
type treeAt struct {
	place, path, key string
	u, scale         float64
}

func (t treeAt) name() string {
	if t.path == "" {
		return "record"
	}
	return t.path
}

func (c *Comparison) tree(t treeAt, a, b *value) {
	switch {
	case a == nil || b == nil || a.kind != b.kind:
		c.words(t.place, t.name(), spell(a), spell(b))
	case a.kind == object:
		c.objects(t, a, b)
	case a.kind == array:
		c.arrays(t, a, b)
	case a.kind == number:
		x, errX := strconv.ParseFloat(a.raw, 64)
		y, errY := strconv.ParseFloat(b.raw, 64)
		if errX != nil || errY != nil { // beyond the range of numbers
			c.words(t.place, t.name(), a.raw, b.raw)
			return
		}
		u := t.u
		if !statesU[t.key] {
			u = 0
		}
		c.numbers(t.place, t.name(), a.raw, b.raw, x, y, u, t.scale)
	case a.kind == text:
		x, _ := a.str()
		y, _ := b.str()
		if t.path == "guardring" && x != y {
			c.note("made by guardring %s, replayed by %s", x, y)
			return
		}
		c.words(t.place, t.name(), x, y)
	default:
		c.words(t.place, t.name(), a.raw, b.raw)
	}
}

func (c *Comparison) objects(t treeAt, a, b *value) {
	for _, key := range []string{"u_total", "u"} {
		if u, ok := positive(a.get(key)); ok {
			t.u = u
			break
		}
	}
	at := func(key string) treeAt {
		s := t
		s.key, s.scale = key, 0
		s.path = join(t.path, key)
		if key == "correlation" {
			s.scale = 1
		}
		return s
	}
	for _, m := range a.members {
		c.tree(at(m.key), m.val, b.get(m.key))
	}
	for _, m := range b.members {
		if a.get(m.key) == nil {
			c.tree(at(m.key), nil, m.val)
		}
	}
}

func (c *Comparison) arrays(t treeAt, a, b *value) {
	if t.key == "covariance" {
		c.covariance(t, a, b)
		return
	}
	if names, ok := namesOf(a); ok {
		if others, ok := namesOf(b); ok {
			c.named(t, a, b, names, others)
			return
		}
	}
	for i := 0; i < len(a.items) || i < len(b.items); i++ {
		s := t
		s.path = fmt.Sprintf("%s[%d]", t.path, i+1)
		c.tree(s, item(a, i), item(b, i))
	}
}

// named compares lists whose members have names, member by name.
func (c *Comparison) named(t treeAt, a, b *value, names, others []string) {
	at := map[string]*value{}
	for i, n := range others {
		at[n] = b.items[i]
	}
	child := func(n string) treeAt {
		s := t
		s.path = join(t.path, n)
		return s
	}
	for i, n := range names {
		c.tree(child(n), a.items[i], at[n])
		delete(at, n)
	}
	for i, n := range others {
		if at[n] != nil {
			c.tree(child(n), nil, b.items[i])
		}
	}
}

// covariance compares matrices whose elements count against √(vᵢᵢ vⱼⱼ).
func (c *Comparison) covariance(t treeAt, a, b *value) {
	diagonal := make([]float64, len(a.items))
	for i := range a.items {
		diagonal[i], _ = positive(item(a.items[i], i))
	}
	for i := 0; i < len(a.items) || i < len(b.items); i++ {
		ra, rb := item(a, i), item(b, i)
		s := t
		s.key, s.path = "", fmt.Sprintf("%s[%d]", t.path, i+1)
		if ra == nil || rb == nil || ra.kind != array || rb.kind != array {
			c.tree(s, ra, rb)
			continue
		}
		for j := 0; j < len(ra.items) || j < len(rb.items); j++ {
			e := s
			e.path = fmt.Sprintf("%s[%d]", s.path, j+1)
			if i < len(diagonal) && j < len(diagonal) {
				e.scale = math.Sqrt(diagonal[i] * diagonal[j])
			}
			c.tree(e, item(ra, j), item(rb, j))
		}
	}
}

func item(v *value, i int) *value {
	if v == nil || i >= len(v.items) {
		return nil
	}
	return v.items[i]
}

func join(path, key string) string {
	if path == "" {
		return key
	}
	return path + "." + key
}

// namesOf are the names of the members of a list: what each is called, or the file
// that it is. It is false when they have none, or share some.
func namesOf(v *value) ([]string, bool) {
	if len(v.items) == 0 {
		return nil, false
	}
	for _, key := range []string{"name", "input", "file"} {
		names := make([]string, 0, len(v.items))
		seen := map[string]bool{}
		for _, x := range v.items {
			if s, ok := x.get(key).str(); ok && !seen[s] {
				seen[s] = true
				names = append(names, s)
			}
		}
		if len(names) == len(v.items) {
			return names, true
		}
	}
	return nil, false
}

// positive is the number that v holds if it is above zero.
func positive(v *value) (float64, bool) {
	if v == nil || v.kind != number {
		return 0, false
	}
	f, err := strconv.ParseFloat(v.raw, 64)
	return f, err == nil && f > 0
}

// spell tells a value in messages.
func spell(v *value) string {
	switch {
	case v == nil:
		return "(nothing)"
	case v.kind == object:
		return fmt.Sprintf("an object of %d keys", len(v.members))
	case v.kind == array:
		return fmt.Sprintf("a list of %d", len(v.items))
	}
	if s, ok := v.str(); ok {
		return strings.TrimSpace(s)
	}
	return v.raw
}
