package gum_test

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"

	"example.org/guardring/pkg/gum"
)

// TestOfferedCorrelations: what an error offers is accepted, to the digits printed.
func TestOfferedCorrelations(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(2, 6).Draw(t, "n")
		r := mat.NewSymDense(n, nil)
		names := []string{"a", "b", "c", "d", "e", "f"}[:n]
		for i := range n {
			r.SetSym(i, i, 1)
			for j := range i {
				r.SetSym(i, j, rapid.Float64Range(-1, 1).Draw(t, "r"))
			}
		}
		err := gum.CheckCorrelation(r, names)
		if err == nil {
			return
		}
		_, offers, ok := strings.Cut(err.Error(), "the nearest possible ones are ")
		if !ok {
			t.Fatal(err)
		}
		for _, o := range strings.Split(offers, ", ") {
			var pair string
			var x, was float64
			if _, err := fmt.Sscanf(o, "%s %g instead of %g", &pair, &x, &was); err != nil {
				t.Fatalf("%q: %v", o, err)
			}
			a, b, _ := strings.Cut(pair, "–")
			r.SetSym(int(a[0]-'a'), int(b[0]-'a'), x)
		}
		if err := gum.CheckCorrelation(r, names); err != nil {
			t.Fatalf("offered %s: %v", offers, err)
		}
	})
}

// TestNearestCorrelation reproduces the example of Higham, IMA J. Numer. Anal. 22
// (2002) 329, section 1 or 4 (value from memory): the nearest correlation matrix to
// [1 1 0; 1 1 1; 0 1 1] has 0.7607 beside the diagonal and 0.1573 in the corner, and is
// 0.5278 away.
func TestNearestCorrelation(t *testing.T) {
	r := mat.NewSymDense(3, []float64{1, 1, 0, 1, 1, 1, 0, 1, 1})
	n, err := gum.NearestCorrelation(r)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "r12", n.At(0, 1), 0.7607, 0.00005)
	near(t, "r23", n.At(1, 2), 0.7607, 0.00005)
	near(t, "r13", n.At(0, 2), 0.1573, 0.00005)
	var d mat.Dense
	d.Sub(r, n)
	near(t, "distance", mat.Norm(&d, 2), 0.5278, 0.00005)
	if err := gum.CheckCorrelation(n, []string{"a", "b", "c"}); err != nil {
		t.Errorf("the nearest is itself refused: %v", err)
	}
}

func TestCheckCorrelation(t *testing.T) {
	names := []string{"radius", "gain", "offset"}
	r := mat.NewSymDense(3, []float64{1, 0.9, -0.9, 0.9, 1, 0.9, -0.9, 0.9, 1})
	err := gum.CheckCorrelation(r, names)
	// Eigenvalues of this matrix: 1.9 twice and −0.8.
	for _, w := range []string{"radius, gain, offset", "-0.8", "radius–gain", "nearest"} {
		if err == nil || !strings.Contains(err.Error(), w) {
			t.Errorf("error %v lacks %q", err, w)
		}
	}
	for _, c := range []struct {
		i, j int
		x    float64
		word string
	}{{0, 1, 1.2, "radius and gain is 1.2"}, {2, 2, 0.9, "offset with itself"}, {1, 2, math.NaN(), "gain and offset is NaN"}} {
		r := mat.NewSymDense(3, []float64{1, 0, 0, 0, 1, 0, 0, 0, 1})
		r.SetSym(c.i, c.j, c.x)
		if err := gum.CheckCorrelation(r, names); err == nil || !strings.Contains(err.Error(), c.word) {
			t.Errorf("error %v lacks %q", err, c.word)
		}
	}
	if err := gum.CheckCorrelation(r, names[:2]); err == nil {
		t.Error("two names for three quantities are accepted")
	}
	// On the edge: full correlation is possible.
	if err := gum.CheckCorrelation(mat.NewSymDense(3, []float64{1, 1, -1, 1, 1, -1, -1, -1, 1}), names); err != nil {
		t.Error(err)
	}
}
