package field

import (
	"math"

	"example.org/guardring/pkg/jet"
)

// Ellipsoid holds what normal gravity needs of a reference ellipsoid.
type Ellipsoid struct {
	Name       string
	EquatorG   float64 // m/s², normal gravity at the equator
	K          float64 // Somigliana's constant (b γ_p − a γ_e)/(a γ_e)
	E2         float64 // first eccentricity squared
	Radius     float64 // m, semi-major axis
	Flattening float64
	M          float64 // ω²a²b/GM
}

// The two ellipsoids in use; their difference is 1.4 µm/s². Constants: Moritz,
// Geodetic Reference System 1980, J. Geodesy 74 (2000) 128; WGS 84, NIMA
// TR8350.2 (in part from memory).
var (
	GRS80 = Ellipsoid{Name: "GRS80", EquatorG: 9.7803267715, K: 0.001931851353, E2: 0.00669438002290,
		Radius: 6378137, Flattening: 1 / 298.257222101, M: 0.00344978600308}
	WGS84 = Ellipsoid{Name: "WGS84", EquatorG: 9.7803253359, K: 0.00193185265241, E2: 0.00669437999013,
		Radius: 6378137, Flattening: 1 / 298.257223563, M: 0.00344978650684}
)

// Gravity returns normal gravity (m/s²) of GRS80 at latitude lat (rad) and
// height h (m) above the ellipsoid: NormalGravity with GRS80. A surveyed local
// value is better: local gravity departs from normal by up to 3 mm/s².
func Gravity(lat, h float64) (float64, error) { return NormalGravity(GRS80, lat, h) }

// GravityJet is Gravity with derivatives.
func GravityJet(lat, h jet.Jet) jet.Jet { return NormalGravityJet(GRS80, lat, h) }

// NormalGravity returns normal gravity (m/s²) at latitude lat (rad) and height
// h (m) above the ellipsoid:
//
//	γ₀ = γ_e (1 + k sin²φ)/√(1 − e² sin²φ)
//	γ  = γ₀ [1 − (2/a)(1 + f + m − 2f sin²φ) h + 3h²/a²]
//
// Somigliana's closed formula and the height expansion of Moritz (2000) and
// NIMA TR8350.2, equations (4-1) and (4-3). −1 to 10 km.
func NormalGravity(e Ellipsoid, lat, h float64) (float64, error) {
	if err := refuse("normal gravity", within("latitude", lat, "rad", -math.Pi/2, math.Pi/2), within("height", h, "m", -1000, 10000)); err != nil {
		return 0, err
	}
	return NormalGravityJet(e, jet.Const(lat), jet.Const(h)).V, nil
}

// NormalGravityJet is NormalGravity with derivatives.
func NormalGravityJet(e Ellipsoid, lat, h jet.Jet) jet.Jet {
	s2 := lat.Sin().Sqr()
	g0 := s2.Scale(e.K).Plus(1).Scale(e.EquatorG).Div(s2.Scale(-e.E2).Plus(1).Sqrt())
	x := h.Scale(1 / e.Radius)
	lin := s2.Scale(4 * e.Flattening).Plus(-2 * (1 + e.Flattening + e.M))
	return g0.Mul(lin.Mul(x).Add(x.Sqr().Scale(3)).Plus(1))
}

// ConventionalDensity is the density (kg/m³) of the weights to which
// conventional mass is referred (OIML D 28, from memory).
const ConventionalDensity = 8000.0

// AdjustmentAirDensity is the conventional air density (kg/m³) at which a
// balance is taken to have been adjusted when its certificate does not say
// (OIML D 28, from memory).
const AdjustmentAirDensity = 1.2

// BalanceForce returns the force (N) that a balance adjusted in conventional
// mass shows as m (kg), at local gravity g (m/s²):
// F = m g (1 − ρ_a/8000), rhoAdjust (kg/m³) being the density of air when the
// balance was adjusted, not when it is read: the electric force displaces no
// air. 0.99985 m g at 1.2 kg/m³. Derived from the definition of conventional
// mass.
func BalanceForce(m, g, rhoAdjust float64) (float64, error) {
	if err := refuse("balance force", finite("indication", m, "kg"), positive("gravity", g, "m/s²"), within("air density at adjustment", rhoAdjust, "kg/m³", 0, 2)); err != nil {
		return 0, err
	}
	return m * g * (1 - rhoAdjust/ConventionalDensity), nil
}

// BalanceForceJet is BalanceForce with derivatives.
func BalanceForceJet(m, g, rhoAdjust jet.Jet) jet.Jet {
	return m.Mul(g).Mul(rhoAdjust.Scale(-1 / ConventionalDensity).Plus(1))
}
