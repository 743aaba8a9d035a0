package random

import (
	"math"
	"math/bits"
)

// A Source is one stream of random numbers: the xoshiro256++ generator of
// Blackman and Vigna, "Scrambled linear pseudorandom number generators", ACM
// Trans. Math. Softw. 47 (2021), 36. Its period is 2^256 − 1. It is a plain
// value: copying it copies the state, and drawing from the copies gives the
// same numbers twice. A Source is not safe for use from several goroutines; give
// each its own. The zero Source is not usable; make one with New.
type Source struct{ s0, s1, s2, s3 uint64 }

// New returns the stream of a seed, a purpose and a block. Different seeds,
// purposes or blocks give streams that are independent for every practical
// purpose; equal ones give the same numbers on every machine. Seed 0 and block
// 0 are as good as any.
//
// The three are absorbed into 128 bits by two chains of the bijective 64-bit
// finaliser of Steele, Lea and Flood, "Fast splittable pseudorandom number
// generators", OOPSLA 2014; the 256-bit state is expanded from these by the
// SplitMix64 sequence of the same paper, as the authors of xoshiro advise.
// For one seed and purpose no two blocks can share a state, since each chain is
// bijective in the block.
func New(seed uint64, stream string, block uint64) Source {
	const (
		golden = 0x9e3779b97f4a7c15 // 2^64 divided by the golden ratio
		silver = 0xd1342543de82ef95 // odd, from Steele and Vigna (2022), table of 64-bit multipliers
	)
	a, b := mix(seed+golden), mix(seed^silver)
	for len(stream) >= 8 {
		w := uint64(stream[0]) | uint64(stream[1])<<8 | uint64(stream[2])<<16 | uint64(stream[3])<<24 |
			uint64(stream[4])<<32 | uint64(stream[5])<<40 | uint64(stream[6])<<48 | uint64(stream[7])<<56
		a, b = mix(a+golden^w), mix(b+silver^w)
		stream = stream[8:]
	}
	// The last, possibly empty, group carries its length in the free top byte,
	// so that no two purposes run into each other.
	w := uint64(len(stream)+1) << 56
	for i := 0; i < len(stream); i++ {
		w |= uint64(stream[i]) << (8 * i)
	}
	a, b = mix(a+golden^w), mix(b+silver^w)
	a, b = mix(a+golden^block), mix(b+silver^block)
	var s Source
	s.s0 = mix(a + golden)
	s.s1 = mix(b + golden)
	s.s2 = mix(a + 2*(golden&math.MaxInt64))
	s.s3 = mix(b+2*(golden&math.MaxInt64)) | 1 // never the all-zero state
	return s
}

// mix is the finaliser of SplitMix64, a bijection of the 64-bit words.
func mix(z uint64) uint64 {
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return z ^ z>>31
}

// Uint64 returns the next 64 random bits.
func (s *Source) Uint64() uint64 {
	u := bits.RotateLeft64(s.s0+s.s3, 23) + s.s0
	t := s.s1 << 17
	s.s2 ^= s.s0
	s.s3 ^= s.s1
	s.s1 ^= s.s2
	s.s0 ^= s.s3
	s.s2 ^= t
	s.s3 = bits.RotateLeft64(s.s3, 45)
	return u
}

// Float64 returns a number uniform in the open interval (0, 1). It is an odd
// multiple of 2^-63 rounded to the nearest float64: all 53 bits of the
// significand are random down to 2^-10, and no result is 0 or 1.
func (s *Source) Float64() float64 { return unit(s.Uint64()) }

// unit maps 64 random bits to the open unit interval.
func unit(u uint64) float64 {
	x := float64(int64(u>>1|1)) * 0x1p-63
	if x == 1 { // rounded up, once in 2^54
		x = 1 - 0x1p-53
	}
	return x
}

// Exponential returns a number with the exponential distribution of mean 1, by
// inversion.
func (s *Source) Exponential() float64 { return -math.Log(s.Float64()) }

// Gamma returns a number with the gamma distribution of the given shape and
// scale 1: mean and variance equal shape. It follows Marsaglia and Tsang, "A
// simple method for generating gamma variables", ACM Trans. Math. Softw. 26
// (2000) 363–372, with the power of a uniform of their section 6 for shapes below 1.
// A shape that is not positive and finite gives NaN.
func (s *Source) Gamma(shape float64) float64 {
	if !(shape > 0) || math.IsInf(shape, 1) {
		return math.NaN()
	}
	if shape < 1 {
		return s.Gamma(shape+1) * math.Pow(s.Float64(), 1/shape)
	}
	d := shape - 1.0/3
	c := 1 / math.Sqrt(9*d)
	for {
		x := s.Normal()
		v := 1 + c*x
		if v <= 0 {
			continue
		}
		v = v * v * v
		u := s.Float64()
		if u < 1-0.0331*x*x*x*x || math.Log(u) < 0.5*x*x+d*(1-v+math.Log(v)) {
			return d * v
		}
	}
}
