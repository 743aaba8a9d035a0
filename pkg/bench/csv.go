package bench

import (
	"bytes"
	"fmt"
	"slices"
	"strings"
	"time"
	"unicode/utf8"
)

// Bounds of a readings file.
const (
	maxFile    = 4 << 30    // bytes
	maxLine    = 1 << 20    // bytes of one record
	maxColumns = 4096       // of the header
	maxRecords = 20_000_000 // data records over all files
)

// CSVSettings say how a CSV file is read. The zero value reads every column as
// numbers with a decimal point, and takes the separator from the header.
type CSVSettings struct {
	Separator    byte     // ',', ';' or '\t'; 0: found from the header
	DecimalComma bool     // numbers are written 1,5
	Missing      []string // words that mean a missing value, besides the empty cell
	Numbers      []string // headers of the columns to read as numbers; nil, with Words nil too: all
	Words        []string // headers of the columns to read as words
}

// Table is a CSV file read into columns.
type Table struct {
	File   string
	SHA256 string      // of the bytes that were parsed
	Header []string    // as it stands, blanks trimmed
	N      int         // data records
	Number [][]float64 // beside Header: the column, NaN where missing; nil when not read as numbers
	Word   []*Labels   // beside Header: likewise for words

	separator byte
	times     []timeColumn // beside Header
	starts    []lineStart
}

// timeColumn is a column of times.
type timeColumn struct {
	read    bool
	at      []float64 // seconds, or nanoseconds since 1970 as integer bits when stamped
	stamped bool
}

// lineStart is the line of a record; records from it on take one line each, up
// to the next.
type lineStart struct{ record, line int }

// Column returns the index of a header, or −1.
func (t *Table) Column(header string) int { return slices.Index(t.Header, header) }

// Line returns the line of data record i, counted from 0.
func (t *Table) Line(i int) int {
	lo, hi := 0, len(t.starts)
	for lo < hi {
		if m := (lo + hi) / 2; t.starts[m].record <= i {
			lo = m + 1
		} else {
			hi = m
		}
	}
	if lo == 0 {
		return 0
	}
	return t.starts[lo-1].line + i - t.starts[lo-1].record
}

// mode is what a column is read as.
type mode uint8

const (
	skip mode = iota
	number
	wordy
	timely
	both // numbers and words
)

// numeric reports whether a column is kept as numbers, worded whether as words.
func (m mode) numeric() bool { return m == number || m == both }
func (m mode) worded() bool  { return m == wordy || m == both }

// also is the mode of a column that is read as m and as x; ok is false when that
// can't be.
func (m mode) also(x mode) (_ mode, ok bool) {
	switch {
	case m == skip || m == x:
		return x, true
	case m == timely || x == timely:
		return m, false
	}
	return both, true
}

// layout is a header understood: what is read from each column, and how.
type layout struct {
	file      string
	header    []string
	modes     []mode
	separator byte
	point     byte
	missing   []string
	plain     bool // all columns are numbers, whose decimal sign is not the separator
}

// separators that a header is searched for, and their names in bench files.
var separators = []struct {
	sign byte
	name string
}{{',', "comma"}, {';', "semicolon"}, {'\t', "tab"}}

// readHeader reads the first record. wanted are the headers that must be there;
// they help to find the separator.
func readHeader(file string, line []byte, s CSVSettings, wanted []string) (*layout, error) {
	fail := func(format string, a ...any) (*layout, error) {
		return nil, &Error{File: file, Line: 1, Problem: fmt.Sprintf(format, a...)}
	}
	if !utf8.Valid(line) {
		if bytes.HasPrefix(line, []byte("\xff\xfe")) || bytes.HasPrefix(line, []byte("\xfe\xff")) {
			return fail("this is UTF-16 text; save the file as UTF-8")
		}
		return fail("the header is not UTF-8 text; save the file as UTF-8")
	}
	if bytes.IndexByte(line, 0) >= 0 {
		return fail("there is a zero byte in the header; this is not a CSV file")
	}
	text := bytes.TrimRight(line, "\r\n")
	if bytes.IndexByte(text, '\r') >= 0 {
		return fail("lines end with a carriage return alone; save the file with line feeds")
	}
	l := &layout{file: file, separator: s.Separator, point: '.', missing: s.Missing}
	if s.DecimalComma {
		l.point = ','
	}
	if l.separator != 0 {
		h, err := splitHeader(text, l.separator)
		if err != "" {
			return fail("%s", err)
		}
		l.header = h
	} else {
		best := -1
		for _, sep := range separators {
			h, err := splitHeader(text, sep.sign)
			if err != "" {
				continue
			}
			score := 2 * len(h)
			if len(wanted) > 0 {
				found := 0
				for _, w := range wanted {
					if slices.Contains(h, w) {
						found++
					}
				}
				score += 2 * maxColumns * found
			}
			if s.DecimalComma && sep.sign == ',' {
				score-- // a comma can separate decimal commas only when cells are quoted
			}
			if score > best {
				best, l.separator, l.header = score, sep.sign, h
			}
		}
		if best < 0 {
			_, err := splitHeader(text, ',')
			return fail("%s", err)
		}
	}
	if len(l.header) > maxColumns {
		return fail("the header has %d columns; at most %d are read", len(l.header), maxColumns)
	}
	if allNumbers(l.header) {
		return fail("the first line holds numbers, where a header is due that names the columns")
	}
	first := map[string]int{}
	for i, h := range l.header {
		if h == "" {
			continue
		}
		if k, double := first[h]; double {
			return fail("columns %d and %d have the same header %s; give each its own", k+1, i+1, quoted(h))
		}
		first[h] = i
	}
	l.modes = make([]mode, len(l.header))
	return l, nil
}

// splitHeader takes the header apart; a problem is returned as words.
func splitHeader(text []byte, sep byte) (cells []string, problem string) {
	for i := 0; ; {
		cell, end, bad := cellAt(text, i, sep)
		if bad != "" {
			return nil, bad
		}
		cells = append(cells, strings.TrimSpace(string(cell)))
		if end >= len(text) {
			return cells, ""
		}
		if len(cells) > maxColumns {
			return cells, ""
		}
		i = end + 1
	}
}

// cellAt returns the cell that starts at b[i], without its quotes, and the
// index of the separator or line end behind it (RFC 4180 section 2). problem is
// not empty when the cell is not well formed; end is then where that shows.
func cellAt(b []byte, i int, sep byte) (cell []byte, end int, problem string) {
	if i < len(b) && b[i] == '"' {
		from := i + 1
		var whole []byte
		for {
			k := bytes.IndexByte(b[from:], '"')
			if k < 0 {
				return nil, len(b), "a quoted cell is not closed"
			}
			end = from + k + 1
			if end < len(b) && b[end] == '"' { // "" stands for one quote
				if whole == nil {
					whole = []byte{}
				}
				whole = append(whole, b[from:end]...)
				from = end + 1
				continue
			}
			if whole != nil {
				cell = append(whole, b[from:end-1]...)
			} else {
				cell = b[from : end-1]
			}
			break
		}
		if end == len(b) || b[end] == sep || b[end] == '\n' {
			return cell, end, ""
		}
		if b[end] == '\r' && (end+1 == len(b) || b[end+1] == '\n') {
			return cell, end, ""
		}
		return nil, end, "something follows the closing quote of a cell"
	}
	for end = i; end < len(b); end++ {
		switch b[end] {
		case sep, '\n':
			return b[i:end], end, ""
		case '\r':
			if end+1 == len(b) || b[end+1] == '\n' {
				return b[i:end], end, ""
			}
		case '"':
			return nil, end, "a quote stands within a cell; put the whole cell in quotes and double the quote"
		}
	}
	return b[i:end], end, ""
}

// missingColumn says that a file lacks a column.
func missingColumn(header []string, column string) string {
	var known []string
	stem, _, _ := strings.Cut(column, "/")
	near := ""
	for _, h := range header {
		if h == "" {
			continue
		}
		known = append(known, h)
		if s, _, _ := strings.Cut(h, "/"); s == stem && near == "" {
			near = h // the same quantity, perhaps in another unit
		}
	}
	if near != "" {
		return fmt.Sprintf("there is no column %s; did you mean %s?", quoted(column), near)
	}
	return fmt.Sprintf("there is no column %s%s", quoted(column), didYouMean(column, known))
}

// allNumbers reports whether a header consists of numbers: it is none, then.
func allNumbers(header []string) bool {
	numeric := 0
	for _, h := range header {
		if h == "" {
			continue
		}
		if !onlyDecimal(h) {
			return false
		}
		numeric++
	}
	return numeric > 0
}

// stamp reads a time: seconds, or RFC 3339.
func stamp(b []byte, point byte) (at float64, nanos int64, stamped, ok bool) {
	if v, ok, err := parseDecimal(b, point); ok && err == nil {
		return v, 0, false, true
	}
	if len(b) > 64 {
		return 0, 0, false, false
	}
	t, err := time.Parse(time.RFC3339Nano, string(b))
	if err != nil || t.Unix() < 0 || t.Year() > 2200 { // so that nanoseconds fit, and never look like NaN
		return 0, 0, false, false
	}
	return 0, t.UnixNano(), true, true
}
