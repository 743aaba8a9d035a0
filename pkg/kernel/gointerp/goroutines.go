package gointerp

import (
	"go/ast"
	"go/token"
	"strconv"

	"github.com/cosmos72/gomacro/fast"
)

// Names of the kernel's own in the scope of cells. No identifier of a cell begins like that.
const (
	guardName  = "guardring_guard__"
	reportName = "guardring_report__"
	tempName   = "guardring_temp__"
	valueName  = "guardring_value__"
)

// prepareGuard declares the function that every goroutine of a cell defers.
func (in *Interp) prepareGuard() {
	cellGoid = in.goid.Load
	in.ir.DeclFunc(reportName, reportPanic)
	in.ir.Eval("func " + guardName + "() { if fault := recover(); fault != nil { " + reportName + "(fault) } }")
}

// guardGoroutines rewrites the go statements of a cell so that a panic in the goroutine becomes a line on standard
// error: go f(a, b) becomes
//
//	{ t0, t1, t2 := f, a, b; go func() { defer guard(); t0(t1, t2) }() }
//
// with constants left where they are. Function literals are called inside the goroutine in the same way.
func (in *Interp) guardGoroutines(nodes []ast.Node) {
	for i, n := range nodes {
		if g, ok := n.(*ast.GoStmt); ok {
			nodes[i] = in.guardedGo(g)
			n = nodes[i]
		}
		ast.Inspect(n, func(n ast.Node) bool {
			switch n := n.(type) {
			case *ast.BlockStmt:
				in.guardList(n.List)
			case *ast.CaseClause:
				in.guardList(n.Body)
			case *ast.CommClause:
				in.guardList(n.Body)
			case *ast.LabeledStmt:
				if g, ok := n.Stmt.(*ast.GoStmt); ok {
					n.Stmt = in.guardedGo(g)
				}
			}
			return true
		})
	}
}

func (in *Interp) guardList(list []ast.Stmt) {
	for i, s := range list {
		if g, ok := s.(*ast.GoStmt); ok && !isGuarded(g) {
			list[i] = in.guardedGo(g)
		}
	}
}

func isGuarded(g *ast.GoStmt) bool {
	lit, ok := g.Call.Fun.(*ast.FuncLit)
	if !ok || len(lit.Body.List) == 0 {
		return false
	}
	d, ok := lit.Body.List[0].(*ast.DeferStmt)
	if !ok {
		return false
	}
	id, ok := d.Call.Fun.(*ast.Ident)
	return ok && id.Name == guardName
}

func (in *Interp) guardedGo(g *ast.GoStmt) ast.Stmt {
	at := g.Go
	ident := func(name string) *ast.Ident { return &ast.Ident{NamePos: at, Name: name} }
	var temps, values []ast.Expr
	hold := func(x ast.Expr) ast.Expr {
		if in.constant(x) {
			return x
		}
		t := tempName + strconv.Itoa(len(temps))
		temps, values = append(temps, ident(t)), append(values, x)
		return ident(t)
	}
	call := &ast.CallExpr{Fun: g.Call.Fun, Lparen: g.Call.Lparen, Ellipsis: g.Call.Ellipsis, Rparen: g.Call.Rparen}
	if _, ok := g.Call.Fun.(*ast.FuncLit); !ok && !in.builtin(g.Call.Fun) {
		call.Fun = hold(g.Call.Fun)
	}
	for _, a := range g.Call.Args {
		call.Args = append(call.Args, hold(a))
	}
	body := &ast.BlockStmt{Lbrace: at, Rbrace: g.End(), List: []ast.Stmt{
		&ast.DeferStmt{Defer: at, Call: &ast.CallExpr{Fun: ident(guardName), Lparen: at, Rparen: at}},
		&ast.ExprStmt{X: call},
	}}
	lit := &ast.FuncLit{Type: &ast.FuncType{Func: at, Params: &ast.FieldList{Opening: at, Closing: at}}, Body: body}
	start := &ast.GoStmt{Go: at, Call: &ast.CallExpr{Fun: lit, Lparen: at, Rparen: at}}
	block := &ast.BlockStmt{Lbrace: at, Rbrace: g.End()}
	for i := range temps {
		block.List = append(block.List, &ast.AssignStmt{
			Lhs: []ast.Expr{temps[i]}, TokPos: at, Tok: token.DEFINE, Rhs: []ast.Expr{values[i]},
		})
	}
	block.List = append(block.List, start)
	return block
}

// constant reports whether x is made of literals and constants, whose type may depend on where they stand.
func (in *Interp) constant(x ast.Expr) bool {
	switch x := x.(type) {
	case *ast.BasicLit:
		return true
	case *ast.ParenExpr:
		return in.constant(x.X)
	case *ast.UnaryExpr:
		return x.Op != token.AND && x.Op != token.ARROW && in.constant(x.X)
	case *ast.BinaryExpr:
		return in.constant(x.X) && in.constant(x.Y)
	case *ast.Ident:
		if x.Name == "nil" || x.Name == "true" || x.Name == "false" {
			return true
		}
		sym := in.ir.Comp.TryResolve(x.Name)
		return sym != nil && sym.Desc.Class() == fast.ConstBind
	case *ast.SelectorExpr:
		id, ok := x.X.(*ast.Ident)
		if !ok {
			return false
		}
		sym := in.ir.Comp.TryResolve(id.Name)
		if sym == nil {
			return false
		}
		imp, ok := sym.Value.(*fast.Import)
		if !ok {
			return false
		}
		b := imp.Binds[x.Sel.Name]
		return b != nil && b.Desc.Class() == fast.ConstBind
	}
	return false
}

// builtin reports whether x names a builtin function such as close, which is no value.
func (in *Interp) builtin(x ast.Expr) bool {
	id, ok := x.(*ast.Ident)
	if !ok {
		return false
	}
	sym := in.ir.Comp.TryResolve(id.Name)
	if sym == nil {
		return false
	}
	_, ok = sym.Value.(fast.Builtin)
	return ok
}
