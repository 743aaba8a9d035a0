package figure

import (
	"math"
	"os"
	"testing"

	"example.org/guardring/pkg/si"
)

func TestLook(t *testing.T) {
	d := fixture(t)
	show := func(g *Figure, err error) {
		if err != nil {
			t.Fatal(err)
		}
		os.MkdirAll("/tmp/figlook", 0o755)
		w, _ := os.Create("/tmp/figlook/" + g.Name + ".svg")
		if err := g.WriteSVG(w); err != nil {
			t.Fatal(err)
		}
		w.Close()
		w, _ = os.Create("/tmp/figlook/" + g.Name + ".png")
		if err := g.WritePNG(w, 110); err != nil {
			t.Fatal(err)
		}
		w.Close()
		w, _ = os.Create("/tmp/figlook/" + g.Name + ".pdf")
		if err := g.WritePDF(w); err != nil {
			t.Fatal(err)
		}
		w.Close()
	}
	figs, err := d.All()
	if err != nil {
		t.Fatal(err)
	}
	for _, g := range figs {
		show(g, nil)
	}
	vm := si.MustUnit("kV/m")
	var p Plot
	p = Plot{Name: "factor", Title: "Correction factor of a field meter", From: "invented", X: Axis{Name: "E", Unit: vm, Log: true}, Y: Axis{Name: "correction factor"},
		Series: []Series{{Name: "positive", UX: []float64{20, 40, 100, 200, 400, 900}, UY: []float64{.004, .004, .003, .003, .003, .003}, X: []float64{1000, 2000, 5000, 1e4, 2e4, 5e4}, Y: []float64{1.021, 1.018, 1.016, 1.017, 1.015, 1.014}},
			{Name: "negative", X: []float64{1000, 2000, 5000, 1e4, 2e4, 5e4}, UY: []float64{.004, .004, .003, .003, .003, .003}, Y: []float64{1.012, 1.013, 1.013, 1.014, 1.013, 1.012}},
			{Name: "model", Line: true, X: []float64{1000, 5e4}, Y: []float64{1.015, 1.0145}}},
		Bands:  []Band{{Name: "expanded uncertainty of the model", X: []float64{1000, 1e4, 5e4}, Low: []float64{1.008, 1.010, 1.007}, High: []float64{1.022, 1.020, 1.022}}},
		Levels: []Level{{Name: "limit", At: 1.03}}}
	show(p.Draw())
	p = Plot{Name: "short-log", Title: "A logarithmic axis within a decade", X: Axis{Name: "gap", Unit: si.MustUnit("mm"), Log: true}, Y: Axis{Name: "force", Unit: si.MustUnit("mN"), Log: true},
		Series: []Series{{Name: "readings", Line: true, Points: true, X: []float64{.004, .006, .008, .012}, Y: []float64{0.2, 0.09, 0.05, 0.022}}}}
	show(p.Draw())
	var x, y, r []float64
	for i := 0; i < 100000; i++ {
		x = append(x, float64(i)*0.1)
		y = append(y, math.Sin(float64(i)/9000)+0.1*math.Sin(float64(i*i)))
		r = append(r, 0.1*math.Sin(float64(i*i)))
	}
	q := []Plot{{X: Axis{Name: "t", Unit: si.MustUnit("s")}, Y: Axis{Name: "U", Unit: si.MustUnit("V")}, Series: []Series{{Name: "readings", X: x, Y: y}}, Height: 120},
		{X: Axis{Name: "t", Unit: si.MustUnit("s")}, Y: Axis{Name: "residual", Unit: si.MustUnit("V")}, Series: []Series{{X: x, Y: r}}, Height: 80}}
	show(Stack("drift", "Drift", "", q))
	p = Plot{Name: "labs", Title: "Results of three laboratories", X: Axis{Name: "laboratory", Labels: []string{"A", "B", "C"}}, Y: Axis{Name: "ε", Unit: si.MustUnit("F/m")},
		Series: []Series{{X: []float64{1, 2, 3}, Y: []float64{8.861e-12, 8.859e-12, 8.866e-12}, UY: []float64{3e-15, 5e-15, 4e-15}, Hollow: []bool{false, false, true}}}, Levels: []Level{{Name: "reference", At: 8.86e-12}}}
	show(p.Draw())
	cov := [][]float64{{1e-30, 0.9e-21 * 1, 0}, {0.9e-21, 1e-12, 1e-7 * 0.2}, {0, 0.2e-7, 0.04}}
	show(Pairs("pairs", "Parameters two by two", "invented", []Axis{{Name: "ε", Unit: si.MustUnit("F/m")}, {Name: "d₀", Unit: si.MustUnit("m")}, {Name: "V", Unit: si.MustUnit("V")}}, nil, []float64{8.86e-12, 4e-6, 0.3}, cov, 0.9545))
	var lines []Series
	for k := -6; k <= 6; k++ {
		var lx, ly []float64
		for s := 0; s <= 50; s++ {
			f := float64(s) / 50
			lx = append(lx, float64(k)*0.01*(1+0.3*math.Sin(math.Pi*f)*math.Abs(float64(k))/6))
			ly = append(ly, f*0.02)
		}
		lines = append(lines, Series{X: lx, Y: ly, Line: true, Look: 1})
	}
	p = Plot{Name: "lines", Title: "Field lines between two plates", X: Axis{Name: "x", Unit: si.MustUnit("m")}, Y: Axis{Name: "y", Unit: si.MustUnit("m")}, Equal: true, Series: lines,
		Shapes: []Shape{{Name: "electrode", X: []float64{-.06, .06, .06, -.06}, Y: []float64{-.003, -.003, 0, 0}}, {X: []float64{-.06, .06, .06, -.06}, Y: []float64{.02, .02, .023, .023}}}}
	show(p.Draw())
}
