package certificate

import (
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
	"example.org/guardring/pkg/si"
)

// cautions are the usual ones of work at high voltage (common practice, no
// source), with what the bench stored and the laboratory's own limits.
func cautions(h *reduce.Hazard) []string {
	if !(h.Voltage > 0) {
		return nil
	}
	n := func(x reduce.Number, unit string, digits int) string {
		_, u := si.Prefixed(float64(x), si.MustUnit(unit))
		return report.Number(u.FromSI(float64(x)), digits) + "\u00a0" + u.Unicode()
	}
	text := "High voltage: up to " + n(h.Voltage, "V", 3) + " stood between the electrodes. Who repeats the measurement works with barrier or interlock, " +
		"current limit and bleed resistor, discharges with a rod and earths before touching, and is not alone; what has been charged can recharge by absorption. Stored energy " +
		n(h.Energy, "J", 2)
	if h.EnergyLimit > 0 {
		text += " (the laboratory's limit: " + n(h.EnergyLimit, "J", 2) + ")"
	}
	if h.Charge > 0 {
		text += ", charge " + n(h.Charge, "C", 2)
		if h.ChargeLimit > 0 {
			text += " (limit: " + n(h.ChargeLimit, "C", 2) + ")"
		}
	}
	text += ". Local codes and licensed practice prevail."
	out := []string{text}
	if h.EnergyLimit > 0 && h.Energy > h.EnergyLimit {
		out = append(out, "The stored energy exceeded the laboratory's limit.")
	}
	if h.ChargeLimit > 0 && h.Charge > h.ChargeLimit {
		out = append(out, "The charge exceeded the laboratory's limit.")
	}
	if h.Breakdown > 0 && h.Field >= 0.8*h.Breakdown {
		out = append(out, "The field was near the breakdown of air.")
	}
	return out
}
