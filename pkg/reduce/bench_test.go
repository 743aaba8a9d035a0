package reduce_test

import (
	"context"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/reduce"
)

// BenchmarkReduce is the whole of the main job on each dataset, the reading of
// its files left out.
func BenchmarkReduce(b *testing.B) {
	for _, w := range worlds(b) {
		b.Run(w.name, func(b *testing.B) {
			for b.Loop() {
				if _, err := reduce.Run(context.Background(), w.b, reduce.Settings{}); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

// BenchmarkSteps times the steps on the attracted disc.
func BenchmarkSteps(b *testing.B) {
	c, err := reduce.NewChain(openWorld(b, "attracted-disc").b)
	if err != nil {
		b.Fatal(err)
	}
	step := func(name string, do func() error) {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				if err := do(); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
	step("fit", c.Fit)
	step("budget", c.Budget)
	step("trials=1000", func() error { return c.Trials(1000) })
}

// BenchmarkRefit counts three-parameter refits of 40 rows of the attracted disc
// per second on all cores, the drawing of their noise included.
func BenchmarkRefit(b *testing.B) {
	w := openWorld(b, "attracted-disc")
	plain := *w.b
	plain.Corrections = map[string]bool{"guard_gap": true, "balance": true}
	plain.Scalars = append([]bench.Scalar(nil), w.b.Scalars...)
	for i := range plain.Scalars {
		s := &plain.Scalars[i]
		s.Dist = gum.Exactly(s.Dist.Value)
		s.HasPrior = false
	}
	plain.Channels = append([]bench.Channel(nil), w.b.Channels...)
	for i := range plain.Channels {
		ch := &plain.Channels[i]
		ch.Grouped = nil
		ch.Gain, ch.Offset = gum.Exactly(1), gum.Exactly(0)
		if ch.Name != "mass" {
			ch.Noise, ch.RelativeNoise, ch.Resolution = 0, 0, 0
		}
		ch.Resolution = 0
	}
	plain.Rows.Excluded = append([]bool(nil), w.b.Rows.Excluded...)
	rows := 0
	for i := range plain.Rows.Excluded {
		if plain.Rows.Kind[i] == bench.Reading && !plain.Rows.Excluded[i] {
			if rows++; rows > 40 {
				plain.Rows.Excluded[i] = true
			}
		}
	}
	c, err := reduce.NewChain(&plain)
	if err != nil {
		b.Fatal(err)
	}
	b.Run("n=40", func(b *testing.B) {
		const n = 20000
		for b.Loop() {
			if err := c.Trials(n); err != nil {
				b.Fatal(err)
			}
		}
		b.ReportMetric(n*float64(b.N)/b.Elapsed().Seconds(), "fits/s")
	})
}
