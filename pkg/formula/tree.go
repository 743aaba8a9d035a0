package formula

import (
	"errors"
	"fmt"
	"go/ast"
	"go/parser"
	"go/scanner"
	"go/token"
	"math"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"example.org/guardring/pkg/si"
)

// Bounds of what is compiled.
const (
	longestSource = 4096 // bytes
	deepest       = 64   // levels of parentheses, calls and signs
	mostVars      = 1024
)

// kind tells the nodes of a tree apart.
type kind uint8

const (
	kindNumber kind = iota
	kindConst
	kindVar
	kindSign // unary minus
	kindBinary
	kindCall
)

// tree is a formula as it was written: the dimension check walks it, so that
// messages point into the source.
type tree struct {
	kind  kind
	value float64 // of a number or constant
	index int     // of a variable, or of a constant in constants
	op    token.Token
	fun   *function
	args  []*tree
	col   int // character, from 1
}

// function is one that formulas may call.
type function struct {
	name string
	op   op
	args int // exactly; −1: two or more
	rule rule
}

// rule says what a function asks of the dimensions of its arguments.
type rule uint8

const (
	rulePure rule = iota // pure numbers in, a pure number out
	ruleSame             // all alike, and so is the result
	ruleAtan2
	ruleSqrt
	rulePow
)

var functions = []function{
	{"sqrt", opSqrt, 1, ruleSqrt}, {"pow", opPow, 2, rulePow}, {"exp", opExp, 1, rulePure},
	{"log", opLog, 1, rulePure}, {"sin", opSin, 1, rulePure}, {"cos", opCos, 1, rulePure},
	{"tan", opTan, 1, rulePure}, {"asin", opAsin, 1, rulePure}, {"acos", opAcos, 1, rulePure},
	{"atan", opAtan, 1, rulePure}, {"atan2", opAtan2, 2, ruleAtan2}, {"sinh", opSinh, 1, rulePure},
	{"cosh", opCosh, 1, rulePure}, {"tanh", opTanh, 1, rulePure}, {"abs", opAbs, 1, ruleSame},
	{"min", opMin, -1, ruleSame}, {"max", opMax, -1, ruleSame},
}

// elsewhere are names that other languages have, with what to write here.
var elsewhere = map[string]string{
	"ln": "write log(x), the natural logarithm", "log10": "write log(x)/log(10)", "log2": "write log(x)/log(2)",
	"fabs": "write abs(x)", "sqr": "write x*x or pow(x, 2)", "square": "write x*x or pow(x, 2)",
	"cbrt": "write pow(x, 1/3)", "hypot": "write sqrt(x*x + y*y)", "arcsin": "write asin(x)",
	"arccos": "write acos(x)", "arctan": "write atan(x)", "arctan2": "write atan2(y, x)",
	"power": "write pow(x, y)", "cot": "write 1/tan(x)",
}

// constant is one that formulas may name.
type constant struct {
	name  string
	value float64
	dim   si.Dimension
}

var constants = func() []constant {
	var list []constant
	for _, c := range si.Constants() {
		list = append(list, constant{c.Name, c.Value, si.MustUnit(c.Unit).Dim})
	}
	return list
}()

func findFunction(name string) *function {
	for i := range functions {
		if functions[i].name == name {
			return &functions[i]
		}
	}
	return nil
}

func findConstant(name string) int {
	return slices.IndexFunc(constants, func(c constant) bool { return c.name == name })
}

// reader turns a source into a tree.
type reader struct {
	src   string
	vars  []string // nil: collect the names instead
	free  bool     // names are collected into vars
	file  *token.File
	depth int
}

func (r *reader) fail(col int, reason, hint string) *Error {
	return &Error{Source: r.src, Column: col, Reason: reason, Hint: hint}
}

// column converts a position of go/parser to a character.
func (r *reader) column(pos token.Pos) int {
	if r.file == nil || !pos.IsValid() {
		return 0
	}
	off := r.file.Offset(pos)
	return utf8.RuneCountInString(r.src[:min(off, len(r.src))]) + 1
}

const powHint = "use pow(x, 2)"

func (r *reader) read() (*tree, error) {
	switch {
	case len(r.src) > longestSource:
		return nil, &Error{Source: r.src, Reason: fmt.Sprintf("it is longer than %d bytes", longestSource)}
	case !utf8.ValidString(r.src):
		return nil, &Error{Source: strings.ToValidUTF8(r.src, "?"), Reason: "it is not UTF-8 text"}
	case strings.TrimSpace(r.src) == "":
		return nil, &Error{Source: r.src, Reason: "it is empty", Hint: "write an expression like c_s + s/(d + d0)"}
	}
	// Go would take what follows for a comment and leave it out.
	if i := strings.Index(r.src, "//"); i >= 0 {
		return nil, r.fail(utf8.RuneCountInString(r.src[:i])+1, "// is no operator", "divide with one /")
	}
	if i := strings.Index(r.src, "/*"); i >= 0 {
		return nil, r.fail(utf8.RuneCountInString(r.src[:i])+1, "/* is no operator", "formulas have no comments")
	}
	if i := strings.IndexByte(r.src, 0); i >= 0 {
		return nil, r.fail(utf8.RuneCountInString(r.src[:i])+1, "a character with the code 0 stands here", "")
	}
	// Line ends are blanks here; Go would end the expression at them.
	flat := strings.Map(func(c rune) rune {
		if c == '\n' || c == '\r' {
			return ' '
		}
		return c
	}, r.src)
	fset := token.NewFileSet()
	e, err := parser.ParseExprFrom(fset, "", flat, parser.SkipObjectResolution)
	fset.Iterate(func(f *token.File) bool { r.file = f; return false })
	if err != nil {
		return nil, r.syntax(flat, err)
	}
	return r.walk(e)
}

// syntax rephrases the first error of go/parser.
func (r *reader) syntax(flat string, err error) error {
	var list scanner.ErrorList
	if !errors.As(err, &list) || len(list) == 0 {
		return r.fail(0, err.Error(), "")
	}
	off := min(list[0].Pos.Offset, len(flat))
	col := utf8.RuneCountInString(flat[:off]) + 1
	before, after := strings.TrimRight(flat[:off], " \t"), flat[off:]
	if strings.HasSuffix(before, "*") && strings.HasPrefix(after, "*") || strings.HasPrefix(after, "**") {
		return r.fail(col, "** is no operator here", powHint)
	}
	for _, signs := range []string{"--", "++"} {
		if strings.HasPrefix(after, signs) {
			return r.fail(col, signs+" is no operator here", "put parentheses or a blank between two signs: x - (-y)")
		}
	}
	letter := func(c rune) bool { return token.IsIdentifier(string(c)) || c == '_' || '0' <= c && c <= '9' }
	keyword := func(at int, word string) error {
		return r.fail(utf8.RuneCountInString(flat[:at])+1, fmt.Sprintf("%q is a word of the Go language", word), "give the quantity another name")
	}
	word := after
	if i := strings.IndexFunc(after, func(c rune) bool { return !letter(c) }); i >= 0 {
		word = after[:i]
	}
	if token.IsKeyword(word) {
		return keyword(off, word)
	}
	c, _ := utf8.DecodeRuneInString(after)
	if after != "" && (letter(c) || c == '(') {
		return r.fail(col, fmt.Sprintf("%q is not expected here", c), "put an operator (+ - * /) between two terms")
	}
	// A keyword earlier on can mislead go/parser as to what follows it.
	at := 0
	for word := range strings.FieldsFuncSeq(flat, func(c rune) bool { return !letter(c) }) {
		at += strings.Index(flat[at:], word)
		if token.IsKeyword(word) {
			return keyword(at, word)
		}
		at += len(word)
	}
	what := "the end"
	if strings.TrimLeft(after, " \t") != "" {
		what = strconv.QuoteRune(c)
	}
	return r.fail(col, what+" is not expected here", "formulas hold names, decimal numbers, + - * /, parentheses and calls like sqrt(x)")
}

func (r *reader) walk(e ast.Expr) (*tree, error) {
	col := r.column(e.Pos())
	if r.depth++; r.depth > deepest {
		return nil, r.fail(col, fmt.Sprintf("it is nested deeper than %d levels", deepest), "")
	}
	defer func() { r.depth-- }()
	switch e := e.(type) {
	case *ast.ParenExpr:
		return r.walk(e.X)
	case *ast.BasicLit:
		return r.number(e, col)
	case *ast.Ident:
		return r.name(e.Name, col)
	case *ast.UnaryExpr:
		switch e.Op {
		case token.ADD:
			return r.walk(e.X)
		case token.SUB:
			x, err := r.walk(e.X)
			if err != nil {
				return nil, err
			}
			return &tree{kind: kindSign, args: []*tree{x}, col: col}, nil
		case token.XOR:
			return nil, r.fail(col, "^ is no operator here", powHint)
		}
		return nil, r.fail(col, fmt.Sprintf("%s is no operator here", e.Op), "the signs are + and -")
	case *ast.StarExpr:
		return nil, r.fail(col, "** is no operator here", powHint)
	case *ast.BinaryExpr:
		return r.binary(e)
	case *ast.CallExpr:
		return r.call(e, col)
	case *ast.SelectorExpr:
		return nil, r.fail(r.column(e.Sel.Pos()), fmt.Sprintf("%q: names hold no point", short(e.Sel.Name)), "")
	case *ast.IndexExpr, *ast.IndexListExpr, *ast.SliceExpr:
		return nil, r.fail(col, "brackets have no meaning here", "use parentheses")
	}
	return nil, r.fail(col, "this is not part of formulas", "formulas hold names, decimal numbers, + - * /, parentheses and calls like sqrt(x)")
}

// binary reads a chain like a + b - c without recursion into its left side, so
// that long sums are not deep.
func (r *reader) binary(e *ast.BinaryExpr) (*tree, error) {
	var spine []*ast.BinaryExpr
	var left ast.Expr = e
	for {
		b, ok := left.(*ast.BinaryExpr)
		if !ok {
			break
		}
		spine = append(spine, b)
		left = b.X
	}
	t, err := r.walk(left)
	if err != nil {
		return nil, err
	}
	for _, b := range slices.Backward(spine) {
		col := r.column(b.OpPos)
		switch b.Op {
		case token.ADD, token.SUB, token.MUL, token.QUO:
		case token.XOR:
			return nil, r.fail(col, "^ is no operator here", powHint)
		case token.REM:
			return nil, r.fail(col, "% is no operator here", "write a percentage as a fraction: 0.02 for 2 %")
		default:
			return nil, r.fail(col, fmt.Sprintf("%s is no operator here", b.Op), "the operators are + - * /")
		}
		right, err := r.walk(b.Y)
		if err != nil {
			return nil, err
		}
		t = &tree{kind: kindBinary, op: b.Op, args: []*tree{t, right}, col: col}
	}
	return t, nil
}

func (r *reader) number(e *ast.BasicLit, col int) (*tree, error) {
	if e.Kind != token.INT && e.Kind != token.FLOAT {
		return nil, r.fail(col, fmt.Sprintf("%s is no decimal number", short(e.Value)), "")
	}
	text := e.Value
	if strings.Trim(text, "0123456789.eE+-") != "" {
		return nil, r.fail(col, fmt.Sprintf("%s is no decimal number", short(text)), "write it like 1000, 0.5 or 1.5e-6")
	}
	if e.Kind == token.INT && len(text) > 1 && text[0] == '0' {
		return nil, r.fail(col, fmt.Sprintf("%s starts with a zero, which Go reads as an octal number", short(text)), "leave the zero out")
	}
	v, err := strconv.ParseFloat(text, 64)
	if err != nil || math.IsInf(v, 0) {
		return nil, r.fail(col, fmt.Sprintf("%s is too large", short(text)), "")
	}
	return &tree{kind: kindNumber, value: v, col: col}, nil
}

func (r *reader) name(name string, col int) (*tree, error) {
	if i := slices.Index(r.vars, name); i >= 0 {
		return &tree{kind: kindVar, index: i, col: col}, nil
	}
	if i := findConstant(name); i >= 0 {
		return &tree{kind: kindConst, index: i, value: constants[i].value, col: col}, nil
	}
	if f := findFunction(name); f != nil && !r.free {
		return nil, r.fail(col, fmt.Sprintf("%s is a function", name), fmt.Sprintf("write %s(…)", name))
	}
	if r.free {
		if len(r.vars) == mostVars {
			return nil, r.fail(col, fmt.Sprintf("it names more than %d quantities", mostVars), "")
		}
		r.vars = append(r.vars, name)
		return &tree{kind: kindVar, index: len(r.vars) - 1, col: col}, nil
	}
	hint := "known are " + list(r.vars) + " and the constants " + list(constantNames())
	if near := si.Suggest(name, append(slices.Clone(r.vars), constantNames()...)); near != "" {
		hint = fmt.Sprintf("did you mean %q?", near)
	}
	return nil, r.fail(col, fmt.Sprintf("%q is not known", short(name)), hint)
}

func (r *reader) call(e *ast.CallExpr, col int) (*tree, error) {
	id, ok := e.Fun.(*ast.Ident)
	if !ok {
		return nil, r.fail(col, "only functions can be called", "put * between two factors")
	}
	f := findFunction(id.Name)
	switch {
	case f != nil:
	case slices.Contains(r.vars, id.Name) || findConstant(id.Name) >= 0:
		return nil, r.fail(col, fmt.Sprintf("%s is no function", id.Name), fmt.Sprintf("write %s*(…) for a product", id.Name))
	default:
		hint, ok := elsewhere[strings.ToLower(id.Name)]
		if !ok {
			var names []string
			for _, f := range functions {
				names = append(names, f.name)
			}
			hint = "known are " + list(names)
			if near := si.Suggest(id.Name, names); near != "" {
				hint = fmt.Sprintf("did you mean %q?", near)
			}
		}
		return nil, r.fail(col, fmt.Sprintf("%q is no function", short(id.Name)), hint)
	}
	switch n := len(e.Args); {
	case e.Ellipsis.IsValid():
		return nil, r.fail(r.column(e.Ellipsis), "… has no meaning here", "")
	case f.args < 0 && n < 2:
		return nil, r.fail(col, fmt.Sprintf("%s takes two arguments or more, not %d", f.name, n), "")
	case f.args >= 0 && n != f.args:
		hint := ""
		if f.args == 1 && n == 2 {
			hint = "numbers have a decimal point, not a comma"
		}
		return nil, r.fail(col, fmt.Sprintf("%s takes %s, not %d", f.name, plural(f.args, "argument"), n), hint)
	}
	t := &tree{kind: kindCall, fun: f, col: col}
	for _, a := range e.Args {
		x, err := r.walk(a)
		if err != nil {
			return nil, err
		}
		t.args = append(t.args, x)
	}
	return t, nil
}

func plural(n int, word string) string {
	if n == 1 {
		return "1 " + word
	}
	return strconv.Itoa(n) + " " + word + "s"
}

func constantNames() []string {
	var names []string
	for _, c := range constants {
		names = append(names, c.name)
	}
	return names
}

// list joins names for a message, the first few of many.
func list(names []string) string {
	const most = 20
	if len(names) == 0 {
		return "no names"
	}
	if len(names) > most {
		return strings.Join(names[:most], " ") + " …"
	}
	return strings.Join(names, " ")
}

// checkNames refuses variables that can't be named in a formula.
func checkNames(src string, vars []string) error {
	if len(vars) > mostVars {
		return &Error{Source: src, Reason: fmt.Sprintf("%d variables are more than %d", len(vars), mostVars)}
	}
	seen := make(map[string]bool, len(vars))
	for _, v := range vars {
		reason, hint := "", ""
		switch {
		case token.IsKeyword(v):
			reason, hint = fmt.Sprintf("the variable %q is a word of the Go language", short(v)), "give it another name"
		case !token.IsIdentifier(v):
			reason, hint = fmt.Sprintf("the variable %q is no name", short(v)), "names are letters, digits and _, and start with no digit"
		case v == "_":
			reason, hint = `the variable "_" is no name`, "give it a name with a letter"
		case findConstant(v) >= 0:
			reason, hint = fmt.Sprintf("the variable %q is the name of a constant", short(v)), "give it another name"
		case seen[v]:
			reason = fmt.Sprintf("the variable %q is given twice", short(v))
		}
		if reason != "" {
			return &Error{Source: src, Reason: reason, Hint: hint}
		}
		seen[v] = true
	}
	return nil
}
