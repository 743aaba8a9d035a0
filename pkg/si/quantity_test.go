package si

import (
	"errors"
	"math"
	"math/big"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

func TestQuantities(t *testing.T) {
	for s, want := range map[string]float64{
		"50.012 mm": 0.050012, "50.012mm": 0.050012, " 3 um ": 3e-6, "-0.3 V": -0.3, "−0.3 V": -0.3, "+1": 1, "1e3": 1000, "1E3 V": 1000,
		"1 eV": 1.602176634e-19, "1eV": 1.602176634e-19, ".5 m": 0.5, "5. m": 5, "0.02 %": 0.0002, "20%": 0.2, "20 degC": 293.15, "0 degC": 273.15,
		"-273.15 °C": 0, "90°": math.Pi / 2, "1.5×10⁻⁶ m": 1.5e-6, "1.5 × 10^-6 m": 1.5e-6, "1e-3 mm": 1e-6, "1013.25 hPa": 101325,
		"0 mm": 0, "60 Hz": 60, "1 km/h": 1.0 / 3.6, "5e-324": 5e-324, "1e-400 m": 0, "1e-400 mm": 0, "1e-99999 mm": 0, "0e999999 mm": 0,
		"8.8541878188 pF/m": 8.8541878188e-12, "9e300 mm": 9e297, "9e310 mm": 9e307, "5e-327 kV": 5e-324, "1e-400 min": 0, "0e999999 in": 0, "5 min": 300, "1 in": 0.0254,
	} {
		v, u, err := ParseQuantity(s)
		if err != nil {
			t.Error(err)
		} else if v != want {
			t.Errorf("%q is %v (%s), want %v", s, v, u, want)
		}
	}
	for s, want := range map[string]float64{"0.5 degC": 0.5, "3 um": 3e-6, "0 degC": 0, "0.02 %": 0.0002} {
		if v, _, err := ParseInterval(s); err != nil || v != want {
			t.Errorf("interval %q is %v, %v; want %v", s, v, err, want)
		}
	}
}

func TestBadQuantities(t *testing.T) {
	for s, want := range map[string]string{
		"": "empty", "mm": "no number", "NaN": "no number", "inf V": "no number", "1,5 mm": "decimal point", "1.2.3 V": "not understood", "1_000 V": "not understood",
		"0x10 V": "not known", "1e999": "too large", "1e300 km^3": "too large", "1 000 V": "two numbers", "5 KV": "did you mean", "--1": "no number",
		"1 ± 2 V": "can't start", "5 gf": "gram-force", "1e5e5": "not known", strings.Repeat("1", 600): "too long", "1 V/m/s": "second solidus",
	} {
		v, u, err := ParseQuantity(s)
		var bad *QuantityError
		switch {
		case err == nil:
			t.Errorf("%q is read as %v %v", s, v, u)
		case !errors.As(err, &bad):
			t.Errorf("%q: error is a %T", s, err)
		case !strings.Contains(err.Error(), want):
			t.Errorf("%q: %v; want %q in it", s, err, want)
		case v != 0 || u != Unit{}:
			t.Errorf("%q: values come with the error", s)
		}
	}
	var inner *UnitError
	if _, _, err := ParseQuantity("5 furlong"); !errors.As(err, &inner) {
		t.Errorf("no *UnitError within %v", err)
	}
}

// TestTextIsRoundedOnce: the value is the double nearest to the decimal text
// times the exact factor.
func TestTextIsRoundedOnce(t *testing.T) {
	units := []string{"mm", "um", "kV", "%", "pF/m", "min", "in", "km/h", "eV", "V", "nm³", "degC"}
	rapid.Check(t, func(t *rapid.T) {
		u := MustUnit(rapid.SampledFrom(units).Draw(t, "unit"))
		text := rapid.StringMatching(`-?[0-9]{1,12}(\.[0-9]{1,12})?(e[+-]?[0-9]{1,2})?`).Draw(t, "number")
		r, ok := new(big.Rat).SetString(text)
		if !ok {
			t.Fatal(text)
		}
		r.Mul(r, ratio(u.num, u.den, u.exp))
		if u.Offset != 0 {
			r.Add(r, big.NewRat(27315, 100))
		}
		want, _ := r.Float64()
		got, _, err := ParseQuantity(text + " " + u.String())
		if err != nil || got != want {
			t.Fatalf("%s %s is %v (%v), want %v", text, u, got, err, want)
		}
	})
}

// TestFormatComesBack: printed values in units that differ from SI by a power
// of ten are read back to the bit.
func TestFormatComesBack(t *testing.T) {
	units := []string{"m", "mm", "um", "kV", "%", "ppm", "pF/m", "hPa", "nm³", "1", "degC", "kg m s⁻²", "V/m", "mg"}
	rapid.Check(t, func(t *rapid.T) {
		u := MustUnit(rapid.SampledFrom(units).Draw(t, "unit"))
		x := math.Float64frombits(rapid.Uint64().Draw(t, "bits"))
		if math.IsNaN(x) || math.IsInf(x, 0) || u.Offset != 0 && (math.Abs(x) < 1e-6 || math.Abs(x) > 1e15) {
			return
		}
		s := u.Format(x)
		got, v, err := ParseQuantity(s)
		if err != nil {
			t.Fatal(err)
		}
		if math.Float64bits(got) != math.Float64bits(x) || v.Dim != u.Dim {
			t.Fatalf("%v printed as %s comes back as %v", x, s, got)
		}
	})
}
