package model

import (
	"fmt"
	"math"
	"slices"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// The words of the option connection.
const (
	isolated  = "isolated"
	connected = "connected"
)

// SpherePair is the force between two conducting spheres, exact at any distance
// (field.SphereForceCharges, field.SphereForcePotentials): isolated spheres keep
// their charges while the distance changes, connected ones their potentials. The
// two differ from each other and from point charges by terms of order (a/r)³.
var SpherePair = register(&Kind{
	Name:  "sphere-pair",
	Title: "Force between two conducting spheres",
	Doc: "Two conducting spheres, isolated with known charges or connected to known potentials; the force at various distances, read in newtons, " +
		"on a balance or by a torsion balance, gives the permittivity of the medium and Coulomb's constant. Induced charge is part of the formula, however near the spheres.",
	Channels: append(append(twoChargeChannels(" (isolated)"),
		Channel{Name: "voltage_1", Doc: "potential of the first sphere (connected)", Unit: si.MustUnit("kV"), Role: Predictor, Optional: true},
		Channel{Name: "voltage_2", Doc: "potential of the second sphere (connected); without it both have that of the first", Unit: si.MustUnit("kV"), Role: Predictor, Optional: true}),
		append(forceChannels("repulsion positive"), angleChannel)...),
	Scalars:     slices.Concat(mediumScalars, chargeScalars, radiiScalars, leakScalars, torsionScalars, balanceScalars),
	Corrections: slices.Concat(pairCorrections, []Correction{{Name: "air", Doc: "moist air of the medium, for the permittivity of vacuum"}}),
	Options: []Option{torsionOption,
		{Key: "connection", Doc: "isolated: the spheres keep their charges; connected: to sources that keep their potentials", Values: []string{isolated, connected}}},
	Prepare: func(k *Kind, s *Setup) (*Model, error) { return prepareSpherePair(k, s, false) },
})

// SphereCharge is the same bench of isolated spheres turned round: with the
// permittivity known, the force gives their charge.
var SphereCharge = register(&Kind{
	Name:  "sphere-charge",
	Title: "Charge from the force between two spheres",
	Doc: "Two isolated conducting spheres in a medium of known permittivity; the force at various distances, read in newtons, on a balance or by a torsion " +
		"balance, gives the charge of the first. The charge of the second is known, or a known multiple of the first's, as after a touch. For the permittivity from known charges see sphere-pair.",
	Channels: []Channel{
		distanceChannel,
		{Name: "charge_2", Doc: "charge of the second sphere with its sign, when it is measured with each reading", Unit: si.MustUnit("nC"), Role: Predictor, Optional: true},
		elapsedChannel,
		{Name: "force", Doc: "force, repulsion positive", Unit: si.MustUnit("uN"), Role: Response},
		{Name: "mass", Doc: "indication of the balance, conventional mass, of the sign of the force; turn it round by a gain of -1", Unit: si.MustUnit("mg"), Role: Response},
		angleChannel,
	},
	Scalars: slices.Concat([]Scalar{
		{Table: "quantities", Name: "charge_1", Doc: "charge of the first sphere", Unit: si.MustUnit("nC"), Sought: true, Part: "result"},
		{Table: "quantities", Name: "charge_2", Doc: "charge of the second sphere, when it is known and has no channel", Unit: si.MustUnit("nC"), Part: "charges"},
		{Table: "quantities", Name: "charge_ratio", Doc: "charge of the second sphere over that of the first, when charge_2 is not stated: 1 after equal spheres have touched", Unit: si.MustUnit("1"), Default: gum.Exactly(1), Part: "charges"},
		chargeScalars[2], electricConstant, temperature, pressure, humidity,
		{Table: "quantities", Name: "relative_permittivity", Doc: "of the medium, in the place of the correction for air", Unit: si.MustUnit("1"), Default: gum.Exactly(1), Positive: true, Part: "medium"},
	}, radiiScalars, leakScalars, torsionScalars, balanceScalars),
	Corrections: slices.Concat(pairCorrections, []Correction{{Name: "air", Doc: "permittivity of moist air", Default: true}}),
	Options:     []Option{torsionOption},
	Prepare:     func(k *Kind, s *Setup) (*Model, error) { return prepareSpherePair(k, s, true) },
})

// radiiScalars are the radii of two spheres.
var radiiScalars = []Scalar{
	{Table: "quantities", Name: "radius_1", Doc: "radius of the first sphere", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "spheres"},
	{Table: "quantities", Name: "radius_2", Doc: "radius of the second sphere", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "spheres"},
}

// pairCorrections are those of a pair of spheres.
var pairCorrections = []Correction{
	{Name: "induction", Doc: "charge that the spheres induce on each other, exact; off: point charges at the centres", Default: true},
	{Name: "leakage", Doc: "charge lost since it was measured, exponential; a force of two such charges falls twice as fast"},
	balanceCorrection,
}

// held finds the potentials of connected spheres.
type held struct{ p1, p2 int }

func (h held) jets(x []jet.Jet) (v1, v2 jet.Jet)            { return x[h.p1], x[h.p2] }
func (h held) values(x [][]float64, i int) (v1, v2 float64) { return x[h.p1][i], x[h.p2][i] }
func (h held) row(x []float64) (v1, v2 float64)             { return x[h.p1], x[h.p2] }
func newHeld(s *Setup) (predictors []string, h held, err error) {
	for _, name := range []string{"charge_1", "charge_2", "elapsed"} {
		if s.Channels[name] || s.Given[name] {
			return nil, h, fmt.Errorf("connection: spheres that sources keep at their potentials have the charges that follow; take %s out, or say connection = %q", name, isolated)
		}
	}
	switch {
	case s.On["leakage"]:
		return nil, h, fmt.Errorf("corrections.leakage: sources keep the potentials of connected spheres, whatever leaks; switch it off, or say connection = %q", isolated)
	case !s.Channels["voltage_1"]:
		return nil, h, fmt.Errorf("channels.voltage_1: is missing; connected spheres need their potential")
	}
	predictors, h = []string{"distance", "voltage_1"}, held{1, 1}
	if s.Channels["voltage_2"] {
		predictors, h.p2 = append(predictors, "voltage_2"), 2
	}
	return predictors, h, nil
}

func prepareSpherePair(k *Kind, s *Setup, seekCharge bool) (*Model, error) {
	iEps, iOff, iA, iB := k.Scalar("permittivity"), k.Scalar("distance_offset"), k.Scalar("radius_1"), k.Scalar("radius_2")
	iT, iP, iH := k.Scalar("environment.temperature"), k.Scalar("environment.pressure"), k.Scalar("environment.humidity")
	induction, fixedV := s.On["induction"], s.Options["connection"] == connected
	out, err := newForceReading(k, s)
	if err != nil {
		return nil, err
	}
	iQ := k.Scalar("charge_1")
	epsJet, epsValue := func(q []jet.Jet) jet.Jet { return q[iEps] }, func(q []float64) float64 { return q[iEps] }
	if seekCharge {
		if epsJet, epsValue, err = knownMedium(k, s); err != nil {
			return nil, err
		}
	}
	m := &Model{Response: out.response}
	var charges *twoCharges
	var volts held
	if fixedV {
		if m.Predictors, volts, err = newHeld(s); err != nil {
			return nil, err
		}
	} else {
		for _, name := range []string{"voltage_1", "voltage_2"} {
			if s.Channels[name] {
				return nil, fmt.Errorf("channels.%s: isolated spheres keep their charges, not their potentials; name the charges, or say connection = %q", name, connected)
			}
		}
		if charges, err = newTwoCharges(k, s, seekCharge); err != nil {
			return nil, err
		}
		m.Predictors, m.TimeDependent = charges.predictors, charges.byRow
	}
	// source is what drives the force in a row: the two charges, or potentials.
	source := func(q []float64, x [][]float64, i int) (p, w float64) {
		if fixedV {
			return volts.values(x, i)
		}
		return charges.values(q, x, i)
	}
	valueLaw := func(q []float64, eps, p, w, r float64) (f, df float64) {
		a, b := q[iA], q[iB]
		k := 4 * math.Pi * eps
		if !fixedV {
			k = 1 / k
		}
		switch {
		case !induction && fixedV:
			f = a * b * p * w / (r * r)
			df = -2 * f / r
		case !induction:
			f = p * w / (r * r)
			df = -2 * f / r
		case fixedV:
			f, df = field.SphereForcePotentialsSlope(a, b, r-a-b, p, w)
		default:
			f, df = field.SphereForceChargesSlope(a, b, r-a-b, p, w)
		}
		return k * f, k * df
	}
	m.Row = func(q, x []jet.Jet) jet.Jet {
		var p, w jet.Jet
		if fixedV {
			p, w = volts.jets(x)
		} else {
			p, w = charges.jets(q, x)
		}
		a, b, eps := q[iA], q[iB], epsJet(q)
		var plain []float64
		if out.deflecting {
			plain = values(q)
		}
		return out.row(q, x[0].Add(q[iOff]), func(r jet.Jet) jet.Jet {
			switch {
			case !induction && fixedV:
				return field.PointForceJet(eps, field.SphereChargeJet(eps, a, p), field.SphereChargeJet(eps, b, w), r)
			case !induction:
				return field.PointForceJet(eps, p, w, r)
			case fixedV:
				return field.SphereForcePotentialsJet(eps, a, b, r.Sub(a).Sub(b), p, w)
			}
			return field.SphereForceChargesJet(eps, a, b, r.Sub(a).Sub(b), p, w)
		}, func(r float64) (float64, float64) { return valueLaw(plain, eps.V, p.V, w.V, r) })
	}
	m.Block = func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
		for _, j := range wrt {
			switch {
			case j >= 0 && (j == iEps || j == iOff || j == out.iRest):
			case seekCharge && j == iQ:
			case charges != nil && j == charges.iTau && q[charges.iRatio] == 1:
			default:
				return false
			}
		}
		v := out.at(q)
		eps := epsValue(q)
		var p, w float64
		law := func(r float64) (float64, float64) { return valueLaw(q, eps, p, w, r) }
		for i := lo; i < hi; i++ {
			p, w = source(q, x, i)
			y := v.read(x[0][i]+q[iOff], law)
			f[i] = y.y
			if jac == nil {
				continue
			}
			for n, j := range wrt {
				var d float64
				switch {
				case j == iEps && fixedV:
					d = y.byF * y.f / eps
				case j == iEps:
					d = -y.byF * y.f / eps
				case seekCharge && j == iQ && charges.share:
					d = 2 * y.byF * y.f / q[iQ]
				case seekCharge && j == iQ:
					// A force of second degree in this charge: its slope is the exact
					// difference of twice the charge and none.
					f2, _ := valueLaw(q, eps, 2*p, w, y.dist)
					f0, _ := valueLaw(q, eps, 0, w, y.dist)
					d = y.byF * (f2 - f0) / (2 * q[iQ])
				case j == iOff:
					d = y.byDist
				case j == out.iRest:
					if out.angle {
						d = 1
					}
				case charges != nil && charges.leak:
					d = y.byF * y.f * 2 * x[charges.pTime][i] / (q[charges.iTau] * q[charges.iTau])
				}
				jac[n][i] = d
			}
		}
		return true
	}
	m.Start = func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
		if seekCharge {
			charge, err := startCharge(q, epsValue(q), charges, out, x, iOff, y)
			if err != nil {
				return nil, err
			}
			return startAt(q, free, iQ, charge), nil
		}
		eps, err := m.startPermittivity(q, iEps, fixedV, out, x, y)
		if err != nil {
			return nil, err
		}
		return startAt(q, free, iEps, eps), nil
	}
	m.Check = func(q []float64, x [][]float64, y []float64) ([]error, error) {
		var warn []error
		nearest := math.Inf(1)
		for i, d := range x[0] {
			r, sum := d+q[iOff], q[iA]+q[iB]
			if r <= sum {
				return nil, &RowError{Row: i, Err: fmt.Errorf("distance %.6g mm: the spheres overlap; their centres must be farther apart than the sum of their radii, %.6g mm", 1e3*r, 1e3*sum)}
			}
			nearest = math.Min(nearest, r/math.Max(q[iA], q[iB]))
		}
		if !induction && nearest < 10 {
			warn = append(warn, fmt.Errorf("corrections.induction is off, and the spheres come within %.3g radii; at 10 radii induction is up to 0.4 %% of the force, at 4 about 6 %%", nearest))
		}
		if charges != nil {
			more, err := charges.check(q, x)
			if err != nil {
				return nil, err
			}
			warn = append(warn, more...)
		}
		scaled, at := iEps, si.Eps0
		if seekCharge {
			charge, err := startCharge(q, epsValue(q), charges, out, x, iOff, y)
			if err != nil {
				return nil, err
			}
			q = append([]float64(nil), q...)
			q[iQ] = charge
			scaled, at = iQ, charge
		}
		if err := m.checkSigns(q, scaled, at, out, x, y, func(i int) string {
			p, w := source(q, x, i)
			if fixedV {
				return fmt.Sprintf("spheres at %.4g V and %.4g V", p, w)
			}
			return likeness(p * w)
		}); err != nil {
			return nil, err
		}
		if !fixedV {
			warn = append(warn, dampAir(q[iH])...)
		}
		return append(warn, breakdownWarning(m.Hazard(q, x))...), nil
	}
	m.Hazard = func(q []float64, x [][]float64) Hazard {
		return pairHazard(q[iA], q[iB], airDensity(q[iT], q[iP]), x[0], q[iOff], fixedV, func(i int) (p, w float64) { return source(q, x, i) })
	}
	if seekCharge {
		m.Measurands = []Measurand{{Name: "charge_1", Doc: "charge of the first sphere, at the time of its measurement", Unit: si.MustUnit("nC"),
			Value: func(q []jet.Jet) jet.Jet { return q[iQ] }}}
	} else {
		newAirMedium(k).measurands(m, s.On["air"])
	}
	if fixedV {
		m.Causes = heldCauses(iOff, volts)
	} else {
		m.Causes = pairCauses(iOff, charges)
	}
	return m, nil
}

// startCharge is the first charge with which point charges come nearest to the
// readings y.
func startCharge(q []float64, eps float64, c *twoCharges, r *forceReading, x [][]float64, iOff int, y []float64) (float64, error) {
	const unit = 1e-9
	w := append([]float64(nil), q...)
	w[c.iQ[0]] = unit
	v := r.at(q)
	f := make([]float64, len(y))
	for i := range f {
		p, s := c.values(w, x, i)
		d := x[0][i] + q[iOff]
		f[i] = v.rest + v.unit*p*s/(4*math.Pi*eps*d*d)
	}
	k := strength(f, y, v.rest)
	switch {
	case c.share && !(k > 0):
		return 0, fmt.Errorf("readings of %s: on the whole they have not the sign that charges in the ratio charge_ratio demand (repulsion is positive); check the signs of the ratio and of the channel, and the zero", r.response)
	case c.share:
		return unit * math.Sqrt(k), nil
	case k == 0 || math.IsNaN(k) || math.IsInf(k, 0):
		return 0, fmt.Errorf("readings of %s: no force at any distance; there is nothing to find the charge from", r.response)
	}
	return unit * k, nil
}

// pairHazard is what two spheres at readings distance + offset hold, from their
// charges or potentials. The field at the electrode is the larger, against
// breakdown, of a sphere's own surface field and the mean field between them.
func pairHazard(a, b, delta float64, distance []float64, offset float64, fixedV bool, source func(i int) (p, w float64)) Hazard {
	h, worst := Hazard{}, -1.0
	for i, d := range distance {
		gap := d + offset - a - b
		caa, cab, cbb, err := field.SphereCapacities(si.Eps0, a, b, gap)
		if err != nil {
			continue // Check refuses the row
		}
		v1, v2 := source(i)
		if !fixedV {
			det := caa*cbb - cab*cab
			v1, v2 = (cbb*v1-cab*v2)/det, (caa*v2-cab*v1)/det
		}
		q1, q2 := caa*v1+cab*v2, cab*v1+cbb*v2
		h.Voltage = math.Max(h.Voltage, math.Max(math.Max(math.Abs(v1), math.Abs(v2)), math.Abs(v1-v2)))
		h.Charge = math.Max(h.Charge, math.Max(math.Abs(q1), math.Abs(q2)))
		h.Energy = math.Max(h.Energy, 0.5*(q1*v1+q2*v2))
		h.meetSphere(i, q1, a, delta, &worst)
		h.meetSphere(i, q2, b, delta, &worst)
		h.meet(i, v1-v2, (v1-v2)/gap, gap, 0, delta, &worst)
	}
	return h
}

// heldCauses are the marks in the residuals of a force between spheres at fixed
// potentials.
func heldCauses(iOff int, v held) []Cause {
	return []Cause{
		{Name: "distance_offset", Doc: "grows as 1/distance relative to the force: zero of the distance scale",
			Signature: func(q, x []float64, f, t float64) float64 { return f / (x[0] + q[iOff]) }},
		{Name: "radius", Doc: "as 1/distance³ relative to the force: induction, the radii of the spheres",
			Signature: func(q, x []float64, f, t float64) float64 { r := x[0] + q[iOff]; return f / (r * r * r) }},
		{Name: "contact_potential", Doc: "changes sign with the polarity and falls as 1/voltage relative to the force: contact potential, or zero of the voltmeter",
			Signature: func(q, x []float64, f, t float64) float64 {
				v1, v2 := v.row(x)
				if v1 == 0 || v2 == 0 {
					return 0
				}
				return f * (1/v1 + 1/v2)
			}},
		{Name: "surroundings", Doc: "grows with the distance relative to the force: earthed surroundings",
			Signature: func(q, x []float64, f, t float64) float64 { return f * (x[0] + q[iOff]) }},
		{Name: "zero", Doc: "the same at every distance: zero of the balance",
			Signature: always},
		{Name: "drift", Doc: "proportional to time, whatever the force: drift of the balance",
			Signature: withTime},
	}
}
