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

// channels reads [channels.*].
func (l *loader) channels() {
	t := l.table(l.root, "channels")
	var responses, given []string
	for i := range l.kind.Channels {
		k := &l.kind.Channels[i]
		if k.Role == model.Response {
			responses = append(responses, k.Name)
		}
		n := l.table(t, k.Name)
		if n == nil {
			if k.Role == model.Predictor && !k.Optional && (t == nil || t.fields[k.Name] == nil) {
				l.errs.add(&Error{File: l.file, Line: l.lineOf(t), Key: "channels." + k.Name,
					Problem: fmt.Sprintf("is missing; model %s needs it: %s", l.kind.Name, k.Doc)})
			}
			continue
		}
		if k.Role == model.Response {
			given = append(given, k.Name)
			if len(given) > 1 {
				l.fail(n, "%s and %s are both given; a bench has one response", given[0], k.Name)
			}
		}
		l.channel(n, k)
	}
	if len(given) == 0 && len(responses) > 0 && !(t != nil && slices.ContainsFunc(responses, func(s string) bool { return t.fields[s] != nil })) {
		l.errs.add(&Error{File: l.file, Line: l.lineOf(t), Key: "channels",
			Problem: fmt.Sprintf("a response is missing; model %s needs one of %s", l.kind.Name, strings.Join(responses, ", "))})
	}
}

// lineOf is the line of a table, 1 when it is not there.
func (l *loader) lineOf(t *node) int {
	if t == nil {
		return 1
	}
	return t.line
}

func (l *loader) channel(n *node, k *model.Channel) {
	c := Channel{Name: k.Name, NoiseDOF: math.Inf(1), Gain: gum.Exactly(1), Offset: gum.Exactly(0), ResolutionPer: "reading"}
	like := wanted{like: k.Unit, interval: true}

	c.Instrument = l.instrument(n)
	c.Column = l.text(n, "column")
	if n.fields["column"] == nil {
		l.missing(n, "column", "the header of the column in the readings")
	} else if c.Column != "" {
		l.use(n.field("column"), c.Column, number)
	}
	if u, ok := l.unit(n, "unit"); ok {
		if f := n.field("unit"); l.measures(f, u, k.Unit) {
			l.headerUnit(f, c.Column, u)
		}
		c.Unit = u
	} else if n.fields["unit"] == nil {
		l.missing(n, "unit", fmt.Sprintf("the unit of the column, for example %s", k.Unit.Symbol))
	}

	l.noise(n, k, &c)
	if v, ok := l.positive(n, "resolution", like); ok {
		c.Resolution = v
	}
	c.ResolutionPer = l.word(n, "resolution_kind", "reading", "reading", "setting")
	if f := n.field("resolution_kind"); f != nil && n.fields["resolution"] == nil {
		l.fail(f, "resolution_kind stands without resolution")
	}
	if c.ResolutionPer == "setting" && l.roles["setting"] == "" {
		l.fail(n.field("resolution_kind"), "rounding once per setting needs a column that says which setting: [rows] setting = \"…\"")
	}

	if f := n.field("gain"); f != nil {
		l.systematic(f, wanted{like: si.One}, &c.Gain, &c.HasGain, &c.GainSource, &c.GainInstrument)
		if c.HasGain && c.Gain.Value == 0 {
			l.fail(f, "a gain of zero leaves nothing of the readings")
		}
	}
	if f := n.field("offset"); f != nil {
		// The offset is a difference: 0.1 degC is 0.1 K.
		l.systematic(f, like, &c.Offset, &c.HasOffset, &c.OffsetSource, &c.OffsetInstrument)
	}
	l.groupedEffects(n, k, &c)
	l.b.Channels = append(l.b.Channels, c)
}

// headerUnit refuses a header that says a unit of another quantity than the bench
// does, and warns of another unit of the same quantity.
func (l *loader) headerUnit(n *node, header string, u si.Unit) {
	first, last := strings.IndexByte(header, '/'), strings.LastIndexByte(header, '/')
	if first <= 0 {
		return
	}
	var says, other si.Unit
	// NAME/m/s holds a quotient behind the first solidus, a/b/V a unit behind the last.
	for _, at := range []int{last, first} {
		h, err := si.ParseUnit(header[at+1:])
		if err != nil {
			continue
		}
		if h.Dim == u.Dim && h.Factor == u.Factor && h.Offset == u.Offset {
			return
		}
		// Behind a pure number the solidus may be that of a ratio: C1/C.
		if h.Dim == u.Dim || u.Dim.IsOne() {
			says = h
		} else {
			other = h
		}
	}
	switch {
	case says.Symbol != "":
		l.warnf(n, "the header %s says %s, the bench %s; the bench counts", quoted(header), says.Symbol, u.Symbol)
	case other.Symbol != "":
		l.fail(n, "the header %s says %s, %s; the bench says %s, %s: correct the header of the readings or the unit", quoted(header), other.Symbol, dimensionName(other), u.Symbol, dimensionName(u))
	}
}

// noise reads the independent error of one reading.
func (l *loader) noise(n *node, k *model.Channel, c *Channel) {
	f := n.field("noise")
	switch {
	case f == nil:
	case f.shape == isText && f.text == "from-residuals":
		c.FromResiduals = true
		if k.Role != model.Response {
			l.fail(f, "only the noise of the response can be found from the residuals; state a value")
		}
	case f.shape == isText && strings.HasPrefix(f.text, "from"):
		l.fail(f, "%s is not known here; did you mean from-residuals?", quoted(f.text))
	default:
		if v, ok := l.positive(n, "noise", wanted{like: k.Unit, interval: true}); ok {
			c.Noise = v
		}
	}
	if v, ok := l.ratio(n, "relative_noise"); ok {
		c.RelativeNoise = v
	}
	c.NoiseDOF = l.dof(n, "noise_dof")
	if d := n.field("noise_dof"); d != nil && (c.FromResiduals || f == nil && n.fields["relative_noise"] == nil) {
		l.fail(d, "degrees of freedom stand without a noise that is stated")
	}
	if d := n.field("relative_noise"); d != nil && c.FromResiduals {
		l.fail(d, "noise comes from the residuals; a stated relative noise can't add to it")
	}
	if k.Role == model.Response && f == nil && n.fields["relative_noise"] == nil {
		l.missing(n, "noise", `state the standard uncertainty of one reading, or noise = "from-residuals" when it is unknown`)
	}
}

// systematic reads a gain or an offset.
func (l *loader) systematic(n *node, want wanted, d *gum.Distribution, has *bool, source, instrument *string) {
	q, ok := l.quantity(n, want)
	if !ok {
		return
	}
	if !q.hasValue {
		l.fail(n, "a value is missing")
		return
	}
	if q.adjust || q.hasStart {
		l.fail(n, "a gain or an offset can't be adjusted; it is carried as a shared input")
		return
	}
	*d, *has, *source, *instrument = q.dist, true, q.source, q.instrument
}

// groupedEffects reads the errors that rows of one group share.
func (l *loader) groupedEffects(n *node, k *model.Channel, c *Channel) {
	for _, t := range l.tables(n, "grouped") {
		by := l.word(t, "by", "", roleKeys...)
		if t.fields["by"] == nil {
			l.missing(t, "by", "one of "+strings.Join(roleKeys, ", "))
		}
		u, ok := l.positive(t, "u", wanted{like: k.Unit, interval: true})
		relative, okRelative := l.ratio(t, "relative_u")
		if t.fields["u"] == nil && t.fields["relative_u"] == nil {
			l.missing(t, "u", "the standard uncertainty that the rows of one group share, as u or relative_u")
		}
		ok = ok || okRelative
		g := Grouped{By: by, U: u, Relative: relative, DOF: l.dof(t, "dof")}
		l.text(t, "source")
		if by == "" || !ok {
			continue
		}
		if l.roles[by] == "" {
			l.fail(t.field("by"), "no column says which %s a row belongs to; add [rows] %s = \"…\"", by, by)
			continue
		}
		for _, other := range c.Grouped {
			if other.By == by {
				l.fail(t.field("by"), "a second effect by %s; combine the two into one u", by)
			}
		}
		c.Grouped = append(c.Grouped, g)
	}
}
