package kernel

import (
	"context"
	"fmt"
	"strings"
)

// Interpreter is what the kernel needs of a language. All methods but Interrupt are called from the goroutine that
// called Serve, one at a time.
type Interpreter interface {
	// Run compiles and runs a cell. An error that it returns ends the cell; a *CellError says where.
	Run(ctx context.Context, cell Cell) (*Result, error)
	// Interrupt makes the cell that is running stop at its next statement. It is called from any goroutine, while
	// Run is under way, after the context of the cell was cancelled.
	Interrupt()
	// Check parses code without running it.
	Check(code string) Completeness
	// Names lists what the identifiers in scope mean, without members.
	Names() []Name
	// Describe says what an expression is without evaluating it: its type, and the names that may follow a dot.
	Describe(expr string) (*Description, error)
	// Value returns a short text of the present value of a variable, false when name is none.
	Value(name string) (string, bool)
}

// Cell is one piece of code to run.
type Cell struct {
	Code  string
	Count int // the cell's number; 0 for code that is not a cell, such as a user expression
}

// Result is what a cell ends in.
type Result struct {
	Forms    map[string]any // MIME type to content; empty when the cell has no value
	Metadata map[string]any
	Page     map[string]any // forms for the front end's pager, nil for none
	Warnings []string       // lines for the cell's standard error
}

// Kinds of error of a cell, the error's name in the front end.
const (
	CompileError = "CompileError" // the cell was not run
	CellFailed   = "Error"        // an ordinary error ended the cell
	Panicked     = "Panic"
	Interrupted  = "Interrupted"
	ExitRefused  = "ExitRefused" // os.Exit and its like end the cell, not the kernel
	BadRequest   = "BadRequest"
)

// Place is a place in a cell.
type Place struct {
	Cell   int // the cell's number; 0 when unknown
	Line   int // counts from 1; 0 when unknown
	Column int // in bytes from 1; 0 when unknown
	Func   string
}

// String returns the place in words.
func (p Place) String() string {
	var parts []string
	if p.Cell > 0 {
		parts = append(parts, fmt.Sprintf("cell %d", p.Cell))
	}
	if p.Line > 0 {
		parts = append(parts, fmt.Sprintf("line %d", p.Line))
	}
	if p.Column > 0 {
		parts = append(parts, fmt.Sprintf("column %d", p.Column))
	}
	s := strings.Join(parts, ", ")
	if p.Func != "" {
		s += " in " + p.Func
	}
	return s
}

// CellError is an error with its kind and its places in the code.
type CellError struct {
	Kind    string
	Message string
	Places  []Place // innermost first
	Cause   error
}

// Error returns the message with its first place.
func (e *CellError) Error() string {
	if len(e.Places) > 0 {
		if at := e.Places[0].String(); at != "" {
			return at + ": " + e.Message
		}
	}
	return e.Message
}

// Unwrap returns the cause.
func (e *CellError) Unwrap() error { return e.Cause }

// Completeness is the outcome of Check.
type Completeness int

// The outcomes of Check.
const (
	CodeComplete   Completeness = iota
	CodeIncomplete              // more lines are needed
	CodeInvalid                 // no further line can mend it
)

// Name is a name and what it means.
type Name struct {
	Name string
	Kind string // package, func, type, var, const, field, method, keyword
	Type string // as Go source; empty when there is nothing to say
}

// Description says what an expression is.
type Description struct {
	Kind    string // package, func, type, var, const, value, field, method
	Type    string // the type as Go source; the import path of a package
	Path    string // import path of the package that declares it, "" for cells and predeclared names
	Symbol  string // its name in the documentation index of that package: "Func", "Type", "Type.Method"
	Members []Name // what may follow a dot, sorted by name
}
