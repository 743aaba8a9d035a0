package cell_test

import (
	"context"
	"errors"
	"fmt"
	"sync"
	"testing"

	"example.org/guardring/pkg/cell"
)

func ExampleReport() {
	ctx := cell.WithProgress(context.Background(), func(p cell.Progress) {
		fmt.Printf("%s: %d of %d\n", p.Label, p.Done, p.Total)
	})
	cell.Report(ctx, "trials", 1, 2)
	cell.Report(ctx, "trials", 2, 2)
	// Output:
	// trials: 1 of 2
	// trials: 2 of 2
}

func TestSilentByDefault(t *testing.T) {
	if cell.Context() != context.Background() {
		t.Error("Context outside a notebook is not the background context")
	}
	cell.Report(context.Background(), "work", 1, 2)
	cell.Display("x")
	cell.Update("id", "x")
	cell.Clear(true)
	cell.Fail(nil)
	// A host without functions is as silent as none.
	defer cell.SetHost(&cell.Host{})()
	cell.Display("x")
	cell.Clear(false)
	if cell.Context() != context.Background() {
		t.Error("Context of an empty host is not the background context")
	}
}

func TestFailPanicsWithTheCause(t *testing.T) {
	cause := errors.New("no readings")
	defer func() {
		f, ok := recover().(cell.Failure)
		if !ok || !errors.Is(f, cause) || f.Error() != "no readings" {
			t.Errorf("Fail panicked with %v, want Failure of the cause", f)
		}
	}()
	cell.Fail(cause)
	t.Error("Fail returned")
}

type rich struct{}

func (rich) String() string { return "rich" }
func (rich) SimpleRender() map[string]any {
	return map[string]any{"text/html": "<b>rich</b>"}
}

func TestHostReceives(t *testing.T) {
	type shown struct {
		forms  map[string]any
		id     string
		update bool
	}
	var got []shown
	cleared := 0
	ctx, cancel := context.WithCancel(context.Background())
	restore := cell.SetHost(&cell.Host{
		Context: func() context.Context { return ctx },
		Display: func(forms map[string]any, id string, update bool) { got = append(got, shown{forms, id, update}) },
		Clear: func(wait bool) {
			if wait {
				cleared++
			}
		},
	})
	cell.Display(rich{})
	cell.DisplayAs("a", 3)
	cell.Update("a", map[string]any{"text/html": "<i>x</i>", "text/plain": "x"})
	cell.Clear(true)
	cancel()
	if cell.Context().Err() == nil {
		t.Error("Context is not the host's")
	}
	restore()
	cell.Display("after")
	if len(got) != 3 || cleared != 1 {
		t.Fatalf("host saw %d displays and %d clears, want 3 and 1", len(got), cleared)
	}
	if got[0].forms["text/html"] != "<b>rich</b>" || got[0].forms["text/plain"] != "rich" {
		t.Errorf("forms of a rich value: %v", got[0].forms)
	}
	if got[1].forms["text/plain"] != "3" || got[1].id != "a" || got[1].update {
		t.Errorf("display with an id: %+v", got[1])
	}
	if got[2].forms["text/html"] != "<i>x</i>" || !got[2].update {
		t.Errorf("update: %+v", got[2])
	}
}

func TestFormsOfAnOrdinaryMap(t *testing.T) {
	f := cell.Forms(map[string]any{"volts": 1})
	if len(f) != 1 || f["text/plain"] != "map[volts:1]" {
		t.Errorf("forms of a map that is no set of forms: %v", f)
	}
}

func TestReportFromManyGoroutines(t *testing.T) {
	var mu sync.Mutex
	var n int64
	ctx := cell.WithProgress(context.Background(), func(p cell.Progress) {
		mu.Lock()
		n += p.Done
		mu.Unlock()
	})
	var wg sync.WaitGroup
	for range 8 {
		wg.Add(1)
		go func() {
			defer wg.Done()
			for range 100 {
				cell.Report(ctx, "x", 1, 0)
			}
		}()
	}
	wg.Wait()
	if n != 800 {
		t.Errorf("%d reports arrived, want 800", n)
	}
}

func TestNilSinkSilences(t *testing.T) {
	outer := cell.WithProgress(context.Background(), func(cell.Progress) { t.Error("silenced work reported") })
	cell.Report(cell.WithProgress(outer, nil), "x", 1, 1)
}

func BenchmarkReportSilent(b *testing.B) {
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	for i := range b.N {
		cell.Report(ctx, "trials", int64(i), int64(b.N))
	}
}
