package report

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// Held says in a sentence what a design stores and holds at its highest voltage,
// beside the laboratory's limits; "" for a bench without voltage.
func Held(h *reduce.Hazard) string {
	if !(h.Voltage > 0) {
		return ""
	}
	n := func(x reduce.Number, symbol string) string {
		return quantity(float64(x), display(float64(x), symbol), 3)
	}
	limit := func(x reduce.Number, symbol string) string {
		if !(x > 0) {
			return ""
		}
		u := display(float64(x), symbol)
		return fmt.Sprintf(" (limit %.3g", u.FromSI(float64(x))) + nbsp + unitText(u) + ")"
	}
	s := "At " + n(h.Voltage, "V") + " it stores " + n(h.Energy, "J") + limit(h.EnergyLimit, "J")
	if h.Charge > 0 {
		s += " and holds " + n(h.Charge, "C") + limit(h.ChargeLimit, "C")
	}
	return s + "."
}

// Changes is the table of what single changes of a design would do, u in the given
// unit, with notes on those that are not possible, counted from 1. A bench without
// voltage has no column of energy, one without breakdown none of that.
func Changes(p *plan.Prediction, unit si.Unit) (t *Table, notes []string) {
	energy, margin := false, false
	for _, c := range p.Scenarios {
		energy = energy || c.Energy > 0
		margin = margin || c.Margin > 0
	}
	t = &Table{Columns: []Column{{Name: "change", Most: 44}, {Name: "u", Unit: unitText(unit), Align: Decimal}, {Name: "ratio", Align: Decimal}}}
	if energy {
		t.Columns = append(t.Columns, Column{Name: "energy", Unit: "mJ", Align: Decimal})
	}
	if margin {
		t.Columns = append(t.Columns, Column{Name: "breakdown / field", Align: Decimal})
	}
	t.Columns = append(t.Columns, Column{Name: "note"})
	milli, one := si.MustUnit("mJ"), si.MustUnit("1")
	for _, c := range p.Scenarios {
		note := ""
		if c.Refused != "" {
			n := slices.Index(notes, c.Refused) + 1
			if n == 0 {
				notes = append(notes, c.Refused)
				n = len(notes)
			}
			note = fmt.Sprintf("not possible (%d)", n)
		}
		row := []string{changeName(c.Name), In(float64(c.U), unit, 2), In(float64(c.Ratio), one, 3)}
		if energy {
			row = append(row, In(float64(c.Energy), milli, 2))
		}
		if margin {
			row = append(row, In(float64(c.Margin), one, 2))
		}
		t.Rows = append(t.Rows, append(row, note))
	}
	return t, notes
}

// changeName is the name of a change in words; its numbers keep their points.
func changeName(name string) string {
	first, rest, ok := strings.Cut(name, " ")
	if x, err := strconv.ParseFloat(first, 64); ok && err == nil && !math.IsNaN(x) {
		return first + " " + Words(rest)
	}
	return Words(name)
}
