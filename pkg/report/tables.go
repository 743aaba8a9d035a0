package report

import (
	"fmt"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// The functions of this file give the parts of a report one by one.

// part makes a sheet of what add writes; a heading that stands alone is left to
// whoever shows the sheet.
func part(add func(d *document)) *Sheet {
	s := &Sheet{}
	add(&s.d)
	headings := 0
	for i := range s.d.blocks {
		if s.d.blocks[i].heading != "" {
			headings++
		}
	}
	if headings == 1 && s.d.blocks[0].heading != "" {
		s.d.blocks = s.d.blocks[1:]
	}
	return s
}

// Summary tells a reduction at a glance: result, warnings, parameters, goodness
// of the fit, the budget of the first measurand and the Monte Carlo check.
// With cautions it opens with those of the bench; without, it still says what
// exceeds a limit.
func Summary(rec *reduce.Record, withCautions bool) *Sheet {
	s := New(rec.Title, subtitle(rec))
	if figure.OneLine(rec.Title) == "" {
		s.d.title = "Reduction of a bench of kind " + rec.Model
	}
	if c := cautions(&rec.Hazard); c != nil {
		if withCautions {
			s.d.blocks = append(s.d.blocks, block{caution: c})
		} else {
			s.Notice(c.above...)
		}
	}
	s.d.results(rec)
	if len(rec.Warnings) > 0 {
		s.d.head("Warnings")
		s.d.notice(rec.Warnings)
	}
	s.d.parameters(rec)
	s.d.goodness(rec)
	if len(rec.Measurands) > 0 && len(rec.Measurands[0].Budget) > 0 {
		s.d.head("Uncertainty budget of the " + words(rec.Measurands[0].Name))
		s.d.show(Budget(&rec.Measurands[0]))
	}
	if t := MonteCarlo(rec.Measurands); t != nil {
		s.d.head("Monte Carlo check of the whole chain")
		s.d.show(t)
	} else {
		s.d.monteCarlo(rec)
	}
	return s
}

// MonteCarlo is the table of measurands by trials of the whole chain: value,
// standard uncertainty, coverage interval, how far its ends lie from those of the
// law, and how far they may (JCGM 101 clause 8); nil without trials.
func MonteCarlo(ms []reduce.Measurand) *Table {
	t := &Table{Columns: []Column{{Name: "measurand", Most: 44}, {Name: "trials", Align: Right}, {Name: "value", Align: Decimal}, {Name: "u", Align: Decimal},
		{Name: "from", Align: Decimal}, {Name: "to", Align: Decimal}, {Name: "unit", Close: true}, {Name: "ends off by", Align: Right}, {Name: "and", Align: Right}, {Name: "allowed", Align: Right}, {Name: "the law is"}}}
	for i := range ms {
		m := &ms[i]
		mc := m.MonteCarlo
		if mc == nil {
			continue
		}
		u := shown(m)
		end := func(x reduce.Number) string {
			v, _ := si.Round(u.FromSI(float64(x)), u.DeltaFromSI(float64(mc.U)))
			return rounded(v)
		}
		verdict := "confirmed"
		if !mc.Agrees {
			verdict = "NOT confirmed"
		}
		t.Rows = append(t.Rows, []string{words(m.Name), whole(mc.Trials - mc.Failed), end(mc.Value), uncertain(mc.U, u), end(mc.Interval[0]), end(mc.Interval[1]), unitText(u),
			digits(u.DeltaFromSI(float64(mc.DLow)), 2), digits(u.DeltaFromSI(float64(mc.DHigh)), 2), digits(u.DeltaFromSI(float64(mc.Delta)), 2), verdict})
	}
	if len(t.Rows) == 0 {
		return nil
	}
	return t
}

// Cautions adds the usual cautions of high-voltage work with what the bench
// stores; a bench without voltage adds nothing.
func (s *Sheet) Cautions(h *reduce.Hazard) *Sheet {
	if c := cautions(h); c != nil {
		s.d.blocks = append(s.d.blocks, block{caution: c})
	}
	return s
}

// ParameterSheet tells the estimates with their uncertainties, starts and priors.
func ParameterSheet(rec *reduce.Record) *Sheet {
	return part(func(d *document) { d.parameters(rec) })
}

// CorrelationSheet tells the correlation coefficients of the estimates; a fit of one
// parameter has none.
func CorrelationSheet(rec *reduce.Record) *Sheet {
	return part(func(d *document) {
		d.correlations(rec)
		if len(d.blocks) == 0 {
			d.say("One parameter was estimated; there is nothing for it to be correlated with.")
		}
	})
}

// CorrectionSheet tells every correction with its size and what remains of it.
func CorrectionSheet(rec *reduce.Record) *Sheet {
	return part(func(d *document) {
		d.corrections(rec)
		if len(d.blocks) == 0 {
			d.say("This kind of bench knows no corrections.")
		}
	})
}

// Diagnosis tells the goodness of the fit, the tests of the residuals and what
// the residuals point at.
func Diagnosis(rec *reduce.Record) *Sheet {
	return part(func(d *document) {
		d.goodness(rec)
		d.tests(rec)
		d.causes(rec)
	})
}

// Warnings tells every warning of a record, or that there is none.
func Warnings(rec *reduce.Record) *Sheet {
	s := New("", "")
	if len(rec.Warnings) == 0 {
		return s.Say("No warnings.")
	}
	return s.Notice(rec.Warnings...)
}

// Exclusions tells the readings that were left out, and why.
func Exclusions(rec *reduce.Record) *Sheet {
	return part(func(d *document) {
		d.exclusions(rec)
		if len(d.blocks) == 0 {
			d.say("No reading was left out.")
		}
	})
}

// Inputs tells the files that a result depends on, with their SHA-256, and how
// it was run.
func Inputs(rec *reduce.Record) *Sheet {
	return part(func(d *document) { d.provenance(rec) })
}

// Readings is a table of a result's readings as they entered the fit, with their
// places in the CSV files, residuals and leverage, units in the second header
// row; at most most of them, all when most is 0.
func Readings(r *reduce.Result, units map[string]si.Unit, most int) *Table {
	rows := &r.Rows
	n := rows.N
	if most > 0 && most < n {
		n = most
	}
	unit := func(name string) si.Unit {
		if u, ok := units[name]; ok {
			return u
		}
		return si.Unit{Symbol: "", Factor: 1}
	}
	t := &Table{Columns: []Column{{Name: "reading", Align: Right}, {Name: "line", Align: Right}}}
	files := r.Bench != nil && len(r.Bench.Rows.Files) > 1
	if files {
		t.Columns = append(t.Columns, Column{Name: "file", Most: 24})
	}
	for _, p := range rows.PredictorNames {
		t.Columns = append(t.Columns, Column{Name: words(p), Unit: unitText(unit(p)), Align: Decimal})
	}
	ru := unit(rows.ResponseName)
	t.Columns = append(t.Columns, Column{Name: words(rows.ResponseName), Unit: unitText(ru), Align: Decimal},
		Column{Name: "fitted", Unit: unitText(ru), Align: Decimal}, Column{Name: "u", Unit: unitText(ru), Align: Decimal},
		Column{Name: "residual", Unit: unitText(ru), Align: Decimal}, Column{Name: "standardised", Align: Decimal}, Column{Name: "leverage", Align: Decimal})
	notes := false
	for i := range n {
		notes = notes || rows.Excluded[i]
	}
	if notes {
		t.Columns = append(t.Columns, Column{Name: "left out", Most: 40})
	}
	for i := range n {
		rec := rows.Record[i]
		cells := []string{fmt.Sprint(rec + 1), ""}
		file := ""
		if r.Bench != nil {
			var line int
			file, line = r.Bench.Rows.Place(rec)
			cells[1] = fmt.Sprint(line)
		}
		if files {
			cells = append(cells, file)
		}
		for k, p := range rows.PredictorNames {
			cells = append(cells, Plain(unit(p).FromSI(rows.Predictors[k][i]), 7))
		}
		res := ru.DeltaFromSI(rows.Residual[i])
		u := ru.DeltaFromSI(rows.U[i])
		v, _ := si.Round(ru.FromSI(rows.Response[i]), u)
		f, _ := si.Round(ru.FromSI(rows.Fitted[i]), u)
		d, du := si.Round(res, u)
		cells = append(cells, minus(power(v)), minus(power(f)), power(du), minus(power(d)), fixed(rows.Standardised[i], 2), fixed(rows.Leverage[i], 3))
		if notes {
			why := ""
			if rows.Excluded[i] && r.Bench != nil {
				why = r.Bench.Rows.Reason(rec)
			}
			cells = append(cells, why)
		}
		t.Rows = append(t.Rows, cells)
	}
	if n < rows.N {
		t.Caption = fmt.Sprintf("The first %d of %s", n, plural(rows.N, "reading", "readings"))
	}
	return t
}

// Results adds measurands as they are stated, each with its value in short and
// with its expanded uncertainty.
func (s *Sheet) Results(ms []reduce.Measurand) *Sheet {
	var rs []result
	for i := range ms {
		rs = append(rs, stated(&ms[i]))
	}
	if len(rs) > 0 {
		s.d.blocks = append(s.d.blocks, block{results: rs})
	}
	return s
}
