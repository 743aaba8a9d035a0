package bench

import (
	"math"
	"strings"
	"testing"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/random"
)

// dividerTable is that of the good bench; tests put limits behind it.
const dividerTable = "calibrated = 2026-01-15\ndue = 2027-01-15\n"

// TestAllowances holds the half-widths to sums done by hand, in the comments, and u
// to a/√3 (JCGM 100:2008 4.3.7).
func TestAllowances(t *testing.T) {
	const work = "[work]\nperformed = 2026-03-04\nfinished = 2026-03-05\n"
	for _, c := range []struct {
		what, limits string
		more         []string
		name         string
		relative     bool
		half         float64
		source       string
	}{
		// 15 January to 5 March 2026, the farther day of the work, is 49 days.
		{"drift, part", "drift_per_year = \"0.002 %\"\n" + work, nil, "instruments.divider.drift", true, 2e-5 * 49 / 365.25, "serial D-1: within 0.002 % a year since 2026-01-15"},
		{"drift, amount", "drift_per_year = \"60 mV\"\ncertificate = \"C-7\"\n" + work, nil, "instruments.divider.drift", false, 0.060 * 49 / 365.25, "certificate C-7: within 60 mV a year since 2026-01-15"},
		// From 4 March 2026 back to 15 January is 48 days, from 15 March on to it 11.
		{"calibrated after the work", "drift_per_year = \"1 ppm\"\n[work]\nperformed = 2026-01-04\n", nil, "instruments.divider.drift", true, 1e-6 * 11 / 365.25, ""},
		{"one day of work", "drift_per_year = \"1 ppm\"\n[work]\nfinished = 2026-03-04\n", nil, "instruments.divider.drift", true, 1e-6 * 48 / 365.25, ""},
		// At 20.5 °C with u = 0.2 K, 2.5 K below the calibration: √(2.5² + 0.2²) = 2.50799 K.
		{"temperature, part", "per_kelvin = \"12 ppm/K\"\ncalibration_temperature = \"23 degC\"\n", nil, "instruments.divider.temperature", true, 12e-6 * 2.507987, "serial D-1: within 12 ppm/K away from 23 °C"},
		{"temperature, without /K", "per_kelvin = \"12 ppm\"\ncalibration_temperature = \"23 degC\"\n", nil, "instruments.divider.temperature", true, 12e-6 * 2.507987, "serial D-1: within 12 ppm a kelvin away from 23 °C"},
		{"temperature, amount", "per_kelvin = \"5 mV/K\"\ncalibration_temperature = \"23 degC\"\n", nil, "instruments.divider.temperature", false, 5e-3 * 2.507987, ""},
		// √(2.5² + 0.2² + 0.3²) = 2.52587 K.
		{"temperature of the calibration uncertain", "per_kelvin = \"12 ppm/K\"\ncalibration_temperature = { value = \"23 degC\", u = \"0.3 K\" }\n", nil, "instruments.divider.temperature", true, 12e-6 * 2.525866, ""},
		// The same temperature by chance leaves u(T) = 0.2 K.
		{"the same temperature", "per_kelvin = \"12 ppm/K\"\ncalibration_temperature = \"20.5 degC\"\n", nil, "instruments.divider.temperature", true, 12e-6 * 0.2, ""},
	} {
		b, err := OpenWith(testKind(), good(t, dividerTable, dividerTable+c.limits))
		if err != nil {
			t.Errorf("%s: %v", c.what, err)
			continue
		}
		in := &b.Instruments[0]
		if len(in.Allowances) != 1 {
			t.Errorf("%s: allowances %+v", c.what, in.Allowances)
			continue
		}
		a := in.Allowances[0]
		if a.Name != c.name || a.Relative != c.relative || a.Dist.Shape != gum.ShapeRectangular || a.Dist.Value != 0 {
			t.Errorf("%s: %+v", c.what, a)
		}
		if math.Abs(a.Dist.Half/c.half-1) > 1e-6 || math.Abs(a.Dist.U/(c.half/math.Sqrt(3))-1) > 1e-6 {
			t.Errorf("%s: half-width %.7g with u %.7g, want %.7g and a/√3", c.what, a.Dist.Half, a.Dist.U, c.half)
		}
		if c.source != "" && a.Source != c.source {
			t.Errorf("%s: source %q, want %q", c.what, a.Source, c.source)
		}
		if warned := len(b.Warnings) > 0; warned != strings.Contains(c.what, "after") {
			t.Errorf("%s: warnings %v", c.what, b.Warnings)
		}
		if len(in.Named) != 1 || in.Named[0] != "channels.voltage.gain" {
			t.Errorf("%s: named by %v", c.what, in.Named)
		}
	}
}

// TestAllowanceByTimeStamps takes the day of the work from the readings: from 15
// January to 31 May 2026, the later of their days, is 136 days.
func TestAllowanceByTimeStamps(t *testing.T) {
	text := strings.Replace(goodBench, dividerTable, dividerTable+"drift_per_year = \"1 ppm\"\n", 1)
	csv := strings.NewReplacer("\n0,", "\n2026-05-30T23:00:00Z,", "\n10,", "\n2026-05-30T23:50:00Z,", "\n20,", "\n2026-05-31T00:10:00Z,",
		"\n30,", "\n2026-05-31T00:20:00Z,", "\n40,", "\n2026-05-31T00:30:00Z,").Replace(goodReadings)
	b, err := OpenWith(testKind(), dataset(t, map[string]string{"bench.toml": text, "readings.csv": csv}))
	if err != nil {
		t.Fatal(err)
	}
	if got, want := b.Instruments[0].Allowances[0].Dist.Half, 1e-6*136/365.25; math.Abs(got/want-1) > 1e-12 {
		t.Errorf("half-width %g, want %g", got, want)
	}
}

// TestProductOfCoefficientAndDifference draws coefficient and temperatures and
// compares the spread of their product with the half-width over √3.
func TestProductOfCoefficientAndDifference(t *testing.T) {
	b, err := OpenWith(testKind(), good(t, dividerTable, dividerTable+"per_kelvin = \"12 ppm/K\"\ncalibration_temperature = \"20.3 degC\"\n"))
	if err != nil {
		t.Fatal(err)
	}
	src := random.New(3, "product", 0)
	coefficient, air := gum.Rectangular(0, 12e-6), gum.Normal(20.5, 0.2)
	const n = 400_000
	var sum float64
	for range n {
		e := coefficient.Sample(&src) * (air.Sample(&src) - 20.3)
		sum += e * e
	}
	u := b.Instruments[0].Allowances[0].Dist.U
	if got := math.Sqrt(sum / n); math.Abs(got/u-1) > 0.01 {
		t.Errorf("the product has the standard deviation %.4g, stated is %.4g", got, u)
	}
}

// TestAllowanceErrors: what is missing or does not fit is refused, with what would
// be right.
func TestAllowanceErrors(t *testing.T) {
	const work = "[work]\nperformed = 2026-03-04\n"
	for _, c := range []struct{ old, new, want string }{
		{dividerTable, dividerTable + "drift_per_year = \"0.002 %\"\n", `bench.toml:54:18: instruments.divider.drift_per_year: how long it has drifted is not known: state the date of the work, like [work] performed = 2026-03-04, or name a column with time stamps in [rows] time`},
		{dividerTable, "drift_per_year = \"0.002 %\"\n" + work, `state the date of its calibration, like calibrated = 2026-01-15`},
		{dividerTable, "drift_per_year = \"0.002 %\"\n", `state calibrated, the date of its calibration, and [work] performed, the date of the work`},
		{dividerTable, dividerTable + "per_kelvin = \"12 ppm/K\"\n", `instruments.divider.per_kelvin: how far from its calibration it was used is not known: state the temperature there, like calibration_temperature = "23 degC"`},
		{dividerTable, dividerTable + "per_kelvin = \"12 ppm/K\"\ncalibration_temperature = \"23 K/m\"\n", `instruments.divider.calibration_temperature: "23 K/m" is`},
		{dividerTable, dividerTable + "per_kelvin = \"12 ppm/K\"\ncalibration_temperature = { value = \"23 degC\", u = \"1 K\", adjust = true }\n", `a value is due, and it is not adjusted`},
		{dividerTable, dividerTable + "drift_per_year = \"-1 ppm\"\n" + work, `"-1 ppm" where a limit is due, above zero, within which it goes either way`},
		{dividerTable, dividerTable + "drift_per_year = \"0 ppm\"\n" + work, `where a limit is due`},
		{dividerTable, dividerTable + "drift_per_year = \"2 um\"\n" + work, `"2 um" is a length, and the instrument gives channels.voltage, a voltage; state it as a part of the value`},
		{dividerTable, dividerTable + "drift_per_year = \"2 mrad\"\n" + work, `"2 mrad" is an angle, and the instrument gives channels.voltage, a voltage`},
		{dividerTable, dividerTable + "per_kelvin = \"2 um/K\"\ncalibration_temperature = \"23 degC\"\n", `"2 um/K" is a quantity in m K⁻¹, and the instrument gives channels.voltage, a voltage`},
		{dividerTable, dividerTable + "drift_per_year = \"2 um\"\n" + work + "[quantities.ratio]\nvalue = 2\nu = 0.1\ninstrument = \"divider\"\n", `and the instrument gives quantities.ratio, a pure number`},
		{dividerTable, dividerTable + "drift_per_year = \"0.1 %/year\"\n" + work, `"0.1 %/year": the key says that it is the drift of a year; write "0.1 %"`},
		{dividerTable, dividerTable + "drift_per_year = 20\n" + work, `20 comes to 2.63 times the value, all of it and more; a part of it is due, like "0.01 %"`},
		{`u = "0.2 degC" }` + "\nhumidity = \"45 %\"", `u = "0.2 degC", instrument = "divider" }` + "\n" + work, ``},
	} {
		if c.want == "" { // one instrument for two kinds of value
			_, err := OpenWith(testKind(), good(t, c.old, c.new, dividerTable, dividerTable+"drift_per_year = \"2 V\"\n"))
			wantError(t, err, `"2 V" is a voltage, and the instrument gives environment.temperature, a temperature; write one table [instruments.NAME] for each kind of value`)
			continue
		}
		_, err := OpenWith(testKind(), good(t, c.old, c.new))
		wantError(t, err, c.want)
	}
	// A part of a temperature says nothing; kelvins do.
	const thermometer = "humidity = { value = \"45 %%\", u = \"1 %%\" }\n[instruments.thermometer]\ncalibrated = 2026-01-15\ndrift_per_year = %q\n[work]\nperformed = 2026-03-04\n"
	for limit, want := range map[string]string{"0.1 %": "of which no part changes; state it in K", "0.1 degC": ""} {
		b, err := OpenWith(testKind(), good(t, `u = "0.2 degC" }`, `u = "0.2 degC", instrument = "thermometer" }`,
			"humidity = \"45 %\"\n", strings.NewReplacer("%%", "%", "%q", `"`+limit+`"`).Replace(thermometer)))
		if want != "" {
			wantError(t, err, want)
			continue
		}
		if err != nil {
			t.Fatal(err)
		}
		if a := b.Instruments[0].Allowances[0]; a.Relative || math.Abs(a.Dist.Half-0.1*48/365.25) > 1e-12 {
			t.Errorf("thermometer: %+v", a)
		}
	}
	// Without the temperature of the air.
	_, err := OpenWith(testKind(), good(t, "temperature = { value = \"20.5 degC\", u = \"0.2 degC\" }", "",
		dividerTable, dividerTable+"per_kelvin = \"12 ppm/K\"\ncalibration_temperature = \"23 degC\"\n"))
	wantError(t, err, `state [environment] temperature, like { value = "22.4 degC", u = "0.3 degC" }`)
	// A square takes a part, and no amount.
	kind := testKind()
	kind.Scalars[kind.Scalar("corrections.wedge.half_difference")].Squared = true
	dir := good(t, `shape = "rectangular" }`, `shape = "rectangular", instrument = "gauge" }`,
		"[instruments.divider]\n", "[instruments.gauge]\ncalibrated = 2026-01-15\ndrift_per_year = \"2 um\"\n[work]\nperformed = 2026-03-04\n[instruments.divider]\n")
	_, err = OpenWith(kind, dir)
	wantError(t, err, `of corrections.wedge.half_difference only the square counts; state it as a part of the value`)
}

// TestAllowanceOfNothing: a limit of an instrument that gives nothing to the result
// is a warning, and never a silent zero.
func TestAllowanceOfNothing(t *testing.T) {
	b, err := OpenWith(testKind(), good(t, `, instrument = "divider" }`, " }", dividerTable, dividerTable+"drift_per_year = \"1 ppm\"\n"))
	if err != nil {
		t.Fatal(err)
	}
	if len(b.Instruments[0].Allowances) != 0 || len(b.Instruments[0].Named) != 0 {
		t.Errorf("%+v", b.Instruments[0])
	}
	if len(b.Warnings) != 1 || !strings.Contains(b.Warnings[0].Error(), `instruments.divider.drift_per_year: nothing that the result depends on comes from this instrument, so that its drift is in no uncertainty`) {
		t.Errorf("warnings %v", b.Warnings)
	}
	// A channel without gain and offset names its instrument itself.
	b, err = OpenWith(testKind(), good(t, "column = \"F/mN\"\n", "column = \"F/mN\"\ninstrument = \"divider\"\n"))
	if err != nil {
		t.Fatal(err)
	}
	if c := &b.Channels[2]; c.Name != "force" || !c.From("divider") || b.Channels[1].From("divider") || b.Channels[1].From("") {
		t.Errorf("channel %+v", c)
	}
}

// TestAllowanceByColumn takes the temperature from a column of the readings: 21.4 °C
// on average with the scatter 0.4 K and a sensor of 0.3 K, so that u(T) is 0.5 K and
// √(1.2² + 0.5²) is 1.3 K from a calibration at 22.6 °C.
func TestAllowanceByColumn(t *testing.T) {
	text := strings.Replace(goodBench, `temperature = { value = "20.5 degC", u = "0.2 degC" }`, `temperature = { column = "T/degC", unit = "degC", u = "0.3 K" }`, 1)
	text = strings.Replace(text, dividerTable, dividerTable+"per_kelvin = \"10 ppm/K\"\ncalibration_temperature = \"22.6 degC\"\n", 1)
	lines := strings.Split(strings.TrimSpace(goodReadings), "\n")
	for i, cell := range []string{"T/degC", "21.0", "21.0", "21.4", "21.8", "21.8"} { // s² = 4·0.4²/4
		lines[i] += "," + cell
	}
	b, err := OpenWith(testKind(), dataset(t, map[string]string{"bench.toml": text, "readings.csv": strings.Join(lines, "\n") + "\n"}))
	if err != nil {
		t.Fatal(err)
	}
	if got := b.Instruments[0].Allowances[0].Dist.Half; math.Abs(got/13e-6-1) > 1e-9 {
		t.Errorf("half-width %g, want 13e-6", got)
	}
}

// TestBudgetKnowsNoAllowance: a budget takes only what its formulas name, and says so.
func TestBudgetKnowsNoAllowance(t *testing.T) {
	dir := dataset(t, map[string]string{"budget.toml": `format = 1
[inputs.v]
value = "10 V"
u = "1 mV"
instrument = "divider"
[outputs.y]
formula = "2*v"
unit = "V"
[instruments.divider]
calibrated = 2026-01-15
drift_per_year = "20 ppm"
`})
	b, err := OpenBudget(dir + "/budget.toml")
	if err != nil {
		t.Fatal(err)
	}
	if len(b.Warnings) != 1 || !strings.Contains(b.Warnings[0].Error(), "instruments.divider.drift_per_year: a budget takes only what its formulas name: make it an input of its own") {
		t.Errorf("warnings %v", b.Warnings)
	}
}
