package field

import (
	"math"

	"example.org/guardring/pkg/jet"
)

// Every function of air takes temperature in kelvin, pressure in pascal and
// relative humidity as a fraction, 0 to 1.

const zeroCelsius = 273.15 // K

// poly returns Σ c[i] x^i.
func poly(x jet.Jet, c ...float64) jet.Jet {
	var f, f1, f2 float64
	for i := len(c) - 1; i >= 0; i-- {
		f2 = f2*x.V + 2*f1
		f1 = f1*x.V + f
		f = f*x.V + c[i]
	}
	return x.Chain(f, f1, f2)
}

func airChecks(formula string, T, p, rh, tLow, tHigh, pLow, pHigh float64) error {
	return refuse(formula, within("temperature", T, "K", tLow, tHigh), within("pressure", p, "Pa", pLow, pHigh),
		within("relative humidity (a fraction)", rh, "1", 0, 1))
}

// WaterVapourPressure returns the partial pressure (Pa) of water vapour over
// water at temperature T (K), total pressure p (Pa) and relative humidity rh
// (0 to 1), with the enhanced saturation pressure of Recommendation ITU-R
// P.453-14, equations (8) and (9) (from memory):
//
//	e_s = [1 + 1e-4(7.2 + P(0.00320 + 5.9e-7 t²))] · 6.1121 exp[(18.678 − t/234.5) t/(t + 257.14)]
//
// in hPa with t in °C and P in hPa. −40 to 50 °C, 300 to 1100 hPa.
func WaterVapourPressure(T, p, rh float64) (float64, error) {
	if err := airChecks("water vapour pressure", T, p, rh, 233.15, 323.15, 3e4, 1.1e5); err != nil {
		return 0, err
	}
	return WaterVapourPressureJet(jet.Const(T), jet.Const(p), jet.Const(rh)).V, nil
}

// WaterVapourPressureJet is WaterVapourPressure with derivatives.
func WaterVapourPressureJet(T, p, rh jet.Jet) jet.Jet {
	t := T.Plus(-zeroCelsius)
	P := p.Scale(1e-2)
	ef := P.Mul(poly(t, 0.00320, 0, 5.9e-7)).Plus(7.2).Scale(1e-4).Plus(1)
	es := poly(t, 0, 18.678, -1/234.5).Div(t.Plus(257.14)).Exp().Scale(6.1121)
	return rh.Mul(ef).Mul(es).Scale(100)
}

// AirRefractivity returns the radio refractivity N of moist air,
//
//	N = 77.6 P_d/T + 72 e/T + 3.75e5 e/T²   (hPa, K),
//
// Recommendation ITU-R P.453-14, equation (6) (from memory); arguments, range
// and vapour pressure e as WaterVapourPressure. It holds from dc to 100 GHz for
// the purposes of a gap between plates.
func AirRefractivity(T, p, rh float64) (float64, error) {
	if err := airChecks("refractivity of air", T, p, rh, 233.15, 323.15, 3e4, 1.1e5); err != nil {
		return 0, err
	}
	return AirRefractivityJet(jet.Const(T), jet.Const(p), jet.Const(rh)).V, nil
}

// AirRefractivityJet is AirRefractivity with derivatives.
func AirRefractivityJet(T, p, rh jet.Jet) jet.Jet {
	e := WaterVapourPressureJet(T, p, rh).Scale(1e-2)
	pd := p.Scale(1e-2).Sub(e)
	n := pd.Scale(77.6).Add(e.Scale(72)).Add(e.Div(T).Scale(3.75e5))
	return n.Div(T)
}

// AirRefractivityTwoTerm returns the older two-term form
// N = (77.6/T)(P + 4810 e/T) of Smith and Weintraub, Proc. IRE 41 (1953) 1035,
// equation (3). It differs from AirRefractivity by less than 0.02 in N at
// laboratory conditions: a check, not a second value.
func AirRefractivityTwoTerm(T, p, rh float64) (float64, error) {
	e, err := WaterVapourPressure(T, p, rh)
	if err != nil {
		return 0, err
	}
	return 77.6 / T * (p + 4810*e/T) / 100, nil
}

// AirPermittivity returns the relative permittivity of moist air at temperature
// T (K), pressure p (Pa) and relative humidity rh (0 to 1):
// ε_r = (1 + 1e-6 N)² with N of AirRefractivity (air is not magnetic to this
// order). 1.0005365 for dry air at 20 °C and 1013.25 hPa; the formula's own
// standard uncertainty is AirPermittivityUncertainty.
func AirPermittivity(T, p, rh float64) (float64, error) {
	if err := airChecks("permittivity of air", T, p, rh, 233.15, 323.15, 3e4, 1.1e5); err != nil {
		return 0, err
	}
	return AirPermittivityJet(jet.Const(T), jet.Const(p), jet.Const(rh)).V, nil
}

// AirPermittivityJet is AirPermittivity with derivatives.
func AirPermittivityJet(T, p, rh jet.Jet) jet.Jet {
	return AirRefractivityJet(T, p, rh).Scale(1e-6).Plus(1).Sqr()
}

// AirPermittivityUncertainty is the standard uncertainty of AirPermittivity as
// a description of real air, common practice, no source.
const AirPermittivityUncertainty = 1.5e-6

// AirDensity returns the density (kg/m³) of moist air by the CIPM-2007 equation
// (Picard, Davis, Gläser, Fujii, Metrologia 45 (2008) 149, equation (1) and
// appendix; constants from memory) at temperature T (K), pressure p (Pa),
// relative humidity rh (0 to 1) and CO₂ mole fraction xCO2 (0.0004 when not
// measured). 600 to 1100 hPa and 15 to 27 °C; relative standard uncertainty of
// the equation 22e-6.
func AirDensity(T, p, rh, xCO2 float64) (float64, error) {
	if err := airChecks("air density", T, p, rh, 288.15, 300.15, 6e4, 1.1e5); err != nil {
		return 0, err
	}
	if err := refuse("air density", within("CO₂ mole fraction", xCO2, "1", 0, 0.01)); err != nil {
		return 0, err
	}
	return AirDensityJet(jet.Const(T), jet.Const(p), jet.Const(rh), jet.Const(xCO2)).V, nil
}

// AirDensityUncertainty is the relative standard uncertainty of the CIPM-2007
// equation itself (Picard et al. 2008, table 3; from memory).
const AirDensityUncertainty = 22e-6

// AirDensityJet is AirDensity with derivatives.
func AirDensityJet(T, p, rh, xCO2 jet.Jet) jet.Jet {
	const (
		molarGas = 8.314472    // J mol⁻¹ K⁻¹, the value the equation was fitted with
		mv       = 18.01528e-3 // kg mol⁻¹
	)
	ma := xCO2.Plus(-0.0004).Scale(12.011e-3).Plus(28.96546e-3)
	xv := cipmVapourFraction(T, p, rh)
	z := cipmCompressibility(T, p, xv)
	dry := p.Mul(ma).Div(z.Mul(T)).Scale(1 / molarGas)
	return dry.Mul(jet.Const(1).Sub(xv.Mul(jet.Const(1).Sub(jet.Const(mv).Div(ma)))))
}

// SaturationPressureCIPM returns the saturation vapour pressure (Pa) of water
// at T (K) as used by CIPM-2007 (appendix A1.1): exp(AT² + BT + C + D/T).
func SaturationPressureCIPM(T float64) (float64, error) {
	if err := refuse("saturation vapour pressure", within("temperature", T, "K", 273.15, 323.15)); err != nil {
		return 0, err
	}
	return cipmSaturation(jet.Const(T)).V, nil
}

func cipmSaturation(T jet.Jet) jet.Jet {
	return poly(T, 33.93711047, -1.9121316e-2, 1.2378847e-5).Add(T.Inv().Scale(-6.3431645e3)).Exp()
}

func cipmVapourFraction(T, p, rh jet.Jet) jet.Jet {
	t := T.Plus(-zeroCelsius)
	f := poly(t, 1.00062, 0, 5.6e-7).Add(p.Scale(3.14e-8))
	return rh.Mul(f).Mul(cipmSaturation(T)).Div(p)
}

// cipmCompressibility is Z of CIPM-2007, appendix A1.4.
func cipmCompressibility(T, p, xv jet.Jet) jet.Jet {
	t := T.Plus(-zeroCelsius)
	r := p.Div(T)
	xv2 := xv.Sqr()
	first := poly(t, 1.58123e-6, -2.9331e-8, 1.1043e-10).
		Add(poly(t, 5.707e-6, -2.051e-8).Mul(xv)).
		Add(poly(t, 1.9898e-4, -2.376e-6).Mul(xv2))
	second := xv2.Scale(-0.765e-8).Plus(1.83e-11)
	return jet.Const(1).Sub(r.Mul(first)).Add(r.Sqr().Mul(second))
}

// RelativeAirDensity returns δ = (p/101325 Pa)(293.15 K/T), the relative air
// density to which breakdown is referred (IEC 60060-1, from memory).
func RelativeAirDensity(T, p float64) (float64, error) {
	if err := refuse("relative air density", positive("temperature", T, "K"), positive("pressure", p, "Pa")); err != nil {
		return 0, err
	}
	return p / 101325 * 293.15 / T, nil
}

// BreakdownField returns the peak field (V/m) at which a uniform gap d (m) in
// air of relative density delta breaks down,
//
//	E/(kV/cm) = 24.22 δ + 6.08 √(δ/(d/cm)),
//
// common practice (formula from memory), about 3 MV/m at 1 cm. Good to 3 % for
// 0.1 to 10 cm and δ 0.9 to 1.1 with clean smooth electrodes; 0.5 to 1.5 in δ
// is accepted. A warning, never a design value: edges, dust and humidity lower
// it.
func BreakdownField(d, delta float64) (float64, error) {
	if err := refuse("breakdown of air", within("gap", d, "m", 1e-4, 0.2), within("relative air density", delta, "1", 0.5, 1.5)); err != nil {
		return 0, err
	}
	return BreakdownFieldJet(jet.Const(d), jet.Const(delta)).V, nil
}

// BreakdownFieldJet is BreakdownField with derivatives.
func BreakdownFieldJet(d, delta jet.Jet) jet.Jet {
	return delta.Scale(24.22e5).Add(delta.Div(d.Scale(100)).Sqrt().Scale(6.08e5))
}

// BreakdownMargin returns BreakdownField over |E|: above 1 the gap holds by the
// formula. +Inf for no field.
func BreakdownMargin(E, d, delta float64) (float64, error) {
	eb, err := BreakdownField(d, delta)
	if err != nil {
		return 0, err
	}
	if err := refuse("breakdown of air", finite("field", E, "V/m")); err != nil {
		return 0, err
	}
	return eb / math.Abs(E), nil
}
