package bench

import (
	"math"
	"strconv"
	"strings"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/si"
)

// The usual limits of stored energy and charge, from memory; what the
// laboratory states and local codes prevail.
const (
	usualEnergy = 0.350 // J
	usualCharge = 50e-6 // C
)

// job reads what the certificate, the conformity statement and the cautions
// need.
func (l *loader) job() {
	l.report()
	l.safety()
	l.limits()
	l.drive()
	l.mounting()
	l.spacing()
	l.capability()
	b := l.b
	if t := l.table(l.root, "client"); t != nil {
		b.Client = Client{Name: l.text(t, "name"), Address: l.text(t, "address"), Contact: l.text(t, "contact"), Reference: l.text(t, "reference")}
	}
	if t := l.table(l.root, "item"); t != nil {
		b.Item = Item{Description: l.text(t, "description"), Maker: l.text(t, "maker"), Model: l.text(t, "model"),
			Serial: l.text(t, "serial"), Identification: l.text(t, "identification"), Firmware: l.text(t, "firmware"),
			Condition: l.text(t, "condition"), Range: l.text(t, "range"), Accessories: l.text(t, "accessories")}
	}
	l.work()
}

func (l *loader) work() {
	t := l.table(l.root, "work")
	if t == nil {
		return
	}
	w := Work{
		Laboratory: l.text(t, "laboratory"), Address: l.text(t, "address"), Place: l.text(t, "place"),
		Title: l.text(t, "title"), Certificate: l.text(t, "certificate"),
		Received: l.date(t, "received"), Performed: l.date(t, "performed"), Finished: l.date(t, "finished"), Issued: l.date(t, "issued"),
		Method: l.text(t, "method"), Procedure: l.text(t, "procedure"),
		PerformedBy: l.text(t, "performed_by"), CheckedBy: l.text(t, "checked_by"), AuthorisedBy: l.text(t, "authorised_by"),
		Function: l.text(t, "function"), Traceability: l.text(t, "traceability"),
		Deviations: l.texts(t, "deviations"), Remarks: l.texts(t, "remarks"),
		Adjusted: l.flag(t, "adjusted", false), Adjustment: l.text(t, "adjustment"),
		Recalibration: l.date(t, "recalibration"), Agreed: l.flag(t, "agreed", false),
		Replaces: l.text(t, "replaces"), Reason: l.text(t, "reason"),
	}
	order := []struct{ key, day string }{{"received", w.Received}, {"performed", w.Performed}, {"finished", w.Finished}, {"issued", w.Issued}}
	last := ""
	for _, d := range order {
		if d.day == "" {
			continue
		}
		if last != "" && d.day < last {
			l.fail(t.field(d.key), "%s is before %s; received, performed, finished and issued follow each other", d.day, last)
		}
		last = d.day
	}
	if w.Country = l.text(t, "country"); w.Country != "" && !twoCapitals(w.Country) {
		l.fail(t.field("country"), "%s is no country code of ISO 3166-1; two capital letters are due", shown(t.field("country")))
	}
	if (w.Replaces == "") != (w.Reason == "") {
		l.fail(t, "an amendment names both what it replaces and the reason")
	}
	l.b.Work = w
}

func twoCapitals(s string) bool {
	return len(s) == 2 && s[0] >= 'A' && s[0] <= 'Z' && s[1] >= 'A' && s[1] <= 'Z'
}

// reportCoverage reads the coverage probability of [report].
func (r *reader) reportCoverage(t *node) float64 {
	p := gum.DefaultCoverage
	if t != nil && t.fields["coverage"] != nil {
		if q, ok := r.coverage(t, "coverage"); ok {
			p = q
		}
	}
	return p
}

func (l *loader) report() {
	t := l.table(l.root, "report")
	l.b.Coverage = l.reportCoverage(t)
	if t == nil {
		return
	}
	l.b.Report.Digits, _ = l.whole(t, "digits", 1, 2)
	l.b.Report.Definition = l.text(t, "definition")
}

func (l *loader) safety() {
	s := Safety{Energy: usualEnergy, Charge: usualCharge}
	if t := l.table(l.root, "safety"); t != nil {
		if v, ok := l.positive(t, "energy", wanted{like: si.MustUnit("mJ")}); ok {
			s.Energy, s.Stated = v, true
		}
		if v, ok := l.positive(t, "charge", wanted{like: si.MustUnit("uC")}); ok {
			s.Charge, s.Stated = v, true
		}
		s.Source = l.text(t, "source")
	}
	l.b.Safety = s
}

// inUnit reads a number in the unit u, or a quantity of its dimension.
func (l *loader) inUnit(t *node, key string, u si.Unit, interval bool) (float64, bool) {
	n := t.field(key)
	if n == nil {
		return 0, false
	}
	if n.shape == isNumber && !math.IsNaN(n.number) && !math.IsInf(n.number, 0) {
		if interval {
			return u.DeltaToSI(n.number), true
		}
		return u.ToSI(n.number), true
	}
	v, _, ok := l.number(n, wanted{like: u, interval: interval})
	return v, ok
}

func (l *loader) limits() {
	t := l.table(l.root, "limits")
	if t == nil {
		return
	}
	u, ok := l.unit(t, "unit")
	if !ok {
		if t.fields["unit"] == nil {
			l.missing(t, "unit", "limits without a unit say nothing; write unit = \"1\" for pure numbers")
		}
		return
	}
	m := &Limits{Unit: u, Measurand: l.text(t, "measurand"), Source: l.text(t, "source"), GuardFactor: 1}
	m.Lower, m.HasLower = l.inUnit(t, "lower", u, false)
	m.Upper, m.HasUpper = l.inUnit(t, "upper", u, false)
	if t.fields["lower"] == nil && t.fields["upper"] == nil {
		l.fail(t, "neither lower nor upper is given")
	}
	if m.HasLower && m.HasUpper && !(m.Lower < m.Upper) {
		l.fail(t.field("upper"), "the limits are the wrong way round: lower is %s, upper %s", shown(t.field("lower")), shown(t.field("upper")))
	}
	m.Rule = l.word(t, "rule", "simple", "simple", "guard-band", "non-binary")
	if m.Rule == "simple" {
		m.GuardFactor = 0
		if n := t.field("false_accept"); n != nil {
			l.fail(n, `a guard band belongs to rule = "guard-band" or "non-binary"`)
		}
	}
	l.guard(t, u, m)
	if p, ok := l.probability(t, "false_accept"); ok {
		m.FalseAccept = p
		if p >= 0.5 {
			l.fail(t.field("false_accept"), "a risk of %s is no guard; it must be below 50 %%", shown(t.field("false_accept")))
		}
		if t.fields["guard"] != nil {
			l.fail(t.field("guard"), "guard and false_accept are both given; state one of them")
		}
		m.GuardFactor, m.GuardWidth = 0, 0
	}
	if p := l.table(t, "population"); p != nil {
		m.Population = l.population(p, u, m)
	}
	l.b.Limits = m
}

// guard reads "U", a multiple of it such as "0.83 U", or a width.
func (l *loader) guard(t *node, u si.Unit, m *Limits) {
	n := t.field("guard")
	if n == nil {
		return
	}
	if m.Rule == "simple" {
		l.fail(n, `a guard band belongs to rule = "guard-band" or "non-binary"`)
		return
	}
	if n.shape == isText {
		if before, ok := strings.CutSuffix(strings.TrimSpace(n.text), "U"); ok {
			before = strings.TrimSpace(before)
			if before == "" {
				m.GuardFactor = 1
				return
			}
			f, err := strconv.ParseFloat(before, 64)
			if err != nil || !(f > 0) || math.IsInf(f, 0) {
				l.fail(n, `%s is no multiple of U; write "U" or "0.83 U"`, shown(n))
				return
			}
			m.GuardFactor = f
			return
		}
	}
	if w, ok := l.inUnit(t, "guard", u, true); ok {
		if !(w > 0) {
			l.fail(n, "a guard band must be above zero")
			return
		}
		m.GuardFactor, m.GuardWidth = 0, w
	}
}

func (l *loader) population(t *node, u si.Unit, m *Limits) *Population {
	p := &Population{Source: l.text(t, "source")}
	mean, ok := l.inUnit(t, "mean", u, false)
	if t.fields["mean"] == nil {
		if !m.HasLower || !m.HasUpper {
			l.missing(t, "mean", "with one limit only, the middle of the population must be stated")
		}
		mean = (m.Lower + m.Upper) / 2
	} else if !ok {
		return nil
	}
	p.Mean = mean
	sd, ok := l.inUnit(t, "sd", u, true)
	switch {
	case t.fields["sd"] == nil:
		l.missing(t, "sd", "the standard deviation of the population")
	case ok && !(sd > 0):
		l.fail(t.field("sd"), "%s must be above zero", shown(t.field("sd")))
	}
	p.SD = sd
	return p
}

// given reads a quantity under key for the certificate. A quantity that the kind
// takes itself has been read before; it is read again, since both want it.
func (l *loader) given(t *node, key, like string) Quantity {
	n := t.field(key)
	if n == nil || l.kind.Scalar(t.path+"."+key) >= 0 && n.shape == isTable && n.fields["column"] != nil {
		return Quantity{}
	}
	cited, errs := len(l.cited), len(l.errs.list)
	q, ok := l.quantity(n, wanted{like: si.MustUnit(like)})
	if l.kind.Scalar(t.path+"."+key) >= 0 { // what is wrong with it has been said
		l.cited, l.errs.list = l.cited[:cited], l.errs.list[:errs]
	}
	if !ok || !q.hasValue {
		return Quantity{}
	}
	return Quantity{Given: true, Dist: q.dist, Unit: q.unit, Instrument: q.instrument, Source: q.source}
}

// choice is a word that the kind may offer as an option; otherwise it is free
// text for the certificate.
func (l *loader) choice(t *node, key string, known ...string) string {
	if s, ok := l.b.Options[t.path+"."+key]; ok {
		return s
	}
	if len(known) > 0 {
		return l.word(t, key, "", known...)
	}
	return l.text(t, key)
}

func (l *loader) drive() {
	t := l.table(l.root, "drive")
	if t == nil {
		l.b.Drive = Drive{Kind: l.b.Options["drive.kind"], Value: l.b.Options["drive.value"], Waveform: l.b.Options["drive.waveform"]}
		return
	}
	l.b.Drive = Drive{Kind: l.choice(t, "kind", "balanced", "one-side-earthed"), Value: l.choice(t, "value", "dc", "rms", "peak"),
		Frequency: l.given(t, "frequency", "Hz"), THD: l.given(t, "thd", "%"), Waveform: l.choice(t, "waveform")}
}

func (l *loader) mounting() {
	t := l.table(l.root, "mounting")
	if t == nil {
		l.b.Mounting.Kind = l.b.Options["mounting.kind"]
		return
	}
	l.b.Mounting = Mounting{Kind: l.choice(t, "kind", "free-body", "flush"), ReferencePlane: l.choice(t, "reference_plane"),
		Orientation: l.choice(t, "orientation"), SignConvention: l.choice(t, "sign_convention"), Description: l.choice(t, "description")}
}

func (l *loader) spacing() {
	t := l.table(l.root, "spacing")
	if t == nil {
		return
	}
	s := Spacing{Centre: l.given(t, "centre", "mm"), Method: l.choice(t, "method"), Instrument: l.instrument(t), Description: l.choice(t, "description")}
	if n := t.field("points"); n != nil && l.kind.Scalar("spacing.points") < 0 {
		if n.shape != isArray {
			l.fail(n, `%s where lengths are due, like ["100.02 mm", "99.98 mm"]`, shown(n))
			return
		}
		for _, e := range n.items {
			v, _, ok := l.number(e, wanted{like: si.MustUnit("mm")})
			if ok && !(v > 0) {
				l.fail(e, "%s: a distance must be above zero", shown(e))
			}
			s.Points = append(s.Points, v)
		}
	}
	l.b.Spacing = s
}

func (l *loader) capability() {
	t := l.table(l.root, "capability")
	if t == nil {
		return
	}
	c := &Capability{K: 2, Scope: l.text(t, "scope"), Source: l.text(t, "source"), Unit: si.One}
	any := wanted{any: true, interval: true}
	if n := t.field("expanded"); n != nil {
		if v, u, ok := l.number(n, any); ok {
			c.U, c.Unit = v, u
			if !(v > 0) {
				l.fail(n, "%s must be above zero", shown(n))
			}
		}
	}
	if v, ok := l.ratio(t, "relative_expanded"); ok {
		c.Relative = v
	}
	if (t.fields["expanded"] == nil) == (t.fields["relative_expanded"] == nil) {
		l.fail(t, "state either expanded or relative_expanded")
	}
	if n := t.field("k"); n != nil {
		if k, ok := l.coverageFactor(n); ok {
			c.K = k
		}
	}
	for _, e := range []struct {
		key string
		q   *Quantity
	}{{"lower", &c.Lower}, {"upper", &c.Upper}} {
		if n := t.field(e.key); n != nil {
			if q, ok := l.quantity(n, wanted{any: true}); ok && q.hasValue {
				*e.q = Quantity{Given: true, Dist: q.dist, Unit: q.unit}
			}
		}
	}
	if c.Lower.Given && c.Upper.Given {
		switch {
		case c.Lower.Unit.Dim != c.Upper.Unit.Dim:
			l.fail(t.field("upper"), "%s and %s don't measure the same", shown(t.field("lower")), shown(t.field("upper")))
		case !(c.Lower.Dist.Value < c.Upper.Dist.Value):
			l.fail(t.field("upper"), "the range is the wrong way round: lower is %s, upper %s", shown(t.field("lower")), shown(t.field("upper")))
		}
	}
	l.b.Capability = c
}
