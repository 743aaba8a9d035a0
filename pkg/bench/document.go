package bench

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode/utf8"

	"github.com/pelletier/go-toml/v2"
	"github.com/pelletier/go-toml/v2/unstable"
)

// Bounds of a bench or budget file. Real ones are a few kilobytes.
const (
	maxDocument = 1 << 20 // bytes
	maxNesting  = 16      // arrays and inline tables within each other
	maxDots     = 64      // dots in a dotted key
	maxKeys     = 20000   // keys in all
)

// shape is what a node of the document is.
type shape uint8

const (
	isTable shape = iota
	isArray
	isText
	isNumber
	isBool
	isDate
)

func (s shape) String() string {
	return [...]string{"a table", "an array", "a text", "a number", "true or false", "a date"}[s]
}

// node is a value of the document with its place and the path of its key.
type node struct {
	shape shape
	path  string // "channels.voltage.unit"
	name  string // last part of path
	line  int    // of the key (of the value for elements of arrays)
	col   int
	vline int // of the value
	vcol  int

	text    string // the text, or the number, boolean or date as written
	number  float64
	integer bool
	flag    bool

	keys   []string // of a table, in the order of the file
	fields map[string]*node
	items  []*node // of an array

	used   bool // a reader has asked for it
	inline bool
}

// field returns the value of a key of table n, or nil, and notes it as known.
func (n *node) field(key string) *node {
	if n == nil || n.shape != isTable {
		return nil
	}
	f := n.fields[key]
	if f != nil {
		f.used = true
	}
	return f
}

// document reads TOML into nodes. Two passes: the library's own decoder finds
// everything that is wrong by the TOML specification; its syntax tree gives
// every value its place, which the decoder does not hand out.
func document(file string, data []byte) (*node, error) {
	if len(data) > maxDocument {
		return nil, &Error{File: file, Problem: fmt.Sprintf("the file has %d bytes; at most %d are read", len(data), maxDocument)}
	}
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))
	if !utf8.Valid(data) {
		line, col := place(data, invalidUTF8(data))
		return nil, &Error{File: file, Line: line, Column: col, Problem: "this is not UTF-8 text; save the file as UTF-8"}
	}
	if bytes.IndexByte(data, 0) >= 0 {
		line, col := place(data, bytes.IndexByte(data, 0))
		return nil, &Error{File: file, Line: line, Column: col, Problem: "there is a zero byte here; this is not a text file"}
	}
	if line, col, problem := nesting(data); problem != "" {
		return nil, &Error{File: file, Line: line, Column: col, Problem: problem}
	}
	var any map[string]any
	if err := toml.Unmarshal(data, &any); err != nil {
		return nil, syntaxError(file, err)
	}
	t := tree{file: file, data: data}
	return t.read()
}

func invalidUTF8(data []byte) int {
	for i := 0; i < len(data); {
		r, n := utf8.DecodeRune(data[i:])
		if r == utf8.RuneError && n <= 1 {
			return i
		}
		i += n
	}
	return len(data)
}

// nesting checks the depth of brackets and of dotted keys before the parser
// recurses into them; it returns what is wrong, and where, or "". Brackets and dots
// within texts and comments may count too, which only makes it stricter than it
// needs to be on a text of several lines that holds 16 of the ones or 64 of the
// others.
func nesting(data []byte) (line, col int, problem string) {
	depth, dots, quote := 0, 0, byte(0)
	for i := 0; i < len(data); i++ {
		c := data[i]
		switch {
		case c == '\n':
			quote, dots = 0, 0
		case quote != 0:
			if c == '\\' && quote == '"' {
				i++
			} else if c == quote {
				quote = 0
			}
		case c == '"' || c == '\'':
			quote = c
		case c == '#':
			n := bytes.IndexByte(data[i:], '\n')
			if n < 0 {
				return 0, 0, ""
			}
			i += n - 1
		case c == '[' || c == '{':
			dots = 0
			if depth++; depth > maxNesting {
				line, col = place(data, i)
				return line, col, fmt.Sprintf("arrays and tables are nested more than %d deep", maxNesting)
			}
		case c == ']' || c == '}':
			depth = max(depth-1, 0)
		case c == '.':
			if dots++; dots > maxDots {
				line, col = place(data, i)
				return line, col, fmt.Sprintf("a key has more than %d parts", maxDots)
			}
		case c == '=' || c == ',':
			dots = 0
		}
	}
	return 0, 0, ""
}

// place returns the line and column, in characters from 1, of a byte offset.
func place(data []byte, offset int) (line, col int) {
	offset = min(max(offset, 0), len(data))
	head := data[:offset]
	line = 1 + bytes.Count(head, []byte{'\n'})
	return line, 1 + utf8.RuneCount(head[bytes.LastIndexByte(head, '\n')+1:])
}

// syntaxError words an error of the TOML library as one of ours.
func syntaxError(file string, err error) error {
	e := &Error{File: file, Err: err}
	var d *toml.DecodeError
	if errors.As(err, &d) {
		e.Line, e.Column = d.Position()
		e.Key = strings.Join(d.Key(), ".")
	}
	e.Problem = "not valid TOML: " + strings.TrimPrefix(err.Error(), "toml: ")
	return e
}

// tree builds nodes from the syntax tree of the document.
type tree struct {
	file string
	data []byte
	p    unstable.Parser
	root *node
	keys int
	err  error

	// Lines are looked up by walking forward from the last place found.
	offset, line, start int
}

func (t *tree) place(offset int) (line, col int) {
	if offset < t.offset {
		t.offset, t.line, t.start = 0, 1, 0
	}
	for {
		i := bytes.IndexByte(t.data[t.offset:offset], '\n')
		if i < 0 {
			break
		}
		t.offset += i + 1
		t.line++
		t.start = t.offset
	}
	t.offset = offset
	return t.line, 1 + utf8.RuneCount(t.data[t.start:offset])
}

func (t *tree) read() (*node, error) {
	t.line = 1
	t.root = &node{shape: isTable, line: 1, col: 1, used: true}
	t.p.Reset(t.data)
	current := t.root
	for t.p.NextExpression() {
		e := t.p.Expression()
		switch e.Kind {
		case unstable.Table:
			current = t.descend(t.root, e.Key())
			if current.shape != isTable {
				return nil, t.impossible(current)
			}
		case unstable.ArrayTable:
			n := t.descendArray(e.Key())
			if n == nil {
				return nil, t.err
			}
			current = n
		case unstable.KeyValue:
			t.assign(current, e)
		}
		if t.err != nil {
			return nil, t.err
		}
	}
	if err := t.p.Error(); err != nil {
		return nil, syntaxError(t.file, err)
	}
	return t.root, nil
}

// impossible is an error that the decoder has ruled out before.
func (t *tree) impossible(n *node) error {
	return &Error{File: t.file, Line: n.line, Column: n.col, Key: n.path, Problem: "the key is defined twice"}
}

func (t *tree) child(n *node, key *unstable.Node) *node {
	name := string(key.Data)
	if c := n.fields[name]; c != nil {
		return c
	}
	if t.keys++; t.keys > maxKeys && t.err == nil {
		t.err = &Error{File: t.file, Problem: fmt.Sprintf("more than %d keys", maxKeys)}
	}
	line, col := t.place(int(key.Raw.Offset))
	c := &node{shape: isTable, path: join(n.path, name), name: name, line: line, col: col, vline: line, vcol: col}
	if n.fields == nil {
		n.fields = map[string]*node{}
	}
	n.fields[name] = c
	n.keys = append(n.keys, name)
	return c
}

// join appends a key to a path, in quotes when it is no bare key of TOML.
func join(path, key string) string {
	bare := key != ""
	for _, r := range key {
		if !(r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || r == '_' || r == '-') {
			bare = false
		}
	}
	if !bare {
		key = strconv.Quote(key)
	}
	if path == "" {
		return key
	}
	return path + "." + key
}

// descend follows a dotted key from n, making tables on its way; an array of
// tables stands for its last element.
func (t *tree) descend(n *node, it unstable.Iterator) *node {
	for it.Next() {
		n = t.child(n, it.Node())
		if n.shape == isArray && len(n.items) > 0 {
			n = n.items[len(n.items)-1]
		}
	}
	return n
}

func (t *tree) descendArray(it unstable.Iterator) *node {
	n := t.root
	for it.Next() {
		key := it.Node()
		n = t.child(n, key)
		if !it.IsLast() {
			if n.shape == isArray && len(n.items) > 0 {
				n = n.items[len(n.items)-1]
			}
			continue
		}
		line, col := t.place(int(key.Raw.Offset))
		n.shape = isArray
		e := &node{shape: isTable, path: fmt.Sprintf("%s[%d]", n.path, len(n.items)+1), name: n.name,
			line: line, col: col, vline: line, vcol: col}
		n.items = append(n.items, e)
		return e
	}
	return n
}

func (t *tree) assign(n *node, e *unstable.Node) {
	it := e.Key()
	for it.Next() {
		if n.shape == isArray && len(n.items) > 0 {
			n = n.items[len(n.items)-1]
		}
		n = t.child(n, it.Node())
	}
	t.value(n, e.Value())
}

func (t *tree) value(n *node, v *unstable.Node) {
	if v.Raw.Length > 0 {
		n.vline, n.vcol = t.place(int(v.Raw.Offset))
	}
	switch v.Kind {
	case unstable.String:
		n.shape, n.text = isText, string(v.Data)
	case unstable.Integer, unstable.Float:
		n.shape, n.text = isNumber, string(v.Data)
		n.number, n.integer = tomlNumber(n.text), v.Kind == unstable.Integer
	case unstable.Bool:
		n.shape, n.text = isBool, string(v.Data)
		n.flag = n.text == "true"
	case unstable.LocalDate, unstable.LocalTime, unstable.LocalDateTime, unstable.DateTime:
		n.shape, n.text = isDate, string(v.Data)
	case unstable.Array:
		n.shape = isArray
		it := v.Children()
		for it.Next() {
			c := it.Node()
			if c.Kind == unstable.Comment {
				continue
			}
			if t.keys++; t.keys > maxKeys && t.err == nil {
				t.err = &Error{File: t.file, Problem: fmt.Sprintf("more than %d keys and array elements", maxKeys)}
				return
			}
			e := &node{path: fmt.Sprintf("%s[%d]", n.path, len(n.items)+1), name: n.name, line: n.line, col: n.col, vline: n.vline, vcol: n.vcol}
			n.items = append(n.items, e)
			t.value(e, c)
		}
	case unstable.InlineTable:
		n.shape, n.inline = isTable, true
		it := v.Children()
		for it.Next() {
			if c := it.Node(); c.Kind == unstable.KeyValue {
				t.assign(n, c)
			}
		}
	}
}

// tomlNumber converts a number that the TOML decoder has accepted.
func tomlNumber(s string) float64 {
	s = strings.ReplaceAll(s, "_", "")
	switch strings.TrimLeft(s, "+-") {
	case "nan":
		return math.NaN()
	case "inf":
		if s[0] == '-' {
			return math.Inf(-1)
		}
		return math.Inf(1)
	}
	if i, err := strconv.ParseInt(s, 0, 64); err == nil {
		return float64(i)
	}
	f, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return math.NaN() // beyond the range of doubles: refused by whoever reads it
	}
	return f
}
