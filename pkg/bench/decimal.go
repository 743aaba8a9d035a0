package bench

import (
	"math"
	"math/big"
	"math/bits"
	"strconv"
	"sync"
	"unsafe"
)

// exactPow10 are the powers of ten that a double holds exactly.
var exactPow10 = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// scanDecimal reads the decimal number at b[i:], written with the decimal sign
// point, up to the first byte that can't belong to it. It returns the double
// nearest to it, ties to even, the same bits as strconv.ParseFloat, and the
// index behind it. ok is false when there is no number at i or when it needs the
// long way (more than 19 digits, or exponents beyond the table); the caller then
// takes the cell apart by parseDecimal.
//
// Grammar: [+-] digits [. digits] [(e|E) [+-] digits], with at least one digit
// in the mantissa.
func scanDecimal(b []byte, i int, point byte) (v float64, end int, ok bool) {
	// Signs come as they like, and a branch on each would be guessed wrong half the
	// time: here is none.
	var minus, plus uint64
	if uint(i) < uint(len(b)) {
		c := b[i]
		if c == '-' {
			minus = 1
		}
		if c == '+' {
			plus = 1
		}
		i += int(minus | plus)
	}
	start := i
	var m uint64
	for ; uint(i) < uint(len(b)); i++ {
		c := uint64(b[i]) - '0'
		if c > 9 {
			break
		}
		m = m*10 + c
	}
	digits := i - start
	exp := 0
	if uint(i) < uint(len(b)) && b[i] == point {
		i++
		from := i
		for ; uint(i) < uint(len(b)); i++ {
			c := uint64(b[i]) - '0'
			if c > 9 {
				break
			}
			m = m*10 + c
		}
		digits += i - from
		exp = from - i
	}
	if digits == 0 || digits > 19 { // 10^19 − 1 fits a uint64
		return 0, i, false
	}
	if uint(i) < uint(len(b)) && b[i]|0x20 == 'e' {
		i++
		down := false
		if uint(i) < uint(len(b)) && (b[i] == '-' || b[i] == '+') {
			down = b[i] == '-'
			i++
		}
		from, e := i, 0
		for ; uint(i) < uint(len(b)); i++ {
			c := b[i] - '0'
			if c > 9 {
				break
			}
			if e < 10000 {
				e = e*10 + int(c)
			}
		}
		if i == from {
			return 0, i, false
		}
		if down {
			e = -e
		}
		exp += e
	}
	// W. D. Clinger, How to read floating point numbers accurately, PLDI 1990:
	// both operands are exact, so that one operation rounds once.
	if m < 1<<53 && -len(exactPow10) < exp && exp < len(exactPow10) {
		v = byPow10(m, exp)
	} else if v, ok = scaleDecimal(m, exp); !ok {
		// Most of what 128 bits can't decide are doubles exactly, written with
		// zeros at the end: 1.5000000000000000.
		for m >= 1<<53 && m%10 == 0 {
			m /= 10
			exp++
		}
		if m >= 1<<53 || exp <= -len(exactPow10) || exp >= len(exactPow10) {
			return 0, i, false
		}
		v = byPow10(m, exp)
	}
	return math.Float64frombits(math.Float64bits(v) | minus<<63), i, true
}

// byPow10 returns m × 10^exp where both are doubles exactly.
func byPow10(m uint64, exp int) float64 {
	if exp < 0 {
		return float64(m) / exactPow10[-exp]
	}
	return float64(m) * exactPow10[exp]
}

// The range of powers of ten in the table of scaleDecimal. Bench readings stay
// well within; what lies outside goes to strconv.
const (
	minPow10 = -80
	maxPow10 = 60
)

// power is the 128 most significant bits of a power of ten, rounded down.
type power struct{ hi, lo uint64 }

// powers is computed on first use from exact integers, so that there is no
// table to keep right.
var powers = sync.OnceValue(func() *[maxPow10 - minPow10 + 1]power {
	var t [maxPow10 - minPow10 + 1]power
	mask := new(big.Int).SetUint64(math.MaxUint64)
	for i := range t {
		e := i + minPow10
		x := new(big.Int).Exp(big.NewInt(10), big.NewInt(int64(max(e, -e))), nil)
		if e < 0 {
			// 2^n/10^−e with 128 bits of quotient.
			n := x.BitLen() + 127
			q := new(big.Int).Lsh(big.NewInt(1), uint(n))
			x = q.Quo(q, x)
		}
		if n := x.BitLen() - 128; n > 0 {
			x.Rsh(x, uint(n))
		} else {
			x.Lsh(x, uint(-n))
		}
		t[i] = power{new(big.Int).Rsh(x, 64).Uint64(), new(big.Int).And(x, mask).Uint64()}
	}
	return &t
})

// scaleDecimal returns m × 10^exp rounded to nearest even, ok false in the rare
// cases that 128 bits can't decide and outside its range of exponents. Method:
// D. Lemire, Number parsing at a gigabyte per second, Software: Practice and
// Experience 51 (2021) 1700–1727, section 5, after an idea of M. Eisel.
func scaleDecimal(m uint64, exp int) (float64, bool) {
	if m == 0 {
		return 0, true
	}
	if exp < minPow10 || exp > maxPow10 {
		return 0, false
	}
	p := &powers()[exp-minPow10]
	shift := bits.LeadingZeros64(m)
	m <<= shift
	// Binary exponent of 10^exp: floor(exp·log2 10), exact in this range.
	const log2of10 = 217706 // in units of 2^−16
	e2 := (log2of10*exp)>>16 + 63 + 1 - shift

	hi, lo := bits.Mul64(m, p.hi)
	// The table is rounded down; when the bits that decide are all ones, the
	// lower half of the power is multiplied in too.
	if hi&0x1ff == 0x1ff && lo+m < m {
		h2, l2 := bits.Mul64(m, p.lo)
		var carry uint64
		lo, carry = bits.Add64(lo, h2, 0)
		hi += carry
		if hi&0x1ff == 0x1ff && lo == math.MaxUint64 && l2+m < m {
			return 0, false
		}
	}
	top := hi >> 63
	mantissa := hi >> (top + 9) // 54 bits: one more than a double has
	e2 -= int(1 ^ top)
	// Exactly half-way by the bits there are: undecided.
	if lo == 0 && hi&0x1ff == 0 && mantissa&3 == 1 {
		return 0, false
	}
	mantissa = (mantissa + mantissa&1) >> 1
	if mantissa>>53 != 0 {
		mantissa >>= 1
		e2++
	}
	biased := e2 + 1023
	if biased < 1 || biased > 2046 {
		return 0, false
	}
	return math.Float64frombits(uint64(biased)<<52 | mantissa&(1<<52-1)), true
}

// parseDecimal is the long way: b, without blanks, must be one decimal number
// of the grammar of scanDecimal.
func parseDecimal(b []byte, point byte) (v float64, ok bool, err error) {
	if len(b) == 0 || len(b) > 4096 {
		return 0, false, nil
	}
	if v, end, ok := scanDecimal(b, 0, point); ok && end == len(b) {
		return v, true, nil
	}
	digits, exponent, seenPoint := 0, false, false
	text := b
	for i, c := range b {
		switch {
		case '0' <= c && c <= '9':
			digits++
		case c == point && !seenPoint && !exponent:
			seenPoint = true
			if point != '.' {
				text = append([]byte(nil), b...)
				text[i] = '.'
			}
		case c|0x20 == 'e' && !exponent && digits > 0:
			exponent = true
			if i+1 == len(b) {
				return 0, false, nil
			}
		case (c == '+' || c == '-') && (i == 0 || b[i-1]|0x20 == 'e'):
			if i+1 == len(b) {
				return 0, false, nil
			}
		default:
			return 0, false, nil
		}
	}
	if digits == 0 {
		return 0, false, nil
	}
	v, err = strconv.ParseFloat(unsafe.String(&text[0], len(text)), 64)
	if err != nil {
		return 0, false, err // beyond the range of doubles
	}
	return v, true, nil
}
