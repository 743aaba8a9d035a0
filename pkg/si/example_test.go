package si_test

import (
	"errors"
	"fmt"
	"math"

	"example.org/guardring/pkg/si"
)

func ExampleParseQuantity() {
	for _, s := range []string{"50.012 mm", "20 degC", "0.02 %", "8.854 pF/m", "1.00058"} {
		v, u, err := si.ParseQuantity(s)
		fmt.Println(v, u.Dim, err)
	}
	// Output:
	// 0.050012 m <nil>
	// 293.15 K <nil>
	// 0.0002 1 <nil>
	// 8.854e-12 kg⁻¹ m⁻³ s⁴ A² <nil>
	// 1.00058 1 <nil>
}

// An uncertainty in degrees Celsius is an interval of temperature.
func ExampleParseInterval() {
	v, _, err := si.ParseInterval("0.5 degC")
	fmt.Println(v, err)
	// Output: 0.5 <nil>
}

func ExampleParseUnit_hints() {
	for _, s := range []string{"KV", "gf", "W/m K", "m**2"} {
		_, err := si.ParseUnit(s)
		fmt.Println(err)
	}
	// Output:
	// unit "KV": "KV" is not known; did you mean "kV"?
	// unit "gf": "gf" is not accepted; a gram-force depends on the gravity it was weighed in; give the mass in g (or mg) and the local gravity, or the force in mN (1 gf = 9.80665 mN only where gravity has its standard value)
	// unit "W/m K": it is not clear whether this still divides (at character 5); write a/(b c), or exponents: a b^-1 c
	// unit "m**2": ** is no exponent (at character 2); write m^2
}

func ExampleUnit() {
	u := si.MustUnit("uF/m2")
	fmt.Println(u.String(), "|", u.Unicode(), "|", u.ASCII(), "|", u.Dim)
	ucum, err := u.UCUM()
	fmt.Println(ucum, err)
	dsi, err := u.DSI()
	fmt.Println(dsi, err)
	// Output:
	// µF/m² | µF m⁻² | uF/m^2 | kg⁻¹ m⁻⁴ s⁴ A²
	// uF.m-2 <nil>
	// \micro\farad\metre\tothe{-2} <nil>
}

func ExampleUnit_CheckDim() {
	err := si.MustUnit("mm").CheckDim(si.Voltage)
	fmt.Println(err)
	var wrong *si.ErrorDim
	fmt.Println(errors.As(err, &wrong), wrong.Found)
	// Output:
	// unit "mm" (m) where a unit like V (kg m² s⁻³ A⁻¹) is due
	// true m
}

// GUM 7.2.2: a mass of 100.021 47 g with a standard uncertainty of 0.35 mg.
func ExampleShort() {
	fmt.Println(si.Short(0.10002147, 0.35e-6, si.MustUnit("g")))
	fmt.Println(si.Short(8.85424e-12, 3.1e-15, si.MustUnit("pF/m")))
	fmt.Println(si.Short(si.Eps0, si.UEps0, si.MustUnit("F/m")))
	fmt.Println(si.Short(si.SpeedOfLight, 0, si.MustUnit("m/s")))
	fmt.Println(si.Short(2345.6, math.NaN(), si.MustUnit("V")))
	// Output:
	// 100.02147(35) g
	// 8.8542(31) pF/m
	// 8.8541878188(14)×10⁻¹² F/m
	// 299792458 m/s (exact)
	// 2345.6 V (u unknown)
}

func ExampleExpanded() {
	fmt.Println(si.Expanded(8.85424e-12, 6.2e-15, si.MustUnit("pF/m"), 2, 0.9545))
	// Output: 8.8542 pF/m ± 0.0062 pF/m (k = 2.00, p = 95.45 %)
}

func ExampleRound() {
	v, u := si.Round(10.05762, 0.027) // GUM 7.2.6, an example in ohms
	fmt.Println(v, u)
	v, u = si.Round(12345, 996)
	fmt.Println(v, u)
	// Output:
	// 10.058 0.027
	// 1.23e4 0.10e4
}

func ExamplePrefixed() {
	v, u := si.Prefixed(8.8541878188e-12, si.MustUnit("F/m"))
	fmt.Println(v, u)
	v, u = si.Prefixed(0.0078539, si.MustUnit("m²"))
	fmt.Println(v, u)
	// Output:
	// 8.8541878188 pF/m
	// 7853.9 mm²
}

func ExampleUnit_Format() {
	fmt.Println(si.MustUnit("mm").Format(0.0033))
	fmt.Println(si.MustUnit("V/m").Format(1.0 / 3))
	// Output:
	// 3.3 mm
	// 0.3333333333333333 V/m
}

func ExampleSuggest() {
	fmt.Println(si.Suggest("colunm", []string{"column", "unit", "noise"}))
	fmt.Printf("%q\n", si.Suggest("zebra", []string{"column", "unit", "noise"}))
	// Output:
	// column
	// ""
}
