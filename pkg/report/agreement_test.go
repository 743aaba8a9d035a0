package report

import (
	"bytes"
	"context"
	"math"
	"strings"
	"testing"
	"time"

	"example.org/guardring/pkg/assess"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
)

// laboratory is an invented record: one result with a divider of its own part.
func laboratory(name string, value, own, divider float64) *reduce.Record {
	u := math.Hypot(own, divider)
	return &reduce.Record{Format: 1, Title: name, Measurands: []reduce.Measurand{{Name: "correction_factor", Unit: "1", Value: reduce.Number(value), U: reduce.Number(u),
		DOF: reduce.Number(math.Inf(1)), K: 2, Probability: 0.9545, Budget: []reduce.BudgetLine{
			{Input: "channels.voltage.gain", U: reduce.Number(divider), Sensitivity: 1, Contribution: reduce.Number(divider), Source: "divider D, certificate 7"},
			{Input: "readings", U: reduce.Number(own), Sensitivity: 1, Contribution: reduce.Number(own)},
		}}}}
}

// TestAgreementSheet: E_n with the covariance of the divider, computed by hand:
// d/(2·√(0.001² + 0.001²)) = 0.003/0.002828 = 1.06, though d/(2·√(2·(0.001² +
// 0.002²))) = 0.47 without it.
func TestAgreementSheet(t *testing.T) {
	a, err := assess.Compare(context.Background(), []*reduce.Record{laboratory("One <A&B>", 1.0000, 0.001, 0.002), laboratory("Two", 1.0030, 0.001, 0.002)}, assess.AgreementSettings{})
	if err != nil {
		t.Fatal(err)
	}
	s := Agreement(a, "correction_factor")
	text := s.String()
	for _, want := range []string{"The results do NOT agree", "−1.06", "ABOVE 1", "divider D, certificate 7", "80 %, 80 %"} {
		if !strings.Contains(text, want) {
			t.Errorf("text lacks %q:\n%s", want, text)
		}
	}
	f, err := figure.Agreement(a, "correction_factor")
	if err != nil {
		t.Fatal(err)
	}
	var page bytes.Buffer
	if err := s.Figure(f).Page(&page); err != nil {
		t.Fatal(err)
	}
	if strings.Contains(page.String(), "<A&B>") || !strings.Contains(page.String(), "One &lt;A&amp;B&gt;") {
		t.Error("the page does not escape the name of a laboratory")
	}
}

// TestDriftSheet: a line through exact points; its slope is what they were made
// with, 0.002 a year.
func TestDriftSheet(t *testing.T) {
	h := assess.History{Unit: "1"}
	for i := range 4 {
		d := time.Date(2022, 1, 1, 0, 0, 0, 0, time.UTC).Add(time.Duration(float64(i) * assess.Year * 1e9))
		h.Calibrations = append(h.Calibrations, assess.Calibration{Name: "C" + string(rune('1'+i)), Date: d, Value: 1 + 0.002*float64(i), U: 0.0005})
	}
	l, err := assess.Drift(h, assess.DriftSettings{})
	if err != nil {
		t.Fatal(err)
	}
	p, err := l.Predict(time.Date(2026, 1, 1, 0, 0, 0, 0, time.UTC), 0)
	if err != nil {
		t.Fatal(err)
	}
	text := Drift(l, "correction factor", []*assess.Prediction{p}).String()
	for _, want := range []string{"It drifts", "0.00200 per year", "1.00800", "2026-01-01", "C4"} {
		if !strings.Contains(text, want) {
			t.Errorf("text lacks %q:\n%s", want, text)
		}
	}
	f, err := figure.Drift(l, "correction factor", []*assess.Prediction{p})
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(f.SVG(), "years since 2022-01-01") {
		t.Error("the figure does not say what its time is")
	}
}
