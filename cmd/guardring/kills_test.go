//go:build linux || darwin

package main

import (
	"bytes"
	"context"
	"errors"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"syscall"
	"testing"
	"time"

	"example.org/guardring/pkg/kernel"
)

// victim is a command to be killed while it writes.
type victim struct {
	name    string
	args    []string // run in the folder
	outputs []string // what it leaves, relative to the folder
	old     bool     // whether old outputs stand there before
	prepare func(t *testing.T, dir string)
	starts  string // a program that the command starts: none of it may outlive the command for long
}

func benchOf(name string) func(t *testing.T, dir string) {
	return func(t *testing.T, dir string) { dataset(t, name, filepath.Join(dir, "bench")) }
}

// TestKilled kills commands at random moments, every second time just after a
// temporary file has appeared: old output stays whole, new output is whole or
// absent, nothing but the documented temporary file is left, and the next run
// is not hindered.
func TestKilled(t *testing.T) {
	victims := []victim{
		{name: "reduce", prepare: benchOf("attracted-disc"), old: true,
			args:    []string{"reduce", "bench", "--law-only", "--html", "out/r.html", "--figures", "out"},
			outputs: []string{"out/r.html", "out/residuals.svg"}},
		{name: "certificate", prepare: benchOf("field-meter"),
			args:    []string{"certificate", "bench", "--trials", "200", "-o", "out/c.html", "-o", "out/c.pdf", "-o", "out/c.xml"},
			outputs: []string{"out/c.html", "out/c.pdf", "out/c.xml"}},
		{name: "pack", old: true,
			prepare: func(t *testing.T, dir string) {
				benchOf("attracted-disc")(t, dir)
				if err := os.Mkdir(filepath.Join(dir, "out"), 0o755); err != nil {
					t.Fatal(err)
				}
			},
			args:    []string{"pack", "bench", "--law-only", "--date", "2026-01-01", "-o", "out/p.zip"},
			outputs: []string{"out/p.zip"}},
	}
	if !testing.Short() { // it takes a kernel
		victims = append(victims, replayVictim(t))
	}
	kills := 25
	switch {
	case long:
		kills = 200
	case testing.Short():
		kills = 3
	}
	exe := command(t)
	for _, v := range victims {
		t.Run(v.name, func(t *testing.T) { v.kill(t, exe, kills) })
	}
}

// replayVictim replays a small notebook over itself.
func replayVictim(t *testing.T) victim {
	t.Helper()
	dir := t.TempDir()
	source, err := kernel.FindSource("")
	if err != nil {
		t.Fatal(err)
	}
	bin := filepath.Join(dir, "kernel")
	if _, err := kernel.Build(context.Background(), source, bin, os.Stderr); err != nil {
		t.Fatal(err)
	}
	const notebook = `{"cells":[{"cell_type":"code","execution_count":null,"id":"a","metadata":{},"outputs":[],"source":["1.5 + 2"]}],` +
		`"metadata":{"kernelspec":{"display_name":"Go","language":"go","name":"guardring"},"language_info":{"name":"go"}},"nbformat":4,"nbformat_minor":5}`
	return victim{name: "replay", args: []string{"replay", "out/n.ipynb", "--overwrite", "--kernel", bin}, outputs: []string{"out/n.ipynb"}, starts: bin,
		prepare: func(t *testing.T, dir string) {
			if err := os.MkdirAll(filepath.Join(dir, "out"), 0o755); err != nil {
				t.Fatal(err)
			}
			if err := os.WriteFile(filepath.Join(dir, "out", "n.ipynb"), []byte(notebook), 0o644); err != nil {
				t.Fatal(err)
			}
		}}
}

func (v *victim) kill(t *testing.T, exe string, kills int) {
	dir := t.TempDir()
	v.prepare(t, dir)
	before := contents(t, dir)
	start := func() (*exec.Cmd, *bytes.Buffer) {
		c := exec.Command(exe, v.args...)
		c.Dir = dir
		out := new(bytes.Buffer)
		c.Stdout, c.Stderr = out, out
		if err := c.Start(); err != nil {
			t.Fatal(err)
		}
		return c, out
	}
	began := time.Now()
	c, out := start()
	var exit *exec.ExitError
	if err := c.Wait(); err != nil && !(errors.As(err, &exit) && exit.ExitCode() == exitDifference) {
		t.Fatalf("%v\n%s", err, out)
	}
	took := time.Since(began)
	whole := contents(t, dir)
	for _, name := range v.outputs {
		if whole[name] == "" || whole[name] == before[name] {
			t.Fatalf("%s was not written", name)
		}
	}
	old := map[string]string{}
	for name := range whole {
		if text, ok := before[name]; ok {
			old[name] = text
		} else if v.old {
			old[name] = "old " + name
		}
	}
	r := rand.New(rand.NewPCG(1, 2))
	stopped := 0
	for n := range kills {
		for name := range whole {
			path := filepath.Join(dir, name)
			if text, ok := old[name]; !ok {
				os.Remove(path) // it may be absent
			} else if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
				t.Fatal(err)
			}
		}
		c, _ := start()
		if n%2 == 0 {
			time.Sleep(time.Duration(r.Float64() * 1.1 * float64(took)))
		} else {
			awaitTemporary(dir, 20*took)
			time.Sleep(time.Duration(r.Float64() * float64(3*time.Millisecond)))
		}
		if err := c.Process.Signal(syscall.SIGKILL); err != nil && !errors.Is(err, os.ErrProcessDone) {
			t.Fatal(err)
		}
		if c.Wait() != nil {
			stopped++
		}
		for name, text := range contents(t, dir) {
			base := filepath.Base(name)
			switch {
			case strings.HasPrefix(base, ".guardring-") && strings.HasSuffix(base, ".tmp"):
				os.Remove(filepath.Join(dir, name)) // documented, and not in the way
			case whole[name] == "":
				t.Errorf("kill %d leaves %s", n+1, name)
			case text != whole[name] && text != old[name]:
				t.Errorf("kill %d: %s is neither the old nor the new one (%d bytes; old %d, new %d)", n+1, name, len(text), len(old[name]), len(whole[name]))
			}
		}
		for name := range old {
			if _, err := os.Stat(filepath.Join(dir, name)); err != nil {
				t.Errorf("kill %d: %v", n+1, err)
			}
		}
	}
	for name := range whole {
		if _, ok := old[name]; !ok {
			os.Remove(filepath.Join(dir, name))
		}
	}
	if c, out := start(); c.Wait() != nil && c.ProcessState.ExitCode() != exitDifference {
		t.Errorf("after the kills: exit code %d: %s", c.ProcessState.ExitCode(), out)
	}
	for name, text := range contents(t, dir) {
		if text != whole[name] {
			t.Errorf("after the kills: %s is not what it was", name)
		}
	}
	if v.starts != "" && runtime.GOOS == "linux" {
		left := running(t, v.starts)
		for end := time.Now().Add(20 * time.Second); len(left) > 0 && time.Now().Before(end); left = running(t, v.starts) {
			time.Sleep(100 * time.Millisecond)
		}
		if len(left) > 0 {
			t.Errorf("%d of the programs that the killed ones started still run: processes %v", len(left), left)
		}
	}
	if stopped == 0 {
		t.Errorf("none of %d kills came before the end", kills)
	}
	t.Logf("%d of %d kills came before the end", stopped, kills)
}

// running lists the processes of a program, as Linux shows them.
func running(t *testing.T, program string) (pids []string) {
	t.Helper()
	all, err := filepath.Glob("/proc/[0-9]*/cmdline")
	if err != nil || len(all) == 0 {
		t.Fatal("no processes can be seen: ", err)
	}
	for _, path := range all {
		if line, err := os.ReadFile(path); err == nil && strings.HasPrefix(string(line), program+"\x00") { // it may end meanwhile
			pids = append(pids, filepath.Base(filepath.Dir(path)))
		}
	}
	return pids
}

// awaitTemporary waits until a temporary file stands anywhere under out.
func awaitTemporary(dir string, most time.Duration) {
	for end := time.Now().Add(most); time.Now().Before(end); time.Sleep(200 * time.Microsecond) {
		if m, _ := filepath.Glob(filepath.Join(dir, "out", ".guardring-*.tmp")); len(m) > 0 {
			return
		}
	}
}
