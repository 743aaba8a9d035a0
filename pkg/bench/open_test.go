package bench

import (
	"crypto/sha256"
	"encoding/hex"
	"math"
	"testing"
)

func TestOpen(t *testing.T) {
	b, err := OpenWith(testKind(), good(t))
	if err != nil {
		t.Fatal(err)
	}
	if b.Title != "Disc of the tests" || b.Method != "least-squares" || b.Format != 1 || b.Coverage != 0.9545 {
		t.Errorf("head: %q %q %d %v", b.Title, b.Method, b.Format, b.Coverage)
	}
	if len(b.Inputs) != 2 || b.Inputs[0].File != "bench.toml" || b.Inputs[1].Rows != 5 || b.Inputs[1].Excluded != 1 {
		t.Errorf("inputs: %+v", b.Inputs)
	}
	for i, text := range []string{goodBench, goodReadings} {
		sum := sha256.Sum256([]byte(text))
		if b.Inputs[i].SHA256 != hex.EncodeToString(sum[:]) {
			t.Errorf("%s: SHA-256 %s", b.Inputs[i].File, b.Inputs[i].SHA256)
		}
	}
	v := b.Channels[0]
	if len(b.Channels) != 3 || v.Name != "voltage" || v.Noise != 0.3 || v.RelativeNoise != 2e-4 || !math.IsInf(v.NoiseDOF, 1) {
		t.Errorf("voltage: %+v", v)
	}
	if !math.IsNaN(v.Readings[0]) || v.Readings[1] != math.Nextafter(2000.1, 3000) || v.Readings[4] != -4000.3 {
		t.Errorf("voltage readings: %v", v.Readings)
	}
	if !v.HasGain || v.Gain.Value != 1 || v.Gain.U != 1.2e-4 || v.GainSource != "divider certificate" || v.Offset.U != 0.2 || v.GainInstrument != "divider" {
		t.Errorf("gain %+v offset %+v", v.Gain, v.Offset)
	}
	g := b.Channels[1].Grouped
	if len(g) != 1 || g[0].U != 3e-6 || g[0].DOF != 8 || g[0].Count != 2 || g[0].Group[0] != 0 || g[0].Group[4] != 1 || g[0].Labels[1] != "2" {
		t.Errorf("grouped: %+v", g)
	}
	f := b.Channels[2]
	if !f.FromResiduals || f.Resolution != 1e-6 || f.ResolutionPer != "reading" || f.HasGain || f.Gain.Value != 1 {
		t.Errorf("force: %+v", f)
	}
	byName := map[string]Scalar{}
	for i, s := range b.Scalars {
		if s.Name != b.Kind.Scalars[i].Key() {
			t.Errorf("scalar %d is %s", i, s.Name)
		}
		byName[s.Name] = s
	}
	if s := byName["disc_radius"]; s.Dist.Value != 0.050012 || s.Dist.U != 1.5e-6 || s.Dist.DOF != 12 || !s.Given || s.Unit.Symbol != "mm" || s.Key != "quantities.disc_radius" {
		t.Errorf("disc_radius: %+v", s)
	}
	if s := byName["gap_offset"]; !s.Adjust || !s.HasPrior || s.Dist.U != 8e-6 || s.Start != 0 || !s.HasStart {
		t.Errorf("gap_offset: %+v", s)
	}
	if s := byName["permittivity"]; !s.Adjust || s.HasPrior || s.HasStart || s.Given {
		t.Errorf("permittivity: %+v", s)
	}
	if s := byName["ratio"]; s.Given || s.Dist.Value != 2 || s.Dist.U != 0.1 {
		t.Errorf("ratio: %+v", s)
	}
	if s := byName["environment.temperature"]; s.Dist.Value != 293.65 || s.Dist.U != 0.2 {
		t.Errorf("temperature: %+v", s)
	}
	if s := byName["corrections.wedge.half_difference"]; s.Dist.Shape != "rectangular" || s.Dist.Half != 6e-6 {
		t.Errorf("wedge: %+v", s)
	}
	if !b.Corrections["wedge"] || !b.Corrections["air"] || b.Options["drive.kind"] != "balanced" || b.Options["connection"] != "fixed-potential" {
		t.Errorf("corrections %v options %v", b.Corrections, b.Options)
	}
	if len(b.Correlations) != 1 || b.Correlations[0].B != "channels.voltage.gain" || b.Correlations[0].R != 0.6 {
		t.Errorf("correlations: %+v", b.Correlations)
	}
	r := &b.Rows
	if r.N != 5 || r.Kind[0] != Zero || r.Kind[1] != Reading || r.Time[4] != 40 || r.Label("setting", 3) != "2" || r.Label("mount", 3) != "" {
		t.Errorf("rows: %+v", r)
	}
	if !r.Excluded[2] || r.Reason(2) != "spark noted in the log" || r.Excluded[0] {
		t.Errorf("exclusions: %v %q", r.Excluded, r.Reason(2))
	}
	if file, line := r.Place(2); file != "readings.csv" || line != 4 {
		t.Errorf("place: %s:%d", file, line)
	}
	if len(b.Environment) != 2 || b.Environment[1].Name != "humidity" || b.Environment[1].Dist.Value != 0.45 {
		t.Errorf("environment: %+v", b.Environment)
	}
	if b.Safety.Energy != 0.35 || b.Safety.Charge != 50e-6 || b.Safety.Stated {
		t.Errorf("safety: %+v", b.Safety)
	}
	if len(b.Warnings) != 0 {
		t.Errorf("warnings: %v", b.Warnings)
	}
}
