package report

import (
	"fmt"
	"strings"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// Points is the table of what a series states at each of its levels: the result
// of the fit there with its expanded uncertainty, and what the point gives by
// itself.
func Points(s *reduce.Series, response string) *Table {
	var level, indication float64
	for _, p := range s.Points {
		level = max(level, abs(p.Level))
		indication = max(indication, abs(p.Indication))
	}
	lu, iu := display(level, s.LevelUnit), display(indication, response)
	result := words(s.Result)
	t := &Table{Columns: []Column{{Name: s.Level, Unit: unitText(lu), Align: Decimal}, {Name: "readings", Align: Right},
		{Name: "indication", Unit: unitText(iu), Align: Decimal}, {Name: "by itself", Align: Decimal}, {Name: result, Unit: unitText(unitOf(s.Unit)), Align: Decimal},
		{Name: "U", Align: Decimal}, {Name: "k", Align: Decimal}}}
	u := unitOf(s.Unit)
	for _, p := range s.Points {
		x, du := si.Round(u.FromSI(float64(p.Value)), u.DeltaFromSI(float64(p.Expanded)))
		own, _ := si.Round(u.FromSI(float64(p.Observed)), u.DeltaFromSI(float64(p.Expanded)))
		t.Rows = append(t.Rows, []string{minus(digits(lu.FromSI(float64(p.Level)), 5)), whole(p.Rows), minus(digits(iu.FromSI(float64(p.Indication)), 5)),
			rounded(own), rounded(x), power(du), fixed(float64(p.K), 2)})
	}
	return t
}

func abs(n reduce.Number) float64 {
	if n < 0 {
		return -float64(n)
	}
	return float64(n)
}

// Effects is the table of the departures from a straight line that a series was
// tested for, relative to the response; nil when none could be tested.
func Effects(s *reduce.Series) *Table {
	if len(s.Effects) == 0 {
		return nil
	}
	t := &Table{Columns: []Column{{Name: "departure", Most: 20}, {Name: "what it is", Most: 46}, {Name: "size", Unit: "%", Align: Decimal},
		{Name: "u", Unit: "%", Align: Decimal}, {Name: "p", Align: Decimal}, {Name: "at 1 %"}}}
	for _, e := range s.Effects {
		verdict := "not seen"
		if !e.Passed {
			verdict = "FOUND"
		}
		v, du := si.Round(100*float64(e.Estimate), 100*float64(e.U))
		t.Rows = append(t.Rows, []string{e.Name, e.Doc, rounded(v), power(du), probability(e.PValue), verdict})
	}
	return t
}

// seriesFacts are what a series says of its scatter.
func seriesFacts(s *reduce.Series, response string) []fact {
	var facts []fact
	if finite(s.NonLinearity) && s.FullScale > 0 {
		facts = append(facts, fact{"non-linearity", fmt.Sprintf("%s\u00a0%% of %s, the largest departure of a point from the fit",
			digits(100*float64(s.NonLinearity), 2), one(s.FullScale, response, 4))})
	}
	if finite(s.Repeatability) {
		facts = append(facts, fact{"repeatability", fmt.Sprintf("%s\u00a0%% of the reading, %s", digits(100*float64(s.Repeatability), 2),
			plural(s.RepeatabilityDOF, "degree of freedom", "degrees of freedom"))})
	}
	if finite(s.Reproducibility) {
		facts = append(facts, fact{"reproducibility", fmt.Sprintf("%s\u00a0%% between %s", digits(100*float64(s.Reproducibility), 2),
			plural(s.Mountings, "mounting", "mountings"))})
	}
	return facts
}

// series tells every series point by point, with what sets it apart from a
// straight line, and its figure.
func (d *document) series(rec *reduce.Record, figures *figure.Data) {
	for i := range rec.Series {
		s := &rec.Series[i]
		if len(s.Points) == 0 {
			continue
		}
		d.head(strings.TrimSuffix("Points: "+s.Name, ": "))
		d.show(Points(s, rec.Fit.ResponseUnit))
		if f := seriesFacts(s, rec.Fit.ResponseUnit); f != nil {
			d.list(f)
		}
		if t := Effects(s); t != nil {
			d.show(t)
		}
	}
	if figures == nil || len(rec.Series) == 0 {
		return
	}
	all, err := figures.Curves()
	if err != nil {
		d.picture(nil, err)
		return
	}
	for _, f := range all {
		d.draw(f)
	}
}

// Series tells every series of a record: its points, scatter and departures from
// a straight line.
func Series(rec *reduce.Record) *Sheet {
	return part(func(d *document) {
		d.series(rec, nil)
		if len(d.blocks) == 0 {
			d.say("This bench states no result point by point.")
		}
	})
}
