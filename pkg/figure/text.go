package figure

import (
	"bytes"
	"fmt"
	"strings"
	"sync"

	xfont "golang.org/x/image/font"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/font/liberation"
)

// Liberation Sans has no ⁰ ⁹ ⁺ ⁻, and a browser that takes them from another
// font sets them at another height. Superscripts are therefore set as raised
// small figures where we set the type ourselves (PNG, PDF), and as one run of
// one font where the reader's program does (SVG).
var raised = map[rune]rune{
	'⁰': '0', '¹': '1', '²': '2', '³': '3', '⁴': '4', '⁵': '5', '⁶': '6',
	'⁷': '7', '⁸': '8', '⁹': '9', '⁺': '+', '⁻': '−', 'ⁿ': 'n',
}

const (
	raisedScale = 0.66 // size of a superscript, relative
	raisedShift = 0.34 // its height above the baseline, in the size of the text
)

// run is a piece of text on one height.
type run struct {
	s  string // as it is set: plain figures even when raised
	u  string // as it is written in Unicode
	up bool
}

// runs splits a text into plain and raised pieces.
func runs(s string) []run {
	var out []run
	for _, r := range s {
		set, up := raised[r]
		if !up {
			set = r
		}
		if n := len(out); n > 0 && out[n-1].up == up {
			out[n-1].s += string(set)
			out[n-1].u += string(r)
			continue
		}
		out = append(out, run{string(set), string(r), up})
	}
	return out
}

var fonts struct {
	once      sync.Once
	regular   font.Face
	bold      font.Face
	regularTT []byte
	boldTT    []byte
	err       error

	mu     sync.Mutex
	widths map[widthKey]float64
}

type widthKey struct {
	s    string
	bold bool
}

// loadFonts reads the two faces in use from gonum/plot's collection.
func loadFonts() error {
	fonts.once.Do(func() {
		fonts.widths = map[widthKey]float64{}
		cache := font.NewCache(liberation.Collection())
		for _, f := range []struct {
			weight xfont.Weight
			face   *font.Face
			tt     *[]byte
		}{{xfont.WeightNormal, &fonts.regular, &fonts.regularTT}, {xfont.WeightBold, &fonts.bold, &fonts.boldTT}} {
			want := font.Font{Typeface: "Liberation", Variant: "Sans", Weight: f.weight}
			if !cache.Has(want) {
				fonts.err = fmt.Errorf("figure: gonum/plot lacks the font %s", want.Name())
				return
			}
			*f.face = cache.Lookup(want, 1)
			var b bytes.Buffer
			if _, err := f.face.Face.WriteSourceTo(nil, &b); err != nil {
				fonts.err = fmt.Errorf("figure: reading the font %s: %w", want.Name(), err)
				return
			}
			*f.tt = b.Bytes()
		}
	})
	return fonts.err
}

// face returns the regular or bold face at a size in points.
func face(size float64, bold bool) font.Face {
	f := fonts.regular
	if bold {
		f = fonts.bold
	}
	f.Font.Size = font.Length(size)
	return f
}

// width returns the width of a text in points.
func width(s string, size float64, bold bool) float64 {
	if loadFonts() != nil {
		return 0.5 * size * float64(len([]rune(s)))
	}
	key := widthKey{s, bold}
	fonts.mu.Lock()
	defer fonts.mu.Unlock()
	w, ok := fonts.widths[key]
	if !ok {
		f := face(1000, bold)
		for _, r := range runs(s) {
			k := 1.0
			if r.up {
				k = raisedScale
			}
			w += k * f.Width(r.s).Points() / 1000
		}
		if len(fonts.widths) < 4096 {
			fonts.widths[key] = w
		}
	}
	return w * size
}

// fitted shortens a text to a width, with an ellipsis where it was cut.
func fitted(s string, size float64, bold bool, most float64) string {
	s = OneLine(s)
	if width(s, size, bold) <= most {
		return s
	}
	r := []rune(s)
	lo, hi := 0, min(len(r), 400)
	for lo < hi { // longest beginning that fits with its ellipsis
		mid := (lo + hi + 1) / 2
		if width(strings.TrimRight(string(r[:mid]), " ")+"…", size, bold) <= most {
			lo = mid
		} else {
			hi = mid - 1
		}
	}
	return strings.TrimRight(string(r[:lo]), " ") + "…"
}

// OneLine returns a text that somebody else wrote as one printable line: control
// characters, line ends and marks that turn the direction of writing become
// blanks, runs of blanks one, and bytes that are not UTF-8 the replacement
// character. It does not escape for any form.
func OneLine(s string) string {
	return strings.Join(strings.FieldsFunc(strings.ToValidUTF8(s, "\uFFFD"), func(r rune) bool {
		return r == ' ' || r < 0x20 || r >= 0x7f && r < 0xa0 || r >= 0xfdd0 && r <= 0xfdef || r&0xfffe == 0xfffe ||
			r >= 0x202a && r <= 0x202e || r >= 0x2066 && r <= 0x2069 || r == '\u2028' || r == '\u2029'
	}), " ")
}
