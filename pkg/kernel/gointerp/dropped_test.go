package gointerp

import (
	"io"
	"os"
	"strings"
	"testing"
	"time"
)

// TestLateWriter: a goroutine of an earlier cell that took standard output while a
// cell was compiled, and writes when it no longer is, neither holds up the kernel nor
// loses what it writes.
func TestLateWriter(t *testing.T) {
	l, err := newListener()
	if err != nil {
		t.Fatal(err)
	}
	r, w, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	old := os.Stdout
	os.Stdout = w
	defer func() { os.Stdout = old }()
	done := make(chan []string, 1)
	held := make(chan struct{})
	go func() {
		done <- l.during(func() {
			// The reader is held up, so that the mark and what follows it come in one piece.
			l.mu.Lock()
			_, _ = io.WriteString(l.w, "// warning: expression returns 2 values\n")
			time.Sleep(20 * time.Millisecond) // the reader has it in hand
			close(held)
		})
	}()
	<-held
	time.Sleep(20 * time.Millisecond) // the mark is written
	if _, err := io.WriteString(l.w, "late\n"); err != nil {
		t.Fatal(err)
	}
	l.mu.Unlock()
	select {
	case dropped := <-done:
		if len(dropped) != 1 || !strings.Contains(dropped[0], "expression returns") {
			t.Errorf("warnings %q", dropped)
		}
	case <-time.After(10 * time.Second):
		t.Fatal("the compilation waits for a mark that has passed")
	}
	buf := make([]byte, 100)
	if n, err := r.Read(buf); err != nil || string(buf[:n]) != "late\n" {
		t.Errorf("standard output got %q, %v", buf[:n], err)
	}
	if err := l.w.Close(); err != nil {
		t.Fatal(err)
	}
}
