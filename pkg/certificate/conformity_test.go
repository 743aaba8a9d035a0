package certificate

import (
	"math"
	"strings"
	"testing"
)

// TestRules: the bench's rules are those of ILAC-G8:09/2019 4.2, on one result of
// the 50 Hz demonstration: 1.0258 with U = 0.0051 against an upper limit that
// passes it, catches it in the guard band, and fails it.
func TestRules(t *testing.T) {
	for _, c := range []struct {
		rule    string
		upper   float64
		verdict string
	}{
		{"simple", 1.0260, "pass"}, {"simple", 1.0250, "fail"},
		{"guard-band", 1.0312, "pass"}, {"guard-band", 1.0305, "fail"},
		{"non-binary", 1.0312, "pass"}, {"non-binary", 1.0305, "conditional pass"}, {"non-binary", 1.0230, "conditional fail"}, {"non-binary", 1.0200, "fail"},
	} {
		r := result(t, "field-meter-50hz")
		l := r.Bench.Limits
		l.Rule, l.Upper = c.rule, c.upper
		l.GuardFactor = 1
		if c.rule == "simple" {
			l.GuardFactor = 0
		}
		k := made(t, r).Results[1].Conformity
		if k.Verdict != c.verdict {
			t.Errorf("%s below %v: %s; want %s", c.rule, c.upper, k.Verdict, c.verdict)
		}
		// JCGM 106:2012 7.2: one limit is far off, the distribution all but normal
		// (230 degrees of freedom); the normal integral is computed here.
		u := 0.005 * float64(k.Statement.Result.Value) / 2
		want := 0.5 * math.Erfc((k.Statement.Result.Value-c.upper)/u/math.Sqrt2)
		if math.Abs(k.Statement.Conformity-want) > 2e-3 {
			t.Errorf("%s below %v: probability of conformity %v; normal %v", c.rule, c.upper, k.Statement.Conformity, want)
		}
	}
}

// TestLimitsOfOneMeasurand: limits speak of the measurand they name.
func TestLimitsOfOneMeasurand(t *testing.T) {
	r := result(t, "field-meter")
	r.Bench.Limits.Measurand = "correction_factor (as-left, 20 kV/m)"
	n := 0
	for _, x := range made(t, r).Results {
		if x.Conformity != nil {
			n++
			if x.Name != "as-left, 20 kV/m" {
				t.Errorf("conformity of %q", x.Name)
			}
		}
	}
	if n != 1 {
		t.Errorf("%d statements; want 1", n)
	}
}

// TestLimitsOfAnotherUnit are refused.
func TestLimitsOfAnotherUnit(t *testing.T) {
	r := result(t, "field-meter")
	r.Bench.Limits.Unit = r.Bench.Channels[0].Unit // kV
	if _, err := New(r, Settings{}); err == nil || !strings.Contains(err.Error(), "limits.unit") {
		t.Errorf("limits of a factor in kV: %v", err)
	}
}

// TestNoInterval: where guard bands meet, no interval is printed that runs backwards.
func TestNoInterval(t *testing.T) {
	r := result(t, "field-meter")
	l := r.Bench.Limits
	l.Rule, l.Lower, l.Upper = "non-binary", 0.999, 1.001
	for _, x := range made(t, r).Results {
		if got := x.Conformity.Accepted; got != "none without a condition" {
			t.Errorf("%s: accepted %q", x.Name, got)
		}
	}
}

// TestAlikeInPrint: a result that fails by less than the digits printed says why it
// is printed as the limit that it fails by.
func TestAlikeInPrint(t *testing.T) {
	for _, by := range []float64{1e-6, 1e-3} {
		r := result(t, "field-meter")
		l := r.Bench.Limits
		l.Rule, l.GuardFactor, l.Measurand = "simple", 0, "correction_factor (as-left, 20 kV/m)"
		l.Upper = float64(r.Record.Measurand(l.Measurand).Value) - by
		for _, x := range made(t, r).Results {
			if k := x.Conformity; k != nil {
				if k.Verdict != "fail" || strings.Contains(strings.Join(k.Warnings, ";"), "before rounding") != (by < 1e-5) {
					t.Errorf("above the limit by %v: %s, warnings %q", by, k.Verdict, k.Warnings)
				}
			}
		}
	}
}
