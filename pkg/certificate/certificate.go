package certificate

import (
	"fmt"
	"math"
	"regexp"
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
	Check          string // of the uncertainty by Monte Carlo trials; "" when none was made
	Software       string // version
	Inputs         []reduce.Input
	Run            string

	item    bench.Item
	base    string // name of the measurand that is stated
	figures []*figure.Figure
}

// keys are those of bench.toml that follow an input's name in a warning; who reads a
// certificate has no such file.
var keys = regexp.MustCompile(` \((?:channels|corrections|environment|quantities)\.[a-z0-9_.]+\)`)

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
	c.leftOut(r)
	c.trials(r)
	for _, warning := range rec.Warnings {
		c.Observations = append(c.Observations, keys.ReplaceAllString(figure.OneLine(warning), ""))
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
	if err := c.fits(); err != nil {
		return nil, err
	}
	return c, nil
}

// trials says whether the Monte Carlo check of the stated results confirms the law
// of propagation (JCGM 101:2008 clause 8).
func (c *Certificate) trials(r *reduce.Result) {
	n := 0
	for i := range r.Record.Measurands {
		m := &r.Record.Measurands[i]
		if m.MonteCarlo == nil || !c.states(r, m.Name) {
			continue
		}
		n = m.MonteCarlo.Trials
		if !m.MonteCarlo.Agrees {
			c.Observations = append(c.Observations, fmt.Sprintf("%s: Monte Carlo trials do not confirm the law of propagation; their coverage interval is %s to %s",
				figure.Words(m.Name), shown(significant(float64(m.MonteCarlo.Interval[0]), 6)), with(significant(float64(m.MonteCarlo.Interval[1]), 6), siUnit(m.Unit))))
		}
	}
	if n > 0 {
		c.Check = fmt.Sprintf(" and checked by %d Monte Carlo trials of the whole evaluation (JCGM 101:2008)", n)
	}
}

// states reports whether a measurand of the reduction stands on the certificate.
func (c *Certificate) states(r *reduce.Result, name string) bool {
	if len(r.Record.Series) == 0 || strings.HasPrefix(name, "shift of ") {
		return true
	}
	for _, s := range series(r) {
		if name == reduce.SeriesName(c.base, s) || name == reduce.SeriesName("zero_offset", s) {
			return true
		}
	}
	return false
}

// siUnit is the unit of a record.
func siUnit(symbol string) si.Unit {
	u, err := si.ParseUnit(symbol)
	if err != nil {
		return si.Unit{Symbol: symbol, Factor: 1}
	}
	return u
}

// leftOut says which readings did not enter the results.
func (c *Certificate) leftOut(r *reduce.Result) {
	over := 0
	for i, k := range r.Bench.Rows.Kind {
		if k == bench.Overrange && !r.Bench.Rows.Excluded[i] {
			over++
		}
	}
	if over > 0 {
		c.Observations = append(c.Observations, fmt.Sprintf("readings over the item's range, not in the results: %d", over))
	}
	if n, full := atFullScale(r.Bench); n > 0 {
		c.Observations = append(c.Observations, fmt.Sprintf("readings at the end of the range, %s, where the item may have been clipped: %d", full, n))
	}
	count := map[string]int{}
	var reasons []string
	for _, e := range r.Record.Exclusions {
		if count[e.Reason] == 0 {
			reasons = append(reasons, e.Reason)
		}
		count[e.Reason]++
	}
	for _, reason := range reasons {
		c.Observations = append(c.Observations, fmt.Sprintf("readings left out: %d, %s", count[reason], or(figure.OneLine(reason), "no reason stated")))
	}
}

// atFullScale counts the readings that stand at the end of the range as the bench
// states it, which is also told.
func atFullScale(b *bench.Bench) (n int, full string) {
	s := scalar(b, "full_scale")
	if s == nil || !(s.Dist.Value > 0) {
		return 0, ""
	}
	for _, ch := range b.Channels {
		if ch.Name != "indication" {
			continue
		}
		for i, x := range ch.Readings {
			// One part in 10¹² is the rounding of two numbers written in different units.
			if b.Rows.Kind[i] == bench.Reading && !b.Rows.Excluded[i] && math.Abs(x) >= s.Dist.Value*(1-1e-12) {
				n++
			}
		}
	}
	return n, with(significant(s.Unit.FromSI(s.Dist.Value), 4), s.Unit)
}

// deviations are those stated; the word none is none.
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
