// Package field holds the electrostatics of the benches: plates, guarded and
// unguarded discs, spheres, charges and images, the medium, and the weight that
// balances a force. Pure functions of float64 in SI units.
//
// Every physics function comes in two forms: F checks its arguments and refuses
// what lies outside its validity with a RangeError; FJet computes the same with
// exact first and second derivatives (package jet) and checks nothing, so that
// a model refuses once and then evaluates. Both run the same lines of code.
//
// # Guard gap
//
// The guarded disc and its guard form a plane with a slot of width g. The map
// dz/dw = (g/π)√(w²−1)/w takes the upper half w-plane to the half-space above a
// plane with an infinitely deep slot, whose far field differs from that of the
// whole plane by a dipole of moment g²/2π² per unit field. By reciprocity with
// the field of the opposite plate at D ≫ g, each side of the slot loses the
// charge of g²/4πD besides the half gap, which Maxwell's form of the effective
// area reproduces with α = g/2π. The force area follows from the charge area by
// differentiating the energy at constant potential.
package field
