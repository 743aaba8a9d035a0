package field

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/mat"
)

// Love is a direct numerical solution of Love's integral equation for two thin
// equal coaxial discs of radius R a distance d = κR apart (E. R. Love, Quart. J.
// Mech. Appl. Math. 2 (1949) 428):
//
//	f(x) ∓ (1/π) ∫₋₁¹ κ f(t)/(κ² + (x − t)²) dt = 1,
//
// upper sign for opposite potentials ±V/2, lower for equal ones.
type Love struct {
	Kappa float64
	// C is 2∫f: the charge of a disc is εR·C times the potential difference
	// (opposite potentials), or twice that potential (equal ones).
	C float64
	// D and D2 are the first and second derivatives of C by κ.
	D, D2 float64
	x, w  []float64 // nodes on 0 to 1 and their weights
	f     []float64
	same  bool
}

// LoveNodes is the largest number of nodes that SolveLove takes: 500 MB of matrices.
const LoveNodes = 4000

// SolveLove solves Love's equation by Nyström's method on n Gauss–Legendre nodes
// over the half range (f is even). 8/κ nodes or more give 1e-13; fewer than 32
// or 4/κ, or more than LoveNodes, are refused. same selects equal potentials. The
// derivatives by κ come from the differentiated equation with the same factors. The
// work grows as n³: DiscCapacitance and its kin evaluate a table made by this
// function instead.
func SolveLove(kappa float64, n int, same bool) (*Love, error) {
	if err := refuse("Love's equation", positive("spacing / radius", kappa, "1")); err != nil {
		return nil, err
	}
	if n > LoveNodes {
		return nil, fmt.Errorf("solution of Love's equation: %d nodes need three matrices of that size squared; want at most %d", n, LoveNodes)
	}
	if n < 32 || float64(n)*kappa < 4 {
		return nil, fmt.Errorf("solution of Love's equation: %d nodes are too few for spacing / radius %.3g; want 32 and %.0f or more", n, kappa, math.Ceil(4/kappa))
	}
	l := &Love{Kappa: kappa, x: make([]float64, n), w: make([]float64, n), same: same}
	quad.Legendre{}.FixedLocations(l.x, l.w, 0, 1)
	a := mat.NewDense(n, n, nil)
	k1 := mat.NewDense(n, n, nil)
	k2 := mat.NewDense(n, n, nil)
	sign := -1.0
	if same {
		sign = 1
	}
	for i, x := range l.x {
		for j, t := range l.x {
			k, d, d2 := loveKernel(kappa, x-t)
			m, e, e2 := loveKernel(kappa, x+t)
			a.Set(i, j, sign*(k+m)*l.w[j])
			k1.Set(i, j, -sign*(d+e)*l.w[j])
			k2.Set(i, j, -sign*(d2+e2)*l.w[j])
		}
		a.Set(i, i, a.At(i, i)+1)
	}
	var lu mat.LU
	lu.Factorize(a)
	one := make([]float64, n)
	for i := range one {
		one[i] = 1
	}
	var f, f1, f2, r, s mat.VecDense
	if err := lu.SolveVecTo(&f, false, mat.NewVecDense(n, one)); err != nil {
		return nil, fmt.Errorf("solution of Love's equation at spacing / radius %.3g: %w", kappa, err)
	}
	r.MulVec(k1, &f)
	if err := lu.SolveVecTo(&f1, false, &r); err != nil {
		return nil, fmt.Errorf("solution of Love's equation at spacing / radius %.3g: %w", kappa, err)
	}
	r.MulVec(k2, &f)
	s.MulVec(k1, &f1)
	r.AddScaledVec(&r, 2, &s)
	if err := lu.SolveVecTo(&f2, false, &r); err != nil {
		return nil, fmt.Errorf("solution of Love's equation at spacing / radius %.3g: %w", kappa, err)
	}
	l.f = f.RawVector().Data
	for i, w := range l.w {
		l.C += 4 * w * f.AtVec(i)
		l.D += 4 * w * f1.AtVec(i)
		l.D2 += 4 * w * f2.AtVec(i)
	}
	return l, nil
}

// loveKernel returns κ/π(κ²+s²) and its first two derivatives by κ.
func loveKernel(kappa, s float64) (k, d, d2 float64) {
	k2, s2 := kappa*kappa, s*s
	q := 1 / (k2 + s2)
	return kappa * q / math.Pi, (s2 - k2) * q * q / math.Pi, 2 * kappa * (k2 - 3*s2) * q * q * q / math.Pi
}

// At returns f(x) for |x| ≤ 1 by Nyström's interpolation.
func (l *Love) At(x float64) float64 {
	sign := 1.0
	if l.same {
		sign = -1
	}
	v := 1.0
	for j, t := range l.x {
		k, _, _ := loveKernel(l.Kappa, x-t)
		m, _, _ := loveKernel(l.Kappa, x+t)
		v += sign * (k + m) * l.w[j] * l.f[j]
	}
	return v
}
