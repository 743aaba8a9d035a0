package safefile

import (
	"errors"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
)

var errBroken = errors.New("the source broke off")

// folder returns an empty folder and a check that it holds just the names.
func folder(t *testing.T) (string, func(names ...string)) {
	dir := t.TempDir()
	return dir, func(names ...string) {
		t.Helper()
		entries, err := os.ReadDir(dir)
		if err != nil {
			t.Fatal(err)
		}
		var have []string
		for _, e := range entries {
			have = append(have, e.Name())
		}
		if strings.Join(have, " ") != strings.Join(names, " ") {
			t.Errorf("the folder holds %q, want %q", have, names)
		}
	}
}

func content(t *testing.T, path string) string {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

func TestReplace(t *testing.T) {
	dir, holds := folder(t)
	path := filepath.Join(dir, "result.json")
	for _, text := range []string{"first", "a longer second", "", "third"} {
		if err := WriteBytes(path, []byte(text)); err != nil {
			t.Fatal(err)
		}
		if got := content(t, path); got != text {
			t.Errorf("the file holds %q, want %q", got, text)
		}
		holds("result.json")
	}
	if runtime.GOOS != "windows" {
		info, err := os.Stat(path)
		if err != nil {
			t.Fatal(err)
		}
		if info.Mode().Perm() != mode {
			t.Errorf("mode %v, want %v", info.Mode().Perm(), mode)
		}
	}
}

// TestFailingWriter: the old file stays, no temporary file does, at every size
// of what was written before the failure.
func TestFailingWriter(t *testing.T) {
	dir, holds := folder(t)
	path := filepath.Join(dir, "result.json")
	if err := WriteBytes(path, []byte("old")); err != nil {
		t.Fatal(err)
	}
	for _, n := range []int{0, 1, bufferSize, 3*bufferSize + 7} {
		err := Write(path, func(w io.Writer) error {
			if _, err := w.Write(make([]byte, n)); err != nil {
				return err
			}
			return errBroken
		})
		if !errors.Is(err, errBroken) || !strings.Contains(err.Error(), path) {
			t.Errorf("after %d bytes: %v", n, err)
		}
		if got := content(t, path); got != "old" {
			t.Errorf("after %d bytes the file holds %q", n, got)
		}
		holds("result.json")
	}
	// The same without an old file: none appears.
	if err := Write(filepath.Join(dir, "new"), func(io.Writer) error { return errBroken }); !errors.Is(err, errBroken) {
		t.Error(err)
	}
	holds("result.json")
}

func TestPanickingWriter(t *testing.T) {
	dir, holds := folder(t)
	path := filepath.Join(dir, "result.json")
	if err := WriteBytes(path, []byte("old")); err != nil {
		t.Fatal(err)
	}
	func() {
		defer func() {
			if recover() == nil {
				t.Error("the panic is swallowed")
			}
		}()
		err := Write(path, func(io.Writer) error { panic("broken") })
		t.Errorf("Write returned %v", err)
	}()
	if got := content(t, path); got != "old" {
		t.Errorf("the file holds %q", got)
	}
	holds("result.json")
}

func TestRefused(t *testing.T) {
	dir, holds := folder(t)
	file := filepath.Join(dir, "file")
	if err := WriteBytes(file, []byte("x")); err != nil {
		t.Fatal(err)
	}
	if err := os.Mkdir(filepath.Join(dir, "sub"), 0o755); err != nil {
		t.Fatal(err)
	}
	for path, want := range map[string]string{
		filepath.Join(dir, "sub"):              "is a folder",
		filepath.Join(file, "below"):           "",
		filepath.Join(dir, "missing", "below"): "no such file",
		"":                                     "no file name",
	} {
		called := false
		err := Write(path, func(io.Writer) error { called = true; return nil })
		if err == nil || called || !strings.Contains(err.Error(), path) {
			t.Errorf("%q: %v, content asked for: %v", path, err, called)
		} else if runtime.GOOS != "windows" && !strings.Contains(err.Error(), want) {
			t.Errorf("%q: %v; want %q in it", path, err, want)
		}
	}
	if err := Write(file, nil); err == nil {
		t.Error("a file is written without content")
	}
	if got := content(t, file); got != "x" {
		t.Errorf("the file holds %q", got)
	}
	holds("file", "sub")
}

func TestLinks(t *testing.T) {
	dir, _ := folder(t)
	target, link := filepath.Join(dir, "target"), filepath.Join(dir, "link")
	if err := WriteBytes(target, []byte("old")); err != nil {
		t.Fatal(err)
	}
	if err := os.Symlink(target, link); err != nil {
		t.Skip("links can't be made here: ", err)
	}
	if err := WriteBytes(link, []byte("new")); err != nil {
		t.Fatal(err)
	}
	info, err := os.Lstat(link)
	if err != nil || info.Mode()&fs.ModeSymlink == 0 || content(t, target) != "new" {
		t.Errorf("the link is %v (%v), its target holds %q", info.Mode(), err, content(t, target))
	}
	for name, to := range map[string]string{"dangling": filepath.Join(dir, "nothing"), "device": os.DevNull, "folder": dir} {
		path := filepath.Join(dir, name)
		if err := os.Symlink(to, path); err != nil {
			t.Fatal(err)
		}
		if err := WriteBytes(path, []byte("x")); err == nil {
			t.Errorf("a %s link is written through", name)
		}
		if _, err := os.Lstat(path); err != nil {
			t.Errorf("the %s link is gone: %v", name, err)
		}
	}
}

func TestDevice(t *testing.T) {
	if runtime.GOOS == "windows" {
		t.Skip("devices are no files here")
	}
	err := WriteBytes(os.DevNull, []byte("x"))
	if err == nil || !strings.Contains(err.Error(), "a device") {
		t.Errorf("writing to %s: %v", os.DevNull, err)
	}
}

// TestReadOnlyFolder needs a user whom modes bind.
func TestReadOnlyFolder(t *testing.T) {
	if os.Geteuid() <= 0 {
		t.Skip("modes don't bind root, nor folders on Windows; TestRefused covers a folder that can't be written to by a path below a file")
	}
	dir, holds := folder(t)
	path := filepath.Join(dir, "result.json")
	if err := WriteBytes(path, []byte("old")); err != nil {
		t.Fatal(err)
	}
	if err := os.Chmod(dir, 0o555); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := os.Chmod(dir, 0o755); err != nil {
			t.Error(err)
		}
	})
	if err := WriteBytes(path, []byte("new")); !errors.Is(err, fs.ErrPermission) {
		t.Errorf("writing into a read-only folder: %v", err)
	}
	if got := content(t, path); got != "old" {
		t.Errorf("the file holds %q", got)
	}
	holds("result.json")
}

// TestTogether: many writers of one file leave one of their texts, whole.
func TestTogether(t *testing.T) {
	dir, holds := folder(t)
	path := filepath.Join(dir, "result.json")
	const writers = 8
	done := make(chan error, writers)
	for i := range writers {
		text := strings.Repeat(string(rune('a'+i)), 2*bufferSize)
		go func() { done <- WriteBytes(path, []byte(text)) }()
	}
	for range writers {
		if err := <-done; err != nil {
			t.Error(err)
		}
	}
	got := content(t, path)
	if len(got) != 2*bufferSize || strings.Trim(got, got[:1]) != "" {
		t.Errorf("%d bytes of several writers", len(got))
	}
	holds("result.json")
}
