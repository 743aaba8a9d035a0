package model

import (
	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// The words of the option drive.kind.
const (
	driveBalanced   = "balanced"
	driveOneEarthed = "one-side-earthed"
)

// Scalars that several kinds share.
var (
	electricConstant = Scalar{Table: "quantities", Name: "electric_constant", Doc: "vacuum permittivity (CODATA 2022)",
		Unit: si.MustUnit("F/m"), Default: gum.Normal(si.Eps0, si.UEps0), Positive: true, Part: "constants"}
	temperature = Scalar{Table: "environment", Name: "temperature", Doc: "temperature of the air", Unit: si.MustUnit("degC"),
		Default: gum.Exactly(293.15), Positive: true, Part: "air"}
	pressure = Scalar{Table: "environment", Name: "pressure", Doc: "pressure of the air", Unit: si.MustUnit("hPa"),
		Default: gum.Exactly(101325), Positive: true, Part: "air"}
	humidity = Scalar{Table: "environment", Name: "humidity", Doc: "relative humidity of the air", Unit: si.MustUnit("%"),
		Default: gum.Exactly(0.5), Part: "air"}
)

// The marks of causes that several kinds share; see Cause.Signature.

// always is the mark of a zero: the same in every reading.
func always(q, x []float64, f, t float64) float64 { return 1 }

// withTime is the mark of a zero that drifts.
func withTime(q, x []float64, f, t float64) float64 { return t }

// perVolt is the mark of a contact potential in what is proportional to a voltage or
// to its square: predictor p is the voltage, scalar iVc what is subtracted from it.
func perVolt(p, iVc int) func(q, x []float64, f, t float64) float64 {
	return func(q, x []float64, f, t float64) float64 {
		if v := x[p] - q[iVc]; v != 0 {
			return f / v
		}
		return 0
	}
}

// gapResults states the permittivity of a gap, absolute and relative, and with air
// that of vacuum.
func (m *Model) gapResults(k *Kind, air bool) {
	iEps, iE0 := k.Scalar("permittivity"), k.Scalar("electric_constant")
	iT, iP, iH := k.Scalar("environment.temperature"), k.Scalar("environment.pressure"), k.Scalar("environment.humidity")
	m.Measurands = []Measurand{
		{Name: "permittivity", Doc: "permittivity of the gap", Unit: si.MustUnit("pF/m"),
			Value: func(q []jet.Jet) jet.Jet { return q[iEps] }},
		{Name: "relative_permittivity", Doc: "permittivity of the gap over the electric constant", Unit: si.MustUnit("1"),
			Value: func(q []jet.Jet) jet.Jet { return q[iEps].Div(q[iE0]) }},
	}
	if !air {
		return
	}
	m.Factors = map[string]func(q []jet.Jet) jet.Jet{
		"air": func(q []jet.Jet) jet.Jet { return field.AirPermittivityJet(q[iT], q[iP], q[iH]).Plus(-1) }}
	m.Measurands = append(m.Measurands, Measurand{
		Name: "vacuum_permittivity", Doc: "permittivity of the gap over that of its moist air relative to vacuum", Unit: si.MustUnit("pF/m"),
		Value: func(q []jet.Jet) jet.Jet { return q[iEps].Div(field.AirPermittivityJet(q[iT], q[iP], q[iH])) }})
}

// What the kinds that calibrate a meter share.
var (
	responseScalar = Scalar{Table: "quantities", Name: "response", Doc: "indicated over reference field, K",
		Unit: si.MustUnit("1"), Sought: true, Own: true, Part: "result"}
	zeroOffsetScalar = Scalar{Table: "quantities", Name: "zero_offset", Doc: "field that the meter adds to the true one, E₀",
		Unit: si.MustUnit("V/m"), Adjustable: true, Own: true, Part: "meter"}
)

// values are the plain numbers of jets.
func values(q []jet.Jet) []float64 {
	v := make([]float64, len(q))
	for i := range q {
		v[i] = q[i].V
	}
	return v
}

// predictAll evaluates a model at plain numbers over all rows.
func (m *Model) predictAll(q []float64, x [][]float64, n int) []float64 {
	f := make([]float64, n)
	if m.Block != nil && m.Block(q, x, 0, n, nil, f, nil) {
		return f
	}
	qj, xj := jet.Consts(q), make([]jet.Jet, len(x))
	for i := range f {
		for p := range x {
			xj[p] = jet.Const(x[p][i])
		}
		f[i] = m.Row(qj, xj).V
	}
	return f
}

// proportional is the value of scalar j with which a prediction affine in it
// comes nearest to the readings, everything else at its stated value.
func (m *Model) proportional(q []float64, j int, x [][]float64, y []float64) float64 {
	w := append([]float64(nil), q...)
	w[j] = 0
	f0 := m.predictAll(w, x, len(y))
	w[j] = 1
	f1 := m.predictAll(w, x, len(y))
	var num, den float64
	for i := range y {
		d := f1[i] - f0[i]
		num += d * (y[i] - f0[i])
		den += d * d
	}
	return num / den
}

// startAt lists the stated values of the free scalars with that of scalar j
// replaced.
func startAt(q []float64, free []int, j int, v float64) []float64 {
	start := make([]float64, len(free))
	for k, f := range free {
		start[k] = q[f]
		if f == j {
			start[k] = v
		}
	}
	return start
}
