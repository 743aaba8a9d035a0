package field_test

import (
	"math"
	"testing"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
)

// TestPlateImageForceSlope compares the fast form with the exact one and its
// derivative, from plate to plate.
func TestPlateImageForceSlope(t *testing.T) {
	const eps, d = 8.86e-12, 0.06
	for i := 1; i < 200; i++ {
		z := d * float64(i) / 200
		f, slope := field.PlateImageForceSlope(eps, z, d)
		space := jet.NewSpace(1, 0)
		want := field.PlateImageForceJet(jet.Const(eps), jet.Const(1), space.Var(0, z), jet.Const(d))
		// Near the mid-plane the force is a difference of the two sides.
		if size := math.Abs(want.Grad(0)) * d; math.Abs(f-want.V) > 2e-14*size || math.Abs(slope-want.Grad(0)) > 2e-13*math.Abs(want.Grad(0)) {
			t.Errorf("z/d = %g: force %g and slope %g, exact %g and %g", z/d, f, slope, want.V, want.Grad(0))
		}
	}
}
