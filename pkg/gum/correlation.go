package gum

import (
	"fmt"
	"math"
	"strings"

	"gonum.org/v1/gonum/mat"

	"example.org/guardring/pkg/si"
)

// CheckCorrelation reports whether r can be a correlation matrix of quantities
// with the given names: ones on the diagonal, coefficients within [−1, 1], no
// negative eigenvalue. The error names the coefficient or eigenvalue at fault and, for
// the latter, offers the nearest matrix that is possible.
func CheckCorrelation(r *mat.SymDense, names []string) error {
	n := r.SymmetricDim()
	if len(names) != n {
		return fmt.Errorf("correlation matrix of %d quantities with %d names", n, len(names))
	}
	for i := range n {
		for j := range i + 1 {
			x := r.At(i, j)
			if i == j {
				if x != 1 {
					return fmt.Errorf("correlation of %s with itself is %v: it must be 1", names[i], x)
				}
			} else if !(math.Abs(x) <= 1) {
				return fmt.Errorf("correlation between %s and %s is %v: it must lie between -1 and 1", names[j], names[i], x)
			}
		}
	}
	if n < 2 {
		return nil
	}
	values, err := eigenvalues(r)
	if err != nil {
		return err
	}
	if values[0] >= -1e-12*float64(n) {
		return nil
	}
	near, err := NearestCorrelation(r)
	if err != nil {
		return err
	}
	if near, err = rounded(near); err != nil {
		return err
	}
	var changed []string
	for i := range n {
		for j := range i {
			if near.At(i, j) != r.At(i, j) { // however little: only the whole set is possible
				changed = append(changed, fmt.Sprintf("%s–%s %v instead of %v", names[j], names[i], near.At(i, j), r.At(i, j)))
			}
		}
	}
	return fmt.Errorf("the correlations of %s can't all hold: smallest eigenvalue of their matrix is %.3g, of %d, and none may be negative; the nearest possible ones are %s",
		strings.Join(names, ", "), values[0], n, strings.Join(changed, ", "))
}

// rounded returns r with few decimals and still possible: four where that leaves no
// negative eigenvalue, else six after a slight shrink towards no correlation.
func rounded(r *mat.SymDense) (*mat.SymDense, error) {
	n := r.SymmetricDim()
	out := mat.NewSymDense(n, nil)
	round := func(shrink, digits float64) {
		for i := range n {
			for j := range i {
				out.SetSym(i, j, math.Round(r.At(i, j)*shrink*digits)/digits)
			}
			out.SetSym(i, i, 1)
		}
	}
	round(1, 1e4)
	values, err := eigenvalues(out)
	if err == nil && values[0] < -1e-12*float64(n) {
		round(1-1e-6*float64(n), 1e6)
	}
	return out, err
}

func eigenvalues(r *mat.SymDense) ([]float64, error) {
	var e mat.EigenSym
	if !e.Factorize(r, false) {
		return nil, fmt.Errorf("the eigenvalues of the correlation matrix could not be found")
	}
	return e.Values(nil), nil
}

// NearestCorrelation returns the correlation matrix nearest to r in the Frobenius
// norm, by Higham's alternating projections with Dykstra's correction (Higham,
// "Computing the nearest correlation matrix", IMA J. Numer. Anal. 22 (2002)
// 329–343, algorithm 3.3), finished by a shrink towards the identity that leaves
// no negative eigenvalue.
func NearestCorrelation(r *mat.SymDense) (*mat.SymDense, error) {
	n := r.SymmetricDim()
	y := mat.NewSymDense(n, nil)
	y.CopySym(r)
	ds := mat.NewSymDense(n, nil)
	x := mat.NewSymDense(n, nil)
	var e mat.EigenSym
	var v mat.Dense
	for range 1000 {
		work := mat.NewSymDense(n, nil)
		for i := range n {
			for j := range i + 1 {
				work.SetSym(i, j, y.At(i, j)-ds.At(i, j))
			}
		}
		if !e.Factorize(work, true) {
			return nil, fmt.Errorf("the eigenvalues of the correlation matrix could not be found")
		}
		e.VectorsTo(&v)
		values := e.Values(nil)
		for i := range n {
			for j := range i + 1 {
				var s float64
				for k, l := range values {
					s += max(l, 0) * v.At(i, k) * v.At(j, k)
				}
				x.SetSym(i, j, s)
			}
		}
		var moved float64
		for i := range n {
			for j := range i + 1 {
				to := x.At(i, j)
				ds.SetSym(i, j, to-work.At(i, j))
				if i == j {
					to = 1
				}
				moved = math.Max(moved, math.Abs(to-y.At(i, j)))
				y.SetSym(i, j, to)
			}
		}
		if moved < 1e-10 {
			break
		}
	}
	values, err := eigenvalues(y)
	if err != nil {
		return nil, err
	}
	if l := values[0]; l < 0 {
		// λ' = (λ + δ)/(1 + δ) with δ = −λ_min
		for i := range n {
			for j := range i {
				y.SetSym(i, j, y.At(i, j)/(1-l))
			}
		}
	}
	return y, nil
}

// checkPairs checks coefficients between quantities with the given names.
func checkPairs(corr []Correlation, names []string) error {
	if len(corr) == 0 {
		return nil
	}
	at := make([]int, len(names)) // position among the correlated ones, plus 1
	var involved []string
	for _, c := range corr {
		if c.I < 0 || c.J < 0 || c.I >= len(names) || c.J >= len(names) {
			return fmt.Errorf("correlation between inputs %d and %d: there are %d inputs, counted from 0", c.I, c.J, len(names))
		}
		if c.I == c.J {
			return fmt.Errorf("correlation of %s with itself: leave it out, it is 1", names[c.I])
		}
		if !(math.Abs(c.R) <= 1) {
			return fmt.Errorf("correlation between %s and %s is %v: it must lie between -1 and 1", names[c.I], names[c.J], c.R)
		}
		for _, k := range []int{c.I, c.J} {
			if at[k] == 0 {
				involved = append(involved, names[k])
				at[k] = len(involved)
			}
		}
	}
	r := mat.NewSymDense(len(involved), nil)
	for i := range involved {
		r.SetSym(i, i, 1)
	}
	seen := make(map[[2]int]bool, len(corr))
	for _, c := range corr {
		pair := [2]int{min(c.I, c.J), max(c.I, c.J)}
		if seen[pair] {
			return fmt.Errorf("correlation between %s and %s is given twice", names[c.I], names[c.J])
		}
		seen[pair] = true
		r.SetSym(at[c.I]-1, at[c.J]-1, c.R)
	}
	return CheckCorrelation(r, involved)
}

// components returns for each of n quantities the lowest index among those it is
// correlated with, directly or through others, of those that take part.
func components(n int, corr []Correlation, takesPart func(int) bool) []int {
	root := make([]int, n)
	for i := range root {
		root[i] = i
	}
	find := func(i int) int {
		for root[i] != i {
			root[i] = root[root[i]]
			i = root[i]
		}
		return i
	}
	for _, c := range corr {
		if c.R == 0 || !takesPart(c.I) || !takesPart(c.J) {
			continue
		}
		a, b := find(c.I), find(c.J)
		root[max(a, b)] = min(a, b)
	}
	for i := range root {
		root[i] = find(i)
	}
	return root
}

// unknownName returns the error for a name that none of known is, with the
// nearest one as a suggestion.
func unknownName(what, name string, known []string) error {
	if s := si.Suggest(name, known); s != "" {
		return fmt.Errorf("%s: unknown input %q; did you mean %q?", what, name, s)
	}
	return fmt.Errorf("%s: unknown input %q; known are %s", what, name, strings.Join(known, ", "))
}
