package assess

import (
	"errors"
	"fmt"
	"math"
)

// Limits is the interval of permissible values of a specification (tolerance
// limits, JCGM 106:2012 3.3.4–3.3.6). Either end may be absent, not both.
type Limits struct {
	Lower  *float64 `json:"lower,omitempty"` // in Unit; nil: none
	Upper  *float64 `json:"upper,omitempty"` // in Unit; nil: none
	Unit   string   `json:"unit"`            // "1" when dimensionless
	Source string   `json:"source,omitempty"`
}

// Between returns limits on both sides.
func Between(lower, upper float64, unit string) Limits {
	return Limits{Lower: &lower, Upper: &upper, Unit: unit}
}

// AtMost returns an upper limit alone.
func AtMost(upper float64, unit string) Limits { return Limits{Upper: &upper, Unit: unit} }

// AtLeast returns a lower limit alone.
func AtLeast(lower float64, unit string) Limits { return Limits{Lower: &lower, Unit: unit} }

// Check refuses limits that can't serve a decision.
func (l Limits) Check() error {
	if l.Lower == nil && l.Upper == nil {
		return errors.New("limits: neither a lower nor an upper limit is given")
	}
	if l.Unit == "" {
		return errors.New("limits: no unit; a specification states one (\"1\" for a dimensionless quantity)")
	}
	for _, end := range []struct {
		name  string
		value *float64
	}{{"lower", l.Lower}, {"upper", l.Upper}} {
		if end.value != nil && (math.IsNaN(*end.value) || math.IsInf(*end.value, 0)) {
			return fmt.Errorf("limits: %s limit %v is not a finite number; leave it out when there is none", end.name, *end.value)
		}
	}
	if l.Lower != nil && l.Upper != nil {
		if *l.Lower > *l.Upper {
			return fmt.Errorf("limits: the wrong way round: lower %v %s is above upper %v %s", *l.Lower, l.Unit, *l.Upper, l.Unit)
		}
		if *l.Lower == *l.Upper {
			return fmt.Errorf("limits: lower and upper are both %v %s, which leaves no room", *l.Lower, l.Unit)
		}
	}
	return nil
}

// ends returns the limits in the given unit, ∓Inf where absent.
func (l Limits) ends(unit string) (lower, upper float64, err error) {
	lower, upper = math.Inf(-1), math.Inf(1)
	if err := l.Check(); err != nil {
		return 0, 0, err
	}
	convert := func(x float64) float64 { return x }
	if l.Unit != unit {
		from, to, err := convertible(l.Unit, unit)
		if err != nil {
			return 0, 0, fmt.Errorf("limits: %w", err)
		}
		convert = func(x float64) float64 { return to.FromSI(from.ToSI(x)) }
	}
	if l.Lower != nil {
		lower = convert(*l.Lower)
	}
	if l.Upper != nil {
		upper = convert(*l.Upper)
	}
	return lower, upper, nil
}
