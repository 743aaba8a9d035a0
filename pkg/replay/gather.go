package replay

import (
	"context"
	"errors"
	"fmt"
	"go/scanner"
	"go/token"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"sort"
	"strconv"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/lab"
	"example.org/guardring/pkg/reduce"
)

// gatherer collects the files of a pack.
type gatherer struct {
	settings PackSettings
	main     string   // absolute path of the notebook or bench.toml
	title    string   // of what is packed
	paths    []string // absolute
	found    map[string]bool
	inputs   map[string]bool
	benches  map[string]*bench.Bench // by absolute folder
	record   []byte                  // a record made for a dataset that has none
	needed   []neededInput
	folders  []string // absolute, named in cells, without a bench of their own
}

// neededInput is an input that a record names.
type neededInput struct {
	where string
	in    reduce.Input
}

// add takes in a file.
func (g *gatherer) add(full string) {
	if !g.found[full] {
		g.found[full] = true
		g.paths = append(g.paths, full)
	}
}

// addInput takes in a file that a result depends on.
func (g *gatherer) addInput(full string) {
	g.inputs[full] = true
	g.add(full)
}

// openBench opens the dataset in a folder and takes in its files.
func (g *gatherer) openBench(dir string) (*bench.Bench, error) {
	if b := g.benches[dir]; b != nil {
		return b, nil
	}
	b, err := bench.Open(dir)
	if err != nil {
		return nil, err
	}
	g.benches[dir] = b
	for _, in := range b.Inputs {
		g.addInput(filepath.Join(dir, filepath.FromSlash(in.File)))
	}
	return b, nil
}

// dataset gathers a folder: its bench, and every other file in it.
func (g *gatherer) dataset(ctx context.Context, dir string) error {
	dir, err := filepath.Abs(dir)
	if err != nil {
		return err
	}
	b, err := g.openBench(dir)
	if err != nil {
		return err
	}
	g.main, g.title = filepath.Join(dir, "bench.toml"), b.Title
	if err := g.folder(dir); err != nil {
		return err
	}
	hasRecord := false
	for _, full := range g.paths {
		switch strings.ToLower(filepath.Ext(full)) {
		case ".ipynb":
			if err := g.references(full); err != nil {
				return err
			}
		case ".json":
			is, err := g.recordFile(full)
			if err != nil {
				return err
			}
			hasRecord = hasRecord || is
		}
	}
	if hasRecord {
		return nil
	}
	if g.found[filepath.Join(dir, resultFile)] {
		return fmt.Errorf("%s is no record of a result; rename it, or replace it with that of `guardring reduce %s --json`", filepath.Join(dir, resultFile), dir)
	}
	r, err := reduce.Run(ctx, b, g.settings.Reduce)
	if err != nil {
		return err
	}
	if s := r.Record.Fit.Status; s != "converged" {
		return fmt.Errorf("%s: the fit is %s: %s; a pack needs a result", dir, s, r.Record.Fit.Reason)
	}
	g.record, err = indented(&r.Record)
	return err
}

// folder takes in every ordinary file of a folder that is not hidden.
func (g *gatherer) folder(dir string) error {
	output := ""
	if g.settings.Output != "" {
		var err error
		if output, err = filepath.Abs(g.settings.Output); err != nil {
			return err
		}
	}
	return filepath.WalkDir(dir, func(full string, d fs.DirEntry, err error) error {
		switch {
		case err != nil:
			return err
		case strings.HasPrefix(d.Name(), ".") && full != dir:
			if d.IsDir() {
				return filepath.SkipDir
			}
			return nil
		case d.IsDir():
			return nil
		case !d.Type().IsRegular():
			return fmt.Errorf("%s is not an ordinary file; packs hold no links and devices", full)
		case full == output || strings.EqualFold(filepath.Ext(full), ".zip") || strings.HasSuffix(full, ".replayed.ipynb"):
			return nil
		}
		if len(g.paths) >= maxMembers {
			return fmt.Errorf("%s holds more than %d files", dir, maxMembers)
		}
		g.add(full)
		return nil
	})
}

// with takes in what was asked for by name.
func (g *gatherer) with(name string) error {
	full, err := filepath.Abs(name)
	if err != nil {
		return err
	}
	info, err := os.Lstat(full)
	if err != nil {
		return err
	}
	if !info.IsDir() {
		g.add(full)
		return nil
	}
	if _, err := os.Lstat(filepath.Join(full, "bench.toml")); err == nil {
		if _, err := g.openBench(full); err != nil {
			return err
		}
	}
	return g.folder(full)
}

// recordFile notes the inputs of a record; it is false for other JSON.
func (g *gatherer) recordFile(full string) (bool, error) {
	data, err := readBounded(full, maxMember)
	if err != nil {
		return false, err
	}
	if !isRecord(data) {
		return false, nil
	}
	h, err := readHead(data)
	if err != nil {
		return false, err
	}
	// What stands beside the record must be what it was made from.
	missing, changed, err := checkInputs(filepath.Dir(full), h.Inputs)
	if err != nil {
		return false, fmt.Errorf("%s: %w", full, err)
	}
	for _, p := range append(missing, changed...) {
		return false, fmt.Errorf("%s: %w", full, p)
	}
	for _, in := range h.Inputs {
		g.addInput(filepath.Join(filepath.Dir(full), filepath.FromSlash(in.File)))
	}
	return true, nil
}

// notebook gathers a notebook and what its cells name.
func (g *gatherer) notebook(file string) error {
	full, err := filepath.Abs(file)
	if err != nil {
		return err
	}
	g.main = full
	g.add(full)
	if err := g.references(full); err != nil {
		return err
	}
	nb, err := OpenNotebook(full)
	if err != nil {
		return err
	}
	if err := nb.ours(); err != nil {
		return fmt.Errorf("%s: %w", file, err)
	}
	g.title = nb.title()
	if g.title == "" {
		g.title = filepath.Base(file)
	}
	return nil
}

// fromFolders takes in the datasets in folders that the cells name, where a record
// was made from them.
func (g *gatherer) fromFolders() error {
	wanted := map[string]bool{}
	for _, n := range g.needed {
		wanted[n.in.SHA256] = true
	}
	for _, folder := range g.folders {
		for _, dir := range datasetsIn(folder) {
			sum, err := fileSum(filepath.Join(dir, "bench.toml"))
			if err != nil {
				return err
			}
			if !wanted[sum] {
				continue
			}
			if _, err := g.openBench(dir); err != nil {
				return err
			}
			if err := g.folder(dir); err != nil {
				return err
			}
		}
	}
	return nil
}

// datasetsIn lists the folders in dir that hold a bench.
func datasetsIn(dir string) []string {
	found, err := filepath.Glob(filepath.Join(literalGlob(dir), "*", "bench.toml"))
	if err != nil { // the pattern is well formed
		return nil
	}
	for i := range found {
		found[i] = filepath.Dir(found[i])
	}
	return found
}

// literalGlob writes a path so that a pattern finds it as it is.
func literalGlob(path string) string {
	if filepath.Separator == '\\' {
		return path // no escapes there, and no such names
	}
	return strings.NewReplacer(`\`, `\\`, "*", `\*`, "?", `\?`, "[", `\[`).Replace(path)
}

// title is the first heading of the notebook.
func (nb *Notebook) title() string {
	for _, c := range nb.cells {
		if c.kind != "markdown" {
			continue
		}
		for _, line := range strings.Split(c.source, "\n") {
			if s, ok := strings.CutPrefix(strings.TrimSpace(line), "# "); ok {
				return strings.TrimSpace(s)
			}
		}
	}
	return ""
}

// references takes in the files and datasets that a notebook's cells name in
// strings, and notes the inputs of the records in its outputs.
func (g *gatherer) references(full string) error {
	nb, err := OpenNotebook(full)
	if err != nil {
		return err
	}
	dir := filepath.Dir(full)
	for _, c := range nb.cells {
		if c.kind != "code" {
			continue
		}
		for _, s := range stringsOf(c.source) {
			if err := g.reference(dir, s); err != nil {
				return fmt.Errorf("%s: %s: %w", full, c.place(), err)
			}
		}
		for _, o := range c.outputs() {
			h, err := recordOf(o)
			if err != nil {
				return fmt.Errorf("%s: %s: %w", full, c.place(), err)
			}
			if h == nil {
				continue
			}
			for _, in := range h.Inputs {
				g.needed = append(g.needed, neededInput{filepath.Base(full) + ", " + c.place(), in})
			}
		}
	}
	return nil
}

// recordOf is the beginning of the record that an output holds, nil without one.
func recordOf(output *value) (*recordHead, error) {
	v := output.get("data").get(lab.ResultMIME)
	if v == nil {
		return nil, nil
	}
	d := document{root: v}
	return readHead(d.bytes())
}

// stringsOf lists the string literals of Go source.
func stringsOf(source string) []string {
	var s scanner.Scanner
	fset := token.NewFileSet()
	s.Init(fset.AddFile("", fset.Base(), len(source)), []byte(source), func(token.Position, string) {}, 0)
	var out []string
	for {
		_, tok, lit := s.Scan()
		switch tok {
		case token.EOF:
			return out
		case token.STRING:
			if x, err := strconv.Unquote(lit); err == nil && x != "" && len(x) < 4096 && !strings.ContainsRune(x, 0) {
				out = append(out, x)
			}
		}
	}
}

// reference takes in what a string names, if it names a file or a dataset.
func (g *gatherer) reference(dir, s string) error {
	target := filepath.FromSlash(s)
	absolute := filepath.IsAbs(target)
	full := target
	if !absolute {
		full = filepath.Join(dir, target)
	}
	info, err := os.Lstat(full)
	if err != nil {
		return nil // most strings name nothing
	}
	isBench := false
	if info.IsDir() {
		_, err := os.Lstat(filepath.Join(full, "bench.toml"))
		isBench = err == nil
	}
	switch {
	case !isBench && info.IsDir() && !absolute:
		g.folders = append(g.folders, full) // datasets may stand in it
		return nil
	case !isBench && !info.Mode().IsRegular():
		return nil
	case absolute:
		return fmt.Errorf("%q is an absolute path, which leads nowhere in another laboratory; name it relative to the notebook", s)
	case isBench:
		if _, err := g.openBench(full); err != nil {
			return err
		}
		return g.folder(full) // the truth of a simulation, results, notes
	}
	g.add(full)
	if strings.EqualFold(filepath.Ext(full), ".toml") {
		return g.budget(full)
	}
	return nil
}

// budget takes in the readings that a budget file names.
func (g *gatherer) budget(full string) error {
	if filepath.Base(full) == "bench.toml" {
		_, err := g.openBench(filepath.Dir(full))
		return err
	}
	b, err := bench.OpenBudget(full)
	if err != nil {
		return nil // some other file; it is packed as it is
	}
	for _, in := range b.Inputs {
		g.addInput(filepath.Join(filepath.Dir(full), filepath.FromSlash(in.File)))
	}
	return nil
}

// frameInput is what records call readings that a notebook holds in a frame, which
// are no file.
const frameInput = "frame"

// holdsInputs reports an input of a notebook's record that is not in the pack.
func (g *gatherer) holdsInputs(p *Package, root string) error {
	have := map[string]bool{}
	for _, f := range p.Files {
		have[f.SHA256] = true
	}
	var errs []error
	for _, n := range g.needed {
		if !have[n.in.SHA256] && n.in.File != frameInput {
			errs = append(errs, fmt.Errorf("%s: input %s (SHA-256 %s) is not among the files found in and beside %s; name its folder with --with, or run the notebook again if the file has changed",
				n.where, n.in.File, n.in.SHA256, root))
		}
	}
	return errors.Join(errs...)
}

// common returns the deepest folder that holds all paths, and the paths relative to
// it with slashes forward, sorted with them.
func common(paths []string) (root string, names []string) {
	sort.Strings(paths)
	if len(paths) == 0 {
		return "", nil
	}
	root = filepath.Dir(paths[0])
	for _, p := range paths {
		for !within(root, p) {
			root = filepath.Dir(root)
		}
	}
	for _, p := range paths {
		rel, err := filepath.Rel(root, p)
		if err != nil {
			rel = p // on another volume: refused as a name
		}
		names = append(names, path.Clean(filepath.ToSlash(rel)))
	}
	return root, names
}

// within reports whether p is in folder dir. The root of a volume holds all.
func within(dir, p string) bool {
	if filepath.Dir(dir) == dir {
		return true
	}
	return strings.HasPrefix(p, dir+string(filepath.Separator))
}
