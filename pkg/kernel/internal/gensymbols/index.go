package main

import (
	"bytes"
	"encoding/json"
	"go/ast"
	"go/doc"
	"go/printer"
	"go/token"
	"go/types"
	"strings"

	"golang.org/x/tools/go/packages"

	"example.org/guardring/pkg/kernel/docindex"
)

// index writes the documentation of p as JSON.
func index(p *packages.Package) ([]byte, error) {
	d, err := doc.NewFromFiles(p.Fset, p.Syntax, p.PkgPath)
	if err != nil {
		return nil, err
	}
	x := &indexer{fset: p.Fset, pkg: docindex.Package{
		Path: p.PkgPath, Name: p.Name, Doc: d.Doc, Entries: map[string]docindex.Entry{},
	}}
	x.values(d.Consts, "const")
	x.values(d.Vars, "var")
	x.funcs(d.Funcs, "")
	for _, t := range d.Types {
		x.typ(t)
		x.values(t.Consts, "const")
		x.values(t.Vars, "var")
		x.funcs(t.Funcs, "")
		x.funcs(t.Methods, t.Name)
		x.promoted(p, t.Name)
	}
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	enc.SetIndent("", " ")
	if err := enc.Encode(x.pkg); err != nil {
		return nil, err
	}
	return b.Bytes(), nil
}

type indexer struct {
	fset *token.FileSet
	pkg  docindex.Package
}

func (x *indexer) add(name, kind, decl, text string) {
	x.pkg.Entries[name] = docindex.Entry{Kind: kind, Decl: decl, Doc: strings.TrimSpace(text)}
}

// values indexes each constant or variable with its own line and comment, or its group's.
func (x *indexer) values(groups []*doc.Value, kind string) {
	for _, g := range groups {
		for _, spec := range g.Decl.Specs {
			v, ok := spec.(*ast.ValueSpec)
			if !ok {
				continue
			}
			text := v.Doc.Text()
			if text == "" {
				text = v.Comment.Text()
			}
			if text == "" {
				text = g.Doc
			}
			for _, n := range v.Names {
				if n.IsExported() {
					x.add(n.Name, kind, kind+" "+x.print(&ast.ValueSpec{Names: v.Names, Type: v.Type, Values: v.Values}), text)
				}
			}
		}
	}
}

func (x *indexer) funcs(list []*doc.Func, recv string) {
	for _, f := range list {
		if !ast.IsExported(f.Name) {
			continue
		}
		decl := *f.Decl
		decl.Body, decl.Doc = nil, nil
		name, kind := f.Name, "func"
		if recv != "" {
			name, kind = recv+"."+f.Name, "method"
		}
		x.add(name, kind, x.print(&decl), f.Doc)
	}
}

func (x *indexer) typ(t *doc.Type) {
	for _, spec := range t.Decl.Specs {
		ts, ok := spec.(*ast.TypeSpec)
		if !ok || ts.Name.Name != t.Name {
			continue
		}
		decl := &ast.GenDecl{Tok: token.TYPE, Specs: []ast.Spec{ts}}
		x.add(t.Name, "type", x.print(decl), t.Doc)
		switch typ := ts.Type.(type) {
		case *ast.StructType:
			for _, f := range typ.Fields.List {
				x.field(t.Name, f, "field")
			}
		case *ast.InterfaceType:
			for _, f := range typ.Methods.List {
				x.field(t.Name, f, "method")
			}
		}
	}
}

func (x *indexer) field(owner string, f *ast.Field, kind string) {
	text := f.Doc.Text()
	if text == "" {
		text = f.Comment.Text()
	}
	for _, n := range f.Names {
		if n.IsExported() {
			x.add(owner+"."+n.Name, kind, n.Name+" "+x.print(f.Type), text)
		}
	}
}

// promoted indexes the methods and fields that a type has by embedding, with the type they come from.
func (x *indexer) promoted(p *packages.Package, name string) {
	obj, ok := p.Types.Scope().Lookup(name).(*types.TypeName)
	if !ok {
		return
	}
	named, ok := obj.Type().(*types.Named)
	if !ok {
		return
	}
	qualify := func(other *types.Package) string {
		if other == p.Types {
			return ""
		}
		return other.Name()
	}
	set := types.NewMethodSet(types.NewPointer(named))
	for sel := range set.Methods() {
		f, ok := sel.Obj().(*types.Func)
		if !ok || len(sel.Index()) < 2 || !f.Exported() {
			continue
		}
		recv := f.Signature().Recv().Type()
		if ptr, ok := recv.(*types.Pointer); ok {
			recv = ptr.Elem()
		}
		from := ""
		if n, ok := recv.(*types.Named); ok && n.Obj().Pkg() != nil {
			from = n.Obj().Pkg().Path() + "." + n.Obj().Name()
		}
		sig := strings.TrimPrefix(types.TypeString(f.Signature(), qualify), "func")
		x.pkg.Entries[name+"."+f.Name()] = docindex.Entry{Kind: "method", Decl: "func (" + name + ") " + f.Name() + sig, From: from}
	}
}

func (x *indexer) print(node any) string {
	var b bytes.Buffer
	cfg := printer.Config{Mode: printer.UseSpaces, Tabwidth: 4}
	if err := cfg.Fprint(&b, x.fset, node); err != nil {
		return ""
	}
	return b.String()
}
