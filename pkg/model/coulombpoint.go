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

// CoulombPoint is the force between two charged bodies small against their
// distance (Coulomb 1785),
//
//	F = q₁q₂/(4πε r²),  r = reading + distance_offset,
//
// positive for repulsion. As a test of the law the exponent may be freed: the
// distance then enters as (r/r₀)⁻ⁿ/r₀² with the fixed reference distance r₀
// (field.PowerForceJet).
var CoulombPoint = register(&Kind{
	Name:  "coulomb-point",
	Title: "Coulomb's law with point charges",
	Doc: "Two small charged bodies at a distance that is large against their size; the force, read in newtons, on a balance or by a torsion " +
		"balance, gives the permittivity of the medium and Coulomb's constant. The exponent of the law can be tested.",
	Channels: append(append(twoChargeChannels(""),
		forceChannels("repulsion positive")...), angleChannel),
	Scalars: slices.Concat(mediumScalars, chargeScalars, []Scalar{
		{Table: "quantities", Name: "exponent", Doc: "exponent of the law; adjust = true tests it", Unit: si.MustUnit("1"), Default: gum.Exactly(2), Adjustable: true, Part: "law"},
		{Table: "quantities", Name: "reference_distance", Doc: "distance within the readings at which a law with another exponent has the strength stated", Unit: si.MustUnit("mm"), Default: gum.Exactly(0.1), Positive: true, Part: "law"},
		{Table: "corrections.induction", Name: "radius_1", Doc: "radius of the first conducting sphere", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "bodies"},
		{Table: "corrections.induction", Name: "radius_2", Doc: "radius of the second conducting sphere", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "bodies"},
		{Table: "corrections.induction", Name: "model", Doc: "relative error of the induced part", Unit: si.MustUnit("1"), Default: gum.Rectangular(0, 0.1), Part: "bodies"},
	}, leakScalars, torsionScalars, balanceScalars),
	Corrections: []Correction{
		{Name: "induction", Doc: "charge that conducting spheres induce on each other, single images"},
		{Name: "leakage", Doc: "charge lost since it was measured, exponential; a force of two such charges falls twice as fast"},
		{Name: "air", Doc: "moist air of the medium, for the permittivity of vacuum"},
		balanceCorrection,
	},
	Options: []Option{torsionOption},
	Prepare: prepareCoulombPoint,
})

// inductionLimit is the least centre distance over the larger radius for which the
// single images of the induction correction are offered: against the exact series
// they leave less than a tenth of the correction out (a test holds this).
const inductionLimit = 5.0

// singleImage is 4πε times the force that a charge q draws from the charge which
// it induces on an isolated conducting sphere of radius a at centre distance r
// (Maxwell, Treatise, arts. 157–160; Jackson, Classical Electrodynamics, 3rd ed.,
// equation (2.9) without the sphere's own charge), negative for attraction:
//
//	−q² a³(2r² − a²)/(r³(r² − a²)²).
func singleImage(q, a, r float64) (f, df float64) {
	a2, r2 := a*a, r*r
	d := r2 - a2
	f = -q * q * a * a2 * (2*r2 - a2) / (r * r2 * d * d)
	df = f * (4*r/(2*r2-a2) - 3/r - 4*r/d)
	return f, df
}

func singleImageJet(q, a, r jet.Jet) jet.Jet {
	a2, r2 := a.Sqr(), r.Sqr()
	return q.Sqr().Mul(a).Mul(a2).Mul(r2.Scale(2).Sub(a2)).Div(r.Mul(r2).Mul(r2.Sub(a2).Sqr())).Neg()
}

func prepareCoulombPoint(k *Kind, s *Setup) (*Model, error) {
	iEps, iOff, iN, iRef := k.Scalar("permittivity"), k.Scalar("distance_offset"), k.Scalar("exponent"), k.Scalar("reference_distance")
	iA, iB, iModel := k.Scalar("corrections.induction.radius_1"), k.Scalar("corrections.induction.radius_2"), k.Scalar("corrections.induction.model")
	iT, iP, iH := k.Scalar("environment.temperature"), k.Scalar("environment.pressure"), k.Scalar("environment.humidity")
	induction, free := s.On["induction"], s.Given["exponent"]
	if free && !s.Given["reference_distance"] {
		return nil, fmt.Errorf("quantities.reference_distance: is missing; with an exponent other than 2 the strength of the law is stated at a distance: name one within the readings")
	}
	reading, err := newForceReading(k, s)
	if err != nil {
		return nil, err
	}
	charges, err := newTwoCharges(k, s, false)
	if err != nil {
		return nil, err
	}

	m := &Model{Response: reading.response, Predictors: charges.predictors, TimeDependent: charges.byRow}
	// valueLaw is the force and its derivative by the distance for charges p, w;
	// point is the part of it that the exponent acts on.
	valueLaw := func(q []float64, p, w, r float64) (f, df, point float64) {
		k := 1 / (4 * math.Pi * q[iEps])
		n := q[iN]
		if free {
			r0 := q[iRef]
			point = k * p * w / (r0 * r0) * math.Pow(r/r0, -n)
		} else {
			point = k * p * w / (r * r)
		}
		f, df = point, -n*point/r
		if induction {
			fa, da := singleImage(w, q[iA], r)
			fb, db := singleImage(p, q[iB], r)
			g := k * (1 + q[iModel])
			f += g * (fa + fb)
			df += g * (da + db)
		}
		return f, df, point
	}
	m.Row = func(q, x []jet.Jet) jet.Jet {
		p, w := charges.jets(q, x)
		var plain []float64
		if reading.deflecting {
			plain = values(q)
		}
		return reading.row(q, x[0].Add(q[iOff]), func(r jet.Jet) jet.Jet {
			var f jet.Jet
			if free {
				f = field.PowerForceJet(q[iEps], p, w, r, q[iN], q[iRef].V)
			} else {
				f = field.PointForceJet(q[iEps], p, w, r)
			}
			if induction {
				g := singleImageJet(w, q[iA], r).Add(singleImageJet(p, q[iB], r))
				f = f.Add(g.Mul(q[iModel].Plus(1)).Div(q[iEps]).Scale(1 / (4 * math.Pi)))
			}
			return f
		}, func(r float64) (float64, float64) {
			f, df, _ := valueLaw(plain, p.V, w.V, r)
			return f, df
		})
	}
	m.Block = func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
		for _, j := range wrt {
			switch {
			case j == iEps || j == iOff || j == iN || j == reading.iRest:
			case j == charges.iTau && (!induction || q[charges.iRatio] == 1):
				// a force of second degree in charges that fall alike, or a plain product
			default:
				return false
			}
		}
		v := reading.at(q)
		var p, w float64
		law := func(r float64) (f, df float64) {
			f, df, _ = valueLaw(q, p, w, r)
			return f, df
		}
		for i := lo; i < hi; i++ {
			p, w = charges.values(q, x, i)
			y := v.read(x[0][i]+q[iOff], law)
			f[i] = y.y
			if jac == nil {
				continue
			}
			for n, j := range wrt {
				var d float64
				switch j {
				case iEps:
					d = -y.byF * y.f / q[iEps]
				case iOff:
					d = y.byDist
				case iN:
					if free {
						_, _, point := valueLaw(q, p, w, y.dist)
						d = -y.byF * point * math.Log(y.dist/q[iRef])
					}
				case reading.iRest:
					if reading.angle {
						d = 1
					}
				case charges.iTau:
					if charges.leak {
						d = y.byF * y.f * (1 + q[charges.iRatio]) * x[charges.pTime][i] / (q[charges.iTau] * q[charges.iTau])
					}
				}
				jac[n][i] = d
			}
		}
		return true
	}
	m.Start = func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
		eps, err := m.startPermittivity(q, iEps, false, reading, x, y)
		if err != nil {
			return nil, err
		}
		return startAt(q, free, iEps, eps), nil
	}
	m.Check = func(q []float64, x [][]float64, y []float64) ([]error, error) {
		nearest, farthest := math.Inf(1), 0.0
		for i, d := range x[0] {
			r := d + q[iOff]
			if r <= 0 {
				return nil, &RowError{Row: i, Err: fmt.Errorf("distance %.6g mm: must be above zero", 1e3*r)}
			}
			if induction {
				if a := math.Max(q[iA], q[iB]); r < inductionLimit*a {
					return nil, &RowError{Row: i, Err: fmt.Errorf("corrections.induction: distance %.4g mm is within %g radii (%g × %.4g mm = %.4g mm), where single images do not suffice; use model = \"sphere-pair\" or a larger distance", 1e3*r, inductionLimit, inductionLimit, 1e3*a, 1e3*inductionLimit*a)}
				}
			}
			nearest, farthest = math.Min(nearest, r), math.Max(farthest, r)
		}
		if free && (q[iRef] < nearest || q[iRef] > farthest) {
			return nil, fmt.Errorf("quantities.reference_distance: %.4g mm lies outside the distances of the readings (%.4g mm to %.4g mm)", 1e3*q[iRef], 1e3*nearest, 1e3*farthest)
		}
		warn, err := charges.check(q, x)
		if err != nil {
			return nil, err
		}
		if err := m.checkSigns(q, iEps, si.Eps0, reading, x, y, func(i int) string {
			p, w := charges.values(q, x, i)
			return likeness(p * w)
		}); err != nil {
			return nil, err
		}
		warn = append(warn, dampAir(q[iH])...)
		return append(warn, breakdownWarning(m.Hazard(q, x))...), nil
	}
	m.Hazard = func(q []float64, x [][]float64) Hazard {
		h, worst := Hazard{}, -1.0
		delta := airDensity(q[iT], q[iP])
		for i := range x[0] {
			p, w := charges.values(q, x, i)
			h.Charge = math.Max(h.Charge, math.Max(math.Abs(p), math.Abs(w)))
			if !induction {
				continue // potential, energy and field follow from radii that the bench does not state
			}
			v1, v2 := p/(4*math.Pi*si.Eps0*q[iA]), w/(4*math.Pi*si.Eps0*q[iB])
			h.Voltage = math.Max(h.Voltage, math.Max(math.Max(math.Abs(v1), math.Abs(v2)), math.Abs(v1-v2)))
			h.Energy = math.Max(h.Energy, 0.5*(p*v1+w*v2))
			h.meetSphere(i, p, q[iA], delta, &worst)
			h.meetSphere(i, w, q[iB], delta, &worst)
		}
		return h
	}
	newAirMedium(k).measurands(m, s.On["air"])
	if s.Adjusted["exponent"] {
		m.Measurands = append(m.Measurands, Measurand{Name: "exponent", Doc: "exponent of the law", Unit: si.MustUnit("1"),
			Value: func(q []jet.Jet) jet.Jet { return q[iN] }})
	}
	m.Causes = pairCauses(iOff, charges)
	return m, nil
}
