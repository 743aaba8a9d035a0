package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// SphereField is the calibration of a field meter in the field of a lone sphere at
// a known potential,
//
//	E = (V − V_c) a/r²,
//
// that of a point charge 4πεaV at its centre (field.SphereField). The permittivity
// does not enter. The indication is fitted as K(E + E₀).
//
// With an earthed floor a height h below sphere and head, the sphere's capacitance
// is that of sphere and plane, C, and the image of its charge takes from the
// horizontal field the part r³/(r² + 4h²)^(3/2): to first order (derived)
//
//	E = V (C/4πε)/r² · [1 − r³/(r² + 4h²)^(3/2)].
//
// A head that is a sphere of radius b and senses the charge of one hemisphere
// answers to the odd multipoles of a field that is not uniform. In that of a point
// charge at r, whose n-th multipole makes the surface charge (2n+1)(b/r)^(n−1)
// P_n(cos θ) times that of a uniform field over 3, it reads (derived, the integrals
// of P₁, P₃, P₅ over a hemisphere being 1/2, −1/8, 1/16)
//
//	E [1 − (7/12)(b/r)² + (11/24)(b/r)⁴ − …].
//
// A head that senses its dipole reads the field at its centre, the first multipole
// of any field. What the head does back to the charge of the sphere, −ab³/r⁴ of the
// field, is left out.
var SphereField = register(&Kind{
	Name:  "sphere-field",
	Title: "Field meter in the field of a sphere",
	Doc: "A field meter reads the field of a sphere at a known potential, at various distances from its centre; " +
		"the fit gives its response and correction factor for each range, as found and as left.",
	Channels: []Channel{
		{Name: "voltage", Doc: "potential of the sphere", Unit: si.MustUnit("kV"), Role: Predictor},
		{Name: "distance", Doc: "distance of the meter's reference point from the centre of the sphere, as read on the scale", Unit: si.MustUnit("mm"), Role: Predictor, Positive: true},
		{Name: "indication", Doc: "field that the meter indicates, away from a positive sphere", Unit: si.MustUnit("kV/m"), Role: Response},
	},
	Scalars: []Scalar{
		responseScalar, zeroOffsetScalar,
		{Table: "quantities", Name: "radius", Doc: "radius of the sphere", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "sphere"},
		{Table: "quantities", Name: "contact_potential", Doc: "contact potential and surface charge, subtracted from the voltage", Unit: si.MustUnit("V"), Adjustable: true, Part: "sphere"},
		{Table: "quantities", Name: "distance_offset", Doc: "zero error of the distance scale, added to the reading", Unit: si.MustUnit("mm"), Adjustable: true, Part: "distance"},
		{Table: "corrections.floor", Name: "height", Doc: "height of sphere and head above the earthed floor", Unit: si.MustUnit("m"), Required: true, Positive: true, Part: "surroundings"},
		{Table: "corrections.floor", Name: "model", Doc: "relative error of the correction: other surroundings, what is left out", Unit: si.MustUnit("1"), Default: gum.Rectangular(0, 0.25), Part: "surroundings"},
		{Table: "corrections.head", Name: "radius", Doc: "radius of the sphere that stands for the head", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "meter"},
		{Table: "corrections.head", Name: "model", Doc: "relative error of the correction: a head that is no sphere", Unit: si.MustUnit("1"), Default: gum.Rectangular(0, field.HeadResidual), Part: "meter"},
		temperature, pressure, humidity,
	},
	Corrections: []Correction{
		{Name: "floor", Doc: "earthed floor under sphere and head"},
		{Name: "head", Doc: "head that averages a field that is not uniform"},
	},
	Options:  []Option{{Key: "corrections.head.sensing", Doc: "what the head senses", Values: []string{"hemisphere-charge", "dipole"}, Default: "hemisphere-charge"}},
	SeriesBy: []string{"phase", "range"},
	Prepare:  prepareSphereField,
})

// Limits of the corrections of a sphere's field: the floor at three radii and the
// whole distance or more, where the parts left out are of the order of the
// uncertainty carried, and the head small against the distance.
const (
	floorLimit     = 3.0
	headFieldLimit = 0.3
)

// unitCapacity is the permittivity (F/m) with which capacities are lengths.
const unitCapacity = 1 / (4 * math.Pi)

// The parts of (b/r)² and (b/r)⁴ in what a hemisphere reads; see SphereField.
const (
	thirdMultipole = 7. / 12
	fifthMultipole = 11. / 24
)

func prepareSphereField(k *Kind, s *Setup) (*Model, error) {
	at := k.Scalar
	iK, iZero, iA, iVc, iOff := at("response"), at("zero_offset"), at("radius"), at("contact_potential"), at("distance_offset")
	iHeight, iFloor, iHead, iHeadModel := at("corrections.floor.height"), at("corrections.floor.model"), at("corrections.head.radius"), at("corrections.head.model")
	iT, iP, iH := at("environment.temperature"), at("environment.pressure"), at("environment.humidity")
	floor, head := s.On["floor"], s.On["head"]
	if head && s.Options["corrections.head.sensing"] == "dipole" {
		return nil, fmt.Errorf("corrections.head: a head that senses its dipole reads the field at its centre, and nothing is to be corrected; write use = false")
	}
	m := &Model{Response: "indication", Predictors: []string{"voltage", "distance"}}
	m.Row = func(q, x []jet.Jet) jet.Jet {
		r := x[1].Add(q[iOff])
		e := field.SphereFieldJet(q[iA], x[0].Sub(q[iVc]), r)
		if floor {
			h := q[iHeight]
			c := field.SpherePlaneCapacitanceJet(jet.Const(unitCapacity), q[iA], h.Sub(q[iA])).Div(q[iA])
			image := r.Div(r.Sqr().Add(h.Sqr().Scale(4)).Sqrt()).Pow(3)
			more := c.Mul(image.Neg().Plus(1)).Plus(-1)
			e = e.Mul(more.Mul(q[iFloor].Plus(1)).Plus(1))
		}
		if head {
			u := q[iHead].Div(r).Sqr()
			more := u.Scale(fifthMultipole).Plus(-thirdMultipole).Mul(u)
			e = e.Mul(more.Mul(q[iHeadModel].Plus(1)).Plus(1))
		}
		return e.Add(q[iZero]).Mul(q[iK])
	}
	m.Block = func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
		for _, j := range wrt {
			if j != iK && j != iZero && j != iOff && j != iVc {
				return false
			}
		}
		a, h2, c := q[iA], 0.0, 1.0
		if floor {
			h2 = 4 * q[iHeight] * q[iHeight]
			c = field.SpherePlaneCapacitanceJet(jet.Const(unitCapacity), jet.Const(a), jet.Const(q[iHeight]-a)).V / a
		}
		b2 := 0.0
		if head {
			b2 = q[iHead] * q[iHead]
		}
		gf, gh := 1+q[iFloor], 1+q[iHeadModel]
		for i := lo; i < hi; i++ {
			v, r := x[0][i]-q[iVc], x[1][i]+q[iOff]
			unit := a / (r * r)
			dunit := -2 * unit / r
			if floor {
				s2 := r*r + h2
				image := r * r * r / (s2 * math.Sqrt(s2))
				t := 1 + gf*(c*(1-image)-1)
				dt := -gf * c * image * (3/r - 3*r/s2)
				unit, dunit = unit*t, dunit*t+unit*dt
			}
			if head {
				u := b2 / (r * r)
				t := 1 + gh*u*(fifthMultipole*u-thirdMultipole)
				dt := gh * (2*fifthMultipole*u - thirdMultipole) * (-2 * u / r)
				unit, dunit = unit*t, dunit*t+unit*dt
			}
			e := v*unit + q[iZero]
			f[i] = q[iK] * e
			if jac == nil {
				continue
			}
			for n, j := range wrt {
				switch j {
				case iK:
					jac[n][i] = e
				case iZero:
					jac[n][i] = q[iK]
				case iOff:
					jac[n][i] = q[iK] * v * dunit
				case iVc:
					jac[n][i] = -q[iK] * unit
				}
			}
		}
		return true
	}
	m.Start = func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
		v := m.proportional(q, iK, x, y)
		if v == 0 || math.IsNaN(v) || math.IsInf(v, 0) {
			return nil, fmt.Errorf("readings of indication: no response to the field at any voltage; check the columns voltage and indication")
		}
		return startAt(q, free, iK, v), nil
	}
	m.Check = func(q []float64, x [][]float64, y []float64) ([]error, error) {
		for i, d := range x[1] {
			r := d + q[iOff]
			switch {
			case r <= q[iA]:
				return nil, &RowError{Row: i, Err: fmt.Errorf("channels.distance: %.6g mm from the centre lies inside the sphere, whose radius is %.6g mm and where there is no field", 1e3*r, 1e3*q[iA])}
			case head && q[iHead] > headFieldLimit*r:
				return nil, &RowError{Row: i, Err: fmt.Errorf("corrections.head.radius: %.4g mm is more than %.2g of the distance (%.4g mm); the correction holds for smaller heads: go farther away", 1e3*q[iHead], headFieldLimit, 1e3*r)}
			case head && r < q[iA]+q[iHead]:
				return nil, &RowError{Row: i, Err: fmt.Errorf("channels.distance: %.4g mm from centre to centre; head and sphere overlap below %.4g mm", 1e3*r, 1e3*(q[iA]+q[iHead]))}
			case floor && r > q[iHeight]:
				return nil, &RowError{Row: i, Err: fmt.Errorf("corrections.floor: the distance, %.4g m, is beyond the height above the floor, %.4g m; the correction holds for nearer heads", r, q[iHeight])}
			}
		}
		if floor && q[iHeight] < floorLimit*q[iA] {
			return nil, fmt.Errorf("corrections.floor.height: %.4g m is less than %g radii of the sphere (%.4g m); the correction holds higher up", q[iHeight], floorLimit, q[iA])
		}
		var warn []error
		if !floor {
			warn = append(warn, fmt.Errorf("corrections.floor is off: the field is taken to be that of a sphere far from everything; a floor at ten times the distance changes it by more than 0.1 %%"))
		}
		warn = append(warn, dampAir(q[iH])...)
		return append(warn, breakdownWarning(m.Hazard(q, x))...), nil
	}
	m.Hazard = func(q []float64, x [][]float64) Hazard {
		h, worst := Hazard{}, -1.0
		delta := airDensity(q[iT], q[iP])
		for i, v := range x[0] {
			h.meet(i, v, v/q[iA], q[iA], 4*math.Pi*si.Eps0*q[iA], delta, &worst)
		}
		return h
	}
	m.Measurands = []Measurand{
		{Name: "correction_factor", Doc: "reference over indicated field, N = 1/K", Unit: si.MustUnit("1"),
			Value: func(q []jet.Jet) jet.Jet { return q[iK].Inv() }},
		{Name: "response", Doc: "indicated over reference field, K", Unit: si.MustUnit("1"),
			Value: func(q []jet.Jet) jet.Jet { return q[iK] }},
	}
	distance := func(q, x []float64) float64 { return x[1] + q[iOff] }
	m.Causes = []Cause{
		{Name: "distance_offset", Doc: "grows as 1/distance relative to the indication: zero of the distance scale",
			Signature: func(q, x []float64, f, t float64) float64 { return f / distance(q, x) }},
		{Name: "contact_potential", Doc: "falls as 1/distance² whatever the voltage: contact potential, surface charge",
			Signature: func(q, x []float64, f, t float64) float64 { r := distance(q, x); return 1 / (r * r) }},
		{Name: "head", Doc: "grows as 1/distance² relative to the indication: a head that averages the field",
			Signature: func(q, x []float64, f, t float64) float64 { r := distance(q, x); return f / (r * r) }},
		{Name: "surroundings", Doc: "grows with the distance relative to the indication: floor, walls, operator",
			Signature: func(q, x []float64, f, t float64) float64 { return f * distance(q, x) }},
		{Name: "zero_offset", Doc: "the same at every field: zero of the meter",
			Signature: always},
		{Name: "nonlinearity", Doc: "as the square of the indication: a meter that is not linear",
			Signature: func(q, x []float64, f, t float64) float64 { return f * math.Abs(f) }},
		{Name: "drift", Doc: "proportional to time, whatever the field: drift of the zero",
			Signature: withTime},
	}
	return m, nil
}
