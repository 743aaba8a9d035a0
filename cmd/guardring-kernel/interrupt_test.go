package main_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"os"
	"strings"
	"syscall"
	"testing"
	"time"

	"example.org/guardring/pkg/kernel"
)

// interrupted runs a cell, interrupts it after a while, and returns how long it then took to end.
func (s *session) interrupted(code string, after time.Duration, stop func() error) (*kernel.Execution, time.Duration) {
	s.t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	done := make(chan *kernel.Execution, 1)
	fail := make(chan error, 1)
	go func() {
		e, err := s.c.Execute(ctx, code, kernel.ExecuteOptions{})
		if err != nil {
			fail <- err
			return
		}
		done <- e
	}()
	time.Sleep(after)
	at := time.Now()
	if err := stop(); err != nil {
		s.t.Fatalf("interrupting %q: %v", code, err)
	}
	for {
		select {
		case e := <-done:
			return e, time.Since(at)
		case err := <-fail:
			s.t.Fatalf("cell %q: %v\n%s", code, err, s.log)
		case <-time.After(500 * time.Millisecond):
			// A request that overtakes its cell finds nothing to stop.
			if err := stop(); err != nil {
				s.t.Fatalf("interrupting %q: %v", code, err)
			}
		}
	}
}

func (s *session) byMessage() error {
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	return s.c.Interrupt(ctx)
}

func (s *session) bySignal() error { return s.c.Signal(os.Interrupt) }

func TestInterrupts(t *testing.T) {
	s := start(t)
	s.ok(`import ("time"; "example.org/guardring/pkg/cell"; "sort")
kept := 17
func fib(n int) int { if n < 2 { return n }; return fib(n-1) + fib(n-2) }
func until(ctx interface{ Done() <-chan struct{} }) { <-ctx.Done() }`)
	for _, code := range []string{
		"for { }",
		"for { kept = kept + 0 }",
		"fib(60)",
		"time.Sleep(time.Hour)",
		"<-cell.Context().Done()\nfor { }",
		"until(cell.Context())\ncell.Fail(cell.Context().Err())",
		"big := make([]int, 200000)\nfor { sort.Slice(big, func(i, j int) bool { return big[i] < big[j] }) }",
		"func() { defer func() { kept = 17 }(); for { } }()",
	} {
		for name, stop := range map[string]func() error{"message": s.byMessage, "signal": s.bySignal} {
			e, took := s.interrupted(code, 60*time.Millisecond, stop)
			if e.Status != "error" || e.EName != kernel.Interrupted {
				t.Errorf("%s, by %s: %s %s: %s", code, name, e.Status, e.EName, e.EValue)
			}
			t.Logf("%s, by %s: %v to idle", strings.ReplaceAll(code, "\n", "; "), name, took.Round(time.Millisecond))
		}
		s.value("kept", "17")
	}
	// An interrupt while nothing runs must not reach the next cell.
	if err := s.byMessage(); err != nil {
		t.Fatal(err)
	}
	if err := s.bySignal(); err != nil {
		t.Fatal(err)
	}
	time.Sleep(20 * time.Millisecond)
	s.value("kept + 1", "18")
}

func TestInterruptsAtRandomMoments(t *testing.T) {
	s := start(t)
	s.ok(`count := 0
table := map[string]int{"a": 1}
list := []float64{1, 2, 3}
func step() { for i := 0; i < 50; i++ { count++; list[1] = list[1] } }
func rec(n int) int { if n == 0 { return 0 }; return 1 + rec(n-1) }`)
	cells := []string{"for { step() }", "for { rec(40) }", "for { for i := 0; i < 10; i++ { x := i; _ = x } }", "func() { defer step(); for { rec(5) } }()"}
	r := rand.New(rand.NewPCG(1, 2)) // the same moments in every run, as far as a clock allows
	for i := range 200 {
		e, _ := s.interrupted(cells[i%len(cells)], time.Duration(r.IntN(8000))*time.Microsecond, s.byMessage)
		if e.EName != kernel.Interrupted {
			t.Fatalf("interrupt %d: %s %s %s", i, e.Status, e.EName, e.EValue)
		}
		if i%20 == 0 {
			s.value(`table["a"] + len(list)`, "4")
		}
	}
	s.value("list[0] + list[1] + list[2]", "6")
	s.value("count >= 0 && rec(3) == 3", "true")
}

func TestShutdown(t *testing.T) {
	for _, code := range []string{"", "for { }", "make(chan int) <- 1"} {
		for _, restart := range []bool{false, true} {
			t.Run(fmt.Sprintf("%q restart %v", code, restart), func(t *testing.T) {
				s := start(t)
				ctx, cancel := context.WithTimeout(context.Background(), patience)
				defer cancel()
				if code != "" {
					go s.c.Execute(ctx, code, kernel.ExecuteOptions{})
					time.Sleep(50 * time.Millisecond)
				}
				if err := s.c.Shutdown(ctx, restart); err != nil {
					t.Fatalf("shutdown: %v\n%s", err, s.log)
				}
			})
		}
	}
}

func TestTermination(t *testing.T) {
	for _, code := range []string{"", "for { }", "make(chan int) <- 1"} {
		s := start(t)
		if code != "" {
			ctx, cancel := context.WithTimeout(context.Background(), patience)
			defer cancel()
			go s.c.Execute(ctx, code, kernel.ExecuteOptions{})
			time.Sleep(50 * time.Millisecond)
		}
		if err := s.c.Signal(syscall.SIGTERM); err != nil {
			t.Fatal(err)
		}
		select {
		case <-s.c.Exited():
		case <-time.After(patience):
			t.Errorf("the kernel does not end on SIGTERM while it runs %q", code)
		}
	}
}
