//go:build linux || darwin

package main

import (
	"bytes"
	"errors"
	"fmt"
	"maps"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"
)

// long says that the long run is wanted: more of everything, and what takes root.
var long = os.Getenv("GUARDRING_LONG") != ""

// command returns the path of a file that runs the command: the test program
// itself under another name, see TestMain.
func command(t *testing.T) string {
	t.Helper()
	exe, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	link := filepath.Join(t.TempDir(), "guardring")
	if err := os.Symlink(exe, link); err != nil {
		t.Fatal(err)
	}
	return link
}

// dataset copies a dataset of the repository.
func dataset(t *testing.T, name, to string) {
	t.Helper()
	if err := os.CopyFS(to, os.DirFS(filepath.Join("..", "..", "datasets", name))); err != nil {
		t.Fatal(err)
	}
}

// contents reads every file under dir.
func contents(t *testing.T, dir string) map[string]string {
	t.Helper()
	all := map[string]string{}
	err := filepath.WalkDir(dir, func(path string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		name, err := filepath.Rel(dir, path)
		all[name] = string(data)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return all
}

// runCommand runs the command to its end, as another user when asked to.
func runCommand(t *testing.T, exe, dir string, as *syscall.Credential, args ...string) (code int, output string) {
	t.Helper()
	c := exec.Command(exe, args...)
	c.Dir = dir
	if as != nil {
		c.SysProcAttr = &syscall.SysProcAttr{Credential: as}
	}
	var out bytes.Buffer
	c.Stdout, c.Stderr = &out, &out
	err := c.Run()
	var exit *exec.ExitError
	if err != nil && !errors.As(err, &exit) {
		t.Fatal(err)
	}
	return c.ProcessState.ExitCode(), out.String()
}

// ordinary returns what runs the command as a user who is not root: the ordinary
// user of this machine, or nobody's number when the tests run as root. dir is made
// reachable for that user, and the command is copied into it.
func ordinary(t *testing.T, dir string) (exe string, as *syscall.Credential) {
	t.Helper()
	if os.Getuid() != 0 {
		return command(t), nil
	}
	for up := dir; up != filepath.Clean(os.TempDir()) && up != "/"; up = filepath.Dir(up) {
		if err := os.Chmod(up, 0o755); err != nil {
			t.Fatal(err)
		}
	}
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	program, err := os.ReadFile(self)
	if err != nil {
		t.Fatal(err)
	}
	exe = filepath.Join(dir, "guardring")
	if err := os.WriteFile(exe, program, 0o755); err != nil {
		t.Fatal(err)
	}
	return exe, &syscall.Credential{Uid: 65534, Gid: 65534}
}

// A folder that may not be written to, for an ordinary user: exit code 2, a message
// that names the file, and the old output as it was.
func TestReadOnlyFolder(t *testing.T) {
	dir := t.TempDir()
	benchOf("attracted-disc")(t, dir)
	benchOf("field-meter")(t, filepath.Join(dir, "meter"))
	exe, as := ordinary(t, dir)
	out := filepath.Join(dir, "out")
	if err := os.Mkdir(out, 0o755); err != nil {
		t.Fatal(err)
	}
	old := map[string]string{"r.html": "old report", "p.zip": "old pack"}
	for name, text := range old {
		if err := os.WriteFile(filepath.Join(out, name), []byte(text), 0o444); err != nil {
			t.Fatal(err)
		}
	}
	if err := os.Chmod(out, 0o555); err != nil {
		t.Fatal(err)
	}
	defer os.Chmod(out, 0o755)
	for _, c := range []struct {
		names string
		args  []string
	}{
		{"r.html", []string{"reduce", "bench", "--law-only", "--html", "out/r.html"}},
		{"out", []string{"reduce", "bench", "--law-only", "--figures", "out"}},
		{"c.pdf", []string{"certificate", "meter/bench", "--trials", "200", "-o", "out/c.pdf"}},
		{"p.zip", []string{"pack", "bench", "--law-only", "-o", "out/p.zip"}},
		{"out/fresh", []string{"simulate", "bench", "-o", "out/fresh"}},
		{"out/fresh", []string{"new", "out/fresh", "--model", "attracted-disc"}},
	} {
		code, text := runCommand(t, exe, dir, as, c.args...)
		if code != exitBad || !strings.Contains(text, c.names) || !strings.Contains(text, "this account may not write into the folder out; change its permissions") {
			t.Errorf("%v: exit code %d: %s", c.args, code, text)
		}
		if got := contents(t, out); !maps.Equal(got, old) {
			t.Errorf("%v: left %v", c.args, got)
		}
	}
}

// A full disk and one mounted read-only, on a small file system in memory.
func TestFullDisk(t *testing.T) {
	if !long || os.Getuid() != 0 {
		t.Skip("mounting takes root and GUARDRING_LONG=1")
	}
	dir := t.TempDir()
	benchOf("attracted-disc")(t, dir)
	disk := filepath.Join(dir, "disk")
	if err := os.Mkdir(disk, 0o755); err != nil {
		t.Fatal(err)
	}
	mount := func(args ...string) {
		if out, err := exec.Command("mount", args...).CombinedOutput(); err != nil {
			t.Skipf("mount: %v: %s", err, out)
		}
	}
	mount("-t", "tmpfs", "-o", "size=48k", "tmpfs", disk)
	defer exec.Command("umount", disk).Run()
	if err := os.WriteFile(filepath.Join(disk, "r.html"), []byte("old"), 0o644); err != nil {
		t.Fatal(err)
	}
	exe := command(t)
	try := func(want string, args ...string) {
		t.Helper()
		code, text := runCommand(t, exe, dir, nil, args...)
		if code != exitBad || !strings.Contains(text, want) {
			t.Errorf("%v: exit code %d: %s", args, code, text)
		}
		if got := contents(t, disk); len(got) != 1 || got["r.html"] != "old" {
			t.Errorf("%v leaves %d files", args, len(got))
		}
	}
	try("no space left", "reduce", "bench", "--law-only", "--html", "disk/r.html")
	try("no space left", "reduce", "bench", "--law-only", "--html", "disk/r.html", "--figures", "disk")
	dataset(t, "field-meter", filepath.Join(dir, "meter"))
	try("no space left", "certificate", "meter", "--trials", "200", "-o", "disk/c.pdf", "-o", "disk/c.html")
	mount("-o", "remount,ro", disk)
	try("read-only file system", "reduce", "bench", "--law-only", "--html", "disk/r.html")
	try("read-only file system", "pack", "bench", "--law-only", "-o", "disk/p.zip")
}

// A file that is named but not there.
func TestVanishedInput(t *testing.T) {
	dir := t.TempDir()
	benchOf("attracted-disc")(t, dir)
	if err := os.Remove(filepath.Join(dir, "bench", "readings.csv")); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "r.html"), []byte("old"), 0o644); err != nil {
		t.Fatal(err)
	}
	code, text := runCommand(t, command(t), dir, nil, "reduce", "bench", "--law-only", "--html", "r.html")
	if code != exitBad || !strings.Contains(text, "readings.csv") {
		t.Errorf("exit code %d: %s", code, text)
	}
	if got := contents(t, dir); got["r.html"] != "old" {
		t.Error("the old report is gone")
	}
}

// Readings that grow while they are read are no record of a measurement that has
// ended: the run says so, or has read all of one state.
func TestInputChangesWhileRead(t *testing.T) {
	dir := t.TempDir()
	manyRows(t, filepath.Join(dir, "bench"), 60_000)
	if err := os.WriteFile(filepath.Join(dir, "r.html"), []byte("old"), 0o644); err != nil {
		t.Fatal(err)
	}
	f, err := os.OpenFile(filepath.Join(dir, "bench", "readings.csv"), os.O_APPEND|os.O_WRONLY, 0)
	if err != nil {
		t.Fatal(err)
	}
	stop := make(chan struct{})
	var wg sync.WaitGroup
	wg.Add(1)
	go func() {
		defer wg.Done()
		defer f.Close()
		for {
			select {
			case <-stop:
				return
			case <-time.After(200 * time.Microsecond):
				if _, err := f.WriteString("1,reading,1,+,3.0000,4.0000,2.0\n"); err != nil {
					return
				}
			}
		}
	}()
	code, text := runCommand(t, command(t), dir, nil, "reduce", "bench", "--law-only", "--html", "r.html")
	close(stop)
	wg.Wait()
	if code != exitBad || !strings.Contains(text, "changed while it was read") {
		t.Errorf("exit code %d: %s", code, text)
	}
	if got := contents(t, dir); got["r.html"] != "old" {
		t.Error("the old report is gone")
	}
}

// manyRows makes an invented bench of n rows from the demonstration: its rows
// again and again, at later times and under new settings of the gap.
func manyRows(t *testing.T, dir string, n int) {
	t.Helper()
	dataset(t, "attracted-disc", dir)
	toml, err := os.ReadFile(filepath.Join(dir, "bench.toml"))
	if err != nil {
		t.Fatal(err)
	}
	text := string(toml)
	for {
		i := strings.Index(text, "[[exclude]]")
		if i < 0 {
			break
		}
		rest := text[i+len("[[exclude]]"):]
		if j := strings.Index(rest, "\n["); j >= 0 {
			text = text[:i] + rest[j+1:]
		} else {
			text = text[:i]
		}
	}
	if err := os.WriteFile(filepath.Join(dir, "bench.toml"), []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(filepath.Join(dir, "readings.csv"))
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.Split(strings.TrimSpace(string(data)), "\n")
	var out strings.Builder
	out.WriteString(lines[0] + "\n")
	for i := range n {
		_, rest, _ := strings.Cut(lines[1+i%(len(lines)-1)], ",")
		fmt.Fprintf(&out, "%d,%s\n", 40*i, rest)
	}
	if err := os.WriteFile(filepath.Join(dir, "readings.csv"), []byte(out.String()), 0o644); err != nil {
		t.Fatal(err)
	}
}

// Two runs on one output: whoever comes last leaves all of it.
func TestTwoRunsDoNotMix(t *testing.T) {
	dir := t.TempDir()
	dataset(t, "attracted-disc", filepath.Join(dir, "a"))
	dataset(t, "sphere-plane", filepath.Join(dir, "b"))
	exe := command(t)
	args := func(b, out string) []string {
		return []string{"reduce", b, "--law-only", "--html", filepath.Join(out, "r.html"), "--figures", out}
	}
	want := map[string]map[string]string{}
	for _, b := range []string{"a", "b"} {
		if code, text := runCommand(t, exe, dir, nil, args(b, "only-"+b)...); code != exitDone {
			t.Fatalf("exit code %d: %s", code, text)
		}
		want[b] = contents(t, filepath.Join(dir, "only-"+b))
	}
	rounds := 3
	if long {
		rounds = 30
	}
	for range rounds {
		var wg sync.WaitGroup
		for _, b := range []string{"a", "b"} {
			wg.Add(1)
			go func() {
				defer wg.Done()
				if code, text := runCommand(t, exe, dir, nil, args(b, "both")...); code != exitDone {
					t.Errorf("exit code %d: %s", code, text)
				}
			}()
		}
		wg.Wait()
		got := contents(t, filepath.Join(dir, "both"))
		winner := "a"
		if got["r.html"] == want["b"]["r.html"] {
			winner = "b"
		}
		for name, text := range want[winner] {
			if got[name] != text {
				t.Errorf("the report is of %s, but %s is not", winner, name)
			}
		}
		for name := range got {
			if want["a"][name] == "" && want["b"][name] == "" {
				t.Errorf("%s is left", name)
			}
		}
	}
}

// Many benches at once, bad ones among them: each is judged by itself.
func TestBatch(t *testing.T) {
	dir := t.TempDir()
	var args []string
	bad := map[int]string{3: "readings.csv", 11: "bench.toml", 17: "voltage", 30: "bench.toml"}
	for i := range 36 {
		name := fmt.Sprintf("b%02d", i)
		args = append(args, name)
		path := filepath.Join(dir, name)
		manyRows(t, path, 100)
		var err error
		switch i {
		case 3:
			err = os.Remove(filepath.Join(path, "readings.csv"))
		case 11:
			err = os.WriteFile(filepath.Join(path, "bench.toml"), []byte("format = 1\ntitle = "), 0o644)
		case 17:
			err = os.WriteFile(filepath.Join(path, "readings.csv"), []byte("t/s,kind,gap_no,polarity,V,gap/mm,m/g\n"), 0o644)
		case 30:
			err = os.RemoveAll(path)
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	code, text := runCommand(t, command(t), dir, nil, append([]string{"reduce", "--law-only"}, args...)...)
	if code != exitBad || !strings.Contains(text, "4 of 36 benches are bad") {
		t.Errorf("exit code %d: %s", code, text)
	}
	good := 0
	for line := range strings.Lines(text) {
		for i, name := range args {
			if !strings.HasPrefix(line, name+" ") {
				continue
			}
			isBad := strings.Contains(line, "bad: ")
			if want := bad[i]; (want != "") != isBad || !strings.Contains(line, want) {
				t.Errorf("%s: %s", name, line)
			}
			if !isBad {
				good++
			}
		}
	}
	if good != 32 {
		t.Errorf("%d good benches in\n%s", good, text)
	}
}

// A million rows are reduced and reported in 250 MB of resident memory.
func TestMillionRows(t *testing.T) {
	if !long {
		t.Skip("GUARDRING_LONG=1 reduces a million rows")
	}
	dir := t.TempDir()
	path := filepath.Join(dir, "bench")
	manyRows(t, path, 1_000_000)
	toml, err := os.ReadFile(filepath.Join(path, "bench.toml"))
	if err != nil {
		t.Fatal(err)
	}
	// zeros interpolated one by one would be as many effects as there are zeros
	text := strings.Replace(string(toml), `method = "interpolate"`, `method = "linear"`, 1)
	if text == string(toml) {
		t.Fatal("the zero of the demonstration is not interpolated")
	}
	if err := os.WriteFile(filepath.Join(path, "bench.toml"), []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	c := exec.Command(command(t), "reduce", "bench", "--law-only", "--html", "r.html")
	c.Dir = dir
	if out, err := c.CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	resident := c.ProcessState.SysUsage().(*syscall.Rusage).Maxrss
	if runtime.GOOS == "linux" {
		resident *= 1024 // kilobytes there, bytes on macOS
	}
	t.Logf("%d MB resident", resident/1e6)
	if resident > 250e6 {
		t.Errorf("%d bytes resident; at most 250 MB are promised", resident)
	}
	report, err := os.ReadFile(filepath.Join(dir, "r.html"))
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Contains(report, []byte("1000000")) && !bytes.Contains(report, []byte("1 000 000")) {
		t.Error("the report does not say how many rows there were")
	}
}
