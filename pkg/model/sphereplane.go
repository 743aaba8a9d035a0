package model

import (
	"fmt"
	"math"
	"slices"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// SpherePlane is the attraction between a conducting sphere and a wide earthed
// plane: the sphere and its mirror image at opposite potential
// (field.SpherePlaneForce, field.SpherePlaneChargeForce), exact at any gap.
var SpherePlane = register(&Kind{
	Name:  "sphere-plane",
	Title: "Force between a sphere and an earthed plane",
	Doc: "A conducting sphere, at a known potential or isolated with a known charge, is attracted by a wide earthed plane; the force at various gaps, " +
		"read in newtons or on a balance, gives the permittivity of the medium and Coulomb's constant.",
	Channels: append([]Channel{
		{Name: "gap", Doc: "distance of the sphere's surface from the plane as read on the scale", Unit: si.MustUnit("mm"), Role: Predictor, Positive: true},
		{Name: "voltage", Doc: "potential of the sphere (connected)", Unit: si.MustUnit("kV"), Role: Predictor, Optional: true},
		{Name: "charge", Doc: "charge of the sphere (isolated); not needed when quantities.charge is stated", Unit: si.MustUnit("nC"), Role: Predictor, Optional: true},
		{Name: "elapsed", Doc: "time from the measurement of the charge to the reading; without it the charge is that at time zero of the rows", Unit: si.MustUnit("s"), Role: Predictor, Optional: true},
	}, forceChannels("attraction positive")...),
	Scalars: slices.Concat(mediumScalars, []Scalar{
		{Table: "quantities", Name: "radius", Doc: "radius of the sphere", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "sphere"},
		{Table: "quantities", Name: "gap_offset", Doc: "zero error of the gap scale, added to the reading", Unit: si.MustUnit("um"), Adjustable: true, Part: "distance"},
		{Table: "quantities", Name: "contact_potential", Doc: "contact potential, subtracted from the voltage", Unit: si.MustUnit("V"), Adjustable: true, Part: "sphere"},
		{Table: "quantities", Name: "charge", Doc: "charge of the isolated sphere when it has no channel", Unit: si.MustUnit("nC"), Part: "sphere"},
		{Table: "quantities", Name: "plane_radius", Doc: "distance from the foot of the sphere to the nearest edge of the plane, for the check of validity", Unit: si.MustUnit("mm"), Positive: true, Part: "plane"},
		{Table: "quantities", Name: "bench_capacitance", Doc: "capacitance of everything at high voltage, for the stored energy (default: the sphere alone)", Unit: si.MustUnit("pF"), NotNegative: true, Part: "safety"},
		{Table: "corrections.leakage", Name: "time_constant", Doc: "time constant with which the isolated sphere loses its charge", Unit: si.MustUnit("s"), Required: true, Adjustable: true, Positive: true, Part: "sphere"},
	}, balanceScalars),
	Corrections: []Correction{
		{Name: "leakage", Doc: "charge lost since it was measured, exponential; the force falls twice as fast"},
		{Name: "air", Doc: "moist air of the medium, for the permittivity of vacuum"},
		balanceCorrection,
	},
	Options: []Option{{Key: "connection", Doc: "connected: to a source that keeps its potential; isolated: the sphere keeps its charge", Values: []string{connected, isolated}}},
	Prepare: prepareSpherePlane,
})

// planeReach is how many heights h of the sphere's centre the plane should reach
// beyond its foot: what a point charge induces farther out than R pulls it with
// (1 + R²/h²)⁻² of the whole force, 1e-4 at 10 (derived from the surface charge
// ∝ (ρ² + h²)^(−3/2)).
const planeReach = 10.0

func prepareSpherePlane(k *Kind, s *Setup) (*Model, error) {
	iEps, iA, iOff, iVc, iQ := k.Scalar("permittivity"), k.Scalar("radius"), k.Scalar("gap_offset"), k.Scalar("contact_potential"), k.Scalar("charge")
	iReach, iCap, iTau := k.Scalar("plane_radius"), k.Scalar("bench_capacitance"), k.Scalar("corrections.leakage.time_constant")
	iT, iP, iH := k.Scalar("environment.temperature"), k.Scalar("environment.pressure"), k.Scalar("environment.humidity")
	fixedV, leak := s.Options["connection"] == connected, s.On["leakage"]
	out, err := newForceReading(k, s)
	if err != nil {
		return nil, err
	}
	m := &Model{Response: out.response, Predictors: []string{"gap"}}
	pSource, pTime := -1, -1
	if fixedV {
		for _, name := range []string{"charge", "elapsed"} {
			if s.Channels[name] || s.Given[name] {
				return nil, fmt.Errorf("connection: a sphere that a source keeps at its potential has the charge that follows; take %s out, or say connection = %q", name, isolated)
			}
		}
		switch {
		case leak:
			return nil, fmt.Errorf("corrections.leakage: a source keeps the potential of the sphere, whatever leaks; switch it off, or say connection = %q", isolated)
		case !s.Channels["voltage"]:
			return nil, fmt.Errorf("channels.voltage: is missing; a connected sphere needs its potential")
		}
		pSource = 1
		m.Predictors = append(m.Predictors, "voltage")
	} else {
		switch given, channel := s.Given["charge"], s.Channels["charge"]; {
		case s.Channels["voltage"]:
			return nil, fmt.Errorf("channels.voltage: an isolated sphere keeps its charge, not its potential; name the charge, or say connection = %q", connected)
		case s.Given["contact_potential"]:
			return nil, fmt.Errorf("quantities.contact_potential: there is no voltage that it could be subtracted from")
		case given && channel:
			return nil, fmt.Errorf("quantities.charge: the charge has a channel of its own; state one of the two")
		case !given && !channel:
			return nil, fmt.Errorf("quantities.charge: is missing; state the charge, or name its column in channels.charge")
		case channel:
			pSource = 1
			m.Predictors = append(m.Predictors, "charge")
		}
		pTime = len(m.Predictors)
		if s.Channels["elapsed"] {
			m.Predictors = append(m.Predictors, "elapsed")
		} else {
			m.TimeDependent = leak
		}
	}
	// source is the potential or the charge of a row.
	source := func(q []float64, x [][]float64, i int) float64 {
		if fixedV {
			return x[pSource][i] - q[iVc]
		}
		v := q[iQ]
		if pSource >= 0 {
			v = x[pSource][i]
		}
		if leak {
			v *= math.Exp(-x[pTime][i] / q[iTau])
		}
		return v
	}
	m.Row = func(q, x []jet.Jet) jet.Jet {
		var v jet.Jet
		switch {
		case fixedV:
			v = x[pSource].Sub(q[iVc])
		case pSource >= 0:
			v = x[pSource]
		default:
			v = q[iQ]
		}
		if leak {
			v = field.LeakJet(v, x[pTime], q[iTau].Inv())
		}
		gap := x[0].Add(q[iOff])
		return out.row(q, gap, func(g jet.Jet) jet.Jet {
			if fixedV {
				return field.SpherePlaneForceJet(q[iEps], q[iA], g, v).Neg()
			}
			return field.SpherePlaneChargeForceJet(q[iEps], q[iA], g, v).Neg()
		}, nil)
	}
	m.Block = func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
		for _, j := range wrt {
			if j != iEps && j != iOff && j != iVc && j != iTau {
				return false
			}
		}
		a, eps := q[iA], q[iEps]
		unit := out.at(q).unit
		k := -4 * math.Pi * eps * unit
		if !fixedV {
			k = -unit / (4 * math.Pi * eps)
		}
		for i := lo; i < hi; i++ {
			v := source(q, x, i)
			// the image is 2·gap away, and the gap's derivative twice the pair's
			g := 2 * (x[0][i] + q[iOff])
			var h, dh float64
			if fixedV {
				h, dh = field.SphereForcePotentialsSlope(a, a, g, 1, -1)
			} else {
				h, dh = field.SphereForceChargesSlope(a, a, g, 1, -1)
			}
			f[i] = k * h * v * v
			if jac == nil {
				continue
			}
			for n, j := range wrt {
				var d float64
				switch {
				case j == iEps && fixedV:
					d = f[i] / eps
				case j == iEps:
					d = -f[i] / eps
				case j == iOff:
					d = 2 * k * dh * v * v
				case j == iVc && fixedV:
					d = -2 * k * h * v
				case j == iTau && leak:
					d = 2 * f[i] * x[pTime][i] / (q[iTau] * q[iTau])
				}
				jac[n][i] = d
			}
		}
		return true
	}
	m.Start = func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
		eps, err := m.startPermittivity(q, iEps, fixedV, out, x, y)
		if err != nil {
			return nil, err
		}
		return startAt(q, free, iEps, eps), nil
	}
	m.Check = func(q []float64, x [][]float64, y []float64) ([]error, error) {
		var warn []error
		highest := 0.0
		for i, d := range x[0] {
			if d += q[iOff]; d <= 0 {
				return nil, &RowError{Row: i, Err: fmt.Errorf("gap %.6g mm: must be above zero; the sphere would be in the plane", 1e3*d)}
			}
			highest = math.Max(highest, d+q[iA])
			if leak && x[pTime][i] < 0 {
				return nil, &RowError{Row: i, Err: fmt.Errorf("the charge is taken to leak from time zero; this reading is at %.6g s, before it", x[pTime][i])}
			}
		}
		if r := q[iReach]; r > 0 && r < planeReach*highest {
			warn = append(warn, fmt.Errorf("quantities.plane_radius: the plane reaches %.3g heights of the sphere's centre (%.4g mm at the most); the image formula is for a wide plane, want %g or a stated uncertainty", r/highest, 1e3*highest, planeReach))
		}
		if err := m.checkSigns(q, iEps, si.Eps0, out, x, y, func(int) string { return "a sphere and an earthed plane" }); err != nil {
			return nil, err
		}
		if !fixedV {
			warn = append(warn, dampAir(q[iH])...)
		}
		return append(warn, breakdownWarning(m.Hazard(q, x))...), nil
	}
	m.Hazard = func(q []float64, x [][]float64) Hazard {
		h, worst := Hazard{}, -1.0
		delta := airDensity(q[iT], q[iP])
		for i, d := range x[0] {
			gap := d + q[iOff]
			c, err := field.SpherePlaneCapacitance(si.Eps0, q[iA], gap)
			if err != nil {
				continue // Check refuses the row
			}
			v := source(q, x, i)
			if !fixedV {
				v /= c
			}
			h.meetSphere(i, c*v, q[iA], delta, &worst)
			h.meet(i, v, v/gap, gap, math.Max(c, q[iCap]), delta, &worst)
		}
		return h
	}
	newAirMedium(k).measurands(m, s.On["air"])
	gap := func(q, x []float64) float64 { return x[0] + q[iOff] }
	m.Causes = []Cause{
		{Name: "gap_offset", Doc: "grows as 1/gap relative to the force: zero of the gap scale",
			Signature: func(q, x []float64, f, t float64) float64 { return f / gap(q, x) }},
		{Name: "plane", Doc: "grows with the height relative to the force: a plane that is not wide, or earthed surroundings",
			Signature: func(q, x []float64, f, t float64) float64 { return f * (gap(q, x) + q[iA]) }},
		{Name: "zero", Doc: "the same at every gap: zero of the balance",
			Signature: always},
		{Name: "drift", Doc: "proportional to time, whatever the force: drift of the balance",
			Signature: withTime},
	}
	if fixedV {
		m.Causes = append(m.Causes, Cause{Name: "contact_potential", Doc: "changes sign with the polarity and falls as 1/voltage relative to the force: contact potential",
			Signature: perVolt(pSource, iVc)})
		return m, nil
	}
	name := "leakage"
	if leak {
		name = "corrections.leakage.time_constant" // left out of the ranking while the fit adjusts it
	}
	m.Causes = append(m.Causes, Cause{Name: name, Doc: "proportional to force and time: the sphere loses charge",
		Signature: func(q, x []float64, f, t float64) float64 {
			if pTime < len(x) {
				return f * x[pTime]
			}
			return f * t
		}})
	return m, nil
}
