package lsq

import (
	"context"
	"math"
)

// A valley is a set of parameters that no reading and no prior tells apart at the
// start: the scaled, whitened Jacobian lacks rank there although each of its
// columns counts. Steps along such a direction are made of rounding alone and
// lead anywhere. One parameter of each direction is therefore kept at its start
// while the others are fitted; when the Jacobian at the end lacks the same rank,
// the readings can't tell the parameters apart, and that is the result. When the
// rank was missing at the start only, the search is the usual one.

// pins lists the free parameters to keep at the start, one for each direction
// that the readings do not resolve there; none when all are resolved or a column
// vanishes, which a step of another parameter may mend.
func (f *fitter) pins() []int {
	s := &f.search
	least := 1.0
	for k := 0; k < s.q; k++ {
		c := columnNorm(k, s.q+1, s.now.r)
		if !(c > 0) {
			return nil
		}
		least = math.Min(least, math.Abs(s.now.r[k*(s.q+1)+k])/c)
	}
	if s.q == 1 || least > 1e-7 { // cheap test first
		return nil
	}
	sp := f.analyse()
	var pins []int
	for _, row := range sp.echelon(func(row []float64, used []bool) int {
		// the last of those that weigh: models name first what they are about
		big, at := 0.0, -1
		for l, v := range row {
			if !used[l] {
				big = math.Max(big, math.Abs(v))
			}
		}
		for l, v := range row {
			if !used[l] && big > 0 && math.Abs(v) >= 0.1*big {
				at = l
			}
		}
		return at
	}) {
		pins = append(pins, sp.idx[row.pivot])
	}
	return pins
}

// valley fits with some parameters kept at the start. It reports whether as many
// directions as there are pins are still unresolved at the end.
func (f *fitter) valley(ctx context.Context, pins []int) (bool, error) {
	s := &f.search
	f.pin(pins)
	if err := s.run(ctx); err != nil {
		return false, err
	}
	held := append([]bool(nil), s.held...)
	for _, k := range pins {
		s.held[k] = false
	}
	missing := len(f.analyse().null)
	copy(s.held, held)
	if missing >= len(pins) {
		return true, nil
	}
	f.unpin()
	return false, nil
}

// pin keeps free parameters where they are.
func (f *fitter) pin(pins []int) {
	s := &f.search
	f.pinned = pins
	if s.lo == nil {
		f.bare = true
		s.boundless()
	}
	for _, k := range pins {
		s.lo[k] = s.theta[s.free[k]]
		s.hi[k] = s.lo[k]
	}
}

// unpin gives pinned parameters their own bounds back.
func (f *fitter) unpin() {
	s := &f.search
	for _, k := range f.pinned {
		s.held[k] = false
		s.lo[k], s.hi[k] = math.Inf(-1), math.Inf(1)
		if p := &f.p.Parameters[s.free[k]]; p.Lower != nil {
			s.lo[k] = *p.Lower
		}
		if p := &f.p.Parameters[s.free[k]]; p.Upper != nil {
			s.hi[k] = *p.Upper
		}
	}
	if f.bare {
		s.lo, s.hi, s.held, s.sub = nil, nil, nil, nil
	}
	f.pinned, f.bare = nil, false
}

// boundless makes room for bounds and sets none.
func (s *search) boundless() {
	s.lo, s.hi = make([]float64, s.q), make([]float64, s.q)
	s.held = make([]bool, s.q)
	for l := range s.lo {
		s.lo[l], s.hi[l] = math.Inf(-1), math.Inf(1)
	}
	s.sub = newSubspace(s.q)
}

// direction is a null vector of the spectrum with the entry that only it has.
type direction struct {
	v     []float64
	pivot int
}

// echelon reduces the null vectors so that each names as few parameters as it
// can. choose picks the pivot of a vector among the entries not used yet, −1 for
// none.
func (sp *spectrum) echelon(choose func(row []float64, used []bool) int) []direction {
	m := len(sp.idx)
	rows := make([][]float64, 0, len(sp.null))
	for _, k := range sp.null {
		rows = append(rows, append([]float64(nil), sp.v[k*m:k*m+m]...))
	}
	used := make([]bool, m)
	var out []direction
	for i := range rows {
		pivot := choose(rows[i], used)
		if pivot < 0 {
			continue
		}
		used[pivot] = true
		out = append(out, direction{rows[i], pivot})
		d := rows[i][pivot]
		for l := range rows[i] {
			rows[i][l] /= d
		}
		for h := range rows {
			if h == i {
				continue
			}
			c := rows[h][pivot]
			for l := range rows[h] {
				rows[h][l] -= c * rows[i][l]
			}
		}
	}
	return out
}

// largest is the unused entry of greatest size.
func largest(row []float64, used []bool) int {
	pivot, big := -1, 0.0
	for l, v := range row {
		if !used[l] && math.Abs(v) > big {
			pivot, big = l, math.Abs(v)
		}
	}
	return pivot
}
