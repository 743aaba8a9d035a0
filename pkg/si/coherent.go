package si

// The symbols of the units of plane angle and of energy.
const (
	radian = "rad"
	joule  = "J"
)

// Coherent returns the coherent SI unit of the quantity that u measures, under
// the name that people know it by, as Dimension.Unit does; but where the
// dimension alone would lose what the quantity is, the unit stays as written,
// without prefixes and in coherent units: a plane or solid angle (mrad and deg
// become rad, mN m/rad becomes N m/rad) and a torque (mN m becomes N m, not J).
// The radian has the dimension one and the torque that of an energy (SI
// Brochure, 9th edition, sections 2.3.3 and 2.3.4), but neither is reported as
// such.
func (u Unit) Coherent() Unit {
	plain := u.Dim.Unit()
	e, err := u.expr()
	if err != nil {
		return plain
	}
	angle := false
	for i := range e.factors {
		f := &e.factors[i]
		s := &symbols[f.sym]
		f.pre = -1
		switch {
		case s.text == radian || s.text == "sr":
			angle = true
			continue
		case s.real != 0: // the degree of arc and its parts
			f.sym, angle = index[radian], true
			continue
		}
		k, known := index[s.dim.Unit().Symbol]
		if s.num == 1 && s.den == 1 && s.exp == 0 && s.off == "" {
			continue // coherent already
		}
		if !known {
			return plain // litre, gal: no single symbol
		}
		f.sym = k
	}
	torque := plain.Symbol == joule && len(e.factors) > 1
	if !angle && !torque {
		return plain
	}
	c, err := ParseUnit(e.text(false, true))
	if err != nil || c.Dim != u.Dim || c.Factor != 1 {
		return plain
	}
	return c
}
