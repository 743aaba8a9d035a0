package certificate

import (
	"fmt"
	"math"
	"math/big"
	"strconv"
	"strings"
	"testing"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// TestRound: GUM 7.2.6 with two digits; the cases are computed by hand from the
// rule (7.2.6 gives 10.05762 with 27 mΩ as 10.058; from memory).
func TestRound(t *testing.T) {
	for _, c := range []struct {
		x, u, least float64
		v, du       string
	}{
		{10.05762, 0.027, 0, "10.058", "0.027"},
		{0.97714413906, 0.00384233291, 0, "0.9771", "0.0038"},
		{1.0041, 0.00996, 0, "1.004", "0.010"},
		{-0.00004, 0.0012, 0, "0.0000", "0.0012"},
		{12345.6, 1234.5, 0, "12300", "1200"},
		{12345.6, 99.6, 0, "12350", "100"},
		{1, 0.0104, 0, "1.000", "0.010"},
		{1, 0.0104, 0.0104, "1.000", "0.011"}, // not below the capability
		{1, 0.0991, 0.0991, "1.00", "0.10"},   // a digit more in all
		{1.0258, 0.00513, 0.00513, "1.0258", "0.0052"},
		{2, 0, 0, "2", "0"},
	} {
		v, u := round(c.x, c.u, c.least)
		if v != c.v || u != c.du {
			t.Errorf("round(%v, %v, %v) = %s, %s; want %s, %s", c.x, c.u, c.least, v, u, c.v, c.du)
		}
	}
}

// TestRoundKeepsItsPromises over many sizes: U has two digits, is never rounded
// down by more than 5 % (ILAC-P14, from memory) nor below the capability, the
// value ends at its place and within half of it.
func TestRoundKeepsItsPromises(t *testing.T) {
	for i := range 4000 {
		u := math.Pow(10, -7+0.0035*float64(i))
		x := 3.14159 * u * float64(i%97)
		for _, least := range []float64{0, u} {
			v, s := round(x, u, least)
			got, err := strconv.ParseFloat(s, 64)
			if err != nil {
				t.Fatal(err)
			}
			if got < 0.95*u || got < least || got > 1.15*u {
				t.Fatalf("U = %v is stated as %s (least %v)", u, s, least)
			}
			if d := strings.TrimRight(strings.TrimLeft(strings.ReplaceAll(s, ".", ""), "0"), "0"); len(d) > 2 {
				t.Fatalf("U = %v is stated with more than two digits: %s", u, s)
			}
			_, fu, _ := strings.Cut(s, ".")
			_, fv, _ := strings.Cut(v, ".")
			if len(fu) != len(fv) {
				t.Fatalf("%s and %s do not end at one place", v, s)
			}
			a, ok := new(big.Rat).SetString(v)
			if !ok {
				t.Fatalf("%q is no number", v)
			}
			d, _ := new(big.Rat).Sub(a, new(big.Rat).SetFloat64(x)).Float64()
			// Two digits of U: the second is at least a hundredth of it.
			if math.Abs(d) > 0.0501*got {
				t.Fatalf("%v is stated as %s ± %s", x, v, s)
			}
		}
	}
}

// TestCapability: a smaller uncertainty is raised to the stated capability with
// its coverage factor, and says so.
func TestCapability(t *testing.T) {
	c := &capability{relative: 0.005, k: 2}
	q := quantity("factor", "", 1.0137, 0.0011, 2.01, si.One, c)
	if q.Expanded != "0.0051" || q.K != "2.00" || !q.Raised {
		t.Errorf("raised to %+v; want U = 0.0051, k = 2.00", q)
	}
	if u := q.u(); math.Abs(u-0.005*1.0137/2) > 1e-12 {
		t.Errorf("standard uncertainty %v does not belong to the U stated", u)
	}
	q = quantity("factor", "", 1.0137, 0.0031, 2.01, si.One, c)
	if q.Expanded != "0.0062" || q.Raised {
		t.Errorf("a larger uncertainty was changed: %+v", q)
	}
}

// TestRaisedPoints: a point whose uncertainty is raised is told also where that of the
// whole range is not.
func TestRaisedPoints(t *testing.T) {
	r := result(t, "field-meter")
	s := append([]reduce.Series(nil), r.Record.Series...)
	s[0].Points = append([]reduce.Point(nil), s[0].Points...)
	s[0].Points[2].U /= 4
	r.Record.Series = s
	if said := strings.Join(made(t, r).Observations, "; "); !strings.Contains(said, "as-found, 2 kV/m: the uncertainty found is below the laboratory's stated capability at 1 of 8 points") {
		t.Errorf("observations %q", said)
	}
}

func ExampleQuantity_Text() {
	q := quantity("reference field", "", 19873.2, 21.4, 2, si.MustUnit("kV/m"), nil)
	fmt.Println(strings.ReplaceAll(q.Text(), "\u00a0", " "))
	// Output: (19.873 ± 0.043) kV m⁻¹, k = 2.00
}
