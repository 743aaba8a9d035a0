// Gensymbols writes the symbol tables and the documentation index of the packages that notebook cells may import.
//
// Usage, from anywhere in the module:
//
//	go run ./pkg/kernel/internal/gensymbols          # write pkg/kernel/symbols
//	go run ./pkg/kernel/internal/gensymbols -check   # exit 1 when the committed files are not current
//
// For every package it writes one Go file that registers the package's functions, variables, constants, types and
// interface proxies with the interpreter, and one JSON file with its declarations and their documentation. Generic
// functions and types are left out: the interpreter has no generics.
package main

import (
	"bytes"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"sort"
	"strings"

	"example.org/guardring/pkg/kernel/docindex"
	"golang.org/x/tools/go/packages"
)

// fixed are the packages of other modules that are linked into the kernel.
var fixed = []string{
	"gonum.org/v1/gonum/diff/fd",
	"gonum.org/v1/gonum/floats",
	"gonum.org/v1/gonum/integrate",
	"gonum.org/v1/gonum/interp",
	"gonum.org/v1/gonum/mat",
	"gonum.org/v1/gonum/optimize",
	"gonum.org/v1/gonum/stat",
	"gonum.org/v1/gonum/stat/distuv",
	"gonum.org/v1/plot",
	"gonum.org/v1/plot/font",
	"gonum.org/v1/plot/palette",
	"gonum.org/v1/plot/plotter",
	"gonum.org/v1/plot/vg",
	"gonum.org/v1/plot/vg/draw",
	"github.com/go-gota/gota/dataframe",
	"github.com/go-gota/gota/series",
}

// documented are packages of the standard library that the interpreter brings its own tables for; only their
// documentation is indexed here.
var documented = []string{
	"bufio", "bytes", "context", "encoding/csv", "encoding/json", "errors", "fmt", "io", "log", "math", "math/big",
	"math/cmplx", "math/rand", "os", "path/filepath", "regexp", "sort", "strconv", "strings", "sync", "time",
	"unicode/utf8",
}

// excluded are packages of this module that cells can't import: the kernel itself, what stands on it, and the one
// that replaces files.
var excluded = []string{"pkg/kernel", "pkg/replay", "pkg/safefile"}

func main() {
	check := flag.Bool("check", false, "compare the committed files with fresh ones instead of writing")
	flag.Parse()
	if err := run(*check); err != nil {
		fmt.Fprintln(os.Stderr, "gensymbols:", err)
		os.Exit(1)
	}
}

func run(check bool) error {
	root, module, err := moduleRoot()
	if err != nil {
		return err
	}
	own, err := ownPackages(root, module)
	if err != nil {
		return err
	}
	files, err := generate(root, own)
	if err != nil {
		return err
	}
	dir := filepath.Join(root, "pkg", "kernel", "symbols")
	if check {
		return compare(dir, files)
	}
	return write(dir, files)
}

func moduleRoot() (dir, path string, err error) {
	out, err := exec.Command("go", "list", "-m", "-f", "{{.Dir}}\n{{.Path}}").Output()
	if err != nil {
		return "", "", fmt.Errorf("go list -m: %w", err)
	}
	dir, path, _ = strings.Cut(strings.TrimSpace(string(out)), "\n")
	return dir, path, nil
}

// ownPackages lists the packages of this module that cells may import, as they stand now.
func ownPackages(root, module string) ([]string, error) {
	cmd := exec.Command("go", "list", "-e", "./pkg/...")
	cmd.Dir = root
	cmd.Stderr = os.Stderr
	out, err := cmd.Output()
	if err != nil {
		return nil, fmt.Errorf("go list ./pkg/...: %w", err)
	}
	var own []string
	for _, path := range strings.Fields(string(out)) {
		keep := !strings.Contains(path, "/internal/")
		for _, e := range excluded {
			skip := module + "/" + e
			keep = keep && path != skip && !strings.HasPrefix(path, skip+"/")
		}
		if keep {
			own = append(own, path)
		}
	}
	return own, nil
}

// generate returns the files of pkg/kernel/symbols, name to content.
func generate(root string, own []string) (map[string][]byte, error) {
	linked := append(append([]string(nil), own...), fixed...)
	sort.Strings(linked)
	cfg := &packages.Config{
		Dir: root,
		Mode: packages.NeedName | packages.NeedFiles | packages.NeedSyntax | packages.NeedTypes |
			packages.NeedTypesInfo | packages.NeedImports | packages.NeedDeps,
	}
	loaded, err := packages.Load(cfg, append(append([]string(nil), linked...), documented...)...)
	if err != nil {
		return nil, err
	}
	byPath := map[string]*packages.Package{}
	for _, p := range loaded {
		for _, e := range p.Errors {
			return nil, fmt.Errorf("%s: %v", p.PkgPath, e)
		}
		byPath[p.PkgPath] = p
	}
	files := map[string][]byte{}
	for _, path := range linked {
		p := byPath[path]
		if p == nil {
			return nil, fmt.Errorf("package %s was not loaded", path)
		}
		src, err := table(p)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", path, err)
		}
		files[tableName(path)] = src
	}
	for _, path := range append(append([]string(nil), linked...), documented...) {
		p := byPath[path]
		if p == nil {
			return nil, fmt.Errorf("package %s was not loaded", path)
		}
		data, err := index(p)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", path, err)
		}
		files["docs/"+docindex.FileName(path)] = data
	}
	files["linked.go"] = list(linked)
	return files, nil
}

// tableName returns the name of the Go file that holds the table of a package, beside
// the JSON file of its documentation.
func tableName(path string) string {
	return strings.TrimSuffix(docindex.FileName(path), ".json") + ".go"
}

// list writes the names of the linked-in packages as a Go variable.
func list(linked []string) []byte {
	var b bytes.Buffer
	b.WriteString(header + "package symbols\n\n")
	b.WriteString("// Linked are the import paths of the packages whose tables stand in this package, sorted.\n")
	b.WriteString("var Linked = []string{\n")
	for _, p := range linked {
		fmt.Fprintf(&b, "\t%q,\n", p)
	}
	b.WriteString("}\n")
	return b.Bytes()
}

// generated reports whether a file of pkg/kernel/symbols is one of ours.
func generated(name string) bool {
	return strings.HasPrefix(filepath.Base(name), "sym_") || name == "linked.go"
}

func existing(dir string) (map[string][]byte, error) {
	found := map[string][]byte{}
	for _, pattern := range []string{"*.go", "docs/*.json"} {
		names, err := filepath.Glob(filepath.Join(dir, filepath.FromSlash(pattern)))
		if err != nil {
			return nil, err
		}
		for _, name := range names {
			rel, err := filepath.Rel(dir, name)
			if err != nil {
				return nil, err
			}
			rel = filepath.ToSlash(rel)
			if !generated(rel) {
				continue
			}
			data, err := os.ReadFile(name)
			if err != nil {
				return nil, err
			}
			found[rel] = data
		}
	}
	return found, nil
}

func compare(dir string, files map[string][]byte) error {
	have, err := existing(dir)
	if err != nil {
		return err
	}
	var stale []string
	for name, data := range files {
		if !bytes.Equal(have[name], data) {
			stale = append(stale, name)
		}
	}
	for name := range have {
		if _, ok := files[name]; !ok {
			stale = append(stale, name+" (no longer generated)")
		}
	}
	if len(stale) == 0 {
		return nil
	}
	sort.Strings(stale)
	return fmt.Errorf("not current, run go generate ./pkg/kernel/symbols:\n\t%s", strings.Join(stale, "\n\t"))
}

func write(dir string, files map[string][]byte) error {
	have, err := existing(dir)
	if err != nil {
		return err
	}
	if err := os.MkdirAll(filepath.Join(dir, "docs"), 0o755); err != nil {
		return err
	}
	changed := 0
	for name, data := range files {
		if bytes.Equal(have[name], data) {
			continue
		}
		changed++
		if err := os.WriteFile(filepath.Join(dir, filepath.FromSlash(name)), data, 0o644); err != nil {
			return err
		}
	}
	for name := range have {
		if _, ok := files[name]; !ok {
			changed++
			if err := os.Remove(filepath.Join(dir, filepath.FromSlash(name))); err != nil {
				return err
			}
		}
	}
	fmt.Printf("%d packages, %d files changed\n", len(files)/2, changed)
	return nil
}
