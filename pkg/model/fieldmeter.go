package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// The words of the option mounting.kind.
const (
	mountFreeBody = "free-body"
	mountFlush    = "flush"
)

// FieldMeter is the calibration of an electric-field meter in the field between
// parallel plates, dc or power frequency (IEEE 1227, IEC 61786-1; from memory).
// The indication is fitted as r = K(E + E₀) with E the reference field; each
// range and phase has its own K and E₀.
var FieldMeter = register(&Kind{
	Name:  "field-meter",
	Title: "Field meter between parallel plates",
	Doc: "A client's electric-field meter reads the field between parallel plates at a known voltage and " +
		"spacing; the fit gives its response and correction factor for each range, as found and as left.",
	Channels: []Channel{
		{Name: "voltage", Doc: "voltage between the plates, at the plates", Unit: si.MustUnit("kV"), Role: Predictor},
		{Name: "gap", Doc: "spacing of the plates", Unit: si.MustUnit("mm"), Role: Predictor, Positive: true},
		{Name: "indication", Doc: "field that the meter indicates", Unit: si.MustUnit("kV/m"), Role: Response},
	},
	Scalars: []Scalar{
		responseScalar, zeroOffsetScalar,
		{Table: "quantities", Name: "contact_potential", Doc: "contact potential and surface charge, subtracted from the voltage", Unit: si.MustUnit("V"), Adjustable: true, Part: "plates"},
		{Table: "quantities", Name: "gap_offset", Doc: "error of the spacing, added to the reading", Unit: si.MustUnit("mm"), Adjustable: true, Part: "plates"},
		{Table: "quantities", Name: "full_scale", Doc: "end of the range, for the non-linearity (default: the largest level)", Unit: si.MustUnit("kV/m"), Part: "meter"},
		{Table: "quantities", Name: "bench_capacitance", Doc: "capacitance of everything at high voltage, for the stored energy", Unit: si.MustUnit("pF"), NotNegative: true, Part: "safety"},
		{Table: "corrections.wedge", Name: "half_difference", Doc: "plates not parallel: half the difference of spacing over the head", Unit: si.MustUnit("mm"), Required: true, Squared: true, Part: "plates"},
		{Table: "corrections.finite_plates", Name: "width", Doc: "width of the square plates", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "plates"},
		{Table: "corrections.finite_plates", Name: "remainder", Doc: "relative error of the finite-plate correction", Unit: si.MustUnit("1"), Default: gum.Rectangular(0, 0.2*math.Sqrt(3)), Part: "plates"},
		{Table: "corrections.head_image", Name: "radius", Doc: "radius of the sphere that stands for the head", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "mounting"},
		{Table: "corrections.head_image", Name: "remainder", Doc: "relative error of the head-image correction", Unit: si.MustUnit("1"), Default: gum.Rectangular(0, 0.25), Part: "mounting"},
		{Table: "corrections.recess", Name: "depth", Doc: "depth of the sensing electrode behind the plate", Unit: si.MustUnit("mm"), Required: true, Part: "mounting"},
		{Table: "corrections.recess", Name: "slope", Doc: "relative loss of indication for each length of recess, found by shimming", Unit: si.MustUnit("1/mm"), Required: true, Part: "mounting"},
		{Table: "corrections.distortion", Name: "effect", Doc: "relative effect of ripple or harmonics on the indication", Unit: si.MustUnit("1"), Required: true, Part: "drive"},
		temperature, pressure, humidity,
	},
	Corrections: []Correction{
		{Name: "wedge", Doc: "plates not parallel over the head"},
		{Name: "finite_plates", Doc: "field of finite square plates at the head"},
		{Name: "head_image", Doc: "images of a free-body head in the plates"},
		{Name: "recess", Doc: "sensing electrode behind the plane of the plate"},
		{Name: "distortion", Doc: "ripple or harmonics of the drive"},
	},
	Options: []Option{
		{Key: "drive.kind", Doc: "how the plates are driven", Values: []string{driveBalanced, driveOneEarthed}},
		{Key: "mounting.kind", Doc: "head on an insulating rod inside the gap, or flush in an aperture of the earthed plate", Values: []string{mountFreeBody, mountFlush}},
		{Key: "corrections.finite_plates.facing", Doc: "what faces the live plate when one side is earthed: a wide earthed plane, or an equal plate", Values: []string{"earthed-plane", "equal-plate"}, Default: "earthed-plane"},
		{Key: "corrections.wedge.head", Doc: "outline of the head over which the wedge is averaged", Values: []string{"disc", "rectangle"}, Default: "disc"},
		{Key: "corrections.head_image.sensing", Doc: "what the head senses", Values: []string{"hemisphere-charge", "dipole"}, Default: "hemisphere-charge"},
	},
	SeriesBy: []string{"phase", "range"},
	Prepare:  prepareFieldMeter,
})

// meterSite is the place of the head between the plates, or a refusal of a
// combination that the finite-plate correction does not cover.
func meterSite(s *Setup) (field.PlateSite, error) {
	drive, mount := s.Options["drive.kind"], s.Options["mounting.kind"]
	switch {
	case mount == mountFreeBody && drive == driveBalanced:
		return field.BalancedMidGap, nil
	case mount == mountFlush && drive == driveOneEarthed && s.Options["corrections.finite_plates.facing"] == "equal-plate":
		return field.EqualOneEarthed, nil
	case mount == mountFlush && drive == driveOneEarthed:
		return field.OverEarthedPlane, nil
	case mount == mountFlush:
		return 0, fmt.Errorf("drive.kind: a flush meter sits in an earthed plate; say drive.kind = %q", driveOneEarthed)
	}
	return 0, fmt.Errorf("corrections.finite_plates: there is no formula for a free-body head between plates of which one is earthed; drive the plates balanced, or switch the correction off and state its uncertainty")
}

func prepareFieldMeter(k *Kind, s *Setup) (*Model, error) {
	at := k.Scalar
	iK, iZero, iVc, iOff := at("response"), at("zero_offset"), at("contact_potential"), at("gap_offset")
	iFull, iCap := at("full_scale"), at("bench_capacitance")
	iWedge, iWidth, iPlates := at("corrections.wedge.half_difference"), at("corrections.finite_plates.width"), at("corrections.finite_plates.remainder")
	iRadius, iHead := at("corrections.head_image.radius"), at("corrections.head_image.remainder")
	iDepth, iSlope, iEffect := at("corrections.recess.depth"), at("corrections.recess.slope"), at("corrections.distortion.effect")
	iT, iP, iH := at("environment.temperature"), at("environment.pressure"), at("environment.humidity")

	mount := s.Options["mounting.kind"]
	for _, need := range []string{"drive.kind", "mounting.kind"} {
		if s.Options[need] == "" {
			return nil, fmt.Errorf("%s: must be stated; the corrections of the mountings and drives differ", need)
		}
	}
	if s.On["head_image"] && mount != mountFreeBody {
		return nil, fmt.Errorf("corrections.head_image: is for a free-body head; this one is mounted %s", mount)
	}
	if s.On["recess"] && mount != mountFlush {
		return nil, fmt.Errorf("corrections.recess: is for a flush head; this one is mounted %s", mount)
	}
	var site field.PlateSite
	if s.On["finite_plates"] {
		var err error
		if site, err = meterSite(s); err != nil {
			return nil, err
		}
	}
	shape := field.Disc
	if s.Options["corrections.wedge.head"] == "rectangle" {
		shape = field.Rectangle
	}
	wedgeC, err := field.WedgeCoefficient(shape, field.OnField)
	if err != nil {
		return nil, err
	}
	head := field.HemisphereCharge
	if s.Options["corrections.head_image.sensing"] == "dipole" {
		head = field.Dipole
	}
	// reference is the field at the head's place as it would be without the head.
	reference := func(q, x []jet.Jet) jet.Jet {
		d := x[1].Add(q[iOff])
		e := x[0].Sub(q[iVc]).Div(d)
		if s.On["wedge"] {
			e = e.Mul(q[iWedge].Div(d.Sqr()).Scale(wedgeC).Plus(1))
		}
		if s.On["finite_plates"] {
			e = e.Mul(field.FinitePlatesJet(site, q[iWidth], d).Mul(q[iPlates].Plus(1)).Plus(1))
		}
		return e
	}
	m := &Model{Response: "indication", Predictors: []string{"voltage", "gap"}}
	m.Row = func(q, x []jet.Jet) jet.Jet {
		e := reference(q, x)
		if s.On["head_image"] {
			e = e.Mul(field.HeadImageJet(head, q[iRadius], x[1].Add(q[iOff])).Mul(q[iHead].Plus(1)).Plus(1))
		}
		if s.On["recess"] {
			e = e.Mul(q[iSlope].Mul(q[iDepth]).Neg().Plus(1))
		}
		if s.On["distortion"] {
			e = e.Mul(q[iEffect].Plus(1))
		}
		return e.Add(q[iZero]).Mul(q[iK])
	}
	// The same without jets, with derivatives by response and zero offset.
	m.Block = func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
		for _, j := range wrt {
			if j != iK && j != iZero {
				return false
			}
		}
		scale := 1.0
		if s.On["recess"] {
			scale *= 1 - q[iSlope]*q[iDepth]
		}
		if s.On["distortion"] {
			scale *= 1 + q[iEffect]
		}
		// What depends on the spacing alone is the same for all rows of a setting.
		last, factor := math.NaN(), 0.0
		for i := lo; i < hi; i++ {
			d := x[1][i] + q[iOff]
			if d != last {
				last, factor = d, scale/d
				if s.On["wedge"] {
					factor *= 1 + wedgeC*q[iWedge]/(d*d)
				}
				if s.On["finite_plates"] {
					factor *= 1 + field.FinitePlatesJet(site, jet.Const(q[iWidth]), jet.Const(d)).V*(1+q[iPlates])
				}
				if s.On["head_image"] {
					factor *= 1 + field.HeadImageJet(head, jet.Const(q[iRadius]), jet.Const(d)).V*(1+q[iHead])
				}
			}
			e := (x[0][i]-q[iVc])*factor + q[iZero]
			f[i] = q[iK] * e
			if jac == nil {
				continue
			}
			for k, j := range wrt {
				switch j {
				case iK:
					jac[k][i] = e
				case iZero:
					jac[k][i] = q[iK]
				}
			}
		}
		return true
	}
	m.Start = func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
		var sxy, sxx float64
		for i := range y {
			e := (x[0][i] - q[iVc]) / (x[1][i] + q[iOff])
			sxy += e * y[i]
			sxx += e * e
		}
		if !(sxx > 0) || sxy == 0 {
			return nil, fmt.Errorf("readings of indication: no response to the field at any voltage; check the columns voltage and indication")
		}
		return startAt(q, free, iK, sxy/sxx), nil
	}
	m.Check = func(q []float64, x [][]float64, y []float64) ([]error, error) {
		for i, reading := range x[1] {
			d := reading + q[iOff]
			if !(d > 0) {
				return nil, &RowError{Row: i, Err: fmt.Errorf("gap %.6g mm: must be above zero", 1e3*d)}
			}
			if i > 0 && reading == x[1][i-1] {
				continue
			}
			if s.On["finite_plates"] {
				if _, _, err := field.FinitePlates(site, q[iWidth], d); err != nil {
					return nil, &RowError{Row: i, Err: fmt.Errorf("corrections.finite_plates: %w", err)}
				}
			}
			if s.On["head_image"] {
				if _, _, err := field.HeadImage(head, q[iRadius], d); err != nil {
					return nil, &RowError{Row: i, Err: fmt.Errorf("corrections.head_image: %w", err)}
				}
			}
			if s.On["wedge"] && math.Sqrt(q[iWedge]) > field.WedgeLimit*d {
				return nil, &RowError{Row: i, Err: fmt.Errorf("corrections.wedge.half_difference: %.3g mm is more than a tenth of the gap", 1e3*math.Sqrt(q[iWedge]))}
			}
		}
		if s.Given["environment.humidity"] && q[iH] > 0.7 {
			return nil, fmt.Errorf("environment.humidity: %.0f %% is above 70 %%: such readings are rejected (common practice, no source)", 100*q[iH])
		}
		if q[iFull] > 0 {
			for i, v := range y {
				if math.Abs(v) > q[iFull] {
					return nil, &RowError{Row: i, Err: fmt.Errorf("the indication %.5g kV/m is over the range (full_scale = %.5g kV/m); mark the row as overrange", v/1e3, q[iFull]/1e3)}
				}
			}
		}
		return breakdownWarning(m.Hazard(q, x)), nil
	}
	m.Hazard = func(q []float64, x [][]float64) Hazard {
		h, worst := Hazard{}, -1.0
		delta := airDensity(q[iT], q[iP])
		for i, v := range x[0] {
			if d := x[1][i] + q[iOff]; d > 0 {
				h.meet(i, v, v/d, d, math.Max(q[iCap], si.Eps0*q[iWidth]*q[iWidth]/d), delta, &worst)
			}
		}
		return h
	}
	m.Measurands = []Measurand{
		{Name: "correction_factor", Doc: "reference over indicated field, N = 1/K: multiply the indication by it", Unit: si.MustUnit("1"),
			Value: func(q []jet.Jet) jet.Jet { return q[iK].Inv() }},
		{Name: "response", Doc: "indicated over reference field, K", Unit: si.MustUnit("1"),
			Value: func(q []jet.Jet) jet.Jet { return q[iK] }},
	}
	if s.Adjusted["zero_offset"] {
		m.Measurands = append(m.Measurands, Measurand{Name: "zero_offset", Doc: "field that the meter adds to the true one", Unit: si.MustUnit("V/m"),
			Value: func(q []jet.Jet) jet.Jet { return q[iZero] }})
	}
	m.Curve = &Curve{Name: "correction_factor", Doc: "reference over indicated field", Unit: si.MustUnit("1"),
		Level: "reference field", LevelUnit: si.MustUnit("kV/m"), FullScale: "full_scale",
		Value:   func(q []jet.Jet, e jet.Jet) jet.Jet { return e.Div(e.Add(q[iZero]).Mul(q[iK])) },
		LevelOf: func(q, x []float64) float64 { return reference(jet.Consts(q), jet.Consts(x)).V },
		Inverse: true,
	}
	m.Causes = []Cause{
		{Name: "contact_potential", Doc: "one field at each spacing, whatever the voltage: contact potential or surface charge",
			Signature: func(q, x []float64, f, t float64) float64 { return q[iK] / (x[1] + q[iOff]) }},
		{Name: "gap_offset", Doc: "differs between the spacings in proportion to 1/gap: error of the spacing",
			Signature: func(q, x []float64, f, t float64) float64 { return f / (x[1] + q[iOff]) }},
		{Name: "zero_offset", Doc: "the same at every field: zero of the meter",
			Signature: always},
		{Name: "drift", Doc: "proportional to time and to the field: drift of the sensitivity",
			Signature: func(q, x []float64, f, t float64) float64 { return f * t }},
		{Name: "edge", Doc: "falls steeply with gap over width: field of the plates' edges",
			Signature: func(q, x []float64, f, t float64) float64 {
				if q[iWidth] <= 0 {
					return 0
				}
				return f * math.Exp(-math.Pi*q[iWidth]/(x[1]+q[iOff]))
			}},
	}
	return m, nil
}
