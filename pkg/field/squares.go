package field

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// SquarePlates is a numerical solution for two equal thin square plates of
// width W a distance d apart, surroundings far away: relative departures of the
// centre field from V/d.
type SquarePlates struct {
	// MidGap is that at mid-gap, balanced drive; negative.
	MidGap float64
	// Surface is that at the inner surface of either plate, balanced; positive.
	Surface float64
	// Common is what the common mode V/2 adds at the earthed plate when one
	// side is earthed; negative. The total there is Surface + Common.
	Common float64
}

// SolveSquarePlates solves for the surface charge on n×n patches a quadrant,
// graded towards the edges, by collocation (point matching at patch centres;
// exact potential of a uniformly charged rectangle). n = 20 gives the
// departures to about 5e-5 of the field for W/d from 1 to 5 (what refining
// still changes shows it); the work grows as n⁶.
func SolveSquarePlates(W, d float64, n int) (*SquarePlates, error) {
	if err := refuse("square plates", positive("width", W, "m"), positive("spacing", d, "m"), within("width / spacing", W/d, "1", 0.5, 8)); err != nil {
		return nil, err
	}
	if n < 4 || n > 64 {
		return nil, fmt.Errorf("square plates: %d patches a half side; want 4 to 64", n)
	}
	// lengths in half widths
	h := 2 * d / W
	s := &squareGrid{n: n, edge: make([]float64, 2*n+1)}
	for i := range s.edge { // cosine grading: patches narrow as the square towards the edges
		s.edge[i] = -math.Cos(math.Pi * float64(i) / float64(2*n))
	}
	balanced, err := s.solve(h, -1)
	if err != nil {
		return nil, err
	}
	common, err := s.solve(h, 1)
	if err != nil {
		return nil, err
	}
	// plates at ±½ and at +½, +½; ideal field 1/h
	mid := 2 * s.normalField(balanced, h/2)
	surf := 2*math.Pi*s.centre(balanced) + s.normalField(balanced, h)
	comm := 2*math.Pi*s.centre(common) - s.normalField(common, h)
	return &SquarePlates{MidGap: mid*h - 1, Surface: surf*h - 1, Common: -comm * h}, nil
}

// squareGrid is a plate cut into 2n×2n patches; by its symmetry only those with
// 0 < x ≤ y carry unknowns. Gaussian units: φ = ∫σ/r.
type squareGrid struct {
	n    int
	edge []float64
}

// index numbers the patch in column i and row j, counted from an edge.
func (s *squareGrid) index(i, j int) int {
	fold := func(k int) int {
		if k < s.n {
			return s.n - 1 - k
		}
		return k - s.n
	}
	i, j = fold(i), fold(j)
	if i > j {
		i, j = j, i
	}
	return j*(j+1)/2 + i
}

// solve returns the charges for potential ½ on the plate when another at height
// h carries sign times the same.
func (s *squareGrid) solve(h, sign float64) ([]float64, error) {
	m := s.n * (s.n + 1) / 2
	a := mat.NewDense(m, m, nil)
	b := make([]float64, m)
	k := 2 * s.n
	own := make([]float64, (k+1)*(k+1))
	other := make([]float64, (k+1)*(k+1))
	for p := s.n; p < k; p++ {
		y := (s.edge[p] + s.edge[p+1]) / 2
		for q := s.n; q <= p; q++ {
			x := (s.edge[q] + s.edge[q+1]) / 2
			row := s.index(q, p)
			b[row] = 0.5
			for i, ex := range s.edge {
				for j, ey := range s.edge {
					own[i*(k+1)+j] = rectanglePotential(ex-x, ey-y, 0)
					other[i*(k+1)+j] = rectanglePotential(ex-x, ey-y, h)
				}
			}
			corner := func(f []float64, i, j int) float64 {
				return f[(i+1)*(k+1)+j+1] - f[i*(k+1)+j+1] - f[(i+1)*(k+1)+j] + f[i*(k+1)+j]
			}
			for i := range k {
				for j := range k {
					c := s.index(i, j)
					a.Set(row, c, a.At(row, c)+corner(own, i, j)+sign*corner(other, i, j))
				}
			}
		}
	}
	var x mat.VecDense
	if err := x.SolveVec(a, mat.NewVecDense(m, b)); err != nil {
		return nil, fmt.Errorf("square plates: %w", err)
	}
	return x.RawVector().Data, nil
}

// rectanglePotential is the corner function whose four-corner difference is the
// potential of a uniformly charged rectangle at height z over a point (derived:
// double integral of 1/r).
func rectanglePotential(x, y, z float64) float64 {
	r := math.Sqrt(x*x + y*y + z*z)
	v := x*logSum(y, r, x*x+z*z) + y*logSum(x, r, y*y+z*z)
	if z != 0 {
		v -= z * math.Atan(x*y/(z*r))
	}
	return v
}

// logSum returns ln(y + r) with r² = y² + rest, without cancellation.
func logSum(y, r, rest float64) float64 {
	if y < 0 {
		return math.Log(rest / (r - y))
	}
	return math.Log(y + r)
}

// normalField is the field along the axis at height z over the centre.
func (s *squareGrid) normalField(sigma []float64, z float64) float64 {
	k := 2 * s.n
	omega := func(i, j int) float64 {
		x, y := s.edge[i], s.edge[j]
		return math.Atan(x * y / (z * math.Sqrt(x*x+y*y+z*z)))
	}
	var e float64
	for i := range k {
		for j := range k {
			e += sigma[s.index(i, j)] * (omega(i+1, j+1) - omega(i, j+1) - omega(i+1, j) + omega(i, j))
		}
	}
	return e
}

// centre extrapolates the charge density to the centre of the plate from the
// two innermost patches on the diagonal, even in x and y.
func (s *squareGrid) centre(sigma []float64) float64 {
	mid := func(i int) float64 { return (s.edge[s.n+i] + s.edge[s.n+i+1]) / 2 }
	x0, x1 := mid(0), mid(1)
	v0, v1 := sigma[s.index(s.n, s.n)], sigma[s.index(s.n+1, s.n+1)]
	return v0 - (v1-v0)*x0*x0/(x1*x1-x0*x0)
}
