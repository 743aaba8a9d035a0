package certificate

import (
	"errors"
	"os"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// TestGate takes away each item that a certificate must hold (ISO/IEC 17025:2017
// 7.8.2.1, 7.8.4.1, 7.8.6.2, from memory; those of field meters are common
// practice, no source) and looks for it, and for nothing else, in the refusal.
func TestGate(t *testing.T) {
	cases := []struct {
		key  string
		take func(b *bench.Bench)
	}{
		{"work.title", func(b *bench.Bench) { b.Work.Title = "" }},
		{"work.certificate", func(b *bench.Bench) { b.Work.Certificate = "" }},
		{"work.laboratory", func(b *bench.Bench) { b.Work.Laboratory = "" }},
		{"work.address", func(b *bench.Bench) { b.Work.Address = " \t" }},
		{"work.country", func(b *bench.Bench) { b.Work.Country = "" }},
		{"work.place", func(b *bench.Bench) { b.Work.Place = "" }},
		{"client.name", func(b *bench.Bench) { b.Client.Name = "" }},
		{"client.address", func(b *bench.Bench) { b.Client.Address = "" }},
		{"work.method", func(b *bench.Bench) { b.Work.Method = "" }},
		{"item.description", func(b *bench.Bench) { b.Item.Description = "" }},
		{"item.maker", func(b *bench.Bench) { b.Item.Maker = "" }},
		{"item.model", func(b *bench.Bench) { b.Item.Model = "" }},
		{"item.serial", func(b *bench.Bench) { b.Item.Serial, b.Item.Identification = "", "" }},
		{"item.condition", func(b *bench.Bench) { b.Item.Condition = "" }},
		{"item.range", func(b *bench.Bench) { b.Item.Range = "" }},
		{"item.firmware", func(b *bench.Bench) { b.Item.Firmware = "" }},
		{"work.received", func(b *bench.Bench) { b.Work.Received = "" }},
		{"work.issued", func(b *bench.Bench) { b.Work.Issued = "" }},
		{"work.performed", func(b *bench.Bench) { b.Work.Performed, b.Work.Finished = "", "" }},
		{"work.traceability", func(b *bench.Bench) { b.Work.Traceability = "" }},
		{"work.authorised_by", func(b *bench.Bench) { b.Work.AuthorisedBy = "" }},
		{"work.function", func(b *bench.Bench) { b.Work.Function = "" }},
		{"work.checked_by", func(b *bench.Bench) { b.Work.CheckedBy = "" }},
		{"work.checked_by", func(b *bench.Bench) { b.Work.CheckedBy = b.Work.PerformedBy }},
		{"work.adjustment", func(b *bench.Bench) { b.Work.Adjustment = "" }},
		{"work.adjusted", func(b *bench.Bench) { b.Work.Adjusted = false }},
		{"environment.temperature", func(b *bench.Bench) { b.Environment = b.Environment[1:] }},
		{"environment.humidity", func(b *bench.Bench) { b.Environment = b.Environment[:2] }},
		{"limits.source", func(b *bench.Bench) { b.Limits.Source = "" }},
		{"limits.population.source", func(b *bench.Bench) { b.Limits.Population.Source = "" }},
		{"mounting.kind", func(b *bench.Bench) { b.Mounting.Kind = "" }},
		{"mounting.reference_plane", func(b *bench.Bench) { b.Mounting.ReferencePlane = "" }},
		{"mounting.orientation", func(b *bench.Bench) { b.Mounting.Orientation = "" }},
		{"mounting.sign_convention", func(b *bench.Bench) { b.Mounting.SignConvention = "" }},
		{"spacing.method", func(b *bench.Bench) { b.Spacing.Method = "" }},
		{"drive.kind", func(b *bench.Bench) { b.Drive.Kind = "" }},
		{"drive.value", func(b *bench.Bench) { b.Drive.Value = "" }},
		{"drive.frequency", func(b *bench.Bench) { b.Drive.Value = "rms" }},
		{"report.definition", func(b *bench.Bench) { b.Report.Definition = "" }},
		{"instruments.NAME", func(b *bench.Bench) { b.Instruments = nil }},
		{"instruments.divider.serial", func(b *bench.Bench) { b.Instruments[0].Serial = "" }},
		{"instruments.divider.certificate", func(b *bench.Bench) { b.Instruments[0].Certificate = "" }},
		{"instruments.divider.issued_by", func(b *bench.Bench) { b.Instruments[0].IssuedBy = "" }},
		{"instruments.divider.calibrated", func(b *bench.Bench) { b.Instruments[0].Calibrated = "" }},
		{"instruments.divider.due", func(b *bench.Bench) { b.Instruments[0].Due = "" }},
		{"work.deviations", func(b *bench.Bench) { b.Instruments[0].Due = "2026-03-04" }},        // the work ended on the 5th
		{"work.deviations", func(b *bench.Bench) { b.Instruments[0].Calibrated = "2026-03-05" }}, // it began on the 4th
	}
	keys, err := os.ReadFile("../bench/keys.go")
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range cases {
		r := result(t, "field-meter")
		c.take(r.Bench)
		got, err := New(r, Settings{})
		var e *Incomplete
		if got != nil || !errors.As(err, &e) {
			t.Errorf("%s: a certificate without it was made (error %v)", c.key, err)
			continue
		}
		if len(e.Gaps) != 1 || e.Gaps[0].Key != c.key || e.Gaps[0].Item == "" {
			t.Errorf("%s: the refusal names %+v", c.key, e.Gaps)
		}
		if !strings.Contains(e.Error(), c.key) || !strings.Contains(e.Error(), "bench.toml") {
			t.Errorf("%s: message %q", c.key, e)
		}
		// The key must be one that a bench file may have.
		if name := c.key[strings.LastIndex(c.key, ".")+1:]; name != "NAME" && !strings.HasPrefix(c.key, "drive.kind") && !strings.HasPrefix(c.key, "mounting.kind") &&
			!strings.Contains(string(keys), `{"`+name+`"`) {
			t.Errorf("%s is no key of a bench file", c.key)
		}
	}
}

// TestGateListsEverything: one refusal names all that is missing.
func TestGateListsEverything(t *testing.T) {
	r := result(t, "field-meter")
	r.Bench.Client = bench.Client{}
	r.Bench.Work.Method, r.Bench.Item.Condition = "", ""
	_, err := New(r, Settings{})
	if err == nil {
		t.Fatal("no refusal")
	}
	for _, key := range []string{"client.name", "client.address", "work.method", "item.condition"} {
		if !strings.Contains(err.Error(), key) {
			t.Errorf("%q does not name %s", err, key)
		}
	}
}

// TestDeviationAllowsInstrument: a stated deviation that names an instrument past
// its due date lets the certificate through, and stands in it.
func TestDeviationAllowsInstrument(t *testing.T) {
	r := result(t, "field-meter")
	r.Bench.Instruments[1].Due = "2026-03-01"
	r.Bench.Work.Deviations = []string{"another instrument was used past its due date"}
	if _, err := New(r, Settings{}); err == nil {
		t.Error("a deviation that does not name the instrument was taken")
	}
	// A serial number within a longer number or word is no name.
	serial := r.Bench.Instruments[1].Serial
	r.Bench.Instruments[1].Serial = "12"
	r.Bench.Work.Deviations = []string{"levels above 120 V were left out"}
	if _, err := New(r, Settings{}); err == nil {
		t.Error("120 V was taken for the serial number 12")
	}
	r.Bench.Instruments[1].Serial = serial
	r.Bench.Work.Deviations = []string{"voltmeter DVM-3 was used past its due date; it was checked against another before and after"}
	c := made(t, r)
	for name, form := range forms {
		if name == "pdf" {
			continue // its text is compressed; .ci/certificate reads it
		}
		text := strings.ReplaceAll(written(t, c, form), "<br>", " ")
		if !strings.Contains(text, "DVM-3 was used past its due date") {
			t.Errorf("%s does not state the deviation", name)
		}
	}
}

// TestRecalibration: the date is printed only when it is agreed (ISO/IEC
// 17025:2017 7.8.4.3, from memory).
func TestRecalibration(t *testing.T) {
	for _, agreed := range []bool{false, true} {
		r := result(t, "field-meter")
		r.Bench.Work.Recalibration, r.Bench.Work.Agreed = "2029-11-23", agreed
		c := made(t, r)
		for _, name := range []string{"html", "xml"} {
			if got := strings.Contains(written(t, c, forms[name]), "2029-11-23"); got != agreed {
				t.Errorf("%s, agreed %v: date printed %v", name, agreed, got)
			}
		}
	}
}

// TestUnfitResults: nothing is certified from a fit that has not converged, or
// with a definition that the bench does not state.
func TestUnfitResults(t *testing.T) {
	r := result(t, "field-meter")
	r.Record.Fit.Status = "stopped"
	if _, err := New(r, Settings{}); err == nil || !strings.Contains(err.Error(), "stopped") {
		t.Errorf("a fit that stopped was certified: %v", err)
	}
	r = result(t, "field-meter")
	r.Bench.Report.Definition = "N = E/r"
	if _, err := New(r, Settings{}); err == nil || !strings.Contains(err.Error(), "correction_factor, response") {
		t.Errorf("an unknown definition: %v", err)
	}
}

// TestTrialsThatDisagree are told on the certificate.
func TestTrialsThatDisagree(t *testing.T) {
	for _, agrees := range []bool{true, false} {
		r := result(t, "field-meter-50hz")
		r.Record.Measurands = append([]reduce.Measurand(nil), r.Record.Measurands...)
		r.Record.Measurands[0].MonteCarlo = &reduce.MonteCarlo{Trials: 10000, Interval: [2]reduce.Number{1.0115, 1.0161}, Agrees: agrees}
		c := made(t, r)
		said := strings.Contains(strings.Join(c.Observations, "; "), "do not confirm the law of propagation; their coverage interval is 1.01150 to 1.01610")
		if said == agrees || !strings.Contains(c.uncertainty(), "checked by 10000 Monte Carlo trials") {
			t.Errorf("agrees %v: observations %q, uncertainty %q", agrees, c.Observations, c.uncertainty())
		}
	}
}

// TestTrialsOfWhatIsStated: the check is told of all results that are stated, of the
// zero offset too, and of none else.
func TestTrialsOfWhatIsStated(t *testing.T) {
	for name, want := range map[string]bool{"zero_offset": true, "correction_factor": true, "shift of response": true, "response": false} {
		r := result(t, "field-meter")
		m := append([]reduce.Measurand(nil), r.Record.Measurands...)
		off := m[0]
		off.Name, off.Unit, off.Value = reduce.SeriesName("zero_offset", r.Record.Series[0].Name), "V/m", 12
		shift := m[0]
		shift.Name = "shift of response (2 kV/m)"
		m = append(m, off, shift)
		n := 0
		for i := range m {
			if m[i].MonteCarlo = nil; strings.HasPrefix(m[i].Name, name+" (") {
				m[i].MonteCarlo = &reduce.MonteCarlo{Trials: 10000, Interval: [2]reduce.Number{-1, 1}}
				n++
			}
		}
		r.Record.Measurands = m
		if said := strings.Contains(strings.Join(made(t, r).Observations, "; "), "do not confirm"); said != want || n == 0 {
			t.Errorf("%d of %s not confirmed: said %v", n, name, said)
		}
	}
}

// TestFullScale: readings at the end of the range are told; the largest reading
// of the demonstration's upper range is 18.807 kV/m (readings.csv).
func TestFullScale(t *testing.T) {
	for _, c := range []struct {
		full float64
		want string
	}{{18807, "readings at the end of the range, 18.81\u00a0kV m⁻¹, where the item may have been clipped: 1"}, {18808, ""}} {
		r := result(t, "field-meter")
		b := r.Bench
		b.Scalars = append([]bench.Scalar(nil), b.Scalars...)
		s := scalar(b, "full_scale")
		s.Dist.Value, s.Unit, s.Given = c.full, si.MustUnit("kV/m"), true
		got := strings.Join(made(t, r).Observations, "; ")
		if c.want != "" && !strings.Contains(got, c.want) || c.want == "" && strings.Contains(got, "end of the range") {
			t.Errorf("full scale %v: %q", c.full, got)
		}
	}
}
