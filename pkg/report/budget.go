package report

import (
	"fmt"
	"math"
	"sort"
	"strconv"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// sameShares is how far shares may differ for two measurands to have one budget.
const sameShares = 1e-3

func (d *document) budgets(rec *reduce.Record) {
	var first *reduce.Measurand
	for i := range rec.Measurands {
		m := &rec.Measurands[i]
		if len(m.Budget) == 0 {
			continue
		}
		if first != nil && alike(first, m) {
			d.say(fmt.Sprintf("The inputs have the same shares, to 0.1%s%%, in the variance of the %s, whose standard uncertainty is %s; the record holds its lines.",
				nbsp, words(m.Name), one(m.U, m.Unit, 2)))
			continue
		}
		if first == nil {
			first = m
		}
		d.head("Uncertainty budget of the " + words(m.Name))
		d.show(Budget(m))
	}
}

// alike tells whether two budgets have the same shares, inputs that hardly
// matter aside.
func alike(a, b *reduce.Measurand) bool {
	share := map[string]float64{}
	for _, l := range a.Budget {
		share[l.Input] = float64(l.Share)
	}
	for _, l := range b.Budget {
		if !(math.Abs(float64(l.Share)-share[l.Input]) <= sameShares) {
			return false
		}
		delete(share, l.Input)
	}
	for _, s := range share {
		if !(math.Abs(s) <= sameShares) {
			return false
		}
	}
	return true
}

// otherPart is the title of what belongs to no named part of the bench.
const otherPart = "other"

// Budget is the table of a measurand with the columns of EA-4/02 section 4, by parts of the
// bench, the weightiest first.
func Budget(m *reduce.Measurand) *Table {
	mu := shown(m)
	lines := make([]reduce.StatedLine, len(m.Budget))
	for i, b := range m.Budget {
		lines[i] = reduce.StatedLine{BudgetLine: b}
	}
	title := func(part string) string {
		if name := words(part); name != "" {
			return name
		}
		return otherPart
	}
	row := func(b *reduce.StatedLine) (name, v, du string, unit si.Unit) {
		v, du, unit = measured(b.Value, b.U, b.Unit)
		if b.Group == "readings" || b.Value == 0 && b.Sensitivity == 0 {
			v = "–"
		}
		return words(b.Input), v, du, unit
	}
	return budgetTable(lines, mu, display(float64(m.U), m.Unit), title, row, m.U, [3]string{valueOnly(m, mu), uncertain(m.U, mu), freedom(m.DOF)})
}

func valueOnly(m *reduce.Measurand, u si.Unit) string {
	v, _ := si.Round(u.FromSI(float64(m.Value)), u.DeltaFromSI(float64(m.U)))
	return rounded(v)
}

// budgetTable lays out the lines of a budget by parts of the bench, the weightiest
// first, and the combined uncertainty u under them. mu is the unit of the value, cu
// that of the contributions; title names a part, and row gives the cells of a line
// that its kind of budget writes in its own way. sum is the last line: value, u and
// degrees of freedom.
func budgetTable(budget []reduce.StatedLine, mu, cu si.Unit, title func(part string) string,
	row func(b *reduce.StatedLine) (name, v, du string, unit si.Unit), u reduce.Number, sum [3]string) *Table {
	t := &Table{Columns: []Column{
		{Name: "input", Most: 22},
		{Name: "share", Align: Bar},
		{Name: "", Unit: "%", Align: Decimal, Close: true},
		{Name: "estimate", Align: Right},
		{Name: "u", Align: Right},
		{Name: "unit", Close: true},
		{Name: "shape", Most: 11},
		{Name: "ν", Align: Right, Close: true},
		{Name: "c", Unit: mu.String() + " per unit", Align: Right},
		{Name: "c × u", Unit: unitText(cu), Align: Decimal},
	}}
	weight := map[string]float64{}
	var parts []string
	for _, b := range budget {
		if _, ok := weight[b.Group]; !ok {
			parts = append(parts, b.Group)
		}
		weight[b.Group] += math.Abs(float64(b.Share))
	}
	sort.SliceStable(parts, func(a, b int) bool { return weight[parts[a]] > weight[parts[b]] })
	for _, part := range parts {
		if name := title(part); name != "" {
			t.Sections = append(t.Sections, Section{Before: len(t.Rows), Name: name})
		} else if len(parts) > 1 {
			t.Sections = append(t.Sections, Section{Before: len(t.Rows), Name: otherPart})
		}
		var lines []reduce.StatedLine
		for _, b := range budget {
			if b.Group == part {
				lines = append(lines, b)
			}
		}
		sort.SliceStable(lines, func(a, b int) bool {
			return math.Abs(float64(lines[a].Share)) > math.Abs(float64(lines[b].Share))
		})
		for i := range lines {
			b := &lines[i]
			name, v, du, unit := row(b)
			sens := "–" // per display unit of the input
			if finite(b.Sensitivity) && b.Sensitivity != 0 {
				sens = minus(digits(mu.DeltaFromSI(float64(b.Sensitivity)*unit.DeltaToSI(1)), 2))
			}
			t.Rows = append(t.Rows, []string{name, strconv.FormatFloat(float64(b.Share), 'f', 6, 64), percent(b.Share),
				v, du, unitText(unit), b.Shape, freedom(b.DOF), sens, digits(cu.DeltaFromSI(float64(b.Contribution)), 2)})
		}
	}
	t.Rows = append(t.Rows, []string{"combined", "", "100.0", sum[0], sum[1], unitText(mu), "", sum[2], "", digits(cu.DeltaFromSI(float64(u)), 2)})
	t.Sum = 1
	return t
}
