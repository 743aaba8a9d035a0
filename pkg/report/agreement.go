package report

import (
	"fmt"
	"math"
	"strings"

	"example.org/guardring/pkg/assess"
	"example.org/guardring/pkg/si"
)

// assessed is the unit in which results of an assessment are shown.
func assessed(symbol string, values ...float64) si.Unit {
	most := 0.0
	for _, v := range values {
		most = math.Max(most, math.Abs(v))
	}
	u := unitOf(symbol)
	_, u = si.Prefixed(u.ToSI(most), u)
	return u
}

// rescaled writes a number and its uncertainty, both in unit from, in unit to.
func rescaled(x, u float64, from, to si.Unit) (v, du string) {
	v, du = si.Round(to.FromSI(from.ToSI(x)), to.DeltaFromSI(from.DeltaToSI(u)))
	return rounded(v), power(du)
}

// Agreement tells whether laboratories agree: the results against their mean and
// each other, what they have in common, and the second opinions where they were
// asked for.
func Agreement(a *assess.Agreement, measurand string) *Sheet {
	m := a.Mean
	from := unitOf(m.Results[0].Unit)
	var all []float64
	for _, r := range m.Results {
		all = append(all, r.Value)
	}
	to := assessed(m.Results[0].Unit, all...)
	verdict := "The results agree: they are consistent, and no |E_n| is above 1."
	if !a.Agrees {
		verdict = "The results do NOT agree."
	}
	s := New("Comparison of "+words(measurand), plural(len(m.Results), "result", "results"))
	s.Head("Result").Say(verdict)
	v, u := rescaled(m.Value, m.U, from, to)
	unit := ""
	if t := unitText(to); t != "" {
		unit = nbsp + t
	}
	_, expanded := rescaled(m.Value, 2*m.U, from, to)
	s.Fact("weighted mean", v+unit+", u = "+u+unit+", U = "+expanded+unit+" (k = 2)")
	chi := fmt.Sprintf("%s with %s, p %s", digits(m.ChiSquared, 3), plural(m.DOF, "degree of freedom", "degrees of freedom"), equals(m.PValue))
	if !m.Consistent {
		chi += fmt.Sprintf(" (NOT consistent at %s)", strings.ReplaceAll(si.Percent(m.Level), " ", nbsp))
	}
	s.Fact("chi-squared", chi).Fact("Birge ratio", digits(m.BirgeRatio, 3)+" (nothing has been rescaled by it)")
	var warnings []string
	for _, w := range a.Warnings {
		warnings = append(warnings, w.Error())
	}
	if warnings != nil {
		s.Head("Warnings").Notice(warnings...)
	}
	s.Head("Against the mean").Table(degrees(a, from, to))
	if t := pairs(a.Degrees, from, to); t != nil {
		s.Head("Each against each").Table(t)
	}
	s.Say("The U of a difference has k = 2; E_n is the difference over it.")
	s.Head("In common")
	if len(a.Shared.Inputs) == 0 {
		s.Say("No input of the budgets is common to two results: they are taken as independent.")
	} else {
		t := &Table{Columns: []Column{{Name: "input", Most: 26}, {Name: "source", Most: 36}, {Name: "results", Most: 20}, {Name: "share of the variance", Align: Right}}}
		for _, in := range a.Shared.Inputs {
			var who, share []string
			for k, i := range in.Records {
				who = append(who, fmt.Sprint(i+1))
				share = append(share, fmt.Sprintf("%.0f\u00a0%%", 100*in.Share[k]))
			}
			t.Rows = append(t.Rows, []string{words(in.Input), in.Source, strings.Join(who, ", "), strings.Join(share, ", ")})
		}
		s.Table(t).Say("What results have in common can't tell them apart: E_n and chi-squared hold its covariance.")
	}
	if a.Subset != nil {
		s.Head("Largest consistent subset")
		var left []string
		for _, i := range a.Subset.Excluded {
			left = append(left, m.Results[i].Name)
		}
		sv, su := rescaled(a.Subset.Mean.Value, a.Subset.Mean.U, from, to)
		s.Fact("without", strings.Join(left, "; ")).Fact("mean", sv+unit+", u = "+su+unit)
		s.Say("A proposal: leaving a result out of a reference value needs a reason beyond its distance.")
	}
	if r := a.Robust; r != nil {
		rv, ru := rescaled(r.Mean, r.U, from, to)
		s.Head("Robust mean").Fact("Algorithm A of ISO 13528", rv+unit+", u = "+ru+unit)
	}
	return s
}

func degrees(a *assess.Agreement, from, to si.Unit) *Table {
	unit := unitText(to)
	t := &Table{Columns: []Column{{Name: "", Align: Right}, {Name: "laboratory", Most: 34}, {Name: "value", Unit: unit, Align: Decimal}, {Name: "U", Unit: unit, Align: Decimal},
		{Name: "k", Align: Decimal}, {Name: "weight", Unit: "%", Align: Decimal}, {Name: "difference", Unit: unit, Align: Decimal}, {Name: "its U", Unit: unit, Align: Decimal},
		{Name: "E_n", Align: Decimal}, {Name: ""}}}
	for i, r := range a.Mean.Results {
		v, u := rescaled(r.Value, r.Expanded(), from, to)
		d := a.Degrees.Unilateral[i]
		dv, du := si.Round(to.DeltaFromSI(from.DeltaToSI(d.D)), to.DeltaFromSI(from.DeltaToSI(d.Expanded)))
		k := r.K
		if k == 0 {
			k = 2
		}
		t.Rows = append(t.Rows, []string{fmt.Sprint(i + 1), r.Name, v, u, fixed(k, 2), fixed(100*a.Mean.Weights[i], 0), rounded(dv), power(du), fixed(d.En, 2), outside(d.En)})
	}
	return t
}

func outside(en float64) string {
	if math.Abs(en) > 1 {
		return "ABOVE 1"
	}
	return ""
}

func pairs(d *assess.Degrees, from, to si.Unit) *Table {
	unit := unitText(to)
	t := &Table{Columns: []Column{{Name: "between", Most: 30}, {Name: "and", Most: 30}, {Name: "difference", Unit: unit, Align: Decimal},
		{Name: "its U", Unit: unit, Align: Decimal}, {Name: "E_n", Align: Decimal}, {Name: ""}}}
	for i := range d.Bilateral {
		for j := i + 1; j < len(d.Bilateral[i]); j++ {
			b := d.Bilateral[i][j]
			v, u := si.Round(to.DeltaFromSI(from.DeltaToSI(b.D)), to.DeltaFromSI(from.DeltaToSI(b.Expanded)))
			t.Rows = append(t.Rows, []string{b.A, b.B, rounded(v), power(u), fixed(b.En, 2), outside(b.En)})
		}
	}
	if len(t.Rows) == 0 {
		return nil
	}
	return t
}

// Drift tells how an instrument moves from calibration to calibration, with the
// predictions asked for.
func Drift(l *assess.Line, what string, predictions []*assess.Prediction) *Sheet {
	from := unitOf(l.Unit)
	var all []float64
	for _, p := range l.Points {
		all = append(all, p.Value)
	}
	to := assessed(l.Unit, all...)
	unit := ""
	if t := unitText(to); t != "" {
		unit = nbsp + t
	}
	s := New("History of "+what, plural(len(l.Points), "calibration", "calibrations"))
	slope, us := si.Round(to.DeltaFromSI(from.DeltaToSI(l.Slope*assess.Year)), to.DeltaFromSI(from.DeltaToSI(l.USlope*assess.Year)))
	verdict := "No drift is seen."
	if l.Significant {
		verdict = "It drifts."
	}
	s.Head("Result").Say(verdict)
	s.Fact("drift", fmt.Sprintf("%s%s per year, u = %s%s, p %s by the stated uncertainties, p %s by the scatter", rounded(slope), unit, power(us), unit,
		equals(l.PSlope), equals(l.PScatter)))
	v, u := rescaled(l.Level, l.ULevel, from, to)
	s.Fact("level", fmt.Sprintf("%s%s, u = %s%s, on %s", v, unit, u, unit, l.Reference.Format("2006-01-02")))
	s.Fact("chi-squared", fmt.Sprintf("%s with %s, p %s", digits(l.ChiSquared, 3), plural(l.DOF, "degree of freedom", "degrees of freedom"), equals(l.PValue)))
	if l.Latest != nil {
		s.Fact("latest", fmt.Sprintf("%s standard uncertainties from what the others predict: %s", fixed(l.Latest.Score, 1), l.Latest.Signal))
	}
	var warnings []string
	for _, w := range l.Warnings {
		warnings = append(warnings, w.Error())
	}
	for _, p := range predictions {
		for _, w := range p.Warnings {
			warnings = append(warnings, w.Error())
		}
	}
	if warnings != nil {
		s.Head("Warnings").Notice(warnings...)
	}
	t := &Table{Columns: []Column{{Name: "calibration", Most: 30}, {Name: "date"}, {Name: "as found", Unit: unitText(to), Align: Decimal}, {Name: "u", Unit: unitText(to), Align: Decimal},
		{Name: "line", Unit: unitText(to), Align: Decimal}, {Name: "residual / u", Align: Decimal}, {Name: "signal"}}}
	for _, p := range l.Points {
		v, u := rescaled(p.Value, p.U, from, to)
		c, _ := rescaled(p.Centre, p.U, from, to)
		t.Rows = append(t.Rows, []string{p.Name, p.Date.Format("2006-01-02"), v, u, c, fixed(float64(p.Standardised), 1), string(p.Signal)})
	}
	s.Head("Calibrations").Table(t)
	if len(predictions) > 0 {
		t := &Table{Columns: []Column{{Name: "date"}, {Name: "value", Unit: unitText(to), Align: Decimal}, {Name: "u", Unit: unitText(to), Align: Decimal},
			{Name: "the next calibration lies from", Unit: unitText(to), Align: Decimal}, {Name: "to", Unit: unitText(to), Align: Decimal}, {Name: "p"}}}
		for _, p := range predictions {
			v, u := rescaled(p.Value, p.U, from, to)
			lo, _ := rescaled(p.Next[0], p.U, from, to)
			hi, _ := rescaled(p.Next[1], p.U, from, to)
			t.Rows = append(t.Rows, []string{p.Date.Format("2006-01-02"), v, u, lo, hi, si.Percent(p.Probability)})
		}
		s.Head("Prediction").Table(t).Say("For the laboratory's own planning; a certificate carries no date of recalibration unless it is agreed with the client.")
	}
	return s
}
