package report

import (
	"strings"
	"testing"

	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// TestHeld: charges and energies stand in a unit that shows them, and a bench
// without voltage has nothing to say.
func TestHeld(t *testing.T) {
	if s := Held(&reduce.Hazard{EnergyLimit: 0.35, ChargeLimit: 50e-6}); s != "" {
		t.Errorf("without voltage: %q", s)
	}
	got := strings.ReplaceAll(Held(&reduce.Hazard{Voltage: 1000, Energy: 1.2e-4, Charge: 2.4e-8, EnergyLimit: 0.35, ChargeLimit: 50e-6}), nbsp, " ")
	if want := "At 1.00 kV it stores 120 µJ (limit 350 mJ) and holds 24.0 nC (limit 50 µC)."; got != want {
		t.Errorf("%q, want %q", got, want)
	}
}

// TestChangesWithoutVoltage: no column for what a bench can't have.
func TestChangesWithoutVoltage(t *testing.T) {
	p := &plan.Prediction{Scenarios: []plan.Scenario{{Name: "2 times the gap", U: 0.004, Ratio: 1.2}, {Name: "0.5 times the gap", Refused: "gap too small"}}}
	names := func(p *plan.Prediction) string {
		table, notes := Changes(p, si.MustUnit("1"))
		if len(notes) != 1 || notes[0] != "gap too small" {
			t.Errorf("notes %q", notes)
		}
		var all []string
		for _, c := range table.Columns {
			all = append(all, c.Name)
		}
		for _, r := range table.Rows {
			if len(r) != len(table.Columns) {
				t.Errorf("%d cells under %d headers", len(r), len(table.Columns))
			}
		}
		return strings.Join(all, ", ")
	}
	if got := names(p); got != "change, u, ratio, note" {
		t.Errorf("columns %s", got)
	}
	p.Scenarios[0].Energy, p.Scenarios[0].Margin = 1e-3, 3
	if got := names(p); got != "change, u, ratio, energy, breakdown / field, note" {
		t.Errorf("columns with voltage %s", got)
	}
}
