package lsq

import (
	"context"
	"fmt"
	"testing"

	"example.org/guardring/pkg/random"
)

// The problem of the benchmarks: the force on a guarded attracted disc,
// F = k·eps·(V − V0)²/(d + d0)², eps in pF/m, V in V, d in mm, F in N, over an
// area of 1e-2 m²; weighted fit of eps, V0 and d0.
const discK = 0.5 * 1e-12 * 1e-2 / 1e-6

var (
	discTruth = []float64{8.8541878128, 1.5, 0.05}
	discStart = []float64{10, 0.5, 0.01}
)

func disc(n int) *Problem {
	src := random.New(7, "disc", 0)
	v, d := make([]float64, n), make([]float64, n)
	y, u := make([]float64, n), make([]float64, n)
	for i := range v {
		v[i], d[i] = 100+900*src.Float64(), 1+4*src.Float64()
		q := (v[i] - discTruth[1]) / (d[i] + discTruth[2])
		f := discK * discTruth[0] * q * q
		u[i] = 1e-6 + 1e-3*f
		y[i] = f + u[i]*src.Normal()
	}
	return &Problem{
		Parameters: []Parameter{{Name: "eps", Start: discStart[0]}, {Name: "V0", Start: discStart[1]}, {Name: "d0", Start: discStart[2]}},
		Y:          y, U: u,
		Eval: func(th, f []float64, jac [][]float64) error {
			eps, v0, d0 := th[0], th[1], th[2]
			v, d := v[:len(f)], d[:len(f)]
			if jac == nil {
				for i := range f {
					q := (v[i] - v0) / (d[i] + d0)
					f[i] = discK * eps * q * q
				}
				return nil
			}
			a, b, c := jac[0][:len(f)], jac[1][:len(f)], jac[2][:len(f)]
			for i := range f {
				x := v[i] - v0
				r := 1 / (d[i] + d0)
				q := x * r
				g := discK * q * q
				f[i] = eps * g
				a[i] = g
				t := -2 * eps * discK * q * r
				b[i] = t
				c[i] = t * q
			}
			return nil
		},
	}
}

func BenchmarkFit(b *testing.B) {
	for _, n := range []int{40, 1000, 100000} {
		b.Run(fmt.Sprintf("attracted-disc/n=%d", n), func(b *testing.B) {
			p := disc(n)
			b.ReportAllocs()
			for b.Loop() {
				r, err := Fit(context.Background(), p, Settings{})
				if err != nil || r.Status != Converged {
					b.Fatal(err, r)
				}
			}
		})
	}
}

func BenchmarkRefitter(b *testing.B) {
	p := disc(40)
	r := fit(b, p)
	w := r.NewRefitter()
	src := random.New(1, "refit", 0)
	y := make([][]float64, 64)
	for k := range y {
		y[k] = make([]float64, 40)
		for i := range y[k] {
			y[k][i] = r.Fitted[i] + p.U[i]*src.Normal()
		}
	}
	theta := make([]float64, 3)
	b.ReportAllocs()
	k := 0
	for b.Loop() {
		copy(theta, r.Values)
		if _, err := w.Fit(y[k&63], nil, nil, theta); err != nil {
			b.Fatal(err)
		}
		k++
	}
	b.ReportMetric(float64(b.N)/b.Elapsed().Seconds(), "fits/s")
}
