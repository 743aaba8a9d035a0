// Package docindex is the form of the documentation index of linked-in packages: what the generator of symbol tables
// writes and the kernel's inspection reads.
package docindex

import (
	"encoding/json"
	"fmt"
	"io/fs"
	"strings"
	"sync"
)

// Package is the documentation of one package.
type Package struct {
	Path    string           `json:"path"`
	Name    string           `json:"name"`
	Doc     string           `json:"doc"`
	Entries map[string]Entry `json:"entries"` // by name; methods and fields as "Type.Name"
}

// Entry is one declaration.
type Entry struct {
	Kind string `json:"kind"` // func, method, field, type, const, var
	Decl string `json:"decl"` // the declaration as Go source
	Doc  string `json:"doc,omitempty"`
	From string `json:"from,omitempty"` // "path.Type" where a promoted method is declared
}

// Index looks entries up. Files are read and decoded when first needed, so that an index nobody asks costs no memory.
type Index struct {
	files fs.FS

	mu     sync.Mutex
	loaded map[string]*Package // nil value: looked for and not there
}

// New returns the index over the JSON files at the root of files.
func New(files fs.FS) *Index {
	return &Index{files: files, loaded: map[string]*Package{}}
}

// FileName returns the name of the file that holds the package with an import path.
func FileName(path string) string {
	return "sym_" + strings.NewReplacer("/", "_", ".", "_", "-", "_").Replace(path) + ".json"
}

// Package returns the documentation of the package with an import path, or an error that says why there is none.
func (x *Index) Package(path string) (*Package, error) {
	x.mu.Lock()
	defer x.mu.Unlock()
	if p, ok := x.loaded[path]; ok {
		if p == nil {
			return nil, fmt.Errorf("package %q is not in the documentation index", path)
		}
		return p, nil
	}
	data, err := fs.ReadFile(x.files, FileName(path))
	if err != nil {
		x.loaded[path] = nil
		return nil, fmt.Errorf("package %q is not in the documentation index", path)
	}
	p := new(Package)
	if err := json.Unmarshal(data, p); err != nil {
		x.loaded[path] = nil
		return nil, fmt.Errorf("documentation index of %q: %w", path, err)
	}
	x.loaded[path] = p
	return p, nil
}

// Lookup returns the entry of a name ("Func", "Type", "Type.Method") of a package. A promoted method brings the
// documentation of its origin.
func (x *Index) Lookup(path, name string) (Entry, bool) {
	p, err := x.Package(path)
	if err != nil {
		return Entry{}, false
	}
	e, ok := p.Entries[name]
	if ok && e.From != "" && e.Doc == "" {
		if dot := strings.LastIndexByte(e.From, '.'); dot > 0 {
			_, method, _ := strings.Cut(name, ".")
			if origin, err := x.originOf(e.From[:dot], e.From[dot+1:]+"."+method, p); err == nil {
				e.Doc = origin.Doc
			}
		}
	}
	return e, ok
}

func (x *Index) originOf(path, name string, from *Package) (Entry, error) {
	p := from
	if path != from.Path {
		var err error
		if p, err = x.Package(path); err != nil {
			return Entry{}, err
		}
	}
	e, ok := p.Entries[name]
	if !ok {
		return Entry{}, fmt.Errorf("%s.%s is not in the documentation index", path, name)
	}
	return e, nil
}
