package reduce

import (
	"cmp"
	"math"
	"slices"

	"example.org/guardring/pkg/lsq"
)

// causeLevel is the significance below which a cause is listed.
const causeLevel = 0.01

// causes returns the causes whose signature the residuals carry: each is a
// score test of one more parameter a·g_i in the prediction,
//
//	Δχ² = (gᵀΣ⁻¹r)² / (gᵀΣ⁻¹g − gᵀΣ⁻¹J A⁻¹ JᵀΣ⁻¹g),
//
// with one degree of freedom (Rao's score test; derived for this fit).
func (c *chain) causes(r *lsq.Result, k *carried) []Cause {
	n, np := len(c.record), len(c.free)
	jac := r.Derivatives()
	free := map[string]bool{}
	for _, f := range c.free {
		free[c.b.Scalars[f].Name] = true
	}
	fitted := make([]float64, n)
	c.indication(k.q, fitted, nil)
	var out []Cause
	g, sg := make([]float64, n), make([]float64, n)
	x := make([]float64, len(c.x))
	for _, cause := range c.m.Causes {
		if free[cause.Name] {
			continue
		}
		known := true
		for i := range g {
			for p := range c.x {
				x[p] = c.x[p][i]
			}
			g[i] = cause.Signature(k.q, x, fitted[i], c.seconds(i))
			known = known && !math.IsNaN(g[i]) && !math.IsInf(g[i], 0)
		}
		if !known {
			continue
		}
		r.SolveCovariance(g, sg)
		num, den := dot(sg, r.Residuals), dot(sg, g)
		whole := den
		jg := make([]float64, np)
		for j := range jg {
			jg[j] = dot(sg, jac[j])
		}
		shift := make([]float64, np)
		for a := range np {
			for b := range np {
				shift[a] += r.Covariance.At(a, b) * jg[b]
			}
			den -= jg[a] * shift[a]
		}
		if !(den > 1e-9*whole) {
			continue // the parameters already take up this signature
		}
		improvement := num * num / den
		p := math.Erfc(math.Sqrt(improvement / 2))
		if p >= causeLevel {
			continue
		}
		_, byTheta, _ := c.sensitivities(c.m.Measurands[0].Value, k.q)
		out = append(out, Cause{Name: cause.Name, Doc: cause.Doc, Improvement: Number(improvement), PValue: Number(p),
			Shift: Number(-num / den * dot(byTheta, shift))})
	}
	slices.SortStableFunc(out, func(a, b Cause) int { return cmp.Compare(b.Improvement, a.Improvement) })
	return out
}

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
