package figure

import "math"

// potentialGrid holds potentials at the corners of square cells over the window.
type potentialGrid struct {
	v        *strayView
	nx, ny   int // corners
	x0, y0   float64
	step     float64
	phi      []float64
	segments []gridSegment
}

// gridSegment is a piece of a contour between two edges of a cell.
type gridSegment struct{ a, b int }

func newGrid(v *strayView, across int) *potentialGrid {
	g := &potentialGrid{v: v, x0: v.lo[0], y0: v.lo[1]}
	g.step = (v.hi[0] - v.lo[0]) / float64(across)
	g.nx = across + 1
	g.ny = int(math.Ceil((v.hi[1]-v.lo[1])/g.step)) + 1
	g.phi = make([]float64, g.nx*g.ny)
	for j := range g.ny {
		for i := range g.nx {
			p, err := v.s.Scene.Potential(v.point(g.x0+float64(i)*g.step, g.y0+float64(j)*g.step))
			if err != nil {
				p = math.NaN() // inside a body or behind the plane
			}
			g.phi[j*g.nx+i] = p
		}
	}
	return g
}

// contour follows one potential through the cells (marching squares): polylines of
// the window, those that close end where they begin.
func (g *potentialGrid) contour(level float64) [][][2]float64 {
	g.segments = g.segments[:0]
	// Edge 2k runs right from corner k, edge 2k+1 up from it.
	for j := range g.ny - 1 {
		for i := range g.nx - 1 {
			k := j*g.nx + i
			c := [4]float64{g.phi[k] - level, g.phi[k+1] - level, g.phi[k+1+g.nx] - level, g.phi[k+g.nx] - level}
			edges := [4]int{2 * k, 2*(k+1) + 1, 2 * (k + g.nx), 2*k + 1}
			var cut []int
			for s := range 4 {
				a, b := c[s], c[(s+1)%4]
				if math.IsNaN(a) || math.IsNaN(b) {
					cut = nil
					break
				}
				if (a < 0) != (b < 0) {
					cut = append(cut, edges[s])
				}
			}
			switch len(cut) {
			case 2:
				g.segments = append(g.segments, gridSegment{cut[0], cut[1]})
			case 4: // a saddle: the mean of the corners says which pair belongs together
				if (c[0]+c[1]+c[2]+c[3] < 0) == (c[0] < 0) {
					g.segments = append(g.segments, gridSegment{cut[0], cut[1]}, gridSegment{cut[2], cut[3]})
				} else {
					g.segments = append(g.segments, gridSegment{cut[3], cut[0]}, gridSegment{cut[1], cut[2]})
				}
			}
		}
	}
	at := map[int][]int{} // edge to its segments; looked up, never ranged over
	for n, s := range g.segments {
		at[s.a] = append(at[s.a], n)
		at[s.b] = append(at[s.b], n)
	}
	used := make([]bool, len(g.segments))
	walk := func(n, from int) []int { // edges met, beginning with from
		out := []int{from}
		for n >= 0 && !used[n] {
			used[n] = true
			next := g.segments[n].a
			if next == from {
				next = g.segments[n].b
			}
			out = append(out, next)
			from = next
			follow := -1
			for _, m := range at[from] {
				if !used[m] {
					follow = m
				}
			}
			n = follow
		}
		return out
	}
	var lines [][][2]float64
	emit := func(edges []int) {
		line := make([][2]float64, len(edges))
		for i, e := range edges {
			line[i] = g.crossing(e, level)
		}
		lines = append(lines, line)
	}
	for n, s := range g.segments { // open ends first
		if used[n] {
			continue
		}
		if len(at[s.a]) == 1 {
			emit(walk(n, s.a))
		} else if len(at[s.b]) == 1 {
			emit(walk(n, s.b))
		}
	}
	for n, s := range g.segments {
		if !used[n] {
			emit(walk(n, s.a))
		}
	}
	return lines
}

// crossing is where a potential crosses an edge, by a straight line between its
// ends.
func (g *potentialGrid) crossing(edge int, level float64) [2]float64 {
	k := edge / 2
	x, y := g.x0+float64(k%g.nx)*g.step, g.y0+float64(k/g.nx)*g.step
	a := g.phi[k]
	if edge%2 == 0 {
		return [2]float64{x + g.step*(level-a)/(g.phi[k+1]-a), y}
	}
	return [2]float64{x, y + g.step*(level-a)/(g.phi[k+g.nx]-a)}
}
