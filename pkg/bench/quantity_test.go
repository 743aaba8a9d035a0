package bench

import (
	"math"
	"testing"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/si"
)

// readQuantity reads one quantity table as a bench file would hold it.
func readQuantity(t testing.TB, toml string, like si.Unit) (stated, error) {
	t.Helper()
	root, err := document("bench.toml", []byte("q = "+toml+"\n"))
	if err != nil {
		t.Fatal(err)
	}
	r := reader{file: "bench.toml", root: root, grammar: &grammar{}}
	q, ok := r.quantity(root.field("q"), wanted{like: like})
	err = r.errs.err()
	if ok != (err == nil) {
		t.Errorf("%s: ok %v, error %v", toml, ok, err)
	}
	return q, err
}

// TestQuantityForms checks each form against the standard uncertainty that JCGM
// 100:2008 4.3 and JCGM 101:2008 6.4 give it.
func TestQuantityForms(t *testing.T) {
	mm := si.MustUnit("mm")
	inf := math.Inf(1)
	for _, c := range []struct {
		toml       string
		shape      string
		value, u   float64
		dof, other float64 // other: half-width, or shape parameter
	}{
		{`"50 mm"`, gum.ShapeExact, 0.05, 0, inf, 0},
		{`{ value = "50 mm" }`, gum.ShapeExact, 0.05, 0, inf, 0},
		{`{ value = "50 mm", u = "3 um" }`, gum.ShapeNormal, 0.05, 3e-6, inf, 0},
		{`{ value = "5 cm", u = "3e-6 m", dof = 7.5 }`, gum.ShapeNormal, 0.05, 3e-6, 7.5, 0},
		{`{ value = "50 mm", u = "3 um", dof = "infinite" }`, gum.ShapeNormal, 0.05, 3e-6, inf, 0},
		{`{ value = "-50 mm", relative_u = "0.02 %" }`, gum.ShapeNormal, -0.05, 1e-5, inf, 0},
		{`{ value = "50 mm", relative_u = 2e-4 }`, gum.ShapeNormal, 0.05, 1e-5, inf, 0},
		{`{ value = "50 mm", expanded = "6 um", k = 2 }`, gum.ShapeNormal, 0.05, 3e-6, inf, 0},
		{`{ value = "50 mm", relative_expanded = "0.04 %", k = 2 }`, gum.ShapeNormal, 0.05, 1e-5, inf, 0},
		// JCGM 100:2008 table G.1: k = 1.960 for 95 %, infinite dof (4.3.4); table G.2: t = 2.26 for 9.
		{`{ value = "50 mm", expanded = "1.959963984540054 um", probability = "95 %" }`, gum.ShapeNormal, 0.05, 1e-6, inf, 0},
		{`{ value = "50 mm", expanded = "2.262157162740992 um", probability = 0.95, dof = 9 }`, gum.ShapeNormal, 0.05, 1e-6, 9, 0},
		{`{ value = "50 mm", half_width = "3 um", shape = "rectangular" }`, gum.ShapeRectangular, 0.05, 3e-6 / math.Sqrt(3), inf, 3e-6},
		{`{ value = "50 mm", half_width = "3 um", shape = "rectangular", dof = 12 }`, gum.ShapeRectangular, 0.05, 3e-6 / math.Sqrt(3), 12, 3e-6},
		{`{ value = "50 mm", relative_half_width = "1 %", shape = "triangular" }`, gum.ShapeTriangular, 0.05, 5e-4 / math.Sqrt(6), inf, 5e-4},
		{`{ value = "50 mm", half_width = "3 um", shape = "arcsine" }`, gum.ShapeArcsine, 0.05, 3e-6 / math.Sqrt2, inf, 3e-6},
		{`{ value = "50 mm", half_width = "3 um", shape = "trapezoidal", beta = 0.5 }`, gum.ShapeTrapezoidal, 0.05, 3e-6 * math.Sqrt(1.25/6), inf, 3e-6},
		{`{ value = "50 mm", half_width = "3 um", shape = "curvilinear-trapezoid", inexactness = "1 um" }`, gum.ShapeCurvilinear, 0.05,
			math.Sqrt(36e-12/12 + 1e-12/9), 4.5, 3e-6}, // JCGM 100:2008 G.4.2: dof = (3/1)²/2
		{`{ value = "50 mm", u = "3 um", shape = "rectangular" }`, gum.ShapeRectangular, 0.05, 3e-6, inf, 3e-6 * math.Sqrt(3)},
		{`{ value = "50 mm", u = "3 um", shape = "triangular" }`, gum.ShapeTriangular, 0.05, 3e-6, inf, 3e-6 * math.Sqrt(6)},
		{`{ value = "50 mm", u = "3 um", shape = "arcsine" }`, gum.ShapeArcsine, 0.05, 3e-6, inf, 3e-6 * math.Sqrt2},
		{`{ value = "50 mm", u = "3 um", shape = "trapezoidal", beta = 1 }`, gum.ShapeTrapezoidal, 0.05, 3e-6, inf, 3e-6 * math.Sqrt(3)},
		{`{ value = "50 mm", u = "3 um", shape = "t", dof = 4 }`, gum.ShapeT, 0.05, 3e-6, 4, 0},
		{`{ value = "50 mm", shape = "exponential" }`, gum.ShapeExponential, 0.05, 0.05, inf, 0},
		// Mean and s of the readings computed by hand: 50, s² = (1+0+1)/2 um².
		{`{ readings = ["49.999 mm", "50 mm", "50.001 mm"] }`, gum.ShapeNormal, 0.05, 1e-6 / math.Sqrt(3), 2, 0},
	} {
		q, err := readQuantity(t, c.toml, mm)
		if err != nil {
			t.Errorf("%s: %v", c.toml, err)
			continue
		}
		d := q.dist
		if d.Shape != c.shape || !near(d.Value, c.value, 1e-15) || !near(d.U, c.u, 1e-9) || !near(d.DOF, c.dof, 1e-12) {
			t.Errorf("%s: got %s %v u %v dof %v; want %s %v u %v dof %v", c.toml, d.Shape, d.Value, d.U, d.DOF, c.shape, c.value, c.u, c.dof)
		}
		if !near(d.Half, c.other, 1e-12) {
			t.Errorf("%s: half-width %v, want %v", c.toml, d.Half, c.other)
		}
		if err := d.Check(); err != nil {
			t.Errorf("%s: %v", c.toml, err)
		}
	}
	// A count of 9 (JCGM 101:2008 6.4.11.4): expectation and variance 10.
	q, err := readQuantity(t, `{ value = 9, shape = "gamma" }`, si.One)
	if err != nil || q.dist.Value != 10 || !near(q.dist.U, math.Sqrt(10), 1e-14) {
		t.Errorf("count: %+v, %v", q.dist, err)
	}
	// Degrees Celsius: a value has the offset, an uncertainty has not.
	q, err = readQuantity(t, `{ value = "20 degC", u = "0.5 degC" }`, si.MustUnit("K"))
	if err != nil || q.dist.Value != 293.15 || q.dist.U != 0.5 {
		t.Errorf("temperature: %+v, %v", q.dist, err)
	}
	// Pure numbers may be plain.
	q, err = readQuantity(t, `{ value = 0.998, u = 2e-4 }`, si.One)
	if err != nil || q.dist.Value != 0.998 || q.dist.U != 2e-4 {
		t.Errorf("number: %+v, %v", q.dist, err)
	}
	q, err = readQuantity(t, `1`, si.One)
	if err != nil || q.dist.Value != 1 {
		t.Errorf("number: %+v, %v", q.dist, err)
	}
}

func near(a, b, relative float64) bool {
	return a == b || math.Abs(a-b) <= relative*math.Max(math.Abs(a), math.Abs(b))
}

// TestQuantitiesThatAreNone must fail with a message, never a panic.
func TestQuantitiesThatAreNone(t *testing.T) {
	for _, s := range []string{`{}`, `[]`, `true`, `2026-03-04`, `nan`, `{ value = "0 mm", relative_u = "1 %" }`,
		`{ value = "-1 mm", shape = "exponential" }`, `{ value = 1.5, shape = "gamma" }`, `{ value = "1 mm", u = "1e-400 mm" }`,
		`{ value = "1e-300 mm", relative_u = 1e-30 }`, `{ value = "1e308 m", relative_u = 1e9 }`, `{ readings = "1 mm" }`,
		`{ readings = ["1e308 m", "-1e308 m", "1e308 m"] }`, `{ value = "1 mm", u = { value = 1 } }`, `{ value = ["1 mm"] }`,
		`{ value = "1 mm", u = "1 mm", shape = "gamma" }`, `{ value = "1 mm", shape = "gamma" }`, `{ value = 3, u = inf }`} {
		q, err := readQuantity(t, s, si.MustUnit("mm"))
		if err == nil && (q.hasValue || q.hasStart) {
			t.Errorf("%s: read as %+v", s, q.dist)
		}
	}
}
