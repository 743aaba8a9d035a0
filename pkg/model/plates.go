package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// What the benches with guarded plates and charge readings share: their scalars,
// the effective area with its corrections, start values and checks.

// guardedScalars are the dimensions of a guarded disc and the inputs of its
// corrections.
var guardedScalars = []Scalar{
	{Table: "quantities", Name: "disc_radius", Doc: "radius of the guarded disc", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "electrodes"},
	{Table: "quantities", Name: "guard_gap", Doc: "width of the gap between disc and guard ring", Unit: si.MustUnit("mm"), Required: true, Positive: true, Part: "electrodes"},
	{Table: "quantities", Name: "bench_capacitance", Doc: "capacitance of everything at high voltage, for the stored energy (default: the disc alone)", Unit: si.MustUnit("pF"), Part: "safety"},
	electricConstant,
	{Table: "corrections.guard_gap", Name: "model", Doc: "relative error of the formula of the guard gap", Unit: si.MustUnit("1"), Default: gum.Normal(0, field.SlotAreaUncertainty), Part: "electrodes"},
	{Table: "corrections.wedge", Name: "half_difference", Doc: "plates not parallel: half the difference of spacing across the disc", Unit: si.MustUnit("um"), Required: true, Squared: true, Part: "electrodes"},
	{Table: "corrections.coplanarity", Name: "step", Doc: "height of the disc above the plane of the guard", Unit: si.MustUnit("um"), Required: true, Part: "electrodes"},
	{Table: "corrections.coplanarity", Name: "edge", Doc: "coefficient of the edge term, in step/radius", Unit: si.MustUnit("1"), Default: gum.Rectangular(0, 2), Part: "electrodes"},
	temperature, pressure, humidity,
}

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

// guarded is the effective area of a guarded disc over the spacing, with the
// corrections in use: charge = ε_eff V · perSpacing.
type guarded struct {
	guard, wedge, coplanar                  bool
	wedgeC                                  float64
	iR, iG, iModel, iWedge, iStep, iEdge    int
	iT, iP, iH, iE0, iCap                   int
	radius, bound, alpha, tilt, step, scale float64 // of one set of scalars
}

func newGuarded(k *Kind, s *Setup) (*guarded, error) {
	g := &guarded{guard: s.On["guard_gap"], wedge: s.On["wedge"], coplanar: s.On["coplanarity"],
		iR: k.Scalar("disc_radius"), iG: k.Scalar("guard_gap"), iModel: k.Scalar("corrections.guard_gap.model"),
		iWedge: k.Scalar("corrections.wedge.half_difference"), iStep: k.Scalar("corrections.coplanarity.step"),
		iEdge: k.Scalar("corrections.coplanarity.edge"), iT: k.Scalar("environment.temperature"), iP: k.Scalar("environment.pressure"),
		iH: k.Scalar("environment.humidity"), iE0: k.Scalar("electric_constant"), iCap: k.Scalar("bench_capacitance")}
	var err error
	g.wedgeC, err = field.WedgeCoefficient(field.Disc, field.OnField)
	return g, err
}

// over is area/spacing (m) at the electric spacing d.
func (g *guarded) over(q []jet.Jet, d jet.Jet) jet.Jet {
	r := q[g.iR]
	var area jet.Jet
	if g.guard {
		area = field.GuardedChargeAreaJet(r, r.Add(q[g.iG]), d).Mul(q[g.iModel].Plus(1))
	} else {
		area = r.Sqr().Scale(math.Pi)
	}
	f := area.Div(d)
	if g.wedge {
		f = f.Mul(q[g.iWedge].Div(d.Sqr()).Scale(g.wedgeC).Plus(1))
	}
	if g.coplanar {
		f = f.Mul(field.CoplanarityChargeJet(q[g.iStep], d)).Mul(q[g.iEdge].Mul(q[g.iStep]).Div(r).Plus(1))
	}
	return f
}

// prepared holds the scalars that overValue needs of one set, computed once.
func (g *guarded) prepared(q []float64) guarded {
	p := *g
	r := q[g.iR]
	p.radius, p.scale = math.Pi*r*r, 1
	if g.guard {
		rg := r + q[g.iG]
		p.bound = 0.5 * math.Pi * (rg*rg - r*r)
		p.alpha = field.SlotLength(r, rg)
		p.scale = 1 + q[g.iModel]
	}
	if g.wedge {
		p.tilt = g.wedgeC * q[g.iWedge]
	}
	if g.coplanar {
		p.step = q[g.iStep]
		p.scale *= 1 + q[g.iEdge]*p.step/r
	}
	return p
}

// overValue is over at plain numbers with its derivative by d. GuardedChargeArea
// over d, rearranged: πR²/d + b/(d + α), b = ½π(R_g² − R²).
func (p *guarded) overValue(d float64) (f, slope float64) {
	inv := 1 / d
	s := 1 / (d + p.alpha)
	a := p.radius*inv + p.bound*s
	da := -p.radius*inv*inv - p.bound*s*s
	t := 1 + p.tilt*inv*inv
	dt := -2 * p.tilt * inv * inv * inv
	c := d / (d - p.step)
	dc := (1 - c) / (d - p.step)
	return p.scale * a * t * c, p.scale * (da*t*c + a*dt*c + a*t*dc)
}

// check refuses spacings outside the corrections' validity; d is the smallest
// electric spacing of the rows.
func (g *guarded) check(q []float64, d float64) ([]error, error) {
	var warn []error
	if g.guard && d < field.SlotMinimum*q[g.iG] {
		return nil, fmt.Errorf("corrections.guard_gap: the deep-slot formula holds for gaps of at least 5 × guard_gap (%.4g mm); the smallest gap is %.4g mm; exclude those rows or switch the correction off and state its uncertainty",
			field.SlotMinimum*1e3*q[g.iG], 1e3*d)
	}
	if g.wedge && math.Sqrt(q[g.iWedge]) > field.WedgeLimit*d {
		return nil, fmt.Errorf("corrections.wedge.half_difference: %.3g mm is more than a tenth of the smallest gap (%.3g mm); the expansion holds for small tilts", 1e3*math.Sqrt(q[g.iWedge]), 1e3*d)
	}
	if g.coplanar && math.Abs(q[g.iStep]) > 0.05*d {
		return nil, fmt.Errorf("corrections.coplanarity.step: %.3g mm is more than 5 %% of the smallest gap (%.3g mm); the formula holds for small steps", 1e3*q[g.iStep], 1e3*d)
	}
	if g.coplanar && math.Abs(q[g.iStep]) > 0.01*d {
		warn = append(warn, fmt.Errorf("corrections.coplanarity.step: %.3g mm is more than 1 %% of the smallest gap (%.3g mm); the first-order correction may not suffice", 1e3*q[g.iStep], 1e3*d))
	}
	return warn, nil
}

// dampAir warns of humidity at which such readings are not to be trusted.
func dampAir(h float64) []error {
	if h <= 0.7 {
		return nil
	}
	return []error{fmt.Errorf("environment.humidity: %.0f %% is above 70 %%, where surface leakage spoils such readings (common practice)", 100*h)}
}

// airDensity is the relative density of the air, 1 where it can't be told: the
// cautions stand even where the air is not known.
func airDensity(T, p float64) float64 {
	if d, err := field.RelativeAirDensity(T, p); err == nil {
		return d
	}
	return 1
}

// meet takes the row at voltage v, with field e across an air gap d and
// capacitance c, into the hazard; worst is the largest field over breakdown so
// far, negative before the first.
func (h *Hazard) meet(row int, v, e, d, c, delta float64, worst *float64) {
	v, e = math.Abs(v), math.Abs(e)
	h.Voltage = math.Max(h.Voltage, v)
	h.Energy = math.Max(h.Energy, field.StoredEnergy(c, v))
	h.Charge = math.Max(h.Charge, c*v)
	b, err := field.BreakdownField(d, delta)
	switch {
	case err == nil && e/b > *worst:
		*worst = e / b
		h.Field, h.Breakdown, h.Row, h.HasBreakdown = e, b, row, true
	case err != nil && !h.HasBreakdown && e > h.Field:
		h.Field, h.Row = e, row
	}
}

// predictAll evaluates a model at plain numbers over all rows.
func (m *Model) predictAll(q []float64, x [][]float64, n int) []float64 {
	f := make([]float64, n)
	if m.Block != nil && m.Block(q, x, 0, n, nil, f, nil) {
		return f
	}
	qj, xj := make([]jet.Jet, len(q)), make([]jet.Jet, len(x))
	for i, v := range q {
		qj[i] = jet.Const(v)
	}
	for i := range f {
		for p := range x {
			xj[p] = jet.Const(x[p][i])
		}
		f[i] = m.Row(qj, xj).V
	}
	return f
}

// proportional is the value of scalar j with which a prediction affine in it
// comes nearest to the readings, everything else at its stated value.
func (m *Model) proportional(q []float64, j int, x [][]float64, y []float64) float64 {
	w := append([]float64(nil), q...)
	w[j] = 0
	f0 := m.predictAll(w, x, len(y))
	w[j] = 1
	f1 := m.predictAll(w, x, len(y))
	var num, den float64
	for i := range y {
		d := f1[i] - f0[i]
		num += d * (y[i] - f0[i])
		den += d * d
	}
	return num / den
}

// startAt lists the stated values of the free scalars with that of scalar j
// replaced.
func startAt(q []float64, free []int, j int, v float64) []float64 {
	start := make([]float64, len(free))
	for k, f := range free {
		start[k] = q[f]
		if f == j {
			start[k] = v
		}
	}
	return start
}
