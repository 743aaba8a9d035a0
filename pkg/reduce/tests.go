package reduce

import (
	"math"

	"example.org/guardring/pkg/lsq"
)

// tests runs the tests of the residuals, in the order of acquisition and free of
// the errors that readings share. A test that these residuals do not admit (too
// few of them) is left out.
func (c *chain) tests(r *lsq.Result) []Test {
	e := r.Whitened()
	for _, v := range e {
		if math.IsNaN(v) {
			return nil
		}
	}
	var out []Test
	add := func(name, doc string, t lsq.Test, err error) {
		if err == nil && !math.IsNaN(t.PValue) {
			out = append(out, Test{Name: name, Doc: doc, Statistic: Number(t.Statistic), PValue: Number(t.PValue), Passed: t.PValue >= causeLevel})
		}
	}
	t, err := lsq.RunsTest(e)
	add("runs", "runs of equal sign in the order of acquisition", t, err)
	t, err = lsq.AndersonDarling(e)
	add("normality", "normal distribution of the residuals (Anderson–Darling)", t, err)
	return out
}
