package report

import (
	"fmt"
	"math"
	"strings"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// StrayField is the report of a stray field at a meter; drawn is its figure, or
// nil.
func StrayField(s *plan.StrayField, drawn *figure.Figure) *Sheet {
	rec := s.Record()
	title := rec.Title
	if figure.OneLine(title) == "" {
		title = "Stray field"
	}
	out := New(title, "stray field at "+s.Bench.Meter+" · "+plural(len(rec.Bodies), "charged body", "charged bodies"))
	most := math.Max(s.Law.K*s.Law.U, s.MagnitudeU)
	for _, p := range s.Parts {
		most = math.Max(most, math.Max(p.ComponentU, math.Max(p.FieldU[0], math.Max(p.FieldU[1], p.FieldU[2]))))
	}
	fieldUnit, volt, metre := si.MustUnit("V/m").Suited(s.Magnitude, most), si.MustUnit("V").Suited(s.Potential, s.PotentialU), si.MustUnit("m")
	out.Head("At the meter")
	out.Fact("place", at(rec.Place, metre))
	out.Fact("field "+alongWords(s.Bench), minus(si.Expanded(s.Component, s.Law.K*s.Law.U, fieldUnit, s.Law.K, s.Law.Probability)))
	out.Fact("field, components", components(rec.Field, rec.FieldU, fieldUnit)+"; magnitude "+brief(s.Magnitude, s.MagnitudeU, s.Magnitude, fieldUnit)+nbsp+unitText(fieldUnit))
	out.Fact("potential", brief(s.Potential, s.PotentialU, math.Abs(s.Potential), volt)+nbsp+unitText(volt))
	if b := rec.Bench; b != nil {
		out.Fact("part of the bench's field", perCent(b.Relative)+" of "+quantity(float64(b.Field), display(float64(b.Field), "V/m"), 3))
		out.Fact("in its budget, taken off", "relative u = "+perCent(b.U))
		out.Fact("in its budget, left in", "relative u = "+perCent(b.Left)+", rectangular over ±(|E| + U)")
	}
	if len(rec.Warnings) > 0 {
		out.Head("Warnings").Notice(rec.Warnings...)
	}
	out.Head("Bodies")
	coulomb := si.MustUnit("nC")
	t := &Table{Columns: []Column{{Name: "body", Most: 22}, {Name: "shape"}, {Name: "charge", Unit: "nC", Align: Decimal},
		{Name: "Ex", Unit: unitText(fieldUnit), Align: Decimal}, {Name: "Ey", Unit: unitText(fieldUnit), Align: Decimal}, {Name: "Ez", Unit: unitText(fieldUnit), Align: Decimal},
		{Name: "along", Unit: unitText(fieldUnit), Align: Decimal}}}
	for _, b := range rec.Bodies {
		row := []string{b.Name, b.Shape, brief(float64(b.Charge), float64(b.ChargeU), math.Abs(float64(b.Charge)), coulomb)}
		for k, e := range b.Field {
			row = append(row, brief(float64(e), float64(b.FieldU[k]), s.Magnitude, fieldUnit))
		}
		t.Rows = append(t.Rows, append(row, brief(float64(b.Component), float64(b.ComponentU), s.Magnitude, fieldUnit)))
	}
	out.Table(t)
	if len(rec.Measurand.Budget) > 0 {
		out.Say("Digits in parentheses are standard uncertainties in the last places before them.")
	}
	if len(rec.Measurand.Budget) > 0 {
		out.Head("Uncertainty budget of the field " + alongWords(s.Bench))
		out.Table(Budget(&rec.Measurand))
	}
	out.Head("Places without field")
	if len(rec.Zeros) == 0 {
		out.Say("None was found within the box searched.")
	} else {
		out.Say("A meter is zeroed best where the field vanishes and changes slowly, the gentlest first. A free positive charge would return to such a place along the directions marked stable and leave it along the others; no place is stable along all.")
		out.Table(zeroTable(rec))
	}
	if drawn != nil {
		out.Figure(drawn)
	}
	out.Say("Bodies at high potential hold charge: the usual cautions, and local codes and licensed practice, stand before any approach to such a place.")
	out.Fact("input", rec.Inputs[0].File+", SHA-256 "+rec.Inputs[0].SHA256)
	return out
}

// perCent writes a ratio in per cent with two digits.
func perCent(x reduce.Number) string { return minus(digits(100*float64(x), 2)) + nbsp + "%" }

// zeroTable lists places without field.
func zeroTable(rec *plan.StrayRecord) *Table {
	t := &Table{Columns: []Column{{Name: "place (x, y, z)", Unit: "m", Most: 34}, {Name: "potential", Unit: "V", Align: Decimal}, {Name: "slope", Unit: "V/m per mm", Align: Decimal},
		{Name: "u of field", Unit: "V/m", Align: Decimal}, {Name: "stability", Most: 40}}}
	scale := 0.0
	for _, z := range rec.Zeros {
		scale = math.Max(scale, math.Abs(float64(z.Potential)))
	}
	for _, z := range rec.Zeros {
		var p []string
		for _, v := range z.Place {
			p = append(p, minus(fmt.Sprintf("%.3f", float64(v)+0)))
		}
		u := "–"
		if z.FieldU > 0 {
			u = digits(float64(z.FieldU), 2)
		}
		t.Rows = append(t.Rows, []string{strings.Join(p, ", "), minus(small(float64(z.Potential), scale)), digits(float64(z.Slope)*1e-3, 2), u, stability(&z)})
	}
	return t
}

// stability says in words along which directions a place without field is stable.
func stability(z *plan.StrayZeroRecord) string {
	var stable, unstable []string
	for k := range z.Axes {
		switch g := float64(z.Gradient[k]); {
		case z.Curve && k == 1:
		case g < 0:
			stable = append(stable, directionWords(z.Axes[k]))
		default:
			unstable = append(unstable, directionWords(z.Axes[k]))
		}
	}
	s := "stable along " + strings.Join(stable, " and ") + "; unstable along " + strings.Join(unstable, " and ")
	if z.Curve {
		s = "one of a curve of such places; across it " + s
	}
	return s
}

// directionWords names a direction: an axis where it is one within 3°, else its
// components.
func directionWords(v plan.Triple) string {
	for k, name := range []string{"x", "y", "z"} {
		if math.Abs(float64(v[k])) > 0.9986 {
			return name
		}
	}
	var p []string
	for _, c := range v {
		s := fmt.Sprintf("%.2f", float64(c))
		if s == "-0.00" {
			s = "0.00"
		}
		p = append(p, minus(s))
	}
	return "(" + strings.Join(p, ", ") + ")"
}

func alongWords(b *plan.StrayBench) string {
	d := b.Direction
	if d == nil {
		return "in magnitude"
	}
	return "along " + directionWords(plan.Triple{reduce.Number(d[0]), reduce.Number(d[1]), reduce.Number(d[2])})
}

func at(p plan.Triple, metre si.Unit) string {
	var s []string
	for _, v := range p {
		s = append(s, minus(digits(metre.FromSI(float64(v)), 4)))
	}
	return "x, y, z = " + strings.Join(s, ", ") + nbsp + "m"
}

func components(p, pu plan.Triple, u si.Unit) string {
	scale := 0.0
	for _, v := range p {
		scale = math.Max(scale, math.Abs(float64(v)))
	}
	var s []string
	for k, v := range p {
		s = append(s, brief(float64(v), float64(pu[k]), scale, u))
	}
	return "(" + strings.Join(s, ", ") + ")" + nbsp + unitText(u)
}

// brief writes x, SI, in a unit with its standard uncertainty in parentheses (GUM
// 7.2.2, second form) and without the unit's name; with three digits of the
// largest of its kind where it has no uncertainty.
func brief(x, u, largest float64, unit si.Unit) string {
	if !(u > 0) {
		return minus(small(unit.FromSI(x), unit.FromSI(largest)))
	}
	return minus(si.Short(unit.FromSI(x), unit.DeltaFromSI(u), si.One))
}

// small writes a number with the places that three digits of the largest have.
func small(x, largest float64) string {
	places := 0
	if largest > 0 {
		places = max(0, 2-int(math.Floor(math.Log10(largest))))
	}
	s := fmt.Sprintf("%.*f", min(places, 12), x)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return s
}
