package lsq

import "golang.org/x/sys/cpu"

// useVectors: the processor and the system know 256-bit vectors.
var useVectors = cpu.X86.HasAVX

//go:noescape
func weigh3AVX(m int, w, y, f, j0, j1, j2, buf *float64, stride int, s *lanes)

//go:noescape
func fuse3AVX(m int, x, a, b, c *float64, s0, s1, s2 float64, s *lanes)

//go:noescape
func fuse2AVX(m int, x, a, b *float64, s0, s1 float64, s *lanes)

//go:noescape
func fuse1AVX(m int, x, a *float64, s0 float64, s *lanes)

//go:noescape
func pairAVX(m int, x, p, a *float64, s0 float64, s *lanes)

//go:noescape
func dotAVX(m int, x, a *float64, s *lanes)

func weigh3(m int, w, y, f, j0, j1, j2, buf []float64, stride int, s *lanes) {
	if !useVectors || m == 0 {
		weigh3Go(m, w, y, f, j0, j1, j2, buf, stride, s)
		return
	}
	_, _, _, _, _, _, _ = w[m-1], y[m-1], f[m-1], j0[m-1], j1[m-1], j2[m-1], buf[3*stride+m-1]
	weigh3AVX(m, &w[0], &y[0], &f[0], &j0[0], &j1[0], &j2[0], &buf[0], stride, s)
}

func fuse3(x, a, b, c []float64, s0, s1, s2 float64, s *lanes) {
	if m := len(x); useVectors && m > 0 {
		_, _, _ = a[m-1], b[m-1], c[m-1]
		fuse3AVX(m, &x[0], &a[0], &b[0], &c[0], s0, s1, s2, s)
		return
	}
	fuse3Go(x, a, b, c, s0, s1, s2, s)
}

func fuse2(x, a, b []float64, s0, s1 float64, s *lanes) {
	if m := len(x); useVectors && m > 0 {
		_, _ = a[m-1], b[m-1]
		fuse2AVX(m, &x[0], &a[0], &b[0], s0, s1, s)
		return
	}
	fuse2Go(x, a, b, s0, s1, s)
}

func fuse1(x, a []float64, s0 float64, s *lanes) {
	if m := len(x); useVectors && m > 0 {
		_ = a[m-1]
		fuse1AVX(m, &x[0], &a[0], s0, s)
		return
	}
	fuse1Go(x, a, s0, s)
}

func pair(x, p, a []float64, s0 float64, s *lanes) {
	if m := len(x); useVectors && m > 0 {
		_, _ = a[m-1], p[m-1]
		pairAVX(m, &x[0], &p[0], &a[0], s0, s)
		return
	}
	pairGo(x, p, a, s0, s)
}

func dotLanes(x, a []float64, s *lanes) {
	if m := len(x); useVectors && m > 0 {
		_ = a[m-1]
		dotAVX(m, &x[0], &a[0], s)
		return
	}
	dotGo(x, a, s)
}
