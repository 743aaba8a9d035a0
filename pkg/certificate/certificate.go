package certificate

import (
	"fmt"
	"math"
	"regexp"
	"sort"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// Certificate is a calibration certificate before it takes a form. Texts are as
// the bench has them, on one line each; every form escapes them.
type Certificate struct {
	Title          string
	Identification string
	Laboratory     Party
	Country        string // ISO 3166-1, for the XML form
	Place          string // where the work was done
	Client         Party
	Order          string // the client's reference
	Item           []Fact
	Received       string // dates are ISO 8601
	Performed      string
	Finished       string // last day of the work
	Issued         string
	Recalibration  string // only when agreed with the client
	Method         string
	Procedure      string
	Setup          []Fact // mounting, drive, plates, spacing
	Conditions     []Quantity
	Instruments    []bench.Instrument
	Traceability   string
	Adjustment     string // what was done; "" when the item was not adjusted
	Definition     Fact   // the result's name and what it is
	Coverage       float64
	Results        []Result
	Shifts         []Quantity // changes by adjustment
	Deviations     []string
	Observations   []string // warnings of the reduction
	Remarks        []string
	Cautions       []string
	Persons        []Person
	Amendment      *Amendment
	Software       string // version
	Inputs         []reduce.Input
	Run            string

	item    bench.Item
	figures []*figure.Figure
}

// identifiers are keys of a bench in a sentence.
var identifiers = regexp.MustCompile(`\b[a-z]+(_[a-z]+)+\b`)

// Party is a laboratory or a client.
type Party struct{ Name, Address, Contact string }

// Fact is a labelled text.
type Fact struct{ Label, Text string }

// Person is somebody who answers for the certificate.
type Person struct{ Role, Name, Function string }

// Result is what is stated for one series of readings: one range as found or as
// left, or the whole bench.
type Result struct {
	Name  string // "as-found, 20 kV/m"; "" for a single series
	Phase string // reduce.AsFound, reduce.AsLeft or ""
	// Value is the result for the whole range, and Zero the zero offset where the
	// fit found one.
	Value Quantity
	Zero  *Quantity
	// Points, at each level; nil for a kind that states none.
	Level      Fact // name of the level and of the indication
	LevelUnit  si.Unit
	Indicated  si.Unit
	Points     []Point
	Scatter    []Fact // non-linearity, repeatability, reproducibility
	Departures []Departure
	Conformity *Conformity
}

// Point is one level.
type Point struct {
	Level      string // in LevelUnit
	Readings   int
	Indication string // in Indicated
	Observed   string // the result from this point alone
	Value      Quantity
}

// Departure is something that sets readings apart from a straight line.
type Departure struct {
	Name, Doc      string
	Size, Expanded string // in %, expanded with k = 2
	Significance   string // probability of a larger one by chance
	Found          bool   // at 1 %
}

// Settings adjust New. The zero value makes a first certificate.
type Settings struct {
	// Replaced are the files that the certificate replaces, in the order of the
	// command; with them the bench must state an amendment.
	Replaced []Replaced
}

// series names the parts of a reduction that have results of their own.
func series(r *reduce.Result) []string {
	var names []string
	for _, s := range r.Record.Series {
		names = append(names, s.Name)
	}
	if len(names) == 0 {
		names = []string{""}
	}
	return names
}

// New makes the certificate of a reduction. A missing item is an *Incomplete; an
// uncertainty, unit or decision that can't be stated is an error of its own.
func New(r *reduce.Result, s Settings) (*Certificate, error) {
	b, rec := r.Bench, &r.Record
	if b == nil {
		return nil, fmt.Errorf("certificate: the result has lost its bench; reduce the folder again")
	}
	if rec.Fit.Status != "converged" || len(rec.Measurands) == 0 {
		return nil, fmt.Errorf("certificate: nothing is certified from a fit that is %s: %s", rec.Fit.Status, rec.Fit.Reason)
	}
	g := check(r, s)
	if len(g.Gaps) > 0 {
		return nil, g
	}
	w := b.Work
	c := &Certificate{
		Title: w.Title, Identification: w.Certificate,
		Laboratory: Party{Name: w.Laboratory, Address: w.Address}, Country: w.Country, Place: w.Place,
		Client: Party{Name: b.Client.Name, Address: b.Client.Address, Contact: b.Client.Contact}, Order: b.Client.Reference,
		Received: w.Received, Performed: w.Performed, Finished: w.Finished, Issued: w.Issued,
		Method: w.Method, Procedure: w.Procedure, Instruments: b.Instruments, Traceability: w.Traceability,
		Coverage: float64(rec.Measurands[0].Probability), Remarks: w.Remarks, Deviations: deviations(w),
		Software: rec.Guardring, Inputs: rec.Inputs, item: b.Item,
	}
	if c.Finished == "" {
		c.Finished = c.Performed
	}
	if w.Agreed {
		c.Recalibration = w.Recalibration
	}
	if w.Adjusted {
		c.Adjustment = w.Adjustment
	}
	c.Item = itemFacts(b.Item)
	c.Setup = setup(r)
	for _, e := range b.Environment {
		c.Conditions = append(c.Conditions, condition(e))
	}
	for _, p := range []Person{{"measured by", w.PerformedBy, ""}, {"checked by", w.CheckedBy, ""}, {"authorised by", w.AuthorisedBy, w.Function}} {
		if p.Name != "" {
			c.Persons = append(c.Persons, p)
		}
	}
	if err := c.results(r); err != nil {
		return nil, err
	}
	c.found()
	for _, warning := range rec.Warnings {
		c.Observations = append(c.Observations, identifiers.ReplaceAllStringFunc(figure.OneLine(warning), figure.Words))
	}
	c.Cautions = cautions(&rec.Hazard)
	if err := c.amend(b, s); err != nil {
		return nil, err
	}
	c.Run = fmt.Sprintf("guardring %s, seed %d", rec.Guardring, rec.Run.Seed)
	if rec.Run.Trials > 0 {
		c.Run += fmt.Sprintf(", %d Monte Carlo trials", rec.Run.Trials)
	}
	if err := c.draw(r); err != nil {
		return nil, err
	}
	return c, nil
}

// found says where one number does not describe a series, so that nobody takes
// it for the whole range without looking at the points.
func (c *Certificate) found() {
	for i := range c.Results {
		r := &c.Results[i]
		for _, d := range r.Departures {
			if d.Found {
				c.Observations = append(c.Observations, fmt.Sprintf("%s%s of (%s ± %s)\u00a0%% found: one %s does not describe this series, and its U does not cover the departure; the points show it",
					lead(r.Name), d.Name, shown(d.Size), d.Expanded, r.Value.Name))
			}
		}
	}
}

// results states every series, its conformity and the shifts by adjustment.
func (c *Certificate) results(r *reduce.Result) error {
	b, rec := r.Bench, &r.Record
	base, err := stated(r)
	if err != nil {
		return err
	}
	least, err := leastOf(b.Capability, rec, base)
	if err != nil {
		return err
	}
	for i, name := range series(r) {
		m := measurand(rec, reduce.SeriesName(base, name))
		if m == nil {
			return fmt.Errorf("certificate: the reduction states no %s for %q", base, name)
		}
		unit, err := unitFor(m)
		if err != nil {
			return err
		}
		words := figure.Words(base)
		if i == 0 {
			c.Definition = Fact{words, m.Doc}
		}
		res := Result{Name: name, Phase: phase(name), Value: quantity(words, m.Doc, float64(m.Value), float64(m.U), float64(m.K), unit, least)}
		if z := measurand(rec, reduce.SeriesName("zero_offset", name)); z != nil && base != "zero_offset" {
			zu, err := unitFor(z)
			if err != nil {
				return err
			}
			q := quantity("zero offset", z.Doc, float64(z.Value), float64(z.U), float64(z.K), zu, nil)
			res.Zero = &q
		}
		if i < len(rec.Series) {
			if err := res.points(&rec.Series[i], rec, base, words, unit, least); err != nil {
				return err
			}
			c.scope(b.Capability, &rec.Series[i])
		}
		if res.Conformity, err = decide(b, &res, m); err != nil {
			return err
		}
		if res.Value.Raised {
			c.Observations = append(c.Observations, fmt.Sprintf("%s: the uncertainty found is below the laboratory's stated capability, which is stated in its place",
				title(words, name)))
		}
		c.Results = append(c.Results, res)
	}
	if len(rec.Series) == 0 {
		// A kind without series states all its measurands.
		for i := range rec.Measurands {
			m := &rec.Measurands[i]
			if m.Name == base {
				continue
			}
			unit, err := unitFor(m)
			if err != nil {
				return err
			}
			res := Result{Value: quantity(figure.Words(m.Name), m.Doc, float64(m.Value), float64(m.U), float64(m.K), unit, nil)}
			if res.Conformity, err = decide(b, &res, m); err != nil {
				return err
			}
			c.Results = append(c.Results, res)
		}
	}
	for i := range rec.Measurands {
		m := &rec.Measurands[i]
		if rest, ok := strings.CutPrefix(m.Name, "shift of "+base); ok {
			unit, err := unitFor(m)
			if err != nil {
				return err
			}
			name := strings.TrimSuffix(strings.TrimPrefix(rest, " ("), ")")
			c.Shifts = append(c.Shifts, quantity(name, m.Doc, float64(m.Value), float64(m.U), float64(m.K), unit, nil))
		}
	}
	return nil
}

// points states a series at each level.
func (res *Result) points(s *reduce.Series, rec *reduce.Record, base, words string, unit si.Unit, least *capability) error {
	// The other definition of the factor is the inverse, with the same relative
	// uncertainty: |d(1/N)/dN| u = u/N².
	inverse := s.Result == "correction_factor" && base == "response"
	if s.Result != base && !inverse {
		return fmt.Errorf("certificate: points are stated as %s; report.definition = %q can't be stated point by point", figure.Words(s.Result), base)
	}
	var level, indication float64
	for _, p := range s.Points {
		level = math.Max(level, math.Abs(float64(p.Level)))
		indication = math.Max(indication, math.Abs(float64(p.Indication)))
	}
	var err error
	if res.LevelUnit, err = prefixed(level, s.LevelUnit); err != nil {
		return err
	}
	if res.Indicated, err = prefixed(indication, rec.Fit.ResponseUnit); err != nil {
		return err
	}
	res.Level = Fact{s.Level, "indication"}
	// Five digits of the largest, the same place for all.
	levelPlace, indicationPlace := fifth(res.LevelUnit.FromSI(level)), fifth(res.Indicated.FromSI(indication))
	for _, p := range s.Points {
		value, u, observed := float64(p.Value), float64(p.U), float64(p.Observed)
		if inverse {
			value, u, observed = 1/value, u/(value*value), 1/observed
		}
		q := quantity(words, "", value, u, float64(p.K), unit, least)
		place := 0
		if _, frac, ok := strings.Cut(q.Value, "."); ok {
			place = -len(frac)
		}
		res.Points = append(res.Points, Point{Level: at(res.LevelUnit.FromSI(float64(p.Level)), levelPlace), Readings: p.Rows,
			Indication: at(res.Indicated.FromSI(float64(p.Indication)), indicationPlace), Observed: at(unit.FromSI(observed), place), Value: q})
	}
	percent := func(x reduce.Number) string { return significant(100*float64(x), 2) + "\u00a0%" }
	if known(s.NonLinearity) && s.FullScale > 0 {
		res.Scatter = append(res.Scatter, Fact{"non-linearity", percent(s.NonLinearity) + " of " +
			with(significant(res.Indicated.FromSI(float64(s.FullScale)), 4), res.Indicated) + ", the largest departure of a point from the fit"})
	}
	if known(s.Repeatability) {
		res.Scatter = append(res.Scatter, Fact{"repeatability", fmt.Sprintf("%s of the reading, standard deviation with %d degrees of freedom", percent(s.Repeatability), s.RepeatabilityDOF)})
	}
	if known(s.Reproducibility) {
		res.Scatter = append(res.Scatter, Fact{"reproducibility", fmt.Sprintf("%s, standard deviation between %d mountings", percent(s.Reproducibility), s.Mountings)})
	}
	for _, e := range s.Effects {
		v, u := round(100*float64(e.Estimate), 200*float64(e.U), 0)
		p := fixed(float64(e.PValue), 3)
		if e.PValue < 0.001 {
			p = "< 0.001"
		}
		res.Departures = append(res.Departures, Departure{e.Name, e.Doc, v, u, p, !e.Passed})
	}
	return nil
}

func known(n reduce.Number) bool { return !math.IsNaN(float64(n)) && !math.IsInf(float64(n), 0) }

// scope says which levels lie outside the range of the stated capability.
func (c *Certificate) scope(k *bench.Capability, s *reduce.Series) {
	if k == nil {
		return
	}
	unit, err := si.ParseUnit(s.LevelUnit)
	if err != nil {
		return // unitFor has refused such a unit before
	}
	var out []string
	seen := map[string]bool{}
	for _, p := range s.Points {
		x := math.Abs(float64(p.Level))
		low := k.Lower.Given && k.Lower.Unit.Dim == unit.Dim && x < k.Lower.Dist.Value
		high := k.Upper.Given && k.Upper.Unit.Dim == unit.Dim && x > k.Upper.Dist.Value
		if low || high {
			du, err := prefixed(x, s.LevelUnit)
			if err != nil {
				return
			}
			if t := with(significant(du.FromSI(x), 3), du); !seen[t] {
				seen[t] = true
				out = append(out, t)
			}
		}
	}
	if len(out) > 0 {
		c.Observations = append(c.Observations, fmt.Sprintf("%slevels outside the range of the laboratory's stated capability: %s", lead(s.Name), strings.Join(out, ", ")))
	}
}

func lead(name string) string {
	if name == "" {
		return ""
	}
	return name + ": "
}

// title is a result's name with its series.
func title(words, name string) string {
	if name == "" {
		return words
	}
	return words + ", " + name
}

// phase is the phase that the name of a series begins with.
func phase(name string) string {
	for _, p := range []string{reduce.AsFound, reduce.AsLeft} {
		if name == p || strings.HasPrefix(name, p+", ") {
			return p
		}
	}
	return ""
}

// stated is the name of the measurand that the certificate is about: what
// [report] definition says, else the first.
func stated(r *reduce.Result) (string, error) {
	var bases []string
	for i := range r.Record.Measurands {
		m := r.Record.Measurands[i].Name
		for _, s := range series(r) {
			if b, ok := strings.CutSuffix(m, reduce.SeriesName("", s)); ok && !strings.HasPrefix(b, "shift of ") && !contains(bases, b) {
				bases = append(bases, b)
			}
		}
	}
	def := r.Bench.Report.Definition
	if def == "" {
		return bases[0], nil
	}
	for _, b := range bases {
		if def == b || def == figure.Words(b) {
			return b, nil
		}
	}
	return "", fmt.Errorf("%s/bench.toml: report.definition: %q is no result of this bench; it may be %s", r.Bench.Dir, def, strings.Join(bases, ", "))
}

func contains(list []string, s string) bool {
	for _, x := range list {
		if x == s {
			return true
		}
	}
	return false
}

func measurand(rec *reduce.Record, name string) *reduce.Measurand {
	for i := range rec.Measurands {
		if rec.Measurands[i].Name == name {
			return &rec.Measurands[i]
		}
	}
	return nil
}

// unitFor chooses the unit in which a measurand is stated: its own, with the
// prefix that suits it.
func unitFor(m *reduce.Measurand) (si.Unit, error) {
	return prefixed(math.Max(math.Abs(float64(m.Value)), float64(m.K*m.U)), m.Unit)
}

func prefixed(x float64, symbol string) (si.Unit, error) {
	u, err := si.ParseUnit(symbol)
	if err != nil {
		return u, fmt.Errorf("certificate: %w", err)
	}
	_, u = si.Prefixed(x, u)
	return u, nil
}

// leastOf is the stated capability for a measurand.
func leastOf(k *bench.Capability, rec *reduce.Record, base string) (*capability, error) {
	if k == nil {
		return nil, nil
	}
	if k.U > 0 {
		for i := range rec.Measurands {
			if m := &rec.Measurands[i]; strings.HasPrefix(m.Name, base) {
				u, err := si.ParseUnit(m.Unit)
				if err != nil {
					return nil, fmt.Errorf("certificate: %w", err)
				}
				if u.Dim != k.Unit.Dim {
					return nil, fmt.Errorf("certificate: capability.expanded is in %s, the %s in %s", k.Unit.Symbol, figure.Words(base), m.Unit)
				}
			}
		}
	}
	return &capability{u: k.U, relative: k.Relative, k: k.K}, nil
}

// condition states a quantity of the environment; its coverage factor is 2.
func condition(e bench.Condition) Quantity {
	u := e.Dist.U
	q := Quantity{Name: figure.Words(e.Name), Unit: e.Unit, value: e.Dist.Value, expanded: 2 * u, k: 2}
	if u > 0 {
		q.Value, q.Expanded = round(e.Unit.FromSI(e.Dist.Value), e.Unit.DeltaFromSI(2*u), 0)
		q.K = "2"
	} else {
		q.Value = significant(e.Unit.FromSI(e.Dist.Value), 6)
	}
	return q
}

func itemFacts(i bench.Item) []Fact {
	var out []Fact
	for _, f := range []Fact{{"description", i.Description}, {"maker", i.Maker}, {"model", i.Model}, {"serial number", i.Serial},
		{"client's mark", i.Identification}, {"firmware", i.Firmware}, {"range", i.Range}, {"accessories", i.Accessories}, {"condition as received", i.Condition}} {
		if f.Text != "" {
			out = append(out, f)
		}
	}
	return out
}

// setup tells how the bench stood.
func setup(r *reduce.Result) []Fact {
	b := r.Bench
	var out []Fact
	add := func(label string, parts ...string) {
		var some []string
		for _, p := range parts {
			if p != "" {
				some = append(some, p)
			}
		}
		if len(some) > 0 {
			out = append(out, Fact{label, strings.Join(some, "; ")})
		}
	}
	add("mounting", b.Mounting.Kind, b.Mounting.Description)
	add("reference plane", b.Mounting.ReferencePlane)
	add("orientation", b.Mounting.Orientation)
	add("sign convention", b.Mounting.SignConvention)
	plates := ""
	if w := scalar(b, "corrections.finite_plates.width"); w != nil && w.Given {
		plates = "square plates, width " + with(significant(w.Unit.FromSI(w.Dist.Value), 4), w.Unit)
	}
	add("plates", b.Spacing.Description, plates)
	add("spacing", spacings(b), b.Spacing.Method)
	if b.Drive.Kind != "" {
		add("drive", strings.ReplaceAll(b.Drive.Kind, "-", " "), b.Drive.Waveform)
	}
	switch b.Drive.Value {
	case "dc":
		add("voltage", "dc")
	case "":
	default:
		text := "alternating; values are " + b.Drive.Value
		if b.Drive.Value == "peak" {
			text = "alternating; values are peak values"
		}
		add("voltage", text)
	}
	if f := b.Drive.Frequency; f.Given {
		add("frequency", stateQuantity(f))
	}
	if t := b.Drive.THD; t.Given {
		add("distortion or ripple", stateQuantity(t))
	}
	return out
}

// stateQuantity writes a quantity of the bench with its expanded uncertainty.
func stateQuantity(q bench.Quantity) string {
	x := q.Unit.FromSI(q.Dist.Value)
	if !(q.Dist.U > 0) {
		return with(significant(x, 6), q.Unit)
	}
	v, u := round(x, q.Unit.DeltaFromSI(2*q.Dist.U), 0)
	return "(" + shown(v) + " ± " + u + ")" + with("", q.Unit) + ", k = 2"
}

func scalar(b *bench.Bench, name string) *bench.Scalar {
	for i := range b.Scalars {
		if b.Scalars[i].Name == name {
			return &b.Scalars[i]
		}
	}
	return nil
}

// spacings lists the spacings that the readings were taken at, as read; readings
// within 3 % of each other are one spacing, given as its mean.
func spacings(b *bench.Bench) string {
	var ch *bench.Channel
	for i := range b.Channels {
		if b.Channels[i].Name == "gap" {
			ch = &b.Channels[i]
		}
	}
	if ch == nil {
		return ""
	}
	var d []float64
	for i, x := range ch.Readings {
		if !math.IsNaN(x) && !b.Rows.Excluded[i] {
			d = append(d, x)
		}
	}
	sort.Float64s(d)
	var out []string
	for len(d) > 0 {
		n, sum := 0, 0.0
		for n < len(d) && d[n] <= 1.03*d[0] {
			sum += d[n]
			n++
		}
		out = append(out, with(significant(ch.Unit.FromSI(sum/float64(n)), 5), ch.Unit))
		d = d[n:]
	}
	text := strings.Join(out, " and ")
	if p := b.Spacing.Points; len(p) > 0 {
		var at []string
		for _, x := range p {
			t := significant(ch.Unit.FromSI(x), 6)
			if strings.Contains(t, ".") {
				t = strings.TrimRight(strings.TrimRight(t, "0"), ".")
			}
			at = append(at, t)
		}
		text += "; measured at " + strings.Join(at, ", ") + " " + unitText(ch.Unit)
	}
	return text
}

func deviations(w bench.Work) []string {
	var out []string
	for _, d := range w.Deviations {
		if t := figure.OneLine(d); t != "" && !strings.EqualFold(t, "none") {
			out = append(out, t)
		}
	}
	return out
}

// draw makes the figures: the result against the level with the uncertainties
// that the certificate states, as found and as left together, and the residuals.
func (c *Certificate) draw(r *reduce.Result) error {
	data := figure.Of(r)
	rec := r.Record
	rec.Series = append([]reduce.Series(nil), rec.Series...)
	for i := range rec.Series {
		s := &rec.Series[i]
		s.Points = append([]reduce.Point(nil), s.Points...)
		for j := range s.Points {
			p, q := &s.Points[j], &c.Results[i].Points[j].Value
			if figure.Words(s.Result) != q.Name { // the other definition of the factor
				p.Observed = 1 / p.Observed
			}
			p.Value, p.Expanded, p.K = reduce.Number(q.value), reduce.Number(q.expanded), reduce.Number(q.k)
		}
		s.Result = c.Definition.Label
	}
	data.Record = &rec
	curves, err := data.Curves()
	if err != nil {
		return err
	}
	residuals, err := figure.Residuals(r)
	if err != nil {
		return err
	}
	c.figures = append(curves, residuals)
	return nil
}
