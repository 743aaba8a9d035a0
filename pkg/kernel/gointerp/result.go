package gointerp

import (
	"fmt"
	"go/ast"
	"reflect"
	"strings"

	basereflect "github.com/cosmos72/gomacro/base/reflect"
	"github.com/cosmos72/gomacro/xreflect"

	"example.org/guardring/pkg/kernel"
)

// privatePrefix stands before the names of fields that a cell's type does not export.
const privatePrefix = "𒀸"

const maxText = 100 << 10 // bytes of a value's plain text

// result turns the values of a cell's last expression into forms. An error among them that is not nil fails the
// cell.
func (in *Interp) result(nodes []ast.Node, vals []xreflect.Value, types []xreflect.Type) (*kernel.Result, error) {
	x := lastExpression(nodes)
	if x == nil || len(vals) == 0 {
		return &kernel.Result{}, nil
	}
	n := len(vals)
	if _, isCall := ast.Unparen(x).(*ast.CallExpr); !isCall && n > 1 {
		vals, types, n = vals[:1], types[:1], 1 // the "ok" of a receive, an index or an assertion is not asked for
	}
	call, isCall := ast.Unparen(x).(*ast.CallExpr)
	if n > 0 && len(types) == n && in.isError(types[n-1]) && (n > 1 || isCall) {
		if err, ok := basereflect.ValueInterface(vals[n-1]).(error); ok && err != nil {
			at := in.place(in.ir.Comp.Fileset.Position(x.Pos()), false)
			return nil, &kernel.CellError{Kind: kernel.CellFailed, Message: err.Error(), Cause: err, Places: []kernel.Place{at}}
		}
		vals, types = vals[:n-1], types[:n-1]
		if isCall && printing(call) {
			return &kernel.Result{}, nil
		}
	}
	return in.forms(x, vals, types)
}

// forms draws values. A panic on the way is an error of the cell.
func (in *Interp) forms(x ast.Expr, vals []xreflect.Value, types []xreflect.Type) (res *kernel.Result, err error) {
	defer func() {
		if fault := recover(); fault != nil {
			at := in.place(in.ir.Comp.Fileset.Position(x.Pos()), false)
			e := in.runError(fault, []kernel.Place{at}).(*kernel.CellError)
			if m := positioned.FindString(e.Message); m != "" {
				e.Message = e.Message[len(m):]
			}
			e.Message = "while the value was drawn: " + in.explain(e.Message)
			res, err = nil, e
		}
	}()
	var texts []string
	var values []any
	some := false
	for i, v := range vals {
		if i >= len(types) { // an untyped nil has no type
			return &kernel.Result{}, nil
		}
		value := basereflect.ValueInterface(v)
		some = some || value != nil
		values = append(values, value)
		texts = append(texts, in.text(value, v, types[i]))
	}
	if !some {
		return &kernel.Result{}, nil
	}
	res = &kernel.Result{Forms: map[string]any{}}
	if len(values) == 1 {
		for mime, data := range drawn(values[0]) {
			res.Forms[mime] = data
		}
		if in.render != nil {
			data, meta := in.render(values, types)
			for mime, d := range data {
				res.Forms[mime] = d
			}
			res.Metadata = meta
		}
	}
	if s, ok := res.Forms["text/plain"].(string); !ok || s == "" {
		res.Forms["text/plain"] = strings.Join(texts, ", ")
	}
	return res, nil
}

func lastExpression(nodes []ast.Node) ast.Expr {
	if len(nodes) == 0 {
		return nil
	}
	switch n := nodes[len(nodes)-1].(type) {
	case ast.Expr:
		return n
	case *ast.ExprStmt:
		return n.X
	}
	return nil
}

// printing reports whether a call writes somewhere and returns how much, which nobody wants to see as a result.
func printing(call *ast.CallExpr) bool {
	sel, ok := call.Fun.(*ast.SelectorExpr)
	if !ok {
		return false
	}
	switch sel.Sel.Name {
	case "Print", "Printf", "Println", "Fprint", "Fprintf", "Fprintln", "Write", "WriteString", "WriteByte", "WriteRune", "WriteTo":
		return true
	}
	return false
}

// text writes a value as plain text: its error or String text where it has one, else as fmt does, structs with the
// names of their fields.
func (in *Interp) text(value any, v xreflect.Value, t xreflect.Type) string {
	var s string
	switch x := value.(type) {
	case nil:
		s = "<nil>"
	case error:
		s = x.Error()
	case fmt.Stringer:
		s = x.String()
	case fmt.Formatter, string:
		s = fmt.Sprintf("%v", x)
	default:
		if str, ok := in.emulated(v, t); ok {
			s = str
		} else if structured(reflect.TypeOf(value)) {
			s = fmt.Sprintf("%+v", value)
		} else {
			s = fmt.Sprintf("%v", value)
		}
	}
	s = strings.ReplaceAll(s, privatePrefix, "")
	if len(s) > maxText {
		s = strings.ToValidUTF8(s[:maxText], "") + fmt.Sprintf("… (%d bytes more)", len(s)-maxText)
	}
	return s
}

func structured(t reflect.Type) bool {
	for t != nil && (t.Kind() == reflect.Pointer || t.Kind() == reflect.Slice || t.Kind() == reflect.Array) {
		t = t.Elem()
	}
	return t != nil && t.Kind() == reflect.Struct
}

// emulated calls the String method of a type that was declared in a cell: the interpreter emulates its methods, so
// that fmt does not see them.
func (in *Interp) emulated(v xreflect.Value, t xreflect.Type) (string, bool) {
	if t == nil || t.Kind() == reflect.Interface || !t.Implements(in.stringer) {
		return "", false
	}
	if t.Kind() == reflect.Pointer && v.IsNil() {
		return "<nil>", true
	}
	in.ir.DeclVar(valueName, t, v.Interface())
	s, _ := in.ir.Eval1(valueName + ".String()")
	text, ok := basereflect.ValueInterface(s).(string)
	return text, ok
}
