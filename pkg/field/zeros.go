package field

import (
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/gonum/mat"
)

// A Zero is a place where the field vanishes: a candidate for zeroing a meter.
type Zero struct {
	At  Vec
	Phi float64 // V
	// Gradient holds the eigenvalues (V/m²) of the field gradient, rising, and
	// Axes the directions that belong to them. They sum to zero, so that some
	// direction is unstable for a free charge of either sign (Earnshaw); the
	// largest magnitude is the field that a misplacement of 1 m would bring,
	// were the field linear.
	Gradient Vec
	Axes     [3]Vec
}

// Slope returns the largest field change (V/m) per metre of misplacement.
func (z Zero) Slope() float64 { return math.Max(math.Abs(z.Gradient[0]), math.Abs(z.Gradient[2])) }

// Stable reports whether a free positive charge there would return from a
// displacement along axis i (0 to 2).
func (z Zero) Stable(i int) bool { return z.Gradient[i] < 0 }

// Zeros finds the points within the box lo to hi where the field vanishes, by
// damped Newton iterations from a grid of starts (n a side, 0 for 7), sorted by
// x, y, z. Points that are not isolated (a ring) are returned where iterations
// met them, so the list may be long then. The search sees what its grid sees: a
// pair of zeros closer than the grid can be missed.
func (s *Scene) Zeros(lo, hi Vec, n int) ([]Zero, error) {
	all, err := s.sources()
	if err != nil {
		return nil, err
	}
	if n == 0 {
		n = 7
	}
	size := 0.0
	for i := range 3 {
		if !(hi[i] >= lo[i]) {
			return nil, fmt.Errorf("zeros of the field: box from %v to %v; want every upper bound at or above the lower one", lo, hi)
		}
		size = math.Max(size, hi[i]-lo[i])
	}
	if n < 2 || n > 100 || size == 0 {
		return nil, fmt.Errorf("zeros of the field: %d starts a side in a box of %.3g m; want 2 to 100 and a box with a side", n, size)
	}
	var found []Zero
	start := func(i, k int) float64 { // off the planes of symmetry, where Newton can stall
		return lo[k] + (hi[k]-lo[k])*(float64(i)+0.5+0.01*float64(k+1))/float64(n)
	}
	for i := range n {
		for j := range n {
			for k := range n {
				p, ok := s.newton(all, Vec{start(i, 0), start(j, 1), start(k, 2)}, lo, hi, size)
				if !ok || s.outside(p) != nil {
					continue
				}
				known := false
				for _, z := range found {
					if norm(sub(z.At, p)) < 1e-6*size {
						known = true
						break
					}
				}
				if !known {
					z, err := s.zeroAt(all, p)
					if err != nil {
						return nil, err
					}
					found = append(found, z)
				}
			}
		}
	}
	sort.Slice(found, func(a, b int) bool {
		p, q := found[a].At, found[b].At
		for i := range 3 {
			if math.Abs(p[i]-q[i]) > 1e-6*size {
				return p[i] < q[i]
			}
		}
		return false
	})
	return found, nil
}

// newton looks for a zero of E from p.
func (s *Scene) newton(all []Source, p, lo, hi Vec, size float64) (Vec, bool) {
	_, e, j := sum(all, s.Eps, p)
	for range 60 {
		var m mat.Dense
		m.CloneFrom(mat.NewDense(3, 3, []float64{j[0][0], j[0][1], j[0][2], j[1][0], j[1][1], j[1][2], j[2][0], j[2][1], j[2][2]}))
		var x mat.VecDense
		if err := x.SolveVec(&m, mat.NewVecDense(3, []float64{e[0], e[1], e[2]})); err != nil {
			return p, false // a degenerate gradient: another start will do
		}
		step := Vec{-x.AtVec(0), -x.AtVec(1), -x.AtVec(2)}
		if l := norm(step); l > 0.1*size {
			step = scale(step, 0.1*size/l)
		}
		best := norm(e)
		ok := false
		for range 12 {
			q := add(p, step)
			_, eq, jq := sum(all, s.Eps, q)
			if norm(eq) < best {
				p, e, j, ok = q, eq, jq, true
				break
			}
			step = scale(step, 0.5)
		}
		if norm(step) < 1e-13*size {
			ok = false
		}
		for i := range 3 {
			if p[i] < lo[i]-1e-9*size || p[i] > hi[i]+1e-9*size {
				return p, false
			}
		}
		if !ok {
			break
		}
	}
	// zero against what the single sources make there
	var parts float64
	for _, c := range all {
		_, f, _ := sum([]Source{c}, s.Eps, p)
		parts += norm(f)
	}
	return p, norm(e) < 1e-11*parts
}

func (s *Scene) zeroAt(all []Source, p Vec) (Zero, error) {
	phi, _, j := sum(all, s.Eps, p)
	var eig mat.EigenSym
	if !eig.Factorize(mat.NewSymDense(3, []float64{j[0][0], j[0][1], j[0][2], j[0][1], j[1][1], j[1][2], j[0][2], j[1][2], j[2][2]}), true) {
		return Zero{}, fmt.Errorf("zeros of the field: no eigenvalues of the field gradient at %v", p)
	}
	z := Zero{At: p, Phi: phi}
	eig.Values(z.Gradient[:])
	var v mat.Dense
	eig.VectorsTo(&v)
	for k := range 3 {
		sign := 1.0
		for i := range 3 { // the first component that is not small is positive
			if c := v.At(i, k); math.Abs(c) > 1e-6 {
				sign = math.Copysign(1, c)
				break
			}
		}
		for i := range 3 {
			z.Axes[k][i] = sign * v.At(i, k)
		}
	}
	return z, nil
}
