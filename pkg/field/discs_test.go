package field_test

import (
	"fmt"
	"math"
	"testing"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// Unguarded discs of 50 mm radius at 5 mm: the edge adds 2.5 % to the force of
// an ideal plate.
func ExampleDiscForce() {
	f, err := field.DiscForce(field.Balanced, si.Eps0, 0.05, 0.005, 5000)
	if err != nil {
		panic(err)
	}
	ideal := 0.5 * si.Eps0 * math.Pi * 0.05 * 0.05 * 1e12
	fmt.Printf("%.4f mN, %.4f of the ideal plate\n", f*1e3, f/ideal)
	// Output: 35.6552 mN, 1.0255 of the ideal plate
}

// TestDiscCapacitor: Love 1949 and Kirchhoff 1877, computed independently; the
// profile at κ = 1 is the test case of Fox and Goodwin (1953), values from memory.
func TestDiscCapacitor(t *testing.T) {
	const R = 0.05
	for _, r := range loadRefs(t, "disc_capacitor") {
		kappa := num(t, r.Inputs, "kappa")
		if r.ID == "love-kappa1-profile" {
			opposite, err := field.SolveLove(kappa, 64, false)
			if err != nil {
				t.Fatal(err)
			}
			same, err := field.SolveLove(kappa, 64, true)
			if err != nil {
				t.Fatal(err)
			}
			for i, x := range nums(t, r.Inputs, "x") {
				near(t, name("profile at %g", x), opposite.At(x), nums(t, r.Expected, "opposite_charge")[i], 0, num(t, r.Tolerance, "abs"))
				near(t, name("profile at %g", -x), same.At(-x), nums(t, r.Expected, "same_charge")[i], 0, num(t, r.Tolerance, "abs"))
			}
			continue
		}
		d := kappa * R
		c := must(t)(field.DiscCapacitance(si.Eps0, R, d))
		near(t, r.ID, c/(si.Eps0*R), num(t, r.Expected, "C_over_eps0R"), num(t, r.Tolerance, "C_rel"), 0)
		ideal := si.Eps0 * math.Pi * R * R / d
		near(t, r.ID+" ratio", c/ideal, num(t, r.Expected, "C_over_Cideal"), num(t, r.Tolerance, "C_rel"), 0)
		k := must(t)(field.KirchhoffCapacitance(si.Eps0, R, d))
		near(t, r.ID+" Kirchhoff", k/ideal, num(t, r.Expected, "kirchhoff_ratio"), num(t, r.Tolerance, "kirchhoff_rel"), 0)
		if f, ok := r.Expected["force_over_ideal"].(float64); ok {
			got := must(t)(field.DiscForce(field.Balanced, si.Eps0, R, d, 1000))
			near(t, r.ID+" force", got/(0.5e6*ideal/d), f, num(t, r.Tolerance, "force_rel"), 0)
		}
	}
}

// TestDiscTable: the table against direct solutions of Love's equation between
// its nodes, value and derivatives by spacing.
func TestDiscTable(t *testing.T) {
	for _, kappa := range []float64{0.0173, 0.0499, 0.0501, 0.0877, 0.31, 0.49, 0.53, 1.7, 4.9, 5.1, 23, 49} {
		n := max(64, int(9/kappa))
		for _, same := range []bool{false, true} {
			l, err := field.SolveLove(kappa, n, same)
			if err != nil {
				t.Fatal(err)
			}
			s := jet.NewSpace(1, 1)
			one := jet.Const(1)
			c := field.DiscChargeJet(field.Balanced, one, one, s.Var(0, kappa), one)
			if same { // the common mode is what one earthed side adds
				c = field.DiscChargeJet(field.OneSideEarthed, one, one, s.Var(0, kappa), one).Sub(c)
			}
			near(t, name("c at %g (same %v)", kappa, same), c.V, l.C, 1e-10, 0)
			near(t, name("c' at %g (same %v)", kappa, same), c.Grad(0), l.D, 1e-9, 0)
			near(t, name("c'' at %g (same %v)", kappa, same), c.Hess(0, 0), l.D2, 1e-7, 0)
		}
	}
}

// TestDiscSmallSpacing: direct solutions with 2,700 and 2,000 nodes, computed
// independently, below the table.
func TestDiscSmallSpacing(t *testing.T) {
	for _, c := range []struct{ kappa, opposite, same float64 }{{0.003, 1055.9461309012167, 2.0075987832225755}, {0.004, 793.8646822692251, 2.009766696385155}} {
		got := must(t)(field.DiscCapacitance(1, 1, c.kappa))
		near(t, name("opposite at %g", c.kappa), got, c.opposite, 2e-11, 0)
		near(t, name("same at %g", c.kappa), must(t)(field.DiscCharge(field.OneSideEarthed, 1, 1, c.kappa, 1))-got, c.same, 1e-11, 1e-13*c.opposite)
	}
	// continuous at the join, value and derivatives
	one := jet.Const(1)
	at := func(k float64) jet.Jet {
		return field.DiscForceJet(field.OneSideEarthed, one, one, jet.NewSpace(1, 1).Var(0, k), one)
	}
	lo, hi := at(0.005*(1-1e-13)), at(0.005*(1+1e-13))
	near(t, "force across the join", lo.V, hi.V, 1e-10, 0)
	near(t, "its derivative", lo.Grad(0), hi.Grad(0), 1e-9, 0)
	near(t, "its second derivative", lo.Hess(0, 0), hi.Hess(0, 0), 1e-7, 0)
}

// TestDiscLimits: the discs far apart have the capacitance of two free discs in
// series, 4εR (limit of Love's equation); close by that of an ideal plate; at
// equal potentials and small spacing they are one disc, 8εR.
func TestDiscLimits(t *testing.T) {
	near(t, "far", must(t)(field.DiscCapacitance(1, 1, 50)), 4/(1-2/(50*math.Pi)), 1e-5, 0)
	near(t, "near", must(t)(field.DiscCapacitance(1, 1, 1e-5))*1e-5/math.Pi, 1, 1e-4, 0)
	same := must(t)(field.DiscCharge(field.OneSideEarthed, 1, 1, 1e-5, 1)) - must(t)(field.DiscCapacitance(1, 1, 1e-5))
	near(t, "one disc", same, 2, 1e-4, 0)
}

// TestDiscEarthed: force lower and charge higher than balanced by the amounts
// computed independently with 400 nodes, by differences.
func TestDiscEarthed(t *testing.T) {
	for _, c := range []struct{ kappa, force, charge float64 }{{0.05, -0.0010507, 0.030}, {0.1, -0.0035123, 0.058}, {0.2, -0.0113492, 0.108}} {
		fb := must(t)(field.DiscForce(field.Balanced, 1, 1, c.kappa, 1))
		fe := must(t)(field.DiscForce(field.OneSideEarthed, 1, 1, c.kappa, 1))
		near(t, name("force at %g", c.kappa), fe/fb-1, c.force, 1e-4, 0)
		qb := must(t)(field.DiscCharge(field.Balanced, 1, 1, c.kappa, 1))
		qe := must(t)(field.DiscCharge(field.OneSideEarthed, 1, 1, c.kappa, 1))
		near(t, name("charge at %g", c.kappa), qe/qb-1, c.charge, 0.02, 0)
		// Kirchhoff low by 0.8 % at 0.1, 2.3 % at 0.2
		k := must(t)(field.KirchhoffCapacitance(1, 1, c.kappa))
		if low := 1 - k/must(t)(field.DiscCapacitance(1, 1, c.kappa)); low <= 0 || low > 0.025 {
			t.Errorf("Kirchhoff at %g is low by %g", c.kappa, low)
		}
	}
}

func TestDiscDerivatives(t *testing.T) {
	for _, kappa := range []float64{0.002, 0.03, 0.2, 3} {
		for _, drive := range []field.Drive{field.Balanced, field.OneSideEarthed} {
			x := []float64{8.85e-12, 0.05, 0.05 * kappa, 1000}
			checkDerivatives(t, name("%v disc force at %g", drive, kappa), func(x []jet.Jet) jet.Jet {
				return field.DiscForceJet(drive, x[0], x[1], x[2], x[3])
			}, x, scales(x), 1e-7)
			checkDerivatives(t, name("%v disc charge at %g", drive, kappa), func(x []jet.Jet) jet.Jet {
				return field.DiscChargeJet(drive, x[0], x[1], x[2], x[3])
			}, x, scales(x), 1e-7)
		}
	}
	// energy derivative equals force: ½V² dC/dd
	s := jet.NewSpace(1, 1)
	c := field.DiscCapacitanceJet(jet.Const(1), jet.Const(1), s.Var(0, 0.1))
	near(t, "energy", must(t)(field.DiscForce(field.Balanced, 1, 1, 0.1, 3)), -4.5*c.Grad(0), 1e-13, 0)
}

func TestDiscRefusals(t *testing.T) {
	for _, err := range []error{
		second(field.DiscCapacitance(1, 1, 51)),
		second(field.DiscCapacitance(1, 1, 1e-6)),
		second(field.DiscForce(field.Drive(7), 1, 1, 0.1, 1)),
	} {
		if err == nil {
			t.Error("out of range passed")
		}
	}
	if _, err := field.SolveLove(0.01, 64, false); err == nil {
		t.Error("too few nodes passed")
	}
	if _, err := field.SolveLove(1e-5, 1_000_000, false); err == nil {
		t.Error("a million nodes passed")
	}
}

func BenchmarkDiscForceJet(b *testing.B) {
	s := jet.NewSpace(3, 3)
	one := jet.Const(1)
	for b.Loop() {
		s.Reset()
		field.DiscForceJet(field.OneSideEarthed, one, s.Var(0, 1), s.Var(1, 0.1), s.Var(2, 1))
	}
}

func BenchmarkDiscForce(b *testing.B) {
	for b.Loop() {
		if _, err := field.DiscForce(field.Balanced, 1, 1, 0.1, 1); err != nil {
			b.Fatal(err)
		}
	}
}
