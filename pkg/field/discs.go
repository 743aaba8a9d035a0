package field

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/jet"
)

//go:generate go run discs_gen.go

// Drive is how a pair of plates is held against its surroundings.
type Drive int

const (
	// Balanced plates stand at +V/2 and −V/2 against earth.
	Balanced Drive = iota
	// OneSideEarthed plates stand at V and earth, earthed surroundings far away.
	OneSideEarthed
)

// String returns the name that a bench uses.
func (d Drive) String() string {
	switch d {
	case Balanced:
		return "balanced"
	case OneSideEarthed:
		return "one-side-earthed"
	}
	return fmt.Sprintf("Drive(%d)", int(d))
}

// Limits of spacing over radius for unguarded discs: the table of solutions of
// Love's equation lies between discTableLow and DiscLimit; below, down to
// discLow, its small-spacing expansion.
const (
	discLow      = 1e-5
	discTableLow = 0.005
	// DiscLimit is the largest spacing / radius served.
	DiscLimit = 50.0
)

// discTable is C(κ), less a leading part, on the intervals of ln κ between its
// bounds: Chebyshev series of it and of its first three derivatives by ln κ,
// side by side for one pass.
type discTable struct {
	bounds []float64      // of ln κ
	coef   [][][4]float64 // by interval and degree
}

func newDiscTable(bounds []float64, values [][]float64) *discTable {
	t := &discTable{bounds: bounds}
	for i, c := range values {
		half := (bounds[i+1] - bounds[i]) / 2
		series := make([][4]float64, len(c))
		for k := range 4 {
			if k > 0 {
				c = chebyshevDerivative(c, half)
			}
			for j, v := range c {
				series[j][k] = v
			}
		}
		t.coef = append(t.coef, series)
	}
	return t
}

// chebyshevDerivative differentiates c₀/2 + Σ c_k T_k(x/half) (recurrence from
// NIST DLMF 18.9.21 and 18.9.22).
func chebyshevDerivative(c []float64, half float64) []float64 {
	n := len(c)
	d := make([]float64, n)
	for k := n - 2; k >= 0; k-- {
		next := 0.0
		if k+2 < n {
			next = d[k+2]
		}
		d[k] = next + 2*float64(k+1)*c[k+1]
	}
	for k := range d {
		d[k] /= half
	}
	return d
}

// at returns the function and its first three derivatives by ln κ at y = ln κ,
// by Clenshaw's recurrence on the four series at once.
func (t *discTable) at(y float64) (h [4]float64) {
	i := 0
	for i+2 < len(t.bounds) && y > t.bounds[i+1] {
		i++
	}
	lo, hi := t.bounds[i], t.bounds[i+1]
	x := (2*y - lo - hi) / (hi - lo)
	x2 := 2 * x
	var p0, p1, p2, p3, q0, q1, q2, q3 float64
	c := t.coef[i]
	for k := len(c) - 1; k >= 1; k-- {
		v := &c[k]
		p0, q0 = v[0]+x2*p0-q0, p0
		p1, q1 = v[1]+x2*p1-q1, p1
		p2, q2 = v[2]+x2*p2-q2, p2
		p3, q3 = v[3]+x2*p3-q3, p3
	}
	v := &c[0]
	return [4]float64{0.5*v[0] + x*p0 - q0, 0.5*v[1] + x*p1 - q1, 0.5*v[2] + x*p2 - q2, 0.5*v[3] + x*p3 - q3}
}

// byKappa turns derivatives by ln κ into derivatives by κ.
func byKappa(h [4]float64, kappa float64) [4]float64 {
	r := 1 / kappa
	return [4]float64{h[0], h[1] * r, (h[2] - h[1]) * r * r, (h[3] - 3*h[2] + 2*h[1]) * r * r * r}
}

// logPowers returns Σ κ^m (c₀ + c₁L + c₂L² + …), L = ln(16π/κ), with its first
// three derivatives by ln κ.
func logPowers(kappa float64, m int, c []float64) (h [4]float64) {
	L := math.Log(16*math.Pi) - math.Log(kappa)
	p := append([]float64(nil), c...)
	s := math.Pow(kappa, float64(m))
	for k := range h {
		h[k] = s * horner(p, L)
		// d/dy of κ^m P(L) is κ^m (mP − P')
		for i := range p {
			d := 0.0
			if i+1 < len(p) {
				d = float64(i+1) * p[i+1]
			}
			p[i] = float64(m)*p[i] - d
		}
	}
	return h
}

func addTo(h *[4]float64, g [4]float64) {
	for i := range h {
		h[i] += g[i]
	}
}

// discOpposite returns c = C/εR of two discs at opposite potentials and its
// first three derivatives by κ; C = εR c is the capacitance between them.
func discOpposite(kappa float64) [4]float64 {
	r := 1 / kappa
	// Kirchhoff (1877): π/κ + ln(16π/κ) − 1
	lead := [4]float64{math.Pi*r + math.Log(16*math.Pi*r) - 1, -(math.Pi*r + 1) * r, (2*math.Pi*r + 1) * r * r, -(6*math.Pi*r + 2) * r * r * r}
	var h [4]float64
	if kappa < discTableLow {
		// next term: Leppington and Levine, Proc. Camb. Phil. Soc. 68 (1970) 235 (from memory)
		h = logPowers(kappa, 1, []float64{-2 / (4 * math.Pi), 0, 1 / (4 * math.Pi)})
		addTo(&h, logPowers(kappa, 2, oppositeSquare))
		addTo(&h, logPowers(kappa, 3, oppositeCube))
	} else {
		h = oppositeTable.at(math.Log(kappa))
	}
	h = byKappa(h, kappa)
	addTo(&h, lead)
	return h
}

// discSame returns c = Q/(2εRφ), Q the charge of either of two discs at the same
// potential φ, that is 2∫f₊, and its first three derivatives by κ.
func discSame(kappa float64) [4]float64 {
	if kappa < discTableLow {
		h := logPowers(kappa, 1, []float64{(1 - 4*math.Ln2) / math.Pi, 1 / math.Pi})
		addTo(&h, logPowers(kappa, 2, sameSquare))
		addTo(&h, logPowers(kappa, 3, sameCube))
		h = byKappa(h, kappa)
		h[0] += 2
		return h
	}
	return byKappa(sameTable.at(math.Log(kappa)), kappa)
}

var (
	oppositeTable = newDiscTable(discBounds, oppositeSeries)
	sameTable     = newDiscTable(discBounds, sameSeries)
)

func discChecks(formula string, eps, R, d, V float64) error {
	return refuse(formula, positive("permittivity", eps, "F/m"), positive("disc radius", R, "m"), positive("spacing", d, "m"),
		finite("voltage", V, "V"), within("spacing / radius", d/R, "1", discLow, DiscLimit))
}

// DiscCapacitance returns the capacitance (F) between two thin equal coaxial
// unguarded discs of radius R (m) at spacing d (m) in permittivity eps (F/m),
// far from everything else, driven balanced: C = εR c(d/R) by Love's equation
// (SolveLove), tabulated to 1e-11 for d/R from 0.005 to 50; below that, to 1e-5,
// by its small-spacing expansion to 1e-10. Thick edges are outside its validity.
func DiscCapacitance(eps, R, d float64) (float64, error) {
	if err := discChecks("capacitance of unguarded discs", eps, R, d, 0); err != nil {
		return 0, err
	}
	return eps * R * discOpposite(d / R)[0], nil
}

// DiscCapacitanceJet is DiscCapacitance with derivatives.
func DiscCapacitanceJet(eps, R, d jet.Jet) jet.Jet {
	kappa := d.Div(R)
	c := discOpposite(kappa.V)
	return eps.Mul(R).Mul(kappa.Chain(c[0], c[1], c[2]))
}

// KirchhoffCapacitance returns επR²/d + εR[ln(16πR/d) − 1] (F), Kirchhoff 1877,
// the capacitance of thin discs at small spacing: low by 0.06 % at d/R = 0.02,
// 0.8 % at 0.1 and 2.3 % at 0.2. For comparison; DiscCapacitance is exact.
func KirchhoffCapacitance(eps, R, d float64) (float64, error) {
	if err := discChecks("capacitance of unguarded discs", eps, R, d, 0); err != nil {
		return 0, err
	}
	return eps * R * (math.Pi*R/d + math.Log(16*math.Pi*R/d) - 1), nil
}

// DiscCoefficient returns c(κ), κ = d/R, and its first three derivatives, with
// which the live disc's charge is εR c V and the attraction −½εV² c′, without
// refusals: what a fit needs, row by row.
func DiscCoefficient(drive Drive, kappa float64) [4]float64 {
	c := discOpposite(kappa)
	if drive == OneSideEarthed {
		// V and 0 are ±V/2 and a common V/2, which adds the charge εR c₊ V and,
		// as energy ½V²·εR(c₋ + c₊), its part of the force
		addTo(&c, discSame(kappa))
	}
	return c
}

// DiscForce returns the attraction (N, positive) between two thin equal coaxial
// unguarded discs at voltage V (V) between them. Balanced: ½V²|dC/dd|. One side
// earthed, with earthed surroundings far away: the common mode V/2 of equal
// potentials is added, which lowers the force by 0.10 % at d/R = 0.05, 0.35 % at
// 0.1 and 1.1 % at 0.2. Range as DiscCapacitance, accuracy 1e-10.
func DiscForce(drive Drive, eps, R, d, V float64) (float64, error) {
	if err := discChecks("force between unguarded discs", eps, R, d, V); err != nil {
		return 0, err
	}
	if err := driveCheck(drive); err != nil {
		return 0, err
	}
	return DiscForceJet(drive, jet.Const(eps), jet.Const(R), jet.Const(d), jet.Const(V)).V, nil
}

// DiscForceJet is DiscForce with derivatives.
func DiscForceJet(drive Drive, eps, R, d, V jet.Jet) jet.Jet {
	kappa := d.Div(R)
	c := DiscCoefficient(drive, kappa.V)
	return eps.Mul(V.Sqr()).Mul(kappa.Chain(c[1], c[2], c[3])).Scale(-0.5)
}

// DiscCharge returns the charge (C) of the live disc (balanced: of the positive
// one) at voltage V (V) between two thin equal coaxial unguarded discs. One side
// earthed it is higher than balanced by 3.0 % at d/R = 0.05, 5.8 % at 0.1 and
// 10.8 % at 0.2. Range and accuracy as DiscCapacitance.
func DiscCharge(drive Drive, eps, R, d, V float64) (float64, error) {
	if err := discChecks("charge of an unguarded disc", eps, R, d, V); err != nil {
		return 0, err
	}
	if err := driveCheck(drive); err != nil {
		return 0, err
	}
	return DiscChargeJet(drive, jet.Const(eps), jet.Const(R), jet.Const(d), jet.Const(V)).V, nil
}

// DiscChargeJet is DiscCharge with derivatives.
func DiscChargeJet(drive Drive, eps, R, d, V jet.Jet) jet.Jet {
	kappa := d.Div(R)
	c := DiscCoefficient(drive, kappa.V)
	return eps.Mul(R).Mul(V).Mul(kappa.Chain(c[0], c[1], c[2]))
}

func driveCheck(d Drive) error {
	if d != Balanced && d != OneSideEarthed {
		return fmt.Errorf("unknown drive %v; want balanced or one-side-earthed", d)
	}
	return nil
}
