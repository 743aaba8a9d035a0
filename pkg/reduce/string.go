package reduce

import (
	"strings"

	"example.org/guardring/pkg/si"
)

// String states the measurands, one a line, value with standard uncertainty, or
// why there are none.
func (r *Result) String() string {
	if len(r.Record.Measurands) == 0 {
		return r.Record.Title + ": no measurand; the fit is " + r.Record.Fit.Status
	}
	lines := make([]string, 0, len(r.Record.Measurands))
	for _, m := range r.Record.Measurands {
		u, err := si.ParseUnit(m.Unit)
		if err != nil {
			u = si.One // a unit of this package's own making; shown without prefix
		}
		u = u.Suited(float64(m.Value), float64(m.U))
		lines = append(lines, m.Name+" = "+si.Short(float64(m.Value), float64(m.U), u))
	}
	return strings.Join(lines, "\n")
}
