package gum

import (
	"fmt"
	"math"
	"math/big"
	"strings"
)

// An exactSum adds float64 numbers without rounding, so that the order of the
// terms can't matter: a fixed-point number wide enough for every finite float64
// (Kulisch, "Computer Arithmetic and Validity", 2nd ed., 2013, chapter 8). Limb i
// counts 2^(32i − sumScale); limbs are signed, and carries wait until normalise.
type exactSum struct {
	limb [70]int64
	adds int
}

const sumScale = 1088

// add adds the finite number x.
func (s *exactSum) add(x float64) {
	b := math.Float64bits(x)
	e := int(b >> 52 & 0x7ff)
	m := b & (1<<52 - 1)
	if e == 0 {
		e = 1
	} else {
		m |= 1 << 52
	}
	shift := e - 1075 + sumScale
	i, k := shift>>5, shift&31
	lo := m << k
	l0, l1, l2 := int64(lo&0xffffffff), int64(lo>>32), int64(m>>(63-k)>>1)
	if b>>63 != 0 {
		l0, l1, l2 = -l0, -l1, -l2
	}
	s.limb[i] += l0
	s.limb[i+1] += l1
	s.limb[i+2] += l2
	if s.adds++; s.adds == 1<<30 {
		s.normalise()
	}
}

// normalise carries, leaving every limb but the last in [0, 2^32).
func (s *exactSum) normalise() {
	var carry int64
	for i := range s.limb[:len(s.limb)-1] {
		v := s.limb[i] + carry
		carry = v >> 32
		s.limb[i] = v & 0xffffffff
	}
	s.limb[len(s.limb)-1] += carry
	s.adds = 1
}

// merge adds t to s.
func (s *exactSum) merge(t *exactSum) {
	s.normalise()
	u := *t
	u.normalise()
	for i := range s.limb {
		s.limb[i] += u.limb[i]
	}
	s.normalise()
}

// rat returns the sum as a fraction.
func (s *exactSum) rat() *big.Rat {
	n := s.int()
	return new(big.Rat).SetFrac(n, new(big.Int).Lsh(big.NewInt(1), sumScale))
}

// int returns the sum times 2^sumScale.
func (s *exactSum) int() *big.Int {
	n, l := new(big.Int), new(big.Int)
	for i := len(s.limb) - 1; i >= 0; i-- {
		n.Lsh(n, 32)
		n.Add(n, l.SetInt64(s.limb[i]))
	}
	return n
}

// MarshalText writes the sum as a hexadecimal integer, "p" and a power of two.
func (s *exactSum) MarshalText() ([]byte, error) {
	n := s.int()
	z := int(n.TrailingZeroBits())
	if n.Sign() == 0 {
		return []byte("0p0"), nil
	}
	m := new(big.Int).Rsh(new(big.Int).Abs(n), uint(z))
	sign := ""
	if n.Sign() < 0 {
		sign = "-"
	}
	return fmt.Appendf(nil, "%s%sp%d", sign, m.Text(16), z-sumScale), nil
}

// UnmarshalText reads what MarshalText writes.
func (s *exactSum) UnmarshalText(text []byte) error {
	*s = exactSum{}
	mantissa, exponent, ok := strings.Cut(string(text), "p")
	var e int
	if ok {
		if _, err := fmt.Sscanf(exponent, "%d", &e); err != nil || fmt.Sprint(e) != exponent {
			ok = false
		}
	}
	n, good := new(big.Int), false
	if len(mantissa) <= 600 {
		n, good = n.SetString(mantissa, 16)
	}
	if !ok || !good || (n.Sign() != 0 && (e < -sumScale || e+n.BitLen() > 1100)) {
		return fmt.Errorf("%.40q is no exact sum: a hexadecimal integer, p and a power of two are due", text)
	}
	if n.Sign() == 0 {
		return nil
	}
	neg := n.Sign() < 0
	n.Abs(n).Lsh(n, uint(e+sumScale))
	mask := big.NewInt(0xffffffff)
	for i := range s.limb {
		s.limb[i] = new(big.Int).And(n, mask).Int64()
		n.Rsh(n, 32)
		if neg {
			s.limb[i] = -s.limb[i]
		}
	}
	if n.Sign() != 0 {
		return fmt.Errorf("%.40q is out of range for an exact sum", text)
	}
	s.normalise()
	return nil
}

// momentsOf returns mean and variance (divisor n − 1) of n numbers from the sums
// of their deviations from centre and of the deviations' squares, rounded once
// each.
func momentsOf(n int64, centre float64, s1, s2 *exactSum) (mean, variance float64) {
	if n < 2 {
		return math.NaN(), math.NaN()
	}
	a := s1.rat()
	m := new(big.Rat).Quo(a, new(big.Rat).SetInt64(n))
	mean, _ = new(big.Rat).Add(m, new(big.Rat).SetFloat64(centre)).Float64()
	return mean, covarianceOf(n, s1, s1, s2)
}

// covarianceOf returns (Σab − ΣaΣb/n)/(n − 1), rounded once.
func covarianceOf(n int64, a, b, ab *exactSum) float64 {
	p := new(big.Rat).Mul(a.rat(), b.rat())
	p.Quo(p, new(big.Rat).SetInt64(n))
	p.Sub(ab.rat(), p)
	p.Quo(p, new(big.Rat).SetInt64(n-1))
	c, _ := p.Float64()
	return c
}
