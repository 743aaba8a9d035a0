package bench

import (
	"errors"
	"fmt"
	"strings"

	"github.com/pelletier/go-toml/v2"

	"example.org/guardring/pkg/si"
)

// Places knows where every value of a TOML text stands, so that other files
// than benches and budgets can name line and column in their messages too.
type Places struct {
	file string
	at   map[string]*node
}

// FindPlaces reads the places of the values in data; file is for messages. Its
// error says what is not TOML, and where.
func FindPlaces(file string, data []byte) (*Places, error) {
	root, err := document(file, data)
	if err != nil {
		return nil, err
	}
	p := &Places{file: file, at: map[string]*node{}}
	p.add(root)
	return p, nil
}

func (p *Places) add(n *node) {
	if n.path != "" && p.at[n.path] == nil {
		p.at[n.path] = n
	}
	for _, k := range n.keys {
		p.add(n.fields[k])
	}
	for _, e := range n.items {
		p.add(e)
	}
}

// Errorf is an error about the value at path ("sphere[2].charge.value", elements
// counted from 1), or about the innermost table around it that the file has. key
// is how the message calls it.
func (p *Places) Errorf(path, key, format string, a ...any) *Error {
	e := &Error{File: p.file, Key: key, Problem: fmt.Sprintf(format, a...)}
	for path != "" {
		if n := p.at[path]; n != nil {
			e.Line, e.Column = n.vline, n.vcol
			break
		}
		path = path[:max(strings.LastIndexByte(path, '.'), strings.LastIndexByte(path, '['), 0)]
	}
	return e
}

// Undecoded words an error of the TOML library's decoder about a text that is
// TOML: keys that are not among known, or a value of the wrong kind.
func (p *Places) Undecoded(err error, known []string) error {
	var strict *toml.StrictMissingError
	if errors.As(err, &strict) {
		var l errorList
		for i := range strict.Errors {
			e := &strict.Errors[i]
			row, col := e.Position()
			hint := ""
			if s := suggest(e.Key()[len(e.Key())-1], known); s != "" {
				hint = fmt.Sprintf("; did you mean %q?", s)
			}
			l.add(&Error{File: p.file, Line: row, Column: col, Key: strings.Join(e.Key(), "."),
				Problem: "this key is not known" + hint})
		}
		return l.err()
	}
	e := &Error{File: p.file, Problem: "a value is not of the kind that is due", Err: err}
	var d *toml.DecodeError
	if errors.As(err, &d) {
		e.Line, e.Column = d.Position()
		e.Key = strings.Join(d.Key(), ".")
	}
	for _, n := range p.at {
		if n.vline == e.Line && n.vcol == e.Column && n.shape != isTable {
			e.Problem = shown(n) + " is not of the kind that is due"
		}
	}
	// The decoder names the type of the field that it could not fill.
	for _, w := range []struct{ typ, due string }{{"uint64", "a whole number, zero or above, is due"}, {"int", "a whole number is due"},
		{"string", "a text is due; put it in quotes"}, {"[]float64", "an array of numbers is due"}} {
		if strings.HasSuffix(err.Error(), "of type "+w.typ) {
			e.Problem = strings.Replace(e.Problem, "is not of the kind that is due", "where "+w.due, 1)
			break
		}
	}
	return e
}

// WrongDimension says in a sentence that text, a quantity or unit of dimension
// found.Dim, stands where a quantity like another is due.
func WrongDimension(text string, found, like si.Unit) string {
	problem := fmt.Sprintf("%s is %s; %s is due", quoted(text), dimensionName(found), dimensionName(like))
	if !like.Dim.IsOne() {
		problem += fmt.Sprintf(" (for example %s)", like.Symbol)
	}
	return problem
}
