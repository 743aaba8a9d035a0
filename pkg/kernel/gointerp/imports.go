package gointerp

import (
	"fmt"
	"go/ast"
	"go/token"
	"sort"
	"strconv"
	"strings"

	"github.com/cosmos72/gomacro/imports"

	"example.org/guardring/pkg/kernel"
)

// refuseImports reports the first import of a package that is not linked in. Without it the interpreter would try to
// download and compile the package.
func (in *Interp) refuseImports(nodes []ast.Node) error {
	for _, n := range nodes {
		d, ok := n.(*ast.GenDecl)
		if !ok || d.Tok != token.IMPORT {
			continue
		}
		for _, s := range d.Specs {
			spec, ok := s.(*ast.ImportSpec)
			if !ok {
				continue
			}
			path, err := strconv.Unquote(spec.Path.Value)
			if err != nil {
				return in.importError(spec, fmt.Sprintf("import path %s: %v", spec.Path.Value, err))
			}
			if path == "C" || path == "plugin" {
				return in.importError(spec, fmt.Sprintf("%q can't be imported in a cell", path))
			}
			if _, ok := imports.Packages[path]; !ok {
				return in.importError(spec, fmt.Sprintf("%q is not linked into this kernel, and nothing is downloaded. %s", path, in.importable(path)))
			}
		}
	}
	return nil
}

func (in *Interp) importError(spec *ast.ImportSpec, msg string) error {
	p := in.ir.Comp.Fileset.Position(spec.Path.Pos())
	return &kernel.CellError{Kind: kernel.CompileError, Message: msg, Places: []kernel.Place{in.place(p, true)}}
}

// importable lists what can be imported, what looks like the wanted path first.
func (in *Interp) importable(path string) string {
	linked := map[string]bool{}
	for _, l := range in.linked {
		linked[l] = true
	}
	var std []string
	for p := range imports.Packages {
		first, _, _ := strings.Cut(p, "/")
		if !strings.Contains(first, ".") && !linked[p] {
			std = append(std, p)
		}
	}
	sort.Strings(std)
	var b strings.Builder
	last := path[strings.LastIndexByte(path, '/')+1:]
	for _, p := range append(append([]string(nil), in.linked...), std...) {
		if last != "" && p != path && p[strings.LastIndexByte(p, '/')+1:] == last {
			fmt.Fprintf(&b, "Perhaps %q is meant.\n", p)
		}
	}
	b.WriteString("Cells can import:\n")
	for _, p := range in.linked {
		b.WriteString("  " + p + "\n")
	}
	b.WriteString("and of the standard library: " + strings.Join(std, ", "))
	return b.String()
}
