package reduce_test

import (
	"context"
	"errors"
	"path/filepath"
	"runtime"
	"testing"
	"time"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/reduce"
)

// Work that is interrupted leaves no goroutine behind, whenever it is.
func TestInterruptsLeaveNothing(t *testing.T) {
	b, err := bench.Open(filepath.Join("..", "..", "datasets", "attracted-disc"))
	if err != nil {
		t.Fatal(err)
	}
	budget, err := bench.OpenBudget(filepath.Join("..", "..", "datasets", "budgets", "end-gauge.toml"))
	if err != nil {
		t.Fatal(err)
	}
	before := runtime.NumGoroutine()
	for name, work := range map[string]func(ctx context.Context) error{
		"reduce": func(ctx context.Context) error {
			_, err := reduce.Run(ctx, b, reduce.Settings{Trials: 10_000_000})
			return err
		},
		"propagate": func(ctx context.Context) error {
			_, err := gum.Propagate(ctx, budget.Model, gum.Settings{Trials: 1_000_000_000})
			return err
		},
	} {
		for _, wait := range []time.Duration{0, time.Millisecond, 20 * time.Millisecond, 60 * time.Millisecond} {
			ctx, cancel := context.WithTimeout(context.Background(), wait)
			err := work(ctx)
			cancel()
			if !errors.Is(err, context.DeadlineExceeded) {
				t.Errorf("%s after %v: %v; it should say that it was stopped", name, wait, err)
			}
		}
	}
	for range 200 {
		if runtime.NumGoroutine() <= before {
			return
		}
		time.Sleep(10 * time.Millisecond)
	}
	stacks := make([]byte, 1<<16)
	t.Errorf("%d goroutines, %d before:\n%s", runtime.NumGoroutine(), before, stacks[:runtime.Stack(stacks, true)])
}
