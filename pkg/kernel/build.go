package kernel

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"sort"
	"strings"
	"time"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/safefile"
)

const (
	modulePath    = "example.org/guardring"
	gophernotes   = "github.com/gopherdata/gophernotes"
	gophernotesV  = "v0.7.5"
	buildTag      = "guardring_kernel"
	kernelCommand = "cmd/guardring-kernel"
)

// overlaid are the files of gophernotes that are laid over cmd/guardring-kernel: all of its command but main.go.
var overlaid = []string{"complete.go", "display.go", "image.go", "kernel.go", "messages.go", "x_package.go"}

// leftOut are the other Go files of gophernotes' folder, so that a file not named here is noticed.
var leftOut = map[string]bool{"main.go": true, "kernel_test.go": true, "compiler_version.go": true}

// FindSource returns the folder of the module that a kernel is built from: dir itself when it is not empty, else the
// module around the working directory.
func FindSource(dir string) (string, error) {
	start := dir
	if start == "" {
		wd, err := os.Getwd()
		if err != nil {
			return "", err
		}
		start = wd
	}
	abs, err := filepath.Abs(start)
	if err != nil {
		return "", err
	}
	for d := abs; ; d = filepath.Dir(d) {
		data, err := os.ReadFile(filepath.Join(d, "go.mod"))
		if err == nil && moduleLine(data) == modulePath {
			return d, nil
		}
		if dir != "" || filepath.Dir(d) == d {
			break
		}
	}
	if dir != "" {
		return "", fmt.Errorf("%s does not hold module %s: give the folder of a checkout with --source", abs, modulePath)
	}
	return "", fmt.Errorf("no checkout of %s at %s or above it: change into one, or give its folder with --source", modulePath, abs)
}

func moduleLine(gomod []byte) string {
	for _, line := range strings.Split(string(gomod), "\n") {
		if rest, ok := strings.CutPrefix(strings.TrimSpace(line), "module "); ok {
			return strings.TrimSpace(rest)
		}
	}
	return ""
}

// Stamp returns a digest of all that a kernel built from source depends on: the Go release, go.mod, go.sum and every
// file of the module's packages but tests.
func Stamp(ctx context.Context, source string) (string, error) {
	version, err := goCommand(ctx, source, "env", "GOVERSION")
	if err != nil {
		return "", err
	}
	h := sha256.New()
	fmt.Fprintf(h, "%s %s/%s\n", bytes.TrimSpace(version), runtime.GOOS, runtime.GOARCH)
	var files []string
	for _, top := range []string{"go.mod", "go.sum", "pkg", "datasets", kernelCommand} {
		err := filepath.WalkDir(filepath.Join(source, top), func(path string, d fs.DirEntry, err error) error {
			if err != nil {
				if errors.Is(err, fs.ErrNotExist) {
					return nil
				}
				return err
			}
			name := d.Name()
			if d.IsDir() {
				if name == "testdata" {
					return filepath.SkipDir
				}
				return nil
			}
			if d.Type().IsRegular() && !strings.HasSuffix(name, "_test.go") {
				files = append(files, path)
			}
			return nil
		})
		if err != nil {
			return "", err
		}
	}
	sort.Strings(files)
	for _, path := range files {
		data, err := os.ReadFile(path)
		if err != nil {
			return "", err
		}
		rel, err := filepath.Rel(source, path)
		if err != nil {
			return "", err
		}
		fmt.Fprintf(h, "%s %d\n", filepath.ToSlash(rel), len(data))
		h.Write(data)
	}
	return hex.EncodeToString(h.Sum(nil)), nil
}

// goCommand runs the go tool in the module with settings of its own and returns its output.
func goCommand(ctx context.Context, source string, args ...string) ([]byte, error) {
	cmd, err := prepareGo(ctx, source, args...)
	if err != nil {
		return nil, err
	}
	var out, errs bytes.Buffer
	cmd.Stdout, cmd.Stderr = &out, &errs
	if err := cmd.Run(); err != nil {
		return nil, fmt.Errorf("go %s: %w\n%s", strings.Join(args, " "), err, strings.TrimSpace(errs.String()))
	}
	return out.Bytes(), nil
}

func prepareGo(ctx context.Context, source string, args ...string) (*exec.Cmd, error) {
	tool, err := exec.LookPath("go")
	if err != nil {
		return nil, fmt.Errorf("the kernel is compiled on this machine, and there is no go tool in PATH: install Go (https://go.dev/dl/): %w", err)
	}
	cmd := exec.CommandContext(ctx, tool, args...)
	cmd.Dir = source
	for _, kv := range os.Environ() {
		name, _, _ := strings.Cut(kv, "=")
		switch name {
		case "GOFLAGS", "GOOS", "GOARCH", "GOWORK", "GO111MODULE":
		default:
			cmd.Env = append(cmd.Env, kv)
		}
	}
	cmd.Env = append(cmd.Env, "GOWORK=off", "GOFLAGS=-mod=readonly")
	return cmd, nil
}

// gophernotesDir returns the folder of gophernotes' files in the module cache, after a download if need be, and
// checks that it holds the files it should.
func gophernotesDir(ctx context.Context, source string) (string, error) {
	out, err := goCommand(ctx, source, "mod", "download", "-json", gophernotes+"@"+gophernotesV)
	if err != nil {
		return "", err
	}
	var m struct{ Dir, Error string }
	if err := json.Unmarshal(out, &m); err != nil {
		return "", fmt.Errorf("go mod download: %w", err)
	}
	if m.Error != "" {
		return "", fmt.Errorf("go mod download %s@%s: %s", gophernotes, gophernotesV, m.Error)
	}
	return m.Dir, checkGophernotes(m.Dir)
}

func checkGophernotes(dir string) error {
	entries, err := os.ReadDir(dir)
	if err != nil {
		return err
	}
	found := map[string]bool{}
	for _, e := range entries {
		if strings.HasSuffix(e.Name(), ".go") {
			found[e.Name()] = true
		}
	}
	for _, name := range overlaid {
		if !found[name] {
			return fmt.Errorf("%s@%s in %s has no file %s: the module cache is not as published, try `go clean -modcache`", gophernotes, gophernotesV, dir, name)
		}
		delete(found, name)
	}
	for name := range found {
		if !leftOut[name] {
			return fmt.Errorf("%s@%s in %s has an unexpected file %s: the module cache is not as published, try `go clean -modcache`", gophernotes, gophernotesV, dir, name)
		}
	}
	return nil
}

// Build compiles the kernel from the module in source to the file binary, unless that file was built from the very
// same source before. It reports progress through ctx and says whether it compiled anything.
func Build(ctx context.Context, source, binary string, stderr io.Writer) (built bool, err error) {
	binary, err = filepath.Abs(binary)
	if err != nil {
		return false, err
	}
	stamp, err := Stamp(ctx, source)
	if err != nil {
		return false, err
	}
	stampFile := binary + ".stamp"
	if upToDate(binary, stampFile, stamp) {
		return false, nil
	}
	if stderr != nil {
		fmt.Fprintln(stderr, "compiling the kernel; the first time takes some minutes")
	}
	dir, err := gophernotesDir(ctx, source)
	if err != nil {
		return false, err
	}
	if err := os.MkdirAll(filepath.Dir(binary), 0o755); err != nil {
		return false, err
	}
	overlay := struct{ Replace map[string]string }{map[string]string{}}
	for _, name := range overlaid {
		overlay.Replace[filepath.Join(source, filepath.FromSlash(kernelCommand), "gophernotes_"+name)] = filepath.Join(dir, name)
	}
	data, err := json.Marshal(overlay)
	if err != nil {
		return false, err
	}
	overlayFile := binary + ".overlay.json"
	if err := safefile.Write(overlayFile, func(w io.Writer) error { _, err := w.Write(data); return err }); err != nil {
		return false, err
	}
	defer os.Remove(overlayFile)
	fresh := binary + ".new"
	defer os.Remove(fresh)
	args := []string{"build", "-trimpath", "-overlay", overlayFile, "-tags", buildTag, "-ldflags", "-s -w", "-o", fresh}
	if err := compile(ctx, source, args, stderr); err != nil {
		return false, err
	}
	if err := os.Rename(fresh, binary); err != nil {
		return false, err
	}
	return true, safefile.Write(stampFile, func(w io.Writer) error {
		sum, err := fileDigest(binary)
		if err != nil {
			return err
		}
		_, err = fmt.Fprintf(w, "%s\n%s\n", stamp, sum)
		return err
	})
}

// upToDate reports whether binary is what the stamp file says and was built from what stamp digests.
func upToDate(binary, stampFile, stamp string) bool {
	data, err := os.ReadFile(stampFile)
	if err != nil {
		return false
	}
	lines := strings.Fields(string(data))
	if len(lines) != 2 || lines[0] != stamp {
		return false
	}
	sum, err := fileDigest(binary)
	return err == nil && sum == lines[1]
}

func fileDigest(path string) (string, error) {
	f, err := os.Open(path)
	if err != nil {
		return "", err
	}
	defer f.Close()
	h := sha256.New()
	if _, err := io.Copy(h, f); err != nil {
		return "", err
	}
	return hex.EncodeToString(h.Sum(nil)), nil
}

// compile runs go build and reports each package that is compiled: first the number of packages that the kernel
// needs, then how many the tool has named. Packages that are in the build cache already are not named, so that the
// report may end early.
func compile(ctx context.Context, source string, args []string, stderr io.Writer) error {
	list := append([]string{"list", "-deps"}, args[1:len(args)-2]...)
	out, err := goCommand(ctx, source, append(withoutLdflags(list), "./"+kernelCommand)...)
	if err != nil {
		return err
	}
	total := int64(len(strings.Fields(string(out))))
	cmd, err := prepareGo(ctx, source, append(append(args[:1:1], append([]string{"-v"}, args[1:]...)...), "./"+kernelCommand)...)
	if err != nil {
		return err
	}
	lines := &packageLines{}
	lines.report = func(n int64) { cell.Report(ctx, "compiling the kernel", n, total) }
	lines.report(0)
	cmd.Stderr = lines
	cmd.WaitDelay = 5 * time.Second
	if err := cmd.Run(); err != nil {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		if stderr != nil {
			_, _ = stderr.Write(lines.other.Bytes()) // the error below stands for itself
		}
		return fmt.Errorf("compiling the kernel: go build: %w", err)
	}
	lines.report(total)
	return nil
}

func withoutLdflags(args []string) []string {
	var out []string
	for i := 0; i < len(args); i++ {
		if args[i] == "-ldflags" {
			i++
			continue
		}
		out = append(out, args[i])
	}
	return out
}

// packageLines counts the import paths that go build -v prints and keeps everything else.
type packageLines struct {
	report func(n int64)
	n      int64
	rest   []byte
	other  bytes.Buffer
}

func (p *packageLines) Write(data []byte) (int, error) {
	p.rest = append(p.rest, data...)
	for {
		i := bytes.IndexByte(p.rest, '\n')
		if i < 0 {
			return len(data), nil
		}
		line := string(p.rest[:i])
		p.rest = p.rest[i+1:]
		if line != "" && !strings.ContainsAny(line, " \t:#") {
			p.n++
			p.report(p.n)
		} else {
			p.other.WriteString(line + "\n")
		}
	}
}
