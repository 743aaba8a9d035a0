package gointerp

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"log"
	"os"
	"reflect"
	"runtime"
	"sync"
	"time"

	"github.com/cosmos72/gomacro/base"
	"github.com/cosmos72/gomacro/gls"
	"github.com/cosmos72/gomacro/imports"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/kernel"
)

// exitRequest is what code panics with that asked to end the process or its goroutine.
type exitRequest struct{ what string }

func (e exitRequest) String() string {
	return e.what + " would end the kernel; it ended the cell instead"
}

func goroutine() uint64 { return uint64(gls.GoID()) }

var (
	rebindOnce sync.Once
	cellGoid   func() uint64 // of the goroutine that runs cells
)

// rebind replaces, in the symbol tables that cells see, the functions that would end or hang the kernel, and those
// that read and write the process's streams.
func rebind() {
	rebindOnce.Do(func() {
		log.SetOutput(errorWriter{})
		bind := func(path, name string, v any) {
			if p, ok := imports.Packages[path]; ok {
				p.Binds[name] = reflect.ValueOf(v)
			}
		}
		exit := func(code int) { panic(exitRequest{fmt.Sprintf("os.Exit(%d)", code)}) }
		bind("os", "Exit", exit)
		bind("syscall", "Exit", exit)
		bind("runtime", "Goexit", func() { panic(exitRequest{"runtime.Goexit"}) })
		bind("log", "Fatal", func(v ...any) { log.Print(v...); panic(exitRequest{"log.Fatal"}) })
		bind("log", "Fatalf", func(f string, v ...any) { log.Printf(f, v...); panic(exitRequest{"log.Fatalf"}) })
		bind("log", "Fatalln", func(v ...any) { log.Println(v...); panic(exitRequest{"log.Fatalln"}) })
		bind("time", "Sleep", sleep)
		bind("time", "AfterFunc", func(d time.Duration, f func()) *time.Timer {
			return time.AfterFunc(d, func() { defer reportFault(); f() })
		})

		bind("fmt", "Print", func(v ...any) (int, error) { return fmt.Fprint(stdout(), v...) })
		bind("fmt", "Println", func(v ...any) (int, error) { return fmt.Fprintln(stdout(), v...) })
		bind("fmt", "Printf", func(f string, v ...any) (int, error) { return fmt.Fprintf(stdout(), f, v...) })
		bind("fmt", "Fprint", func(w io.Writer, v ...any) (int, error) { return fmt.Fprint(ordered(w), v...) })
		bind("fmt", "Fprintln", func(w io.Writer, v ...any) (int, error) { return fmt.Fprintln(ordered(w), v...) })
		bind("fmt", "Fprintf", func(w io.Writer, f string, v ...any) (int, error) { return fmt.Fprintf(ordered(w), f, v...) })
		bind("fmt", "Scan", func(v ...any) (int, error) { return fmt.Fscan(stdin, v...) })
		bind("fmt", "Scanln", func(v ...any) (int, error) { return fmt.Fscanln(stdin, v...) })
		bind("fmt", "Scanf", func(f string, v ...any) (int, error) { return fmt.Fscanf(stdin, f, v...) })
		if p, ok := imports.Packages["os"]; ok {
			p.Binds["Stdin"] = reflect.ValueOf(&stdin).Elem()
		}
	})
}

// sleep is time.Sleep that ends with the cell that called it.
func sleep(d time.Duration) {
	ctx := cell.Context()
	if ctx.Done() == nil || cellGoid == nil || goroutine() != cellGoid() {
		time.Sleep(d)
		return
	}
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-t.C:
	case <-ctx.Done():
		panic(base.SigInterrupt) // as the interpreter does at a statement
	}
}

// stdout and ordered keep the order between the two streams: each is flushed before the other is written.
func stdout() io.Writer {
	kernel.Writing("stdout")
	return os.Stdout
}

func ordered(w io.Writer) io.Writer {
	switch w {
	case os.Stdout:
		kernel.Writing("stdout")
	case os.Stderr:
		kernel.Writing("stderr")
	}
	return w
}

// errorWriter writes to whatever standard error is at the time.
type errorWriter struct{}

func (errorWriter) Write(p []byte) (int, error) {
	kernel.Writing("stderr")
	return os.Stderr.Write(p)
}

// cellInput is standard input as cells see it: each line is asked from the front end when it is needed.
type cellInput struct {
	mu   sync.Mutex
	rest bytes.Buffer
}

var stdin = new(cellInput)

// fill asks for a line when there is nothing left of the one before. The lock is held.
func (c *cellInput) fill() error {
	if c.rest.Len() > 0 {
		return nil
	}
	line, err := cell.Input("")
	if err != nil {
		if ctx := cell.Context(); ctx.Err() != nil {
			return context.Canceled
		}
		return err
	}
	c.rest.WriteString(line + "\n")
	return nil
}

// Read returns bytes of the current line, and asks for the next one when there are none.
func (c *cellInput) Read(p []byte) (int, error) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if len(p) == 0 {
		return 0, nil
	}
	if err := c.fill(); err != nil {
		return 0, err
	}
	return c.rest.Read(p)
}

// ReadRune lets fmt's scanning stop at the end of what it needs.
func (c *cellInput) ReadRune() (rune, int, error) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if err := c.fill(); err != nil {
		return 0, 0, err
	}
	return c.rest.ReadRune()
}

// UnreadRune takes back the latest ReadRune.
func (c *cellInput) UnreadRune() error {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.rest.UnreadRune()
}

// reportFault turns a panic of a goroutine into a line on standard error. It is deferred.
func reportFault() {
	if fault := recover(); fault != nil {
		reportPanic(fault)
	}
}

func reportPanic(fault any) {
	var text string
	switch f := fault.(type) {
	case exitRequest:
		text = f.what + " in a goroutine ended that goroutine only"
	case cell.Failure:
		text = "goroutine failed: " + f.Error()
	case runtime.Error:
		text = "panic in a goroutine: " + f.Error()
	case error:
		text = "panic in a goroutine: " + f.Error()
	default:
		text = "panic in a goroutine: " + safeText(f)
	}
	kernel.Writing("stderr")
	fmt.Fprintln(os.Stderr, text)
}
