package lab

import (
	"math"
	"strconv"

	"example.org/guardring/pkg/si"
)

// inUnit is the number that u.ToSI turns into exactly x, the shortest there is:
// a reading that came from a file has the digits of the file again. Where no
// such number exists (x was computed), it is the nearest.
func inUnit(u si.Unit, x float64) float64 {
	y := u.FromSI(x)
	if math.IsNaN(y) || math.IsInf(y, 0) {
		return y
	}
	for digits := 15; digits <= 17; digits++ {
		if z, err := strconv.ParseFloat(strconv.FormatFloat(y, 'g', digits, 64), 64); err == nil && u.ToSI(z) == x {
			return z
		}
	}
	for _, z := range [...]float64{math.Nextafter(y, math.Inf(-1)), math.Nextafter(y, math.Inf(1))} {
		if u.ToSI(z) == x {
			return z
		}
	}
	return y
}
