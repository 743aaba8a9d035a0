package si

import (
	"math"
	"testing"
)

// FuzzUnit: what is read prints in three forms that read back as the same unit;
// what is refused gives no unit.
func FuzzUnit(f *testing.F) {
	for _, s := range []string{"m", "pF/m", "µm", "J/(kg K)", "N m²/C²", "nV/Hz^(1/2)", "degC", "1/s", "gf", "m**2", "V*m^-1", "°", "%RH", "Ω", "m^(-1/3)", "da", "m/(", "1/1"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		u, err := ParseUnit(s)
		if err != nil {
			if u != (Unit{}) {
				t.Fatalf("%q: a unit comes with %v", s, err)
			}
			return
		}
		for _, form := range []string{u.Symbol, u.String(), u.ASCII(), u.Unicode()} {
			v, err := ParseUnit(form)
			if err != nil {
				t.Fatalf("%q printed as %q: %v", s, form, err)
			}
			if v.Dim != u.Dim || v.Offset != u.Offset || math.Abs(v.Factor/u.Factor-1) > 1e-13 {
				t.Fatalf("%q printed as %q comes back as %g %v", s, form, v.Factor, v.Dim)
			}
		}
		if code, err := u.UCUM(); (err == nil) == (code == "") {
			t.Fatalf("%q: UCUM %q with %v", s, code, err)
		}
		if code, err := u.DSI(); (err == nil) == (code == "") {
			t.Fatalf("%q: D-SI %q with %v", s, code, err)
		}
		v, w := Prefixed(1.5, u)
		if back := w.ToSI(v); math.Abs(back-1.5) > 1e-12 {
			t.Fatalf("%q: 1.5 in SI becomes %v %s", s, v, w)
		}
	})
}

// FuzzQuantity: what is read is finite, prints, and reads back: to the bit when
// the unit is a power of ten of SI, otherwise within the rounding of two
// conversions.
func FuzzQuantity(f *testing.F) {
	for _, s := range []string{"50.012 mm", "20 degC", "0.02 %", "1.5×10⁻⁶ m", "-3e-7 C", "1,5 mm", "1e400", "90°", "1eV", "5e-324", "0x1p3", "−1 V", "1e-400 in", "7 km/h"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		v, u, err := ParseQuantity(s)
		if err != nil {
			if v != 0 || u != (Unit{}) {
				t.Fatalf("%q: values come with %v", s, err)
			}
			return
		}
		if math.IsNaN(v) || math.IsInf(v, 0) {
			t.Fatalf("%q is %v", s, v)
		}
		text := u.Format(v)
		w, _, err := ParseQuantity(text)
		if err != nil {
			if u.num != 1 && math.Abs(u.FromSI(v)) > 1e300 {
				return // the number alone is beyond doubles in the smaller unit
			}
			t.Fatalf("%q printed as %q: %v", s, text, err)
		}
		if decimal := u.num == 1 && u.den == 1 && u.Offset == 0; decimal && math.Float64bits(v) != math.Float64bits(w) {
			t.Fatalf("%q is %v, printed as %q it is %v", s, v, text, w)
		}
		if math.Abs(v-w) > 1e-15*(math.Abs(v)+math.Abs(u.Offset))+1e-300 {
			t.Fatalf("%q is %v, printed as %q it is %v", s, v, text, w)
		}
		if a, b, err := ParseInterval(s); err != nil || b != u {
			t.Fatalf("%q is a quantity but no interval: %v %v", s, a, err)
		}
	})
}
