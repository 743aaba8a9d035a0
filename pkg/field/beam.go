package field

import (
	"math"

	"example.org/guardring/pkg/jet"
)

// BeamDeflection returns the displacement (m) and the angle (rad) with which a
// particle of charge q (C), kinetic energy T (J) and rest energy rest (J, mc²)
// leaves a uniform transverse field E (V/m) of length L (m) that it entered at
// right angles; both are positive along qE:
//
//	y = L (W/pc)(cosh x − 1)/x,  tan θ = (W/pc) sinh x,  x = qEL/pc,
//
// W = T + mc² and pc = √(T(T + 2mc²)) at the entrance. Derived: uniform force
// along y, p_z kept; for T ≪ mc², y = qEL²/4T and tan θ = qEL/2T. Fringes are
// left out: L is the effective length. Refused for |x| above 1.
func BeamDeflection(q, E, L, T, rest float64) (y, theta float64, err error) {
	if err := refuse("beam between plates", finite("charge", q, "C"), finite("field", E, "V/m"), positive("length", L, "m"), positive("kinetic energy", T, "J"), positive("rest energy", rest, "J"),
		atMost("qEL/pc", math.Abs(q*E*L)/math.Sqrt(T*(T+2*rest)), 1)); err != nil {
		return 0, 0, err
	}
	jy, jt := BeamDeflectionJet(jet.Const(q), jet.Const(E), jet.Const(L), jet.Const(T), jet.Const(rest))
	return jy.V, jt.V, nil
}

// BeamDeflectionJet is BeamDeflection with derivatives.
func BeamDeflectionJet(q, E, L, T, rest jet.Jet) (y, theta jet.Jet) {
	ipc := T.Mul(T.Add(rest.Scale(2))).Sqrt().Inv()
	x := q.Mul(E).Mul(L).Mul(ipc)
	beta := T.Add(rest).Mul(ipc) // W/pc
	// (cosh x − 1)/x² = Σ x^2k/(2k+2)!
	h := poly(x, 1./2, 0, 1./24, 0, 1./720, 0, 1./40320, 0, 1./3628800, 0, 1./479001600, 0, 1./87178291200, 0, 1./20922789888000)
	y = L.Mul(beta).Mul(x).Mul(h)
	sh, ch := math.Sinh(x.V), math.Cosh(x.V)
	return y, beta.Mul(x.Chain(sh, ch, sh)).Atan()
}
