package field

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/jet"
)

// Vec is a point (m) or a field (V/m) in Cartesian components.
type Vec = [3]float64

// A Source is a charge that makes a stray field: a point, a sphere (outside, a
// point at its centre) or a straight edge with its charge spread evenly.
type Source struct {
	Name     string
	Charge   float64 // C
	From, To Vec     // m; equal for points and spheres
	Radius   float64 // m; 0 for points and edges
}

// PointSource is a point charge q (C).
func PointSource(name string, q float64, at Vec) Source {
	return Source{Name: name, Charge: q, From: at, To: at}
}

// SphereSource is a conducting sphere of radius a (m) with charge q (C), far
// enough from the others that induction does not move its charge.
func SphereSource(name string, q float64, at Vec, a float64) Source {
	return Source{Name: name, Charge: q, From: at, To: at, Radius: a}
}

// EdgeSource is a straight edge, as of a plate, with total charge q (C) spread
// evenly from one end to the other.
func EdgeSource(name string, q float64, from, to Vec) Source {
	return Source{Name: name, Charge: q, From: from, To: to}
}

// Plane is a wide earthed plane through Point with Normal pointing to the side
// of the sources.
type Plane struct{ Point, Normal Vec }

// Scene is a set of sources in a medium, with an earthed plane or without.
type Scene struct {
	Eps     float64 // F/m
	Sources []Source
	Plane   *Plane
}

// sources returns the sources with their mirror images of opposite sign.
func (s *Scene) sources() ([]Source, error) {
	if err := refuse("stray field", positive("permittivity", s.Eps, "F/m")); err != nil {
		return nil, err
	}
	all := make([]Source, 0, 2*len(s.Sources))
	for _, c := range s.Sources {
		if math.IsNaN(c.Charge) || math.IsInf(c.Charge, 0) || !(c.Radius >= 0) || math.IsInf(c.Radius, 1) || bad(c.From) || bad(c.To) {
			return nil, fmt.Errorf("stray field: source %q has a charge, place or radius that is not a finite number, or a negative radius", c.Name)
		}
		all = append(all, c)
	}
	if s.Plane == nil {
		return all, nil
	}
	n, err := unitVector(s.Plane.Normal)
	if err != nil {
		return nil, err
	}
	for _, c := range s.Sources {
		for _, e := range []Vec{c.From, c.To} {
			if h := dot(sub(e, s.Plane.Point), n); h <= c.Radius {
				return nil, fmt.Errorf("stray field: source %q is %.4g m above the earthed plane; want more than its radius, %.4g m, on the side of the normal", c.Name, h, c.Radius)
			}
		}
		all = append(all, Source{Name: c.Name, Charge: -c.Charge, From: mirror(c.From, s.Plane.Point, n), To: mirror(c.To, s.Plane.Point, n), Radius: c.Radius})
	}
	return all, nil
}

// At returns potential (V) and field (V/m) at a point, and the gradient of the
// field J[i][j] = ∂E_i/∂x_j (V/m²), symmetric and without trace: the vector sum
// of E = q r/(4πε r³) over points, and for an edge of length L with distances
// r₁, r₂ to its ends
//
//	φ = q/(4πεL) ln[(s + L)/(s − L)],  E = q/(4πε) · 2(r̂₁ + r̂₂)/(s² − L²),  s = r₁ + r₂
//
// (derived; prolate spheroidal potential). An earthed plane is replaced by
// mirror charges (Maxwell, Treatise, art. 157); behind it, on a source, or
// inside a sphere it refuses.
func (s *Scene) At(p Vec) (phi float64, E Vec, J [3]Vec, err error) {
	all, err := s.sources()
	if err != nil {
		return 0, E, J, err
	}
	if err := s.outside(p); err != nil {
		return 0, E, J, err
	}
	phi, E, J = sum(all, s.Eps, p)
	return phi, E, J, nil
}

// Field returns the field (V/m) at p; see At.
func (s *Scene) Field(p Vec) (Vec, error) {
	_, e, _, err := s.At(p)
	return e, err
}

// Potential returns the potential (V) at p against earth or infinity; see At.
func (s *Scene) Potential(p Vec) (float64, error) {
	phi, _, _, err := s.At(p)
	return phi, err
}

// outside refuses points where the sum is not the field.
func (s *Scene) outside(p Vec) error {
	if bad(p) {
		return fmt.Errorf("stray field: the point %v is not a place", p)
	}
	for _, c := range s.Sources {
		if r := distance(c, p); r < c.Radius*(1-1e-9) || r == 0 {
			return fmt.Errorf("stray field: the point %v lies in source %q; want one more than %.4g m from it", p, c.Name, c.Radius)
		}
	}
	if s.Plane != nil {
		n, err := unitVector(s.Plane.Normal)
		if err != nil {
			return err
		}
		if h := dot(sub(p, s.Plane.Point), n); h < 0 {
			return fmt.Errorf("stray field: the point %v lies %.4g m behind the earthed plane, where the field is zero", p, -h)
		}
	}
	return nil
}

// sum adds potential, field and field gradient of sources at p.
func sum(all []Source, eps float64, p Vec) (phi float64, E Vec, J [3]Vec) {
	for _, c := range all {
		k := c.Charge / (4 * math.Pi * eps)
		d1, d2 := sub(p, c.From), sub(p, c.To)
		r1, r2 := norm(d1), norm(d2)
		L := norm(sub(c.To, c.From))
		s := r1 + r2
		u1, u2 := scale(d1, 1/r1), scale(d2, 1/r2)
		q := 2 / ((s - L) * (s + L))
		if L > 0 {
			phi += k / L * math.Log1p(2*L/(s-L))
		} else {
			phi += k / r1
		}
		for i := range 3 {
			g := u1[i] + u2[i]
			E[i] += k * q * g
			for j := range 3 {
				h := -s * q * q * g * (u1[j] + u2[j])
				t := -u1[i]*u1[j]/r1 - u2[i]*u2[j]/r2
				if i == j {
					t += 1/r1 + 1/r2
				}
				J[i][j] += k * (h + q*t)
			}
		}
	}
	return phi, E, J
}

// PointFieldJet returns the field (V/m) at at (m) of a point charge q (C) at
// source (m) in permittivity eps, with derivatives in all of them.
func PointFieldJet(eps, q jet.Jet, source, at [3]jet.Jet) [3]jet.Jet {
	var d [3]jet.Jet
	var r2 jet.Jet
	for i := range d {
		d[i] = at[i].Sub(source[i])
		if i == 0 {
			r2 = d[i].Sqr()
		} else {
			r2 = r2.Add(d[i].Sqr())
		}
	}
	k := q.Div(eps.Mul(r2.Mul(r2.Sqrt()))).Scale(1 / (4 * math.Pi))
	for i := range d {
		d[i] = d[i].Mul(k)
	}
	return d
}

// distance is that of p from the centre line of a source.
func distance(c Source, p Vec) float64 {
	along := sub(c.To, c.From)
	l2 := dot(along, along)
	d := sub(p, c.From)
	if l2 == 0 {
		return norm(d)
	}
	t := math.Max(0, math.Min(1, dot(d, along)/l2))
	return norm(sub(d, scale(along, t)))
}

func sub(a, b Vec) Vec           { return Vec{a[0] - b[0], a[1] - b[1], a[2] - b[2]} }
func add(a, b Vec) Vec           { return Vec{a[0] + b[0], a[1] + b[1], a[2] + b[2]} }
func scale(a Vec, k float64) Vec { return Vec{k * a[0], k * a[1], k * a[2]} }
func dot(a, b Vec) float64       { return a[0]*b[0] + a[1]*b[1] + a[2]*b[2] }
func norm(a Vec) float64         { return math.Sqrt(dot(a, a)) }
func mirror(p, point, n Vec) Vec { return sub(p, scale(n, 2*dot(sub(p, point), n))) }
func bad(p Vec) bool             { v := dot(p, p); return math.IsNaN(v) || math.IsInf(v, 0) }
func unitVector(n Vec) (Vec, error) {
	l := norm(n)
	if !(l > 0) || math.IsInf(l, 0) {
		return Vec{}, fmt.Errorf("stray field: the earthed plane has normal %v; want a direction", n)
	}
	return scale(n, 1/l), nil
}

// A Contribution is what one source, with its mirror image, adds to the field at
// a point, and how that changes: a row of the budget of a stray field.
type Contribution struct {
	Name string
	// Field is its part of E (V/m); it goes with the charge, so that a relative
	// uncertainty of the charge is one of Field.
	Field Vec
	// BySource[i][j] is ∂E_i/∂(place of the source)_j (V/m²), the image moving
	// with it. With the plane fixed, ∂E/∂(place of the meter) is J of At.
	BySource [3]Vec
}

// Contributions splits the field at p by source, in their order; see At.
func (s *Scene) Contributions(p Vec) ([]Contribution, error) {
	all, err := s.sources()
	if err != nil {
		return nil, err
	}
	if err := s.outside(p); err != nil {
		return nil, err
	}
	out := make([]Contribution, len(s.Sources))
	for i, c := range s.Sources {
		_, e, j := sum(all[i:i+1], s.Eps, p)
		out[i] = Contribution{Name: c.Name, Field: e}
		for k := range 3 {
			out[i].BySource[k] = scale(j[k], -1)
		}
		if s.Plane == nil {
			continue
		}
		n, err := unitVector(s.Plane.Normal)
		if err != nil {
			return nil, err
		}
		_, e, j = sum(all[len(s.Sources)+i:len(s.Sources)+i+1], s.Eps, p)
		out[i].Field = add(out[i].Field, e)
		for k := range 3 { // the image moves by (1 − 2nnᵀ) times the source
			row := sub(j[k], scale(n, 2*dot(j[k], n)))
			out[i].BySource[k] = sub(out[i].BySource[k], row)
		}
	}
	return out, nil
}
