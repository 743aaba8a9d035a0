package si

import "math"

// Constants of nature, CODATA 2022 recommended values (NIST listing), with
// their standard uncertainties where they are not exact. SI units.
const (
	Eps0  = 8.8541878188e-12 // electric constant, F/m
	UEps0 = 0.0000000014e-12 // its standard uncertainty, F/m

	Mu0  = 1.25663706127e-6 // magnetic constant, N/A²
	UMu0 = 0.00000000020e-6 // its standard uncertainty, N/A²

	FineStructure  = 7.2973525643e-3 // fine-structure constant, 1
	UFineStructure = 0.0000000011e-3 // its standard uncertainty, 1

	SpeedOfLight     = 299792458.0      // m/s, exact
	ElementaryCharge = 1.602176634e-19  // C, exact
	Planck           = 6.62607015e-34   // J s, exact
	Boltzmann        = 1.380649e-23     // J/K, exact
	Avogadro         = 6.02214076e23    // 1/mol, exact
	MolarGas         = 8.31446261815324 // J/(mol K), exact: Boltzmann × Avogadro
)

// Conventional values, exact by agreement (CODATA 2022 listing; the ice point
// of the Celsius scale from the SI Brochure, 9th edition, section 2.3.1).
const (
	StandardGravity    = 9.80665  // m/s²
	StandardAtmosphere = 101325.0 // Pa
	ZeroCelsius        = 273.15   // K, thermodynamic temperature of 0 °C
)

// KE returns the Coulomb constant k = 1/(4π ε₀) and its standard uncertainty,
// in N m² C⁻². Only ε₀ contributes, so that their relative uncertainties agree.
func KE() (value, u float64) {
	value = 1 / (4 * math.Pi * Eps0)
	return value, value * (UEps0 / Eps0)
}

// Constant is a constant of nature or a conventional value.
type Constant struct {
	Name   string  // as in formulas: "eps0"
	Title  string  // as people call it
	Value  float64 // SI
	U      float64 // standard uncertainty, SI; 0 when exact
	Unit   string  // SI unit
	Source string
}

const codata = "CODATA 2022"

// Constants returns the constants that formulas and reports may name, in a
// fixed order.
func Constants() []Constant {
	k, uk := KE()
	return []Constant{
		{"pi", "ratio of a circle's circumference to its diameter", math.Pi, 0, "1", "mathematics"},
		{"eps0", "electric constant", Eps0, UEps0, "F/m", codata},
		{"qe", "elementary charge", ElementaryCharge, 0, "C", codata},
		{"ke", "Coulomb constant", k, uk, "N m²/C²", codata + ", 1/(4π ε₀)"},
		{"g0", "standard acceleration of gravity", StandardGravity, 0, "m/s²", codata},
	}
}
