package bench

import (
	"bufio"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"
)

// benchCSV writes a file of six columns as a bench records it: short decimals,
// or 17 significant digits.
func benchCSV(tb testing.TB, digits string, rows int) string {
	tb.Helper()
	path := filepath.Join(tb.TempDir(), "readings.csv")
	f, err := os.Create(path)
	if err != nil {
		tb.Fatal(err)
	}
	w := bufio.NewWriterSize(f, 1<<20)
	src := rand.New(rand.NewPCG(11, 0))
	format := "%.3f,%.4f,%.6f,%.6e,%.2f,%.1f\n"
	if digits == "full" {
		format = "%.16e,%.16e,%.16e,%.16e,%.16e,%.16e\n"
	}
	fmt.Fprintln(w, "t_s,V_V,d_m,F_N,T_C,RH_pct")
	for i := range rows {
		v, d := 2000*src.Float64()-1000, 1e-3+4e-3*src.Float64()
		force := 0.5*8.854e-14*(v/d)*(v/d) + 1e-7*src.NormFloat64()
		fmt.Fprintf(w, format, 0.1*float64(i), v, d, force, 23+0.5*src.NormFloat64(), 45+3*src.NormFloat64())
	}
	if err := w.Flush(); err != nil {
		tb.Fatal(err)
	}
	if err := f.Close(); err != nil {
		tb.Fatal(err)
	}
	return path
}

// BenchmarkReadCSV reads a file of six columns of numbers, with its hash.
func BenchmarkReadCSV(b *testing.B) {
	for _, digits := range []string{"bench", "full"} {
		for _, rows := range []int{100_000, 1_000_000} {
			b.Run(fmt.Sprintf("%s/rows=%d", digits, rows), func(b *testing.B) {
				path := benchCSV(b, digits, rows)
				info, err := os.Stat(path)
				if err != nil {
					b.Fatal(err)
				}
				b.SetBytes(info.Size())
				b.ReportAllocs()
				for b.Loop() {
					f, err := os.Open(path)
					if err != nil {
						b.Fatal(err)
					}
					t, err := ReadCSV(f, "readings.csv", CSVSettings{})
					f.Close()
					if err != nil || t.N != rows {
						b.Fatal(t, err)
					}
				}
				b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(rows), "ns/row")
			})
		}
	}
}
