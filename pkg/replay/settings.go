package replay

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"strconv"
	"strings"

	"example.org/guardring/pkg/si"
)

// An Assignment gives a name of the cell tagged "settings" another value.
type Assignment struct{ Name, Value string }

// ParseAssignment reads "name=value".
func ParseAssignment(s string) (Assignment, error) {
	name, val, ok := strings.Cut(s, "=")
	name = strings.TrimSpace(name)
	if !ok || !token.IsIdentifier(name) {
		return Assignment{}, fmt.Errorf("%q: NAME=VALUE is due, with a name of the notebook's settings", s)
	}
	return Assignment{name, strings.TrimSpace(val)}, nil
}

// setting is a variable of the settings cell.
type setting struct {
	name     string
	text     bool // its value is a string
	constant bool
}

// settingsOf lists the variables that a cell declares.
func settingsOf(source string) ([]setting, error) {
	// A cell is what stands in a function, or declarations outside one.
	f, err := parser.ParseFile(token.NewFileSet(), "", "package p\nfunc _() {\n"+source+"\n}\n", parser.SkipObjectResolution)
	if err != nil {
		return nil, fmt.Errorf("the settings do not parse as Go: %w", err)
	}
	var out []setting
	add := func(id *ast.Ident, typ, val ast.Expr, constant bool) {
		if id.Name == "_" {
			return
		}
		s := setting{name: id.Name, constant: constant}
		if t, ok := typ.(*ast.Ident); ok && t.Name == "string" {
			s.text = true
		}
		if l, ok := val.(*ast.BasicLit); ok && l.Kind == token.STRING {
			s.text = true
		}
		out = append(out, s)
	}
	at := func(list []ast.Expr, i int) ast.Expr {
		if i < len(list) {
			return list[i]
		}
		return nil
	}
	fn, ok := f.Decls[0].(*ast.FuncDecl)
	if !ok || len(f.Decls) != 1 {
		return nil, fmt.Errorf("the settings do not parse as the statements of a cell")
	}
	for _, stmt := range fn.Body.List {
		switch s := stmt.(type) {
		case *ast.AssignStmt:
			if s.Tok != token.DEFINE {
				continue
			}
			for i, l := range s.Lhs {
				if id, ok := l.(*ast.Ident); ok {
					add(id, nil, at(s.Rhs, i), false)
				}
			}
		case *ast.DeclStmt:
			g, ok := s.Decl.(*ast.GenDecl)
			if !ok || (g.Tok != token.VAR && g.Tok != token.CONST) {
				continue
			}
			for _, spec := range g.Specs {
				vs := spec.(*ast.ValueSpec)
				for i, id := range vs.Names {
					add(id, vs.Type, at(vs.Values, i), g.Tok == token.CONST)
				}
			}
		}
	}
	return out, nil
}

// apply puts the assignments into a cell tagged settings-used after the cell
// tagged settings. One that stands there already is replaced.
func (nb *Notebook) apply(set []Assignment) error {
	if len(set) == 0 {
		return nil
	}
	at := -1
	for i, c := range nb.cells {
		if c.kind == "code" && c.tagged(tagSettings) {
			if at >= 0 {
				return fmt.Errorf("%s and %s are both tagged %q: one is due", nb.cells[at].place(), c.place(), tagSettings)
			}
			at = i
		}
	}
	if at < 0 {
		return fmt.Errorf("no code cell is tagged %q, so nothing can be set; tag the one that holds the settings", tagSettings)
	}
	known, err := settingsOf(nb.cells[at].source)
	if err != nil {
		return fmt.Errorf("%s: %w", nb.cells[at].place(), err)
	}
	var names []string
	for _, k := range known {
		names = append(names, k.name)
	}
	var lines []string
	given := map[string]bool{}
	for _, a := range set {
		if given[a.Name] {
			return fmt.Errorf("%s is set twice", a.Name)
		}
		given[a.Name] = true
		var found *setting
		for i := range known {
			if known[i].name == a.Name {
				found = &known[i]
			}
		}
		switch {
		case found == nil:
			if s := si.Suggest(a.Name, names); s != "" {
				return fmt.Errorf("%s is no setting of the notebook; did you mean %s?", a.Name, s)
			}
			return fmt.Errorf("%s is no setting of the notebook; there are: %s", a.Name, strings.Join(names, ", "))
		case found.constant:
			return fmt.Errorf("%s is a constant of the notebook and can't be set", a.Name)
		}
		val, err := found.value(a.Value)
		if err != nil {
			return err
		}
		lines = append(lines, a.Name+" = "+val)
	}
	return nb.insertUsed(at, strings.Join(lines, "\n"))
}

// value writes a value as a Go expression.
func (s *setting) value(given string) (string, error) {
	e, err := parser.ParseExpr(given)
	if s.text {
		if l, ok := e.(*ast.BasicLit); err == nil && ok && l.Kind == token.STRING {
			return given, nil
		}
		return strconv.Quote(given), nil
	}
	if err != nil || strings.ContainsAny(given, "\n\r") {
		return "", fmt.Errorf("%s=%s: the value is no Go expression on one line, as 7 or 1e-3 or \"text\" is", s.name, given)
	}
	return given, nil
}

// insertUsed puts the cell with the settings used after cell at.
func (nb *Notebook) insertUsed(at int, source string) error {
	list := nb.doc.root.get("cells")
	var kept []*value
	for i, c := range nb.cells {
		if c.kind == "code" && c.tagged(tagUsed) {
			continue
		}
		kept = append(kept, c.v)
		if i != at {
			continue
		}
		v := &value{kind: object}
		v.set("cell_type", textValue("code"))
		v.set("execution_count", &value{kind: literal, raw: "null"})
		if nb.minor >= 5 {
			v.set("id", textValue(nb.freeID()))
		}
		tags := &value{kind: array, items: []*value{textValue(tagUsed)}}
		meta := &value{kind: object}
		meta.set("tags", tags)
		v.set("metadata", meta)
		v.set("outputs", &value{kind: array})
		v.set("source", linesValue(source))
		kept = append(kept, v)
	}
	list.items = kept
	fresh, err := ReadNotebook(nb.Bytes())
	if err != nil {
		return err
	}
	*nb = *fresh
	return nil
}

// freeID is an id for the new cell that no other cell has.
func (nb *Notebook) freeID() string {
	taken := map[string]bool{}
	for _, c := range nb.cells {
		if !c.tagged(tagUsed) {
			taken[c.id] = true
		}
	}
	id := tagUsed
	for n := 2; taken[id]; n++ {
		id = tagUsed + "-" + strconv.Itoa(n)
	}
	return id
}
