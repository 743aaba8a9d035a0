package certificate

import (
	"fmt"
	"slices"
	"strconv"
	"strings"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/si"
)

// kind says what a block is.
type kind int

const (
	masthead kind = iota // laboratory, title, identification
	heading
	facts
	para
	notices
	table
	drawing
	end
)

// block is one piece of the printed certificate, the same for HTML and PDF.
type block struct {
	kind  kind
	text  string
	facts []Fact
	lines []string
	table *grid
	fig   *figure.Figure
}

// grid is a table whose cells are text.
type grid struct {
	columns []column
	rows    [][]string
	wide    []float64 // of the columns, once they are known
}

type column struct {
	name, unit string
	right      bool // numbers
	strong     bool
}

// sheet is the certificate as blocks in their order.
func (c *Certificate) sheet() []block {
	var out []block
	add := func(b block) { out = append(out, b) }
	head := func(s string) { add(block{kind: heading, text: s}) }
	list := func(f ...Fact) {
		var some []Fact
		for _, x := range f {
			if x.Text != "" {
				some = append(some, x)
			}
		}
		if len(some) > 0 {
			add(block{kind: facts, facts: some})
		}
	}
	say := func(s string) { add(block{kind: para, text: s}) }
	add(block{kind: masthead})
	if a := c.Amendment; a != nil {
		head("Amendment")
		list(Fact{"replaces", "certificate " + a.Replaces}, Fact{"reason", a.Reason})
		for _, f := range a.Files {
			list(Fact{"SHA-256 of " + f.File, f.SHA256})
		}
	}
	head("Client")
	list(Fact{"name", c.Client.Name}, Fact{"address", c.Client.Address}, Fact{"contact", c.Client.Contact}, Fact{"reference", c.Order})
	head("Item")
	list(c.Item...)
	say("This certificate relates only to the item described here.")
	head("Work")
	list(Fact{"received", c.Received}, Fact{"performed", period(c.Performed, c.Finished)}, Fact{"issued", c.Issued}, Fact{"place", c.Place},
		Fact{"method", c.Method}, Fact{"procedure", c.Procedure}, Fact{"adjustment", or(c.Adjustment, "the item was not adjusted")})
	if len(c.Setup) > 0 {
		head("Arrangement")
		list(c.Setup...)
	}
	head("Conditions")
	var conditions []Fact
	for _, q := range c.Conditions {
		conditions = append(conditions, Fact{q.Name, q.text(true)})
	}
	list(conditions...)
	c.sheetResults(head, list, add)
	head("Traceability")
	say(c.Traceability)
	add(block{kind: table, table: c.instrumentGrid()})
	head("Uncertainty")
	say(c.uncertainty())
	head("Deviations and remarks")
	list(Fact{"deviations from the method", or(strings.Join(c.Deviations, "; "), "none")})
	if len(c.Observations) > 0 {
		say("The evaluation of the readings says:")
		add(block{kind: notices, lines: c.Observations})
	}
	if len(c.Remarks) > 0 {
		say("Remarks:")
		add(block{kind: notices, lines: c.Remarks})
	}
	if c.Recalibration != "" {
		list(Fact{"recalibration, as agreed with the client", c.Recalibration})
	}
	if len(c.Cautions) > 0 {
		head("Cautions")
		for _, s := range c.Cautions {
			say(s)
		}
	}
	head("Authorisation")
	for _, p := range c.Persons {
		text := p.Name
		if p.Function != "" {
			text += ", " + p.Function
		}
		list(Fact{p.Role, text})
	}
	list(Fact{"evaluated with", c.Run})
	for _, in := range c.Inputs {
		list(Fact{"SHA-256 of " + in.File, in.SHA256})
	}
	c.sheetPoints(head, list, add)
	head("Figures")
	for _, f := range c.figures {
		add(block{kind: drawing, fig: f})
	}
	add(block{kind: end, text: "End of certificate " + c.Identification})
	return out
}

// uncertainty says what U is and how it was found.
func (c *Certificate) uncertainty() string {
	return fmt.Sprintf("U is the expanded uncertainty: the standard uncertainty times the coverage factor k stated beside it, chosen for a coverage probability of %s. "+
		"It was evaluated by the law of propagation of uncertainty (JCGM 100:2008)%s. U is given in the unit of the result.", spaced(si.Percent(c.Coverage)), c.Check)
}

func (c *Certificate) sheetResults(head func(string), list func(...Fact), add func(block)) {
	head("Results")
	g := &grid{columns: []column{{name: "result"}, {name: "value", right: true, strong: true}, {name: "U", right: true}, {name: "unit"}, {name: "k", right: true}}}
	row := func(name string, q *Quantity) {
		g.rows = append(g.rows, []string{name, shown(q.Value), shown(q.Expanded), unitText(q.Unit), q.K})
	}
	for i := range c.Results {
		r := &c.Results[i]
		row(title(r.Value.Name, r.Name), &r.Value)
		if r.Zero != nil {
			row(title(r.Zero.Name, r.Name), r.Zero)
		}
	}
	for i := range c.Shifts {
		row("shift by adjustment, as left less as found"+suffix(c.Shifts[i].Name), &c.Shifts[i])
	}
	add(block{kind: table, table: g.without("unit")})
	list(Fact{c.Definition.Label, c.Definition.Text})
	c.sheetConformity(head, list, add)
}

// sheetPoints tells every series point by point.
func (c *Certificate) sheetPoints(head func(string), list func(...Fact), add func(block)) {
	for i := range c.Results {
		r := &c.Results[i]
		if len(r.Points) == 0 {
			continue
		}
		head("Points" + suffix(r.Name))
		unit := unitText(r.Value.Unit)
		g := &grid{columns: []column{{name: r.Level.Label, unit: unitText(r.LevelUnit), right: true}, {name: "readings", right: true},
			{name: r.Level.Text, unit: unitText(r.Indicated), right: true}, {name: "this point alone", unit: unit, right: true},
			{name: r.Value.Name, unit: unit, right: true, strong: true}, {name: "U", unit: unit, right: true}, {name: "k", right: true}}}
		for _, p := range r.Points {
			g.rows = append(g.rows, []string{shown(p.Level), strconv.Itoa(p.Readings), shown(p.Indication), shown(p.Observed), shown(p.Value.Value), p.Value.Expanded, p.Value.K})
		}
		add(block{kind: table, table: g})
		list(r.Scatter...)
		if len(r.Departures) > 0 {
			g := &grid{columns: []column{{name: "departure from a straight line"}, {name: "what it is"}, {name: "size", unit: "%", right: true}, {name: "U\u00a0(k\u00a0=\u00a02)", unit: "%", right: true},
				{name: "p", right: true}, {name: "at 1 %"}}}
			for _, d := range r.Departures {
				verdict := "not found"
				if d.Found {
					verdict = "FOUND"
				}
				g.rows = append(g.rows, []string{d.Name, d.Doc, shown(d.Size), d.Expanded, d.Significance, verdict})
			}
			add(block{kind: table, table: g})
		}
	}
}

func (c *Certificate) sheetConformity(head func(string), list func(...Fact), add func(block)) {
	var some []*Conformity
	for i := range c.Results {
		if k := c.Results[i].Conformity; k != nil {
			some = append(some, k)
		}
	}
	if len(some) == 0 {
		return
	}
	head("Conformity")
	list(Fact{"specification", some[0].Source}, Fact{"limits", some[0].Limits}, Fact{"decision rule", some[0].Rule})
	g := &grid{columns: []column{{name: c.Definition.Label}, {name: "accepted", right: true}, {name: "statement", strong: true}, {name: "probability of conformity", right: true}}}
	var labels, sources []string
	for _, l := range []string{falseAcceptance, falseRejection, consumersRisk, producersRisk} {
		for _, k := range some {
			for _, r := range k.Risks {
				if r.Label == l && !slices.Contains(labels, l) {
					labels = append(labels, l)
				}
			}
		}
	}
	for _, k := range some {
		if k.Population != "" && !slices.Contains(sources, k.Population) {
			sources = append(sources, k.Population)
		}
	}
	for _, l := range labels {
		g.columns = append(g.columns, column{name: l, right: true})
	}
	var warnings, alike []string
	for _, k := range some {
		row := []string{k.Series, k.Accepted, strings.ToUpper(k.Verdict), spaced(k.Probability)}
		for _, l := range labels {
			text := "–"
			for _, r := range k.Risks {
				if r.Label == l {
					text = spaced(r.Text)
				}
			}
			row = append(row, text)
		}
		g.rows = append(g.rows, row)
		for _, w := range k.Warnings {
			// What differs in its numbers only is said once.
			if like := strings.Map(noDigit, w); !slices.Contains(alike, like) {
				alike = append(alike, like)
				warnings = append(warnings, lead(k.Series)+w)
			} else if i := slices.Index(alike, like); !strings.HasSuffix(warnings[i], likewise) {
				warnings[i] += likewise
			}
		}
	}
	add(block{kind: table, table: g})
	if len(sources) > 0 {
		list(Fact{"global risks for", strings.Join(sources, "; ")})
	}
	if len(warnings) > 0 {
		add(block{kind: notices, lines: warnings})
	}
}

const likewise = " (likewise for others)"

func noDigit(r rune) rune {
	if r >= '0' && r <= '9' {
		return -1
	}
	return r
}

// without leaves out a column that has nothing in any row.
func (g *grid) without(name string) *grid {
	for j, c := range g.columns {
		if c.name != name {
			continue
		}
		for _, r := range g.rows {
			if r[j] != "" {
				return g
			}
		}
		out := &grid{columns: append(append([]column(nil), g.columns[:j]...), g.columns[j+1:]...)}
		for _, r := range g.rows {
			out.rows = append(out.rows, append(append([]string(nil), r[:j]...), r[j+1:]...))
		}
		return out
	}
	return g
}

// instrumentGrid lists the instruments with their certificates.
func (c *Certificate) instrumentGrid() *grid {
	g := &grid{columns: []column{{name: "instrument"}, {name: "serial"}, {name: "certificate"}, {name: "issued by"}, {name: "calibrated"}, {name: "due"}}}
	for _, in := range c.Instruments {
		name := in.Description
		if name == "" {
			name = figure.Words(in.Name)
		}
		for _, x := range []string{in.Maker, in.Model} {
			if x != "" {
				name += ", " + x
			}
		}
		g.rows = append(g.rows, []string{name, in.Serial, in.Certificate, in.IssuedBy, in.Calibrated, in.Due})
	}
	return g
}

// Text writes a quantity with its uncertainty and coverage factor.
func (q *Quantity) Text() string { return q.text(true) }

// text writes a quantity with its uncertainty; with says whether k stands there.
func (q *Quantity) text(k bool) string {
	if q.Expanded == "" {
		return with(q.Value, q.Unit)
	}
	s := "(" + shown(q.Value) + " ± " + shown(q.Expanded) + ")"
	if t := unitText(q.Unit); t != "" {
		s += "\u00a0" + t
	}
	if k {
		s += ", k = " + q.K
	}
	return s
}

func spaced(s string) string { return strings.ReplaceAll(s, " %", "\u00a0%") }

func suffix(name string) string {
	if name == "" {
		return ""
	}
	return ", " + name
}

func or(s, other string) string {
	if s == "" {
		return other
	}
	return s
}

func period(first, last string) string {
	if last == "" || last == first {
		return first
	}
	return first + " to " + last
}

// one is a text as one printable line.
func one(s string) string { return figure.OneLine(s) }
