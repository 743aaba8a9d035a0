package gum

import (
	"math"
	"math/big"
	"testing"

	"pgregory.net/rapid"
)

// TestExactSum compares with arithmetic on fractions, in any order and grouping,
// and through text.
func TestExactSum(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOf(rapid.Float64().Filter(func(v float64) bool { return v-v == 0 })).Draw(t, "x")
		x = append(x, 0, math.MaxFloat64, -math.MaxFloat64, math.SmallestNonzeroFloat64)
		want := new(big.Rat)
		var forward exactSum
		for _, v := range x {
			want.Add(want, new(big.Rat).SetFloat64(v))
			forward.add(v)
		}
		var a, b exactSum
		for i := len(x) - 1; i >= 0; i-- {
			if i%3 == 0 {
				a.add(x[i])
			} else {
				b.add(x[i])
			}
		}
		a.merge(&b)
		for name, s := range map[string]*exactSum{"forward": &forward, "backward in two": &a} {
			if s.rat().Cmp(want) != 0 {
				t.Fatalf("%s: %v, want %v", name, s.rat(), want)
			}
			text, err := s.MarshalText()
			if err != nil {
				t.Fatal(err)
			}
			var r exactSum
			if err := r.UnmarshalText(text); err != nil || r.rat().Cmp(want) != 0 {
				t.Fatalf("%s: %s reads back as %v, %v", name, text, r.rat(), err)
			}
		}
	})
	for _, bad := range []string{"", "1", "p", "1p", "zp0", "1p0x", "1p99999", "1p-2000", "1p+1", "0x1p3"} {
		var s exactSum
		if err := s.UnmarshalText([]byte(bad)); err == nil {
			t.Errorf("%q is read as %v", bad, s.rat())
		}
	}
}
