package bench

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/si"
)

// testKind is a kind of bench that has one of everything, so that the tests
// here do not depend on the kinds there are.
func testKind() *model.Kind {
	return &model.Kind{
		Name: "test-disc", Title: "Disc of the tests", Doc: "A disc is attracted by a plate; invented for tests.",
		Channels: []model.Channel{
			{Name: "voltage", Doc: "voltage of the plate", Unit: si.MustUnit("kV"), Role: model.Predictor},
			{Name: "gap", Doc: "spacing", Unit: si.MustUnit("mm"), Role: model.Predictor, Positive: true},
			{Name: "warmth", Doc: "temperature of the plate", Unit: si.MustUnit("degC"), Role: model.Predictor, Optional: true},
			{Name: "force", Doc: "force on the disc", Unit: si.MustUnit("mN"), Role: model.Response},
			{Name: "mass", Doc: "indication of the balance", Unit: si.MustUnit("g"), Role: model.Response},
		},
		Scalars: []model.Scalar{
			{Table: "quantities", Name: "permittivity", Doc: "permittivity of the gap", Unit: si.MustUnit("pF/m"), Sought: true, Positive: true},
			{Table: "quantities", Name: "gap_offset", Doc: "zero of the spacing scale", Unit: si.MustUnit("um"), Adjustable: true},
			{Table: "quantities", Name: "disc_radius", Doc: "radius of the disc", Unit: si.MustUnit("mm"), Required: true, Positive: true},
			{Table: "quantities", Name: "ratio", Doc: "a pure number", Unit: si.MustUnit("1"), Default: gum.Normal(2, 0.1)},
			{Table: "environment", Name: "temperature", Doc: "temperature of the air", Unit: si.MustUnit("degC"), Default: gum.Exactly(293.15), Positive: true},
			{Table: "corrections.wedge", Name: "half_difference", Doc: "half of the difference of spacing", Unit: si.MustUnit("um"), Required: true},
		},
		Corrections: []model.Correction{
			{Name: "wedge", Doc: "plates not parallel"},
			{Name: "air", Doc: "moist air", Default: true},
		},
		Options: []model.Option{
			{Key: "drive.kind", Doc: "how the voltage is applied", Values: []string{"balanced", "one-side-earthed"}, Default: "balanced"},
			{Key: "connection", Doc: "of the disc", Values: []string{"fixed-charge", "fixed-potential"}, Default: "fixed-potential"},
		},
	}
}

// goodBench is a small bench file that opens; %%-free so that tests can edit it.
const goodBench = `format = 1
title  = "Disc of the tests"
model  = "test-disc"

[[readings]]
file = "readings.csv"

[rows]
time    = "t"
kind    = "kind"
setting = "gap_no"

[channels.voltage]
column = "V/kV"
unit   = "kV"
noise  = "0.3 V"
relative_noise = "0.02 %"
gain   = { value = 1, u = "0.012 %", source = "divider certificate", instrument = "divider" }
offset = { value = "0 V", u = "0.2 V" }

[channels.gap]
column  = "gap/mm"
unit    = "mm"
grouped = [{ by = "setting", u = "3 um", dof = 8 }]

[channels.force]
column = "F/mN"
unit   = "mN"
noise  = "from-residuals"
resolution = "1 uN"

[quantities.disc_radius]
value = "50.012 mm"
u = "1.5 um"
dof = 12

[quantities.gap_offset]
value = "0 um"
u = "8 um"
adjust = true

[corrections.wedge]
use = true
half_difference = { value = "0 um", half_width = "6 um", shape = "rectangular" }

[environment]
temperature = { value = "20.5 degC", u = "0.2 degC" }
humidity = "45 %"

[instruments.divider]
serial = "D-1"
calibrated = 2026-01-15
due = 2027-01-15

[[correlations]]
between = ["disc_radius", "channels.voltage.gain"]
r = 0.6

[[exclude]]
row = 3
reason = "spark noted in the log"
`

const goodReadings = `t,kind,gap_no,V/kV,gap/mm,F/mN
0,zero,1,,4.000,0.0001
10,reading,1,2.0001,4.000,0.8701
20,reading,1,-2.0002,4.000,0.8703
30,reading,2,4.0001,8.000,0.8705
40,reading,2,-4.0003,8.000,0.8709
`

// dataset writes files into a new folder and returns it.
func dataset(t testing.TB, files map[string]string) string {
	t.Helper()
	dir := t.TempDir()
	for name, text := range files {
		path := filepath.Join(dir, filepath.FromSlash(name))
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

// good is the dataset that opens, with changes: pairs of texts to replace in
// bench.toml.
func good(t testing.TB, edits ...string) string {
	t.Helper()
	text := goodBench
	for i := 0; i < len(edits); i += 2 {
		if !strings.Contains(text, edits[i]) {
			t.Fatalf("bench.toml of the tests does not contain %q", edits[i])
		}
		text = strings.Replace(text, edits[i], edits[i+1], 1)
	}
	return dataset(t, map[string]string{"bench.toml": text, "readings.csv": goodReadings})
}
