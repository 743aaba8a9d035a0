package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// What the benches that read a charge on guarded plates share: the electrometer and
// the corrections of its reading, or the bridge in its place.

// electrometerScalars are the inputs of the corrections of a charge reading.
var electrometerScalars = []Scalar{
	{Table: "corrections.offset_current", Name: "current", Doc: "current into the electrometer besides the charge measured", Unit: si.MustUnit("fA"), Required: true, Adjustable: true, Part: "electrometer"},
	{Table: "corrections.leakage", Name: "time_constant", Doc: "time constant with which the electrometer loses its charge", Unit: si.MustUnit("s"), Required: true, Adjustable: true, Positive: true, Part: "electrometer"},
	{Table: "corrections.injection", Name: "charge", Doc: "charge that the electrometer's own switch adds to every reading", Unit: si.MustUnit("pC"), Required: true, Adjustable: true, Part: "electrometer"},
}

// electrometerCorrections are those of a charge reading.
var electrometerCorrections = []Correction{
	{Name: "offset_current", Doc: "offset current of the electrometer times the hold time"},
	{Name: "leakage", Doc: "charge lost during the hold time, exponential"},
	{Name: "injection", Doc: "charge injected by the electrometer's switch, the same in every reading"},
}

// chargeChannels sorts out the channels of a bench that reads a charge or a
// capacitance: the response, and the places of voltage and hold time among the
// predictors behind those listed (−1: none).
func chargeChannels(s *Setup, predictors []string) (response string, all []string, voltage, hold int, err error) {
	response, all, voltage, hold = "capacitance", predictors, -1, -1
	if s.Channels["charge"] {
		response = "charge"
		if !s.Channels["voltage"] {
			return "", nil, 0, 0, fmt.Errorf("channels.voltage: a charge needs the voltage that it belongs to; name its column, or give channels.capacitance instead of channels.charge")
		}
		voltage = len(all)
		all = append(all, "voltage")
	} else if s.Given["contact_potential"] {
		return "", nil, 0, 0, fmt.Errorf("quantities.contact_potential: does not act on a capacitance; leave it out")
	} else if s.Channels["voltage"] {
		// Taken for the cautions; the capacitance does not depend on it.
		voltage = len(all)
		all = append(all, "voltage")
	}
	if s.Channels["hold"] {
		if response == "capacitance" {
			return "", nil, 0, 0, fmt.Errorf("channels.hold: a capacitance has no hold time; leave the channel out")
		}
		hold = len(all)
		all = append(all, "hold")
	}
	return response, all, voltage, hold, nil
}

// electrometer turns the charge that arrived into the charge that is read after
// the hold time (package comment, "Charge readings").
type electrometer struct {
	current, leakage, injection bool
	iCurrent, iTau, iInj        int
	hold                        int // index of the hold time among the predictors, −1: none
}

// newElectrometer resolves the corrections of the charge reading.
func newElectrometer(k *Kind, s *Setup, charge bool, hold int) (*electrometer, error) {
	e := &electrometer{current: s.On["offset_current"], leakage: s.On["leakage"], injection: s.On["injection"],
		iCurrent: k.Scalar("corrections.offset_current.current"), iTau: k.Scalar("corrections.leakage.time_constant"),
		iInj: k.Scalar("corrections.injection.charge"), hold: hold}
	on := map[string]bool{"offset_current": e.current, "leakage": e.leakage, "injection": e.injection}
	for _, name := range []string{"offset_current", "leakage", "injection"} {
		switch {
		case on[name] && !charge:
			return nil, fmt.Errorf("corrections.%s: belongs to a charge read by an electrometer; this bench reads a capacitance, so switch it off", name)
		case on[name] && name != "injection" && hold < 0:
			return nil, fmt.Errorf("corrections.%s: needs the time from the step of the voltage to the reading; add channels.hold", name)
		}
	}
	if e.injection && s.On["blank"] {
		return nil, fmt.Errorf("corrections.injection: blanks already take the injected charge off ([corrections.blank] use = true); switch one of the two off")
	}
	return e, nil
}

// holdRatio is φ(u) = (1 − e^{−u})/u with its first two derivatives.
func holdRatio(u float64) (f, f1, f2 float64) {
	if math.Abs(u) < 1e-2 {
		// Series of (1 − e^{−u})/u, to 1e-16 here.
		f = 1 - u*(1./2-u*(1./6-u*(1./24-u*(1./120-u*(1./720-u/5040)))))
		f1 = -1./2 + u*(1./3-u*(1./8-u*(1./30-u*(1./144-u/840))))
		f2 = 1./3 - u*(1./4-u*(1./10-u*(1./36-u/168)))
		return f, f1, f2
	}
	e := math.Exp(-u)
	f = -math.Expm1(-u) / u
	f1 = (e - f) / u
	f2 = (-e - 2*f1) / u
	return f, f1, f2
}

// read is the charge read for the charge Q that arrived.
func (e *electrometer) read(charge jet.Jet, q, x []jet.Jet) jet.Jet {
	if e.injection {
		charge = charge.Add(q[e.iInj])
	}
	var u jet.Jet
	if e.leakage {
		u = x[e.hold].Div(q[e.iTau])
		charge = charge.Mul(u.Neg().Exp())
	}
	if e.current {
		more := q[e.iCurrent].Mul(x[e.hold])
		if e.leakage {
			more = more.Mul(u.Chain(holdRatio(u.V)))
		}
		charge = charge.Add(more)
	}
	return charge
}

// row is read with the derivatives that fits ask for: keep = ∂read/∂charge, and
// those by current, time constant and injected charge.
func (e *electrometer) row(charge float64, q []float64, hold float64) (read, keep, byCurrent, byTau, byInj float64) {
	keep = 1
	if e.injection {
		charge += q[e.iInj]
	}
	current, phi, phi1, u := 0.0, 1.0, 0.0, 0.0
	if e.current {
		current = q[e.iCurrent]
		byCurrent = hold
	}
	if e.leakage {
		u = hold / q[e.iTau]
		keep = math.Exp(-u)
		phi, phi1, _ = holdRatio(u)
		byTau = (charge*keep - current*hold*phi1) * u / q[e.iTau]
		byCurrent *= phi
	}
	return charge*keep + current*hold*phi, keep, byCurrent, byTau, keep
}

// plateReading is what is read of plates with a known capacitance: their charge, by an
// electrometer, or the capacitance itself, by a bridge.
type plateReading struct {
	*electrometer
	charge   bool
	voltage  int // index among the predictors, −1: none
	iVc, iCs int // contact potential, stray capacitance
}

// newPlateReading resolves the channels and corrections of the reading; its
// predictors stand behind those listed.
func newPlateReading(k *Kind, s *Setup, predictors []string) (r *plateReading, response string, all []string, err error) {
	r = &plateReading{iVc: k.Scalar("contact_potential"), iCs: k.Scalar("stray_capacitance")}
	var hold int
	if response, all, r.voltage, hold, err = chargeChannels(s, predictors); err != nil {
		return nil, "", nil, err
	}
	r.charge = response == "charge"
	r.electrometer, err = newElectrometer(k, s, r.charge, hold)
	return r, response, all, err
}

// jet is the reading of plates of capacitance c (F).
func (r *plateReading) jet(c jet.Jet, q, x []jet.Jet) jet.Jet {
	if !r.charge {
		return c.Add(q[r.iCs])
	}
	v := x[r.voltage]
	return r.read(c.Mul(v.Sub(q[r.iVc])).Add(q[r.iCs].Mul(v)), q, x)
}

// plateValue is one reading with what its derivatives need.
type plateValue struct {
	reading          float64
	capacitance      float64 // of the plates, F
	voltage          float64 // V; 1 when the capacitance is read
	lever            float64 // ∂(charge)/∂capacitance
	keep             float64 // ∂reading/∂(charge)
	byCurrent, byTau float64
	byInjection      float64
}

// value is jet at plain numbers for row i.
func (r *plateReading) value(c float64, q []float64, x [][]float64, i int) plateValue {
	if !r.charge {
		return plateValue{reading: c + q[r.iCs], capacitance: c, voltage: 1, lever: 1, keep: 1}
	}
	y := plateValue{capacitance: c, voltage: x[r.voltage][i]}
	y.lever = y.voltage - q[r.iVc]
	hold := 0.0
	if r.hold >= 0 {
		hold = x[r.hold][i]
	}
	y.reading, y.keep, y.byCurrent, y.byTau, y.byInjection = r.row(c*y.lever+q[r.iCs]*y.voltage, q, hold)
	return y
}

// by is the derivative of a reading by scalar j, 0 for those that act by way of the
// capacitance.
func (r *plateReading) by(j int, y *plateValue) float64 {
	switch {
	case j == r.iVc && r.charge:
		return -y.capacitance * y.keep
	case j == r.iCs:
		return y.voltage * y.keep
	case j == r.iCurrent:
		return y.byCurrent
	case j == r.iTau:
		return y.byTau
	case j == r.iInj && r.injection:
		return y.byInjection
	}
	return 0
}

// acts tells the scalars that by knows.
func (r *plateReading) acts(j int) bool {
	return j == r.iVc || j == r.iCs || j == r.iCurrent || j == r.iTau || j == r.iInj
}

// check warns when the hold time is long against the time constant, and returns
// nil when all is well.
func (e *electrometer) check(q []float64, x [][]float64) error {
	if !e.leakage {
		return nil
	}
	longest := 0.0
	for _, t := range x[e.hold] {
		longest = math.Max(longest, t)
	}
	if u := longest / q[e.iTau]; u > 1 {
		return fmt.Errorf("corrections.leakage: a hold of %.3g s loses %.0f %% of the charge (time constant %.3g s); dry the insulators or read sooner", longest, -100*math.Expm1(-u), q[e.iTau])
	}
	return nil
}

// chargeCauses are the marks that a charge reading leaves; spacing is the
// electric spacing of a row.
func chargeCauses(pV, pHold int, spacing func(q, x []float64) float64) []Cause {
	causes := []Cause{
		{Name: "stray_capacitance", Doc: "proportional to the voltage, whatever the gap: capacitance besides the gap",
			Signature: func(q, x []float64, f, t float64) float64 { return x[pV] }},
		{Name: "contact_potential", Doc: "the same for both polarities and falls with the gap: contact potential",
			Signature: func(q, x []float64, f, t float64) float64 { return 1 / spacing(q, x) }},
		{Name: "injection", Doc: "the same at every voltage: charge injected by the electrometer, or its zero",
			Signature: always},
	}
	if pHold >= 0 {
		causes = append(causes,
			Cause{Name: "offset_current", Doc: "proportional to the hold time, whatever the voltage: offset current",
				Signature: func(q, x []float64, f, t float64) float64 { return x[pHold] }},
			Cause{Name: "leakage", Doc: "proportional to charge and hold time: leakage",
				Signature: func(q, x []float64, f, t float64) float64 { return f * x[pHold] }})
	}
	return causes
}
