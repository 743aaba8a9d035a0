package bench

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"example.org/guardring/pkg/gum"
)

func TestSeveralFiles(t *testing.T) {
	text := strings.Replace(goodBench, "file = \"readings.csv\"", "file = \"readings.csv\"\n\n[[readings]]\nfile = \"more/second.csv\"\ndecimal = \"comma\"\nmissing = [\"-\"]", 1)
	// Other order of columns, another separator.
	second := "F/mN;gap/mm;gap_no;kind;V/kV;t\n0,9;4,0;2;reading;2,5;50\n0,95;4,0;3;reading;-;60\n"
	b, err := OpenWith(testKind(), dataset(t, map[string]string{"bench.toml": text, "readings.csv": goodReadings, "more/second.csv": second}))
	if err != nil {
		t.Fatal(err)
	}
	if b.Rows.N != 7 || len(b.Inputs) != 3 || b.Inputs[2].Rows != 2 || b.Inputs[2].Excluded != 1 || b.Inputs[1].Excluded != 1 || b.Inputs[2].File != "more/second.csv" {
		t.Errorf("inputs %+v", b.Inputs)
	}
	if v := b.Channels[0].Readings; v[5] != 2500 || !math.IsNaN(v[6]) {
		t.Errorf("voltage %v", v)
	}
	g := b.Channels[1].Grouped[0]
	if fmt.Sprint(g.Group, g.Labels) != "[0 0 0 1 1 1 2] [1 2 3]" {
		t.Errorf("groups %v %v", g.Group, g.Labels)
	}
	for i, want := range []string{"readings.csv:2", "readings.csv:3", "readings.csv:4", "readings.csv:5", "readings.csv:6", "more/second.csv:2", "more/second.csv:3"} {
		file, line := b.Rows.Place(i)
		if got := fmt.Sprintf("%s:%d", file, line); got != want {
			t.Errorf("record %d is at %s, want %s", i, got, want)
		}
	}
	if !b.Rows.Excluded[6] || b.Rows.Reason(6) != "no value in column V/kV" {
		t.Errorf("missing value: %v %q", b.Rows.Excluded, b.Rows.Reason(6))
	}
	if len(b.Warnings) != 1 || !strings.Contains(b.Warnings[0].Error(), "more/second.csv:3: column V/kV: 1 reading without a value left out") {
		t.Errorf("warnings %v", b.Warnings)
	}
	// A time stamp in one file and seconds in the other.
	second = strings.NewReplacer(";50\n", ";2026-03-04T10:00:00Z\n", ";60\n", ";2026-03-04T10:00:10Z\n").Replace(second)
	_, err = OpenWith(testKind(), dataset(t, map[string]string{"bench.toml": text, "readings.csv": goodReadings, "more/second.csv": second}))
	wantError(t, err, "more/second.csv: column t: times are seconds in one file and time stamps in the other (readings.csv)")
}

func TestPins(t *testing.T) {
	b, err := OpenWith(testKind(), good(t))
	if err != nil {
		t.Fatal(err)
	}
	pinned := "file = \"readings.csv\"\nsha256 = \"" + strings.ToUpper(b.Inputs[1].SHA256) + "\""
	if _, err := OpenWith(testKind(), good(t, `file = "readings.csv"`, pinned)); err != nil {
		t.Errorf("a pin that matches: %v", err)
	}
}

func TestQualityMarks(t *testing.T) {
	text := strings.Replace(goodBench, `setting = "gap_no"`, "setting = \"gap_no\"\nquality = \"q\"\nquality_reject = [\"bad\", \"doubtful\"]", 1)
	readings := strings.NewReplacer("F/mN\n", "F/mN,q\n", "0.0001\n", "0.0001,ok\n", "0.8701\n", "0.8701,bad\n", "0.8703\n", "0.8703,bad\n",
		"0.8705\n", "0.8705,\n", "0.8709\n", "0.8709,doubtful\n").Replace(goodReadings)
	b, err := OpenWith(testKind(), dataset(t, map[string]string{"bench.toml": text, "readings.csv": readings}))
	if err != nil {
		t.Fatal(err)
	}
	if fmt.Sprint(b.Rows.Excluded) != "[false true true false true]" || b.Inputs[1].Excluded != 3 {
		t.Errorf("excluded %v", b.Rows.Excluded)
	}
	if b.Rows.Reason(1) != "quality mark bad" || b.Rows.Reason(4) != "quality mark doubtful" || b.Rows.Label("quality", 0) != "ok" {
		t.Errorf("reasons %q %q", b.Rows.Reason(1), b.Rows.Reason(4))
	}
	// A reason that is stated counts, and nothing is told twice.
	all := strings.NewReplacer("0.8705,\n", "0.8705,bad\n", "0.0001,ok", "0.0001,bad").Replace(readings)
	_, err = OpenWith(testKind(), dataset(t, map[string]string{"bench.toml": text, "readings.csv": all}))
	wantError(t, err, "every data record is excluded")
}

func TestExclude(t *testing.T) {
	b, err := OpenWith(testKind(), good(t))
	if err != nil {
		t.Fatal(err)
	}
	c, err := b.Exclude(5, "door opened")
	if err != nil {
		t.Fatal(err)
	}
	if b.Rows.Excluded[4] || b.Rows.Reason(4) != "" || b.Inputs[1].Excluded != 1 {
		t.Error("the bench itself changed")
	}
	if !c.Rows.Excluded[4] || c.Rows.Reason(4) != "door opened" || c.Inputs[1].Excluded != 2 || c.Rows.Reason(2) != b.Rows.Reason(2) {
		t.Error("the copy did not")
	}
	for _, row := range []int{0, -1, 6} {
		if _, err := b.Exclude(row, "x"); err == nil || !strings.Contains(err.Error(), "there are 5 data records") {
			t.Errorf("row %d: %v", row, err)
		}
	}
	if _, err := b.Exclude(1, " "); err == nil {
		t.Error("no reason: no error")
	}
	if _, err := c.Exclude(5, "again"); err == nil || !strings.Contains(err.Error(), "readings.csv:6") {
		t.Errorf("twice: %v", err)
	}
}

// TestEnvironmentFromColumn: mean of the column, scatter and sensor combined;
// numbers computed by hand.
func TestEnvironmentFromColumn(t *testing.T) {
	readings := strings.NewReplacer("F/mN\n", "F/mN,T/degC\n", "0.0001\n", "0.0001,20.0\n", "0.8701\n", "0.8701,20.2\n", "0.8703\n", "0.8703,20.4\n",
		"0.8705\n", "0.8705,\n", "0.8709\n", "0.8709,20.6\n").Replace(goodReadings)
	text := strings.Replace(goodBench, `temperature = { value = "20.5 degC", u = "0.2 degC" }`,
		`temperature = { column = "T/degC", unit = "degC", u = "0.1 degC", instrument = "divider", source = "certificate" }`, 1)
	b, err := OpenWith(testKind(), dataset(t, map[string]string{"bench.toml": text, "readings.csv": readings}))
	if err != nil {
		t.Fatal(err)
	}
	s := b.Scalars[b.Kind.Scalar("environment.temperature")]
	// Mean of 20.0, 20.2, 20.4, 20.6 is 20.3; s² = (0.09+0.01+0.01+0.09)/3 = 0.0667 K².
	if !near(s.Dist.Value, 293.45, 1e-12) || !near(s.Dist.U, math.Sqrt(0.2/3+0.01), 1e-9) || s.Dist.Shape != gum.ShapeNormal {
		t.Errorf("temperature %+v", s.Dist)
	}
	if s.Source != `certificate; mean of column T/degC; u from its scatter 0.26 K and "0.1 degC" of the sensor` || s.Instrument != "divider" || !s.Given {
		t.Errorf("source %q", s.Source)
	}
	if c := b.Environment[0]; c.Name != "temperature" || c.Dist != s.Dist {
		t.Errorf("condition %+v", c)
	}
	// A condition that the kind does not take is for the certificate alone.
	text = strings.Replace(text, `humidity = "45 %"`, `humidity = { column = "T/degC", unit = "%" }`, 1)
	b, err = OpenWith(testKind(), dataset(t, map[string]string{"bench.toml": text, "readings.csv": readings}))
	if err != nil {
		t.Fatal(err)
	}
	if c := b.Environment[1]; c.Name != "humidity" || !near(c.Dist.Value, 0.203, 1e-12) {
		t.Errorf("condition %+v", c)
	}
	empty := strings.NewReplacer(",20.0\n", ",\n", ",20.2\n", ",\n", ",20.4\n", ",\n", ",20.6\n", ",\n").Replace(readings)
	_, err = OpenWith(testKind(), dataset(t, map[string]string{"bench.toml": text, "readings.csv": empty}))
	wantError(t, err, "environment.temperature.column", "holds no value")
}

// TestJob reads every table that only the certificate, the conformity statement
// and the cautions need.
func TestJob(t *testing.T) {
	b, err := OpenWith(testKind(), good(t, `[[exclude]]`, `
[drive]
kind = "one-side-earthed"
value = "rms"
frequency = { value = "50 Hz", u = "0.01 Hz" }
thd = "0.1 %"
waveform = "sine"
[mounting]
kind = "flush"
reference_plane = "face of the plate"
orientation = "horizontal"
sign_convention = "positive towards the head"
[spacing]
points = ["100.02 mm", "99.98 mm"]
centre = { value = "100 mm", u = "0.01 mm" }
method = "gauge blocks"
instrument = "divider"
[capability]
relative_expanded = "0.3 %"
lower = "1 kV/m"
upper = "100 kV/m"
[client]
name = "Client <of> the tests & more"
[item]
maker = "(maker)"
serial = "7"
[work]
laboratory = "Laboratory of the tests"
received = 2026-03-02
performed = "2026-03-04"
issued = 2026-03-06T12:00:00Z
deviations = "none"
remarks = ["one", "two"]
adjusted = true
[limits]
lower = 0.97
upper = "103 %"
unit = "1"
rule = "guard-band"
guard = "0.83 U"
[limits.population]
sd = 0.01
[safety]
energy = "100 mJ"
[report]
coverage = "95 %"
digits = 2
[[exclude]]`))
	if err != nil {
		t.Fatal(err)
	}
	if d := b.Drive; d.Kind != "one-side-earthed" || b.Options["drive.kind"] != d.Kind || d.Value != "rms" || d.Frequency.Dist.Value != 50 || d.THD.Dist.Value != 0.001 || d.Waveform != "sine" {
		t.Errorf("drive %+v", d)
	}
	if m := b.Mounting; m.Kind != "flush" || m.ReferencePlane != "face of the plate" || m.Orientation != "horizontal" || m.SignConvention == "" {
		t.Errorf("mounting %+v", m)
	}
	if s := b.Spacing; len(s.Points) != 2 || s.Points[1] != 0.09998 || s.Centre.Dist.U != 1e-5 || s.Instrument != "divider" || s.Method == "" {
		t.Errorf("spacing %+v", s)
	}
	if c := b.Capability; c == nil || c.Relative != 0.003 || c.K != 2 || c.Lower.Dist.Value != 1000 || c.Upper.Dist.Value != 1e5 {
		t.Errorf("capability %+v", c)
	}
	if b.Client.Name != "Client <of> the tests & more" || b.Item.Serial != "7" || b.Item.Maker != "(maker)" {
		t.Errorf("client %+v item %+v", b.Client, b.Item)
	}
	if w := b.Work; w.Received != "2026-03-02" || w.Performed != "2026-03-04" || w.Issued != "2026-03-06" || len(w.Deviations) != 1 || len(w.Remarks) != 2 || !w.Adjusted || w.Agreed {
		t.Errorf("work %+v", w)
	}
	l := b.Limits
	if l == nil || l.Lower != 0.97 || l.Upper != 1.03 || l.Rule != "guard-band" || l.GuardFactor != 0.83 || l.GuardWidth != 0 || l.Population == nil || l.Population.Mean != 1 || l.Population.SD != 0.01 {
		t.Errorf("limits %+v", l)
	}
	if s := b.Safety; s.Energy != 0.1 || s.Charge != 50e-6 || !s.Stated {
		t.Errorf("safety %+v", s)
	}
	if b.Coverage != 0.95 || b.Report.Digits != 2 {
		t.Errorf("report %+v", b.Report)
	}
	i := b.Instruments[0]
	if i.Name != "divider" || i.Serial != "D-1" || i.Calibrated != "2026-01-15" || i.Due != "2027-01-15" {
		t.Errorf("instrument %+v", i)
	}
}

func TestWarnings(t *testing.T) {
	for _, c := range []struct{ old, new, want string }{
		{`unit   = "kV"`, `unit = "V"`, `channels.voltage.unit: the header "V/kV" says kV, the bench V; the bench counts`},
		{`use = true`, ``, `corrections.wedge: inputs are given but the correction is not in use; write use = true`},
		{`u = "0.012 %", source`, `source`, `channels.voltage.gain has no uncertainty, so that its correlation changes nothing`},
		{`u = "8 um"`, "half_width = \"8 um\"\nshape = \"rectangular\"", `prior knowledge enters the fit by its value and standard uncertainty alone`},
	} {
		b, err := OpenWith(testKind(), good(t, c.old, c.new))
		if err != nil {
			t.Errorf("%q: %v", c.new, err)
			continue
		}
		if len(b.Warnings) != 1 || !strings.Contains(b.Warnings[0].Error(), c.want) {
			t.Errorf("%q: warnings %v, want %q", c.new, b.Warnings, c.want)
		}
	}
}

// TestOneColumnForSeveralUses: the spacing as read also says which setting and
// which mounting a row belongs to.
func TestOneColumnForSeveralUses(t *testing.T) {
	text := strings.Replace(goodBench, `setting = "gap_no"`, "setting = \"gap/mm\"\nmount = \"gap/mm\"", 1)
	text = strings.Replace(text, `file = "readings.csv"`, "file = \"readings.csv\"\n[[readings]]\nfile = \"second.csv\"", 1)
	second := "t,kind,V/kV,gap/mm,F/mN\n50,reading,4,8.000,1\n60,reading,4,12.000,1\n"
	b, err := OpenWith(testKind(), dataset(t, map[string]string{"bench.toml": text, "readings.csv": goodReadings, "second.csv": second}))
	if err != nil {
		t.Fatal(err)
	}
	for _, role := range []string{"setting", "mount"} {
		l := b.Rows.Labels[role]
		if fmt.Sprint(l.Words, l.Index) != "[4.000 8.000 12.000] [0 0 0 1 1 1 2]" {
			t.Errorf("%s: %v %v", role, l.Words, l.Index)
		}
	}
	if got := fmt.Sprint(b.Channels[1].Readings); got != "[0.004 0.004 0.004 0.008 0.008 0.008 0.012]" {
		t.Errorf("gaps %s", got)
	}
}
