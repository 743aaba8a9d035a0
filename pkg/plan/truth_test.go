package plan_test

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/plan"
)

// TestImpossibleTruths changes the truth of a demonstration bench in one place
// each: it must be refused, by a message that says where.
func TestImpossibleTruths(t *testing.T) {
	for _, c := range []struct{ dataset, old, new, want string }{
		{"attracted-disc", `disc_radius = "50.0125 mm"`, `disc_radius = "-50 mm"`, `simulation.toml:9:15: truth.disc_radius: "-50 mm" must be above zero: radius of the disc`},
		{"attracted-disc", `permittivity = "8.859707 pF/m"`, `permittivity = "8.859707 pF"`, `simulation.toml:6:16: truth.permittivity: "8.859707 pF" is a capacitance; a permittivity is due (for example pF/m)`},
		{"attracted-disc", `permittivity = "8.859707 pF/m"`, `permittivity = 8.86`, `simulation.toml:6:16: truth.permittivity: 8.86 has no unit; write it with its unit (for example "8.86 pF/m")`},
		{"attracted-disc", `gap_offset = "17 um"`, `gap_offset = "-17 mm"`, `readings.csv:3: with the truth of `},
		{"attracted-disc", `gap_offset = "17 um"`, `gap_offset = "-17 mm"`, `must be above zero`},
		{"attracted-disc", `"channels.voltage.gain" = "1.00007"`, `"channels.voltage.gain" = "0"`, `simulation.toml:11:27: truth.channels.voltage.gain: a gain of zero`},
		{"attracted-disc", `disc_radius = "50.0125 mm"`, `disc_radios = "50 mm"`, `did you mean "disc_radius"?`},
		{"attracted-disc", `seed = 7`, `seed = -7`, `simulation.toml:3:8: seed: -7 is no seed; write a whole number, zero or above`},
		{"attracted-disc", `seed = 7`, `seed = "7"`, `seed: "7" is no seed`},
		{"attracted-disc", `per_hour`, `per_hours`, `simulation.toml:19:1: zero.per_hours: this key is not known; did you mean "per_hour"?`},
		{"attracted-disc", `row = 40`, `row = "40"`, `"40" where a whole number is due`},
		{"attracted-disc", `row = 40`, `row = 4000`, `fault.row: 4000 is not a data record`},
		{"attracted-disc", `[zero]`, `[zero`, `not valid TOML`},
		{"sphere-pair", `radius_1 = "20.003 mm"`, `radius_1 = "200 mm"`, `the spheres overlap; their centres must be farther apart than the sum of their radii`},
	} {
		from := filepath.Join("..", "..", "datasets", c.dataset)
		dir := t.TempDir()
		if err := os.CopyFS(dir, os.DirFS(from)); err != nil {
			t.Fatal(err)
		}
		path := filepath.Join(dir, plan.TruthFile)
		data, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		if !strings.Contains(string(data), c.old) {
			t.Fatalf("%s does not hold %q", path, c.old)
		}
		if err := os.WriteFile(path, []byte(strings.Replace(string(data), c.old, c.new, 1)), 0o644); err != nil {
			t.Fatal(err)
		}
		b, err := bench.Open(dir)
		if err != nil {
			t.Fatal(err)
		}
		truth, err := plan.ReadTruth(b)
		if err == nil {
			_, err = plan.Simulate(b, truth, truth.Seed)
		}
		if err == nil {
			t.Errorf("%s: not refused", c.new)
		} else if !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %q does not say %q", c.new, err, c.want)
		}
	}
}
