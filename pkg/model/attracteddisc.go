package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// AttractedDisc is the attracted disc: the force on a disc opposite a plate at a
// known voltage and spacing, weighed on a balance (Maxwell, Treatise, arts.
// 216–218). The fit gives the permittivity of the gap. Guarded, the disc lies in
// the plane of its guard ring; unguarded, two thin equal discs face each other,
// and the field at their edges is that of Love's equation (field.DiscForce) for
// the drive that the bench states.
var AttractedDisc = register(&Kind{
	Name:  "attracted-disc",
	Title: "Attracted-disc balance",
	Doc: "A disc, within a guard ring or without, is attracted by a parallel plate at a known voltage and spacing; " +
		"the force, read in newtons or as the indication of a balance, gives the permittivity of the gap.",
	Channels: []Channel{
		{Name: "voltage", Doc: "voltage of the plate against disc and guard", Unit: si.MustUnit("kV"), Role: Predictor},
		{Name: "gap", Doc: "spacing of plate and disc as read on the micrometer", Unit: si.MustUnit("mm"), Role: Predictor, Positive: true},
		{Name: "force", Doc: "force of attraction on the disc", Unit: si.MustUnit("mN"), Role: Response},
		{Name: "mass", Doc: "indication of the balance, conventional mass", Unit: si.MustUnit("g"), Role: Response},
	},
	Scalars: append([]Scalar{
		{Table: "quantities", Name: "permittivity", Doc: "permittivity of the gap", Unit: si.MustUnit("pF/m"), Sought: true, Positive: true, Part: "result"},
		{Table: "quantities", Name: "contact_potential", Doc: "contact potential, subtracted from the voltage", Unit: si.MustUnit("V"), Adjustable: true, Part: "electrodes"},
		{Table: "quantities", Name: "gap_offset", Doc: "zero error of the spacing scale, added to the reading", Unit: si.MustUnit("um"), Adjustable: true, Part: "electrodes"},
		{Table: "quantities", Name: "disc_radius", Doc: "radius of the disc", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "electrodes"},
		{Table: "quantities", Name: "guard_gap", Doc: "width of the gap between disc and guard ring; a guarded disc needs it", Unit: si.MustUnit("mm"), Positive: true, Part: "electrodes"},
		{Table: "quantities", Name: "bench_capacitance", Doc: "capacitance of everything at high voltage, for the stored energy (default: the disc alone)", Unit: si.MustUnit("pF"), NotNegative: true, Part: "safety"},
		electricConstant,
		{Table: "corrections.guard_gap", Name: "model", Doc: "relative error of the deep-slot formula of the guard gap", Unit: si.MustUnit("1"), Default: gum.Normal(0, field.SlotAreaUncertainty), Part: "electrodes"},
		{Table: "corrections.wedge", Name: "half_difference", Doc: "plates not parallel: half the difference of spacing across the disc", Unit: si.MustUnit("um"), Required: true, Squared: true, Part: "electrodes"},
		{Table: "corrections.coplanarity", Name: "step", Doc: "height of the disc above the plane of the guard", Unit: si.MustUnit("um"), Required: true, Part: "electrodes"},
		{Table: "corrections.coplanarity", Name: "edge", Doc: "coefficient of the edge term, in step/radius", Unit: si.MustUnit("1"), Default: gum.Rectangular(0, 2), Part: "electrodes"},
		{Table: "corrections.edge", Name: "model", Doc: "relative error of the edge's part of the force: thickness and rounding of the edges, surroundings", Unit: si.MustUnit("1"), Default: gum.Exactly(0), Part: "electrodes"},
		temperature, pressure, humidity,
	}, balanceScalars...),
	Corrections: []Correction{
		{Name: "guard_gap", Doc: "effective area of the disc with its guard gap", Default: true},
		{Name: "wedge", Doc: "plates not parallel"},
		{Name: "coplanarity", Doc: "disc proud of the guard plane"},
		{Name: "edge", Doc: "field at the edge of unguarded discs, exact for two thin equal ones with earthed surroundings far away"},
		{Name: "air", Doc: "moist air of the gap, for the permittivity of vacuum"},
		balanceCorrection,
	},
	Options: []Option{
		{Key: "electrodes", Doc: "disc within a guard ring at its potential, or two equal discs without", Values: []string{"guarded", "unguarded"}, Default: "guarded"},
		{Key: "drive.kind", Doc: "how the voltage stands against earth; matters to unguarded discs", Values: []string{driveBalanced, driveOneEarthed}, Default: driveBalanced},
	},
	Prepare: prepareAttractedDisc,
})

func prepareAttractedDisc(k *Kind, s *Setup) (*Model, error) {
	at := func(key string) int { return k.Scalar(key) }
	iEps, iVc, iOff, iR, iG := at("permittivity"), at("contact_potential"), at("gap_offset"), at("disc_radius"), at("guard_gap")
	iCap := at("bench_capacitance")
	iModel, iWedge := at("corrections.guard_gap.model"), at("corrections.wedge.half_difference")
	iStep, iEdge := at("corrections.coplanarity.step"), at("corrections.coplanarity.edge")
	iT, iP, iH := at("environment.temperature"), at("environment.pressure"), at("environment.humidity")
	iEdgeModel := at("corrections.edge.model")

	perMass, perMassValue, err := forcePerMass(k, s)
	if err != nil {
		return nil, err
	}
	response := "force"
	if perMass != nil {
		response = "mass"
	}
	edge, drive, err := discEdge(s)
	if err != nil {
		return nil, err
	}
	unguarded := s.Options["electrodes"] == "unguarded"
	guard, wedge, coplanar := s.On["guard_gap"], s.On["wedge"], s.On["coplanarity"]
	wedgeC, err := field.WedgeCoefficient(field.Disc, field.OnForce)
	if err != nil {
		return nil, err
	}

	m := &Model{Response: response, Predictors: []string{"voltage", "gap"}}
	m.Row = func(q, x []jet.Jet) jet.Jet {
		d := x[1].Add(q[iOff])
		v := x[0].Sub(q[iVc])
		r := q[iR]
		var area jet.Jet
		if guard {
			area = field.GuardedForceAreaJet(r, r.Add(q[iG]), d).Mul(q[iModel].Plus(1))
		} else {
			area = r.Sqr().Scale(math.Pi)
		}
		f := q[iEps].Mul(area).Mul(v.Div(d).Sqr()).Scale(0.5)
		if edge {
			more := field.DiscForceJet(drive, q[iEps], r, d, v).Sub(f)
			f = f.Add(more.Mul(q[iEdgeModel].Plus(1)))
		}
		if wedge {
			f = f.Mul(q[iWedge].Div(d.Sqr()).Scale(wedgeC).Plus(1))
		}
		if coplanar {
			f = f.Mul(field.CoplanarityForceJet(q[iStep], d)).Mul(q[iEdge].Mul(q[iStep]).Div(r).Plus(1))
		}
		if response == "mass" {
			f = f.Div(perMass(q))
		}
		return f
	}
	m.Block = func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
		for _, j := range wrt {
			if j != iEps && j != iVc && j != iOff {
				return false
			}
		}
		// A_F = a + b D²/(D+α)²: GuardedForceArea rearranged so that its
		// derivative by D stays one line.
		r := q[iR]
		a, b, alpha := math.Pi*r*r, 0.0, 0.0
		scale := 0.5 * q[iEps]
		if guard {
			rg := r + q[iG]
			b = 0.5 * math.Pi * (rg*rg - r*r)
			alpha = field.SlotLength(r, rg)
			scale *= 1 + q[iModel]
		}
		tilt, step, rim := 0.0, 0.0, 1.0
		if wedge {
			tilt = wedgeC * q[iWedge]
		}
		if coplanar {
			step = q[iStep]
			rim = 1 + q[iEdge]*step/r
		}
		if response == "mass" {
			scale /= perMassValue(q)
		}
		vc, off := q[iVc], q[iOff]
		xv, xd := x[0], x[1]
		for i := lo; i < hi; i++ {
			d := xd[i] + off
			v := xv[i] - vc
			inv := 1 / d
			s := 1 / (d + alpha)
			e := v * inv
			u := d * s
			area := a + b*u*u
			dArea := 2 * b * d * alpha * s * s * s
			if edge {
				// Love's force over εv²/2d² in the place of an area, −κ²R²c′(κ),
				// with its derivative by d.
				kappa := d / r
				love := field.DiscCoefficient(drive, kappa)
				m := 1 + q[iEdgeModel]
				area += m * (-d*d*love[1] - area)
				dArea = -m * (2*d*love[1] + d*kappa*love[2])
			}
			t := 1 + tilt*inv*inv
			p := d / (d - step)
			c := p * p * rim
			g := scale * e * e
			h := g * area * t * c
			f[i] = h
			if jac == nil {
				continue
			}
			for k, j := range wrt {
				switch j {
				case iEps:
					jac[k][i] = h / q[iEps]
				case iVc:
					jac[k][i] = -2 * scale * e * inv * area * t * c
				case iOff:
					jac[k][i] = g * c * (dArea*t - 2*area*(t*inv+tilt*inv*inv*inv+t*(p-1)*inv))
				}
			}
		}
		return true
	}
	m.Start = func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
		eps := m.proportional(q, iEps, x, y)
		if math.IsNaN(eps) {
			return nil, fmt.Errorf("readings of %s: the force expected of every reading is zero or beyond the range of numbers; check the voltages and dimensions", response)
		}
		if !(eps > 0) {
			return nil, fmt.Errorf("readings of %s: no attraction at any voltage (rough permittivity %.3g F/m); check the sign and the zero of the channel", response, eps)
		}
		return startAt(q, free, iEps, eps), nil
	}
	m.Check = func(q []float64, x [][]float64, y []float64) ([]error, error) {
		var warn []error
		minGap, maxGap := math.Inf(1), 0.0
		for i, d := range x[1] {
			if d+q[iOff] <= 0 {
				return nil, &RowError{Row: i, Err: fmt.Errorf("gap %.6g mm: must be above zero", 1e3*(d+q[iOff]))}
			}
			minGap, maxGap = math.Min(minGap, d+q[iOff]), math.Max(maxGap, d+q[iOff])
		}
		if edge && maxGap > field.DiscLimit*q[iR] {
			return nil, fmt.Errorf("corrections.edge: the solution is tabulated up to a gap of %g radii; the largest gap is %.4g mm", field.DiscLimit, 1e3*maxGap)
		}
		if unguarded && !edge {
			if f, err := field.DiscForce(field.Balanced, 1, q[iR], maxGap, 1); err == nil {
				part := f/(0.5*math.Pi*q[iR]*q[iR]/(maxGap*maxGap)) - 1
				warn = append(warn, fmt.Errorf("corrections.edge is off: at the edges of unguarded discs the field adds %.2g %% to the force at the largest gap", 100*part))
			}
		}
		if guard && minGap < field.SlotMinimum*q[iG] {
			return nil, fmt.Errorf("corrections.guard_gap: the deep-slot formula holds for gaps of at least 5 × guard_gap (%.4g mm); the smallest gap is %.4g mm; exclude those rows or switch the correction off and state its uncertainty",
				field.SlotMinimum*1e3*q[iG], 1e3*minGap)
		}
		if wedge && math.Sqrt(q[iWedge]) > field.WedgeLimit*minGap {
			return nil, fmt.Errorf("corrections.wedge.half_difference: %.3g mm is more than a tenth of the smallest gap (%.3g mm); the expansion holds for small tilts", 1e3*math.Sqrt(q[iWedge]), 1e3*minGap)
		}
		if coplanar && math.Abs(q[iStep]) > 0.01*minGap {
			warn = append(warn, fmt.Errorf("corrections.coplanarity.step: %.3g mm is more than 1 %% of the smallest gap (%.3g mm); the first-order correction may not suffice", 1e3*q[iStep], 1e3*minGap))
		}
		if s.On["air"] {
			warn = append(warn, dampAir(q[iH])...)
		}
		return append(warn, breakdownWarning(m.Hazard(q, x))...), nil
	}
	m.Hazard = func(q []float64, x [][]float64) Hazard {
		h, worst := Hazard{}, -1.0
		delta := airDensity(q[iT], q[iP])
		for i, v := range x[0] {
			if d := x[1][i] + q[iOff]; d > 0 {
				h.meet(i, v, v/d, d, math.Max(q[iCap], si.Eps0*math.Pi*q[iR]*q[iR]/d), delta, &worst)
			}
		}
		return h
	}
	m.gapResults(k, s.On["air"])
	m.Causes = []Cause{
		{Name: "wedge", Doc: "grows as 1/gap² relative to the force: plates not parallel",
			Signature: func(q, x []float64, f, t float64) float64 { d := x[1] + q[iOff]; return f / (d * d) }},
		{Name: "contact_potential", Doc: "changes sign with the polarity and falls as 1/voltage relative to the force",
			Signature: perVolt(0, iVc)},
		{Name: "gap_offset", Doc: "grows as 1/gap relative to the force: zero of the spacing scale",
			Signature: func(q, x []float64, f, t float64) float64 { return f / (x[1] + q[iOff]) }},
		{Name: "zero", Doc: "the same at every voltage: zero of the balance",
			Signature: always},
		{Name: "drift", Doc: "proportional to time, whatever the voltage",
			Signature: withTime},
		{Name: "edge", Doc: "grows with the gap relative to the force: field beyond the guard",
			Signature: func(q, x []float64, f, t float64) float64 { return f * (x[1] + q[iOff]) }},
	}
	return m, nil
}

// discEdge checks the corrections of an attracted disc against its electrodes and
// returns whether the edge field of unguarded discs is corrected, and its drive.
func discEdge(s *Setup) (edge bool, drive field.Drive, err error) {
	if s.Options["drive.kind"] == driveOneEarthed {
		drive = field.OneSideEarthed
	}
	if s.Options["electrodes"] != "unguarded" {
		switch {
		case s.On["edge"]:
			return false, 0, fmt.Errorf("corrections.edge: is for unguarded discs; a guard ring carries the edge away: switch it off, or say electrodes = %q", "unguarded")
		case s.On["guard_gap"] && !s.Given["guard_gap"]:
			return false, 0, fmt.Errorf("quantities.guard_gap: is missing; the effective area of a guarded disc needs the width of the gap to its guard ring")
		}
		return false, drive, nil
	}
	for _, name := range []string{"guard_gap", "coplanarity"} {
		if s.On[name] {
			return false, 0, fmt.Errorf("corrections.%s: unguarded discs have no guard; write [corrections.%s] use = false", name, name)
		}
	}
	if s.Given["guard_gap"] {
		return false, 0, fmt.Errorf("quantities.guard_gap: unguarded discs have no guard; take it out, or say electrodes = %q", "guarded")
	}
	return s.On["edge"], drive, nil
}
