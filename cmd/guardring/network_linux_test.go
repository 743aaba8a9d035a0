package main

import (
	"bytes"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"
)

// Without any network, not even a loopback, everything but the kernel works; and
// nothing listens while it does.
func TestWithoutNetwork(t *testing.T) {
	flags := []string{"-n"}
	if os.Getuid() != 0 {
		flags = []string{"-r", "-n"}
	}
	if out, err := exec.Command("unshare", append(flags, "true")...).CombinedOutput(); err != nil {
		t.Skipf("unshare: %v: %s", err, out)
	}
	dir := t.TempDir()
	dataset(t, "attracted-disc", filepath.Join(dir, "bench"))
	dataset(t, "field-meter", filepath.Join(dir, "meter"))
	dataset(t, "budgets", filepath.Join(dir, "budgets"))
	if err := os.WriteFile(filepath.Join(dir, "line.csv"), []byte("x,y\n1,2.1\n2,3.9\n3,6.2\n4,7.8\n5,10.1\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	exe := command(t)
	for _, args := range [][]string{
		{"reduce", "bench", "--trials", "2000", "--html", "r.html", "--figures", "figures"},
		{"fit", "line.csv", "--formula", "a + b*x", "--response", "y", "--start", "a=0,b=1"},
		{"propagate", "budgets/end-gauge.toml", "--trials", "100000"},
		{"certificate", "meter", "--trials", "2000", "-o", "c.pdf", "-o", "c.html", "-o", "c.xml"},
		{"pack", "bench", "--law-only", "-o", "p.zip"},
		{"replay", "p.zip"},
	} {
		c := exec.Command("unshare", append(append(append([]string{}, flags...), exe), args...)...)
		c.Dir = dir
		var out bytes.Buffer
		c.Stdout, c.Stderr = &out, &out
		if err := c.Start(); err != nil {
			t.Fatal(err)
		}
		done := make(chan error, 1)
		go func() { done <- c.Wait() }()
		looked := 0
	watch:
		for {
			select {
			case err := <-done:
				if err != nil {
					t.Errorf("%v: %v\n%s", args, err, out.String())
				}
				break watch
			case <-time.After(2 * time.Millisecond):
				if sockets(t, c.Process.Pid, args) {
					looked++
				}
			}
		}
		t.Logf("%s: looked %d times", args[0], looked)
	}
}

// sockets fails the test when a socket of the process's own network stands, and
// reports whether it could look.
func sockets(t *testing.T, pid int, args []string) bool {
	self, err1 := os.Readlink("/proc/self/ns/net")
	its, err2 := os.Readlink("/proc/" + strconv.Itoa(pid) + "/ns/net")
	if err1 != nil || err2 != nil || self == its {
		return false // not started yet, or ended
	}
	for _, kind := range []string{"tcp", "tcp6", "udp", "udp6", "raw"} {
		data, err := os.ReadFile("/proc/" + strconv.Itoa(pid) + "/net/" + kind)
		if err != nil {
			continue // ended meanwhile, or no such protocol here
		}
		if lines := strings.Split(strings.TrimSpace(string(data)), "\n"); len(lines) > 1 {
			t.Errorf("%v opens a %s socket: %s", args, kind, lines[1])
		}
	}
	return true
}
