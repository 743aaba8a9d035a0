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
	{Table: "quantities", Name: "bench_capacitance", Doc: "capacitance of everything at high voltage, for the stored energy (default: the disc alone)", Unit: si.MustUnit("pF"), NotNegative: true, Part: "safety"},
	electricConstant,
	{Table: "corrections.guard_gap", Name: "model", Doc: "relative error of the formula of the guard gap", Unit: si.MustUnit("1"), Default: gum.Normal(0, field.SlotAreaUncertainty), Part: "electrodes"},
	{Table: "corrections.wedge", Name: "half_difference", Doc: "plates not parallel: half the difference of spacing across the disc", Unit: si.MustUnit("um"), Required: true, Squared: true, Part: "electrodes"},
	{Table: "corrections.coplanarity", Name: "step", Doc: "height of the disc above the plane of the guard", Unit: si.MustUnit("um"), Required: true, Part: "electrodes"},
	{Table: "corrections.coplanarity", Name: "edge", Doc: "coefficient of the edge term, in step/radius", Unit: si.MustUnit("1"), Default: gum.Rectangular(0, 2), Part: "electrodes"},
	temperature, pressure, humidity,
}

// guarded is the effective area of a guarded disc over the spacing, with the
// corrections in use: charge = ε_eff V · over.
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
