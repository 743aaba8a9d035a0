package gointerp

import (
	"bytes"
	"crypto/rand"
	"fmt"
	"go/ast"
	"go/token"
	"io"
	"os"
	"strings"
	"sync"

	"github.com/cosmos72/gomacro/fast"

	"example.org/guardring/pkg/kernel"
)

// listener takes what is printed to os.Stdout while a cell is compiled. The interpreter's compiler prints there when
// it drops a value, and has no other way to say so.
type listener struct {
	r, w *os.File
	mark []byte // ends what is printed during a compilation; nobody else knows it
	seen chan []byte

	mu    sync.Mutex
	late  io.Writer // where to put what comes when nothing is compiled; nil before the first compilation
	busy  bool
	after []byte // read and not yet handed on
}

func newListener() (*listener, error) {
	r, w, err := os.Pipe()
	if err != nil {
		return nil, err
	}
	l := &listener{r: r, w: w, mark: []byte("\x00" + rand.Text() + "\x00"), seen: make(chan []byte, 1)}
	go l.read()
	return l, nil
}

// read hands on what comes up to the mark. A goroutine of an earlier cell may have
// taken the pipe for standard output just before the compilation ended, and write
// after the mark, in one piece with it even.
func (l *listener) read() {
	buf := make([]byte, 4<<10)
	for {
		n, err := l.r.Read(buf)
		l.mu.Lock()
		l.after = append(l.after, buf[:n]...)
		if l.busy {
			if before, rest, ok := bytes.Cut(l.after, l.mark); ok {
				l.busy = false
				l.seen <- bytes.Clone(before)
				l.after = bytes.Clone(rest)
			}
		}
		if !l.busy && len(l.after) > 0 && l.late != nil {
			_, _ = l.late.Write(l.after) // a stream of the kernel
			l.after = nil
		}
		l.mu.Unlock()
		if err != nil {
			return
		}
	}
}

// during runs work and returns the compiler's warnings that a value is dropped. What goroutines of earlier cells
// printed meanwhile goes where it belongs.
func (l *listener) during(work func()) (dropped []string) {
	before := os.Stdout
	l.mu.Lock()
	l.busy, l.late = true, before
	l.mu.Unlock()
	os.Stdout = l.w
	defer func() {
		os.Stdout = before
		if _, err := l.w.Write(l.mark); err != nil {
			return
		}
		for _, line := range bytes.SplitAfter(<-l.seen, []byte("\n")) {
			if bytes.HasPrefix(line, []byte("// warning: expression return")) {
				dropped = append(dropped, string(line))
			} else if len(line) > 0 && !bytes.HasPrefix(line, []byte("// warning: ")) {
				_, _ = before.Write(line) // a stream of the kernel
			}
		}
	}()
	work()
	return nil
}

// valuesDropped is the error for a place that takes fewer values than a call returns.
func (in *Interp) valuesDropped(nodes []ast.Node) error {
	e := &kernel.CellError{Kind: kernel.CompileError, Message: "a call returns more values than are taken here"}
	if call, n := in.droppingCall(nodes); call != nil {
		e.Places = []kernel.Place{in.place(in.ir.Comp.Fileset.Position(call.Pos()), true)}
		e.Message = fmt.Sprintf("%s returns %d values, and one is taken", callName(call), n)
	} else if len(in.warnings.pos) > 0 {
		e.Places = []kernel.Place{in.place(in.warnings.pos[0], true)}
	}
	e.Message += ": an error among the others would be lost; give each value a variable, as in x, err := …"
	return e
}

func callName(call *ast.CallExpr) string {
	switch f := call.Fun.(type) {
	case *ast.Ident:
		return f.Name
	case *ast.SelectorExpr:
		if id, ok := f.X.(*ast.Ident); ok {
			return id.Name + "." + f.Sel.Name
		}
		return f.Sel.Name
	}
	return "the call"
}

// droppingCall finds the first call that returns several values where one is taken. Calls of functions that only the
// cell's own functions see can't be judged.
func (in *Interp) droppingCall(nodes []ast.Node) (found *ast.CallExpr, values int) {
	for _, n := range nodes {
		var stack []ast.Node
		ast.Inspect(n, func(n ast.Node) bool {
			if n == nil {
				stack = stack[:len(stack)-1]
				return true
			}
			if call, ok := n.(*ast.CallExpr); ok && found == nil && singleValue(stack, call) {
				if k := in.results(call.Fun); k > 1 {
					found, values = call, k
				}
			}
			stack = append(stack, n)
			return true
		})
	}
	return found, values
}

// singleValue reports whether a call stands where one value is taken.
func singleValue(stack []ast.Node, call *ast.CallExpr) bool {
	if len(stack) == 0 {
		return false
	}
	switch p := stack[len(stack)-1].(type) {
	case *ast.ExprStmt, *ast.GoStmt, *ast.DeferStmt, *ast.ReturnStmt:
		return false
	case *ast.AssignStmt:
		return len(p.Lhs) == len(p.Rhs) || p.Tok != token.DEFINE && p.Tok != token.ASSIGN
	case *ast.ValueSpec:
		return len(p.Names) == len(p.Values)
	case *ast.CallExpr:
		return p.Fun == call || len(p.Args) > 1
	}
	return true
}

// results returns how many values a function expression returns, 0 when that can't be told.
func (in *Interp) results(fun ast.Expr) (n int) {
	defer func() {
		if recover() != nil { // the compiler's way to say that the expression does not compile by itself
			n = 0
		}
	}()
	c := fast.NewComp(in.ir.Comp, nil)
	c.UpCost = 0
	c.Depth--
	e := c.Expr(fun, nil)
	if e == nil || e.Type == nil || e.Type.ReflectType() == nil || !strings.HasPrefix(e.Type.Kind().String(), "func") {
		return 0
	}
	return e.Type.NumOut()
}
