package figure

import (
	"fmt"
	"math"
	"strings"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// Curves draws what a bench states at every level (a correction factor against
// the field): for each range one figure, with the result of the fit in its band
// of expanded uncertainty, and what each point gives by itself. Series that
// differ only in the phase, as found and as left, share a figure. A record
// without series has none.
func (d *Data) Curves() ([]*Figure, error) {
	var order []string
	group := map[string][]*reduce.Series{}
	for i := range d.Record.Series {
		s := &d.Record.Series[i]
		if len(s.Points) == 0 {
			continue
		}
		_, rest := phaseOf(s.Name)
		if group[rest] == nil {
			order = append(order, rest)
		}
		group[rest] = append(group[rest], s)
	}
	var out []*Figure
	for _, rest := range order {
		f, err := d.curve(rest, group[rest])
		if err != nil {
			return nil, err
		}
		out = append(out, f)
	}
	return out, nil
}

// phaseOf splits the name of a series into the words for the phase and the rest.
func phaseOf(name string) (phase, rest string) {
	for _, p := range []string{reduce.AsFound, reduce.AsLeft} {
		if name == p {
			return p, ""
		}
		if r, ok := strings.CutPrefix(name, p+", "); ok {
			return p, r
		}
	}
	return "", name
}

func (d *Data) curve(name string, series []*reduce.Series) (*Figure, error) {
	s0 := series[0]
	unit, err := si.ParseUnit(s0.Unit)
	if err != nil {
		return nil, fmt.Errorf("figure: series %q: %w", s0.Name, err)
	}
	levelUnit, err := si.ParseUnit(s0.LevelUnit)
	if err != nil {
		return nil, fmt.Errorf("figure: series %q: %w", s0.Name, err)
	}
	title := upper(words(s0.Result)) + " against " + s0.Level
	file := "curve"
	if name != "" {
		title += ", " + name
		file += "-" + name
	}
	p := Plot{Name: fileName(file), Title: title, From: d.Record.Title,
		X: Axis{Name: s0.Level, Unit: levelUnit}, Y: Axis{Name: words(s0.Result), Unit: unit},
		Caption: "Lines: the result of the fit, in the band of its expanded uncertainty; no band is drawn where no point was taken. " +
			"Markers: what each point gives by itself, with error bars of the expanded uncertainty of the fit."}
	for i, s := range series {
		phase, _ := phaseOf(s.Name)
		label := phase
		if label == "" {
			label = "points"
		}
		points := Series{Name: words(label), Look: i + 1}
		// A level of zero has no factor: each side has its own line and band.
		for _, side := range []float64{-1, 1} {
			line, band := Series{Line: true, Look: i + 1}, Band{}
			for _, pt := range s.Points {
				x := float64(pt.Level)
				if x*side <= 0 {
					continue
				}
				line.X, line.Y = append(line.X, x), append(line.Y, float64(pt.Value))
				band.X = append(band.X, x)
				band.Low, band.High = append(band.Low, float64(pt.Value-pt.Expanded)), append(band.High, float64(pt.Value+pt.Expanded))
				points.X, points.Y = append(points.X, x), append(points.Y, float64(pt.Observed))
				points.UY = append(points.UY, math.Abs(float64(pt.Expanded)))
			}
			if len(line.X) > 1 {
				p.Bands = append(p.Bands, band)
				p.Series = append(p.Series, hidden(line))
			}
		}
		p.Series = append(p.Series, points)
	}
	f, err := p.Draw()
	if err != nil {
		return nil, err
	}
	return f, nil
}

// hidden makes a line that has no markers and no place in the key.
func hidden(s Series) Series { s.Name = ""; return s }

// Curves is Data.Curves of a reduction.
func Curves(r *reduce.Result) ([]*Figure, error) { return Of(r).Curves() }

// upper begins a text with a capital.
func upper(s string) string {
	if s == "" {
		return s
	}
	return strings.ToUpper(s[:1]) + s[1:]
}
