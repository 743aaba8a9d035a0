package report

import (
	"bytes"
	"math"
	"strings"
	"testing"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
)

// points is an invented record with two series of a field meter.
func points() *reduce.Record {
	s := func(name string, factor float64) reduce.Series {
		out := reduce.Series{Name: name, Result: "correction_factor", Unit: "1", Level: "reference field", LevelUnit: "V/m", FullScale: 20000,
			NonLinearity: 0.0012, Repeatability: 0.0011, RepeatabilityDOF: 6, Reproducibility: reduce.Number(math.NaN()), Mountings: 1,
			Effects: []reduce.Effect{{Name: "polarity asymmetry", Doc: "half the difference <of> polarities", Estimate: 0.006, U: 0.00024, PValue: 1e-9},
				{Name: "curvature", Doc: "change from zero to full field", Estimate: -0.0002, U: 0.0008, PValue: 0.83, Passed: true}}}
		for _, e := range []float64{-18000, -4000, 4000, 18000} {
			out.Points = append(out.Points, reduce.Point{Level: reduce.Number(e), Rows: 3, Indication: reduce.Number(e / factor), Fitted: reduce.Number(e / factor),
				Observed: reduce.Number(factor + 0.0007), Value: reduce.Number(factor), U: 0.0019, K: 2.01, Expanded: 0.0038})
		}
		return out
	}
	return &reduce.Record{Format: 1, Title: "points", Model: "field-meter", Fit: reduce.Fit{Status: "converged", ResponseUnit: "V/m"},
		Series: []reduce.Series{s("as-found, 20 kV/m", 0.9771), s("as-left, 20 kV/m", 1.0008)}}
}

// TestSeriesInEveryForm: points, scatter and departures stand in the text, the
// page, Markdown and LaTeX; what is found is marked.
func TestSeriesInEveryForm(t *testing.T) {
	rec := points()
	forms := map[string]string{}
	var b bytes.Buffer
	if err := TextRecord(&b, rec); err != nil {
		t.Fatal(err)
	}
	forms["text"] = b.String()
	b.Reset()
	if err := MarkdownRecord(&b, rec); err != nil {
		t.Fatal(err)
	}
	forms["Markdown"] = b.String()
	b.Reset()
	if err := LaTeXRecord(&b, rec); err != nil {
		t.Fatal(err)
	}
	forms["LaTeX"] = b.String()
	b.Reset()
	if err := page(&b, rec, &figure.Data{Record: rec}); err != nil {
		t.Fatal(err)
	}
	forms["page"] = b.String()
	for name, text := range forms {
		for _, want := range []string{"0.9771", "0.0038", "0.9778", "2.01", "FOUND", "not seen", "20.00", "repeatability", "18.000"} {
			if !strings.Contains(text, want) {
				t.Errorf("%s lacks %q", name, want)
			}
		}
		if strings.Contains(text, "reproducibility") {
			t.Errorf("%s states a reproducibility that is not known", name)
		}
	}
	if strings.Contains(forms["page"], "difference <of>") {
		t.Error("the page does not escape")
	}
	if !strings.Contains(forms["page"], "<svg") {
		t.Error("the page has no figure of the points")
	}
}

// TestCurves: as found and as left share a figure; it has a band for each side of
// zero and none across it.
func TestCurves(t *testing.T) {
	all, err := (&figure.Data{Record: points()}).Curves()
	if err != nil {
		t.Fatal(err)
	}
	if len(all) != 1 || all[0].Name != "curve-20-kV-m" {
		t.Fatalf("%d figures; want one, curve-20-kV-m", len(all))
	}
	svg := all[0].SVG()
	for _, want := range []string{"as-found", "as-left", "reference field", "correction factor"} {
		if !strings.Contains(svg, want) {
			t.Errorf("the figure lacks %q", want)
		}
	}
}
