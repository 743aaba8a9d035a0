package si

import (
	"errors"
	"math"
	"math/big"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// TestDerivedUnits checks the units with special names against their
// definitions by others: SI Brochure (9th edition) table 4 (published), and the
// usual definitions of the rest (common practice, no source).
func TestDerivedUnits(t *testing.T) {
	for _, c := range [][2]string{
		{"Hz", "s⁻¹"}, {"N", "kg m s⁻²"}, {"Pa", "kg m⁻¹ s⁻²"}, {"J", "kg m² s⁻²"}, {"W", "kg m² s⁻³"},
		{"C", "A s"}, {"V", "kg m² s⁻³ A⁻¹"}, {"F", "kg⁻¹ m⁻² s⁴ A²"}, {"Ω", "kg m² s⁻³ A⁻²"},
		{"S", "kg⁻¹ m⁻² s³ A²"}, {"Wb", "kg m² s⁻² A⁻¹"}, {"T", "kg s⁻² A⁻¹"}, {"H", "kg m² s⁻² A⁻²"},
		{"Gy", "m² s⁻²"}, {"Sv", "m² s⁻²"}, {"kat", "mol s⁻¹"}, {"lx", "cd m⁻²"}, {"Bq", "s⁻¹"},
		{"F", "C/V"}, {"V", "W/A"}, {"Ω", "V/A"}, {"Pa", "N/m²"}, {"J", "N m"}, {"V/m", "N/C"}, {"F/m", "C²/(N m²)"},
		{"N", "V C/m"}, {"L", "dm³"}, {"t", "Mg"}, {"hPa", "mbar"},
		{"dyn", "g cm/s²"}, {"erg", "dyn cm"}, {"Gal", "cm/s²"}, {"%", "cm/m"}, {"ppm", "mm/km"},
	} {
		a, b := MustUnit(c[0]), MustUnit(c[1])
		if a.Dim != b.Dim || a.Factor != b.Factor && math.Abs(a.Factor/b.Factor-1) > 1e-15 {
			t.Errorf("%s is %g %v, %s is %g %v", c[0], a.Factor, a.Dim, c[1], b.Factor, b.Dim)
		}
	}
}

// TestFactors checks sizes. Sources: SI Brochure (9th edition) table 8 for min,
// h, d, deg, arcmin, arcsec, L, t, eV (published); the international inch of
// 25.4 mm, the standard atmosphere of 101325 Pa, the torr of 1/760 of it and
// the statcoulomb of 0.1/c (numerical value of c in m/s) coulombs (from memory).
func TestFactors(t *testing.T) {
	for s, want := range map[string]float64{
		"1": 1, "min": 60, "h": 3600, "d": 86400, "deg": math.Pi / 180, "arcmin": math.Pi / 10800, "arcsec": math.Pi / 648000,
		"L": 1e-3, "t": 1e3, "bar": 1e5, "mbar": 100, "hPa": 100, "eV": 1.602176634e-19, "%": 0.01, "‰": 1e-3, "ppm": 1e-6,
		"ppb": 1e-9, "in": 0.0254, "ft": 0.3048, "atm": 101325, "Torr": 101325.0 / 760, "mmHg": 133.322387415, "dyn": 1e-5,
		"mg": 1e-6, "g": 1e-3, "kg": 1, "km/h": 1 / 3.6, "pF/mm": 1e-9, "mm²": 1e-6, "µm^-1": 1e6, "kV/cm": 1e5, "statC": 0.1 / SpeedOfLight,
		"MΩ": 1e6, "TOhm": 1e12, "mPa": 1e-3, "cm3": 1e-6, "nV/Hz^(1/2)": 1e-9, "fC": 1e-15, "QV": 1e30, "qV": 1e-30, "kHz^(1/2)": math.Sqrt(1000),
		"deg^2": math.Pow(math.Pi/180, 2), "m^(1/3)": 1, "min^(1/2)": math.Sqrt(60),
	} {
		u, err := ParseUnit(s)
		if err != nil {
			t.Error(err)
		} else if math.Abs(u.Factor/want-1) > 3e-16 {
			t.Errorf("%s: factor %v, want %v", s, u.Factor, want)
		}
	}
}

// TestExactSymbolWins covers words that could be a prefix with a unit.
func TestExactSymbolWins(t *testing.T) {
	for s, want := range map[string]string{
		"min": "minute", "cd": "candela", "Pa": "pascal", "ft": "foot", "dyn": "dyne", "Gal": "gal", "h": "hour", "d": "day",
		"mol": "mole", "kat": "katal", "T": "tesla", "m": "metre", "atm": "standard atmosphere", "kg": "kilogram", "Gy": "gray", "in": "inch",
	} {
		x, err := parse(s)
		if err != nil {
			t.Error(err)
		} else if f := x.factors[0]; f.pre >= 0 || symbols[f.sym].name != want {
			t.Errorf("%s is read as %s with prefix %d, want the %s", s, symbols[f.sym].name, f.pre, want)
		}
	}
}

// TestSpellings groups texts that are one unit.
func TestSpellings(t *testing.T) {
	for _, group := range [][]string{
		{"um", "µm", "μm"}, {"m2", "m^2", "m²", "m^+2", "m*m", "m·m", "m m", "m⋅m", " m  m "},
		{"V/m", "V m-1", "V m^-1", "V·m⁻¹", "V*m^(-1)", "V m^−1", "V / m"}, {"Ω", "ohm", "Ohm", "\u2126"},
		{"degC", "°C", "\u2103"}, {"°", "deg", "degree"}, {"L", "l"}, {"s⁻¹", "1/s", "s-1", "s^-1", "Hz"},
		{"J/(kg K)", "J kg^-1 K^-1", "J/( kg*K )", "J/(K kg)"}, {"ppm/degC", "ppm/K"}, {"%", "percent"},
		{"N m²/C²", "N·m²·C⁻²"}, {"m\u00a0s", "m\u2009s", "m s"},
	} {
		first := MustUnit(group[0])
		for _, s := range group[1:] {
			u, err := ParseUnit(s)
			if err != nil {
				t.Error(err)
			} else if u.Dim != first.Dim || u.Factor != first.Factor || u.Offset != first.Offset {
				t.Errorf("%q is %g %v + %g, %q %g %v + %g", s, u.Factor, u.Dim, u.Offset, group[0], first.Factor, first.Dim, first.Offset)
			}
		}
	}
}

func TestBadUnits(t *testing.T) {
	for s, want := range map[string]string{
		"": "empty", " ": "empty", "furlong": "not known", "KV": `did you mean "kV"`, "mv": `did you mean "mV"`, "Volt": "not known",
		"pf": `did you mean "pF"`, "gf": "gram-force", "kgf": "gram-force", "mgf": "gram-force", "m//s": "missing", "m/s/s": "second solidus",
		"/s": "before the solidus", "m/": "missing behind", "m**2": "write m^2", "m^": "exponent", "m^x": "exponent", "m^0": "zero", "m^1/2": "m^(1/2)",
		"m^(1/0)": "zero", "m^(1/7)": "1/12", "m^99": "beyond", "m^2.5": "whole", "2 m": "can't start", "10 m": "number", "1e3 m": "number", "m.s": "not understood here",
		"m×s": "not understood here", "√Hz": "^(1/2)", "V/√Hz": "^(1/2)", "(m s)": "parentheses", "J/(kg K": "not closed", "J/(kg K) s": "more follows", "W/m K": "not clear", "u": "micro is a prefix",
		"µ": "micro is a prefix", "degF": "degC or K", "mdegC": "mK", "m*": "missing", "*m": "missing", "m**": "exponent", "kmin": "not known", "1 m": "a 1 stands",
		"m 1": "a 1 stands", "sec": "write s", "m\xff": "UTF-8", "m'": "not understood here", strings.Repeat("m ", 17): "factors", strings.Repeat("m", 200): "longer",
		"Qm^24": "1e±300", "qm^24": "1e±300", "m₂": "not understood here", "dB": "level", "mm^2^2": "not understood here",
	} {
		u, err := ParseUnit(s)
		var bad *UnitError
		switch {
		case err == nil:
			t.Errorf("%q is read as %v", s, u)
		case !errors.As(err, &bad):
			t.Errorf("%q: error is a %T", s, err)
		case !strings.Contains(err.Error(), want):
			t.Errorf("%q: %v; want %q in it", s, err, want)
		case u != Unit{}:
			t.Errorf("%q: a unit comes with the error", s)
		}
	}
}

// TestEverySymbol prints every unit in every form with every prefix it takes,
// and reads it back.
func TestEverySymbol(t *testing.T) {
	for i, s := range symbols {
		pres := []int{-1}
		if s.pre {
			for k := range prefixes {
				pres = append(pres, k)
			}
		}
		for _, k := range pres {
			text := (expr{factors: []factor{{sym: i, pre: k, num: 1, den: 1}}, solidus: -1}).text(true, true)
			u, err := ParseUnit(text)
			if err != nil {
				t.Error(err)
				continue
			}
			want := s.real
			if want == 0 {
				e := s.exp
				if k >= 0 {
					e += prefixes[k].exp
				}
				want, _ = ratio(s.num, s.den, e).Float64()
			}
			// Some prefixed names are other units, which win: cd, min, Pa …
			if w, shadowed := index[text]; shadowed && w != i {
				continue
			}
			if u.Factor != want || u.Dim != s.dim {
				t.Errorf("%s: %g %v, want %g %v", text, u.Factor, u.Dim, want, s.dim)
			}
			for _, form := range []string{u.String(), u.ASCII(), u.Unicode()} {
				if v, err := ParseUnit(form); err != nil {
					t.Error(err)
				} else if v.Factor != u.Factor || v.Dim != u.Dim || v.Offset != u.Offset {
					t.Errorf("%s printed as %s comes back as %g %v", text, form, v.Factor, v.Dim)
				}
			}
			for _, c := range u.ASCII() {
				if c > 127 {
					t.Errorf("ASCII form %q of %s", u.ASCII(), text)
				}
			}
		}
	}
}

// TestConversionIsRoundedOnce compares with exact rationals.
func TestConversionIsRoundedOnce(t *testing.T) {
	units := []string{"mm", "µm", "nm", "kV", "hPa", "%", "ppm", "pF/m", "aF", "km/h", "min", "in", "mm³", "nm³", "fm²", "Torr", "eV", "QV", "qC", "kV/mm", "statC"}
	rapid.Check(t, func(t *rapid.T) {
		u := MustUnit(rapid.SampledFrom(units).Draw(t, "unit"))
		x := rapid.Float64Range(-1e9, 1e9).Draw(t, "x")
		r := new(big.Rat).Mul(new(big.Rat).SetFloat64(x), ratio(u.num, u.den, u.exp))
		if want, _ := r.Float64(); u.ToSI(x) != want {
			t.Fatalf("%v %s is %v, want %v", x, u, u.ToSI(x), want)
		}
		r.Quo(new(big.Rat).SetFloat64(x), ratio(u.num, u.den, u.exp))
		if want, _ := r.Float64(); u.FromSI(x) != want {
			t.Fatalf("%v in %s is %v, want %v", x, u, u.FromSI(x), want)
		}
	})
}

func TestCelsius(t *testing.T) {
	u := MustUnit("degC")
	for _, c := range []struct{ c, k float64 }{{0, 273.15}, {20, 293.15}, {-273.15, 0}, {100, 373.15}, {23.7, 296.85}} {
		if got := u.ToSI(c.c); math.Abs(got-c.k) > 6e-14 {
			t.Errorf("%v °C is %v K, want %v", c.c, got, c.k)
		}
		if got := u.FromSI(c.k); math.Abs(got-c.c) > 1e-13 {
			t.Errorf("%v K is %v °C, want %v", c.k, got, c.c)
		}
	}
	if got := u.ToSI(-273.15); got != 0 {
		t.Errorf("−273.15 °C is %v K", got)
	}
	if u.DeltaToSI(0.5) != 0.5 || u.DeltaFromSI(0.5) != 0.5 {
		t.Error("an interval in degC is not the same in K")
	}
}

func TestZeroUnitIsOne(t *testing.T) {
	var u Unit
	if u.ToSI(3) != 3 || u.FromSI(3) != 3 || u.String() != "1" || u.Format(0.25) != "0.25" {
		t.Errorf("the zero unit: %v %v %q %q", u.ToSI(3), u.FromSI(3), u.String(), u.Format(0.25))
	}
	ucum, err := u.UCUM()
	dsi, err2 := u.DSI()
	if ucum != "1" || dsi != `\one` || err != nil || err2 != nil {
		t.Errorf("codes of the zero unit: %q %v, %q %v", ucum, err, dsi, err2)
	}
}

// TestCodes: UCUM from the case-sensitive code table of its version 2.1, D-SI
// in the style of digital calibration certificates (both from memory).
func TestCodes(t *testing.T) {
	for _, c := range [][3]string{
		{"µT", "uT", `\micro\tesla`}, {"V/m", "V.m-1", `\volt\metre\tothe{-1}`}, {"1", "1", `\one`}, {"degC", "Cel", `\degreecelsius`},
		{"ppm/degC", "[ppm].K-1", `\ppm\kelvin\tothe{-1}`}, {"%", "%", `\percent`}, {"kg", "kg", `\kilogram`}, {"mg", "mg", `\milli\gram`},
		{"MΩ", "MOhm", `\mega\ohm`}, {"pF/m", "pF.m-1", `\pico\farad\metre\tothe{-1}`}, {"hPa", "hPa", `\hecto\pascal`}, {"°", "deg", `\degree`},
		{"1/s", "s-1", `\second\tothe{-1}`}, {"mm²", "mm2", `\milli\metre\tothe{2}`}, {"min", "min", `\minute`}, {"daN", "daN", `\deca\newton`},
	} {
		u := MustUnit(c[0])
		if got, err := u.UCUM(); got != c[1] || err != nil {
			t.Errorf("%s: UCUM %q (%v), want %q", c[0], got, err, c[1])
		}
		if got, err := u.DSI(); got != c[2] || err != nil {
			t.Errorf("%s: D-SI %q (%v), want %q", c[0], got, err, c[2])
		}
	}
	for _, s := range []string{"nV/Hz^(1/2)", "Torr", "statC", "QV"} {
		if got, err := MustUnit(s).UCUM(); err == nil || got != "" {
			t.Errorf("%s: UCUM %q, want an error", s, got)
		}
	}
	for _, s := range []string{"in", "mGal", "‰"} {
		if got, err := MustUnit(s).DSI(); err == nil || got != "" {
			t.Errorf("%s: D-SI %q, want an error", s, got)
		}
	}
	if got, err := MustUnit("nV/Hz^(1/2)").DSI(); got != `\nano\volt\hertz\tothe{-0.5}` || err != nil {
		t.Errorf("D-SI of a noise density: %q %v", got, err)
	}
}

func TestPrefixed(t *testing.T) {
	for _, c := range []struct {
		x    float64
		unit string
		want string
	}{
		{8.85e-12, "F/m", "8.85 pF/m"}, {0.05, "mm", "50 mm"}, {0.0005, "m", "500 µm"}, {123456, "V", "123.456 kV"}, {1000, "V", "1 kV"},
		{999.5, "V", "999.5 V"}, {1, "kV", "1 V"}, {2e-9, "kg", "2 µg"}, {5, "kg", "5 kg"}, {7.5e-3, "m²", "7500 mm²"}, {3, "m²", "3 m²"}, {3e-10, "m3", "3e8 µm³"},
		{0, "V", "0 V"}, {60, "min", "1 min"}, {0.01, "%", "1 %"}, {1e-30, "F", "1e-12 aF"}, {-2e-6, "C/m²", "-2 µC/m²"}, {3e6, "V/m", "3 MV/m"},
		{293.15, "degC", "20 °C"}, {5, "1", "5"},
	} {
		v, u := Prefixed(c.x, MustUnit(c.unit))
		if math.Abs(u.ToSI(v)-c.x) > 1e-15*math.Abs(c.x) {
			t.Errorf("Prefixed(%v, %s) = %v %s is another value", c.x, c.unit, v, u)
		}
		f, err := strconv.ParseFloat(strings.Fields(c.want)[0], 64)
		if err != nil {
			t.Fatal(err)
		}
		_, unit, _ := strings.Cut(c.want, " ")
		if unit == "" {
			unit = "1"
		}
		if math.Abs(v-f) > 1e-14*math.Abs(f) || u.String() != unit {
			t.Errorf("Prefixed(%v, %s) = %v %s, want %s", c.x, c.unit, v, u, c.want)
		}
	}
	if v, u := Prefixed(math.NaN(), MustUnit("V")); !math.IsNaN(v) || u != MustUnit("V") {
		t.Errorf("Prefixed(NaN, V) = %v %v", v, u)
	}
}

func TestDimension(t *testing.T) {
	if d := Voltage.Div(Length); d != Field {
		t.Errorf("V/m is %v", d)
	}
	if d := Force.Mul(Area).Div(Charge).Div(Charge); d != MustUnit("N m²/C²").Dim {
		t.Errorf("N m²/C² is %v", d)
	}
	half, exact := Force.Root(1, 2)
	if !exact || half.Mul(half) != Force || half.String() != "kg^(1/2) m^(1/2) s⁻¹" {
		t.Errorf("the root of N is %v, exact %v", half, exact)
	}
	if third, exact := Volume.Root(1, 3); !exact || third != Length {
		t.Errorf("the cube root of m³ is %v", third)
	}
	if _, exact := Length.Root(1, 7); exact {
		t.Error("a seventh is held exactly")
	}
	if d, exact := Length.Root(1, 0); exact || !d.IsOne() {
		t.Errorf("the power 1/0 is %v", d)
	}
	if d := Length.Pow(-2, 1); d.String() != "m⁻²" {
		t.Errorf("m⁻² is %v", d)
	}
	big := Length
	for range 20 {
		big = big.Mul(big)
	}
	if big.Mul(Length) != big {
		t.Error("absurd exponents wrap round")
	}
	for _, n := range named {
		u, err := ParseUnit(n.unit)
		if err != nil || u.Dim != n.dim || u.Factor != 1 {
			t.Errorf("%s does not name %v: %v", n.unit, n.dim, err)
		}
		if v := n.dim.Unit(); v.Dim != n.dim || v.ToSI(2) != 2 {
			t.Errorf("the unit of %v is %v", n.dim, v)
		}
	}
	odd := Length.Mul(Mass).Mul(Temperature)
	if u := odd.Unit(); u.String() != "kg m K" || u.Dim != odd {
		t.Errorf("the unit of %v is %v", odd, u)
	}
}

func TestCheckDim(t *testing.T) {
	if err := MustUnit("kV").CheckDim(Voltage); err != nil {
		t.Error(err)
	}
	for _, c := range []struct {
		unit string
		want Dimension
		text string
	}{{"mm", Voltage, "unit like V"}, {"1", Length, "pure number where a quantity in m"}, {"kV", Dimensionless, "where a pure number is due"}} {
		err := MustUnit(c.unit).CheckDim(c.want)
		if err == nil || !strings.Contains(err.Error(), c.text) {
			t.Errorf("%s for %v: %v", c.unit, c.want, err)
		}
	}
	err := &ErrorDim{Unit: "mm", Found: Length, Want: Voltage, Like: "kV"}
	if !strings.Contains(err.Error(), "a unit like kV") {
		t.Error(err)
	}
}

func TestSuggest(t *testing.T) {
	known := []string{"gap_offset", "gain", "offset", "noise", "relative_noise"}
	for word, want := range map[string]string{
		"gapoffset": "gap_offset", "gian": "gain", "ofset": "offset", "Noise": "noise", "NOISE": "noise", "relative-noise": "relative_noise",
		"": "", "xyzzy": "", "noises": "noise", strings.Repeat("a", 1000): "",
	} {
		if got := Suggest(word, known); got != want {
			t.Errorf("Suggest(%q) = %q, want %q", word, got, want)
		}
	}
	if got := Suggest("q", []string{"x"}); got != "" {
		t.Errorf("Suggest(q) = %q", got)
	}
	if got := Suggest("noise", []string{strings.Repeat("n", 500), "nose"}); got != "nose" {
		t.Errorf("Suggest(noise) = %q", got)
	}
}

// SI Brochure, 9th edition, sections 2.3.3 and 2.3.4 (value from memory): the
// unit of an angle may be shown as rad, that of a torque is the newton metre.
func TestCoherentKeepsTheQuantity(t *testing.T) {
	for _, c := range []struct{ unit, want string }{
		{"mrad", "rad"}, {"deg", "rad"}, {"arcsec", "rad"}, {"mN m/rad", "N m/rad"}, {"uN mm/deg", "N m/rad"},
		{"deg/min", "rad/s"}, {"mN m", "N m"}, {"N m", "N m"}, {"kJ", "J"}, {"mm", "m"}, {"kV/cm", "V/m"}, {"ppm/degC", "K^-1"},
		{"pF/m", "F/m"}, {"%", "1"}, {"degC", "K"}, {"L/rad", "m^3"}, {"g m/s^2", "N"}, {"kg m^2/(s^2 rad)", "kg m^2/(s^2 rad)"},
	} {
		got := MustUnit(c.unit).Coherent()
		if got.ASCII() != c.want || got.Factor != 1 {
			t.Errorf("%s: %s × %g, want %s", c.unit, got.ASCII(), got.Factor, c.want)
		}
		if back, err := ParseUnit(got.Symbol); err != nil || back != got {
			t.Errorf("%s: %q does not read back: %v", c.unit, got.Symbol, err)
		}
	}
	if v, u := Prefixed(6.014e-3, MustUnit("N m/rad")); v != 6.014 || u.String() != "mN m/rad" {
		t.Errorf("got %g %s", v, u)
	}
}

// GUM 7.2.6 asks for two digits of the uncertainty and the value to their place;
// that neither should need a power of ten is common practice, no source.
func TestSuitedKeepsPlainDecimals(t *testing.T) {
	for _, c := range []struct {
		x, du      float64
		unit, want string
	}{
		{-70, 100, "V/m", "-0.07 0.10 kV/m"}, {0, 300e-6, "m", "0.00 0.30 mm"}, {0.01e-3, 0.1e-3, "F/m", "0.01 0.10 mF/m"},
		{70, 99.4, "V/m", "70 99 V/m"}, {70, 99.6, "V/m", "0.07 0.10 kV/m"}, {0, 0.2, "V", "0.00 0.20 V"}, {8.854e-12, 3e-15, "F/m", "8.8540 0.0030 pF/m"},
		{5.3e-10, 4.8e-10, "m^2", "0.00053 0.00048 mm²"}, {350, 120, "degC", "0.8e2 1.2e2 °C"}, {3, math.NaN(), "mm", "3 unknown m"}, {0, 0, "mm", "0 0 mm"},
	} {
		u := MustUnit(c.unit).Suited(c.x, c.du)
		v, du := Round(u.FromSI(c.x), u.DeltaFromSI(c.du))
		if got := v + " " + du + " " + u.String(); got != c.want {
			t.Errorf("%g ± %g %s: %s, want %s", c.x, c.du, c.unit, got, c.want)
		}
	}
}
