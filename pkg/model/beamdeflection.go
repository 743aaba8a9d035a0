package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// BeamDeflection is a beam of known energy that crosses the field of a pair of
// plates: its displacement at the exit, or on a screen behind it, or its angle,
// gives the field for each volt between the plates (package comment, "Beam
// between plates"). Displacement and angle are positive towards the plate that
// attracts the beam at positive voltage.
var BeamDeflection = register(&Kind{
	Name:  "beam-deflection",
	Title: "Field of plates from the deflection of a beam",
	Doc: "A beam of known energy passes between plates driven balanced; its displacement at the exit or on a screen, or its angle, " +
		"gives the field for each volt between the plates.",
	Channels: []Channel{
		{Name: "voltage", Doc: "voltage between the plates", Unit: si.MustUnit("V"), Role: Predictor},
		{Name: "beam_voltage", Doc: "voltage that accelerated the beam; not needed when quantities.accelerating_voltage is stated", Unit: si.MustUnit("kV"), Role: Predictor, Optional: true, Positive: true},
		{Name: "displacement", Doc: "displacement of the beam, at the exit of the plates or drift_length behind it", Unit: si.MustUnit("mm"), Role: Response},
		{Name: "angle", Doc: "angle between the beam before and behind the plates", Unit: si.MustUnit("mrad"), Role: Response},
	},
	Scalars: []Scalar{
		{Table: "quantities", Name: "field_per_volt", Doc: "field on the beam's axis for each volt between the plates", Unit: si.MustUnit("1/m"), Sought: true, Positive: true, Part: "result"},
		{Table: "quantities", Name: "reference_voltage", Doc: "voltage for which the field is stated", Unit: si.MustUnit("kV"), Default: gum.Exactly(1000), Part: "result"},
		{Table: "quantities", Name: "contact_potential", Doc: "contact potential, subtracted from the voltage", Unit: si.MustUnit("V"), Adjustable: true, Part: "electrodes"},
		{Table: "quantities", Name: "plate_length", Doc: "length of the plates along the beam", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "electrodes"},
		{Table: "quantities", Name: "plate_gap", Doc: "spacing of the plates, for the cautions and the clearance of the beam", Unit: si.MustUnit("mm"), Part: "electrodes"},
		{Table: "quantities", Name: "drift_length", Doc: "distance from the exit of the plates to where the displacement is read", Unit: si.MustUnit("mm"), Part: "beam"},
		{Table: "quantities", Name: "accelerating_voltage", Doc: "voltage that accelerated the beam when there is no channel for it", Unit: si.MustUnit("kV"), Positive: true, Part: "beam"},
		{Table: "quantities", Name: "rest_energy", Doc: "rest energy of an ion for each elementary charge of it, as a voltage; needed for particle = \"ion\"", Unit: si.MustUnit("MV"), Positive: true, Part: "beam"},
		{Table: "quantities", Name: "bench_capacitance", Doc: "capacitance of everything at high voltage, for the stored energy", Unit: si.MustUnit("pF"), NotNegative: true, Part: "safety"},
		{Table: "corrections.fringe", Name: "length", Doc: "what the field beyond both ends adds to the length of the plates (integral of the field on the axis over its value inside, less the length)", Unit: si.MustUnit("mm"), Required: true, Part: "electrodes"},
	},
	Corrections: []Correction{
		{Name: "fringe", Doc: "effective length of the field"},
		{Name: "relativity", Doc: "relativistic momentum of the beam", Default: true},
	},
	Options: []Option{
		{Key: "particle", Doc: "of the beam; an ion has quantities.rest_energy", Values: []string{"electron", "proton", "ion"}, Default: "electron"},
		{Key: "drive.kind", Doc: "how the plates are driven", Values: []string{driveBalanced, driveOneEarthed}, Default: driveBalanced},
	},
	Prepare: prepareBeamDeflection,
})

// Rest energies over the elementary charge, V: m c²/e of CODATA 2022 (electron
// 510998.95069(16) eV, proton 938272089.43(29) eV; from memory). Their
// uncertainty, 3e-10, is far below that of any beam's energy.
const (
	electronRest = 510998.95069
	protonRest   = 938272089.43
)

// steepest is the largest slope for which a uniform field that ends at once is
// taken to describe the deflection: edges 4 mm soft change a slope of 0.11 behind
// plates of 60 mm by 1.4e-4 of itself (a test integrates the path).
const steepest = 0.2

// coshRatio is (cosh √z − 1)/z with two derivatives by z, z ≥ 0.
func coshRatio(z float64) (f, f1, f2 float64) {
	// Σ z^n/(2n+2)!, which converges in a few terms for any deflection in use.
	term := 0.5
	for n := 0; n < 30; n++ {
		f += term
		k := float64(n + 1)
		next := 1 / ((2*k + 1) * (2*k + 2))
		f1 += term * next * k
		f2 += term * next / ((2*k + 3) * (2*k + 4)) * k * (k + 1)
		term *= z * next
		if term < 1e-20 {
			break
		}
	}
	return f, f1, f2
}

// sinhRatio is sinh √z/√z with two derivatives by z, z ≥ 0.
func sinhRatio(z float64) (f, f1, f2 float64) {
	term := 1.0
	for n := 0; n < 30; n++ {
		f += term
		k := float64(n + 1)
		next := 1 / ((2 * k) * (2*k + 1))
		f1 += term * next * k
		f2 += term * next / ((2*k + 2) * (2*k + 3)) * k * (k + 1)
		term *= z * next
		if term < 1e-20 {
			break
		}
	}
	return f, f1, f2
}

func prepareBeamDeflection(k *Kind, s *Setup) (*Model, error) {
	iK, iRef, iVc, iLen, iGap := k.Scalar("field_per_volt"), k.Scalar("reference_voltage"), k.Scalar("contact_potential"), k.Scalar("plate_length"), k.Scalar("plate_gap")
	iDrift, iU, iRest, iCap, iFringe := k.Scalar("drift_length"), k.Scalar("accelerating_voltage"), k.Scalar("rest_energy"), k.Scalar("bench_capacitance"), k.Scalar("corrections.fringe.length")
	fringe, relativity := s.On["fringe"], s.On["relativity"]
	if s.Options["drive.kind"] == driveOneEarthed {
		return nil, fmt.Errorf("drive.kind: between plates with one side earthed the beam's energy changes by half of their voltage, and so does its path; drive the plates balanced about the potential of the beam's last electrode")
	}
	rest := electronRest
	switch particle := s.Options["particle"]; {
	case particle == "proton":
		rest = protonRest
	case particle == "ion" && !s.Given["rest_energy"]:
		return nil, fmt.Errorf("quantities.rest_energy: is missing; an ion needs its rest energy for each elementary charge of it")
	case particle != "ion" && s.Given["rest_energy"]:
		return nil, fmt.Errorf("quantities.rest_energy: that of an %s is known; leave it out, or state particle = \"ion\"", particle)
	case particle == "ion":
		rest = 0
	}
	response := "displacement"
	if s.Channels["angle"] {
		response = "angle"
		if s.Given["drift_length"] {
			return nil, fmt.Errorf("quantities.drift_length: an angle does not change behind the plates; leave it out")
		}
	}
	predictors, pU := []string{"voltage"}, -1
	switch {
	case s.Channels["beam_voltage"] && s.Given["accelerating_voltage"]:
		return nil, fmt.Errorf("quantities.accelerating_voltage: the beam has a channel of its own (beam_voltage); state one of the two")
	case s.Channels["beam_voltage"]:
		pU = 1
		predictors = append(predictors, "beam_voltage")
	case !s.Given["accelerating_voltage"]:
		return nil, fmt.Errorf("quantities.accelerating_voltage: is missing; state the voltage that accelerated the beam, or name a column in channels.beam_voltage")
	}

	m := &Model{Response: response, Predictors: predictors}
	// path is displacement and slope at the exit; the slope stays behind it.
	path := func(q, x []jet.Jet) (y, slope jet.Jet) {
		u := q[iU]
		if pU >= 0 {
			u = x[pU]
		}
		length := q[iLen]
		if fringe {
			length = length.Add(q[iFringe])
		}
		e := q[iK].Mul(x[0].Sub(q[iVc]))
		if relativity {
			r := jet.Const(rest)
			if rest == 0 {
				r = q[iRest]
			}
			w0 := r.Add(u)
			p2 := u.Mul(u.Add(r.Scale(2))) // (p₀c/e)²
			z := e.Mul(length).Sqr().Div(p2)
			y = e.Mul(length.Sqr()).Mul(w0).Div(p2).Mul(z.Chain(coshRatio(z.V)))
			slope = e.Mul(length).Mul(w0).Div(p2).Mul(z.Chain(sinhRatio(z.V)))
		} else {
			slope = e.Mul(length).Div(u).Scale(0.5)
			y = slope.Mul(length).Scale(0.5)
		}
		return y, slope
	}
	m.Row = func(q, x []jet.Jet) jet.Jet {
		y, slope := path(q, x)
		if response == "angle" {
			return slope.Atan()
		}
		// The effective field ends half of its excess beyond the plates.
		drift := q[iDrift]
		if fringe {
			drift = drift.Sub(q[iFringe].Scale(0.5))
		}
		return y.Add(drift.Mul(slope))
	}
	m.Block = func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
		for _, j := range wrt {
			if j != iK && j != iVc {
				return false
			}
		}
		length, drift, r := q[iLen], q[iDrift], rest
		if fringe {
			length += q[iFringe]
			drift -= 0.5 * q[iFringe]
		}
		if rest == 0 {
			r = q[iRest]
		}
		u := q[iU]
		for i := lo; i < hi; i++ {
			if pU >= 0 {
				u = x[pU][i]
			}
			v := x[0][i] - q[iVc]
			e := q[iK] * v
			var y, slope, dy, dSlope float64 // d by e
			if relativity {
				w0, p2 := r+u, u*(u+2*r)
				z := e * e * length * length / p2
				c, c1, _ := coshRatio(z)
				h, h1, _ := sinhRatio(z)
				a := length * w0 / p2
				y, slope = e*length*a*c, e*a*h
				dy, dSlope = length*a*(c+2*z*c1), a*(h+2*z*h1)
			} else {
				dSlope = 0.5 * length / u
				dy = 0.5 * length * dSlope
				y, slope = e*dy, e*dSlope
			}
			d := dy + drift*dSlope
			f[i] = y + drift*slope
			if response == "angle" {
				f[i] = math.Atan(slope)
				d = dSlope / (1 + slope*slope)
			}
			for n := range jac {
				if wrt[n] == iK {
					jac[n][i] = d * v
				} else {
					jac[n][i] = -d * q[iK]
				}
			}
		}
		return true
	}
	m.Start = func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
		// Small deflections are proportional to the field: compare with a field
		// of 1e-6 of what the accelerating voltage is over the plates' length.
		w := append([]float64(nil), q...)
		top := 0.0
		for _, v := range x[0] {
			top = math.Max(top, math.Abs(v-q[iVc]))
		}
		u := q[iU]
		if pU >= 0 {
			u = x[pU][0]
		}
		if top == 0 {
			return nil, fmt.Errorf("channels.voltage: all readings are at zero volts; there is no deflection to find the field from")
		}
		unit := 1e-6 * u / (q[iLen] * top)
		w[iK] = unit
		f := m.predictAll(w, x, len(y))
		var num, den float64
		for i := range y {
			num += f[i] * y[i]
			den += f[i] * f[i]
		}
		kappa := unit * num / den
		if !(kappa > 0) {
			return nil, fmt.Errorf("readings of %s: the beam is not deflected towards the plate that attracts it (rough field per volt %.3g 1/m); check the sign, or turn it round by a gain of -1", response, kappa)
		}
		// Large ones bend: a few secant steps on the readings' projection.
		for range 8 {
			w[iK] = kappa
			ratio, self := 0.0, 0.0
			for i, v := range m.predictAll(w, x, len(y)) {
				ratio += v * y[i]
				self += v * v
			}
			if math.IsNaN(self) {
				return nil, fmt.Errorf("readings of %s: the beam would be deflected by more than a right angle; check the units of the voltages and of the length", response)
			}
			kappa *= ratio / self
		}
		return startAt(q, free, iK, kappa), nil
	}
	m.Check = func(q []float64, x [][]float64, y []float64) ([]error, error) {
		start, err := m.Start(q, []int{iK}, x, y)
		if err != nil {
			return nil, err
		}
		w := append([]float64(nil), q...)
		w[iK] = start[0]
		var warn []error
		qj, xj := jet.Consts(w), make([]jet.Jet, len(x))
		slow := math.Inf(1)
		for i := range y {
			for p := range x {
				xj[p] = jet.Const(x[p][i])
			}
			u := q[iU]
			if pU >= 0 {
				u = x[pU][i]
			}
			r := rest
			if rest == 0 {
				r = q[iRest]
			}
			slow = math.Min(slow, r/u)
			out, slope := path(qj, xj)
			if math.Abs(slope.V) > steepest || math.IsNaN(slope.V) {
				return nil, &RowError{Row: i, Err: fmt.Errorf("the beam leaves at a slope of %.2g; the description of the edge of the field holds up to %.2g; lower the voltage of the plates or exclude the reading", slope.V, steepest)}
			}
			if q[iGap] > 0 && math.Abs(out.V) > 0.35*q[iGap] {
				return nil, &RowError{Row: i, Err: fmt.Errorf("the beam leaves %.3g mm off the axis of plates %.3g mm apart, too near to a plate; lower the voltage or exclude the reading", 1e3*out.V, 1e3*q[iGap])}
			}
		}
		// Without relativity U stands for U(1 + U/2M)/(1 + U/M) ≈ U(1 − U/2M).
		if size := 0.5 / slow; !relativity && size > 1e-4 {
			return nil, fmt.Errorf("corrections.relativity: at this energy of the beam the deflection is %.2g %% off without it; switch it on", 100*size)
		}
		if q[iGap] > 0 && q[iLen] < 3*q[iGap] && !fringe {
			warn = append(warn, fmt.Errorf("corrections.fringe: plates of length %.3g mm at %.3g mm bend the beam by their edge field as well; state corrections.fringe.length", 1e3*q[iLen], 1e3*q[iGap]))
		}
		return append(warn, breakdownWarning(m.Hazard(w, x))...), nil
	}
	m.Hazard = func(q []float64, x [][]float64) Hazard {
		// A beam runs in vacuum: no breakdown of air to compare with.
		h := Hazard{}
		for i, v := range x[0] {
			v = math.Abs(v)
			if e := v * q[iK]; e > h.Field {
				h.Field, h.Row = e, i
			}
			h.Voltage = math.Max(h.Voltage, v)
			if pU >= 0 {
				h.Voltage = math.Max(h.Voltage, x[pU][i])
			}
		}
		h.Voltage = math.Max(h.Voltage, q[iU])
		h.Energy, h.Charge = 0.5*q[iCap]*h.Voltage*h.Voltage, q[iCap]*h.Voltage
		return h
	}
	m.Measurands = []Measurand{
		{Name: "field_per_volt", Doc: "field on the beam's axis for each volt between the plates", Unit: si.MustUnit("1/m"),
			Value: func(q []jet.Jet) jet.Jet { return q[iK] }},
		{Name: "field", Doc: "field on the beam's axis at the reference voltage", Unit: si.MustUnit("kV/m"),
			Value: func(q []jet.Jet) jet.Jet { return q[iK].Mul(q[iRef]) }},
		{Name: "effective_gap", Doc: "spacing of ideal plates with the same field", Unit: si.MustUnit("mm"),
			Value: func(q []jet.Jet) jet.Jet { return q[iK].Inv() }},
	}
	m.Causes = []Cause{
		{Name: "contact_potential", Doc: "the same for both polarities: contact potential",
			Signature: perVolt(0, iVc)},
		{Name: "uniformity", Doc: "grows as the cube of the deflection: a field that is not uniform off the axis, or a scale that is not linear",
			Signature: func(q, x []float64, f, t float64) float64 { return f * f * f }},
		{Name: "zero", Doc: "the same at every voltage: zero of the scale, or of the beam's axis",
			Signature: always},
		{Name: "drift", Doc: "proportional to time, whatever the voltage: drift of the axis",
			Signature: withTime},
	}
	if pU >= 0 {
		m.Causes = append(m.Causes, Cause{Name: "beam_voltage", Doc: "falls as the beam's voltage, relative to the deflection: zero of that voltage",
			Signature: func(q, x []float64, f, t float64) float64 { return f / x[pU] }})
	}
	return m, nil
}
