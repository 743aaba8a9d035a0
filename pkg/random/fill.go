package random

import (
	"math"
	"math/bits"
)

// The fills below draw the same numbers as the one-at-a-time methods would, in
// the same order, but keep the generator's state in registers and apply location
// and scale on the way. A state leaves the registers only for the rare draw that
// the ziggurat can't settle at once.

// FillUniform fills dst with numbers uniform in the open interval (0, 1).
func (s *Source) FillUniform(dst []float64) { s.FillUniformIn(dst, 0, 1) }

// FillUniformIn fills dst with lo + (hi − lo)·u, u uniform in (0, 1).
func (s *Source) FillUniformIn(dst []float64, lo, hi float64) {
	width := hi - lo
	s0, s1, s2, s3 := s.s0, s.s1, s.s2, s.s3
	for k := range dst {
		u := bits.RotateLeft64(s0+s3, 23) + s0
		t := s1 << 17
		s2 ^= s0
		s3 ^= s1
		s1 ^= s2
		s0 ^= s3
		s2 ^= t
		s3 = bits.RotateLeft64(s3, 45)
		dst[k] = lo + width*unit(u)
	}
	s.s0, s.s1, s.s2, s.s3 = s0, s1, s2, s3
}

// FillNormal fills dst with standard normal numbers.
func (s *Source) FillNormal(dst []float64) { s.FillNormalAt(dst, 0, 1) }

// FillNormalAt fills dst with normal numbers of the given mean and standard
// deviation.
func (s *Source) FillNormalAt(dst []float64, mean, sd float64) {
	z := normalZiggurat
	s0, s1, s2, s3 := s.s0, s.s1, s.s2, s.s3
	for k := range dst {
		u := bits.RotateLeft64(s0+s3, 23) + s0
		t := s1 << 17
		s2 ^= s0
		s3 ^= s1
		s1 ^= s2
		s0 ^= s3
		s2 ^= t
		s3 = bits.RotateLeft64(s3, 45)
		i := u & (layers - 1)
		j := int64(u)>>9 | 1
		x := float64(j) * z.width[i]
		if max(j, -j) >= z.accept[i] {
			s.s0, s.s1, s.s2, s.s3 = s0, s1, s2, s3
			x = s.normalSlow(i, x)
			s0, s1, s2, s3 = s.s0, s.s1, s.s2, s.s3
		}
		dst[k] = mean + sd*x
	}
	s.s0, s.s1, s.s2, s.s3 = s0, s1, s2, s3
}

// FillStudentT fills dst with location + scale·t, t of nu degrees of freedom
// (see StudentT).
func (s *Source) FillStudentT(dst []float64, nu, location, scale float64) {
	if nu >= manyDOF {
		s.FillNormalAt(dst, location, scale)
		return
	}
	if !(nu > 0) {
		for k := range dst {
			dst[k] = math.NaN()
		}
		return
	}
	st := studentFor(nu)
	z := st.z
	s0, s1, s2, s3 := s.s0, s.s1, s.s2, s.s3
	for k := range dst {
		u := bits.RotateLeft64(s0+s3, 23) + s0
		t := s1 << 17
		s2 ^= s0
		s3 ^= s1
		s1 ^= s2
		s0 ^= s3
		s2 ^= t
		s3 = bits.RotateLeft64(s3, 45)
		i := u & (layers - 1)
		j := int64(u)>>9 | 1
		x := float64(j) * z.width[i]
		if max(j, -j) >= z.accept[i] {
			s.s0, s.s1, s.s2, s.s3 = s0, s1, s2, s3
			x = st.slow(s, i, x)
			s0, s1, s2, s3 = s.s0, s.s1, s.s2, s.s3
		}
		dst[k] = location + scale*x
	}
	s.s0, s.s1, s.s2, s.s3 = s0, s1, s2, s3
}

// Coefficients of sin πt/t in powers of t², |t| ≤ 1/2: the Chebyshev expansion
// 2Σ(−1)^k J_{2k+1}(π/2) T_{2k+1}(2t) (Abramowitz and Stegun 9.1.45) to eight
// terms, within 1e-16 of sin πt. TestArcsineSine recomputes the error.
const (
	sin1  = 3.14159265358979
	sin3  = -5.167712780049385
	sin5  = 2.55016403984454
	sin7  = -0.5992645284952589
	sin9  = 0.08214587559062965
	sin11 = -0.007370347438502996
	sin13 = 0.00046594198740363687
	sin15 = -2.1085602852487744e-05
)

// sine returns sin πt for |t| ≤ 1/2, within 5e-16.
func sine(t float64) float64 {
	q := t * t
	q2 := q * q
	return t * ((sin1 + sin3*q) + q2*((sin5+sin7*q)+q2*((sin9+sin11*q)+q2*(sin13+sin15*q))))
}

// Arcsine returns a number with the arcsine (U-shaped) distribution on (−1, 1):
// sin πt with t uniform in (−1/2, 1/2), as JCGM 101:2008 6.4.6.4 up to the
// phase.
func (s *Source) Arcsine() float64 { return sine(s.Float64() - 0.5) }

// FillArcsine fills dst with centre + half·a, a arcsine on (−1, 1).
func (s *Source) FillArcsine(dst []float64, centre, half float64) {
	s0, s1, s2, s3 := s.s0, s.s1, s.s2, s.s3
	for k := range dst {
		u := bits.RotateLeft64(s0+s3, 23) + s0
		t := s1 << 17
		s2 ^= s0
		s3 ^= s1
		s1 ^= s2
		s0 ^= s3
		s2 ^= t
		s3 = bits.RotateLeft64(s3, 45)
		dst[k] = centre + half*sine(unit(u)-0.5)
	}
	s.s0, s.s1, s.s2, s.s3 = s0, s1, s2, s3
}
