package main_test

import (
	"bytes"
	"context"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"sync"
	"testing"
	"time"

	"example.org/guardring/pkg/kernel"
)

// binary is the kernel that the tests drive, built once by TestMain; skipReason says why there is none.
var (
	binary     string
	skipReason string
)

func TestMain(m *testing.M) { os.Exit(run(m)) }

func run(m *testing.M) int {
	flag.Parse()
	switch {
	case testing.Short():
		skipReason = "-short: building and driving the kernel takes a while"
	case runtime.GOOS != "linux" && runtime.GOOS != "darwin":
		skipReason = "the kernel is driven on Linux and macOS only"
	default:
		if _, err := exec.LookPath("go"); err != nil {
			skipReason = "no go tool in PATH to build the kernel with"
		}
	}
	if skipReason == "" {
		dir, err := os.MkdirTemp("", "guardring-kernel-test-")
		if err != nil {
			fmt.Fprintln(os.Stderr, err)
			return 1
		}
		defer os.RemoveAll(dir)
		binary = filepath.Join(dir, "guardring-kernel")
		source, err := kernel.FindSource("")
		if err == nil {
			// Build digests every source file first, so that the test cache sees a change in any of them.
			_, err = kernel.Build(context.Background(), source, binary, os.Stderr)
		}
		if err != nil {
			fmt.Fprintln(os.Stderr, "building the kernel:", err)
			return 1
		}
	}
	return m.Run()
}

func needKernel(t testing.TB) {
	t.Helper()
	if skipReason != "" {
		t.Skip(skipReason)
	}
}

// logBuffer takes a kernel's standard error.
type logBuffer struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (l *logBuffer) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.Write(p)
}

func (l *logBuffer) String() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.String()
}

// session is one kernel of a test.
type session struct {
	t   testing.TB
	c   *kernel.Client
	log *logBuffer
}

const patience = 20 * time.Second

func start(t testing.TB) *session {
	t.Helper()
	needKernel(t)
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	log := &logBuffer{}
	launch := kernel.LaunchOf(binary)
	launch.Stderr = log
	c, err := kernel.Start(ctx, launch)
	if err != nil {
		t.Fatalf("starting the kernel: %v\n%s", err, log)
	}
	t.Cleanup(c.Kill)
	return &session{t, c, log}
}

// run runs a cell whatever becomes of it.
func (s *session) run(code string, opt kernel.ExecuteOptions) *kernel.Execution {
	s.t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	e, err := s.c.Execute(ctx, code, opt)
	if err != nil {
		s.t.Fatalf("running %q: %v\n%s", code, err, s.log)
	}
	return e
}

// ok runs a cell that must succeed.
func (s *session) ok(code string) *kernel.Execution {
	s.t.Helper()
	e := s.run(code, kernel.ExecuteOptions{})
	if err := e.Err(); err != nil {
		s.t.Fatalf("cell %q: %v\n%s", code, err, strings.Join(e.Traceback, "\n"))
	}
	return e
}

// value runs a cell that must succeed with a value.
func (s *session) value(code, want string) {
	s.t.Helper()
	if got := s.ok(code).Result(); got != want {
		s.t.Errorf("cell %q: value %q, want %q", code, got, want)
	}
}

// fails runs a cell that must fail with a kind of error, a piece of its message and a place.
func (s *session) fails(code, kind, message, place string) *kernel.Execution {
	s.t.Helper()
	e := s.run(code, kernel.ExecuteOptions{})
	trace := strings.Join(e.Traceback, "\n")
	if e.Status != "error" || e.EName != kind || !strings.Contains(e.EValue, message) || !strings.Contains(trace, place) {
		s.t.Errorf("cell %q:\n got %s %s: %s\n%s\nwant %s … %s … at %s", code, e.Status, e.EName, e.EValue, trace, kind, message, place)
	}
	return e
}
