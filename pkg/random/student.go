package random

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/mathext"
)

// A student is the ziggurat of Student's t for one number of degrees of
// freedom. Its base strip ends at r; the tail beyond is drawn in
// s = ln(1 + x²/ν), whose density is proportional to exp(−νs/2)/√(1 − exp(−s))
// (derived: substitute in the density (1 + x²/ν)^(−(ν+1)/2)). Beyond
// s_r = ln(1 + r²/ν) the root lies between that at s_r and 1, so an exponential
// of rate ν/2 shifted to s_r is accepted with probability
// √((1 − exp(−s_r))/(1 − exp(−s))): exact, and for no ν a poor bargain.
type student struct {
	z    *ziggurat
	nu   float64
	half float64 // (ν+1)/2
	sr   float64 // ln(1 + r²/ν)
}

// log returns the natural logarithm of the density over its mode.
func (t *student) log(x float64) float64 { return -t.half * math.Log1p(x*x/t.nu) }

// newStudent lays out the ziggurat for nu > 0 degrees of freedom.
func newStudent(nu float64) *student {
	nu = max(nu, 1e-300) // half of less may be 0; all of it overflows anyway
	t := &student{nu: nu, half: (nu + 1) / 2}
	f := func(x float64) float64 { return math.Exp(t.log(x)) }
	inverse := func(y float64) float64 { return math.Sqrt(nu * math.Expm1(-math.Log(y)/t.half)) }
	// ∫₀^∞ f = √ν B(1/2, ν/2)/2, and the mass beyond r is that times the
	// two-sided tail probability I_{ν/(ν+r²)}(ν/2, 1/2).
	total := math.Sqrt(nu) / 2 * math.Sqrt(math.Pi) * gammaRatio(nu/2)
	area := func(r float64) float64 {
		return r*f(r) + total*mathext.RegIncBeta(nu/2, 0.5, nu/(nu+r*r))
	}
	var x [layers + 1]float64
	// excess is how far the stack of equal layers on a base strip ending at r
	// overshoots the mode; it falls as r grows.
	excess := func(r float64) float64 {
		v := area(r)
		y := f(r)
		x[0], x[1] = v/y, r
		for i := 1; i < layers-1; i++ {
			y += v / x[i]
			if y >= 1 {
				return y - 1 + float64(layers-1-i)/layers
			}
			x[i+1] = inverse(y)
		}
		return y + v/x[layers-1] - 1
	}
	lo, hi := math.Log(3.0), math.Log(4.0)
	for excess(math.Exp(hi)) > 0 {
		lo, hi = hi, hi+0.5
	}
	for hi-lo > 1e-15*hi {
		mid := lo + (hi-lo)/2
		if mid <= lo || mid >= hi {
			break
		}
		if excess(math.Exp(mid)) > 0 {
			lo = mid
		} else {
			hi = mid
		}
	}
	r := math.Exp(hi)
	excess(r)
	x[layers] = 0
	t.z = newZiggurat(&x, f)
	t.sr = math.Log1p(r * r / nu)
	return t
}

// gammaRatio returns Γ(z)/Γ(z+1/2), by its asymptotic series (Tricomi and
// Erdélyi, Pacific J. Math. 1 (1951) 133) where the difference of logarithms would
// lose digits.
func gammaRatio(z float64) float64 {
	if z > 100 {
		i := 1 / z
		return math.Exp(i/8-i*i*i/192+i*i*i*i*i/640) / math.Sqrt(z)
	}
	a, _ := math.Lgamma(z)
	b, _ := math.Lgamma(z + 0.5)
	return math.Exp(a - b)
}

// students caches ziggurats by degrees of freedom. A ziggurat depends on ν
// alone, so the cache can't change what is drawn.
var students struct {
	sync.RWMutex
	m map[float64]*student
}

// maxStudents bounds the cache: 256 tables of 6 kB.
const maxStudents = 256

func studentFor(nu float64) *student {
	students.RLock()
	t := students.m[nu]
	students.RUnlock()
	if t != nil {
		return t
	}
	t = newStudent(nu)
	students.Lock()
	defer students.Unlock()
	if students.m == nil || len(students.m) >= maxStudents {
		students.m = make(map[float64]*student)
	}
	students.m[nu] = t
	return t
}

// Beyond manyDOF degrees of freedom Student's t is drawn as a normal: the two
// differ by less than 1e-8 in probability anywhere.
const manyDOF = 1e8

// StudentT returns a number with Student's t distribution of nu degrees of
// freedom; nu may be any positive number, and +Inf gives a normal. It draws from
// a ziggurat laid out for nu (the first draw for a new nu costs about a
// millisecond) with an exact tail. A nu that is not positive gives NaN. Below
// nu = 0.05 the tail overflows float64 and gives ±Inf, below 0.01 nearly always.
func (s *Source) StudentT(nu float64) float64 {
	if nu >= manyDOF {
		return s.Normal()
	}
	if !(nu > 0) {
		return math.NaN()
	}
	return studentFor(nu).draw(s)
}

func (t *student) draw(s *Source) float64 {
	u := s.Uint64()
	i := u & (layers - 1)
	j := int64(u)>>9 | 1
	x := float64(j) * t.z.width[i]
	if max(j, -j) < t.z.accept[i] {
		return x
	}
	return t.slow(s, i, x)
}

// slow finishes a draw that fell outside the rectangle of layer i, at x.
func (t *student) slow(s *Source, i uint64, x float64) float64 {
	z := t.z
	for {
		if i == 0 {
			return math.Copysign(t.tail(s), x)
		}
		if z.height[i]+s.Float64()*(z.height[i+1]-z.height[i]) < math.Exp(t.log(x)) {
			return x
		}
		u := s.Uint64()
		i = u & (layers - 1)
		j := int64(u)>>9 | 1
		x = float64(j) * z.width[i]
		if max(j, -j) < z.accept[i] {
			return x
		}
	}
}

// tail returns a number conditional on exceeding the end of the base strip.
func (t *student) tail(s *Source) float64 {
	a := -math.Expm1(-t.sr)
	for {
		v := t.sr + s.Exponential()*2/t.nu
		if u := s.Float64(); u*u*-math.Expm1(-v) < a {
			return math.Sqrt(t.nu * math.Expm1(v))
		}
	}
}
