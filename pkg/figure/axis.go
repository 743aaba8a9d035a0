package figure

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"example.org/guardring/pkg/si"
)

// Axis describes one axis of a Plot. Its zero value is a linear axis of a pure
// number without a name, fitted to the data.
type Axis struct {
	Name string  // the quantity, in words or as a symbol
	Unit si.Unit // any unit of the quantity's dimension; data are SI, the axis chooses the prefix
	Log  bool    // logarithmic; refuses values that are not above zero
	// Low and High, SI, hold the ends when Low < High; otherwise the data do.
	Low, High float64
	// Zero makes a linear axis reach zero.
	Zero bool
	// Labels name the places 1, 2, 3 … of an axis of things (laboratories,
	// inputs) instead of numbers; the other fields but Name are ignored.
	Labels []string
}

// tick is one mark on an axis.
type tick struct {
	at    float64 // SI
	label string
	minor bool
}

// scale maps SI values to a stretch of the page.
type scale struct {
	lo, hi float64 // SI
	log    bool
	ticks  []tick
	title  string
	from   float64 // page position of lo
	to     float64 // page position of hi
}

// pos returns the place of an SI value on the page.
func (s *scale) pos(x float64) float64 {
	lo, hi := s.lo, s.hi
	if s.log {
		x, lo, hi = math.Log(x), math.Log(lo), math.Log(hi)
	}
	return s.from + (x-lo)/(hi-lo)*(s.to-s.from)
}

// longAxis is the ratio over which data of one sign are shown on a logarithmic
// axis where the choice is ours: a decade and a half.
var longAxis = math.Pow(10, 1.5)

// spanner finds the range of finite values.
type spanner struct {
	lo, hi float64
	n      int
}

func (s *spanner) add(x float64) {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return
	}
	if s.n == 0 || x < s.lo {
		s.lo = x
	}
	if s.n == 0 || x > s.hi {
		s.hi = x
	}
	s.n++
}

// newScale makes the scale of an axis over the data's range, with about want
// marks.
func newScale(a Axis, data spanner, want int) (*scale, error) {
	what := a.Name
	if what == "" {
		what = "an axis"
	}
	if len(a.Labels) > 0 {
		return placesScale(a), nil
	}
	lo, hi := data.lo, data.hi
	held := a.Low < a.High
	if held {
		lo, hi = a.Low, a.High
	} else if data.n == 0 {
		return nil, fmt.Errorf("figure: nothing to draw: %s has no finite value", what)
	}
	if math.IsInf(1.2*(hi-lo), 0) {
		return nil, fmt.Errorf("figure: %s runs from %s to %s, too far for an axis", what, si.Exact(lo), si.Exact(hi))
	}
	s := &scale{log: a.Log}
	if a.Log && lo <= 0 {
		return nil, fmt.Errorf("figure: %s is %s, which a logarithmic axis can't show: leave out values that are not above zero, or use a linear axis", what, si.Exact(lo))
	}
	if a.Zero && !a.Log {
		lo, hi = math.Min(lo, 0), math.Max(hi, 0)
	}
	switch {
	case held:
	case a.Log:
		if hi <= lo*(1+1e-9) {
			lo, hi = lo/1.05, hi*1.05
		}
		pad := math.Pow(hi/lo, 0.05)
		lo, hi = lo/pad, hi*pad
	default:
		// The least span that doubles can still part into marks.
		least := math.Max(math.Abs(lo), math.Abs(hi)) * 1e-12
		if hi-lo <= least {
			d := math.Max(math.Abs(hi)*0.05, least)
			if d == 0 {
				d = 1
			}
			lo, hi = lo-d, hi+d
		}
		pad := 0.05 * (hi - lo)
		if !(a.Zero && lo == 0) {
			lo -= pad
		}
		if !(a.Zero && hi == 0) {
			hi += pad
		}
	}
	if s.lo, s.hi = lo, hi; !finite(s.pos(lo), s.pos(hi)) || hi <= lo {
		return nil, fmt.Errorf("figure: %s runs from %s to %s, which an axis can't show", what, si.Exact(lo), si.Exact(hi))
	}
	s.lo, s.hi = lo, hi
	largest := math.Max(math.Abs(lo), math.Abs(hi))
	if a.Log {
		largest = math.Sqrt(lo) * math.Sqrt(hi)
	}
	_, unit := si.Prefixed(largest, a.Unit)
	if a.Log {
		s.ticks = logTicks(lo, hi, unit, want)
	} else {
		s.ticks = linearTicks(lo, hi, unit, want)
	}
	s.title = axisTitle(a.Name, unit)
	return s, nil
}

// placesScale is the scale of an axis of things.
func placesScale(a Axis) *scale {
	s := &scale{lo: 0.4, hi: float64(len(a.Labels)) + 0.6, title: a.Name}
	for i, l := range a.Labels {
		s.ticks = append(s.ticks, tick{at: float64(i + 1), label: fitted(l, tickSize, false, 0.8*wide/float64(len(a.Labels)))})
	}
	return s
}

// axisTitle writes the quantity divided by its unit: "E / (kV m⁻¹)".
func axisTitle(name string, u si.Unit) string {
	t := u.Unicode()
	switch {
	case u.Symbol == "" || t == "1" || t == "":
		return name
	case strings.ContainsAny(t, " /·"):
		t = "(" + t + ")"
	}
	if name == "" {
		return t
	}
	return name + " / " + t
}

// linearTicks puts marks on multiples of 1, 2 or 5 × 10^n of the display unit.
func linearTicks(lo, hi float64, u si.Unit, want int) []tick {
	dlo, dhi := u.FromSI(lo), u.FromSI(hi)
	step, exp := niceStep((dhi - dlo) / float64(max(want, 2)))
	if step == 0 {
		return nil
	}
	parts := 5
	if math.Round(step/math.Pow(10, float64(exp))) == 2 {
		parts = 4
	}
	var out []tick
	first := math.Ceil(dlo/step - 1e-9)
	for n := range mostTicks {
		i := first + float64(n)
		if i*step > dhi+1e-9*step {
			break
		}
		v := multiple(i, step, exp)
		out = append(out, tick{at: u.ToSI(v), label: plainNumber(v, max(0, -exp))})
	}
	small := step / float64(parts)
	first = math.Ceil(dlo/small - 1e-9)
	for n := range mostTicks * parts {
		i := first + float64(n)
		if i*small > dhi+1e-9*small {
			break
		}
		if math.Mod(i, float64(parts)) != 0 {
			out = append(out, tick{at: u.ToSI(i * small), minor: true})
		}
	}
	return out
}

// mostTicks bounds the marks of an axis whatever the rounding of its numbers.
const mostTicks = 60

// multiple returns i × step rounded to its decimals, so that a zero is zero.
func multiple(i, step float64, exp int) float64 {
	v := i * step
	if exp < 0 && exp > -15 {
		p := math.Pow(10, float64(-exp))
		v = math.Round(v*p) / p
	}
	return v
}

// niceStep rounds to 1, 2 or 5 × 10^exp, whichever is nearest in ratio.
func niceStep(x float64) (step float64, exp int) {
	if !(x > 0) || math.IsInf(x, 0) {
		return 0, 0
	}
	exp = int(math.Floor(math.Log10(x)))
	p := math.Pow(10, float64(exp))
	switch m := x / p; {
	case m < 1.4142:
		return p, exp
	case m < 3.1623:
		return 2 * p, exp
	case m < 7.0711:
		return 5 * p, exp
	}
	return 10 * p, exp + 1
}

// logTicks marks decades when there are two or more of them, and 1, 2, 5 (or
// every unit, or a linear choice) where the axis is shorter.
func logTicks(lo, hi float64, u si.Unit, want int) []tick {
	dlo, dhi := u.FromSI(lo), u.FromSI(hi)
	decades := math.Log10(dhi / dlo)
	if decades < 0.35 {
		// Less than a factor of two or so: even steps, set logarithmically.
		var out []tick
		for _, t := range linearTicks(lo, hi, u, want) {
			if t.at > 0 {
				out = append(out, t)
			}
		}
		return out
	}
	first, last := int(math.Floor(math.Log10(dlo))), int(math.Ceil(math.Log10(dhi)))
	every := 1
	for decades/float64(every) > float64(max(want, 2)+1) {
		every++
	}
	named := map[int]bool{1: true}
	switch {
	case decades < 1.1:
		for m := 2; m <= 9; m++ {
			named[m] = m <= 6 || m == 8
		}
	case decades < 2.2:
		named[2], named[5] = true, true
	}
	powers := last > 4 || first < -4 // 10⁵ rather than 100000
	var out []tick
	for e := first; e <= last; e++ {
		for m := 1; m <= 9; m++ {
			v, err := strconv.ParseFloat(strconv.Itoa(m)+"e"+strconv.Itoa(e), 64)
			if err != nil || v < dlo*(1-1e-9) || v > dhi*(1+1e-9) {
				continue
			}
			t := tick{at: u.ToSI(v), minor: !named[m] || m == 1 && floorMod(e, every) != 0}
			if !t.minor {
				if powers {
					t.label = "10" + superscript(e)
					if m != 1 {
						t.label = strconv.Itoa(m) + "×" + t.label
					}
				} else {
					t.label = plainNumber(v, max(0, -e))
				}
			} else if every > 1 && m != 1 {
				continue
			}
			out = append(out, t)
		}
	}
	return out
}

func floorMod(a, b int) int { return ((a % b) + b) % b }

func superscript(n int) string {
	const digits = "⁰¹²³⁴⁵⁶⁷⁸⁹"
	var b strings.Builder
	for _, c := range strconv.Itoa(n) {
		if c == '-' {
			b.WriteRune('⁻')
		} else {
			b.WriteRune([]rune(digits)[c-'0'])
		}
	}
	return b.String()
}

// plainNumber writes a number of a mark: a true minus sign, and thin spaces in
// numbers of five digits or more before the point. Numbers beyond 10⁶ or with
// more than six decimals, which no prefix could mend, are written as powers.
func plainNumber(v float64, decimals int) string {
	if v != 0 && (math.Abs(v) >= 1e7 || decimals > 9) {
		s := strconv.FormatFloat(v, 'e', -1, 64)
		mantissa, e, _ := strings.Cut(s, "e")
		n, err := strconv.Atoi(e)
		if err == nil {
			return signed(mantissa) + "×10" + superscript(n)
		}
	}
	s := strconv.FormatFloat(v, 'f', decimals, 64)
	whole, frac, point := strings.Cut(s, ".")
	sign := strings.HasPrefix(whole, "-")
	whole = strings.TrimPrefix(whole, "-")
	if len(whole) > 4 {
		var parts []string
		for len(whole) > 3 {
			parts = append([]string{whole[len(whole)-3:]}, parts...)
			whole = whole[:len(whole)-3]
		}
		whole = strings.Join(append([]string{whole}, parts...), "\u2009")
	}
	if point {
		whole += "." + frac
	}
	if sign && v != 0 {
		whole = "−" + whole
	}
	return whole
}

// signed replaces the hyphen by a minus sign.
func signed(s string) string { return strings.Replace(s, "-", "−", 1) }
