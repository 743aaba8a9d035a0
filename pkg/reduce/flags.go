package reduce

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"

	"example.org/guardring/pkg/field"
)

// mostNamed is the number of far readings that are named one by one.
const mostNamed = 5

// flagged names the readings whose residual would come by chance once in a hundred
// series as long as this (two-sided, Bonferroni). They are never left out.
func flagged(studentised []float64, excluded []bool, name func(i int) string) []error {
	n := 0
	for i := range studentised {
		if excluded == nil || !excluded[i] {
			n++
		}
	}
	limit := -distuv.UnitNormal.Quantile(0.005 / float64(max(n, 1)))
	var far []int
	for i, t := range studentised {
		if (excluded == nil || !excluded[i]) && math.Abs(t) > limit {
			far = append(far, i)
		}
	}
	if len(far) > mostNamed {
		return []error{fmt.Errorf("%d of %d readings lie further from the fit than %.1f standard uncertainties of their residuals; none has been left out", len(far), n, limit)}
	}
	var out []error
	for _, i := range far {
		out = append(out, fmt.Errorf("%s lies %.1f standard uncertainties of its residual from the fit; it has not been left out", name(i), math.Abs(studentised[i])))
	}
	return out
}

// notAir warns of a relative permittivity that no gap of air has: dry air is within
// 0.1 % of vacuum (common practice, no source).
func notAir(ms []Measurand) []error {
	for _, m := range ms {
		off := math.Abs(float64(m.Value) - 1)
		if m.Name == "relative_permittivity" && off > 0.1 && off > 10*float64(m.U) {
			return []error{fmt.Errorf("the relative permittivity of the gap is %.4g, where air is within 0.1 %% of 1: look for a slip of units or dimensions", float64(m.Value))}
		}
	}
	return nil
}

// checkAir refuses conditions that the formulas of moist air do not cover, when
// the bench states any.
func (c *chain) checkAir() error {
	at := [3]int{c.kind.Scalar("environment.temperature"), c.kind.Scalar("environment.pressure"), c.kind.Scalar("environment.humidity")}
	stated := false
	for _, i := range at {
		if i < 0 {
			return nil
		}
		stated = stated || c.b.Scalars[i].Given
	}
	if !stated {
		return nil
	}
	if _, err := field.WaterVapourPressure(c.q[at[0]], c.q[at[1]], c.q[at[2]]); err != nil {
		return c.locate(fmt.Errorf("environment: %w", err))
	}
	return nil
}

// small prints a probability.
func small(p float64) string {
	if p < 1e-16 {
		return "below 1e-16"
	}
	return fmt.Sprintf("%.1g", p)
}

// equals prints a probability after its name.
func equals(p float64) string {
	if p < 1e-16 {
		return "< 1e-16"
	}
	return "= " + small(p)
}
