package field_test

import (
	"fmt"
	"math"
	"testing"

	"example.org/guardring/pkg/field"
)

// Moist air in the laboratory at 20 °C, 1013.25 hPa, 50 % relative humidity.
func ExampleAirPermittivity() {
	e, err := field.AirPermittivity(293.15, 101325, 0.5)
	if err != nil {
		panic(err)
	}
	fmt.Printf("%.7f\n", e)
	// Output: 1.0006382
}

// TestAirPermittivity: ITU-R P.453 and Smith & Weintraub (1953), computed
// independently; dry air against NBS Circular 537 / CRC Handbook, value from
// memory.
func TestAirPermittivity(t *testing.T) {
	for _, r := range loadRefs(t, "air_permittivity") {
		T, p, rh := num(t, r.Inputs, "t_C")+273.15, num(t, r.Inputs, "p_hPa")*100, num(t, r.Inputs, "RH_pct")/100
		eps := must(t)(field.AirPermittivity(T, p, rh))
		if r.ID == "air-dry-handbook" {
			near(t, r.ID, eps, num(t, r.Expected, "eps_r"), 0, num(t, r.Tolerance, "abs"))
			continue
		}
		near(t, r.ID+" e", must(t)(field.WaterVapourPressure(T, p, rh))/100, num(t, r.Expected, "e_hPa"), num(t, r.Tolerance, "e_rel"), 0)
		near(t, r.ID+" N", must(t)(field.AirRefractivity(T, p, rh)), num(t, r.Expected, "N_itu"), num(t, r.Tolerance, "N_rel"), 0)
		near(t, r.ID+" N two-term", must(t)(field.AirRefractivityTwoTerm(T, p, rh)), num(t, r.Expected, "N_sw"), num(t, r.Tolerance, "N_rel"), 0)
		near(t, r.ID+" eps", eps, num(t, r.Expected, "eps_r_itu"), 0, num(t, r.Tolerance, "eps_abs"))
		near(t, r.ID+" between formulas", eps, num(t, r.Expected, "eps_r_sw"), 0, num(t, r.Tolerance, "between_formulas_eps_abs"))
	}
}

// TestAirNearVacuum: dry air is within 0.1 % of vacuum (common practice, no source).
func TestAirNearVacuum(t *testing.T) {
	for _, T := range []float64{253.15, 273.15, 293.15, 313.15} {
		for _, p := range []float64{8e4, 1e5, 1.05e5} {
			if e := must(t)(field.AirPermittivity(T, p, 0)); e <= 1 || e > 1.001 {
				t.Errorf("dry air at %g K, %g Pa: %g", T, p, e)
			}
		}
	}
}

// TestAirDensity: CIPM-2007 (Picard et al. 2008), computed independently; the
// short form of OIML R 111-1 E.3.1 (from memory) as a cross-check.
func TestAirDensity(t *testing.T) {
	for _, r := range loadRefs(t, "air_density") {
		tc, p, rh := num(t, r.Inputs, "t_C"), num(t, r.Inputs, "p_Pa"), num(t, r.Inputs, "RH")
		rho := must(t)(field.AirDensity(tc+273.15, p, rh, num(t, r.Inputs, "xCO2")))
		near(t, r.ID, rho, num(t, r.Expected, "rho"), num(t, r.Tolerance, "rho_rel"), 0)
		near(t, r.ID+" psv", must(t)(field.SaturationPressureCIPM(tc+273.15)), num(t, r.Expected, "psv_Pa"), 1e-9, 0)
		short := (0.34848*p/100 - 0.009*rh*100*math.Exp(0.061*tc)) / (273.15 + tc)
		near(t, r.ID+" short form", rho, short, num(t, r.Tolerance, "oiml_simple_rel"), 0)
	}
}

// TestGravity: Somigliana normal gravity and height term, computed independently.
func TestGravity(t *testing.T) {
	for _, r := range loadRefs(t, "gravity") {
		if r.ID == "gravity-height" {
			want := nums(t, r.Expected, "g")
			for i, c := range r.Inputs["cases"].([]any) {
				lat, h := c.([]any)[0].(float64), c.([]any)[1].(float64)
				near(t, name("WGS84 at %g°, %g m", lat, h), must(t)(field.NormalGravity(field.WGS84, lat*math.Pi/180, h)), want[i], 0, num(t, r.Tolerance, "abs"))
				// the ellipsoids differ by 1.4 µm/s²
				near(t, name("GRS80 at %g°, %g m", lat, h), must(t)(field.Gravity(lat*math.Pi/180, h)), want[i], 0, 1.6e-6)
			}
			continue
		}
		lat := num(t, r.Inputs, "lat_deg") * math.Pi / 180
		near(t, r.ID+" GRS80", must(t)(field.Gravity(lat, num(t, r.Inputs, "h"))), num(t, r.Expected, "GRS80"), 0, num(t, r.Tolerance, "abs"))
		near(t, r.ID+" WGS84", must(t)(field.NormalGravity(field.WGS84, lat, num(t, r.Inputs, "h"))), num(t, r.Expected, "WGS84"), 0, num(t, r.Tolerance, "abs"))
	}
}

// TestBalance: conventional mass, 0.99985 m g at 1.2 kg/m³ (OIML D 28, from memory).
func TestBalance(t *testing.T) {
	near(t, "balance force", must(t)(field.BalanceForce(1, 1, field.AdjustmentAirDensity)), 0.99985, 1e-15, 0)
}

// TestBreakdown: common practice, formula from memory.
func TestBreakdown(t *testing.T) {
	r := findRef(t, "breakdown", "air-breakdown")
	d, want := nums(t, r.Inputs, "d_cm"), nums(t, r.Expected, "E_kV_per_cm")
	for i := range d {
		near(t, name("%g cm", d[i]), must(t)(field.BreakdownField(d[i]/100, num(t, r.Inputs, "delta")))/1e5, want[i], num(t, r.Tolerance, "formula_rel"), 0)
	}
	near(t, "about 3 MV/m at 1 cm", must(t)(field.BreakdownField(0.01, 1)), 3e6, num(t, r.Tolerance, "physical_rel"), 0)
	near(t, "margin", must(t)(field.BreakdownMargin(-1e6, 0.01, 1)), 3.03, 1e-12, 0)
	near(t, "relative density", must(t)(field.RelativeAirDensity(293.15, 101325)), 1, 1e-15, 0)
}
