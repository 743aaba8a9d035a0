package figure

import (
	"encoding/base64"
	"fmt"
	"html"
	"io"
)

// Figure is a finished drawing. It holds no data and can be written in any of
// its forms any number of times, from several goroutines.
type Figure struct {
	Name    string // base of a file name: "residuals", "fit"
	Title   string // one line
	Caption string // a sentence or two for the reader: what is drawn and how
	Summary string // what the figure shows in words and numbers, for readers without it

	c *canvas
}

// screenDPI is the resolution of the PNG form in notebooks.
const screenDPI = 120

// Size returns the width and height in points (1/72 inch).
func (f *Figure) Size() (w, h float64) { return f.c.w, f.c.h }

// SVG returns the figure as an SVG 1.1 document, without an XML declaration, so
// that it can stand inline in HTML too. Text is text; the bytes depend on the
// data alone.
func (f *Figure) SVG() string { return f.c.svg(f.alt()) }

// WriteSVG writes the figure as a stand-alone SVG file.
func (f *Figure) WriteSVG(w io.Writer) error {
	if _, err := io.WriteString(w, `<?xml version="1.0" encoding="UTF-8"?>`+"\n"); err != nil {
		return err
	}
	return f.c.writeSVG(w, f.alt())
}

// WritePNG writes the figure as a PNG on white paper at dpi dots per inch (36 to
// 1200; 300 for print).
func (f *Figure) WritePNG(w io.Writer, dpi int) error { return f.c.writePNG(w, dpi) }

// WritePDF writes the figure as a PDF page of its own size, fonts embedded.
func (f *Figure) WritePDF(w io.Writer) error { return f.c.writePDF(w, OneLine(f.Title)) }

// String returns the title and the summary.
func (f *Figure) String() string {
	if f.Summary == "" {
		return f.Title
	}
	return f.Title + ". " + f.Summary
}

func (f *Figure) alt() string { return f.String() }

// inlineSVG is the most bytes of SVG that stand inline in the HTML form; a drawing
// of more strokes than that stands there as its PNG.
const inlineSVG = 64 << 10

// SimpleRender gives the forms that a notebook can show: text, SVG and PNG, and
// the drawing within HTML, because converters of notebooks clean an SVG of what
// they don't know, which may be all of it.
func (f *Figure) SimpleRender() map[string]any {
	svg := f.SVG()
	forms := map[string]any{
		"text/plain":    f.String(),
		"image/svg+xml": svg,
		"text/html":     `<div style="overflow-x:auto">` + svg + "</div>\n",
	}
	png, err := f.screenPNG()
	if err != nil {
		// The page still has the drawing; the reason stands beside it.
		forms["text/plain"] = fmt.Sprintf("%s (no PNG: %v)", f.String(), err)
		return forms
	}
	forms["image/png"] = png
	if len(svg) > inlineSVG {
		w, _ := f.Size()
		forms["text/html"] = fmt.Sprintf(`<div style="overflow-x:auto"><img alt="%s" style="width:%gpt" src="data:image/png;base64,%s"></div>`+"\n",
			html.EscapeString(OneLine(f.alt())), w, base64.StdEncoding.EncodeToString(png))
	}
	return forms
}
