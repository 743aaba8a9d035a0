package replay

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"sort"
	"strings"
	"unicode/utf8"
)

// Bounds of a document.
const (
	maxDocument = 256 << 20 // bytes
	maxDepth    = 200       // objects and arrays inside one another
)

// kind is what a value is.
type kind uint8

const (
	object kind = iota
	array
	text
	number
	literal // true, false, null
)

// value is a JSON value that keeps the order of its keys and the spelling of its
// strings and numbers, so that what is not changed is written as it was read
// (RFC 8259).
type value struct {
	kind    kind
	raw     string // of a string, number or literal, as it stands in the file
	members []member
	items   []*value
}

// member is one key of an object.
type member struct {
	key string
	raw string // the key as it stands in the file
	val *value
}

// document is a JSON file: its value, and how it was laid out.
type document struct {
	root   *value
	indent string // of one level; "" is all on one line
	end    string // after the value
}

// parseDocument reads a JSON text. Keys that stand twice in an object are refused:
// readers would not agree on which counts.
func parseDocument(data []byte) (*document, error) {
	if len(data) > maxDocument {
		return nil, fmt.Errorf("%d bytes; a document may have %d", len(data), maxDocument)
	}
	if bytes.HasPrefix(data, []byte("\xef\xbb\xbf")) {
		return nil, errors.New("the text begins with a byte order mark; save the file as UTF-8 without one")
	}
	if bytes.HasPrefix(data, []byte("\xff\xfe")) || bytes.HasPrefix(data, []byte("\xfe\xff")) {
		return nil, errors.New("this is UTF-16 text, as some shells redirect it; save the file as UTF-8")
	}
	if !utf8.Valid(data) {
		return nil, errors.New("the text is not UTF-8; save the file as UTF-8")
	}
	p := &docReader{data: data, dec: json.NewDecoder(bytes.NewReader(data))}
	p.dec.UseNumber()
	root, err := p.value(0)
	if err != nil {
		return nil, p.positioned(err)
	}
	rest := data[p.dec.InputOffset():]
	if s := strings.TrimSpace(string(rest)); s != "" {
		return nil, p.positioned(errors.New("there is more after the end of the document"))
	}
	d := &document{root: root}
	if bytes.HasSuffix(rest, []byte("\n")) {
		d.end = "\n"
	}
	if i := bytes.IndexByte(data, '\n'); i >= 0 && int64(i) < p.dec.InputOffset() {
		line := data[i+1:]
		d.indent = string(line[:len(line)-len(bytes.TrimLeft(line, " \t"))])
	}
	return d, nil
}

// docReader turns the decoder's tokens into values.
type docReader struct {
	data []byte
	dec  *json.Decoder
}

// token returns the next token and its spelling.
func (p *docReader) token() (json.Token, string, error) {
	from := p.dec.InputOffset()
	t, err := p.dec.Token()
	if err != nil {
		if errors.Is(err, io.EOF) {
			err = io.ErrUnexpectedEOF
		}
		return nil, "", err
	}
	return t, strings.TrimLeft(string(p.data[from:p.dec.InputOffset()]), " \t\r\n,:"), nil
}

func (p *docReader) value(depth int) (*value, error) {
	t, raw, err := p.token()
	if err != nil {
		return nil, err
	}
	return p.from(t, raw, depth)
}

func (p *docReader) from(t json.Token, raw string, depth int) (*value, error) {
	if depth > maxDepth {
		return nil, fmt.Errorf("objects and arrays stand deeper than %d in one another", maxDepth)
	}
	switch t := t.(type) {
	case string:
		return &value{kind: text, raw: raw}, nil
	case json.Number:
		return &value{kind: number, raw: raw}, nil
	case json.Delim:
		if t == '[' {
			return p.array(depth)
		}
		return p.object(depth)
	}
	return &value{kind: literal, raw: raw}, nil
}

func (p *docReader) array(depth int) (*value, error) {
	v := &value{kind: array}
	for {
		t, raw, err := p.token()
		if err != nil {
			return nil, err
		}
		if t == json.Delim(']') {
			return v, nil
		}
		item, err := p.from(t, raw, depth+1)
		if err != nil {
			return nil, err
		}
		v.items = append(v.items, item)
	}
}

func (p *docReader) object(depth int) (*value, error) {
	v := &value{kind: object}
	seen := map[string]bool{}
	for {
		t, raw, err := p.token()
		if err != nil {
			return nil, err
		}
		if t == json.Delim('}') {
			return v, nil
		}
		key, ok := t.(string)
		if !ok {
			return nil, fmt.Errorf("a key is due, not %s", raw)
		}
		if seen[key] {
			return nil, fmt.Errorf("the key %s stands twice in one object", raw)
		}
		seen[key] = true
		val, err := p.value(depth + 1)
		if err != nil {
			return nil, err
		}
		v.members = append(v.members, member{key: key, raw: raw, val: val})
	}
}

// positioned adds line and column to an error.
func (p *docReader) positioned(err error) error {
	at := p.dec.InputOffset()
	var syntax *json.SyntaxError
	if errors.As(err, &syntax) {
		at = syntax.Offset
	}
	if at > int64(len(p.data)) {
		at = int64(len(p.data))
	}
	before := p.data[:at]
	line := 1 + bytes.Count(before, []byte("\n"))
	column := 1 + utf8.RuneCount(before[bytes.LastIndexByte(before, '\n')+1:])
	return fmt.Errorf("line %d, column %d: %w", line, column, err)
}

// bytes writes the document as it was laid out.
func (d *document) bytes() []byte {
	var b bytes.Buffer
	d.root.write(&b, d.indent, 0)
	b.WriteString(d.end)
	return b.Bytes()
}

func (v *value) write(b *bytes.Buffer, indent string, depth int) {
	line := func(depth int) {
		if indent != "" {
			b.WriteByte('\n')
			for range depth {
				b.WriteString(indent)
			}
		}
	}
	switch v.kind {
	case object:
		if len(v.members) == 0 {
			b.WriteString("{}")
			return
		}
		b.WriteByte('{')
		for i, m := range v.members {
			if i > 0 {
				b.WriteByte(',')
			}
			line(depth + 1)
			b.WriteString(m.raw)
			b.WriteByte(':')
			if indent != "" {
				b.WriteByte(' ')
			}
			m.val.write(b, indent, depth+1)
		}
		line(depth)
		b.WriteByte('}')
	case array:
		if len(v.items) == 0 {
			b.WriteString("[]")
			return
		}
		b.WriteByte('[')
		for i, x := range v.items {
			if i > 0 {
				b.WriteByte(',')
			}
			line(depth + 1)
			x.write(b, indent, depth+1)
		}
		line(depth)
		b.WriteByte(']')
	default:
		b.WriteString(v.raw)
	}
}

// get returns the value of a key, nil when v is no object or has none.
func (v *value) get(key string) *value {
	if v == nil || v.kind != object {
		return nil
	}
	for i := range v.members {
		if v.members[i].key == key {
			return v.members[i].val
		}
	}
	return nil
}

// set puts a key's value in place, in the order of the keys when it is new.
func (v *value) set(key string, to *value) {
	for i := range v.members {
		if v.members[i].key == key {
			v.members[i].val = to
			return
		}
	}
	at := len(v.members)
	sorted := sort.SliceIsSorted(v.members, func(i, j int) bool { return v.members[i].key < v.members[j].key })
	if sorted {
		at = sort.Search(len(v.members), func(i int) bool { return v.members[i].key > key })
	}
	v.members = append(v.members, member{})
	copy(v.members[at+1:], v.members[at:])
	v.members[at] = member{key: key, raw: quote(key), val: to}
}

// str returns the content of a string.
func (v *value) str() (string, bool) {
	if v == nil || v.kind != text {
		return "", false
	}
	var s string
	if json.Unmarshal([]byte(v.raw), &s) != nil {
		return "", false
	}
	return s, true
}

// joined returns a string that may be stored as a list of its lines, as nbformat
// stores longer ones ("multiline_string").
func (v *value) joined() (string, bool) {
	if v == nil || v.kind != array {
		return v.str()
	}
	var b strings.Builder
	for _, x := range v.items {
		s, ok := x.str()
		if !ok {
			return "", false
		}
		b.WriteString(s)
	}
	return b.String(), true
}

// textValue makes a string.
func textValue(s string) *value { return &value{kind: text, raw: quote(s)} }

// linesValue makes a string that is stored as a list of its lines.
func linesValue(s string) *value {
	v := &value{kind: array}
	for _, line := range strings.SplitAfter(s, "\n") {
		if line != "" {
			v.items = append(v.items, textValue(line))
		}
	}
	return v
}

// intValue makes a whole number.
func intValue(n int) *value { return &value{kind: number, raw: fmt.Sprint(n)} }

// quote writes a string with the escapes that RFC 8259 section 7 demands and no
// others.
func quote(s string) string {
	var b strings.Builder
	b.WriteByte('"')
	for _, r := range strings.ToValidUTF8(s, "\uFFFD") {
		switch {
		case r == '"' || r == '\\':
			b.WriteByte('\\')
			b.WriteRune(r)
		case r == '\n':
			b.WriteString(`\n`)
		case r == '\r':
			b.WriteString(`\r`)
		case r == '\t':
			b.WriteString(`\t`)
		case r == '\b':
			b.WriteString(`\b`)
		case r == '\f':
			b.WriteString(`\f`)
		case r < 0x20:
			fmt.Fprintf(&b, `\u%04x`, r)
		default:
			b.WriteRune(r)
		}
	}
	b.WriteByte('"')
	return b.String()
}

// valueOf makes a value from what encoding/json makes of JSON; keys are sorted.
func valueOf(x any) (*value, error) {
	switch x := x.(type) {
	case string:
		return textValue(x), nil
	case map[string]any:
		keys := make([]string, 0, len(x))
		for k := range x {
			keys = append(keys, k)
		}
		sort.Strings(keys)
		v := &value{kind: object}
		for _, k := range keys {
			m, err := valueOf(x[k])
			if err != nil {
				return nil, err
			}
			v.members = append(v.members, member{key: k, raw: quote(k), val: m})
		}
		return v, nil
	case []any:
		v := &value{kind: array}
		for _, item := range x {
			m, err := valueOf(item)
			if err != nil {
				return nil, err
			}
			v.items = append(v.items, m)
		}
		return v, nil
	}
	return marshalled(x)
}

// marshalled makes a value of a Go value by its JSON.
func marshalled(x any) (*value, error) {
	raw, err := json.Marshal(x)
	if err != nil {
		return nil, err
	}
	d, err := parseDocument(raw)
	if err != nil {
		return nil, err
	}
	return d.root, nil
}
