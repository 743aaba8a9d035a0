package kernel

import (
	"context"
	_ "embed"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"

	"example.org/guardring/pkg/safefile"
)

// KernelName is the name under which Jupyter knows the kernel, DisplayName the one that people see.
const (
	KernelName  = "guardring"
	DisplayName = "Guardring (Go)"
)

//go:generate go run example.org/guardring/pkg/kernel/internal/drawlogo

// The kernel's logo: two plates and a guard ring seen in section.
var (
	//go:embed logo/logo-svg.svg
	logoSVG []byte
	//go:embed logo/logo-32x32.png
	logo32 []byte
	//go:embed logo/logo-64x64.png
	logo64 []byte
)

// Location says where a kernel is installed. The zero value is the user's own data folder.
type Location struct {
	Prefix    string // under PREFIX/share/jupyter
	SysPrefix bool   // under the prefix of the Python that PATH finds
}

// dataDir returns the Jupyter data folder of a location.
func (l Location) dataDir(ctx context.Context) (string, error) {
	if l.Prefix != "" && l.SysPrefix {
		return "", errors.New("give either a prefix or the Python's prefix, not both")
	}
	if l.Prefix != "" {
		p, err := filepath.Abs(l.Prefix)
		return filepath.Join(p, "share", "jupyter"), err
	}
	if l.SysPrefix {
		p, err := sysPrefix(ctx)
		return filepath.Join(p, "share", "jupyter"), err
	}
	return userDataDir()
}

// userDataDir returns the user's Jupyter data folder: JUPYTER_DATA_DIR, or the system's place for it.
func userDataDir() (string, error) {
	if d := os.Getenv("JUPYTER_DATA_DIR"); d != "" {
		return filepath.Abs(d)
	}
	if runtime.GOOS == "windows" {
		if d := os.Getenv("APPDATA"); d != "" {
			return filepath.Join(d, "jupyter"), nil
		}
		return "", errors.New("neither JUPYTER_DATA_DIR nor APPDATA is set")
	}
	home, err := os.UserHomeDir()
	if err != nil {
		return "", err
	}
	if runtime.GOOS == "darwin" {
		return filepath.Join(home, "Library", "Jupyter"), nil
	}
	if d := os.Getenv("XDG_DATA_HOME"); d != "" {
		return filepath.Join(d, "jupyter"), nil
	}
	return filepath.Join(home, ".local", "share", "jupyter"), nil
}

// sysPrefix asks the Python in PATH for its prefix, that of its virtual environment if it has one.
func sysPrefix(ctx context.Context) (string, error) {
	for _, name := range []string{"python3", "python"} {
		path, err := exec.LookPath(name)
		if err != nil {
			continue
		}
		out, err := exec.CommandContext(ctx, path, "-c", "import sys; print(sys.prefix)").Output()
		if err != nil {
			return "", fmt.Errorf("asking %s for its prefix: %w", path, err)
		}
		return strings.TrimSpace(string(out)), nil
	}
	return "", errors.New("no Python in PATH to ask for its prefix: give the folder with --prefix")
}

// spec is kernel.json.
type spec struct {
	Argv          []string          `json:"argv"`
	DisplayName   string            `json:"display_name"`
	Language      string            `json:"language"`
	InterruptMode string            `json:"interrupt_mode"`
	Env           map[string]string `json:"env"`
	Metadata      map[string]any    `json:"metadata"`
}

func binaryName() string {
	if runtime.GOOS == "windows" {
		return "guardring-kernel.exe"
	}
	return "guardring-kernel"
}

// Install builds the kernel from the module in source and makes it known to Jupyter at a location. It returns the
// folder of the kernel and whether anything had to be compiled. version is written into kernel.json.
func Install(ctx context.Context, source string, at Location, version string, stderr io.Writer) (dir string, built bool, err error) {
	data, err := at.dataDir(ctx)
	if err != nil {
		return "", false, err
	}
	dir = filepath.Join(data, "kernels", KernelName)
	if err := ours(dir); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return "", false, err
	}
	binary := filepath.Join(dir, binaryName())
	existed := exists(dir)
	built, err = Build(ctx, source, binary, stderr)
	if err != nil {
		if !existed { // nothing of a kernel that could not be built stays behind
			_, _ = os.Remove(dir), os.Remove(filepath.Dir(dir))
		}
		return "", false, err
	}
	text, err := json.MarshalIndent(spec{
		Argv: []string{binary, "{connection_file}"}, DisplayName: DisplayName, Language: "go",
		InterruptMode: "message",
		// A Go installation in sight makes the interpreter load its packages' export data at the start.
		Env:      map[string]string{"GOROOT": ""},
		Metadata: map[string]any{"debugger": false, "guardring": map[string]any{"version": version}},
	}, "", "  ")
	if err != nil {
		return "", false, err
	}
	for name, content := range map[string][]byte{
		"kernel.json": append(text, '\n'), "logo-svg.svg": logoSVG, "logo-32x32.png": logo32, "logo-64x64.png": logo64,
	} {
		if err := safefile.Write(filepath.Join(dir, name), func(w io.Writer) error { _, err := w.Write(content); return err }); err != nil {
			return "", false, err
		}
	}
	return dir, built, nil
}

func exists(path string) bool {
	_, err := os.Stat(path)
	return err == nil
}

// ours reports an error when dir holds a kernel that this package did not install.
func ours(dir string) error {
	if !exists(dir) {
		return fmt.Errorf("%s: %w", dir, fs.ErrNotExist)
	}
	data, err := os.ReadFile(filepath.Join(dir, "kernel.json"))
	if errors.Is(err, fs.ErrNotExist) {
		entries, err := os.ReadDir(dir)
		if err != nil {
			return err
		}
		for _, e := range entries { // a build that was broken off leaves these
			if !strings.HasPrefix(e.Name(), binaryName()) {
				return fmt.Errorf("%s holds %s, which is not of a kernel installed by guardring: nothing is changed there", dir, e.Name())
			}
		}
		return nil
	}
	if err != nil {
		return err
	}
	var s spec
	if err := json.Unmarshal(data, &s); err != nil {
		return fmt.Errorf("%s: %w", filepath.Join(dir, "kernel.json"), err)
	}
	if _, ok := s.Metadata["guardring"]; !ok {
		return fmt.Errorf("%s is a kernel that guardring did not install: nothing is changed there", dir)
	}
	return nil
}

// Remove takes the kernel at a location away, and the folders that held nothing else.
func Remove(ctx context.Context, at Location) (dir string, err error) {
	data, err := at.dataDir(ctx)
	if err != nil {
		return "", err
	}
	dir = filepath.Join(data, "kernels", KernelName)
	if err := ours(dir); err != nil {
		if errors.Is(err, fs.ErrNotExist) {
			return "", fmt.Errorf("no kernel is installed in %s; `guardring kernel list` shows where there is one", dir)
		}
		return "", err
	}
	if err := os.RemoveAll(dir); err != nil {
		return "", err
	}
	for _, d := range []string{filepath.Dir(dir), data} {
		if entries, err := os.ReadDir(d); err != nil || len(entries) > 0 {
			break
		}
		if err := os.Remove(d); err != nil {
			return "", err
		}
	}
	return dir, nil
}

// Installed describes an installed kernel.
type Installed struct {
	Dir     string
	Binary  string
	Version string
	Problem string // what keeps it from starting, "" when nothing is seen
}

// List returns the kernels that Jupyter would find: in JUPYTER_PATH, the user's data folder, the Python's prefix and
// the system's folders.
func List(ctx context.Context) ([]Installed, error) {
	var dirs []string
	dirs = append(dirs, filepath.SplitList(os.Getenv("JUPYTER_PATH"))...)
	if d, err := userDataDir(); err == nil {
		dirs = append(dirs, d)
	}
	if p, err := sysPrefix(ctx); err == nil {
		dirs = append(dirs, filepath.Join(p, "share", "jupyter"))
	}
	if runtime.GOOS == "windows" {
		dirs = append(dirs, filepath.Join(os.Getenv("PROGRAMDATA"), "jupyter"))
	} else {
		dirs = append(dirs, "/usr/local/share/jupyter", "/usr/share/jupyter")
	}
	var out []Installed
	seen := map[string]bool{}
	for _, d := range dirs {
		dir := filepath.Join(d, "kernels", KernelName)
		if d == "" || seen[dir] {
			continue
		}
		seen[dir] = true
		data, err := os.ReadFile(filepath.Join(dir, "kernel.json"))
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		k := Installed{Dir: dir}
		var s spec
		switch {
		case err != nil:
			k.Problem = err.Error()
		case json.Unmarshal(data, &s) != nil || len(s.Argv) == 0:
			k.Problem = "kernel.json is not a kernel specification"
		default:
			k.Binary = s.Argv[0]
			if m, ok := s.Metadata["guardring"].(map[string]any); ok {
				k.Version, _ = m["version"].(string)
			}
			if !exists(k.Binary) {
				k.Problem = k.Binary + " is missing"
			}
		}
		out = append(out, k)
	}
	return out, nil
}
