package figure

import (
	"fmt"
	"image"
	"image/color"
	"image/png"
	"io"
	"math"
	"strconv"
	"strings"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/vgimg"
)

// Bounds of the resolution, dots per inch: below, text is lost; above, memory is.
const (
	lowestDPI  = 36
	highestDPI = 1200
)

// writePNG draws the canvas on white paper.
func (c *canvas) writePNG(w io.Writer, dpi int) error {
	img, err := c.raster(dpi)
	if err != nil {
		return err
	}
	return png.Encode(w, img)
}

// raster is the picture that writePNG writes.
func (c *canvas) raster(dpi int) (image.Image, error) {
	if dpi < lowestDPI || dpi > highestDPI {
		return nil, fmt.Errorf("figure: %d dots per inch; a PNG takes %d to %d", dpi, lowestDPI, highestDPI)
	}
	if err := loadFonts(); err != nil {
		return nil, err
	}
	v := vgimg.NewWith(vgimg.UseWH(vg.Length(c.w), vg.Length(c.h)), vgimg.UseDPI(dpi))
	at := func(x, y float64) vg.Point { return vg.Point{X: vg.Length(x), Y: vg.Length(c.h - y)} }
	for i := range c.ops {
		o := &c.ops[i]
		if o.text != nil {
			rasterText(v, o.text, at)
			continue
		}
		var p vg.Path
		for _, s := range o.path {
			switch s.verb {
			case 'M':
				p.Move(at(s.x, s.y))
			case 'L':
				p.Line(at(s.x, s.y))
			case 'O':
				q := at(s.x, s.y)
				p.Move(vg.Point{X: q.X + vg.Length(s.r), Y: q.Y})
				p.Arc(q, vg.Length(s.r), 0, 2*math.Pi)
				p.Close()
			case 'Z':
				p.Close()
			}
		}
		if o.pen.fill != "" {
			v.SetColor(rgba(o.pen.fill, o.pen.alpha))
			v.Fill(p)
		}
		if o.pen.stroke != "" {
			v.SetColor(rgba(o.pen.stroke, o.pen.alpha))
			v.SetLineWidth(vg.Length(o.pen.width))
			var dash []vg.Length
			for _, d := range dashes(o.pen.dash) {
				dash = append(dash, vg.Length(d))
			}
			v.SetLineDash(dash, 0)
			v.Stroke(p)
		}
	}
	return v.Image(), nil
}

func rasterText(v *vgimg.Canvas, l *label, at func(x, y float64) vg.Point) {
	v.Push()
	defer v.Pop()
	v.SetColor(rgba(l.color, 0))
	v.Translate(at(l.x, l.y))
	if l.turn != 0 {
		v.Rotate(-l.turn * math.Pi / 180)
	}
	x := -l.anchor * width(l.s, l.size, l.bold)
	for _, r := range runs(l.s) {
		size, up := l.size, 0.0
		if r.up {
			size, up = raisedScale*l.size, raisedShift*l.size
		}
		v.FillString(face(size, l.bold), vg.Point{X: vg.Length(x), Y: vg.Length(up)}, r.s)
		x += width(r.s, size, l.bold)
	}
}

// rgba parses "#rrggbb"; alpha 0 is opaque.
func rgba(s string, alpha float64) color.Color {
	r, g, b := rgb(s)
	if alpha == 0 {
		alpha = 1
	}
	return color.NRGBA{r, g, b, uint8(math.Round(255 * alpha))}
}

func rgb(s string) (r, g, b uint8) {
	n, err := strconv.ParseUint(strings.TrimPrefix(s, "#"), 16, 24)
	if err != nil {
		return 0, 0, 0 // black: colours are constants of this package
	}
	return uint8(n >> 16), uint8(n >> 8), uint8(n)
}

// dashes parses a comma separated list of lengths.
func dashes(s string) []float64 {
	if s == "" {
		return nil
	}
	var out []float64
	for f := range strings.SplitSeq(s, ",") {
		if x, err := strconv.ParseFloat(f, 64); err == nil {
			out = append(out, x)
		}
	}
	return out
}

// dashText is the inverse of dashes.
func dashText(d []float64) string {
	var b strings.Builder
	for i, x := range d {
		if i > 0 {
			b.WriteByte(',')
		}
		num(&b, x)
	}
	return b.String()
}
