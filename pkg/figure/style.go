package figure

// The palette of Okabe and Ito, "Color Universal Design" (2008), in the order
// in which series take them: dark before light, yellow left out because it
// vanishes on white paper.
const (
	black     = "#000000"
	blue      = "#0072b2"
	vermilion = "#d55e00"
	green     = "#009e73"
	purple    = "#cc79a7"
	orange    = "#e69f00"
	sky       = "#56b4e9"
)

// Greys of the furniture.
const (
	ink    = "#1a1a1a" // text and axes
	slate  = "#5a5a5a" // secondary text
	rule   = "#9a9a9a" // zero lines
	shade  = "#ececec" // bands
	shade2 = "#dcdcdc" // bands inside bands
	paper  = "#ffffff"
)

// Sizes in points.
const (
	titleSize = 9.5
	labelSize = 8.5
	tickSize  = 7.5
	noteSize  = 7
	wide      = 504.0 // 7 inches: the full width of an A4 or letter text block
)

// look is how one series is told from another: colour, marker and dash together.
type look struct {
	color  string
	marker marker
	dash   []float64
}

var looks = []look{
	{blue, circle, nil},
	{vermilion, square, []float64{5, 2}},
	{green, triangle, []float64{1.5, 1.5}},
	{purple, diamond, []float64{6, 2, 1.5, 2}},
	{black, cross, []float64{3, 1.5}},
	{orange, inverted, []float64{8, 2}},
	{sky, plus, []float64{1, 2.5}},
}

// lookOf returns the look of series i; more series than looks share them.
func lookOf(i int) look { return looks[i%len(looks)] }

// marker is the shape of a point.
type marker int

const (
	circle marker = iota
	square
	triangle
	diamond
	inverted
	cross
	plus
)
