// Package field holds the electrostatics of the benches: plates, guarded and
// unguarded discs, spheres, charges and images, the medium, and the weight that
// balances a force. Pure functions of float64 in SI units.
//
// Every physics function comes in two forms: F checks its arguments and refuses
// what lies outside its validity with a RangeError; FJet computes the same with
// exact first and second derivatives (package jet) and checks nothing, so that
// a model refuses once and then evaluates. Where a fit evaluates many rows,
// DiscCoefficient, SphereForceChargesSlope and SphereForcePotentialsSlope give
// value and slope without jets.
//
// A bench that holds kilovolts stores energy and charge (StoredEnergy) that can
// injure; local codes and licensed practice prevail over anything printed here.
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
// differentiating the energy at constant potential:
// A_F = −D² d(A_Q/D)/dD, and d/dD of α/(D(D+α)) is −α(2D+α)/(D(D+α))².
//
// # Plates not parallel
//
// Each strip of a slightly tilted pair has the field V/(d + Δx), −1 ≤ x ≤ 1
// across the plate. Averaging over a rectangle (x uniform) or a disc (x weighted
// by √(1−x²)) with ⟨x²⟩ = 1/3 or 1/4 gives for the field 1 + ⟨x²⟩Δ²/d², and for
// the force, which goes as the square, 1 + 3⟨x²⟩Δ²/d².
//
// # Unguarded discs
//
// Love's integral equation gives the charge of two thin equal discs exactly for
// opposite and for equal potentials. V on one disc and earth on the other is
// ±V/2 with a common V/2. With c∓ = 2∫f∓ the capacity coefficients are
// C₁₁ = εR(c₋ + c₊) and C₁₂ = εR(c₊ − c₋), so that balanced drive has charge
// εRc₋V and force −½εV²c₋', one side earthed charge εR(c₋ + c₊)V and force
// −½εV²(c₋ + c₊)'. The table of c∓ (discs_table.go) is made by discs_gen.go from
// SolveLove and checked against it between its nodes. Below d/R = 0.005, with
// L = ln(16πR/d): c₋ is Kirchhoff's, the next published term
// (κ/4π)(L² − 2) and terms in κ² and κ³ fitted to solutions; c₊ is
// 2 + (κ/π)(1 + ln(π/κ)), the capacity of one disc of thickness d, and fitted
// terms likewise.
//
// # Two spheres
//
// With D sinh(nu + φ) = a sinh nu + b sinh(n+1)u one finds D = c (the centre
// distance) and sinh φ = (b/c) sinh u = f/a, f = (ab/c) sinh u being half the
// distance of the poles of bispherical coordinates. So φ = α, where
// a sinh α = b sinh β = f and α + β = u, and Maxwell's series becomes
// C_aa = 4πε f Σ_{n≥0} 1/sinh(nu + α), C_bb the same with β, and
// C_ab = −4πε f Σ_{n≥1} 1/sinh nu. Two ways of summing are used.
//
// For u ≥ 0.3, 1/sinh x = 2Σ exp(−(2m+1)x) makes each sum a double series in n
// and m. Summed over the hooks n ≥ m = k and m > n = k, each a geometric series,
// it converges as exp(−2k²u) instead of exp(−ku) (Clausen's device for
// Lambert's series). All quantities are algebraic in exp(−α) and exp(−β).
//
// For smaller u, the Laurent series of 1/sinh is summed term by term with
// Hurwitz's ζ(1−2k, x) = −B_2k(x)/2k; the first term, by Mellin's transform, is
// [ln(2/u) − ψ(x)]/u. The result is asymptotic with a least term near
// exp(−2π²/u), below 1e-28 at u = 0.3.
//
// The first term of each sum is exact (f/sinh α = a, f/sinh u = ab/c) and stands
// apart, so that far away induction does not come out as a difference of large
// numbers. Close in, forces at nearly equal potentials are differences of terms
// that grow as 1/gap and are accurate relative to Σ|terms|.
//
// # Finite plates and heads
//
// At the middle of wide plates the edges' field dies as exp(−πW/d); Maxwell's
// map of the edge of two half planes gives its leading factor, and the four
// edges of a square add. SolveSquarePlates is the numerical solution against
// which the formulas stand.
//
// A conducting sphere of radius a at mid-gap gets from its images in the plates,
// dipoles p = 4πεa³E at nd on both sides, the extra field
// Σ 2·2p/(4πε(nd)³) = 4ζ(3)(a/d)³E = xE; feeding back, its dipole is raised by
// 1/(1 − x). A hemisphere's charge adds the odd multipoles that the images
// induce, which take part of that back; the first power of x describes it within
// 1 % of the correction up to a/d = 0.2.
package field
