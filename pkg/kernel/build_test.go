package kernel

import (
	"context"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"example.org/guardring/pkg/cell"
)

// fakeGo puts a shell script in the place of the go tool: it "compiles" in no time and writes down how it was called.
func fakeGo(t *testing.T) (source string, calls func() string) {
	t.Helper()
	if runtime.GOOS == "windows" {
		t.Skip("the stand-in for the go tool is a shell script")
	}
	dir := t.TempDir()
	source = filepath.Join(dir, "source")
	modcache := filepath.Join(dir, "gophernotes")
	log := filepath.Join(dir, "log")
	for _, d := range []string{filepath.Join(source, "pkg", "x"), filepath.Join(source, filepath.FromSlash(kernelCommand)), modcache, filepath.Join(dir, "bin")} {
		if err := os.MkdirAll(d, 0o755); err != nil {
			t.Fatal(err)
		}
	}
	write := func(path, text string, mode os.FileMode) {
		t.Helper()
		if err := os.WriteFile(path, []byte(text), mode); err != nil {
			t.Fatal(err)
		}
	}
	write(filepath.Join(source, "go.mod"), "module "+modulePath+"\n", 0o644)
	write(filepath.Join(source, "pkg", "x", "x.go"), "package x\n", 0o644)
	for _, f := range append([]string{"main.go"}, overlaid...) {
		write(filepath.Join(modcache, f), "package main\n", 0o644)
	}
	write(filepath.Join(dir, "bin", "go"), `#!/bin/sh
echo "$GOFLAGS $GOWORK $GOOS: $*" >> "`+log+`"
case "$1" in
env) echo go1.26 ;;
mod) echo '{"Dir":"`+modcache+`"}' ;;
list) echo a; echo b; echo c ;;
build)
	echo a >&2; echo b >&2
	while [ "$1" != -o ]; do shift; done
	echo kernel > "$2"; chmod +x "$2" ;;
esac
`, 0o755)
	t.Setenv("PATH", filepath.Join(dir, "bin")+string(os.PathListSeparator)+os.Getenv("PATH"))
	t.Setenv("JUPYTER_PATH", "")
	return source, func() string {
		data, err := os.ReadFile(log)
		if err != nil && !errors.Is(err, os.ErrNotExist) {
			t.Fatal(err)
		}
		_ = os.Remove(log)
		return string(data)
	}
}

func TestInstallAndRemove(t *testing.T) {
	source, calls := fakeGo(t)
	data := filepath.Join(t.TempDir(), "data")
	t.Setenv("JUPYTER_DATA_DIR", data)
	t.Setenv("GOFLAGS", "-mod=mod")
	t.Setenv("GOOS", "plan9")
	var reports []cell.Progress
	ctx := cell.WithProgress(context.Background(), func(p cell.Progress) { reports = append(reports, p) })
	dir, built, err := Install(ctx, source, Location{}, "1.2", nil)
	if err != nil || !built || dir != filepath.Join(data, "kernels", "guardring") {
		t.Fatalf("%s %v %v", dir, built, err)
	}
	if len(reports) < 3 || reports[0].Total != 3 || reports[len(reports)-1].Done != 3 {
		t.Errorf("progress of the first build: %v", reports)
	}
	log := calls()
	if !strings.Contains(log, "-mod=readonly off : build -v -trimpath -overlay") || strings.Contains(log, "plan9") {
		t.Errorf("the go tool was called\n%s", log)
	}
	spec, err := os.ReadFile(filepath.Join(dir, "kernel.json"))
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{`"` + filepath.Join(dir, "guardring-kernel") + `"`, `"{connection_file}"`, `"interrupt_mode": "message"`, `"GOROOT": ""`, `"display_name": "Guardring (Go)"`, `"version": "1.2"`} {
		if !strings.Contains(string(spec), want) {
			t.Errorf("kernel.json lacks %s:\n%s", want, spec)
		}
	}
	for _, f := range []string{"logo-svg.svg", "logo-32x32.png", "logo-64x64.png", "guardring-kernel"} {
		if !exists(filepath.Join(dir, f)) {
			t.Errorf("%s is missing", f)
		}
	}
	if _, built, err = Install(ctx, source, Location{}, "1.2", nil); err != nil || built || strings.Contains(calls(), "build") {
		t.Errorf("with nothing changed: built %v, %v", built, err)
	}
	if err := os.WriteFile(filepath.Join(source, "pkg", "x", "x_test.go"), []byte("package x\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, built, _ = Install(ctx, source, Location{}, "1.2", nil); built {
		t.Error("a new test file makes the kernel be built again")
	}
	if err := os.WriteFile(filepath.Join(source, "pkg", "x", "x.go"), []byte("package x // changed\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, built, _ = Install(ctx, source, Location{}, "1.2", nil); !built {
		t.Error("a changed file does not make the kernel be built again")
	}
	if err := os.WriteFile(filepath.Join(dir, "guardring-kernel"), []byte("damaged"), 0o755); err != nil {
		t.Fatal(err)
	}
	if _, built, _ = Install(ctx, source, Location{}, "1.2", nil); !built {
		t.Error("a damaged binary is not built again")
	}
	found, err := List(ctx)
	if err != nil || len(found) == 0 || found[0].Dir != dir || found[0].Problem != "" || found[0].Version != "1.2" {
		t.Errorf("list: %+v %v", found, err)
	}
	if removed, err := Remove(ctx, Location{}); err != nil || removed != dir || exists(data) {
		t.Errorf("remove: %s %v, %s still there: %v", removed, err, data, exists(data))
	}
	if _, err := Remove(ctx, Location{}); err == nil || !strings.Contains(err.Error(), "no kernel is installed") {
		t.Errorf("removing nothing: %v", err)
	}
}

func TestInstallLocations(t *testing.T) {
	source, _ := fakeGo(t)
	prefix := t.TempDir()
	dir, _, err := Install(context.Background(), source, Location{Prefix: prefix}, "1", nil)
	if err != nil || dir != filepath.Join(prefix, "share", "jupyter", "kernels", "guardring") {
		t.Errorf("--prefix: %s %v", dir, err)
	}
	if _, err := Remove(context.Background(), Location{Prefix: prefix}); err != nil {
		t.Error(err)
	}
	if entries, _ := os.ReadDir(filepath.Join(prefix, "share")); len(entries) > 0 {
		t.Errorf("%d entries are left under the prefix", len(entries))
	}
	if _, err := (Location{Prefix: "x", SysPrefix: true}).dataDir(context.Background()); err == nil {
		t.Error("both prefixes at once")
	}
	bin := t.TempDir()
	if err := os.WriteFile(filepath.Join(bin, "python3"), []byte("#!/bin/sh\necho /opt/venv\n"), 0o755); err != nil {
		t.Fatal(err)
	}
	t.Setenv("PATH", bin)
	if d, err := (Location{SysPrefix: true}).dataDir(context.Background()); err != nil || d != "/opt/venv/share/jupyter" {
		t.Errorf("--sys-prefix: %s %v", d, err)
	}
	t.Setenv("JUPYTER_DATA_DIR", "")
	t.Setenv("XDG_DATA_HOME", "/x")
	if d, err := userDataDir(); runtime.GOOS == "linux" && (err != nil || d != "/x/jupyter") {
		t.Errorf("XDG_DATA_HOME: %s %v", d, err)
	}
}

func TestOthersKernelsAreLeftAlone(t *testing.T) {
	source, _ := fakeGo(t)
	prefix := t.TempDir()
	dir := filepath.Join(prefix, "share", "jupyter", "kernels", "guardring")
	if err := os.MkdirAll(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "kernel.json"), []byte(`{"argv":["x"],"metadata":{}}`), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, _, err := Install(context.Background(), source, Location{Prefix: prefix}, "1", nil); err == nil || !strings.Contains(err.Error(), "did not install") {
		t.Errorf("installing over it: %v", err)
	}
	if _, err := Remove(context.Background(), Location{Prefix: prefix}); err == nil || !exists(dir) {
		t.Errorf("removing it: %v", err)
	}
}

func TestBuildFailures(t *testing.T) {
	source, _ := fakeGo(t)
	ctx := context.Background()
	modcache := filepath.Join(filepath.Dir(source), "gophernotes")
	try := func() error {
		t.Helper()
		prefix := t.TempDir()
		_, _, err := Install(ctx, source, Location{Prefix: prefix}, "1", nil)
		if entries, rerr := os.ReadDir(filepath.Join(prefix, "share", "jupyter")); rerr == nil && len(entries) > 0 && err != nil {
			t.Errorf("a failed build leaves %v behind", entries)
		}
		return err
	}
	extra := filepath.Join(modcache, "new.go")
	if err := os.WriteFile(extra, nil, 0o644); err != nil {
		t.Fatal(err)
	}
	if err := try(); err == nil || !strings.Contains(err.Error(), "unexpected file new.go") {
		t.Errorf("an unexpected file: %v", err)
	}
	if err := os.Remove(extra); err != nil {
		t.Fatal(err)
	}
	if err := os.Remove(filepath.Join(modcache, "kernel.go")); err != nil {
		t.Fatal(err)
	}
	if err := try(); err == nil || !strings.Contains(err.Error(), "no file kernel.go") {
		t.Errorf("a missing file: %v", err)
	}
	t.Setenv("PATH", t.TempDir())
	if err := try(); err == nil || !strings.Contains(err.Error(), "no go tool in PATH") || !errors.Is(err, exec.ErrNotFound) {
		t.Errorf("without a go tool: %v", err)
	}
}

func TestFindSource(t *testing.T) {
	dir := t.TempDir()
	if _, err := FindSource(dir); err == nil || !strings.Contains(err.Error(), "--source") {
		t.Errorf("a folder without the module: %v", err)
	}
	if err := os.WriteFile(filepath.Join(dir, "go.mod"), []byte("// note\nmodule "+modulePath+"\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	if got, err := FindSource(dir); err != nil || got != dir {
		t.Errorf("%s %v", got, err)
	}
	if got, err := FindSource(""); err != nil || !exists(filepath.Join(got, "pkg", "kernel")) {
		t.Errorf("from the working directory: %s %v", got, err)
	}
}
