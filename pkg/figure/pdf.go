package figure

import (
	"io"
	"math"
	"time"

	"codeberg.org/go-pdf/fpdf"
	"golang.org/x/image/font/sfnt"
)

// writePDF writes one page of the size of the figure, with its fonts embedded
// and its text selectable.
func (c *canvas) writePDF(w io.Writer, title string) error {
	if err := loadFonts(); err != nil {
		return err
	}
	orientation := "P"
	size := fpdf.SizeType{Wd: c.w, Ht: c.h}
	if c.w > c.h {
		// fpdf turns a landscape page by itself and wants the short side first.
		orientation = "L"
		size = fpdf.SizeType{Wd: c.h, Ht: c.w}
	}
	d := fpdf.NewCustom(&fpdf.InitType{OrientationStr: orientation, UnitStr: "pt", Size: size})
	d.SetCatalogSort(true) // the same bytes every time
	epoch := time.Unix(0, 0).UTC()
	d.SetCreationDate(epoch)
	d.SetModificationDate(epoch)
	d.SetProducer("guardring", true)
	d.SetTitle(title, true)
	d.SetMargins(0, 0, 0)
	d.SetAutoPageBreak(false, 0)
	d.AddUTF8FontFromBytes("sans", "", fonts.regularTT)
	d.AddUTF8FontFromBytes("sans", "B", fonts.boldTT)
	d.AddPage()
	d.SetLineJoinStyle("round")
	c.paint(d)
	if err := d.Error(); err != nil {
		return err
	}
	return d.Output(w)
}

// paint puts the strokes and texts on the page that d is at.
func (c *canvas) paint(d *fpdf.Fpdf) {
	for i := range c.ops {
		o := &c.ops[i]
		if o.text != nil {
			pdfText(d, o.text)
			continue
		}
		pdfPath(d, o)
	}
}

// AddFonts gives a PDF document in points the two faces that figures and PlacePDF
// use, as family "sans", regular and bold.
func AddFonts(d *fpdf.Fpdf) error {
	if err := loadFonts(); err != nil {
		return err
	}
	d.AddUTF8FontFromBytes("sans", "", fonts.regularTT)
	d.AddUTF8FontFromBytes("sans", "B", fonts.boldTT)
	return d.Error()
}

// PlacePDF draws the figure on the page of somebody else's PDF document, in
// points, with its upper left corner at x, y and as wide as width; the document
// must have the fonts of AddFonts.
func (f *Figure) PlacePDF(d *fpdf.Fpdf, x, y, width float64) error {
	scale := 100 * width / f.c.w
	d.TransformBegin()
	d.TransformTranslate(x, y)
	d.TransformScale(scale, scale, 0, 0)
	d.SetLineJoinStyle("round")
	f.c.paint(d)
	d.TransformEnd()
	return d.Error()
}

// PlaceText sets one line of text on the page of a PDF document in points, with
// the fonts of AddFonts: x is its left end, y its baseline, size in points.
// Superscripts are raised figures, which the fonts lack.
func PlaceText(d *fpdf.Fpdf, x, y, size float64, bold bool, color, text string) {
	pdfText(d, &label{s: text, x: x, y: y, size: size, bold: bold, color: color})
}

// TextWidth is the width in points of a text as PlaceText sets it.
func TextWidth(text string, size float64, bold bool) float64 { return width(text, size, bold) }

// Missing returns the first character of a text that the fonts can't show; ok is
// false when there is none.
func Missing(text string) (r rune, ok bool) {
	if loadFonts() != nil {
		return 0, false
	}
	var b sfnt.Buffer
	for _, r := range text {
		set, up := raised[r]
		if !up {
			set = r
		}
		if i, err := fonts.regular.Face.GlyphIndex(&b, set); err != nil || i == 0 {
			return r, true
		}
	}
	return 0, false
}

func pdfPath(d *fpdf.Fpdf, o *op) {
	style := ""
	if o.pen.fill != "" {
		r, g, b := rgb(o.pen.fill)
		d.SetFillColor(int(r), int(g), int(b))
		style = "F"
	}
	if o.pen.stroke != "" {
		r, g, b := rgb(o.pen.stroke)
		d.SetDrawColor(int(r), int(g), int(b))
		d.SetLineWidth(o.pen.width)
		dash := dashes(o.pen.dash)
		if dash == nil {
			dash = []float64{}
		}
		d.SetDashPattern(dash, 0)
		style += "D"
	}
	if style == "" {
		return
	}
	if o.pen.alpha != 0 {
		d.SetAlpha(o.pen.alpha, "Normal")
		defer d.SetAlpha(1, "Normal")
	}
	for _, s := range o.path {
		switch s.verb {
		case 'M':
			d.MoveTo(s.x, s.y)
		case 'L':
			d.LineTo(s.x, s.y)
		case 'O':
			// Four Bézier curves, within 0.03 % of a circle.
			const k = 4 * (math.Sqrt2 - 1) / 3
			x, y, r := s.x, s.y, s.r
			d.MoveTo(x+r, y)
			d.CurveBezierCubicTo(x+r, y+k*r, x+k*r, y+r, x, y+r)
			d.CurveBezierCubicTo(x-k*r, y+r, x-r, y+k*r, x-r, y)
			d.CurveBezierCubicTo(x-r, y-k*r, x-k*r, y-r, x, y-r)
			d.CurveBezierCubicTo(x+k*r, y-r, x+r, y-k*r, x+r, y)
			d.ClosePath()
		case 'Z':
			d.ClosePath()
		}
	}
	d.DrawPath(style)
}

func pdfText(d *fpdf.Fpdf, l *label) {
	r, g, b := rgb(l.color)
	d.SetTextColor(int(r), int(g), int(b))
	if l.turn != 0 {
		d.TransformBegin()
		d.TransformRotate(-l.turn, l.x, l.y)
		defer d.TransformEnd()
	}
	style := ""
	if l.bold {
		style = "B"
	}
	x := l.x - l.anchor*width(l.s, l.size, l.bold)
	for _, r := range runs(l.s) {
		size, up := l.size, 0.0
		if r.up {
			size, up = raisedScale*l.size, raisedShift*l.size
		}
		d.SetFont("sans", style, size)
		d.Text(x, l.y-up, r.s)
		x += width(r.s, size, l.bold)
	}
}
