package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// The medium of a force between charged bodies: its permittivity as the result, or
// known.

// mediumScalars are the permittivity sought and what leads from it to vacuum.
var mediumScalars = []Scalar{
	{Table: "quantities", Name: "permittivity", Doc: "permittivity of the medium", Unit: si.MustUnit("pF/m"), Sought: true, Positive: true, Part: "result"},
	electricConstant, temperature, pressure, humidity,
}

// airMedium adds what follows for vacuum from the permittivity of moist air.
type airMedium struct{ iEps, iE0, iT, iP, iH int }

func newAirMedium(k *Kind) airMedium {
	return airMedium{k.Scalar("permittivity"), k.Scalar("electric_constant"), k.Scalar("environment.temperature"), k.Scalar("environment.pressure"), k.Scalar("environment.humidity")}
}

// measurands are the permittivity in its forms and Coulomb's constant 1/4πε.
func (a airMedium) measurands(m *Model, air bool) {
	m.Measurands = []Measurand{
		{Name: "permittivity", Doc: "permittivity of the medium", Unit: si.MustUnit("pF/m"),
			Value: func(q []jet.Jet) jet.Jet { return q[a.iEps] }},
		{Name: "relative_permittivity", Doc: "permittivity of the medium over the electric constant", Unit: si.MustUnit("1"),
			Value: func(q []jet.Jet) jet.Jet { return q[a.iEps].Div(q[a.iE0]) }},
		{Name: "coulomb_constant", Doc: "1/4πε of the medium", Unit: si.MustUnit("N m2/C2"),
			Value: func(q []jet.Jet) jet.Jet { return q[a.iEps].Inv().Scale(1 / (4 * math.Pi)) }},
	}
	if !air {
		return
	}
	air1 := func(q []jet.Jet) jet.Jet { return field.AirPermittivityJet(q[a.iT], q[a.iP], q[a.iH]) }
	m.Factors = map[string]func(q []jet.Jet) jet.Jet{"air": func(q []jet.Jet) jet.Jet { return air1(q).Plus(-1) }}
	m.Measurands = append(m.Measurands,
		Measurand{Name: "vacuum_permittivity", Doc: "permittivity of the medium over that of its moist air relative to vacuum", Unit: si.MustUnit("pF/m"),
			Value: func(q []jet.Jet) jet.Jet { return q[a.iEps].Div(air1(q)) }},
		Measurand{Name: "vacuum_coulomb_constant", Doc: "1/4πε with the permittivity of vacuum so found", Unit: si.MustUnit("N m2/C2"),
			Value: func(q []jet.Jet) jet.Jet { return air1(q).Div(q[a.iEps]).Scale(1 / (4 * math.Pi)) }})
}

// knownMedium is the permittivity of a medium that is not sought, as jets and as
// plain numbers.
func knownMedium(k *Kind, s *Setup) (jets func(q []jet.Jet) jet.Jet, plain func(q []float64) float64, err error) {
	iE0, iRel := k.Scalar("electric_constant"), k.Scalar("relative_permittivity")
	iT, iP, iH := k.Scalar("environment.temperature"), k.Scalar("environment.pressure"), k.Scalar("environment.humidity")
	if !s.On["air"] {
		return func(q []jet.Jet) jet.Jet { return q[iE0].Mul(q[iRel]) }, func(q []float64) float64 { return q[iE0] * q[iRel] }, nil
	}
	if s.Given["relative_permittivity"] {
		return nil, nil, fmt.Errorf("quantities.relative_permittivity: the correction for air gives it already; take one of the two out")
	}
	jets = func(q []jet.Jet) jet.Jet { return q[iE0].Mul(field.AirPermittivityJet(q[iT], q[iP], q[iH])) }
	plain = func(q []float64) float64 {
		return q[iE0] * field.AirPermittivityJet(jet.Const(q[iT]), jet.Const(q[iP]), jet.Const(q[iH])).V
	}
	return jets, plain, nil
}
