package field_test

import (
	"math"
	"testing"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
)

// headMultipoles solves a conducting uncharged sphere of radius a at mid-gap of
// two wide plates at spacing 1 in unit field by its multipoles and their images
// (all orders to n), and returns the relative rise of its dipole and of the
// charge on a hemisphere. Every image of an odd axial multipole in either plate
// is its equal at a distance m from it (independent of the package).
func headMultipoles(a float64, n int) (dipole, hemisphere float64) {
	zeta := func(s int) float64 { // Σ 1/mˢ
		v := 0.0
		for m := 400; m >= 1; m-- {
			v += math.Pow(float64(m), -float64(s))
		}
		return v + math.Pow(400.5, 1-float64(s))/float64(s-1)
	}
	binomial := func(n, k int) float64 {
		c := 1.0
		for i := 1; i <= k; i++ {
			c *= float64(n-k+i) / float64(i)
		}
		return c
	}
	// φ = Σ A_l P_l/r^(l+1) + Σ B_l r^l P_l, l odd; B from the images and −E₀z; φ(a) = 0.
	// A multipole A_k at ±m on the axis gives (−1)^l or (−1)^k binom(k+l, l) A_k/m^(k+l+1): both even together.
	size := (n + 1) / 2
	m := make([][]float64, size)
	for i := range m {
		l := 2*i + 1
		m[i] = make([]float64, size+1)
		for j := range size {
			k := 2*j + 1
			m[i][j] = -2 * binomial(k+l, l) * zeta(k+l+1) * math.Pow(a, float64(2*l+1))
		}
		m[i][i]++
		if l == 1 {
			m[i][size] = a * a * a
		}
	}
	for i := range m { // Gauss
		for j := i + 1; j < size; j++ {
			f := m[j][i] / m[i][i]
			for k := i; k <= size; k++ {
				m[j][k] -= f * m[i][k]
			}
		}
	}
	A := make([]float64, size)
	for i := size - 1; i >= 0; i-- {
		A[i] = m[i][size]
		for k := i + 1; k < size; k++ {
			A[i] -= m[i][k] * A[k]
		}
		A[i] /= m[i][i]
	}
	// surface charge ∝ (2l+1) A_l/a^(l+2) P_l; over the hemisphere ∫₀¹ P_l = (−1)^((l−1)/2) (l−1)!!/… by recurrence
	integral := 0.5 // l = 1
	for i := range size {
		l := 2*i + 1
		hemisphere += float64(2*l+1) * A[i] / math.Pow(a, float64(l+2)) * integral
		integral *= -float64(l) / float64(l+3)
	}
	return A[0]/(a*a*a) - 1, hemisphere/1.5 - 1
}

func TestHeadImage(t *testing.T) {
	near(t, "x at 0.2", first(t)(field.HeadImage(field.HemisphereCharge, 0.2, 1)), 0.0385, 0, 5e-5)
	near(t, "dipole at 0.2", first(t)(field.HeadImage(field.Dipole, 0.2, 1)), 0.040, 0, 5e-5)
	for _, a := range []float64{0.02, 0.05, 0.1, 0.15, 0.2} {
		dipole, hemisphere := headMultipoles(a, 15)
		again, _ := headMultipoles(a, 21)
		near(t, name("multipoles converged at %g", a), again, dipole, 1e-9, 0)
		d, half, err := field.HeadImage(field.Dipole, a, 1)
		if err != nil {
			t.Fatal(err)
		}
		near(t, name("dipole at %g", a), d, dipole, 0.01, 0)
		near(t, name("half-width at %g", a), half, d*field.HeadResidual, 1e-15, 0)
		h := first(t)(field.HeadImage(field.HemisphereCharge, a, 1))
		near(t, name("hemisphere at %g", a), h, hemisphere, 0.01, 0)
	}
	if _, _, err := field.HeadImage(field.Dipole, 0.21, 1); err == nil {
		t.Error("a head too large passed")
	}
}

func first(t *testing.T) func(v, _ float64, err error) float64 {
	return func(v, _ float64, err error) float64 {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
}

// TestFinitePlates compares the formulas with a numerical solution of square
// plates: W/d = 2, 3 balanced, 4 to 6 over an earthed plane (the mirror pair at
// half the ratio), and equal plates with one earthed.
func TestFinitePlates(t *testing.T) {
	for _, w := range []float64{2, 2.5, 3} {
		s, err := field.SolveSquarePlates(w, 1, 20)
		if err != nil {
			t.Fatal(err)
		}
		coarse, err := field.SolveSquarePlates(w, 1, 13)
		if err != nil {
			t.Fatal(err)
		}
		// what refining still changes bounds the error of the finer solution
		for _, c := range []struct {
			site         field.PlateSite
			W            float64
			want, coarse float64
		}{
			{field.BalancedMidGap, w, s.MidGap, coarse.MidGap},
			{field.BalancedSurface, w, s.Surface, coarse.Surface},
			{field.OverEarthedPlane, 2 * w, s.MidGap, coarse.MidGap},
			{field.EqualOneEarthed, w, s.Surface + s.Common, coarse.Surface + coarse.Common},
		} {
			numeric := math.Abs(c.want - c.coarse)
			rel, u, err := field.FinitePlates(c.site, c.W, 1)
			if err != nil {
				t.Fatal(err)
			}
			if math.Abs(rel-c.want) > u+numeric {
				t.Errorf("%v at W/d = %g: %.3g ± %.2g, numerical %.3g", c.site, c.W, rel, u, c.want)
			}
			if c.site != field.EqualOneEarthed && math.Abs(rel) > math.Abs(c.want)+numeric {
				t.Errorf("%v at W/d = %g: the formula should be low, %.3g against %.3g", c.site, c.W, rel, c.want)
			}
		}
	}
	// printed to two figures, computed independently
	s, err := field.SolveSquarePlates(2, 1, 20)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "mid-gap at 2", s.MidGap, -0.0032, 0, 5e-5)
	near(t, "surface at 2", s.Surface, 0.0033, 0, 2.5e-4)
	near(t, "common mode at 2", s.Common, -0.046, 0, 5e-4)
	near(t, "total at 2", first(t)(field.FinitePlates(field.EqualOneEarthed, 2, 1)), -0.043, 0, 5e-4)
	near(t, "total at 3", first(t)(field.FinitePlates(field.EqualOneEarthed, 3, 1)), -0.0079, 0, 5e-5)
	near(t, "total at 4", first(t)(field.FinitePlates(field.EqualOneEarthed, 4, 1)), -0.0014, 0, 5e-5)
	near(t, "formula at 2", first(t)(field.FinitePlates(field.BalancedMidGap, 2, 1)), -0.0027, 0, 5e-5)
	near(t, "formula at 4 over earth", first(t)(field.FinitePlates(field.OverEarthedPlane, 4, 1)), -0.0027, 0, 5e-5)
	// over an earthed plane at W/d = 2 and 3 the formula would be far low: 7.6 % and 1.57 % (computed)
	for _, c := range [][2]float64{{2, -0.076}, {3, -0.0157}} {
		s, err := field.SolveSquarePlates(c[0]/2, 1, 16)
		if err != nil {
			t.Fatal(err)
		}
		near(t, name("numerical over an earthed plane at %g", c[0]), s.MidGap, c[1], 0.006, 0)
	}
	for _, c := range []struct {
		site field.PlateSite
		w    float64
	}{{field.BalancedMidGap, 1.9}, {field.OverEarthedPlane, 3.9}, {field.EqualOneEarthed, 1.9}, {field.EqualOneEarthed, 5.1}, {field.PlateSite(9), 3}} {
		if _, _, err := field.FinitePlates(c.site, c.w, 1); err == nil {
			t.Errorf("%v at W/d = %g passed", c.site, c.w)
		}
	}
}

func TestFiniteDerivatives(t *testing.T) {
	for _, site := range []field.PlateSite{field.BalancedMidGap, field.BalancedSurface, field.OverEarthedPlane, field.EqualOneEarthed} {
		x := []float64{1, 0.22}
		checkDerivatives(t, site.String(), func(x []jet.Jet) jet.Jet { return field.FinitePlatesJet(site, x[0], x[1]) }, x, []float64{0.1, 0.02}, 1e-8)
	}
	for _, head := range []field.Head{field.HemisphereCharge, field.Dipole} {
		x := []float64{0.02, 0.2}
		checkDerivatives(t, head.String(), func(x []jet.Jet) jet.Jet { return field.HeadImageJet(head, x[0], x[1]) }, x, scales(x), 1e-7)
	}
}
