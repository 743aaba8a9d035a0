package reduce_test

import (
	"math"
	"strings"
	"testing"

	"example.org/guardring/pkg/reduce"
)

// TestRecordCheck: numbers that can't be what they stand for are refused by their
// key; those that could not be stated are no fault.
func TestRecordCheck(t *testing.T) {
	null := reduce.Number(math.NaN())
	for _, c := range []struct {
		spoil func(*reduce.Measurand)
		want  string
	}{
		{func(*reduce.Measurand) {}, ""},
		{func(m *reduce.Measurand) {
			m.U, m.DOF, m.K, m.Interval = null, null, null, [2]reduce.Number{null, null}
		}, ""},
		{func(m *reduce.Measurand) { m.U = -1 }, "measurands[1].u: -1 where"},
		{func(m *reduce.Measurand) { m.DOF = 0 }, "measurands[1].dof: 0 where"},
		{func(m *reduce.Measurand) { m.K = 0 }, "measurands[1].k: 0 where"},
		{func(m *reduce.Measurand) { m.Probability = 5 }, "measurands[1].probability: 5 where"},
		{func(m *reduce.Measurand) { m.Interval = [2]reduce.Number{3, 1} }, "measurands[1].interval: 3 where"},
	} {
		sound := reduce.Measurand{Name: "field", Value: 2, U: 0.5, DOF: 9, K: 2, Probability: 0.95, Interval: [2]reduce.Number{1, 3}}
		spoilt := sound
		c.spoil(&spoilt)
		err := (&reduce.Record{Measurands: []reduce.Measurand{sound, spoilt}}).Check()
		if c.want == "" && err != nil || c.want != "" && (err == nil || !strings.HasPrefix(err.Error(), c.want)) {
			t.Errorf("error %v, want %q", err, c.want)
		}
	}
}
