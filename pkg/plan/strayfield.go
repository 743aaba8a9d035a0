package plan

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/si"
)

// StrayField is the field that charged bodies make at a meter, with its
// uncertainty and the places where it vanishes.
type StrayField struct {
	Bench     *StrayBench
	Scene     *field.Scene
	Potential float64   // V, at the meter
	Field     field.Vec // V/m
	Magnitude float64   // V/m
	Component float64   // V/m, along the meter's direction; the magnitude when it has none
	// Standard uncertainties of Potential, Field and Magnitude.
	PotentialU, MagnitudeU float64
	FieldU                 field.Vec
	Law                    *gum.Law // of Component
	Parts                  []StrayPart
	Zeros                  []StrayZero
	Warnings               []error
}

// StrayPart is the share of one body.
type StrayPart struct {
	Name      string
	Charge    float64   // C, also where the potential is stated
	ChargeU   float64   // C, standard uncertainty of Charge
	Field     field.Vec // V/m, with its image
	Component float64   // V/m, along the direction of Component
	// Standard uncertainties of Field and Component.
	FieldU     field.Vec
	ComponentU float64
}

// StrayZero is a place without field.
type StrayZero struct {
	field.Zero
	// FieldU is the field (V/m) that one standard uncertainty of the meter's place
	// brings there, all directions together.
	FieldU float64
	// Line says that the place is one of a whole curve of such places, the one
	// nearest to the meter among those found.
	Line bool
}

// Stray finds the stray field of a bench. Spheres at stated potentials carry the
// charges that give every one of them its potential in the presence of all other
// charges and of the images in the plane, each taken as a charge at its centre:
// V_i = Σ_j p_ij q_j with p_ii = 1/4πεa_i (Maxwell, Treatise, art. 87). What a sphere's
// field owes to the displacement of its charge by the others is left out; Stray
// warns where that is not small.
//
// The uncertainty is that of JCGM 100:2008 5.1.3 with the note's numerical
// sensitivities, c_i u_i = ½[f(x_i + u_i) − f(x_i − u_i)].
func Stray(b *StrayBench) (*StrayField, error) {
	if _, problem := b.overlap(); problem != "" {
		return nil, fmt.Errorf("%s: %s", b.File, problem)
	}
	x := newStrayInputs(b)
	s := &StrayField{Bench: b}
	scene, err := x.scene(x.value)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", b.File, err)
	}
	s.Scene = scene
	at := x.at(x.value)
	if s.Potential, s.Field, _, err = scene.At(at); err != nil {
		return nil, fmt.Errorf("%s: %s: %w", b.File, b.Meter, err)
	}
	s.Magnitude = length(s.Field)
	along := b.Direction
	if along == nil {
		if s.Magnitude > 0 {
			along = &field.Vec{s.Field[0] / s.Magnitude, s.Field[1] / s.Magnitude, s.Field[2] / s.Magnitude}
		} else {
			along = &field.Vec{}
		}
	}
	component := func(v []float64) (float64, error) {
		scene, err := x.scene(v)
		if err != nil {
			return 0, err
		}
		e, err := scene.Field(x.at(v))
		if err != nil {
			return 0, err
		}
		return inner(e, *along), nil
	}
	if s.Component, err = component(x.value); err != nil {
		return nil, fmt.Errorf("%s: %w", b.File, err)
	}
	lines, err := x.lines(component)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", b.File, err)
	}
	if s.Law, err = gum.Combine(s.Component, lines, nil, b.Coverage); err != nil {
		return nil, fmt.Errorf("%s: %w", b.File, err)
	}
	if len(lines) == 0 {
		s.Warnings = append(s.Warnings, errors.New("nothing is said to be uncertain, so the field stands without an uncertainty; state u of charges and place_u of bodies and meter"))
	} else {
		s.Warnings = append(s.Warnings, s.Law.Warnings...)
	}
	parts, err := scene.Contributions(at)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", b.File, err)
	}
	u, err := x.spreads(func(v []float64) ([]float64, error) { return x.outputs(v, *along) })
	if err != nil {
		return nil, fmt.Errorf("%s: %w", b.File, err)
	}
	s.PotentialU, s.FieldU, s.MagnitudeU = u[0], field.Vec(u[1:4]), u[4]
	for i, p := range parts {
		w := u[outputsAt+outputsEach*i:]
		s.Parts = append(s.Parts, StrayPart{Name: p.Name, Charge: scene.Sources[i].Charge, ChargeU: w[0], Field: p.Field, FieldU: field.Vec(w[1:4]),
			Component: inner(p.Field, *along), ComponentU: w[4]})
	}
	if err := s.findZeros(); err != nil {
		return nil, err
	}
	s.Warnings = append(s.Warnings, b.near(scene)...)
	return s, nil
}

// findZeros looks for places without field in the search box, gentlest first.
func (s *StrayField) findZeros() error {
	b := s.Bench
	zeros, err := s.Scene.Zeros(b.From, b.To, 0)
	if err != nil {
		return fmt.Errorf("%s: search: %w", b.File, err)
	}
	curve := -1
	for _, z := range zeros {
		g := z.Gradient
		found := StrayZero{Zero: z, FieldU: b.AtU * math.Sqrt(g[0]*g[0]+g[1]*g[1]+g[2]*g[2])}
		// One direction without a gradient: the field vanishes along a curve, such as
		// that on the plane where its charge changes sign.
		if found.Line = math.Abs(g[1]) < 1e-6*z.Slope(); !found.Line {
			s.Zeros = append(s.Zeros, found)
			continue
		}
		if curve < 0 {
			curve = len(s.Zeros)
			s.Zeros = append(s.Zeros, found)
		} else if length(minus(z.At, b.At)) < length(minus(s.Zeros[curve].At, b.At)) {
			s.Zeros[curve] = found
		}
	}
	for i := 1; i < len(s.Zeros); i++ { // stable: equals keep their order in space
		for j := i; j > 0 && s.Zeros[j].Slope() < s.Zeros[j-1].Slope()*(1-1e-9); j-- {
			s.Zeros[j], s.Zeros[j-1] = s.Zeros[j-1], s.Zeros[j]
		}
	}
	return nil
}

// overlap finds a sphere that another body touches or reaches into, where no charge
// of either is where the description puts it: the index of the body, and what is
// wrong; "" when all stand apart.
func (b *StrayBench) overlap() (int, string) {
	for i := range b.Bodies {
		for j := range i {
			p, q := &b.Bodies[i], &b.Bodies[j]
			if p.Radius.Value == 0 {
				p, q = q, p
			}
			reach := p.Radius.Value + q.Radius.Value
			if reach == 0 {
				continue
			}
			if d := toSegment(p.From, q.From, q.To); !(d > reach) {
				if q.Radius.Value > 0 {
					return i, fmt.Sprintf("spheres %q and %q overlap: their centres are %.4g mm apart; want more than the sum of their radii, %.4g mm", q.Name, p.Name, 1e3*d, 1e3*reach)
				}
				return i, fmt.Sprintf("%s %q reaches into sphere %q: it comes within %.4g mm of the centre; want more than the radius, %.4g mm", q.Shape, q.Name, p.Name, 1e3*d, 1e3*reach)
			}
		}
	}
	return 0, ""
}

// near warns of spheres so near each other, the plane or the meter that the
// charge they displace on each other matters: 4(a/r)³ of the force, and so of the
// order of (a/r)³ of the field (published in the limit of far spheres, Lekner 2012).
func (b *StrayBench) near(scene *field.Scene) []error {
	var out []error
	const limit = 4.0
	for i := range b.Bodies {
		a := b.Bodies[i].Radius.Value
		if a == 0 {
			continue
		}
		say := func(what string, r float64) {
			if r < limit*a {
				out = append(out, fmt.Errorf("sphere %q is %.3g radii from %s; below %g the charge displaced on it, which is left out, exceeds a few per cent of its field", b.Bodies[i].Name, r/a, what, limit))
			}
		}
		for j := range b.Bodies {
			if j != i {
				say(fmt.Sprintf("%q", b.Bodies[j].Name), toSegment(b.Bodies[i].From, b.Bodies[j].From, b.Bodies[j].To))
			}
		}
		if scene.Plane != nil {
			d := minus(b.Bodies[i].From, scene.Plane.Point)
			say("the earthed plane's image", 2*inner(d, scene.Plane.Normal))
		}
	}
	return out
}

// strayInputs lays out everything that may be uncertain of a stray field in one
// vector: the medium, the meter's place, and of each body its charge or potential,
// its radius and both its ends.
type strayInputs struct {
	b     *StrayBench
	value []float64
	known []strayInput
}

// strayInput is one uncertain input: its budget line without a sensitivity, and
// the entries of the vector that move with it (both ends of an edge).
type strayInput struct {
	line gum.Contribution
	at   []int
}

const (
	strayFirst  = 4 // the medium and the meter's coordinates
	strayStride = 8 // of a body: charge or potential, radius, from, to
)

var axisNames = [3]string{"x", "y", "z"}

func newStrayInputs(b *StrayBench) *strayInputs {
	x := &strayInputs{b: b, value: make([]float64, strayFirst+strayStride*len(b.Bodies))}
	add := func(name, group string, d gum.Distribution, unit si.Unit, at ...int) {
		for _, i := range at {
			x.value[i] = d.Value
		}
		if d.U > 0 {
			x.known = append(x.known, strayInput{gum.Contribution{Input: name, Group: group, Unit: unit.Symbol, Shape: d.Shape, Value: d.Value, U: d.U, DOF: d.DOF}, at})
		}
	}
	place := func(name string, from, to field.Vec, u float64, at int, ends int) {
		for k := range 3 {
			entries := []int{at + k}
			if ends == 2 {
				entries = append(entries, at+3+k)
			}
			d := gum.Exactly(from[k])
			if u > 0 {
				d = gum.Normal(from[k], u)
			}
			add(name+" "+axisNames[k], name, d, lengthUnit, entries...)
			if ends == 2 {
				x.value[at+3+k] = to[k]
			}
		}
	}
	add("relative permittivity", "medium", b.Medium, pureUnit, 0)
	place(b.Meter, b.At, b.At, b.AtU, 1, 1)
	for i := range b.Bodies {
		body, at := &b.Bodies[i], strayFirst+strayStride*i
		if body.HasPotential {
			add(body.Name+" potential", body.Name, body.Potential, voltUnit, at)
		} else {
			add(body.Name+" charge", body.Name, body.Charge, chargeUnit, at)
		}
		add(body.Name+" radius", body.Name, body.Radius, lengthUnit, at+1)
		place(body.Name, body.From, body.To, body.PlaceU, at+2, 2)
	}
	return x
}

// at is the meter's place.
func (x *strayInputs) at(v []float64) field.Vec { return field.Vec{v[1], v[2], v[3]} }

// scene builds the sources from a vector of inputs.
func (x *strayInputs) scene(v []float64) (*field.Scene, error) {
	s := &field.Scene{Eps: v[0] * si.Eps0, Plane: x.b.Plane, Sources: make([]field.Source, len(x.b.Bodies))}
	var held []int
	for i := range x.b.Bodies {
		w := v[strayFirst+strayStride*i:]
		c := field.Source{Name: x.b.Bodies[i].Name, Charge: w[0], Radius: w[1], From: field.Vec{w[2], w[3], w[4]}, To: field.Vec{w[5], w[6], w[7]}}
		if x.b.Bodies[i].HasPotential {
			held = append(held, i)
			c.Charge = 0
		}
		s.Sources[i] = c
	}
	if len(held) == 0 {
		return s, nil
	}
	return s, hold(s, held, func(i int) float64 { return v[strayFirst+strayStride*i] })
}

// hold gives the spheres listed the charges that bring them to their potentials.
func hold(s *field.Scene, held []int, potential func(i int) float64) error {
	n := len(held)
	a, rhs := mat.NewDense(n, n, nil), mat.NewVecDense(n, nil)
	for row, i := range held {
		at := s.Sources[i].From
		rhs.SetVec(row, potential(i))
		for j := range s.Sources {
			p, err := influence(s, j, i, at)
			if err != nil {
				return err
			}
			col := -1
			for k, h := range held {
				if h == j {
					col = k
				}
			}
			if col >= 0 {
				a.Set(row, col, p)
			} else {
				rhs.SetVec(row, rhs.AtVec(row)-p*s.Sources[j].Charge)
			}
		}
	}
	var q mat.VecDense
	if err := q.SolveVec(a, rhs); err != nil {
		return fmt.Errorf("stray field: the charges of the spheres at stated potentials can't be told apart: %w", err)
	}
	for k, i := range held {
		s.Sources[i].Charge = q.AtVec(k)
	}
	return nil
}

// influence is the potential of sphere i for each coulomb on source j, image
// included.
func influence(s *field.Scene, j, i int, at field.Vec) (float64, error) {
	one := s.Sources[j]
	one.Charge = 1
	k := 1 / (4 * math.Pi * s.Eps)
	if i != j {
		one.Radius = 0 // spheres that overlap have been refused before
		return (&field.Scene{Eps: s.Eps, Sources: []field.Source{one}, Plane: s.Plane}).Potential(at)
	}
	p := k / s.Sources[i].Radius
	if s.Plane != nil {
		h := inner(minus(at, s.Plane.Point), s.Plane.Normal)
		p -= k / (2 * h)
	}
	return p, nil
}

// lines are the budget of f, with sensitivities from differences over ±u.
func (x *strayInputs) lines(f func(v []float64) (float64, error)) ([]gum.Contribution, error) {
	v := append([]float64(nil), x.value...)
	lines := make([]gum.Contribution, 0, len(x.known))
	for _, in := range x.known {
		side := func(by float64) (float64, error) {
			for _, i := range in.at {
				v[i] = x.value[i] + by
			}
			y, err := f(v)
			for _, i := range in.at {
				v[i] = x.value[i]
			}
			if err != nil {
				return 0, fmt.Errorf("%s changed by one standard uncertainty: %w", in.line.Input, err)
			}
			return y, nil
		}
		hi, err := side(in.line.U)
		if err != nil {
			return nil, err
		}
		lo, err := side(-in.line.U)
		if err != nil {
			return nil, err
		}
		line := in.line
		line.Sensitivity = (hi - lo) / (2 * line.U)
		lines = append(lines, line)
	}
	return lines, nil
}

// What outputs lays out: the potential, the field, its magnitude; then of each
// body its charge, its field and that along the direction.
const outputsAt, outputsEach = 5, 5

// outputs gives every quantity that is stated besides the measurand.
func (x *strayInputs) outputs(v []float64, along field.Vec) ([]float64, error) {
	s, err := x.scene(v)
	if err != nil {
		return nil, err
	}
	at := x.at(v)
	phi, e, _, err := s.At(at)
	if err != nil {
		return nil, err
	}
	out := []float64{phi, e[0], e[1], e[2], length(e)}
	parts, err := s.Contributions(at)
	if err != nil {
		return nil, err
	}
	for i, p := range parts {
		out = append(out, s.Sources[i].Charge, p.Field[0], p.Field[1], p.Field[2], inner(p.Field, along))
	}
	return out, nil
}

// spreads gives the standard uncertainties of several outputs, by the same
// differences over ±u as lines.
func (x *strayInputs) spreads(f func(v []float64) ([]float64, error)) ([]float64, error) {
	v := append([]float64(nil), x.value...)
	y, err := f(v)
	if err != nil {
		return nil, err
	}
	sum := make([]float64, len(y))
	for _, in := range x.known {
		var sides [2][]float64
		for k, by := range []float64{in.line.U, -in.line.U} {
			for _, i := range in.at {
				v[i] = x.value[i] + by
			}
			if sides[k], err = f(v); err != nil {
				return nil, fmt.Errorf("%s changed by one standard uncertainty: %w", in.line.Input, err)
			}
			for _, i := range in.at {
				v[i] = x.value[i]
			}
		}
		for k := range sum {
			d := (sides[0][k] - sides[1][k]) / 2
			sum[k] += d * d
		}
	}
	for k := range sum {
		sum[k] = math.Sqrt(sum[k])
	}
	return sum, nil
}

func inner(a, b field.Vec) float64   { return a[0]*b[0] + a[1]*b[1] + a[2]*b[2] }
func minus(a, b field.Vec) field.Vec { return field.Vec{a[0] - b[0], a[1] - b[1], a[2] - b[2]} }
func length(a field.Vec) float64     { return math.Sqrt(inner(a, a)) }

// toSegment is the distance of p from the straight line from a to b.
func toSegment(p, a, b field.Vec) float64 {
	along, d := minus(b, a), minus(p, a)
	if l := inner(along, along); l > 0 {
		t := math.Max(0, math.Min(1, inner(d, along)/l))
		for k := range 3 {
			d[k] -= t * along[k]
		}
	}
	return length(d)
}
