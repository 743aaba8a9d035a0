package figure

import (
	"bytes"
	"cmp"
	"image"
	"image/color"
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
	at := make([]uint32, 0, b.Dx()*b.Dy())
	count := map[uint32]int{}
	for y := b.Min.Y; y < b.Max.Y; y++ {
		for x := b.Min.X; x < b.Max.X; x++ {
			r, g, bl, _ := src.At(x, y).RGBA()
			c := r>>8<<16 | g>>8<<8 | bl>>8
			at = append(at, c)
			count[c]++
		}
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
	for i, c := range at {
		out.Pix[i] = index[c]
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
