package model

import (
	"fmt"
	"math"
	"strconv"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// What the benches with a force between charged bodies share: the force is read
// in newtons, as the indication of a balance, or as the angle of a torsion
// balance.
//
// A torsion balance turns by φ = θ − θ₀ until κφ = F L cos ψ. Nulled, the arm
// stays where it was and the head turns, so that distance and ψ are those at
// rest. Deflecting, the arm turns by φ itself, F and ψ depend on it
// (field.TorsionGeometry) and the equilibrium is found by iteration; with
// g(φ) = κφ − F L cos ψ, two steps from its root with the fixed slope g′ carry
// first and second derivatives exactly, since each step raises by one the order
// to which a departure from the root is answered (derived).

// torsionScalars describe a torsion balance.
var torsionScalars = []Scalar{
	{Table: "quantities", Name: "torsion_constant", Doc: "torsion constant of the suspension; for readings of an angle", Unit: si.MustUnit("uN m/rad"), Positive: true, Part: "torsion balance"},
	{Table: "quantities", Name: "arm", Doc: "length of the torsion arm, axis to the centre of the body", Unit: si.MustUnit("mm"), Positive: true, Part: "torsion balance"},
	{Table: "quantities", Name: "rest_angle", Doc: "angle read without force (zero readings take it off already)", Unit: si.MustUnit("mrad"), Adjustable: true, Part: "torsion balance"},
	{Table: "quantities", Name: "line_angle", Doc: "angle between the line of centres and the path of the moving body, at rest", Unit: si.MustUnit("deg"), Part: "torsion balance"},
}

// torsionOption says whether the arm moves.
var torsionOption = Option{Key: "torsion", Doc: "nulled: the head is turned until the arm is back at rest; deflecting: the arm turns and changes the distance",
	Values: []string{"nulled", "deflecting"}, Default: "nulled"}

// forceChannels are the responses of such a bench.
func forceChannels(sign string) []Channel {
	return []Channel{
		{Name: "force", Doc: "force, " + sign, Unit: si.MustUnit("uN"), Role: Response},
		{Name: "mass", Doc: "indication of the balance, conventional mass, of the sign of the force; turn it round by a gain of -1", Unit: si.MustUnit("mg"), Role: Response},
	}
}

// angleChannel is the response of a torsion balance.
var angleChannel = Channel{Name: "angle", Doc: "angle of the torsion balance, positive for repulsion", Unit: si.MustUnit("mrad"), Role: Response}

// forceReading turns a force into what is read.
type forceReading struct {
	response                     string
	perMass                      func(q []jet.Jet) jet.Jet
	perMassValue                 func(q []float64) float64
	angle, deflecting            bool
	iKappa, iArm, iRest, iLineAt int
}

func newForceReading(k *Kind, s *Setup) (*forceReading, error) {
	r := &forceReading{response: "force", iKappa: k.Scalar("torsion_constant"), iArm: k.Scalar("arm"), iRest: k.Scalar("rest_angle"), iLineAt: k.Scalar("line_angle")}
	var err error
	if r.perMass, r.perMassValue, err = forcePerMass(k, s); err != nil {
		return nil, err
	}
	switch {
	case r.perMass != nil:
		r.response = "mass"
	case s.Channels["angle"]:
		r.response, r.angle = "angle", true
		r.deflecting = s.Options["torsion"] == "deflecting"
		for _, key := range []string{"torsion_constant", "arm"} {
			if !s.Given[key] {
				return nil, fmt.Errorf("quantities.%s: is missing; the angle of a torsion balance needs its torsion constant and its arm", key)
			}
		}
		if a := s.Scalars[r.iLineAt]; !(math.Abs(a) < 1.5) {
			return nil, fmt.Errorf("quantities.line_angle: %.4g rad turns the force along the arm; want less than 1.5 rad", a)
		}
	default:
		if s.Options["torsion"] == "deflecting" {
			return nil, fmt.Errorf("torsion: %q is for readings of an angle; this bench reads a %s", "deflecting", r.response)
		}
	}
	return r, nil
}

// row is the reading for a force law that depends on the true distance; dist is
// the distance at rest, law and slope the force by jets and by plain numbers with
// its derivative by the distance.
func (r *forceReading) row(q []jet.Jet, dist jet.Jet, law func(d jet.Jet) jet.Jet, slope func(d float64) (f, df float64)) jet.Jet {
	switch {
	case r.perMass != nil:
		return law(dist).Div(r.perMass(q))
	case !r.angle:
		return law(dist)
	case !r.deflecting:
		return q[r.iRest].Add(law(dist).Mul(q[r.iArm]).Mul(q[r.iLineAt].Cos()).Div(q[r.iKappa]))
	}
	v := balanceValues{kappa: q[r.iKappa].V, arm: q[r.iArm].V}
	v.sinLine, v.cosLine = math.Sincos(q[r.iLineAt].V)
	e := v.settle(dist.V, slope)
	phi := jet.Const(e.phi)
	for range 2 {
		d, cos := field.TorsionGeometryJet(dist, q[r.iLineAt], q[r.iArm], phi)
		g := q[r.iKappa].Mul(phi).Sub(law(d).Mul(q[r.iArm]).Mul(cos))
		phi = phi.Sub(g.Scale(1 / e.stiffness))
	}
	return q[r.iRest].Add(phi)
}

// balanceValues holds one set of scalars of the reading.
type balanceValues struct {
	r                *forceReading
	unit, rest       float64 // reading = rest + unit·F when nothing moves
	kappa, arm       float64
	sinLine, cosLine float64
}

// at prepares plain evaluations.
func (r *forceReading) at(q []float64) balanceValues {
	v := balanceValues{r: r, unit: 1}
	switch {
	case r.perMass != nil:
		v.unit = 1 / r.perMassValue(q)
	case r.angle:
		v.kappa, v.arm, v.rest = q[r.iKappa], q[r.iArm], q[r.iRest]
		v.sinLine, v.cosLine = math.Sincos(q[r.iLineAt])
		v.unit = v.arm * v.cosLine / v.kappa
	}
	return v
}

// equilibrium is where a deflecting arm stands.
type equilibrium struct {
	phi, dist, cos float64
	sin            float64 // of ψ, between the line of the centres and the path of the moving one
	f, df          float64 // force and its derivative by the distance, there
	stiffness      float64 // g′ = κ − L d(F cos ψ)/dφ; NaN throughout when there is no equilibrium
	byRest, cosBy  float64 // ∂dist/∂(distance at rest), ∂cos/∂(distance at rest)
}

// settle finds the equilibrium from the rest position; an attraction that the
// suspension can't hold has none.
func (v *balanceValues) settle(rest float64, law func(d float64) (f, df float64)) (e equilibrium) {
	var d0, f0, df0 float64 // the evaluation before
	for range 100 {
		v.place(&e, rest)
		e.f, e.df = law(e.dist)
		dcos := v.stiffen(&e)
		// Halley's step, with the curvature of the power of the distance that has
		// this value and slope in the place of the exact one: it only speeds the
		// iteration, whose root is that of g.
		g := v.kappa*e.phi - e.f*v.arm*e.cos
		second := e.df * (e.df/e.f - 1/e.dist) // of the force
		bend := -v.arm * v.arm * v.arm * e.cos * e.cos * e.cos * second
		step := g / e.stiffness
		if h := 1 - 0.5*step*bend/e.stiffness; h > 0.5 {
			step /= h
		}
		e.phi -= step
		if !(math.Abs(e.phi) < 1.5) || !(e.stiffness > 0) {
			break
		}
		// What the step may miss is of its second order, for which the curvatures of
		// the force and of the path stand.
		missed := 0.5 * step * step * (math.Abs(bend) + v.arm*math.Abs(2*e.df*v.arm*e.cos*dcos) + v.arm*math.Abs(e.f)) / e.stiffness
		if missed <= settled*math.Abs(e.phi) {
			if math.Abs(step) > 3e-11*math.Abs(e.phi) { // else it is below rounding
				was := e.dist
				v.place(&e, rest)
				if h := was - d0; d0 > 0 && h != 0 {
					second = curvature(was, e.f, e.df, f0*d0*d0, df0*d0*d0+2*d0*f0, h)
				}
				d := e.dist - was
				e.f += d * (e.df + 0.5*d*second)
				e.df += d * second
				v.stiffen(&e)
			}
			return e
		}
		d0, f0, df0 = e.dist, e.f, e.df
	}
	return equilibrium{phi: math.NaN(), dist: math.NaN(), cos: math.NaN(), f: math.NaN(), df: math.NaN(), stiffness: math.NaN()}
}

// curvature is the second derivative of a force that has value f and slope df at d,
// from that of the cubic through F = f·d², which hardly varies, and its slope, there
// and a distance h before, where they are F0 and dF0.
func curvature(d, f, df, F0, dF0, h float64) float64 {
	F, dF := f*d*d, df*d*d+2*d*f
	bent := (2*(dF0+2*dF) - 6*(F-F0)/h) / h
	return (bent - 2*f - 4*d*df) / (d * d)
}

// settled is how far from the equilibrium an arm may be said to stand, relative to
// its deflection.
const settled = 1e-14

// place finds where the arm stands at e.phi.
func (v *balanceValues) place(e *equilibrium, rest float64) {
	s, c := math.Sincos(e.phi)
	x := rest*v.sinLine - v.arm*s*s/(1+c) // 1 − cos φ without its cancellation
	y := rest*v.cosLine + v.arm*s
	e.dist = math.Sqrt(x*x + y*y)
	e.cos = (y*c - x*s) / e.dist
	e.sin = (y*s + x*c) / e.dist
	e.byRest = (x*v.sinLine + y*v.cosLine) / e.dist
	e.cosBy = (v.cosLine*c - v.sinLine*s - e.cos*e.byRest) / e.dist
}

// stiffen finds g′ from the force there, and returns d cos ψ/dφ.
func (v *balanceValues) stiffen(e *equilibrium) float64 {
	// d dist/dφ = L cos ψ, d cos ψ/dφ = L sin²ψ/dist − sin ψ (derived)
	dcos := v.arm*e.sin*e.sin/e.dist - e.sin
	e.stiffness = v.kappa - v.arm*(e.df*v.arm*e.cos*e.cos+e.f*dcos)
	return dcos
}

// reading is one predicted reading with what its derivatives need.
type reading struct {
	y      float64
	dist   float64 // true distance
	f      float64 // force there
	byF    float64 // ∂y/∂F at fixed distance
	byDist float64 // ∂y/∂(distance at rest), the force law following
}

// read predicts one reading; dist is the distance at rest.
func (v *balanceValues) read(dist float64, law func(d float64) (f, df float64)) reading {
	if v.r.deflecting {
		e := v.settle(dist, law)
		k := v.arm / e.stiffness
		return reading{y: v.rest + e.phi, dist: e.dist, f: e.f, byF: k * e.cos, byDist: k * (e.df*e.cos*e.byRest + e.f*e.cosBy)}
	}
	f, df := law(dist)
	return reading{y: v.rest + v.unit*f, dist: dist, f: f, byF: v.unit, byDist: v.unit * df}
}

// check refuses readings at which a torsion balance has no equilibrium.
func (r *forceReading) check(i int, y float64) error {
	if r.deflecting && math.IsNaN(y) {
		return &RowError{Row: i, Err: fmt.Errorf("torsion: the suspension can't hold this attraction (no equilibrium within 1.5 rad); take a stiffer one, a larger distance, or null the balance")}
	}
	return nil
}

// strength is the factor by which all forces of a bench must be multiplied to
// come nearest to its readings y; f are readings predicted at factor one, rest
// the reading without force. Rows where the arm deflects are close enough to
// proportional for a start.
func strength(f, y []float64, rest float64) float64 {
	var num, den float64
	for i := range y {
		d := f[i] - rest
		num += d * (y[i] - rest)
		den += d * d
	}
	return num / den
}

// wrongSign finds a reading that has clearly not the sign of what its charges or
// potentials demand: at least half of the prediction, the other way. It returns
// −1 when there is none.
func wrongSign(f, y []float64, factor, rest float64) int {
	for i := range y {
		want, got := factor*(f[i]-rest), y[i]-rest
		if want*got < 0 && math.Abs(got) > 0.5*math.Abs(want) {
			return i
		}
	}
	return -1
}

// startPermittivity finds a start for the permittivity; all forces are
// proportional to it (bodies at fixed potentials) or to its inverse (fixed
// charges).
func (m *Model) startPermittivity(q []float64, iEps int, proportional bool, r *forceReading, x [][]float64, y []float64) (float64, error) {
	w := append([]float64(nil), q...)
	w[iEps] = si.Eps0
	k := strength(m.predictAll(w, x, len(y)), y, r.at(q).rest)
	if !(k > 0) || math.IsInf(k, 0) {
		return 0, fmt.Errorf("readings of %s: on the whole they have not the sign that charges and potentials demand, or there is no force; check the signs of all channels, and the zero", r.response)
	}
	if proportional {
		return si.Eps0 * k, nil
	}
	return si.Eps0 / k, nil
}

// checkSigns refuses a row at which a torsion balance has no equilibrium, or whose
// force has clearly the wrong sign; predictions are made with scalar j at the
// value v, and what says what the row has.
func (m *Model) checkSigns(q []float64, j int, v float64, r *forceReading, x [][]float64, y []float64, what func(i int) string) error {
	w := append([]float64(nil), q...)
	w[j] = v
	f := m.predictAll(w, x, len(y))
	for i := range f {
		if err := r.check(i, f[i]); err != nil {
			return err
		}
	}
	rest := r.at(q).rest
	k := strength(f, y, rest)
	if !(k > 0) {
		return nil // Start tells
	}
	if i := wrongSign(f, y, k, rest); i >= 0 {
		return &RowError{Row: i, Err: fmt.Errorf("%s %s: %s give a force of the other sign here; check the signs, the zero, and how the bodies are held", r.response, r.told(y[i]), what(i))}
	}
	return nil
}

// told writes a reading with its unit.
func (r *forceReading) told(y float64) string {
	unit := si.Force.Unit()
	switch {
	case r.perMass != nil:
		unit = si.Mass.Unit()
	case r.angle:
		unit = si.MustUnit("rad")
	}
	y, unit = si.Prefixed(y, unit)
	return strconv.FormatFloat(y, 'g', 4, 64) + " " + unit.String()
}
