package field_test

import (
	"math"
	"testing"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// TestPlainAndJet: the two forms of each function agree, and the derivatives of
// the jet form are those of the plain one.
func TestPlainAndJet(t *testing.T) {
	m := must(t)
	for _, c := range []struct {
		name  string
		plain float64
		f     func(x []jet.Jet) jet.Jet
		x     []float64
	}{
		{"plate charge", m(field.PlateCharge(8.85e-12, 0.008, 2e-12, 5000, 0.2, 0.005, 1e-5)), func(x []jet.Jet) jet.Jet {
			return field.PlateChargeJet(x[0], x[1], x[2], x[3], x[4], x[5], x[6])
		}, []float64{8.85e-12, 0.008, 2e-12, 5000, 0.2, 0.005, 1e-5}},
		{"plate force", m(field.PlateForce(8.85e-12, 0.008, 5000, 0.2, 0.005, 1e-5)), func(x []jet.Jet) jet.Jet {
			return field.PlateForceJet(x[0], x[1], x[2], x[3], x[4], x[5])
		}, []float64{8.85e-12, 0.008, 5000, 0.2, 0.005, 1e-5}},
		{"guarded charge", m(field.GuardedDiscCharge(8.85e-12, 0.05, 0.0505, 2e-12, 5000, 0.2, 0.005, 1e-5)), func(x []jet.Jet) jet.Jet {
			return field.GuardedDiscChargeJet(x[0], x[1], x[2], x[3], x[4], x[5], x[6], x[7])
		}, []float64{8.85e-12, 0.05, 0.0505, 2e-12, 5000, 0.2, 0.005, 1e-5}},
		{"coplanarity of charge", m(field.CoplanarityCharge(1e-5, 0.005)), func(x []jet.Jet) jet.Jet { return field.CoplanarityChargeJet(x[0], x[1]) }, []float64{1e-5, 0.005}},
		{"electrode area", m(field.GuardedElectrodeArea(0.05, 2e-3, 1e-3)), func(x []jet.Jet) jet.Jet { return field.GuardedElectrodeAreaJet(x[0], x[1], x[2]) }, []float64{0.05, 2e-3, 1e-3}},
		{"field force", field.FieldForce(2e-9, 1e5), func(x []jet.Jet) jet.Jet { return field.FieldForceJet(x[0], x[1]) }, []float64{2e-9, 1e5}},
		{"stored energy", field.StoredEnergy(1e-10, 3e4), func(x []jet.Jet) jet.Jet { return field.StoredEnergyJet(x[0], x[1]) }, []float64{1e-10, 3e4}},
		{"sphere-plane force", m(field.SpherePlaneForce(8.85e-12, 0.02, 0.01, 2e3)), func(x []jet.Jet) jet.Jet { return field.SpherePlaneForceJet(x[0], x[1], x[2], x[3]) }, []float64{8.85e-12, 0.02, 0.01, 2e3}},
		{"sphere-plane force by charge", m(field.SpherePlaneChargeForce(8.85e-12, 0.02, 0.01, 2e-9)), func(x []jet.Jet) jet.Jet { return field.SpherePlaneChargeForceJet(x[0], x[1], x[2], x[3]) }, []float64{8.85e-12, 0.02, 0.01, 2e-9}},
		{"sphere-plane capacitance", m(field.SpherePlaneCapacitance(8.85e-12, 0.02, 0.01)), func(x []jet.Jet) jet.Jet { return field.SpherePlaneCapacitanceJet(x[0], x[1], x[2]) }, []float64{8.85e-12, 0.02, 0.01}},
		{"sphere charge", m(field.SphereCharge(8.85e-12, 0.02, 2e3)), func(x []jet.Jet) jet.Jet { return field.SphereChargeJet(x[0], x[1], x[2]) }, []float64{8.85e-12, 0.02, 2e3}},
		{"sphere field", m(field.SphereField(0.02, 2e3, 0.3)), func(x []jet.Jet) jet.Jet { return field.SphereFieldJet(x[0], x[1], x[2]) }, []float64{0.02, 2e3, 0.3}},
		{"point force", m(field.PointForce(8.85e-12, 1e-9, -2e-9, 0.1)), func(x []jet.Jet) jet.Jet { return field.PointForceJet(x[0], x[1], x[2], x[3]) }, []float64{8.85e-12, 1e-9, -2e-9, 0.1}},
		{"leak", field.Leak(2e-9, 60, 1200), func(x []jet.Jet) jet.Jet { return field.LeakJet(x[0], x[1], x[2]) }, []float64{2e-9, 60, 1. / 1200}},
		{"torsion force", m(field.TorsionForce(1e-6, 0.03, 0.01, 0.1, 0.98)), func(x []jet.Jet) jet.Jet { return field.TorsionForceJet(x[0], x[1], x[2], x[3], x[4]) }, []float64{1e-6, 0.03, 0.01, 0.1, 0.98}},
		{"balance force", m(field.BalanceForce(3e-3, 9.81, 1.2)), func(x []jet.Jet) jet.Jet { return field.BalanceForceJet(x[0], x[1], x[2]) }, []float64{3e-3, 9.81, 1.2}},
	} {
		consts := make([]jet.Jet, len(c.x))
		for i, v := range c.x {
			consts[i] = jet.Const(v)
		}
		near(t, c.name, c.f(consts).V, c.plain, 1e-14, 0)
		checkDerivatives(t, c.name, c.f, c.x, scales(c.x), 1e-7)
	}
}

// TestSpherePlane: the sphere of charge CV is pulled as the one at V; near the
// plane the capacitance grows without bound, far from it is that of a lone
// sphere raised by its image, a(1 + a/2h).
func TestSpherePlane(t *testing.T) {
	m := must(t)
	for _, gap := range []float64{1e-4, 0.01, 0.5} {
		C := m(field.SpherePlaneCapacitance(si.Eps0, 0.02, gap))
		near(t, name("same state at %g", gap), m(field.SpherePlaneChargeForce(si.Eps0, 0.02, gap, C*1500)), m(field.SpherePlaneForce(si.Eps0, 0.02, gap, 1500)), 1e-12, 0)
		// ½V² dC/dh: energy derivative equals force
		s := jet.NewSpace(1, 1)
		c := field.SpherePlaneCapacitanceJet(jet.Const(si.Eps0), jet.Const(0.02), s.Var(0, gap))
		near(t, name("energy at %g", gap), 0.5*1500*1500*c.Grad(0), m(field.SpherePlaneForce(si.Eps0, 0.02, gap, 1500)), 1e-12, 0)
	}
	near(t, "far", m(field.SpherePlaneCapacitance(unit, 1, 999)), 1+1./2000, 1e-6, 0)
}

// TestPractice: 100 pF at 30 kV stores 45 mJ (computed); dimension of the
// coplanarity edge; slopes at fixed potential against the jets.
func TestPractice(t *testing.T) {
	near(t, "stored energy", field.StoredEnergy(100e-12, 30e3), 0.045, 1e-14, 0)
	near(t, "coplanarity edge", must(t)(field.CoplanarityEdge(-1e-5, 0.05)), 4e-4, 1e-14, 0)
	near(t, "coplanarity force, first order", must(t)(field.CoplanarityForce(1e-6, 0.005))-1, 2e-6/0.005, 1e-3, 0)
	for _, g := range []float64{1e-4, 0.02, 0.3, 7} {
		f, df := field.SphereForcePotentialsSlope(1, 2, g, 1, 0.5)
		s := jet.NewSpace(1, 0)
		j := field.SphereForcePotentialsJet(jet.Const(unit), jet.Const(1), jet.Const(2), s.Var(0, g), jet.Const(1), jet.Const(0.5))
		near(t, name("force at fixed potentials, gap %g", g), f, j.V, 1e-11, 0)
		near(t, name("its slope, gap %g", g), df, j.Grad(0), 1e-11, 0)
	}
	phi, err := (&field.Scene{Eps: si.Eps0, Sources: []field.Source{field.SphereSource("s", must(t)(field.SphereCharge(si.Eps0, 0.05, 700)), field.Vec{}, 0.05)}}).Potential(field.Vec{0, 0.05, 0})
	near(t, "potential at the surface of a sphere at 700 V", must(t)(phi, err), 700, 1e-12, 0)
	if math.IsNaN(field.LeakForce(1, math.Inf(1), math.Inf(1))) || field.LeakForce(1, math.Inf(1), math.Inf(1)) != 1 {
		t.Error("no leakage is not a factor of 1")
	}
}
