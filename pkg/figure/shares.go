package figure

import (
	"fmt"
	"math"
	"sort"
	"strconv"
	"strings"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// mostShares is the number of inputs drawn one by one.
const mostShares = 16

// measurand finds one by name; "" is the first.
func (d *Data) measurand(name string) (*reduce.Measurand, int, error) {
	if d == nil || d.Record == nil || len(d.Record.Measurands) == 0 {
		return nil, 0, fmt.Errorf("figure: the record states no measurand")
	}
	i, err := oneNamed(name, len(d.Record.Measurands), func(i int) string { return d.Record.Measurands[i].Name }, "measurand", "record")
	if err != nil {
		return nil, 0, err
	}
	return &d.Record.Measurands[i], i, nil
}

// oneNamed finds one of n things by name; "" is the first. what they are and where
// they stand is for the error.
func oneNamed(name string, n int, of func(i int) string, what, where string) (int, error) {
	var known []string
	for i := range n {
		if name == "" || of(i) == name {
			return i, nil
		}
		known = append(known, of(i))
	}
	hint := ""
	if s := si.Suggest(name, known); s != "" {
		hint = fmt.Sprintf("; did you mean %q?", s)
	}
	return 0, fmt.Errorf("figure: no %s %q in this %s (it has %s)%s", what, name, where, strings.Join(known, ", "), hint)
}

// Shares draws the share of the variance of a measurand ("" for the first) that
// each input contributes, largest first within the parts of the bench.
func (d *Data) Shares(name string) (*Figure, error) {
	m, _, err := d.measurand(name)
	if err != nil {
		return nil, err
	}
	if len(m.Budget) == 0 {
		return nil, fmt.Errorf("figure: %s has no budget", m.Name)
	}
	lines := make([]reduce.BudgetLine, 0, len(m.Budget))
	for _, b := range m.Budget {
		if !finite(float64(b.Share)) {
			return nil, fmt.Errorf("figure: the share of %s in %s is unknown", b.Input, m.Name)
		}
		lines = append(lines, b)
	}
	sort.SliceStable(lines, func(a, b int) bool {
		return math.Abs(float64(lines[a].Share)) > math.Abs(float64(lines[b].Share))
	})
	rest, restShare := 0, 0.0
	if len(lines) > mostShares {
		for _, b := range lines[mostShares:] {
			rest++
			restShare += float64(b.Share)
		}
		lines = lines[:mostShares]
	}
	// Parts of the bench in the order of their weight.
	weight := map[string]float64{}
	var parts []string
	for _, b := range lines {
		if _, ok := weight[b.Group]; !ok {
			parts = append(parts, b.Group)
		}
		weight[b.Group] += math.Abs(float64(b.Share))
	}
	sort.SliceStable(parts, func(a, b int) bool { return weight[parts[a]] > weight[parts[b]] })

	title := "Share of the variance of " + d.called(m.Name)
	s := newSheet(wide, title, d.Record.Title)
	var sp spanner
	sp.add(0)
	for _, b := range lines {
		sp.add(float64(b.Share))
	}
	sp.add(restShare)
	// Names, then the bar, then the figure in percent.
	nameW, partW := 0.0, 0.0
	for _, b := range lines {
		nameW = math.Max(nameW, width(fitted(d.called(b.Input), tickSize, false, 170), tickSize, false))
	}
	for _, p := range parts {
		partW = math.Max(partW, width(fitted(words(p), tickSize, true, 90), tickSize, true))
	}
	further := fmt.Sprintf("%d further inputs", rest)
	left := marginX + partW + 12 + nameW + 8
	if rest > 0 {
		left = math.Max(left, marginX+width(further, tickSize, false)+8)
	}
	xs, err := newScale(Axis{Name: "share of variance", Unit: si.MustUnit("%"), Low: math.Min(sp.lo*1.05, 0), High: math.Max(sp.hi*1.02, 0.01)}, sp, 6)
	if err != nil {
		return nil, err
	}
	xs.from, xs.to = left, wide-marginX-44
	const row = 13.0
	y := s.y + 14
	top := y - 4
	draw := func(name, text string, share float64, color string) {
		base := y + row/2 + 0.35*tickSize
		s.c.write(label{x: left - 8, y: base, size: tickSize, anchor: 1, s: fitted(name, tickSize, false, 170)})
		a, b := xs.pos(math.Min(0, share)), xs.pos(math.Max(0, share))
		if b-a > 0.2 {
			var q path
			q.rect(a, y+2.2, b-a, row-4.4)
			s.c.draw(q, pen{fill: color})
		}
		s.c.write(label{x: b + 4, y: base, size: tickSize, s: text})
		y += row
	}
	for g, part := range parts {
		if g > 0 {
			s.c.segment(marginX, y+2, wide-marginX, y+2, pen{stroke: "#d0d0d0", width: 0.5})
			y += 4
		}
		s.c.write(label{x: marginX, y: y + row/2 + 0.35*tickSize, size: tickSize, bold: true, s: fitted(words(part), tickSize, true, 90)})
		for _, b := range lines {
			if b.Group != part {
				continue
			}
			color := blue
			if b.Share < 0 {
				color = vermilion
			}
			draw(d.called(b.Input), percent(float64(b.Share)), float64(b.Share), color)
		}
	}
	if rest > 0 {
		s.c.segment(marginX, y+2, wide-marginX, y+2, pen{stroke: "#d0d0d0", width: 0.5})
		y += 4
		draw(further, percent(restShare), restShare, slate)
	}
	// The zero line and the axis under the bars.
	zero := xs.pos(0)
	s.c.segment(zero, top, zero, y+3, axisPen)
	p := &panel{c: s.c, xs: xs, ys: &scale{lo: 0, hi: 1}}
	p.at(left, top, wide-marginX-44-left, y+3-top)
	var majors path
	majors.move(p.x, y+3)
	majors.line(p.x+p.w, y+3)
	for _, t := range xs.ticks {
		if t.minor {
			continue
		}
		x := xs.pos(t.at)
		majors.move(x, y+3)
		majors.line(x, y-1)
		s.c.write(label{x: x, y: y + 7 + tickSize, size: tickSize, anchor: 0.5, s: t.label})
	}
	s.c.draw(majors, axisPen)
	s.c.write(label{x: p.x + p.w, y: y + 7 + tickSize + 3 + labelSize, size: labelSize, anchor: 1, s: xs.title})
	s.y = y + 3 + below
	if sp.lo < 0 {
		s.note("A negative share lowers the variance through a correlation.")
	}
	summary := fmt.Sprintf("Of the variance of %s, %s comes from %s", d.called(m.Name), percent(float64(lines[0].Share)), d.called(lines[0].Input))
	if len(lines) > 1 {
		summary += fmt.Sprintf(" and %s from %s", percent(float64(lines[1].Share)), d.called(lines[1].Input))
	}
	return s.finish("shares", title, "Share of the variance of "+d.called(m.Name)+" from each input, by part of the bench.", summary+"."), nil
}

// percent writes a share with two significant digits, not below 0.01 %.
func percent(x float64) string {
	v := 100 * x
	switch a := math.Abs(v); {
	case a == 0:
		return "0 %"
	case a < 0.01:
		return "< 0.01 %"
	case a < 0.1:
		return signed(strconv.FormatFloat(v, 'f', 2, 64)) + " %"
	case a < 10:
		return signed(strconv.FormatFloat(v, 'f', 1, 64)) + " %"
	}
	return signed(strconv.FormatFloat(v, 'f', 0, 64)) + " %"
}
