package certificate

import (
	"fmt"
	"io"
	"strconv"
	"strings"

	"github.com/beevik/etree"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// The name spaces of the schema of digital calibration certificates and of the
// quantities in it (DCC 3.3.0, D-SI).
const (
	dccSpace   = "https://ptb.de/dcc"
	siSpace    = "https://ptb.de/si"
	dccVersion = "3.3.0"
)

// XML writes the certificate in the open Digital Calibration Certificate schema,
// version 3.3.0, quantities as in D-SI. Figures are left out; their numbers stand
// in the lists.
func (c *Certificate) XML(w io.Writer) error {
	x := &writerXML{}
	doc := etree.NewDocument()
	doc.CreateProcInst("xml", `version="1.0" encoding="UTF-8"`)
	root := doc.CreateElement("dcc:digitalCalibrationCertificate")
	root.CreateAttr("schemaVersion", dccVersion)
	root.CreateAttr("xmlns:dcc", dccSpace)
	root.CreateAttr("xmlns:si", siSpace)
	x.administration(root.CreateElement("dcc:administrativeData"), c)
	results := root.CreateElement("dcc:measurementResults")
	for i := range c.Results {
		x.result(results.CreateElement("dcc:measurementResult"), c, i)
	}
	if len(c.Shifts) > 0 {
		x.shifts(results.CreateElement("dcc:measurementResult"), c)
	}
	if x.err != nil {
		return x.err
	}
	doc.Indent(2)
	doc.WriteSettings.CanonicalText = true
	doc.WriteSettings.CanonicalAttrVal = true
	_, err := doc.WriteTo(w)
	return err
}

// writerXML keeps the first error: a unit that D-SI has no words for.
type writerXML struct{ err error }

// plain is a text for XML 1.0: one line, without what the form can't hold.
func plain(s string) string {
	return strings.Map(func(r rune) rune {
		if r == '\uFFFE' || r == '\uFFFF' || r >= 0xD800 && r <= 0xDFFF {
			return '\uFFFD'
		}
		return r
	}, one(s))
}

// leaf adds an element with a text; an empty text adds none.
func leaf(e *etree.Element, name, text string) *etree.Element {
	if text = plain(text); text == "" {
		return nil
	}
	l := e.CreateElement(name)
	l.SetText(text)
	return l
}

// words adds an element that holds text in the language of the certificate.
func words(e *etree.Element, name string, text ...string) {
	var some []string
	for _, t := range text {
		if t = plain(t); t != "" {
			some = append(some, t)
		}
	}
	if some == nil {
		return
	}
	n := e.CreateElement(name)
	content := n.CreateElement("dcc:content")
	content.CreateAttr("lang", "en")
	content.SetText(strings.Join(some, "; "))
}

func identification(e *etree.Element, issuer, value, name string) {
	if plain(value) == "" {
		return
	}
	i := e.CreateElement("dcc:identification")
	leaf(i, "dcc:issuer", issuer)
	leaf(i, "dcc:value", value)
	words(i, "dcc:name", name)
}

func (x *writerXML) administration(a *etree.Element, c *Certificate) {
	sw := a.CreateElement("dcc:dccSoftware").CreateElement("dcc:software")
	words(sw, "dcc:name", "guardring")
	leaf(sw, "dcc:release", c.Software)
	leaf(sw, "dcc:type", "application")
	words(sw, "dcc:description", c.Run)

	core := a.CreateElement("dcc:coreData")
	leaf(core, "dcc:countryCodeISO3166_1", c.Country)
	leaf(core, "dcc:usedLangCodeISO639_1", "en")
	leaf(core, "dcc:mandatoryLangCodeISO639_1", "en")
	leaf(core, "dcc:uniqueIdentifier", c.Identification)
	if c.Order != "" {
		identification(core.CreateElement("dcc:identifications"), "customer", c.Order, "reference of the client")
	}
	leaf(core, "dcc:receiptDate", c.Received)
	leaf(core, "dcc:beginPerformanceDate", c.Performed)
	leaf(core, "dcc:endPerformanceDate", c.Finished)
	leaf(core, "dcc:performanceLocation", location(c.Place))
	leaf(core, "dcc:issueDate", c.Issued)
	if m := c.Amendment; m != nil {
		r := core.CreateElement("dcc:reportAmendedSubstituted")
		leaf(r, "dcc:typeOfChange", "amended")
		leaf(r, "dcc:replacedUniqueIdentifier", m.Replaces)
		// The schema holds one previous report; all files stand in the statements.
		p := core.CreateElement("dcc:previousReport")
		words(p, "dcc:referral", "certificate replaced, file "+m.Files[0].File)
		leaf(p, "dcc:referralID", m.Replaces)
		leaf(p, "dcc:procedure", "SHA-256")
		leaf(p, "dcc:value", m.Files[0].SHA256)
		words(p, "dcc:description", m.Reason)
	}

	item := a.CreateElement("dcc:items").CreateElement("dcc:item")
	words(item, "dcc:name", c.item.Description)
	var more []string
	for _, f := range c.Item {
		switch f.Label {
		case "range", "accessories", "condition as received", "firmware":
			more = append(more, f.Label+": "+f.Text)
		}
	}
	words(item, "dcc:description", more...)
	if c.item.Firmware != "" {
		f := item.CreateElement("dcc:installedSoftwares").CreateElement("dcc:software")
		words(f, "dcc:name", "firmware")
		leaf(f, "dcc:release", c.item.Firmware)
		leaf(f, "dcc:type", "firmware")
	}
	words(item.CreateElement("dcc:manufacturer"), "dcc:name", c.item.Maker)
	leaf(item, "dcc:model", c.item.Model)
	ids := item.CreateElement("dcc:identifications")
	identification(ids, "manufacturer", c.item.Serial, "serial number")
	identification(ids, "customer", c.item.Identification, "client's mark")

	contact := a.CreateElement("dcc:calibrationLaboratory").CreateElement("dcc:contact")
	words(contact, "dcc:name", c.Laboratory.Name)
	where := contact.CreateElement("dcc:location")
	words(where, "dcc:further", c.Laboratory.Address)
	leaf(where, "dcc:countryCode", c.Country)

	persons := a.CreateElement("dcc:respPersons")
	for _, p := range c.Persons {
		r := persons.CreateElement("dcc:respPerson")
		words(r.CreateElement("dcc:person"), "dcc:name", p.Name)
		role := p.Role
		if p.Function != "" {
			role += ", " + p.Function
		}
		leaf(r, "dcc:role", role)
		leaf(r, "dcc:mainSigner", strconv.FormatBool(p.Function != ""))
	}

	customer := a.CreateElement("dcc:customer")
	words(customer, "dcc:name", c.Client.Name)
	words(customer.CreateElement("dcc:location"), "dcc:further", c.Client.Address, c.Client.Contact)

	x.statements(a.CreateElement("dcc:statements"), c)
}

// location is the schema's word for a place.
func location(place string) string {
	p := strings.ToLower(place)
	switch {
	case strings.Contains(p, "client") || strings.Contains(p, "customer"):
		return "customer"
	case strings.Contains(p, "laborator"):
		return "laboratory"
	}
	return "other"
}

// statements hold what the schema has no element for, and conformity.
func (x *writerXML) statements(e *etree.Element, c *Certificate) {
	say := func(name, text string) {
		if plain(text) == "" {
			return
		}
		s := e.CreateElement("dcc:statement")
		words(s, "dcc:name", name)
		words(s, "dcc:declaration", text)
	}
	say("title", c.Title)
	say("validity", "This certificate relates only to the item described.")
	say("place", c.Place)
	say(c.Definition.Label, c.Definition.Text)
	for _, f := range c.Setup {
		say(f.Label, f.Text)
	}
	say("adjustment", or(c.Adjustment, "the item was not adjusted"))
	trace := e.CreateElement("dcc:statement")
	words(trace, "dcc:name", "traceability")
	leaf(trace, "dcc:traceable", "true")
	words(trace, "dcc:declaration", c.Traceability)
	say("uncertainty", c.uncertainty())
	say("deviations from the method", or(strings.Join(c.Deviations, "; "), "none"))
	for _, o := range c.Observations {
		say("evaluation", o)
	}
	for _, r := range c.Remarks {
		say("remark", r)
	}
	for _, r := range c.Cautions {
		say("caution", r)
	}
	if c.Recalibration != "" {
		say("recalibration, as agreed with the client", c.Recalibration)
	}
	if m := c.Amendment; m != nil {
		say("reason of the amendment", m.Reason)
		for _, f := range m.Files {
			say("SHA-256 of "+f.File, f.SHA256)
		}
	}
	for _, in := range c.Inputs {
		say("SHA-256 of "+in.File, in.SHA256)
	}
	for i := range c.Results {
		k := c.Results[i].Conformity
		if k == nil {
			continue
		}
		s := e.CreateElement("dcc:statement")
		s.CreateAttr("id", conformityID(i))
		words(s, "dcc:name", "conformity of the "+k.Result)
		leaf(s, "dcc:convention", k.Rule)
		leaf(s, "dcc:norm", k.Source)
		words(s, "dcc:declaration", append([]string{"limits " + k.Limits, "probability of conformity " + k.Probability}, riskTexts(k)...)...)
		leaf(s, "dcc:date", c.Issued)
		leaf(s, "dcc:conformity", conformityWord(k.Verdict))
	}
}

func riskTexts(k *Conformity) []string {
	var out []string
	for _, r := range k.Risks {
		out = append(out, r.Label+" "+r.Text)
	}
	return append(out, k.Warnings...)
}

func conformityID(i int) string { return fmt.Sprintf("conformity%d", i+1) }

// conformityWord turns "conditional pass" into the schema's "conditionalPass".
func conformityWord(verdict string) string {
	first, second, two := strings.Cut(verdict, " ")
	if !two {
		return first
	}
	return first + strings.ToUpper(second[:1]) + second[1:]
}

// unit is a unit in the words of D-SI.
func (x *writerXML) unit(u si.Unit) string {
	s, err := u.DSI()
	if err != nil {
		if x.err == nil {
			x.err = fmt.Errorf("certificate: %w", err)
		}
		return `\one`
	}
	return s
}

// real adds a quantity with its uncertainty.
func (x *writerXML) real(e *etree.Element, name string, q *Quantity, p float64) *etree.Element {
	o := e.CreateElement("dcc:quantity")
	words(o, "dcc:name", name)
	words(o, "dcc:description", q.Doc)
	r := o.CreateElement("si:real")
	leaf(r, "si:value", q.Value)
	leaf(r, "si:unit", x.unit(q.Unit))
	if q.Expanded != "" {
		m := r.CreateElement("si:measurementUncertaintyUnivariate").CreateElement("si:expandedMU")
		leaf(m, "si:valueExpandedMU", q.Expanded)
		leaf(m, "si:coverageFactor", q.K)
		leaf(m, "si:coverageProbability", strconv.FormatFloat(p, 'f', -1, 64))
	}
	return o
}

// list adds a column of numbers.
func (x *writerXML) list(e *etree.Element, name string, values []string, u si.Unit) *etree.Element {
	o := e.CreateElement("dcc:quantity")
	words(o, "dcc:name", name)
	r := o.CreateElement("si:realListXMLList")
	leaf(r, "si:valueXMLList", strings.Join(values, " "))
	leaf(r, "si:unitXMLList", x.unit(u))
	return r
}

func (x *writerXML) result(e *etree.Element, c *Certificate, i int) {
	r := &c.Results[i]
	e.CreateAttr("id", fmt.Sprintf("result%d", i+1))
	words(e, "dcc:name", title(r.Value.Name, r.Name))
	method(e, c)
	equipment(e, c.Instruments)
	x.conditions(e, c, r.Phase)
	results := e.CreateElement("dcc:results")
	one := results.CreateElement("dcc:result")
	words(one, "dcc:name", r.Value.Name)
	data := one.CreateElement("dcc:data")
	q := x.real(data, r.Value.Name, &r.Value, c.Coverage)
	if r.Conformity != nil {
		m := q.CreateElement("dcc:measurementMetaData").CreateElement("dcc:metaData")
		m.CreateAttr("refId", conformityID(i))
		leaf(m, "dcc:conformity", conformityWord(r.Conformity.Verdict))
	}
	if r.Zero != nil {
		x.real(data, r.Zero.Name, r.Zero, c.Coverage)
	}
	if len(r.Points) > 0 {
		x.points(results.CreateElement("dcc:result"), c, r)
	}
	if len(r.Scatter) > 0 {
		s := results.CreateElement("dcc:result")
		words(s, "dcc:name", "scatter")
		d := s.CreateElement("dcc:data")
		for _, f := range r.Scatter {
			words(d, "dcc:text", f.Label+": "+f.Text)
		}
	}
	for _, f := range r.Departures {
		d := results.CreateElement("dcc:result")
		words(d, "dcc:name", f.Name)
		found := "not found at 1 %"
		if f.Found {
			found = "found at 1 %"
		}
		words(d, "dcc:description", f.Doc, "p "+f.Significance, found)
		q := Quantity{Value: f.Size, Expanded: f.Expanded, K: "2", Unit: si.MustUnit("%")}
		x.real(d.CreateElement("dcc:data"), f.Name, &q, coverageOfTwo)
	}
}

// coverageOfTwo is the probability within two standard deviations of a normal
// distribution, JCGM 100 table G.1.
const coverageOfTwo = 0.9545

func (x *writerXML) points(e *etree.Element, c *Certificate, r *Result) {
	words(e, "dcc:name", "points")
	l := e.CreateElement("dcc:data").CreateElement("dcc:list")
	var level, indication, observed, value, expanded, k []string
	for _, p := range r.Points {
		level, indication, observed = append(level, p.Level), append(indication, p.Indication), append(observed, p.Observed)
		value, expanded, k = append(value, p.Value.Value), append(expanded, p.Value.Expanded), append(k, p.Value.K)
	}
	x.list(l, r.Level.Label, level, r.LevelUnit)
	x.list(l, r.Level.Text, indication, r.Indicated)
	x.list(l, "this point alone", observed, r.Value.Unit)
	v := x.list(l, r.Value.Name, value, r.Value.Unit)
	m := v.CreateElement("si:measurementUncertaintyUnivariateXMLList").CreateElement("si:expandedMUXMLList")
	leaf(m, "si:valueExpandedMUXMLList", strings.Join(expanded, " "))
	leaf(m, "si:coverageFactorXMLList", strings.Join(k, " "))
	leaf(m, "si:coverageProbabilityXMLList", strconv.FormatFloat(c.Coverage, 'f', -1, 64))
}

func (x *writerXML) shifts(e *etree.Element, c *Certificate) {
	e.CreateAttr("id", "shifts")
	words(e, "dcc:name", "shift by adjustment, as left less as found")
	results := e.CreateElement("dcc:results")
	for i := range c.Shifts {
		r := results.CreateElement("dcc:result")
		name := "shift by adjustment, as left less as found" + suffix(c.Shifts[i].Name)
		words(r, "dcc:name", name)
		x.real(r.CreateElement("dcc:data"), name, &c.Shifts[i], c.Coverage)
	}
}

func method(e *etree.Element, c *Certificate) {
	m := e.CreateElement("dcc:usedMethods").CreateElement("dcc:usedMethod")
	words(m, "dcc:name", c.Method)
	if c.Procedure != "" {
		words(m, "dcc:description", "procedure "+c.Procedure)
	}
}

func equipment(e *etree.Element, list []bench.Instrument) {
	all := e.CreateElement("dcc:measuringEquipments")
	for _, in := range list {
		m := all.CreateElement("dcc:measuringEquipment")
		words(m, "dcc:name", or(in.Description, figure.Words(in.Name)))
		words(m, "dcc:description", "certificate "+in.Certificate+" issued by "+in.IssuedBy, "calibrated "+in.Calibrated, "due "+in.Due)
		if in.Maker != "" {
			words(m.CreateElement("dcc:manufacturer"), "dcc:name", in.Maker)
		}
		leaf(m, "dcc:model", in.Model)
		ids := m.CreateElement("dcc:identifications")
		identification(ids, "manufacturer", in.Serial, "serial number")
		identification(ids, "calibrationLaboratory", in.Certificate, "calibration certificate")
	}
}

// conditions are those of the room, marked by the phase of the readings.
func (x *writerXML) conditions(e *etree.Element, c *Certificate, phase string) {
	if len(c.Conditions) == 0 {
		return
	}
	all := e.CreateElement("dcc:influenceConditions")
	for i := range c.Conditions {
		q := &c.Conditions[i]
		n := all.CreateElement("dcc:influenceCondition")
		words(n, "dcc:name", q.Name)
		switch phase {
		case reduce.AsFound:
			leaf(n, "dcc:status", "beforeAdjustment")
		case reduce.AsLeft:
			leaf(n, "dcc:status", "afterAdjustment")
		}
		x.real(n.CreateElement("dcc:data"), q.Name, q, coverageOfTwo)
	}
}
