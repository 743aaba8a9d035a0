//go:build !amd64

package lsq

func weigh3(m int, w, y, f, j0, j1, j2, buf []float64, stride int, s *lanes) {
	weigh3Go(m, w, y, f, j0, j1, j2, buf, stride, s)
}

func fuse3(x, a, b, c []float64, s0, s1, s2 float64, s *lanes) { fuse3Go(x, a, b, c, s0, s1, s2, s) }

func fuse2(x, a, b []float64, s0, s1 float64, s *lanes) { fuse2Go(x, a, b, s0, s1, s) }

func fuse1(x, a []float64, s0 float64, s *lanes) { fuse1Go(x, a, s0, s) }

func pair(x, p, a []float64, s0 float64, s *lanes) { pairGo(x, p, a, s0, s) }

func dotLanes(x, a []float64, s *lanes) { dotGo(x, a, s) }
