package gointerp

import (
	"bytes"
	"fmt"
	"html"
	"reflect"
	"strings"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
)

// drawn gives the values of well-known libraries forms that they don't bring themselves.
func drawn(value any) map[string]any {
	if v := reflect.ValueOf(value); v.Kind() == reflect.Pointer && v.IsNil() {
		return nil
	}
	switch x := value.(type) {
	case *plot.Plot:
		w, err := x.WriterTo(5*vg.Inch, 3.5*vg.Inch, "svg")
		if err != nil {
			panic(err)
		}
		var b bytes.Buffer
		if _, err := w.WriteTo(&b); err != nil {
			panic(err)
		}
		return map[string]any{"image/svg+xml": b.String(), "text/plain": "plot " + fmt.Sprintf("%q", x.Title.Text)}
	case mat.Matrix:
		return matrix(x)
	}
	return nil
}

const maxSide = 12 // rows and columns of a matrix that are shown in HTML

func matrix(m mat.Matrix) map[string]any {
	r, c := m.Dims()
	plain := fmt.Sprintf("%.6g", mat.Formatted(m, mat.Squeeze(), mat.Excerpt(maxSide/2)))
	if r > maxSide || c > maxSide {
		return map[string]any{"text/plain": plain}
	}
	var b strings.Builder
	b.WriteString("<table>")
	for i := range r {
		b.WriteString("<tr>")
		for j := range c {
			b.WriteString("<td style=\"text-align:right\">" + html.EscapeString(fmt.Sprintf("%.6g", m.At(i, j))) + "</td>")
		}
		b.WriteString("</tr>")
	}
	b.WriteString("</table>")
	if r <= maxSide && c <= maxSide {
		plain = fmt.Sprintf("%.6g", mat.Formatted(m, mat.Squeeze()))
	}
	return map[string]any{"text/plain": plain, "text/html": b.String()}
}
