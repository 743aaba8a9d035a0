package figure

import (
	"bytes"
	"cmp"
	"image"
	"image/color"
	"image/draw"
	"image/png"
	"slices"
)

// paletteSize is the number of colours kept: more cost bytes that nobody sees.
const paletteSize = 64

// paletted redraws an opaque picture with a palette of its most frequent colours;
// a rarer one, from the edges of strokes, takes the nearest of them. Line drawings
// lose nothing that the eye could see and take a fraction of the bytes. Equal
// counts are ordered by the colour, so that the same picture gives the same
// palette.
func paletted(src image.Image) *image.Paletted {
	b := src.Bounds()
	rgba, ok := src.(*image.RGBA)
	if !ok || rgba.Stride != 4*b.Dx() {
		rgba = image.NewRGBA(b)
		draw.Draw(rgba, b, src, b.Min, draw.Src)
	}
	at := make([]uint32, b.Dx()*b.Dy())
	count := map[uint32]int{}
	for i, last, n := 0, uint32(0), 0; ; i++ { // runs of one colour are counted at once
		end := i == len(at)
		c := last
		if !end {
			p := rgba.Pix[4*i : 4*i+3 : 4*i+3]
			c = uint32(p[0])<<16 | uint32(p[1])<<8 | uint32(p[2])
			at[i] = c
		}
		if end || c != last {
			if n > 0 {
				count[last] += n
			}
			last, n = c, 0
		}
		if end {
			break
		}
		n++
	}
	colours := make([]uint32, 0, len(count))
	for c := range count {
		colours = append(colours, c)
	}
	slices.SortFunc(colours, func(a, b uint32) int {
		return cmp.Or(cmp.Compare(count[b], count[a]), cmp.Compare(a, b))
	})
	kept := colours[:min(len(colours), paletteSize)]
	palette := make(color.Palette, len(kept))
	index := make(map[uint32]uint8, len(colours))
	for i, c := range kept {
		palette[i] = color.RGBA{uint8(c >> 16), uint8(c >> 8), uint8(c), 255}
		index[c] = uint8(i)
	}
	for _, c := range colours[len(kept):] {
		index[c] = nearest(kept, c)
	}
	out := image.NewPaletted(b, palette)
	last, k := uint32(1<<24), uint8(0) // no colour
	for i, c := range at {
		if c != last {
			last, k = c, index[c]
		}
		out.Pix[i] = k
	}
	return out
}

// nearest is the index of the colour of least squared distance, the first of
// equals.
func nearest(kept []uint32, c uint32) uint8 {
	best, least := 0, 1<<30
	for i, k := range kept {
		d := 0
		for shift := 0; shift <= 16; shift += 8 {
			e := int(k>>shift&255) - int(c>>shift&255)
			d += e * e
		}
		if d < least {
			best, least = i, d
		}
	}
	return uint8(best)
}

// screenPNG is the PNG form for notebooks.
func (f *Figure) screenPNG() ([]byte, error) {
	img, err := f.c.raster(screenDPI)
	if err != nil {
		return nil, err
	}
	var b bytes.Buffer
	enc := png.Encoder{CompressionLevel: png.BestCompression}
	if err := enc.Encode(&b, paletted(img)); err != nil {
		return nil, err
	}
	return b.Bytes(), nil
}
