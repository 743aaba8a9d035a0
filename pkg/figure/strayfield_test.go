package figure

import (
	"bytes"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/plan"
)

func strayFigure(t *testing.T, text string) *Figure {
	t.Helper()
	b, err := plan.ParseStray("stray.toml", []byte("format = 1\n"+text))
	if err != nil {
		t.Fatal(err)
	}
	s, err := plan.Stray(b)
	if err != nil {
		t.Fatal(err)
	}
	f, err := StrayField(s)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// TestStrayFigure draws the demonstration: the bodies with their charges, in a
// look without red and blue, the same bytes every time.
func TestStrayFigure(t *testing.T) {
	b, err := plan.OpenStray(filepath.Join("..", "..", "datasets", "strayfield", "strayfield.toml"))
	if err != nil {
		t.Fatal(err)
	}
	s, err := plan.Stray(b)
	if err != nil {
		t.Fatal(err)
	}
	var svg string
	for range 2 {
		f, err := StrayField(s)
		if err != nil {
			t.Fatal(err)
		}
		if svg != "" && f.SVG() != svg {
			t.Error("a second drawing has other bytes")
		}
		svg = f.SVG()
		var png, pdf bytes.Buffer
		if err := f.WritePNG(&png, 72); err != nil {
			t.Error(err)
		}
		if err := f.WritePDF(&pdf); err != nil {
			t.Error(err)
		}
	}
	for _, want := range []string{"+174 nC", "post", "−38 nC", "rod", "+11 nC", "plate edge", "+9 nC", "917 V/m", "no field", "kV"} {
		if !strings.Contains(svg, want) {
			t.Errorf("the figure does not show %q", want)
		}
	}
	for _, colour := range []string{blue, vermilion, sky, "red", "blue"} {
		if strings.Contains(svg, colour+`"`) {
			t.Errorf("the figure uses %s", colour)
		}
	}
}

// TestStrayFigureBare draws scenes with as little in them as may be.
func TestStrayFigureBare(t *testing.T) {
	one := strayFigure(t, `
[[point]]
charge = "-1 nC"
at = ["0 m", "0 m", "0 m"]
[meter]
at = ["0.1 m", "0.2 m", "0.3 m"]
`)
	if !strings.Contains(one.SVG(), "−1 nC") || !strings.Contains(one.SVG(), "1 body is") && !strings.Contains(one.SVG(), "One body is") {
		t.Error("a body out of the plane is not told")
	}
	none := strayFigure(t, `
[[point]]
charge = "0 nC"
at = ["0 m", "0 m", "0 m"]
[meter]
at = ["0.1 m", "0 m", "0 m"]
`)
	if w, h := none.Size(); w < 100 || h < 50 {
		t.Errorf("%g by %g points", w, h)
	}
}
