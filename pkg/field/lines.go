package field

import (
	"fmt"
	"math"
)

// LineEnd says why a field line ended.
type LineEnd int

const (
	// OnSource: the line reached a source; FieldLine.Source says which.
	OnSource LineEnd = iota
	// OnPlane: it reached the earthed plane.
	OnPlane
	// LeftBox: it left the box.
	LeftBox
	// AtZero: it ran into a place without field.
	AtZero
	// TooLong: it used up its steps.
	TooLong
)

// String says it in words.
func (e LineEnd) String() string {
	switch e {
	case OnSource:
		return "on a source"
	case OnPlane:
		return "on the plane"
	case LeftBox:
		return "left the box"
	case AtZero:
		return "at a zero of the field"
	case TooLong:
		return "step limit"
	}
	return fmt.Sprintf("LineEnd(%d)", int(e))
}

// LineSettings bound a field line. The zero value of each field is its default.
type LineSettings struct {
	Tolerance float64 // local error of a step over the size of the box; 1e-7
	MaxStep   float64 // m; 1/50 of the size of the box
	MaxSteps  int     // 5000
	Capture   float64 // m, the radius at which a point or an edge ends a line; 1e-3 of the size of the box
}

// FieldLine is a line of force as a polyline.
type FieldLine struct {
	Points []Vec
	End    LineEnd
	Source string // name of the source it ended on
}

// Line follows the field from start, along it (forward) or against it, within
// the box lo to hi, by the embedded Runge–Kutta pair of Dormand and Prince (J.
// Comp. Appl. Math. 6 (1980) 19) in arc length with adaptive steps. Field lines
// leave positive charge and end on negative charge, on the plane or far away.
func (s *Scene) Line(start Vec, forward bool, lo, hi Vec, set LineSettings) (*FieldLine, error) {
	all, err := s.sources()
	if err != nil {
		return nil, err
	}
	if err := s.outside(start); err != nil {
		return nil, err
	}
	size := 0.0
	for i := range 3 {
		size = math.Max(size, hi[i]-lo[i])
		if start[i] < lo[i] || start[i] > hi[i] {
			return nil, fmt.Errorf("field line: start %v is not in the box %v to %v", start, lo, hi)
		}
	}
	if set.Tolerance == 0 {
		set.Tolerance = 1e-7
	}
	if set.MaxStep == 0 {
		set.MaxStep = size / 50
	}
	if set.MaxSteps == 0 {
		set.MaxSteps = 5000
	}
	if set.Capture == 0 {
		set.Capture = 1e-3 * size
	}
	if !(set.Tolerance > 0 && set.MaxStep > 0 && set.MaxSteps > 0 && set.Capture > 0) {
		return nil, fmt.Errorf("field line: settings %+v; want positive values or 0 for the defaults", set)
	}
	sign := -1.0
	if forward {
		sign = 1
	}
	direction := func(p Vec) (Vec, bool) {
		_, e, _ := sum(all, s.Eps, p)
		var parts float64
		for _, c := range all {
			d := distance(c, p)
			parts += math.Abs(c.Charge) / (4 * math.Pi * s.Eps * d * d)
		}
		m := norm(e)
		if m <= 1e-9*parts || m == 0 || math.IsNaN(m) {
			return Vec{}, false
		}
		return scale(e, sign/m), true
	}
	var n Vec
	if s.Plane != nil {
		if n, err = unitVector(s.Plane.Normal); err != nil {
			return nil, err
		}
	}
	line := &FieldLine{Points: []Vec{start}, End: TooLong}
	p, h := start, set.MaxStep/10
	k1, ok := direction(p)
	if !ok {
		line.End = AtZero
		return line, nil
	}
	for range set.MaxSteps {
		// no step longer than half the way to the next source: its field turns there
		for _, c := range s.Sources {
			h = math.Min(h, math.Max(0.5*(distance(c, p)-c.Radius), 0.1*set.Capture))
		}
		q, k7, bad, ok := dormandPrince(direction, p, k1, h)
		if !ok {
			if h > 1e-9*size {
				h /= 4
				continue
			}
			line.End = AtZero
			return line, nil
		}
		grow := 0.9 * math.Pow(set.Tolerance*size/math.Max(bad, 1e-300), 0.2)
		if bad > set.Tolerance*size {
			h *= math.Max(0.2, grow)
			if h < 1e-12*size {
				line.End = AtZero
				return line, nil
			}
			continue
		}
		if dot(k1, k7) < 0 { // the field turned back within the step: a zero, once the step is small
			if h > 10*set.Tolerance*size {
				h /= 4
				continue
			}
			line.Points = append(line.Points, q)
			line.End = AtZero
			return line, nil
		}
		last := p
		p, k1 = q, k7
		h = math.Min(set.MaxStep, h*math.Min(4, grow))
		if s.Plane != nil {
			a, b := dot(sub(last, s.Plane.Point), n), dot(sub(p, s.Plane.Point), n)
			if b <= 1e-9*size { // end where the chord meets the plane
				if a > b {
					p = add(last, scale(sub(p, last), math.Min(1, a/(a-b))))
				}
				line.Points = append(line.Points, p)
				line.End = OnPlane
				return line, nil
			}
		}
		line.Points = append(line.Points, p)
		for _, c := range s.Sources {
			// a line ends on charge of the sign it runs to and leaves the other
			if sign*c.Charge < 0 && distance(c, p) <= math.Max(c.Radius*(1+1e-6), set.Capture) {
				if r := norm(sub(p, c.From)); c.Radius > 0 && r > 0 { // end on the surface
					line.Points[len(line.Points)-1] = add(c.From, scale(sub(p, c.From), c.Radius/r))
				}
				line.End, line.Source = OnSource, c.Name
				return line, nil
			}
		}
		for i := range 3 {
			if p[i] < lo[i] || p[i] > hi[i] {
				line.End = LeftBox
				return line, nil
			}
		}
	}
	return line, nil
}

// dormandPrince makes one step of length h from p, where the direction is k1,
// and estimates its error (m).
func dormandPrince(f func(Vec) (Vec, bool), p, k1 Vec, h float64) (q, k7 Vec, bad float64, ok bool) {
	k := [7]Vec{k1}
	for i := 1; i < 7; i++ {
		x := p
		for j := range i {
			x = add(x, scale(k[j], h*dpA[i-1][j]))
		}
		if k[i], ok = f(x); !ok {
			return q, k7, 0, false
		}
		q = x // the last stage is the fifth-order result
	}
	var e Vec
	for j := range k {
		e = add(e, scale(k[j], h*dpE[j]))
	}
	return q, k[6], norm(e), true
}

// Coefficients of the pair: stages, and fifth less fourth order.
var (
	dpA = [6][6]float64{
		{1. / 5},
		{3. / 40, 9. / 40},
		{44. / 45, -56. / 15, 32. / 9},
		{19372. / 6561, -25360. / 2187, 64448. / 6561, -212. / 729},
		{9017. / 3168, -355. / 33, 46732. / 5247, 49. / 176, -5103. / 18656},
		{35. / 384, 0, 500. / 1113, 125. / 192, -2187. / 6784, 11. / 84},
	}
	dpE = [7]float64{71. / 57600, 0, -71. / 16695, 71. / 1920, -17253. / 339200, 22. / 525, -1. / 40}
)
