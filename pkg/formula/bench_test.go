package formula

import (
	"fmt"
	"math/rand/v2"
	"testing"
)

// Each case names the variables that are columns; the others are the same in
// all rows, as parameters are in a fit. ops counts arithmetic operations and
// calls as written.
var benchCases = []struct {
	name, src string
	vars      []string
	columns   int // the last so many
	ops       int
}{
	{"capacitance", "c_s + s/(d + d0)", []string{"c_s", "s", "d0", "d"}, 1, 3},
	{"permittivity", "2*f*pow(d + d0, 2)/(a*pow(v - v0, 2))", []string{"f", "d", "d0", "a", "v", "v0"}, 6, 8},
	{"products", "a*x + b*y - c*z + x*y*z - (x + y)*(y - z)", []string{"a", "b", "c", "x", "y", "z"}, 6, 12},
	{"decay", "a*(1 - exp(-b*x))", []string{"a", "b", "x"}, 1, 5},
	{"waves", "a*sin(k*x) + b*cos(k*x)", []string{"a", "b", "k", "x"}, 1, 7},
}

func benchColumns(vars []string, columns, n int) [][]float64 {
	r := rand.New(rand.NewPCG(3, 4))
	x := make([][]float64, len(vars))
	for i := range x {
		x[i] = make([]float64, 1)
		if i >= len(vars)-columns {
			x[i] = make([]float64, n)
		}
		for k := range x[i] {
			x[i][k] = 1 + r.Float64()
		}
	}
	return x
}

// perRow reports the time for each row, and for each operation of it.
func perRow(b *testing.B, n, ops int) {
	row := float64(b.Elapsed().Nanoseconds()) / float64(b.N) / float64(n)
	b.ReportMetric(row, "ns/row")
	b.ReportMetric(row/float64(ops), "ns/row/op")
}

func BenchmarkBlock(b *testing.B) {
	for _, c := range benchCases {
		p, err := Compile(c.src, c.vars)
		if err != nil {
			b.Fatal(err)
		}
		for _, n := range []int{40, 10000} {
			b.Run(fmt.Sprintf("%s/rows=%d", c.name, n), func(b *testing.B) {
				x, out, w := benchColumns(c.vars, c.columns, n), make([]float64, n), p.Workspace()
				b.ReportAllocs()
				for b.Loop() {
					w.Block(x, out)
				}
				perRow(b, n, c.ops)
			})
		}
	}
}

// BenchmarkBlockGradient takes the derivatives by the first three variables.
func BenchmarkBlockGradient(b *testing.B) {
	for _, c := range benchCases {
		p, err := Compile(c.src, c.vars)
		if err != nil {
			b.Fatal(err)
		}
		wrt := []int{0, 1, 2}
		for _, n := range []int{40, 10000} {
			b.Run(fmt.Sprintf("%s/rows=%d", c.name, n), func(b *testing.B) {
				x, out, w := benchColumns(c.vars, c.columns, n), make([]float64, n), p.Workspace()
				grad := [][]float64{make([]float64, n), make([]float64, n), make([]float64, n)}
				b.ReportAllocs()
				for b.Loop() {
					w.BlockGradient(x, wrt, out, grad)
				}
				perRow(b, n, c.ops)
			})
		}
	}
}

func BenchmarkPoint(b *testing.B) {
	c := benchCases[1]
	p, err := Compile(c.src, c.vars)
	if err != nil {
		b.Fatal(err)
	}
	x, g, h := []float64{1, 2, 3, 4, 5, 6}, make([]float64, 6), make([]float64, 36)
	w := p.Workspace()
	b.Run("Eval", func(b *testing.B) {
		for b.Loop() {
			p.Eval(x)
		}
	})
	b.Run("Gradient", func(b *testing.B) {
		for b.Loop() {
			w.Gradient(x, g)
		}
	})
	b.Run("Hessian", func(b *testing.B) {
		for b.Loop() {
			w.Hessian(x, g, h)
		}
	})
}

func BenchmarkCompile(b *testing.B) {
	c := benchCases[1]
	for b.Loop() {
		if _, err := Compile(c.src, c.vars); err != nil {
			b.Fatal(err)
		}
	}
}
