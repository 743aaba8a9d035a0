package si

import (
	"math"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// TestRound: the first cases are those of GUM 7.2.6 and 7.2.2 (JCGM 100:2008,
// values from memory); the others are edges, computed by hand.
func TestRound(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, c := range []struct {
		v, u  float64
		wantV string
		wantU string
	}{
		{10.05762, 0.027, "10.058", "0.027"},
		{100.02147, 0.00035, "100.02147", "0.00035"},
		{28.05, 0.28, "28.05", "0.28"},
		// carry
		{9.996, 0.0996, "10.00", "0.10"}, {1234, 9.96, "1234", "10"}, {99.96, 0.996, "100.0", "1.0"}, {0.9999, 0.00996, "1.000", "0.010"},
		{9999.6, 99.6, "1.000e4", "0.010e4"},
		// ties, as printed, go away from zero
		{0.0315, 0.0315, "0.032", "0.032"}, {-0.125, 0.10, "-0.13", "0.10"}, {2.675, 0.10, "2.68", "0.10"}, {0.5, 31, "1", "31"},
		// u larger than the value
		{0.003, 1.2, "0.0", "1.2"}, {-0.04, 1.2, "0.0", "1.2"}, {0, 0.5, "0.00", "0.50"}, {2.5, 1234, "0.0e3", "1.2e3"}, {1e-300, 1, "0.0", "1.0"},
		// the last digit left of the point
		{12345, 996, "1.23e4", "0.10e4"}, {-123456, 1200, "-1.235e5", "0.012e5"}, {20000, 150, "2.000e4", "0.015e4"},
		// small and large
		{3e-7, 2e-8, "3.00e-7", "0.20e-7"}, {0.00012345, 0.0000012, "0.0001235", "0.0000012"}, {1e300, 1e299, "1.00e300", "0.10e300"},
		{Eps0, UEps0, "8.8541878188e-12", "0.0000000014e-12"}, {5e-324, 5e-324, "4.9e-324", "4.9e-324"},
		// nothing to round to
		{8.25, 0, "8.25", "0"}, {0, 0, "0", "0"}, {8.254187654, nan, "8.25419", "unknown"}, {8.25, -1, "8.25", "unknown"}, {8.25, inf, "8.25", "infinite"},
		{nan, 0.5, "NaN", "0.5"}, {inf, 0.5, "+Inf", "0.5"}, {nan, nan, "NaN", "unknown"},
		// further apart than a double reaches
		{1, 1e-30, "1", "1.0e-30"}, {1e300, 1e-300, "1e300", "1.0e-300"},
	} {
		if v, u := Round(c.v, c.u); v != c.wantV || u != c.wantU {
			t.Errorf("Round(%v, %v) = %s, %s; want %s, %s", c.v, c.u, v, u, c.wantV, c.wantU)
		}
	}
}

// TestShort: the printed CODATA 2022 values are published; the others are edges.
func TestShort(t *testing.T) {
	for _, c := range []struct {
		v, u       float64
		unit, want string
	}{
		{Eps0, UEps0, "F/m", "8.8541878188(14)×10⁻¹² F/m"}, {Mu0, UMu0, "N/A²", "1.25663706127(20)×10⁻⁶ N/A²"},
		{FineStructure, UFineStructure, "1", "0.0072973525643(11)"}, {ElementaryCharge, 0, "C", "1.602176634×10⁻¹⁹ C (exact)"},
		{8.85424e-12, 3.1e-15, "pF/m", "8.8542(31) pF/m"}, {8.85424e-12, 3.15e-15, "pF/m", "8.8542(32) pF/m"},
		{12345, 1.5, "V", "12345.0(1.5) V"}, {12345, 15, "V", "12345(15) V"}, {12345, 1500, "V", "1.23(15)×10⁴ V"}, {0.5, 0.12, "V", "0.50(12) V"},
		{-0.5, 1.2, "V", "-0.5(1.2) V"}, {293.15, 0.05, "degC", "20.000(50) °C"}, {math.Pi / 2, math.Pi / 1800, "deg", "90.00(10)°"},
		{0.45, 0.01, "%", "45.0(1.0) %"}, {1.00058, 0.00001, "1", "1.000580(10)"}, {5, math.NaN(), "V", "5 V (u unknown)"},
		{5, math.Inf(1), "V", "5 V (u infinite)"}, {1, 1e-30, "V", "1 V (u = 1.0×10⁻³⁰ V)"}, {math.NaN(), 1, "V", "NaN V (u = 1 V)"},
	} {
		if got := Short(c.v, c.u, MustUnit(c.unit)); got != c.want {
			t.Errorf("Short(%v, %v, %s) = %q, want %q", c.v, c.u, c.unit, got, c.want)
		}
	}
}

func TestExpanded(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		v, u, k, p float64
		unit, want string
	}{
		{8.85424e-12, 6.2e-15, 2, 0.9545, "pF/m", "8.8542 pF/m ± 0.0062 pF/m (k = 2.00, p = 95.45 %)"},
		{100.02147e-3, 0.79e-6, 2.26, 0.95, "g", "100.02147 g ± 0.00079 g (k = 2.26, p = 95 %)"}, // GUM 7.2.4 (from memory)
		{1, 0.1, nan, 0.95, "V", "1.00 V ± 0.10 V (p = 95 %)"}, {1, 0.1, 2, 0, "V", "1.00 V ± 0.10 V (k = 2.00)"}, {1, 0.1, 0, nan, "V", "1.00 V ± 0.10 V"},
		{12345, 1500, 2, 0.9973, "V", "1.23×10⁴ V ± 0.15×10⁴ V (k = 2.00, p = 99.73 %)"}, {1, 0, 2, 0.95, "V", "1 V (exact)"},
		{1, nan, 2, 0.95, "V", "1 V (U unknown)"}, {1, 1e-30, 2, 0.95, "V", "1 V ± 1.0×10⁻³⁰ V (k = 2.00, p = 95 %)"},
		{293.15, 0.2, 2, 0.95, "degC", "20.00 °C ± 0.20 °C (k = 2.00, p = 95 %)"},
	} {
		if got := Expanded(c.v, c.u, MustUnit(c.unit), c.k, c.p); got != c.want {
			t.Errorf("Expanded(%v, %v, %s, %v, %v) = %q, want %q", c.v, c.u, c.unit, c.k, c.p, got, c.want)
		}
	}
}

// TestRoundedStaysNear: whatever the sizes, the printed numbers read back to
// within half a unit of the last place, and u has two digits.
func TestRoundedStaysNear(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		mantissa := rapid.Float64Range(1, 10)
		v := mantissa.Draw(t, "v") * math.Pow(10, float64(rapid.IntRange(-280, 280).Draw(t, "ev")))
		u := mantissa.Draw(t, "u") * v * math.Pow(10, float64(rapid.IntRange(-20, 20).Draw(t, "eu")))
		if rapid.Bool().Draw(t, "negative") {
			v = -v
		}
		sv, su := Round(v, u)
		gv, err1 := strconv.ParseFloat(sv, 64)
		gu, err2 := strconv.ParseFloat(su, 64)
		if err1 != nil || err2 != nil {
			t.Fatalf("Round(%v, %v) = %q, %q", v, u, sv, su)
		}
		last := math.Pow(10, math.Floor(math.Log10(u))-1) // of u before rounding
		if math.Abs(gu-u) > 0.5000001*last || math.Abs(gv-v) > 5.1*last {
			t.Fatalf("Round(%v, %v) = %q, %q", v, u, sv, su)
		}
		digits := strings.TrimLeft(strings.Replace(strings.SplitN(su, "e", 2)[0], ".", "", 1), "0")
		if len(digits) != 2 {
			t.Fatalf("Round(%v, %v) gives u = %q", v, u, su)
		}
	})
}

func TestExactComesBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := math.Float64frombits(rapid.Uint64().Draw(t, "bits"))
		got, err := strconv.ParseFloat(Exact(x), 64)
		if err != nil || math.Float64bits(got) != math.Float64bits(x) && !math.IsNaN(x) {
			t.Fatalf("%v printed as %s comes back as %v (%v)", x, Exact(x), got, err)
		}
	})
}

func TestPercent(t *testing.T) {
	for p, want := range map[float64]string{0.9545: "95.45 %", 0.95: "95 %", 0.9973: "99.73 %", 0.6827: "68.27 %", 1: "100 %"} {
		if got := Percent(p); got != want {
			t.Errorf("Percent(%v) = %q, want %q", p, got, want)
		}
	}
}
