package plan_test

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/si"
)

func stray(t *testing.T, text string) *plan.StrayField {
	t.Helper()
	b, err := plan.ParseStray("stray.toml", []byte("format = 1\n"+text))
	if err != nil {
		t.Fatal(err)
	}
	s, err := plan.Stray(b)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func close(t *testing.T, what string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Abs(want)) {
		t.Errorf("%s: got %.10g, want %.10g", what, got, want)
	}
}

// A stray field in the text of a file: what a charge of 1 nC makes at 10 cm.
func ExampleStray() {
	b, err := plan.ParseStray("rod.toml", []byte(`
format = 1
[[point]]
name = "rod"
charge = { value = "1 nC", u = "0.1 nC" }
at = ["0 m", "0 m", "0 m"]
[meter]
at = ["10 cm", "0 m", "0 m"]
direction = [1, 0, 0]
`))
	if err != nil {
		fmt.Println(err)
		return
	}
	s, err := plan.Stray(b)
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(si.Short(s.Component, s.Law.U, si.MustUnit("V/m")))
	// Output: 899(90) V/m
}

// TestStrayFacts holds stray fields to facts of the trade (common practice, no
// source): midway between equal like charges the field is zero and unstable to any
// displacement of one sign; outside a charged sphere the field is that of a point
// charge; an earthed plane doubles the normal field of a charge beside it.
func TestStrayFacts(t *testing.T) {
	k := 1 / (4 * math.Pi * si.Eps0)
	two := stray(t, `
[[point]]
charge = "5 nC"
at = ["-0.2 m", "0 m", "0 m"]
[[point]]
charge = "5 nC"
at = ["0.2 m", "0 m", "0 m"]
[meter]
at = ["0 m", "0.1 m", "0 m"]
place_u = "1 mm"
`)
	if len(two.Zeros) != 1 {
		t.Fatalf("%d places without field, want 1: %+v", len(two.Zeros), two.Zeros)
	}
	z := two.Zeros[0]
	for i, c := range z.At {
		if math.Abs(c) > 1e-9 {
			t.Errorf("the place without field is at %v", z.At)
		}
		if stable := z.Stable(i); stable != (math.Abs(z.Axes[i][0]) > 0.5) {
			t.Errorf("a positive charge midway is stable along %v: %v; want so along x alone", z.Axes[i], stable)
		}
	}
	// On the axis ∂E/∂x = −4kq/a³, across it 2kq/a³ (derived from kq/r²).
	close(t, "slope", z.Slope(), 4*k*5e-9/math.Pow(0.2, 3), 1e-9)
	close(t, "field of a misplaced meter", z.FieldU, 1e-3*math.Sqrt(24)*k*5e-9/math.Pow(0.2, 3), 1e-9)

	ball := stray(t, `
[[sphere]]
radius = "50 mm"
potential = { value = "2 kV", u = "20 V" }
at = ["0 m", "0 m", "0 m"]
[meter]
at = ["0.4 m", "0 m", "0 m"]
`)
	close(t, "field of a sphere", ball.Magnitude, 2e3*0.05/(0.4*0.4), 1e-12)
	close(t, "its potential", ball.Potential, 2e3*0.05/0.4, 1e-12)
	close(t, "its uncertainty", ball.Law.U/ball.Component, 0.01, 1e-9)
	// All of it goes as the potential of the sphere (derived): 1 % throughout.
	close(t, "u of the potential", ball.PotentialU/ball.Potential, 0.01, 1e-9)
	close(t, "u of the field", ball.FieldU[0]/ball.Field[0], 0.01, 1e-9)
	close(t, "u of the magnitude", ball.MagnitudeU/ball.Magnitude, 0.01, 1e-9)
	close(t, "u of the charge", ball.Parts[0].ChargeU/ball.Parts[0].Charge, 0.01, 1e-9)
	close(t, "u of the sphere's field", ball.Parts[0].FieldU[0]/ball.Field[0], 0.01, 1e-9)
	close(t, "u of the sphere's share", ball.Parts[0].ComponentU/ball.Component, 0.01, 1e-9)
	close(t, "its charge", ball.Parts[0].Charge, 2e3*0.05/k, 1e-12)
	close(t, "uncertainty of its charge", ball.Parts[0].ChargeU/ball.Parts[0].Charge, 0.01, 1e-9)

	floor := stray(t, `
[plane]
point = ["0 m", "0 m", "0 m"]
normal = [0, 0, 2]
[[point]]
charge = "3 nC"
at = ["0 m", "0 m", "0.5 m"]
[meter]
at = ["0 m", "0 m", "0 m"]
direction = [0, 0, -1]
[bench]
field = "1 kV/m"
`)
	close(t, "on the plane", floor.Component, 2*k*3e-9/0.25, 1e-12)
	close(t, "part of the bench", float64(floor.Share().Relative), 2*k*3e-9/0.25/1e3, 1e-12)
	if math.Abs(floor.Potential) > 1e-9 {
		t.Errorf("an earthed plane has the potential %g V", floor.Potential)
	}
}

// TestStrayPotentials: every sphere has the potential that the file states, in the
// presence of the others, of a charge and of the plane (definition).
func TestStrayPotentials(t *testing.T) {
	s := stray(t, `
[plane]
point = ["0 m", "0 m", "0 m"]
normal = [0, 0, 1]
[[sphere]]
name = "a"
radius = "50 mm"
potential = "2 kV"
at = ["0 m", "0 m", "1 m"]
[[sphere]]
name = "b"
radius = "80 mm"
potential = "-1 kV"
at = ["0.7 m", "0 m", "1.2 m"]
[[point]]
name = "c"
charge = "4 nC"
at = ["0 m", "0.6 m", "0.8 m"]
[meter]
at = ["0.3 m", "0.2 m", "0.5 m"]
`)
	k := 1 / (4 * math.Pi * si.Eps0)
	for i, want := range map[int]float64{1: 2e3, 2: -1e3} {
		var v float64
		at := s.Scene.Sources[i].From
		for j, c := range s.Scene.Sources {
			d := []float64{at[0] - c.From[0], at[1] - c.From[1]}
			direct := math.Hypot(math.Hypot(d[0], d[1]), at[2]-c.From[2])
			if j == i {
				direct = c.Radius
			}
			image := math.Hypot(math.Hypot(d[0], d[1]), at[2]+c.From[2])
			v += k * c.Charge * (1/direct - 1/image)
		}
		close(t, s.Scene.Sources[i].Name, v, want, 1e-9)
	}
	if len(s.Warnings) != 1 || !strings.Contains(s.Warnings[0].Error(), "place_u") {
		t.Errorf("warnings: %v; want that nothing is uncertain", s.Warnings)
	}
}

// TestStrayBudget compares the numerical sensitivities with those of the field of
// one charge, E = kq/r²: relative uncertainties u(q)/q and 2u(r)/r.
func TestStrayBudget(t *testing.T) {
	s := stray(t, `
[medium]
relative_permittivity = { value = "1.0006", u = "0.0001" }
[[point]]
name = "rod"
charge = { value = "3 nC", half_width = "0.3 nC" }
at = ["0 m", "0 m", "0 m"]
place_u = "1 mm"
[meter]
name = "probe"
at = ["0.5 m", "0 m", "0 m"]
place_u = "2 mm"
direction = [1, 0, 0]
`)
	want := map[string]float64{"rod charge": 0.1 / math.Sqrt(3), "rod x": 2e-3 / 0.5, "probe x": 4e-3 / 0.5, "relative permittivity": 1e-4 / 1.0006}
	sum := 0.0
	for _, l := range s.Law.Budget {
		if w, ok := want[l.Input]; ok {
			close(t, l.Input, math.Abs(l.Contribution)/s.Component, w, 1e-4)
			delete(want, l.Input)
			sum += w * w
		} else if math.Abs(l.Contribution) > 1e-12*s.Component {
			t.Errorf("%s contributes %g V/m", l.Input, l.Contribution)
		}
	}
	if len(want) > 0 {
		t.Errorf("not in the budget: %v", want)
	}
	close(t, "u", s.Law.U/s.Component, math.Sqrt(sum), 1e-4)
}

func TestStrayDemo(t *testing.T) {
	b, err := plan.OpenStray(filepath.Join("..", "..", "datasets", "strayfield", "strayfield.toml"))
	if err != nil {
		t.Fatal(err)
	}
	s, err := plan.Stray(b)
	if err != nil {
		t.Fatal(err)
	}
	var sum [3]float64
	for _, p := range s.Parts {
		for i := range sum {
			sum[i] += p.Field[i]
		}
	}
	for i := range sum {
		if math.Abs(sum[i]-s.Field[i]) > 1e-9*s.Magnitude {
			t.Errorf("the parts add to %v, the field is %v", sum, s.Field)
		}
	}
	curves := 0
	for _, z := range s.Zeros {
		if z.Line {
			curves++
		}
	}
	if curves != 1 || len(s.Zeros) < 3 {
		t.Errorf("%d places without field, %d of them stand for a curve", len(s.Zeros), curves)
	}
	text, err := json.Marshal(s.Record())
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{`"format":1`, `"relative"`, `"bodies":[`, `"zeros":[`, `"budget":[`} {
		if !strings.Contains(string(text), want) {
			t.Errorf("the record has no %s", want)
		}
	}
}

func TestStrayWarnsOfNearSpheres(t *testing.T) {
	s := stray(t, `
[[sphere]]
name = "a"
radius = "50 mm"
charge = { value = "2 nC", u = "0.1 nC" }
at = ["0 m", "0 m", "0 m"]
[[point]]
name = "c"
charge = "4 nC"
at = ["0.12 m", "0 m", "0 m"]
[meter]
at = ["0.3 m", "0.2 m", "0.5 m"]
`)
	if len(s.Warnings) != 1 || !strings.Contains(s.Warnings[0].Error(), `2.4 radii from "c"`) {
		t.Errorf("warnings: %v", s.Warnings)
	}
}

func TestStrayRefuses(t *testing.T) {
	const body = "[[point]]\nname = \"rod\"\ncharge = \"1 nC\"\nat = [\"0 m\", \"0 m\", \"0 m\"]\n"
	// A ball of radius 0.1 m on the x axis.
	ball := func(name, x string) string {
		return "[[sphere]]\nname = \"" + name + "\"\ncharge = \"1 nC\"\nradius = \"0.1 m\"\nat = [\"" + x + " m\", \"0 m\", \"0 m\"]\n"
	}
	const meter = "[meter]\nat = [\"1 m\", \"0 m\", \"0 m\"]\n"
	for _, c := range []struct {
		name, text string
		words      []string
	}{
		{"format", "format = 2\n" + body + meter, []string{"format 2"}},
		{"unknown key", "format = 1\n[[point]]\nchrage = \"1 nC\"\n" + meter, []string{"stray.toml:3:1", "point.chrage", `"charge"`}},
		{"syntax", "format = 1\n[[point]\n", []string{"stray.toml:2:"}},
		{"no meter", "format = 1\n" + body, []string{"meter", "is missing"}},
		{"no body", "format = 1\n" + meter, []string{"no charged body"}},
		{"unit", "format = 1\n[[point]]\ncharge = \"1 nF\"\nat = [\"0 m\", \"0 m\", \"0 m\"]\n" + meter, []string{"stray.toml:3:10: ", `charge: "1 nF" is a capacitance; a charge is due (for example C)`}},
		{"unit of a table", "format = 1\n[[point]]\ncharge = { value = \"1 nC\", u = \"1 mm\" }\nat = [\"0 m\", \"0 m\", \"0 m\"]\n" + meter, []string{"stray.toml:3:32: ", `charge.u: "1 mm" is a length; a charge is due`}},
		{"number for a text", "format = 1\n[[point]]\nname = 7\n" + meter, []string{"stray.toml:3:8: point.name: 7 where a text is due; put it in quotes"}},
		{"spheres that overlap", "format = 1\n" + ball("c", "0") + ball("d", "0.15") + meter, []string{"stray.toml:7:3: ", `spheres "c" and "d" overlap`, "150 mm apart", "200 mm"}},
		{"spheres that touch", "format = 1\n" + ball("c", "0") + ball("d", "0.2") + meter, []string{`spheres "c" and "d" overlap`}},
		{"point in a sphere", "format = 1\n" + body + ball("c", "0.05") + meter, []string{`point "rod" reaches into sphere "c"`, "50 mm"}},
		{"edge through a sphere", "format = 1\n" + ball("c", "0") + "[[edge]]\nname = \"lip\"\ncharge = \"1 nC\"\nfrom = [\"-1 m\", \"0.05 m\", \"0 m\"]\nto = [\"1 m\", \"0.05 m\", \"0 m\"]\n[meter]\nat = [\"0 m\", \"0 m\", \"1 m\"]\n", []string{`edge "lip" reaches into sphere "c"`}},
		{"no unit", "format = 1\n[[point]]\ncharge = 1e-9\nat = [\"0 m\", \"0 m\", \"0 m\"]\n" + meter, []string{"charge", "no unit"}},
		{"place", "format = 1\n[[point]]\ncharge = \"1 nC\"\nat = [\"0 m\", \"0 m\"]\n" + meter, []string{"at", "three lengths"}},
		{"uncertain coordinate", "format = 1\n[[point]]\ncharge = \"1 nC\"\nat = [{ value = \"0 m\", u = \"1 mm\" }, \"0 m\", \"0 m\"]\n" + meter, []string{"stray.toml:4:", "at[1]: takes no uncertainty", "place_u"}},
		{"uncertain uncertainty", "format = 1\n" + body + "place_u = { value = \"1 mm\", u = \"1 mm\" }\n" + meter, []string{"place_u: takes no uncertainty"}},
		{"uncertain bench", "format = 1\n" + body + meter + "[bench]\nfield = { value = \"1 kV/m\", u = \"1 V/m\" }\n", []string{"bench.field: takes no uncertainty"}},
		{"uncertain coverage", "format = 1\n" + body + meter + "[report]\ncoverage = { value = \"95 %\", u = \"1 %\" }\n", []string{"report.coverage: takes no uncertainty"}},
		{"charge and potential", "format = 1\n[[sphere]]\ncharge = \"1 nC\"\npotential = \"1 kV\"\nradius = \"1 cm\"\nat = [\"0 m\", \"0 m\", \"0 m\"]\n" + meter, []string{"one of the two"}},
		{"potential of a point", "format = 1\n[[point]]\npotential = \"1 kV\"\nat = [\"0 m\", \"0 m\", \"0 m\"]\n" + meter, []string{"sphere"}},
		{"sphere without a radius", "format = 1\n[[sphere]]\npotential = \"1 kV\"\nat = [\"0 m\", \"0 m\", \"0 m\"]\n" + meter, []string{"radius", "missing"}},
		{"edge without a length", "format = 1\n[[edge]]\ncharge = \"1 nC\"\nfrom = [\"0 m\", \"0 m\", \"0 m\"]\nto = [\"0 m\", \"0 m\", \"0 m\"]\n" + meter, []string{"same place"}},
		{"two of a name", "format = 1\n" + body + body + meter, []string{"two bodies"}},
		{"direction", "format = 1\n" + body + meter + "direction = [0, 0, 0]\n", []string{"direction"}},
		{"uncertainty below zero", "format = 1\n[[point]]\ncharge = { value = \"1 nC\", u = \"-1 nC\" }\nat = [\"0 m\", \"0 m\", \"0 m\"]\n" + meter, []string{"above zero"}},
		{"unknown key of a quantity", "format = 1\n[[point]]\ncharge = { value = \"1 nC\", uu = \"1 nC\" }\nat = [\"0 m\", \"0 m\", \"0 m\"]\n" + meter, []string{"uu", `"u"`}},
		{"thin medium", "format = 1\n[medium]\nrelative_permittivity = 0.5\n" + body + meter, []string{"below that of vacuum"}},
		{"meter on a body", "format = 1\n" + body + "[meter]\nat = [\"0 m\", \"0 m\", \"0 m\"]\n", []string{"rod"}},
		{"meter behind the plane", "format = 1\n[plane]\npoint = [\"0 m\", \"0 m\", \"-1 m\"]\nnormal = [0, 0, 1]\n" + body + "[meter]\nat = [\"0 m\", \"0 m\", \"-2 m\"]\n", []string{"behind"}},
		{"body behind the plane", "format = 1\n[plane]\npoint = [\"0 m\", \"0 m\", \"1 m\"]\nnormal = [0, 0, 1]\n" + body + "[meter]\nat = [\"0 m\", \"0 m\", \"2 m\"]\n", []string{"rod", "above the earthed plane"}},
	} {
		b, err := plan.ParseStray("stray.toml", []byte(c.text))
		if err == nil {
			_, err = plan.Stray(b)
		}
		if err == nil {
			t.Errorf("%s: not refused", c.name)
			continue
		}
		for _, w := range c.words {
			if !strings.Contains(err.Error(), w) {
				t.Errorf("%s: %q does not say %q", c.name, err, w)
			}
		}
	}
	if _, err := plan.OpenStray(t.TempDir()); err == nil || !strings.Contains(err.Error(), "this is a folder; name the file") {
		t.Errorf("a folder: %v", err)
	}
	if _, err := plan.OpenStray(filepath.Join(t.TempDir(), "none.toml")); !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("a file that is not there: %v", err)
	}
}

// FuzzParseStray: whatever the file, an error or a field, and never a panic.
func FuzzParseStray(f *testing.F) {
	data, err := os.ReadFile(filepath.Join("..", "..", "datasets", "strayfield", "strayfield.toml"))
	if err != nil {
		f.Fatal(err)
	}
	f.Add(string(data))
	f.Add("format = 1\n[[point]]\ncharge = \"1 nC\"\nat = [\"0 m\", \"0 m\", \"0 m\"]\n[meter]\nat = [\"1 m\", \"0 m\", \"0 m\"]\n")
	f.Add("format = 1\n[meter]\nat = 3\n")
	f.Fuzz(func(t *testing.T, text string) {
		b, err := plan.ParseStray("fuzz.toml", []byte(text))
		if err != nil {
			if b != nil {
				t.Error("a bench beside an error")
			}
			return
		}
		if s, err := plan.Stray(b); err != nil && s != nil {
			t.Error("a field beside an error")
		}
	})
}
