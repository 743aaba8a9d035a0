package bench

import (
	"bufio"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// largeBench writes a dataset with many rows: five columns of numbers, one of
// them in degrees Celsius, times, kinds and settings.
func largeBench(tb testing.TB, rows int) string {
	tb.Helper()
	text := strings.Replace(goodBench, "[channels.force]", "[channels.warmth]\ncolumn = \"T/degC\"\nunit = \"degC\"\n\n[channels.force]", 1)
	dir := dataset(tb, map[string]string{"bench.toml": text})
	f, err := os.Create(filepath.Join(dir, "readings.csv"))
	if err != nil {
		tb.Fatal(err)
	}
	w := bufio.NewWriterSize(f, 1<<20)
	src := rand.New(rand.NewPCG(5, 6))
	fmt.Fprintln(w, "t,kind,gap_no,V/kV,gap/mm,F/mN,T/degC")
	for i := range rows {
		kind := "reading"
		if i%100 == 0 {
			kind = "zero"
		}
		fmt.Fprintf(w, "%.1f,%s,%d,%.4f,%.3f,%.4f,%.2f\n", 0.1*float64(i), kind, i/1000, 4*src.Float64(), 4+float64(i/1000%9), src.Float64(), 20+src.NormFloat64())
	}
	if err := w.Flush(); err != nil {
		tb.Fatal(err)
	}
	if err := f.Close(); err != nil {
		tb.Fatal(err)
	}
	return dir
}

// BenchmarkOpen opens a small dataset and a large one.
func BenchmarkOpen(b *testing.B) {
	for _, rows := range []int{100, 1_000_000} {
		b.Run(fmt.Sprintf("rows=%d", rows), func(b *testing.B) {
			dir := largeBench(b, rows)
			kind := testKind()
			b.ReportAllocs()
			for b.Loop() {
				if _, err := OpenWith(kind, dir); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
