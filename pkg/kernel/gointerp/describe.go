package gointerp

import (
	"errors"
	"fmt"
	"go/ast"
	"reflect"
	"sort"
	"strings"

	"github.com/cosmos72/gomacro/fast"
	"github.com/cosmos72/gomacro/xreflect"

	"example.org/guardring/pkg/kernel"
)

// Names lists what the identifiers in scope mean.
func (in *Interp) Names() []kernel.Name {
	var out []kernel.Name
	for c := in.ir.Comp; c != nil; c = c.Outer {
		for name, b := range c.Binds {
			if strings.HasSuffix(name, "__") && strings.HasPrefix(name, "guardring_") {
				continue
			}
			out = append(out, kernel.Name{Name: name, Kind: bindKind(b), Type: typeText(b.Type)})
		}
		for name, t := range c.Types {
			out = append(out, kernel.Name{Name: name, Kind: "type", Type: typeText(t)})
		}
	}
	sort.SliceStable(out, func(i, j int) bool { return out[i].Name < out[j].Name })
	return out
}

func bindKind(b *fast.Bind) string {
	switch b.Value.(type) {
	case *fast.Import:
		return "package"
	case fast.Builtin, fast.Function:
		return "func"
	}
	switch b.Desc.Class() {
	case fast.FuncBind:
		return "func"
	case fast.ConstBind:
		return "const"
	}
	return "var"
}

// typeText writes a type as a cell would.
func typeText(t xreflect.Type) string {
	if t == nil {
		return ""
	}
	if r := t.ReflectType(); compiled(r) {
		return r.String()
	}
	return strings.ReplaceAll(t.String(), "main.", "")
}

// compiled reports whether the reflect type says everything about a type.
func compiled(r reflect.Type) bool {
	for r != nil && r.Kind() == reflect.Pointer && r.Name() == "" {
		r = r.Elem()
	}
	return r != nil && r.PkgPath() != "" && !strings.HasPrefix(r.PkgPath(), "github.com/cosmos72/gomacro")
}

// Describe says what an expression is without evaluating it.
func (in *Interp) Describe(expr string) (d *kernel.Description, err error) {
	defer func() {
		if fault := recover(); fault != nil {
			d, err = nil, in.compileError(fault)
		}
	}()
	g := &in.ir.Comp.Globals
	file, line, pos := g.Filepath, g.Line, g.Pos
	defer func() { g.Filepath, g.Line, g.Pos = file, line, pos }()
	g.Filepath, g.Line = "expression", 0
	nodes := in.ir.Comp.ParseBytes([]byte(expr))
	if len(nodes) != 1 {
		return nil, errors.New("not one expression")
	}
	x := lastExpression(nodes)
	if x == nil {
		return nil, errors.New("not an expression")
	}
	return in.describe(ast.Unparen(x))
}

func (in *Interp) describe(x ast.Expr) (*kernel.Description, error) {
	c := in.ir.Comp
	switch x := x.(type) {
	case *ast.Ident:
		if sym := c.TryResolve(x.Name); sym != nil {
			if imp, ok := sym.Value.(*fast.Import); ok {
				return packageDescription(imp), nil
			}
			d := &kernel.Description{Kind: bindKind(&sym.Bind), Type: typeText(sym.Type)}
			in.typeMembers(d, sym.Type)
			if d.Kind == "func" {
				d.Path, d.Symbol = "", ""
			}
			return d, nil
		}
		if t := c.TryResolveType(x.Name); t != nil {
			return in.typeDescription(t), nil
		}
		return nil, fmt.Errorf("undefined: %s", x.Name)
	case *ast.SelectorExpr:
		if id, ok := x.X.(*ast.Ident); ok {
			if sym := c.TryResolve(id.Name); sym != nil {
				if imp, ok := sym.Value.(*fast.Import); ok {
					return in.packageMember(imp, x.Sel.Name)
				}
			}
		}
		if d, err := in.describe(ast.Unparen(x.X)); err == nil {
			if m := member(d, x.Sel.Name); m != nil && d.Path != "" {
				out := &kernel.Description{Kind: m.Kind, Type: m.Type, Path: d.Path, Symbol: d.Symbol + "." + m.Name}
				if m.Kind == "field" {
					if t, err := in.typeOf(x); err == nil {
						path, symbol := out.Path, out.Symbol
						in.typeMembers(out, t)
						out.Path, out.Symbol = path, symbol
					}
				}
				return out, nil
			}
		}
	}
	t, err := in.typeOf(x)
	if err != nil {
		return nil, err
	}
	d := &kernel.Description{Kind: "value", Type: typeText(t)}
	in.typeMembers(d, t)
	return d, nil
}

func member(d *kernel.Description, name string) *kernel.Name {
	for i := range d.Members {
		if d.Members[i].Name == name {
			return &d.Members[i]
		}
	}
	return nil
}

// typeOf compiles an expression, which does not run it, and returns its type; the first one of several.
func (in *Interp) typeOf(x ast.Expr) (xreflect.Type, error) {
	c := fast.NewComp(in.ir.Comp, nil)
	c.UpCost = 0
	c.Depth--
	e := c.Expr(x, nil)
	if e == nil || e.NumOut() == 0 {
		return nil, errors.New("the expression has no value")
	}
	t := e.Out(0)
	if e.Untyped() {
		t = e.DefaultType()
	}
	if t == nil {
		return nil, errors.New("the expression has no type")
	}
	return t, nil
}

func packageDescription(imp *fast.Import) *kernel.Description {
	d := &kernel.Description{Kind: "package", Type: imp.Path, Path: imp.Path}
	for name, b := range imp.Binds {
		d.Members = append(d.Members, kernel.Name{Name: name, Kind: bindKind(b), Type: typeText(b.Type)})
	}
	for name := range imp.Types {
		d.Members = append(d.Members, kernel.Name{Name: name, Kind: "type"})
	}
	sortNames(d.Members)
	return d
}

func (in *Interp) packageMember(imp *fast.Import, name string) (*kernel.Description, error) {
	if t := imp.Types[name]; t != nil {
		d := in.typeDescription(t)
		d.Path, d.Symbol = imp.Path, name
		return d, nil
	}
	b := imp.Binds[name]
	if b == nil {
		return nil, fmt.Errorf("package %s has no %s", imp.Name, name)
	}
	d := &kernel.Description{Kind: bindKind(b), Type: typeText(b.Type)}
	if b.Type != nil && d.Kind != "func" {
		in.typeMembers(d, b.Type)
	}
	d.Path, d.Symbol = imp.Path, name
	return d, nil
}

func (in *Interp) typeDescription(t xreflect.Type) *kernel.Description {
	d := &kernel.Description{Kind: "type", Type: typeText(t)}
	in.typeMembers(d, t)
	return d
}

func sortNames(names []kernel.Name) {
	sort.SliceStable(names, func(i, j int) bool { return names[i].Name < names[j].Name })
}

// typeMembers fills in the fields and methods of t, promoted ones too, and where t is declared.
func (in *Interp) typeMembers(d *kernel.Description, t xreflect.Type) {
	if t == nil {
		return
	}
	if r := t.ReflectType(); compiled(r) {
		compiledMembers(d, r)
	} else {
		in.cellMembers(d, t)
	}
	sortNames(d.Members)
}

func compiledMembers(d *kernel.Description, r reflect.Type) {
	base := r
	if base.Kind() == reflect.Pointer && base.Name() == "" {
		base = base.Elem()
	}
	d.Path, d.Symbol = base.PkgPath(), base.Name()
	seen := map[string]bool{}
	add := func(name, kind, typ string) {
		if !seen[name] {
			seen[name] = true
			d.Members = append(d.Members, kernel.Name{Name: name, Kind: kind, Type: typ})
		}
	}
	if base.Kind() == reflect.Struct {
		for _, f := range reflect.VisibleFields(base) {
			if f.IsExported() {
				add(f.Name, "field", f.Type.String())
			}
		}
	}
	set, receiver := base, 0
	if base.Kind() != reflect.Interface {
		set, receiver = reflect.PointerTo(base), 1
	}
	for i := range set.NumMethod() {
		m := set.Method(i)
		add(m.Name, "method", signature(m.Type, receiver))
	}
}

// signature writes a method's type without its receiver.
func signature(t reflect.Type, skip int) string {
	var in, out []string
	for i := skip; i < t.NumIn(); i++ {
		s := t.In(i).String()
		if t.IsVariadic() && i == t.NumIn()-1 {
			s = "..." + strings.TrimPrefix(s, "[]")
		}
		in = append(in, s)
	}
	for i := range t.NumOut() {
		out = append(out, t.Out(i).String())
	}
	s := "func(" + strings.Join(in, ", ") + ")"
	switch len(out) {
	case 0:
	case 1:
		s += " " + out[0]
	default:
		s += " (" + strings.Join(out, ", ") + ")"
	}
	return s
}

// cellMembers lists the members of a type that was declared in a cell.
func (in *Interp) cellMembers(d *kernel.Description, t xreflect.Type) {
	if t.Kind() == reflect.Pointer {
		t = t.Elem()
	}
	seen := map[string]bool{}
	var visit func(t xreflect.Type, depth int)
	visit = func(t xreflect.Type, depth int) {
		if depth > 8 {
			return
		}
		for i := range t.NumMethod() {
			m := t.Method(i)
			if !seen[m.Name] {
				seen[m.Name] = true
				text := ""
				if m.Type != nil {
					text = typeText(m.Type)
				}
				d.Members = append(d.Members, kernel.Name{Name: m.Name, Kind: "method", Type: text})
			}
		}
		if t.Kind() != reflect.Struct {
			return
		}
		var embedded []xreflect.Type
		for i := range t.NumField() {
			f := t.Field(i)
			if !seen[f.Name] {
				seen[f.Name] = true
				d.Members = append(d.Members, kernel.Name{Name: f.Name, Kind: "field", Type: typeText(f.Type)})
			}
			if f.Anonymous {
				embedded = append(embedded, f.Type)
			}
		}
		for _, e := range embedded {
			if e.Kind() == reflect.Pointer {
				e = e.Elem()
			}
			if r := e.ReflectType(); compiled(r) {
				var sub kernel.Description
				compiledMembers(&sub, r)
				for _, m := range sub.Members {
					if !seen[m.Name] {
						seen[m.Name] = true
						d.Members = append(d.Members, m)
					}
				}
				continue
			}
			visit(e, depth+1)
		}
	}
	visit(t, 0)
}

// Value returns the present value of a variable or constant in short.
func (in *Interp) Value(name string) (text string, ok bool) {
	defer func() {
		if fault := recover(); fault != nil {
			text, ok = "", false
		}
	}()
	sym := in.ir.Comp.TryResolve(name)
	if sym == nil {
		return "", false
	}
	if kind := bindKind(&sym.Bind); kind != "var" && kind != "const" {
		return "", false
	}
	v := in.ir.ValueOf(name)
	if !v.IsValid() || !v.CanInterface() {
		return "", false
	}
	text = in.text(v.Interface(), v, sym.Type)
	const most = 500
	if r := []rune(text); len(r) > most {
		text = string(r[:most]) + "…"
	}
	return text, true
}
