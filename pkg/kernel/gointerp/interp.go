package gointerp

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"go/ast"
	"go/build"
	"go/scanner"
	"go/token"
	"maps"
	"reflect"
	"regexp"
	"strconv"
	"strings"
	"sync/atomic"

	"github.com/cosmos72/gomacro/ast2"
	"github.com/cosmos72/gomacro/base"
	basereflect "github.com/cosmos72/gomacro/base/reflect"
	"github.com/cosmos72/gomacro/fast"
	mp "github.com/cosmos72/gomacro/go/parser"
	"github.com/cosmos72/gomacro/imports"
	"github.com/cosmos72/gomacro/xreflect"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/kernel"
)

// Render draws values in further forms than text. It may return nil, and it may panic: the cell then fails.
type Render func(vals []any, types []xreflect.Type) (data, metadata map[string]any)

// Interp is the interpreter with the state of all cells run so far. It belongs to the goroutine that called New.
type Interp struct {
	ir     *fast.Interp
	render Render
	linked []string // import paths to name first when an import is refused

	warnings warnings
	listener *listener
	stringer xreflect.Type
	goid     atomic.Uint64 // of the goroutine that runs cells
	cells    int           // pieces of code run, cells or not: the file names of positions
	numbers  map[string]int
}

// New returns an interpreter. linked are the import paths that the kernel brings besides the standard library.
func New(linked []string, render Render) (*Interp, error) {
	rebind()
	// The interpreter asks go/build for export data when it can see a GOROOT, and
	// panics on the type parameters it finds there. A binary built with -trimpath
	// sees none; hide it from all others.
	build.Default.GOROOT = ""
	l, err := newListener()
	if err != nil {
		return nil, err
	}
	in := &Interp{ir: fast.New(), render: render, linked: linked, numbers: map[string]int{}, listener: l}
	in.warnings.at = in.position
	g := &in.ir.Comp.Globals
	g.Stdout, g.Stderr = &in.warnings, &in.warnings
	in.stringer = in.ir.Comp.TypeOf((*fmt.Stringer)(nil)).Elem()
	in.prepareGuard()
	return in, nil
}

// Interp returns the interpreter underneath, for renderers that convert interpreted types.
func (in *Interp) Interp() *fast.Interp { return in.ir }

// SetRender sets the renderer.
func (in *Interp) SetRender(r Render) { in.render = r }

// Interrupt makes the running cell stop at its next statement.
func (in *Interp) Interrupt() { in.ir.Interrupt(nil) }

// warnings takes what the compiler writes while it compiles; some of its warnings are errors of the cell.
type warnings struct {
	text bytes.Buffer
	pos  []token.Position
	at   func() token.Position
}

func (w *warnings) Write(p []byte) (int, error) {
	if bytes.Contains(p, []byte("initializer returns")) || bytes.Contains(p, []byte("variables from expression returning")) {
		w.pos = append(w.pos, w.at())
		w.text.Write(p)
	}
	return len(p), nil
}

func (in *Interp) position() token.Position {
	g := &in.ir.Comp.Globals
	return g.Fileset.Position(g.Pos)
}

// Run compiles and runs a cell.
func (in *Interp) Run(ctx context.Context, c kernel.Cell) (res *kernel.Result, err error) {
	in.goid.Store(goroutine())
	in.cells++
	file := "cell" + strconv.Itoa(in.cells)
	in.numbers[file] = c.Count
	g := &in.ir.Comp.Globals
	g.Filepath, g.Line = file, 0

	binds, types := maps.Clone(in.ir.Comp.Binds), maps.Clone(in.ir.Comp.Types)
	nodes, expr, err := in.compile(c.Code)
	if err != nil {
		in.ir.Comp.Binds, in.ir.Comp.Types = binds, types
		in.ir.Comp.Code.Clear()
		return nil, err
	}
	if expr == nil {
		return &kernel.Result{}, nil
	}
	vals, typs, err := in.exec(ctx, expr, nodes)
	if err != nil {
		in.forget(err, nodes, binds)
		return nil, err
	}
	return in.result(nodes, vals, typs)
}

// compile parses and compiles a cell. All that the compiler objects to becomes an error with its place. The expression
// is nil when the cell holds nothing to run.
func (in *Interp) compile(code string) (nodes []ast.Node, expr *fast.Expr, err error) {
	in.warnings.text.Reset()
	in.warnings.pos = nil
	defer func() {
		if fault := recover(); fault != nil {
			nodes, expr, err = nil, nil, in.compileError(fault)
		}
	}()
	c := in.ir.Comp
	nodes = c.ParseBytes([]byte(parenthesise(code)))
	if err := in.refuseImports(nodes); err != nil {
		return nil, nil, err
	}
	in.guardGoroutines(nodes)
	nodes = blockExpressions(nodes)
	form, _ := c.MacroExpandCodewalk(ast2.AnyToAst(nodes, "cell"))
	dropped := in.listener.during(func() { expr = in.ir.CompileAst(form) })
	if len(dropped) > 0 || in.warnings.text.Len() > 0 {
		return nil, nil, in.valuesDropped(nodes)
	}
	return nodes, expr, nil
}

// blockExpressions puts the expressions of a cell but the last into blocks, so that a panic in one is found at its
// own line.
func blockExpressions(nodes []ast.Node) []ast.Node {
	out := append([]ast.Node(nil), nodes...)
	for i := range len(out) - 1 {
		var x ast.Expr
		switch n := out[i].(type) {
		case *ast.ExprStmt:
			x = n.X
		case ast.Expr:
			x = n
		}
		if x != nil {
			out[i] = &ast.BlockStmt{Lbrace: x.Pos(), List: []ast.Stmt{&ast.ExprStmt{X: x}}, Rbrace: x.End()}
		}
	}
	return out
}

// errInterrupted is what running code ends in when it was interrupted before it began.
var errInterrupted = &kernel.CellError{Kind: kernel.Interrupted, Message: "the cell was interrupted"}

// exec runs compiled code.
func (in *Interp) exec(ctx context.Context, expr *fast.Expr, nodes []ast.Node) (vals []xreflect.Value, types []xreflect.Type, err error) {
	env := in.ir.PrepareEnv()
	run := env.Run
	if expr.Untyped() {
		expr.ConstTo(expr.DefaultType())
	}
	fun := expr.AsXV(fast.COptKeepUntyped)
	env.IP, env.DebugPos, env.Code = 0, nil, nil
	outer := run.CurrEnv
	run.CurrEnv = env
	watch := in.watchDepth(run)
	defer func() {
		fault := recover()
		watch.stop()
		if fault != nil {
			err = in.runError(fault, in.places(run.CurrEnv, nodes))
			if _, ok := fault.(base.Signal); ok && watch.tooDeep.Load() {
				e := err.(*kernel.CellError)
				e.Kind, e.Message = kernel.Panicked, fmt.Sprintf("functions call each other more than %d deep: a recursion without an end?", maxDepth)
				e.Places = e.Places[:min(len(e.Places), 5)]
			}
		}
		// A late interrupt, or a panic that left its marks, must not reach the next cell.
		run.CurrEnv = outer
		run.Signals = base.Signals{}
		run.Interrupt = nil
		run.ExecFlags = 0
		run.PanicFun, run.DeferOfFun, run.Panic, run.InstallDefer = nil, nil, nil, nil
	}()
	// PrepareEnv has cleared interrupts that came before it; those have cancelled the context.
	if ctx.Err() != nil {
		return nil, nil, errInterrupted
	}
	v, vs := fun(env)
	return basereflect.PackValues(v, vs), basereflect.PackTypes(expr.Type, expr.Types), nil
}

// places follows the stack of interpreted functions, innermost first.
func (in *Interp) places(env *fast.Env, nodes []ast.Node) []kernel.Place {
	var out []kernel.Place
	for env != nil {
		at := token.NoPos
		if env.IP >= 0 && env.IP < len(env.DebugPos) {
			at = env.DebugPos[env.IP]
		}
		caller := env
		for caller != nil && caller.Caller == nil {
			caller = caller.Outer
		}
		if at == token.NoPos && caller == nil && len(nodes) > 0 {
			at = nodes[len(nodes)-1].Pos() // all statements are done: it was the last expression
		}
		if at != token.NoPos && (len(out) < 100 || caller == nil) {
			out = append(out, in.place(in.ir.Comp.Fileset.Position(at), false))
		}
		if caller == nil {
			break
		}
		env = caller.Caller
	}
	return out
}

func (in *Interp) place(p token.Position, column bool) kernel.Place {
	at := kernel.Place{Cell: in.numbers[p.Filename], Line: p.Line}
	if column {
		at.Column = p.Column
	}
	return at
}

// runError puts what running code panicked with into an error.
func (in *Interp) runError(fault any, at []kernel.Place) error {
	e := &kernel.CellError{Kind: kernel.Panicked, Places: at}
	switch f := fault.(type) {
	case cell.Failure:
		e.Kind, e.Message, e.Cause = kernel.CellFailed, f.Error(), f.Err
		if len(at) > 0 {
			e.Places = at[len(at)-1:] // an ordinary error: the line of the cell, no stack
		}
	case exitRequest:
		e.Kind, e.Message = kernel.ExitRefused, f.String()
	case base.Signal:
		e.Kind, e.Message = kernel.Interrupted, "the cell was interrupted"
	case *reflect.ValueError:
		// The interpreter reaches through pointers by reflection.
		e.Message, e.Cause = "nil pointer dereference", f
		if f.Kind != reflect.Invalid && f.Kind != reflect.Pointer {
			e.Message = f.Error()
		}
	case error:
		e.Message, e.Cause = f.Error(), f
	default:
		e.Message = strings.TrimPrefix(safeText(f), "reflect: ")
	}
	return e
}

var positioned = regexp.MustCompile(`^(cell\d+):(\d+):(\d+): `)

// compileError puts what the parser or compiler panicked with into an error.
func (in *Interp) compileError(fault any) error {
	e := &kernel.CellError{Kind: kernel.CompileError}
	var known *kernel.CellError
	switch f := fault.(type) {
	case error:
		var list scanner.ErrorList
		if errors.As(f, &known) {
			return known
		}
		if errors.As(f, &list) && len(list) > 0 {
			e.Message = list[0].Msg
			e.Places = []kernel.Place{in.place(list[0].Pos, true)}
			e.Message = in.explain(e.Message)
			if len(list) > 1 {
				e.Message += fmt.Sprintf(" (and %d more errors)", len(list)-1)
			}
			return e
		}
		e.Message = f.Error()
	default:
		e.Message = safeText(f)
	}
	if m := positioned.FindStringSubmatch(e.Message); m != nil {
		line, _ := strconv.Atoi(m[2]) // digits, as the pattern says
		col, _ := strconv.Atoi(m[3])
		e.Places = []kernel.Place{{Cell: in.numbers[m[1]], Line: line, Column: col}}
		e.Message = e.Message[len(m[0]):]
	} else if p := in.position(); p.IsValid() {
		e.Places = []kernel.Place{in.place(p, false)}
	}
	e.Message = in.explain(e.Message)
	return e
}

var (
	noSelector = regexp.MustCompile(`^not a type: ([\pL_][\pL\d_]*\.[\pL_][\pL\d_]*) <`)
	noPackage  = regexp.MustCompile(`^undefined "([^"]+)" in `)
	assignment = regexp.MustCompile(`(?s)^error compiling assignment: .*\n\t`)
)

// explain says in the words of the language what the interpreter says in its own, with a hint where there is one.
func (in *Interp) explain(msg string) string {
	msg = assignment.ReplaceAllString(msg, "")
	if m := noSelector.FindStringSubmatch(msg); m != nil {
		return "undefined: " + m[1]
	}
	name, undefined := strings.CutPrefix(msg, "undefined identifier: ")
	if m := noPackage.FindStringSubmatch(msg); m != nil {
		name, undefined = m[1], true
	}
	if undefined {
		msg = "undefined: " + name
		switch name {
		case "min", "max", "clear":
			return msg + " (the interpreter does not have this builtin function; declare one, or use package math)"
		}
		for _, path := range in.linked {
			if path[strings.LastIndexByte(path, '/')+1:] == name {
				return msg + fmt.Sprintf(" (import %q first)", path)
			}
		}
		if _, ok := imports.Packages[name]; ok {
			return msg + fmt.Sprintf(" (import %q first)", name)
		}
		return msg
	}
	switch {
	case strings.HasPrefix(msg, "cannot range over") && strings.Contains(msg, "int>"):
		return msg + " (the interpreter can't range over integers: write for i := 0; i < n; i++)"
	case strings.Contains(msg, "missing method"):
		return strings.Join(strings.Fields(msg), " ") + " (the interpreter finds methods of a cell's type for an interface only when their receiver is no pointer)"
	case msg == "expected '(', found '['":
		return msg + " (cells can't declare generic functions or types)"
	}
	return msg
}

func safeText(v any) (s string) {
	defer func() {
		if fault := recover(); fault != nil {
			s = fmt.Sprintf("a %T whose text can't be written: %v", v, fault)
		}
	}()
	return fmt.Sprint(v)
}

// forget takes back the variables that a failed cell declared but did not come to set.
func (in *Interp) forget(err error, nodes []ast.Node, before map[string]*fast.Bind) {
	var e *kernel.CellError
	failed := len(nodes)
	if errors.As(err, &e) && len(e.Places) > 0 {
		line := e.Places[len(e.Places)-1].Line // outermost: the cell's own
		for i, n := range nodes {
			if in.ir.Comp.Fileset.Position(n.End()).Line >= line {
				failed = i
				break
			}
		}
	}
	for _, n := range nodes[min(failed, len(nodes)):] {
		for _, name := range declared(n) {
			now := in.ir.Comp.Binds[name]
			if now == nil || now == before[name] {
				continue
			}
			if before[name] == nil {
				delete(in.ir.Comp.Binds, name)
			} else {
				in.ir.Comp.Binds[name] = before[name]
			}
		}
	}
}

// declared lists the variables that a statement or declaration declares.
func declared(n ast.Node) []string {
	var names []string
	switch n := n.(type) {
	case *ast.AssignStmt:
		if n.Tok == token.DEFINE {
			for _, l := range n.Lhs {
				if id, ok := l.(*ast.Ident); ok {
					names = append(names, id.Name)
				}
			}
		}
	case *ast.DeclStmt:
		return declared(n.Decl)
	case *ast.GenDecl:
		if n.Tok == token.VAR {
			for _, s := range n.Specs {
				if v, ok := s.(*ast.ValueSpec); ok {
					for _, id := range v.Names {
						names = append(names, id.Name)
					}
				}
			}
		}
	}
	return names
}

// Check parses code without running it.
func (in *Interp) Check(code string) (c kernel.Completeness) {
	defer func() {
		if fault := recover(); fault != nil {
			c = kernel.CodeInvalid
		}
	}()
	var p mp.Parser
	g := &in.ir.Comp.Globals
	p.Configure(g.ParserMode, g.MacroChar)
	p.Init(g.Fileset, "check", 0, []byte(parenthesise(code)))
	_, err := p.Parse()
	if err == nil {
		return kernel.CodeComplete
	}
	if wantsOperand(code) {
		return kernel.CodeIncomplete
	}
	end := len(strings.TrimRight(code, " \t\r\n"))
	var list scanner.ErrorList
	if errors.As(err, &list) && len(list) > 0 {
		if list[0].Pos.Offset >= end || strings.Contains(list[0].Msg, "'EOF'") {
			return kernel.CodeIncomplete
		}
	}
	return kernel.CodeInvalid
}

// isError reports whether t is the interface error.
func (in *Interp) isError(t xreflect.Type) bool {
	return t != nil && t.ReflectType() == reflect.TypeFor[error]()
}
