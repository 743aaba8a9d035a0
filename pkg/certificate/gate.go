package certificate

import (
	"fmt"
	"strings"
	"unicode"
	"unicode/utf8"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
)

// Gap is an item that a certificate must hold and this one would lack.
type Gap struct {
	Item string // what is missing
	Key  string // of bench.toml
	Why  string // more about it, or ""
}

// Incomplete is the error of a certificate that would lack something.
type Incomplete struct {
	File string // the bench file
	Gaps []Gap
}

// Error lists every gap with the key that fills it.
func (e *Incomplete) Error() string {
	var b strings.Builder
	n := fmt.Sprintf("%d items are missing", len(e.Gaps))
	if len(e.Gaps) == 1 {
		n = "an item is missing"
	}
	fmt.Fprintf(&b, "%s: no certificate is written: %s", e.File, n)
	for _, g := range e.Gaps {
		fmt.Fprintf(&b, "\n  %s: %s", g.Key, g.Item)
		if g.Why != "" {
			fmt.Fprintf(&b, " (%s)", g.Why)
		}
	}
	return b.String()
}

// check holds a bench to what a certificate must hold (ISO/IEC 17025:2017
// 7.8.2.1, 7.8.4.1 and 7.8.6.2, from memory; the items of a field meter are common
// practice, no source).
func check(r *reduce.Result, s Settings) *Incomplete {
	b := r.Bench
	e := &Incomplete{File: b.Dir + "/bench.toml"}
	missing := func(item, key, why string) { e.Gaps = append(e.Gaps, Gap{item, key, why}) }
	need := func(text, key, item string) {
		if figure.OneLine(text) == "" {
			missing(item, key, "")
		}
	}
	w, c, it := b.Work, b.Client, b.Item
	need(w.Title, "work.title", "title of the certificate")
	need(w.Certificate, "work.certificate", "unique identification of the certificate")
	need(w.Laboratory, "work.laboratory", "name of the laboratory")
	need(w.Address, "work.address", "address of the laboratory")
	need(w.Country, "work.country", "country of the laboratory")
	need(w.Place, "work.place", "place where the work was done")
	need(c.Name, "client.name", "name of the client")
	need(c.Address, "client.address", "address of the client")
	need(w.Method, "work.method", "method")
	need(it.Description, "item.description", "description of the item")
	need(it.Maker, "item.maker", "maker of the item")
	need(it.Model, "item.model", "model of the item")
	need(it.Serial+it.Identification, "item.serial", "serial number of the item, or another identification")
	need(it.Condition, "item.condition", "condition of the item")
	need(w.Received, "work.received", "date of receipt")
	need(w.Performed, "work.performed", "date of the work")
	need(w.Issued, "work.issued", "date of issue")
	need(w.Traceability, "work.traceability", "statement of traceability")
	need(w.AuthorisedBy, "work.authorised_by", "who authorised the certificate")
	need(w.Function, "work.function", "function of who authorised the certificate")
	need(w.CheckedBy, "work.checked_by", "second person who checked the work")
	if w.CheckedBy != "" && w.CheckedBy == w.PerformedBy {
		missing("second person who checked the work", "work.checked_by", "the same as performed_by")
	}
	for _, name := range []string{"temperature", "humidity"} {
		if !environment(b, name) {
			missing(name+" of the air", "environment."+name, "")
		}
	}
	adjustment(b, missing)
	if b.Limits != nil {
		need(b.Limits.Source, "limits.source", "specification that conformity is stated with")
		if b.Limits.Population != nil {
			need(b.Limits.Population.Source, "limits.population.source", "where the population is known from")
		}
	}
	if b.Kind.Name == "field-meter" {
		fieldMeter(b, need, missing)
	}
	instruments(b, missing)
	if len(s.Replaced) > 0 && w.Reason == "" {
		missing("what is replaced and the reason", "work.replaces and work.reason", "a certificate that exists is replaced by an amendment")
	}
	return e
}

// fieldMeter adds what the certificate of a field meter must tell.
func fieldMeter(b *bench.Bench, need func(text, key, item string), missing func(item, key, why string)) {
	need(b.Mounting.Kind, "mounting.kind", "mounting")
	need(b.Mounting.ReferencePlane, "mounting.reference_plane", "reference plane")
	need(b.Mounting.Orientation, "mounting.orientation", "orientation")
	need(b.Mounting.SignConvention, "mounting.sign_convention", "sign convention")
	if width := scalar(b, "corrections.finite_plates.width"); b.Spacing.Description == "" && (width == nil || !width.Given) {
		missing("geometry of the plates", "spacing.description or corrections.finite_plates.width", "")
	}
	need(b.Spacing.Method, "spacing.method", "how the spacing was found")
	need(b.Drive.Kind, "drive.kind", "how the plates were driven")
	need(b.Drive.Value, "drive.value", "whether the voltage is dc, rms or peak")
	if (b.Drive.Value == "rms" || b.Drive.Value == "peak") && !b.Drive.Frequency.Given {
		missing("frequency", "drive.frequency", "")
	}
	need(b.Item.Range, "item.range", "range of the meter")
	need(b.Item.Firmware, "item.firmware", "firmware of the meter")
	need(b.Report.Definition, "report.definition", "definition of the factor, correction_factor or response")
}

func environment(b *bench.Bench, name string) bool {
	for _, e := range b.Environment {
		if e.Name == name {
			return true
		}
	}
	return false
}

// adjustment holds the phases of the readings to what the bench says of an
// adjustment.
func adjustment(b *bench.Bench, missing func(item, key, why string)) {
	found, left := false, false
	if l := b.Rows.Labels["phase"]; l != nil {
		for i := range b.Rows.N {
			if b.Rows.Kind[i] == bench.Reading && !b.Rows.Excluded[i] {
				found = found || l.At(i) == reduce.AsFound
				left = left || l.At(i) == reduce.AsLeft
			}
		}
	}
	switch {
	case b.Work.Adjusted && !found:
		missing("readings as found", "rows.phase", "work.adjusted is true; results before and after the adjustment are both due")
	case b.Work.Adjusted && !left:
		missing("readings as left", "rows.phase", "work.adjusted is true; results before and after the adjustment are both due")
	case !b.Work.Adjusted && left:
		missing("that the item was adjusted", "work.adjusted", "there are readings as left")
	}
	if b.Work.Adjusted && figure.OneLine(b.Work.Adjustment) == "" {
		missing("what the adjustment was", "work.adjustment", "")
	}
}

// instruments holds every instrument to its certificate and dates.
func instruments(b *bench.Bench, missing func(item, key, why string)) {
	if len(b.Instruments) == 0 {
		missing("instruments with their certificates", "instruments.NAME", "traceability rests on them")
		return
	}
	first, last := b.Work.Performed, b.Work.Finished
	if last == "" {
		last = first
	}
	for _, in := range b.Instruments {
		key := "instruments." + in.Name + "."
		for _, f := range []struct{ text, key, item string }{{in.Serial, "serial", "serial number"}, {in.Certificate, "certificate", "certificate"},
			{in.IssuedBy, "issued_by", "who issued the certificate"}, {in.Calibrated, "calibrated", "date of calibration"}, {in.Due, "due", "due date"}} {
			if figure.OneLine(f.text) == "" {
				missing(f.item+" of the "+figure.Words(in.Name), key+f.key, "")
			}
		}
		if named(b.Work, in) {
			continue
		}
		if in.Due != "" && last != "" && in.Due < last {
			missing("a deviation that names the "+figure.Words(in.Name), "work.deviations", fmt.Sprintf("it was due on %s and used until %s", in.Due, last))
		}
		if in.Calibrated != "" && first != "" && in.Calibrated > first {
			missing("a deviation that names the "+figure.Words(in.Name), "work.deviations", fmt.Sprintf("it was calibrated on %s and used from %s", in.Calibrated, first))
		}
	}
}

// named reports whether a stated deviation names an instrument: by its name in
// the bench, its serial number or its certificate, as a word of its own.
func named(w bench.Work, in bench.Instrument) bool {
	for _, d := range deviations(w) {
		for _, n := range []string{in.Name, figure.Words(in.Name), in.Serial, in.Certificate} {
			if hasWord(d, figure.OneLine(n)) {
				return true
			}
		}
	}
	return false
}

// hasWord reports whether a text holds a word that is no part of a longer one: the
// serial number 12 does not stand in "120 V".
func hasWord(text, word string) bool {
	if word == "" {
		return false
	}
	part := func(r rune) bool { return unicode.IsLetter(r) || unicode.IsDigit(r) }
	for from := 0; ; {
		i := strings.Index(text[from:], word)
		if i < 0 {
			return false
		}
		at := from + i
		before, _ := utf8.DecodeLastRuneInString(text[:at])
		after, _ := utf8.DecodeRuneInString(text[at+len(word):])
		if !part(before) && !part(after) { // at the ends these are RuneError, which is neither
			return true
		}
		from = at + 1
	}
}
