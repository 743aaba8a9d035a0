package bench

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"testing"
)

// sameAsStrconv checks both readers of decimals against strconv.ParseFloat,
// bit for bit.
func sameAsStrconv(t *testing.T, s string) {
	t.Helper()
	want, err := strconv.ParseFloat(s, 64)
	if err != nil {
		if v, ok, _ := parseDecimal([]byte(s), '.'); ok {
			t.Fatalf("%q: got %v, strconv says %v", s, v, err)
		}
		return
	}
	got, ok, err := parseDecimal([]byte(s), '.')
	if err != nil || !ok || math.Float64bits(got) != math.Float64bits(want) {
		t.Fatalf("%q: got %v (%v, %v), want %v", s, got, ok, err, want)
	}
	if got, end, ok := scanDecimal([]byte(s+","), 0, '.'); ok && (end != len(s) || math.Float64bits(got) != math.Float64bits(want)) {
		t.Fatalf("%q: scan gives %v up to %d, want %v", s, got, end, want)
	}
}

func TestDecimalsAreThoseOfStrconv(t *testing.T) {
	for _, s := range []string{"0", "-0", "+0.0", "1", "-1.5", ".5", "5.", "1e0", "1E+5", "1e-5", "123456789012345678",
		"9007199254740993", "9007199254740992.5", "9007199254740991e22", "9007199254740993e23", "1e22", "1e23", "8.5e22",
		"2.2250738585072014e-308", "4.9e-324", "2.4703282292062327e-324", "1.7976931348623157e308", "1e309", "-1e400",
		"1e-400", "0e99999999999999999999", "0.000000000000000000000000000000000000000001", "99999999999999999999",
		"1.00000000000000011102230246251565404236316680908203125",
		"1.00000000000000011102230246251565404236316680908203124",
		"18446744073709551615", "18446744073709551616", "1844674407370955161.5e-30", "5e-20", "6.02214076e23"} {
		sameAsStrconv(t, s)
	}
	src := rand.New(rand.NewPCG(1, 2))
	for range 200000 {
		x := math.Float64frombits(src.Uint64())
		if math.IsNaN(x) || math.IsInf(x, 0) {
			continue
		}
		sameAsStrconv(t, strconv.FormatFloat(x, 'e', -1, 64))
		y := (src.Float64() - 0.5) * math.Pow(10, float64(src.IntN(60)-30))
		sameAsStrconv(t, strconv.FormatFloat(y, 'e', 16, 64))
		sameAsStrconv(t, strconv.FormatFloat(y, 'g', 1+src.IntN(18), 64))
		sameAsStrconv(t, fmt.Sprintf("%.*f", src.IntN(9), y))
		// Half-way between two doubles and one unit to either side, where rounding decides.
		m := src.Uint64()>>11<<1 | 1
		sameAsStrconv(t, strconv.FormatUint(m, 10)+"e"+strconv.Itoa(src.IntN(60)-30))
	}
}

func TestNoDecimals(t *testing.T) {
	for _, s := range []string{"", ".", "+", "-", "e5", "1e", "1e+", "1.2.3", "1,2", "0x10", "1_000", "inf", "NaN", "Infinity",
		"1 2", "--1", "+-1", "1e5e5", "1e1.5", "１", "1-2", ".e1"} {
		if v, ok, err := parseDecimal([]byte(s), '.'); ok || err != nil {
			t.Errorf("%q: read as %v, %v", s, v, err)
		}
	}
}
