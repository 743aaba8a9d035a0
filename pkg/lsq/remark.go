package lsq

import (
	"fmt"
	"strconv"
	"strings"
)

// Remark is a warning about parameters. The estimator knows no units: In writes the
// sentence for who does.
type Remark struct {
	Parameters []int // of the problem, that the sentence names

	say   func(name func(j int) string, amount func(j int, x float64) string) string
	names []string // by parameter
	whose string   // "its uncertainty is", or "their uncertainties are"
}

// Error is the sentence with the problem's own names and plain numbers.
func (r *Remark) Error() string {
	return r.say(func(j int) string { return r.names[j] }, func(_ int, x float64) string { return fmt.Sprintf("%.6g", x) })
}

// In is the sentence with other names, and with amounts of a parameter (of the
// problem, counted from 0) written by amount, which is given values and changes in
// the parameter's unit.
func (r *Remark) In(name func(j int) string, amount func(j int, x float64) string) string {
	return r.say(name, amount)
}

// remark makes one that names those parameters of p.
func (p *Problem) remark(parameters []int, say func(name func(j int) string, amount func(j int, x float64) string) string) *Remark {
	r := &Remark{Parameters: parameters, say: say, names: make([]string, len(p.Parameters))}
	for j := range r.names {
		r.names[j] = p.name(j)
	}
	return r
}

// move is a parameter's part in a direction that leaves the fit as it is.
type move struct {
	j      int
	change float64 // of the parameter, or relative to it
	share  bool    // relative
}

// alike says that parameters can't be told apart, or that one is not determined.
func (p *Problem) alike(moves []move) *Remark {
	which := make([]int, len(moves))
	for i, m := range moves {
		which[i] = m.j
	}
	r := p.remark(which, func(name func(j int) string, amount func(j int, x float64) string) string {
		if len(moves) == 1 {
			return fmt.Sprintf("the readings do not determine %s: changing it leaves the fit as it is", name(moves[0].j))
		}
		var names, by []string
		for _, m := range moves {
			change := fmt.Sprintf("%+.3g %%", 100*m.change)
			if !m.share {
				if change = amount(m.j, m.change); m.change > 0 {
					change = "+" + change
				}
			}
			names = append(names, name(m.j))
			by = append(by, name(m.j)+" by "+change)
		}
		last := len(names) - 1
		return fmt.Sprintf("%s and %s can't be told apart: changing %s and %s together leaves the fit as it is", strings.Join(names[:last], ", "), names[last], strings.Join(by[:last], ", "), by[last])
	})
	if r.whose = "their uncertainties are"; len(moves) == 1 {
		r.whose = "its uncertainty is"
	}
	return r
}

// three rounds to three significant digits.
func three(x float64) float64 {
	v, err := strconv.ParseFloat(strconv.FormatFloat(x, 'g', 3, 64), 64)
	if err != nil {
		return x
	}
	return v
}

// within is a remark with words before and after it.
func (r *Remark) within(before, after string) *Remark {
	return &Remark{Parameters: r.Parameters, names: r.names, say: func(name func(j int) string, amount func(j int, x float64) string) string {
		return before + r.say(name, amount) + after
	}}
}
