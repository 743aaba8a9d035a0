package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// ChargeInField is the force on a charged body between parallel plates: with the
// field known from voltage and spacing, the charge.
//
//	F = q (V − V_c)/(d + δ) · (1 + 7ζ(3)(a/d)³) + image force
//
// (field.UniformField, field.FieldForce, field.PlateImageForce; the factor for the
// charge that a conducting sphere of radius a induces on itself by way of the
// plates is in the package comment, "Body between plates"). The force is positive
// from the live plate to the other one, as a positive charge feels it at positive
// voltage.
var ChargeInField = register(&Kind{
	Name:  "charge-in-field",
	Title: "Charge from its force between plates",
	Doc: "A charged body is pulled by the known field of parallel plates; the force, read in newtons or on a balance, gives its charge. " +
		"For the field from a known charge see field-from-charge.",
	Channels:    bodyChannels(Channel{Name: "gap", Doc: "spacing of the plates as read", Unit: si.MustUnit("mm"), Role: Predictor, Positive: true}),
	Scalars:     bodyScalars(Scalar{Table: "quantities", Name: "charge", Doc: "charge of the body", Unit: si.MustUnit("nC"), Sought: true, Part: "result"}),
	Corrections: bodyCorrections,
	Prepare:     func(k *Kind, s *Setup) (*Model, error) { return prepareBody(k, s, true) },
})

// FieldFromCharge is the same bench turned round: with the charge of the body
// known, the field of the plates, whatever their geometry, as field per volt.
var FieldFromCharge = register(&Kind{
	Name:  "field-from-charge",
	Title: "Field of plates from the force on a known charge",
	Doc: "A body of known charge is pulled by the field of plates; the force, read in newtons or on a balance, gives the field for each volt between them. " +
		"For the charge from a known field see charge-in-field.",
	Channels: bodyChannels(
		Channel{Name: "gap", Doc: "spacing of the plates; only for the corrections of image force and body", Unit: si.MustUnit("mm"), Role: Predictor, Optional: true, Positive: true},
		Channel{Name: "charge", Doc: "charge of the body, measured with each reading; not needed when quantities.charge is stated", Unit: si.MustUnit("nC"), Role: Predictor, Optional: true}),
	Scalars: append([]Scalar{
		{Table: "quantities", Name: "field_per_volt", Doc: "field at the body for each volt between the plates", Unit: si.MustUnit("1/m"), Sought: true, Part: "result"},
		{Table: "quantities", Name: "reference_voltage", Doc: "voltage for which the field is stated", Unit: si.MustUnit("kV"), Default: gum.Exactly(1000), Part: "result"},
	}, bodyScalars(Scalar{Table: "quantities", Name: "charge", Doc: "charge of the body when there is no channel for it", Unit: si.MustUnit("nC"), Part: "body"})...),
	Corrections: bodyCorrections,
	Prepare:     func(k *Kind, s *Setup) (*Model, error) { return prepareBody(k, s, false) },
})

func bodyChannels(more ...Channel) []Channel {
	c := append([]Channel{{Name: "voltage", Doc: "voltage of the live plate against the other", Unit: si.MustUnit("kV"), Role: Predictor}}, more...)
	return append(c,
		Channel{Name: "height", Doc: "height of the body's centre over the live plate; without it the body is at the mid-plane", Unit: si.MustUnit("mm"), Role: Predictor, Optional: true, Positive: true},
		Channel{Name: "force", Doc: "force on the body, positive from the live plate to the other", Unit: si.MustUnit("uN"), Role: Response},
		Channel{Name: "mass", Doc: "indication of the balance, conventional mass, of the sign of force; turn it round by a gain of -1", Unit: si.MustUnit("mg"), Role: Response})
}

func bodyScalars(first Scalar) []Scalar {
	return append([]Scalar{first,
		{Table: "quantities", Name: "contact_potential", Doc: "contact potential, subtracted from the voltage", Unit: si.MustUnit("V"), Adjustable: true, Part: "electrodes"},
		{Table: "quantities", Name: "gap_offset", Doc: "zero error of the spacing scale, added to the reading", Unit: si.MustUnit("um"), Adjustable: true, Part: "electrodes"},
		{Table: "quantities", Name: "bench_capacitance", Doc: "capacitance of everything at high voltage, for the stored energy", Unit: si.MustUnit("pF"), NotNegative: true, Part: "safety"},
		electricConstant,
		{Table: "corrections.image", Name: "height_offset", Doc: "added to the height; without a height channel, height of the body over the mid-plane", Unit: si.MustUnit("mm"), Required: true, Adjustable: true, Part: "body"},
		{Table: "corrections.body", Name: "radius", Doc: "radius of the conducting sphere", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "body"},
		{Table: "corrections.body", Name: "model", Doc: "relative error of the factor less one", Unit: si.MustUnit("1"), Default: gum.Rectangular(0, 0.02), Part: "body"},
		{Table: "corrections.leakage", Name: "time_constant", Doc: "time constant with which the body loses its charge", Unit: si.MustUnit("s"), Required: true, Adjustable: true, Positive: true, Part: "body"},
		temperature, pressure}, balanceScalars...)
}

var bodyCorrections = []Correction{
	{Name: "image", Doc: "force of the body's own images in the plates, off the mid-plane"},
	{Name: "body", Doc: "conducting sphere of finite size at the mid-plane"},
	{Name: "leakage", Doc: "charge lost since time zero, exponential; the charge stated is that at time zero"},
	balanceCorrection,
}

// sphereBetweenPlates is 7ζ(3), the factor of (a/d)³ by which the force on a
// charged conducting sphere at the mid-plane exceeds qE (package comment, "Body
// between plates").
const sphereBetweenPlates = 7 * 1.2020569031595942

// bodyLimit is the largest a/d for which that first term is offered: it leaves
// less than 2 % of itself out (a test compares it with a numerical solution).
const bodyLimit = 0.15

func prepareBody(k *Kind, s *Setup, seekCharge bool) (*Model, error) {
	iQ, iK, iVc, iOff := k.Scalar("charge"), k.Scalar("field_per_volt"), k.Scalar("contact_potential"), k.Scalar("gap_offset")
	iRef, iCap, iE0 := k.Scalar("reference_voltage"), k.Scalar("bench_capacitance"), k.Scalar("electric_constant")
	iHeight, iRadius, iModel, iTau := k.Scalar("corrections.image.height_offset"), k.Scalar("corrections.body.radius"), k.Scalar("corrections.body.model"), k.Scalar("corrections.leakage.time_constant")
	iT, iP := k.Scalar("environment.temperature"), k.Scalar("environment.pressure")
	image, body, leak := s.On["image"], s.On["body"], s.On["leakage"]

	perMass, perMassValue, err := forcePerMass(k, s)
	if err != nil {
		return nil, err
	}
	response := "force"
	if perMass != nil {
		response = "mass"
	}
	predictors := []string{"voltage"}
	place := func(name string) int {
		if !s.Channels[name] {
			return -1
		}
		predictors = append(predictors, name)
		return len(predictors) - 1
	}
	pGap, pHeight := place("gap"), place("height")
	pQ := -1
	if !seekCharge {
		pQ = place("charge")
		if pQ < 0 && !s.Given["charge"] {
			return nil, fmt.Errorf("quantities.charge: is missing; the field is found from a known charge: state it, or name a column in channels.charge")
		}
		if pQ >= 0 && s.Given["charge"] {
			return nil, fmt.Errorf("quantities.charge: the charge has a channel of its own; state one of the two")
		}
	}
	for _, name := range []string{"image", "body"} {
		if s.On[name] && pGap < 0 {
			return nil, fmt.Errorf("corrections.%s: needs the spacing of the plates; name its column in channels.gap, or switch the correction off", name)
		}
	}
	if pHeight >= 0 && pGap < 0 {
		return nil, fmt.Errorf("channels.height: a height says nothing without the spacing of the plates; name its column in channels.gap")
	}
	if s.Given["gap_offset"] && pGap < 0 {
		return nil, fmt.Errorf("quantities.gap_offset: there is no channels.gap for it to correct")
	}
	if leak && pQ >= 0 {
		return nil, fmt.Errorf("corrections.leakage: the charge is measured with each reading; switch the correction off")
	}

	m := &Model{Response: response, Predictors: predictors, TimeDependent: leak}
	pTime := len(predictors)
	m.Row = func(q, x []jet.Jet) jet.Jet {
		charge := q[iQ]
		if pQ >= 0 {
			charge = x[pQ]
		}
		if leak {
			charge = charge.Mul(x[pTime].Div(q[iTau]).Neg().Exp())
		}
		var d, e jet.Jet
		if pGap >= 0 {
			d = x[pGap].Add(q[iOff])
		}
		if seekCharge {
			e = field.UniformFieldJet(x[0], q[iVc], x[pGap], q[iOff])
		} else {
			e = q[iK].Mul(x[0].Sub(q[iVc]))
		}
		f := field.FieldForceJet(charge, e)
		if body {
			f = f.Mul(q[iRadius].Div(d).Pow(3).Scale(sphereBetweenPlates).Mul(q[iModel].Plus(1)).Plus(1))
		}
		if image {
			z := q[iHeight]
			if pHeight >= 0 {
				z = z.Add(x[pHeight])
			} else {
				z = z.Add(d.Scale(0.5))
			}
			f = f.Add(field.PlateImageForceJet(q[iE0], charge, z, d))
		}
		if perMass != nil {
			f = f.Div(perMass(q))
		}
		return f
	}
	m.Block = func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
		for _, j := range wrt {
			if j != iQ && j != iK && j != iVc && j != iOff && j != iTau && j != iHeight {
				return false
			}
		}
		unit := 1.0
		if perMass != nil {
			unit = 1 / perMassValue(q)
		}
		var cube float64
		if body {
			a := q[iRadius]
			cube = sphereBetweenPlates * a * a * a * (1 + q[iModel])
		}
		charge := q[iQ]
		for i := lo; i < hi; i++ {
			if pQ >= 0 {
				charge = x[pQ][i]
			}
			factor, decay, rate := unit, 1.0, 0.0
			if leak {
				rate = x[pTime][i] / q[iTau]
				decay = math.Exp(-rate)
				factor *= decay
			}
			v := x[0][i] - q[iVc]
			var inv, more float64
			if pGap >= 0 {
				inv = 1 / (x[pGap][i] + q[iOff])
				more = cube * inv * inv * inv
			}
			factor *= 1 + more
			var perVolt float64
			if seekCharge {
				perVolt = inv
			} else {
				perVolt = q[iK]
			}
			pull := charge * perVolt * v * factor
			// The images: q²G(z/d)/(ε₀d²), by the force for unit charge.
			var own, byOwn, byZ, byD float64
			if image {
				d := 1 / inv
				z := q[iHeight]
				if pHeight >= 0 {
					z += x[pHeight][i]
				} else {
					z += 0.5 * d
				}
				g, slope := field.PlateImageForceSlope(q[iE0], z, d)
				now := charge * decay
				scale := now * now * unit
				own, byOwn, byZ = scale*g, 2*now*decay*unit*g, scale*slope
				byD = -(2*own + byZ*z) * inv
				if pHeight < 0 {
					byD += 0.5 * byZ
				}
			}
			f[i] = pull + own
			if jac == nil {
				continue
			}
			for n, j := range wrt {
				var d float64
				switch j {
				case iQ:
					if pQ < 0 {
						d = perVolt*v*factor + byOwn
					}
				case iK:
					d = charge * v * factor
				case iVc:
					d = -charge * perVolt * factor
				case iOff:
					if seekCharge {
						d = -pull * inv
					}
					d += byD - pull*3*more*inv/(1+more)
				case iTau:
					if leak {
						d = (pull + 2*own) * rate / q[iTau]
					}
				case iHeight:
					d = byZ
				}
				jac[n][i] = d
			}
		}
		return true
	}
	sought := iK
	if seekCharge {
		sought = iQ
	}
	m.Start = func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
		v := m.proportional(q, sought, x, y)
		if v == 0 || math.IsNaN(v) || math.IsInf(v, 0) {
			return nil, fmt.Errorf("readings of %s: no force at any voltage; there is nothing to find the %s from", response, k.Scalars[sought].Name)
		}
		if image {
			// Its own square in the image force: one step of Newton's method from
			// the linear answer is enough to begin with.
			w := append([]float64(nil), q...)
			w[sought] = 0
			f0 := m.predictAll(w, x, len(y))
			var num, den float64
			w[sought] = v
			f1 := m.predictAll(w, x, len(y))
			for i := range y {
				num += (f1[i] - f0[i]) * (y[i] - f0[i])
				den += (f1[i] - f0[i]) * (f1[i] - f0[i])
			}
			v *= num / den
		}
		return startAt(q, free, sought, v), nil
	}
	m.Check = func(q []float64, x [][]float64, y []float64) ([]error, error) {
		for i := range y {
			if pGap < 0 {
				break
			}
			d := x[pGap][i] + q[iOff]
			z := d/2 + q[iHeight]
			if pHeight >= 0 {
				z = x[pHeight][i] + q[iHeight]
			}
			switch {
			case d <= 0:
				return nil, &RowError{Row: i, Err: fmt.Errorf("gap %.6g mm: must be above zero", 1e3*d)}
			case (image || pHeight >= 0) && !(z > 0 && z < d):
				return nil, &RowError{Row: i, Err: fmt.Errorf("height %.6g mm: the body's centre must lie between the plates (gap %.6g mm)", 1e3*z, 1e3*d)}
			case body && q[iRadius] > bodyLimit*d:
				return nil, &RowError{Row: i, Err: fmt.Errorf("corrections.body.radius: %.4g mm is more than %.2g of the gap (%.4g mm); the correction holds for smaller spheres; open the gap or switch it off and state its uncertainty",
					1e3*q[iRadius], bodyLimit, 1e3*d)}
			case body && math.Abs(z/d-0.5) > 0.1:
				return nil, &RowError{Row: i, Err: fmt.Errorf("corrections.body: holds at the mid-plane; the body is at %.3g of the gap; bring it within 0.4 to 0.6 or switch the correction off", z/d)}
			}
		}
		if !image && pHeight >= 0 {
			charge, unit := q[iQ], 1.0
			if seekCharge {
				charge = m.proportional(q, sought, x, y)
			}
			if perMass != nil {
				unit = perMassValue(q)
			}
			err := imageRefusal(q[iE0], func(i int) float64 {
				if pQ >= 0 {
					return x[pQ][i]
				}
				return charge
			}, func(i int) float64 { return x[pHeight][i] + q[iHeight] }, func(i int) float64 { return x[pGap][i] + q[iOff] }, y, unit)
			if err != nil {
				return nil, err
			}
		}
		return breakdownWarning(m.Hazard(q, x)), nil
	}
	m.Hazard = func(q []float64, x [][]float64) Hazard {
		h, worst := Hazard{}, -1.0
		delta := airDensity(q[iT], q[iP])
		for i, v := range x[0] {
			d, e := 0.0, 0.0
			if pGap >= 0 {
				if d = x[pGap][i] + q[iOff]; d <= 0 {
					continue
				}
				e = v / d
			} else {
				e = q[iK] * v
			}
			h.meet(i, v, e, d, q[iCap], delta, &worst)
		}
		return h
	}
	if seekCharge {
		m.Measurands = []Measurand{{Name: "charge", Doc: "charge of the body", Unit: si.MustUnit("nC"),
			Value: func(q []jet.Jet) jet.Jet { return q[iQ] }}}
	} else {
		m.Measurands = []Measurand{
			{Name: "field_per_volt", Doc: "field at the body for each volt between the plates", Unit: si.MustUnit("1/m"),
				Value: func(q []jet.Jet) jet.Jet { return q[iK] }},
			{Name: "field", Doc: "field at the body at the reference voltage", Unit: si.MustUnit("kV/m"),
				Value: func(q []jet.Jet) jet.Jet { return q[iK].Mul(q[iRef]) }}}
	}
	m.Causes = []Cause{
		{Name: "contact_potential", Doc: "the same for both polarities: contact potential",
			Signature: perVolt(0, iVc)},
		{Name: "leakage", Doc: "proportional to force and time: the body loses charge",
			Signature: func(q, x []float64, f, t float64) float64 { return f * t }},
		{Name: "zero", Doc: "the same at every voltage: zero of the force, or the image force of a body off the mid-plane",
			Signature: always},
		{Name: "drift", Doc: "proportional to time, whatever the voltage",
			Signature: withTime},
	}
	if pGap >= 0 {
		gap := func(q, x []float64) float64 { return x[pGap] + q[iOff] }
		m.Causes = append(m.Causes,
			Cause{Name: "gap_offset", Doc: "grows as 1/gap relative to the force: zero of the spacing scale",
				Signature: func(q, x []float64, f, t float64) float64 { return f / gap(q, x) }},
			Cause{Name: "image", Doc: "falls as 1/gap³ whatever the voltage: images of a body off the mid-plane",
				Signature: func(q, x []float64, f, t float64) float64 { d := gap(q, x); return 1 / (d * d * d) }},
			Cause{Name: "body", Doc: "grows as 1/gap³ relative to the force: size of the body",
				Signature: func(q, x []float64, f, t float64) float64 { d := gap(q, x); return f / (d * d * d) }})
	}
	return m, nil
}

// imageRefusal refuses readings off the mid-plane without the image correction,
// where the image force of the charges (C) at those heights and gaps (m) exceeds
// 1e-3 of the largest reading, in newtons after division by unit.
func imageRefusal(eps0 float64, charge func(i int) float64, height, gap func(i int) float64, y []float64, unit float64) error {
	peak := 0.0
	for _, v := range y {
		peak = math.Max(peak, math.Abs(v))
	}
	for i := range y {
		f, err := field.PlateImageForce(eps0, charge(i), height(i), gap(i))
		if err != nil {
			return &RowError{Row: i, Err: err}
		}
		if math.Abs(f/unit) > 1e-3*peak {
			return &RowError{Row: i, Err: fmt.Errorf("channels.height: the body is off the mid-plane and its images pull it with %.2g of the largest force; switch corrections.image on", math.Abs(f/unit)/peak)}
		}
	}
	return nil
}
