package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// PlateCharge is the charge that a voltage puts on a guarded disc, read by an
// electrometer, or its capacitance, read by a bridge, against the spacing of the
// plates. The fit gives the permittivity of the gap.
//
//	Q = ε A_Q (V − V_c)/(d + δ) + C_s V
//
// (field.PlateCharge); what an electrometer makes of Q during the hold time is in
// the package comment, "Charge readings". The charge is positive when the plate
// is positive: an electrometer that shows the other sign has a negative gain.
var PlateCharge = register(&Kind{
	Name:  "plate-charge",
	Title: "Charge or capacitance of guarded plates",
	Doc: "A plate at a known voltage and spacing induces a charge on a guarded disc; the charge, read by an electrometer, " +
		"or the capacitance, read by a bridge, gives the permittivity of the gap.",
	Channels: []Channel{
		{Name: "voltage", Doc: "voltage of the plate against disc and guard; not needed when the capacitance is read", Unit: si.MustUnit("kV"), Role: Predictor, Optional: true},
		{Name: "gap", Doc: "spacing of plate and disc as read on the micrometer", Unit: si.MustUnit("mm"), Role: Predictor, Positive: true},
		{Name: "hold", Doc: "time from the step of the voltage to the reading of the charge", Unit: si.MustUnit("s"), Role: Predictor, Optional: true},
		{Name: "charge", Doc: "charge on the disc; the gain is that of the electrometer's feedback capacitor", Unit: si.MustUnit("nC"), Role: Response},
		{Name: "capacitance", Doc: "capacitance between plate and disc", Unit: si.MustUnit("pF"), Role: Response},
	},
	Scalars: append(append([]Scalar{
		{Table: "quantities", Name: "permittivity", Doc: "permittivity of the gap", Unit: si.MustUnit("pF/m"), Sought: true, Positive: true, Part: "result"},
		{Table: "quantities", Name: "contact_potential", Doc: "contact potential, subtracted from the voltage", Unit: si.MustUnit("V"), Adjustable: true, Part: "electrodes"},
		{Table: "quantities", Name: "gap_offset", Doc: "zero error of the spacing scale, added to the reading", Unit: si.MustUnit("um"), Adjustable: true, Part: "electrodes"},
		{Table: "quantities", Name: "stray_capacitance", Doc: "capacitance between live plate and disc besides the gap", Unit: si.MustUnit("pF"), Adjustable: true, Part: "electrodes"},
	}, guardedScalars...), electrometerScalars...),
	Corrections: append([]Correction{
		{Name: "guard_gap", Doc: "effective area of the disc with its guard gap", Default: true},
		{Name: "wedge", Doc: "plates not parallel"},
		{Name: "coplanarity", Doc: "disc proud of the guard plane"},
		{Name: "air", Doc: "moist air of the gap, for the permittivity of vacuum"},
	}, electrometerCorrections...),
	Prepare: preparePlateCharge,
})

func preparePlateCharge(k *Kind, s *Setup) (*Model, error) {
	iEps, iOff := k.Scalar("permittivity"), k.Scalar("gap_offset")
	r, response, predictors, err := newPlateReading(k, s, []string{"gap"})
	if err != nil {
		return nil, err
	}
	g, err := newGuarded(k, s)
	if err != nil {
		return nil, err
	}
	m := &Model{Response: response, Predictors: predictors}
	m.Row = func(q, x []jet.Jet) jet.Jet {
		return r.jet(q[iEps].Mul(g.over(q, x[0].Add(q[iOff]))), q, x)
	}
	m.Block = func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
		for _, j := range wrt {
			if j != iEps && j != iOff && !r.acts(j) {
				return false
			}
		}
		p := g.prepared(q)
		eps, off := q[iEps], q[iOff]
		for i := lo; i < hi; i++ {
			over, slope := p.overValue(x[0][i] + off)
			y := r.value(eps*over, q, x, i)
			f[i] = y.reading
			if jac == nil {
				continue
			}
			for n, j := range wrt {
				switch j {
				case iEps:
					jac[n][i] = over * y.lever * y.keep
				case iOff:
					jac[n][i] = eps * slope * y.lever * y.keep
				default:
					jac[n][i] = r.by(j, &y)
				}
			}
		}
		return true
	}
	m.Start = func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
		eps := m.proportional(q, iEps, x, y)
		if math.IsNaN(eps) {
			return nil, fmt.Errorf("readings of %s: the charge expected of every reading is zero or beyond the range of numbers; check the voltages and dimensions", response)
		}
		if !(eps > 0) {
			return nil, fmt.Errorf("readings of %s: no charge of the sign of the voltage (rough permittivity %.3g F/m); check the sign and the zero of the channel", response, eps)
		}
		return startAt(q, free, iEps, eps), nil
	}
	m.Check = func(q []float64, x [][]float64, y []float64) ([]error, error) {
		minGap := math.Inf(1)
		for i, d := range x[0] {
			if d+q[iOff] <= 0 {
				return nil, &RowError{Row: i, Err: fmt.Errorf("gap %.6g mm: must be above zero", 1e3*(d+q[iOff]))}
			}
			if r.hold >= 0 && x[r.hold][i] < 0 {
				return nil, &RowError{Row: i, Err: fmt.Errorf("hold %.6g s: a time from the step of the voltage to the reading can't be below zero", x[r.hold][i])}
			}
			minGap = math.Min(minGap, d+q[iOff])
		}
		warn, err := g.check(q, minGap)
		if err != nil {
			return nil, err
		}
		if w := r.check(q, x); w != nil {
			warn = append(warn, w)
		}
		if r.charge {
			warn = append(warn, dampAir(q[g.iH])...)
		}
		return append(warn, breakdownWarning(m.Hazard(q, x))...), nil
	}
	m.Hazard = func(q []float64, x [][]float64) Hazard {
		h, worst := Hazard{}, -1.0
		if r.voltage < 0 {
			return h // the bench does not say at what voltage its bridge works
		}
		delta := airDensity(q[g.iT], q[g.iP])
		for i, v := range x[r.voltage] {
			if d := x[0][i] + q[iOff]; d > 0 {
				h.meet(i, v, v/d, d, math.Max(q[g.iCap], si.Eps0*math.Pi*q[g.iR]*q[g.iR]/d), delta, &worst)
			}
		}
		return h
	}
	m.gapResults(k, s.On["air"])
	gap := func(q, x []float64) float64 { return x[0] + q[iOff] }
	m.Causes = []Cause{
		{Name: "wedge", Doc: "grows as 1/gap² relative to the charge: plates not parallel",
			Signature: func(q, x []float64, f, t float64) float64 { d := gap(q, x); return f / (d * d) }},
		{Name: "gap_offset", Doc: "grows as 1/gap relative to the charge: zero of the spacing scale",
			Signature: func(q, x []float64, f, t float64) float64 { return f / gap(q, x) }},
		{Name: "edge", Doc: "grows with the gap relative to the charge: field beyond the guard",
			Signature: func(q, x []float64, f, t float64) float64 { return f * gap(q, x) }},
		{Name: "drift", Doc: "proportional to time: drift of the zero",
			Signature: withTime},
	}
	if r.charge {
		m.Causes = append(m.Causes, chargeCauses(r.voltage, r.hold, gap)...)
	} else {
		m.Causes = append(m.Causes, Cause{Name: "stray_capacitance", Doc: "the same at every gap: capacitance besides the gap",
			Signature: always})
	}
	return m, nil
}
