// Drawlogo draws the kernel's logo: a guard ring around a disc, seen from above at a slant, over the lower plate, with
// the field between them. It writes an SVG and PNGs of 32 and 64 pixels into pkg/kernel/logo; the same code gives the
// same bytes.
package main

import (
	"bytes"
	"flag"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
)

// The drawing's coordinates run from 0 to 64.
var (
	ink   = color.NRGBA{0x1b, 0x2a, 0x41, 0xff}
	brass = color.NRGBA{0xe6, 0x9f, 0x00, 0xff}
	sea   = color.NRGBA{0x00, 0x72, 0xb2, 0xff}
	paper = color.NRGBA{0xf7, 0xf4, 0xec, 0xff}
)

// shape is a filled region of one colour; in and its SVG say the same.
type shape struct {
	fill color.NRGBA
	svg  string
	in   func(x, y float64) bool
}

func ellipse(cx, cy, rx, ry float64) func(x, y float64) bool {
	return func(x, y float64) bool {
		u, v := (x-cx)/rx, (y-cy)/ry
		return u*u+v*v <= 1
	}
}

func solid(cx, cy, rx, ry float64, fill color.NRGBA) shape {
	return shape{fill, fmt.Sprintf(`<ellipse cx="%g" cy="%g" rx="%g" ry="%g" fill="%s"/>`, cx, cy, rx, ry, hex(fill)), ellipse(cx, cy, rx, ry)}
}

func band(cx, cy, rx, ry, holeX, holeY float64, fill color.NRGBA) shape {
	outer, inner := ellipse(cx, cy, rx, ry), ellipse(cx, cy, holeX, holeY)
	d := fmt.Sprintf("M%g %ga%g %g 0 1 0 %g 0a%g %g 0 1 0 %g 0z", cx-rx, cy, rx, ry, 2*rx, rx, ry, -2*rx) +
		fmt.Sprintf("M%g %ga%g %g 0 1 0 %g 0a%g %g 0 1 0 %g 0z", cx-holeX, cy, holeX, holeY, 2*holeX, holeX, holeY, -2*holeX)
	return shape{fill, fmt.Sprintf(`<path fill-rule="evenodd" fill="%s" d="%s"/>`, hex(fill), d),
		func(x, y float64) bool { return outer(x, y) && !inner(x, y) }}
}

func bar(x0, y0, w, h float64, fill color.NRGBA) shape {
	return shape{fill, fmt.Sprintf(`<rect x="%g" y="%g" width="%g" height="%g" fill="%s"/>`, x0, y0, w, h, hex(fill)),
		func(x, y float64) bool { return x >= x0 && x < x0+w && y >= y0 && y < y0+h }}
}

func round(x0, y0, w, h, r float64, fill color.NRGBA) shape {
	return shape{fill, fmt.Sprintf(`<rect x="%g" y="%g" width="%g" height="%g" rx="%g" fill="%s"/>`, x0, y0, w, h, r, hex(fill)),
		func(x, y float64) bool {
			dx := math.Max(0, math.Max(x0+r-x, x-(x0+w-r)))
			dy := math.Max(0, math.Max(y0+r-y, y-(y0+h-r)))
			return dx*dx+dy*dy <= r*r
		}}
}

func hex(c color.NRGBA) string { return fmt.Sprintf("#%02x%02x%02x", c.R, c.G, c.B) }

func drawing() []shape {
	s := []shape{
		round(0, 0, 64, 64, 12, paper),
		solid(32, 48, 27, 9, ink), // lower plate: rim, then face
		solid(32, 45, 27, 9, sea),
	}
	for _, x := range []float64{20, 26, 32, 38, 44} { // field lines from the disc to the plate
		s = append(s, bar(x-1, 24, 2, 18+(1-math.Abs(x-32)/16)*4, ink))
	}
	return append(s,
		band(32, 21, 27, 9.5, 18, 6.2, ink), // guard ring: rim, then face
		band(32, 18, 27, 9.5, 18, 6.2, brass),
		solid(32, 21, 15, 5.2, ink), // disc: rim, then face
		solid(32, 18, 15, 5.2, brass),
	)
}

func svg(shapes []shape) []byte {
	var b strings.Builder
	b.WriteString(`<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 64 64" width="64" height="64" role="img" aria-label="A guard ring and a disc over a plate">` + "\n")
	for _, s := range shapes {
		b.WriteString("  " + s.svg + "\n")
	}
	b.WriteString("</svg>\n")
	return []byte(b.String())
}

// raster paints the shapes at size×size pixels, each the mean of 8×8 samples.
func raster(shapes []shape, size int) ([]byte, error) {
	const fine = 8
	img := image.NewNRGBA(image.Rect(0, 0, size, size))
	step := 64 / float64(size*fine)
	for py := range size {
		for px := range size {
			var r, g, b, a int
			for sy := range fine {
				for sx := range fine {
					x, y := (float64(px*fine+sx)+0.5)*step, (float64(py*fine+sy)+0.5)*step
					for i := len(shapes) - 1; i >= 0; i-- {
						if shapes[i].in(x, y) {
							c := shapes[i].fill
							r, g, b, a = r+int(c.R), g+int(c.G), b+int(c.B), a+1
							break
						}
					}
				}
			}
			if a > 0 {
				img.SetNRGBA(px, py, color.NRGBA{uint8(r / a), uint8(g / a), uint8(b / a), uint8(255 * a / (fine * fine))})
			}
		}
	}
	var out bytes.Buffer
	err := (&png.Encoder{CompressionLevel: png.BestCompression}).Encode(&out, img)
	return out.Bytes(), err
}

func main() {
	check := flag.Bool("check", false, "compare instead of writing")
	flag.Parse()
	if err := run(*check); err != nil {
		fmt.Fprintln(os.Stderr, "drawlogo:", err)
		os.Exit(1)
	}
}

func run(check bool) error {
	out, err := exec.Command("go", "list", "-m", "-f", "{{.Dir}}").Output()
	if err != nil {
		return fmt.Errorf("go list -m: %w", err)
	}
	dir := filepath.Join(strings.TrimSpace(string(out)), "pkg", "kernel", "logo")
	shapes := drawing()
	files := map[string][]byte{"logo-svg.svg": svg(shapes)}
	for _, size := range []int{32, 64} {
		data, err := raster(shapes, size)
		if err != nil {
			return err
		}
		files[fmt.Sprintf("logo-%dx%d.png", size, size)] = data
	}
	for name, data := range files {
		path := filepath.Join(dir, name)
		if check {
			have, err := os.ReadFile(path)
			if err != nil {
				return err
			}
			if !bytes.Equal(have, data) {
				return fmt.Errorf("%s is not current, run go generate ./pkg/kernel", path)
			}
			continue
		}
		if err := os.WriteFile(path, data, 0o644); err != nil {
			return err
		}
	}
	return nil
}
