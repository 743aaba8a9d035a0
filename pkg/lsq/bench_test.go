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
			k, k2 := discK*eps, -2*discK*eps
			if jac == nil {
				for i := range f {
					q := (v[i] - v0) / (d[i] + d0)
					f[i] = k * q * q
				}
				return nil
			}
			a, b, c := jac[0][:len(f)], jac[1][:len(f)], jac[2][:len(f)]
			for i := range f {
				r := 1 / (d[i] + d0)
				q := (v[i] - v0) * r
				h := q * q
				f[i] = k * h
				a[i] = discK * h
				t := k2 * q * r
				b[i] = t
				c[i] = t * q
			}
			return nil
		},
	}
}

// BenchmarkFit gives estimates, covariance, residuals, chi-squared and condition:
// what the baseline gives. BenchmarkFitDiagnostics adds leverage, studentised
// residuals and Cook's distances.
func BenchmarkFit(b *testing.B) { benchmarkFit(b, Settings{SkipDiagnostics: true}) }

func BenchmarkFitDiagnostics(b *testing.B) { benchmarkFit(b, Settings{}) }

func benchmarkFit(b *testing.B, s Settings) {
	for _, n := range []int{40, 1000, 100000} {
		b.Run(fmt.Sprintf("attracted-disc/n=%d", n), func(b *testing.B) {
			p := disc(n)
			b.ReportAllocs()
			for b.Loop() {
				r, err := Fit(context.Background(), p, s)
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

// discEIV is disc with errors in both predictors too.
func discEIV(n int) *EIVProblem { return discEIVSeed(n, 7) }

func discEIVSeed(n int, seed uint64) *EIVProblem {
	src := random.New(seed, "discEIV", 0)
	v, d := make([]float64, n), make([]float64, n)
	y, uy, uv, ud := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range v {
		v[i], d[i] = 100+900*src.Float64(), 1+4*src.Float64()
		q := (v[i] - discTruth[1]) / (d[i] + discTruth[2])
		f := discK * discTruth[0] * q * q
		uy[i], uv[i], ud[i] = 1e-6+1e-3*f, 0.05+2e-4*v[i], 2e-3
		y[i] = f + uy[i]*src.Normal()
		v[i] += uv[i] * src.Normal()
		d[i] += ud[i] * src.Normal()
	}
	return &EIVProblem{
		Parameters: []Parameter{{Name: "eps", Start: discStart[0]}, {Name: "V0", Start: discStart[1]}, {Name: "d0", Start: discStart[2]}},
		X:          [][]float64{v, d}, UX: [][]float64{uv, ud}, Y: y, UY: uy,
		Eval: func(th []float64, x [][]float64, f []float64, jac, dx [][]float64) error {
			eps, v0, d0 := th[0], th[1], th[2]
			n := len(f)
			v, d := x[0][:n], x[1][:n]
			if jac == nil {
				for i := range f {
					q := (v[i] - v0) / (d[i] + d0)
					f[i] = discK * eps * q * q
				}
				return nil
			}
			a, b, c, dv, dd := jac[0][:n], jac[1][:n], jac[2][:n], dx[0][:n], dx[1][:n]
			k, k2 := discK*eps, -2*eps*discK
			for i := range f {
				r := 1 / (d[i] + d0)
				q := (v[i] - v0) * r
				g := q * q
				f[i] = k * g
				a[i] = discK * g
				t := k2 * q * r
				b[i], dv[i] = t, -t
				t *= q
				c[i], dd[i] = t, t
			}
			return nil
		},
	}
}

func BenchmarkFitEIV(b *testing.B) {
	for _, n := range []int{40, 1000, 10000} {
		b.Run(fmt.Sprintf("n=%d", n), func(b *testing.B) {
			p := discEIV(n)
			b.ReportAllocs()
			for b.Loop() {
				r, err := FitEIV(context.Background(), p, Settings{})
				if err != nil || r.Status != Converged {
					b.Fatal(err, r)
				}
			}
		})
	}
}

// 10,000 lines of 11 points with errors in both axes.
func BenchmarkLineEIV(b *testing.B) {
	const m, n = 10000, 11
	b.Run(fmt.Sprintf("batch=%d", m), func(b *testing.B) {
		src := random.New(3, "lines", 0)
		lines := make([]LineData, m)
		for k := range lines {
			d := &lines[k]
			d.X, d.Y, d.UX, d.UY = make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
			for i := range d.X {
				x := float64(i)
				d.UX[i], d.UY[i] = 0.02+0.03*src.Float64(), 0.05+0.05*src.Float64()
				d.X[i] = x + d.UX[i]*src.Normal()
				d.Y[i] = 1 + 2*x + d.UY[i]*src.Normal()
			}
		}
		var f LineFitter
		var r LineResult
		b.ReportAllocs()
		for b.Loop() {
			for k := range lines {
				if err := f.Fit(&lines[k], &r); err != nil {
					b.Fatal(err)
				}
			}
		}
	})
}
