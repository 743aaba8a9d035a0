package assess

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// Result is one measured value as it enters an assessment. Value and U are in
// Unit ("1" when dimensionless).
type Result struct {
	Name  string  `json:"name"`  // laboratory, item or quantity; for messages
	Value float64 `json:"value"` // measured value, corrected for all known effects
	U     float64 `json:"u"`     // standard uncertainty, ≥ 0
	DOF   float64 `json:"dof"`   // degrees of freedom of U; 0, NaN or +Inf: infinite
	K     float64 `json:"k"`     // coverage factor of the stated expanded uncertainty; 0: 2
	Unit  string  `json:"unit"`
}

// Expanded returns the expanded uncertainty K·U, in Unit.
func (r Result) Expanded() float64 { return r.factor() * r.U }

func (r Result) factor() float64 {
	if r.K == 0 {
		return 2
	}
	return r.K
}

func (r Result) dof() float64 {
	if r.DOF == 0 || math.IsNaN(r.DOF) {
		return math.Inf(1)
	}
	return r.DOF
}

// MarshalJSON implements json.Marshaler: infinite degrees of freedom are null, as
// in a record, and the coverage factor is the one in force.
func (r Result) MarshalJSON() ([]byte, error) {
	type plain Result
	r.K = r.factor()
	return json.Marshal(struct {
		plain
		DOF reduce.Number `json:"dof"`
	}{plain(r), reduce.Number(r.dof())})
}

// label names the result in a message.
func (r Result) label() string {
	if r.Name == "" {
		return "the result"
	}
	return r.Name
}

// check refuses what no assessment can use. positive asks for U > 0.
func (r Result) check(positive bool) error {
	switch {
	case math.IsNaN(r.Value) || math.IsInf(r.Value, 0):
		return fmt.Errorf("%s: value %v is not a finite number", r.label(), r.Value)
	case math.IsNaN(r.U) || math.IsInf(r.U, 0):
		return fmt.Errorf("%s: standard uncertainty %v is not a finite number; a result without one can't be assessed", r.label(), r.U)
	case r.U < 0 || positive && r.U == 0:
		return fmt.Errorf("%s: standard uncertainty %v must be above zero", r.label(), r.U)
	case r.K < 0 || math.IsNaN(r.K) || math.IsInf(r.K, 0):
		return fmt.Errorf("%s: coverage factor %v must be above zero", r.label(), r.K)
	case r.DOF < 0:
		return fmt.Errorf("%s: degrees of freedom %v must be above zero", r.label(), r.DOF)
	case r.Unit == "":
		return fmt.Errorf("%s: no unit; write \"1\" for a dimensionless quantity", r.label())
	}
	return nil
}

// to returns r in another unit of the same dimension.
func (r Result) to(unit string) (Result, error) {
	if r.Unit == unit {
		return r, nil
	}
	from, to, err := convertible(r.Unit, unit)
	if err != nil {
		return Result{}, fmt.Errorf("%s: %w", r.label(), err)
	}
	r.Value = to.FromSI(from.ToSI(r.Value))
	r.U = to.DeltaFromSI(from.DeltaToSI(r.U))
	r.Unit = unit
	return r, nil
}

// convertible parses two units and refuses a pair of different dimension.
func convertible(a, b string) (from, to si.Unit, err error) {
	if from, err = si.ParseUnit(a); err != nil {
		return from, to, err
	}
	if to, err = si.ParseUnit(b); err != nil {
		return from, to, err
	}
	if from.Dim != to.Dim {
		return from, to, fmt.Errorf("unit %q is of dimension %v, %q of %v; they can't be compared", a, from.Dim, b, to.Dim)
	}
	return from, to, nil
}

// alike checks results and returns copies in the unit of the first.
func alike(results []Result, least int, what string) ([]Result, error) {
	if len(results) < least {
		return nil, fmt.Errorf("%s needs at least %d results; got %d", what, least, len(results))
	}
	out := make([]Result, len(results))
	for i, r := range results {
		if r.Name == "" {
			r.Name = fmt.Sprintf("result %d", i+1)
		}
		if err := r.check(true); err != nil {
			return nil, err
		}
		var err error
		if out[i], err = r.to(results[0].Unit); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// FromRecord returns the named measurand of a record as a Result called by the
// record's title; an empty name takes the first measurand.
func FromRecord(rec *reduce.Record, measurand string) (Result, error) {
	m, err := find(rec, measurand)
	if err != nil {
		return Result{}, err
	}
	r := Result{Name: rec.Title, Value: float64(m.Value), U: float64(m.U), DOF: float64(m.DOF), K: float64(m.K), Unit: m.Unit}
	if r.Name == "" {
		r.Name = m.Name
	}
	if math.IsNaN(r.K) {
		r.K = 0
	}
	return r, r.check(false)
}

func find(rec *reduce.Record, measurand string) (*reduce.Measurand, error) {
	if rec == nil {
		return nil, errors.New("no record")
	}
	if len(rec.Measurands) == 0 {
		return nil, fmt.Errorf("record %q holds no measurand", rec.Title)
	}
	if measurand == "" {
		return &rec.Measurands[0], nil
	}
	var known []string
	for i := range rec.Measurands {
		if rec.Measurands[i].Name == measurand {
			return &rec.Measurands[i], nil
		}
		known = append(known, rec.Measurands[i].Name)
	}
	return nil, fmt.Errorf("record %q holds no measurand %q; it has %q", rec.Title, measurand, known)
}
