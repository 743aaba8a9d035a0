package figure

import (
	"os"
	"testing"
)

func TestLook(t *testing.T) {
	d := fixture(t)
	for _, f := range []func() (*Figure, error){d.Fit, d.Residuals, d.Order, d.Quantiles, func() (*Figure, error) { return d.Shares("") }, func() (*Figure, error) { return d.Histogram("") }} {
		g, err := f()
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
		t.Log(g)
	}
}
