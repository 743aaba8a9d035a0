package reduce

import (
	"strings"
	"testing"
)

// Few trials do not speak against the law: JCGM 101:2008 7.9.4 recommends
// 100/(1−p) of them.
func TestTooFewTrials(t *testing.T) {
	for _, c := range []struct {
		trials, failed int
		p              float64
		few            bool
		word           string
	}{
		{200, 0, 0.95, true, "ask for 2000 or more for an interval of 95 %"},
		{2000, 0, 0.95, false, "use the Monte Carlo interval"},
		{2000, 1, 0.95, true, "can't tell"},
		{1_000_000, 0, 0.99999, true, "ask for 10000000 or more"},
		{10_000, 0, 0.99, false, "use the Monte Carlo interval"},
	} {
		m := MonteCarlo{Trials: c.trials, Failed: c.failed}
		if got := m.TooFew(c.p); got != c.few {
			t.Errorf("%d trials less %d, p = %v: too few %v", c.trials, c.failed, c.p, got)
		}
		if s := m.disagrees(c.p).Error(); !strings.Contains(s, c.word) {
			t.Errorf("%d trials less %d, p = %v: %s", c.trials, c.failed, c.p, s)
		}
	}
}
