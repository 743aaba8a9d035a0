package field_test

import (
	"errors"
	"fmt"
	"math"
	"testing"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// An attracted disc of 50 mm radius in a guard with a 0.5 mm gap, 5 mm from the
// high-voltage plate at 5 kV in dry air.
func ExampleGuardedDiscForce() {
	epsr, err := field.AirPermittivity(293.15, 101325, 0)
	if err != nil {
		panic(err)
	}
	f, err := field.GuardedDiscForce(si.Eps0*epsr, 0.050, 0.0505, 5000, 0, 0.005, 0)
	if err != nil {
		panic(err)
	}
	fmt.Printf("%.4f mN\n", f*1e3)
	_, err = field.GuardedDiscForce(si.Eps0*epsr, 0.050, 0.0505, 5000, 0, 0.002, 0)
	fmt.Println(err)
	// Output:
	// 35.1277 mN
	// guarded disc force area: spacing / guard gap is 4; want at least 5
}

// TestGuardRef: derived by conformal map, values computed independently.
func TestGuardRef(t *testing.T) {
	r := findRef(t, "guard_ring", "guard-deep-slot")
	R, g, D := num(t, r.Inputs, "R_mm")*1e-3, num(t, r.Inputs, "g_mm")*1e-3, num(t, r.Inputs, "D_mm")*1e-3
	near(t, "alpha/g", field.SlotLength(R, R+g)/g, num(t, r.Expected, "alpha_over_g"), num(t, r.Tolerance, "alpha_rel"), 0)
	mid := math.Pi * (R + g/2) * (R + g/2)
	abs := num(t, r.Tolerance, "area_abs")
	near(t, "A_Q", must(t)(field.GuardedChargeArea(R, R+g, D))/mid-1, num(t, r.Expected, "A_Q_rel_to_midgap"), 0, abs)
	near(t, "A_F", must(t)(field.GuardedForceArea(R, R+g, D))/mid-1, num(t, r.Expected, "A_F_rel_to_midgap"), 0, abs)
	if field.SlotLengthBound(R, R+g) <= field.SlotLength(R, R+g) {
		t.Error("Maxwell's bound (Treatise, art. 201) is not above the deep-slot length")
	}
}

// TestGuardedElectrodeB: ASTM D257/D150, table from memory, computed independently.
func TestGuardedElectrodeB(t *testing.T) {
	r := findRef(t, "guard_ring", "guard-B-table")
	x, B, printed := nums(t, r.Inputs, "g_over_t"), nums(t, r.Expected, "B"), nums(t, r.Expected, "printed")
	for i := range x {
		got := must(t)(field.GuardedElectrodeB(x[i]*1e-3, 1e-3))
		near(t, name("B at g/t = %g", x[i]), got, B[i], 0, num(t, r.Tolerance, "abs"))
		near(t, name("printed B at g/t = %g", x[i]), got, printed[i], 0, num(t, r.Tolerance, "printed_abs"))
	}
	// the series for narrow gaps meets the closed form
	a := must(t)(field.GuardedElectrodeB(0.0636, 1))
	b := must(t)(field.GuardedElectrodeB(0.0637, 1))
	if d := (a - b) / 1e-4; math.Abs(d-math.Pi/8) > 1e-3 {
		t.Errorf("slope across the join %g, want near π/8", d)
	}
	near(t, "B at g/t = 0", must(t)(field.GuardedElectrodeB(1e-9, 1)), 1, 0, 1e-8)
}

// TestForceAreaFromEnergy: F = ½V² dC/dD, the definition of the force area.
func TestForceAreaFromEnergy(t *testing.T) {
	for _, c := range [][3]float64{{0.05, 0.0505, 0.005}, {0.03, 0.0302, 0.001}, {0.1, 0.101, 0.04}} {
		s := jet.NewSpace(1, 1)
		D := s.Var(0, c[2])
		q := field.GuardedChargeAreaJet(jet.Const(c[0]), jet.Const(c[1]), D).Div(D)
		near(t, name("A_F at %v", c), must(t)(field.GuardedForceArea(c[0], c[1], c[2])), -q.Grad(0)*c[2]*c[2], 1e-14, 0)
	}
}

// TestGuardLimits: no gap, no correction; the areas lie between disc and guard.
func TestGuardLimits(t *testing.T) {
	near(t, "A_Q without a gap", must(t)(field.GuardedChargeArea(0.05, 0.05, 0.005)), math.Pi*0.0025, 1e-15, 0)
	near(t, "A_F without a gap", must(t)(field.GuardedForceArea(0.05, 0.05, 0.005)), math.Pi*0.0025, 1e-15, 0)
	far := must(t)(field.GuardedForceArea(0.05, 0.0505, 1000))
	near(t, "A_F far away", far, math.Pi/2*(0.05*0.05+0.0505*0.0505), 1e-8, 0)
}

func TestWedge(t *testing.T) {
	for _, shape := range []field.Shape{field.Rectangle, field.Disc} {
		for _, on := range []field.Effect{field.OnField, field.OnForce} {
			c := must(t)(field.WedgeCoefficient(shape, on))
			for _, y := range []float64{1e-5, 0.003, 0.01, 0.03, 0.1} {
				exact := must(t)(field.WedgeExact(shape, on, y*0.01, 0.01))
				got := must(t)(field.WedgeFactor(shape, on, y*0.01, 0.01))
				near(t, name("%v %v at %g", shape, on, y), got, exact, 1.1*y*y*y*y+1e-15, 0)
				near(t, name("%v %v coefficient at %g", shape, on, y), got, 1+c*y*y, 1e-15, 0)
				near(t, name("%v %v symmetry", shape, on), must(t)(field.WedgeFactor(shape, on, -y*0.01, 0.01)), got, 0, 0)
				if y > 1e-4 { // averages by the midpoint rule over the plate
					near(t, name("%v %v average at %g", shape, on, y), wedgeAverage(shape, on, y), exact, 2e-7, 0)
				}
			}
		}
	}
	// moments of Δ² for Δ uniform in ±half: ⟨Δ²⟩ = half²/3, var = 4 half⁴/45
	m, u, err := field.WedgeMean(0.75, 1e-4, 0.005)
	if err != nil {
		t.Fatal(err)
	}
	x := 0.75 * 0.02 * 0.02
	near(t, "mean", m, x/3, 1e-15, 0)
	near(t, "u", u, x*math.Sqrt(4./45), 1e-14, 0)
}

func wedgeAverage(shape field.Shape, on field.Effect, y float64) float64 {
	const n = 2000
	var sum, weight float64
	for i := range n {
		th := math.Pi * (float64(i) + 0.5) / n // x = cos θ takes the chord's end smoothly
		x, w := math.Cos(th), math.Sin(th)
		if shape == field.Disc {
			w *= math.Sin(th)
		}
		v := 1 / (1 + y*x)
		if on == field.OnForce {
			v *= v
		}
		sum += w * v
		weight += w
	}
	return sum / weight
}

func TestSheet(t *testing.T) {
	const e0, A, d = si.Eps0, 0.01, 0.004
	near(t, "no sheet", must(t)(field.SheetCapacitance(e0, A, d, 0, 4, 1.0005)), e0*1.0005*A/d, 1e-15, 0)
	near(t, "full sheet", must(t)(field.SheetCapacitance(e0, A, d, d, 4, 1.0005)), e0*4*A/d, 1e-15, 0)
	near(t, "sheet of air", must(t)(field.SheetCapacitance(e0, A, d, 0.002, 1.0005, 1.0005)), e0*1.0005*A/d, 1e-15, 0)
	var refused *field.RangeError
	if _, err := field.SheetCapacitance(e0, A, d, 0.005, 4, 1); !errors.As(err, &refused) || refused.Quantity != "sheet thickness" {
		t.Errorf("a sheet thicker than the gap gave %v", err)
	}
}

func TestImageForce(t *testing.T) {
	const e0, q = si.Eps0, 1e-9
	near(t, "mid-plane", must(t)(field.PlateImageForce(e0, q, 0.05, 0.1)), 0, 0, 1e-20)
	// near one plate the other does not matter: F = −q²/16πε z²
	near(t, "near a plate", must(t)(field.PlateImageForce(e0, q, 1e-4, 0.1)), -q*q/(16*math.Pi*e0*1e-8), 1e-5, 0)
	a, b := must(t)(field.PlateImageForce(e0, q, 0.03, 0.1)), must(t)(field.PlateImageForce(e0, q, 0.07, 0.1))
	near(t, "mirror symmetry", a, -b, 1e-12, 0)
	// explicit images, pairwise from both ends
	var f float64
	for n := range 200000 {
		z := float64(n) * 0.1
		f += 1/((0.07+z)*(0.07+z)) - 1/((0.03+z)*(0.03+z))
	}
	near(t, "image series", a, f*q*q/(16*math.Pi*e0), 1e-7, 0)
}

func TestPlateDerivatives(t *testing.T) {
	for _, c := range []struct {
		name string
		f    func(x []jet.Jet) jet.Jet
		x    []float64
	}{
		{"charge area", func(x []jet.Jet) jet.Jet { return field.GuardedChargeAreaJet(x[0], x[1], x[2]) }, []float64{0.05, 0.0505, 0.005}},
		{"force area", func(x []jet.Jet) jet.Jet { return field.GuardedForceAreaJet(x[0], x[1], x[2]) }, []float64{0.05, 0.052, 0.01}},
		{"disc force", func(x []jet.Jet) jet.Jet {
			return field.GuardedDiscForceJet(x[0], x[1], x[2], x[3], x[4], x[5], x[6])
		}, []float64{8.85e-12, 0.05, 0.0505, 5000, 0.2, 0.005, 1e-5}},
		{"disc charge", func(x []jet.Jet) jet.Jet {
			return field.GuardedDiscChargeJet(x[0], x[1], x[2], x[3], x[4], x[5], x[6], x[7])
		}, []float64{8.85e-12, 0.05, 0.0505, 2e-12, 5000, 0.2, 0.005, 1e-5}},
		{"coplanarity", func(x []jet.Jet) jet.Jet { return field.CoplanarityForceJet(x[0], x[1]) }, []float64{2e-5, 0.005}},
		{"electrode B", func(x []jet.Jet) jet.Jet { return field.GuardedElectrodeBJet(x[0], x[1]) }, []float64{2e-3, 1e-3}},
		{"electrode B narrow", func(x []jet.Jet) jet.Jet { return field.GuardedElectrodeBJet(x[0], x[1]) }, []float64{0.05e-3, 1e-3}},
		{"electrode area", func(x []jet.Jet) jet.Jet { return field.GuardedElectrodeAreaJet(x[0], x[1], x[2]) }, []float64{0.05, 2e-3, 1e-3}},
		{"sheet", func(x []jet.Jet) jet.Jet { return field.SheetCapacitanceJet(x[0], x[1], x[2], x[3], x[4], x[5]) }, []float64{8.85e-12, 0.01, 0.004, 0.003, 2.3, 1.0006}},
		{"wedge", func(x []jet.Jet) jet.Jet { return field.WedgeFactorJet(0.75, x[0], x[1]).Plus(-1) }, []float64{3e-4, 5e-3}},
		{"image force", func(x []jet.Jet) jet.Jet { return field.PlateImageForceJet(x[0], x[1], x[2], x[3]) }, []float64{8.85e-12, 1e-9, 0.03, 0.1}},
		{"energy", func(x []jet.Jet) jet.Jet { return field.StoredEnergyJet(x[0], x[1]) }, []float64{1e-10, 3e4}},
		{"breakdown", func(x []jet.Jet) jet.Jet { return field.BreakdownFieldJet(x[0], x[1]) }, []float64{0.01, 0.98}},
		{"air permittivity", func(x []jet.Jet) jet.Jet { return field.AirPermittivityJet(x[0], x[1], x[2]).Plus(-1) }, []float64{293.15, 101325, 0.5}},
		{"air density", func(x []jet.Jet) jet.Jet { return field.AirDensityJet(x[0], x[1], x[2], x[3]) }, []float64{293.15, 101325, 0.5, 4e-4}},
		{"gravity", func(x []jet.Jet) jet.Jet { return field.GravityJet(x[0], x[1]).Plus(-9.81) }, []float64{0.8, 300}},
		{"balance", func(x []jet.Jet) jet.Jet { return field.BalanceForceJet(x[0], x[1], x[2]) }, []float64{3e-3, 9.81, 1.2}},
	} {
		checkDerivatives(t, c.name, c.f, c.x, scales(c.x), 1e-7)
	}
}

// TestPlateRefusals: each bad argument is named.
func TestPlateRefusals(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		quantity string
		err      error
	}{
		{"spacing with its zero", second(field.UniformField(1, 0, 0.001, -0.001))},
		{"voltage", second(field.UniformField(nan, 0, 0.001, 0))},
		{"spacing", second(field.GuardedChargeArea(0.05, 0.051, 0))},
		{"guard inner radius less disc radius", second(field.GuardedForceArea(0.05, 0.049, 0.01))},
		{"half-difference / spacing", second(field.WedgeFactor(field.Disc, field.OnForce, 0.002, 0.01))},
		{"height / spacing", second(field.CoplanarityForce(0.001, 0.01))},
		{"relative humidity (a fraction)", second(field.AirPermittivity(293.15, 101325, 50))},
		{"temperature", second(field.AirPermittivity(20, 101325, 0.5))},
		{"pressure", second(field.AirDensity(293.15, 1013.25, 0.5, 4e-4))},
		{"latitude", second(field.Gravity(52, 0))},
		{"height", second(field.PlateImageForce(8.85e-12, 1e-9, 0.2, 0.1))},
	} {
		var r *field.RangeError
		if !errors.As(c.err, &r) || r.Quantity != c.quantity {
			t.Errorf("want a refusal of %q, got %v", c.quantity, c.err)
		}
	}
}

func second(_ float64, err error) error { return err }
