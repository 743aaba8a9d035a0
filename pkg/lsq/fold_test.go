package lsq

import (
	"math"
	"testing"

	"example.org/guardring/pkg/random"
	"gonum.org/v1/gonum/mat"
)

// The vector instructions and the portable loops must give the same bits.
func TestLanesAgree(t *testing.T) {
	src := random.New(5, "lanes", 0)
	for _, m := range []int{4, 8, 40, 256} {
		col := func() []float64 {
			v := make([]float64, m)
			src.FillNormal(v)
			return v
		}
		w, y, f, a, b, c := col(), col(), col(), col(), col(), col()
		buf1, buf2 := make([]float64, 4*m), make([]float64, 4*m)
		var s1, s2 lanes
		same := func(what string) {
			t.Helper()
			if s1 != s2 {
				t.Errorf("%s, m = %d: %v and %v", what, m, s1, s2)
			}
			for i := range buf1 {
				if buf1[i] != buf2[i] {
					t.Fatalf("%s, m = %d: element %d is %v and %v", what, m, i, buf1[i], buf2[i])
				}
			}
		}
		weigh3(m, w, y, f, a, b, c, buf1, m, &s1)
		weigh3Go(m, w, y, f, a, b, c, buf2, m, &s2)
		same("weigh3")
		fuse3(buf1[:m], buf1[m:2*m], buf1[2*m:3*m], buf1[3*m:], 0.3, -0.7, 1.1, &s1)
		fuse3Go(buf2[:m], buf2[m:2*m], buf2[2*m:3*m], buf2[3*m:], 0.3, -0.7, 1.1, &s2)
		same("fuse3")
		fuse2(buf1[:m], buf1[m:2*m], buf1[2*m:3*m], 0.3, -0.7, &s1)
		fuse2Go(buf2[:m], buf2[m:2*m], buf2[2*m:3*m], 0.3, -0.7, &s2)
		same("fuse2")
		fuse1(buf1[:m], buf1[m:2*m], 1.3, &s1)
		fuse1Go(buf2[:m], buf2[m:2*m], 1.3, &s2)
		same("fuse1")
		pair(buf1[:m], buf1[m:2*m], buf1[2*m:3*m], 1.3, &s1)
		pairGo(buf2[:m], buf2[m:2*m], buf2[2*m:3*m], 1.3, &s2)
		same("pair")
		dotLanes(buf1[:m], buf1[m:2*m], &s1)
		dotGo(buf2[:m], buf2[m:2*m], &s2)
		same("dot")
	}
}

// The triangle of the folded blocks is that of the QR decomposition of the
// whole matrix, up to signs of rows; for any number of rows and columns.
func TestFoldIsQR(t *testing.T) {
	src := random.New(6, "fold", 0)
	for q := 1; q <= 9; q++ {
		for _, n := range []int{q + 1, 13, 41, 255, 256, 257, 1030} {
			full := mat.NewDense(n, q+1, nil)
			cols := make([][]float64, q)
			y, f, w := make([]float64, n), make([]float64, n), make([]float64, n)
			for k := range cols {
				cols[k] = make([]float64, n)
				src.FillNormal(cols[k])
			}
			src.FillNormal(y)
			src.FillNormal(f)
			for i := range w {
				w[i] = 0.5 + src.Float64()
				for k := range cols {
					full.Set(i, k, w[i]*cols[k][i])
				}
				full.Set(i, q, w[i]*(y[i]-f[i]))
			}
			var qr mat.QR
			qr.Factorize(full)
			var r mat.Dense
			qr.RTo(&r)
			var a fold
			a.init(q, n)
			a.reset()
			a.weighted(w, y, f, cols)
			for k := 0; k < q; k++ {
				sign := 1.0
				if a.r[k*(q+1)+k]*r.At(k, k) < 0 {
					sign = -1
				}
				for j := k; j <= q; j++ {
					if d := math.Abs(a.r[j*(q+1)+k] - sign*r.At(k, j)); d > 1e-12*math.Sqrt(float64(n)) {
						t.Errorf("q = %d, n = %d: R[%d,%d] = %v, want %v", q, n, k, j, a.r[j*(q+1)+k], sign*r.At(k, j))
					}
				}
			}
			near(t, "rest", a.rest, r.At(q, q)*r.At(q, q), 1e-9)
		}
	}
}
