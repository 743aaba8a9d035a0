package field

import (
	"fmt"
	"math"
)

// A RangeError refuses an argument for which a formula does not hold. It says
// which quantity was wrong, what it was and what would be right.
type RangeError struct {
	Formula  string  // what was being computed, as "guarded disc charge area"
	Quantity string  // the argument or ratio that is wrong, as "spacing / guard gap"
	Value    float64 // its value, SI
	Unit     string  // the unit of Value, "1" for a ratio
	Want     string  // what would be right, as "at least 5"
}

// Error gives the refusal as one sentence.
func (e *RangeError) Error() string {
	unit := ""
	if e.Unit != "" && e.Unit != "1" {
		unit = " " + e.Unit
	}
	return fmt.Sprintf("%s: %s is %.6g%s; want %s", e.Formula, e.Quantity, e.Value, unit, e.Want)
}

// check is one condition on an argument. Bounds are put into words only when
// it fails.
type check struct {
	quantity string
	value    float64
	unit     string
	ok       bool
	want     string     // with verbs for the bounds, when bounded
	bound    [2]float64 // as many as want has verbs
	bounds   int
}

// refuse returns the first failed check as a RangeError.
func refuse(formula string, checks ...check) error {
	for i := range checks {
		if c := &checks[i]; !c.ok {
			want := c.want
			switch c.bounds {
			case 1:
				want = fmt.Sprintf(want, c.bound[0])
			case 2:
				want = fmt.Sprintf(want, c.bound[0], c.bound[1])
			}
			return &RangeError{Formula: formula, Quantity: c.quantity, Value: c.value, Unit: c.unit, Want: want}
		}
	}
	return nil
}

// that is a condition of its own wording.
func that(quantity string, v float64, unit string, ok bool, want string) check {
	return check{quantity: quantity, value: v, unit: unit, ok: ok, want: want}
}

func positive(quantity string, v float64, unit string) check {
	return that(quantity, v, unit, v > 0 && !math.IsInf(v, 0), "a finite value above 0")
}

func finite(quantity string, v float64, unit string) check {
	return that(quantity, v, unit, !math.IsNaN(v) && !math.IsInf(v, 0), "a finite value")
}

func notNegative(quantity string, v float64, unit string) check {
	return that(quantity, v, unit, v >= 0 && !math.IsInf(v, 0), "a finite value of 0 or more")
}

// ratioSlack keeps a ratio stated exactly at its limit from being refused for
// the rounding of its division.
const ratioSlack = 1e-9

func atLeast(quantity string, v, low float64) check {
	return check{quantity, v, "1", v >= low*(1-ratioSlack) && !math.IsInf(v, 0), "at least %g", [2]float64{low}, 1}
}

func atMost(quantity string, v, high float64) check {
	return check{quantity, v, "1", v <= high*(1+ratioSlack), "at most %g", [2]float64{high}, 1}
}

func within(quantity string, v float64, unit string, low, high float64) check {
	return check{quantity, v, unit, v >= low && v <= high, "%g to %g", [2]float64{low, high}, 2}
}
