package bench

import (
	"bytes"
	"fmt"
	"math"
	"strings"
	"unsafe"
)

// part is a run of whole records on its way through the reader.
type part struct {
	seq  int
	buf  []byte // storage, reused
	data []byte // whole records
	line int    // line of the first
	ends int    // line feeds in data
	last bool

	rows   int
	number [][]float64 // beside the header: room for all records, in columns read as numbers or times
	own    [][]float64 // likewise: storage of the part itself, reused
	at     int         // where its numbers stand in the columns of the whole file; -1: in own
	word   []words
	times  []partTimes
	starts []lineStart
	errs   []error
	next   int // line behind the last record
}

// words are the words of one column in one part.
type words struct {
	list  []string
	index []int32
	known map[string]int32
	last  int32
}

// partTimes says in which forms the times of one part are written.
type partTimes struct {
	numberLine, stampLine int // first line with that form; 0: none
}

func newPart(l *layout) *part {
	p := &part{at: -1}
	p.shape(l)
	return p
}

// shape gives p the columns of a layout.
func (p *part) shape(l *layout) {
	n := len(l.modes)
	p.number, p.own, p.word, p.times = make([][]float64, n), make([][]float64, n), make([]words, n), make([]partTimes, n)
}

// most is how many records p holds at most: one a line feed, and at the end of
// the file one without.
func (p *part) most() int {
	if p.last {
		return p.ends + 1
	}
	return p.ends
}

// room returns the storage of column c for n numbers.
func (p *part) room(c, n int) []float64 {
	if cap(p.own[c]) < n {
		p.own[c] = make([]float64, n)
	}
	return p.own[c][:n]
}

func (p *part) reset(l *layout) {
	p.rows, p.starts, p.errs = 0, p.starts[:0], nil
	for c, m := range l.modes {
		if m != skip && m != wordy && (p.at < 0 || m == timely) {
			p.number[c] = p.room(c, p.most())
		}
		p.times[c] = partTimes{}
		if m.worded() {
			w := &p.word[c]
			w.list, w.index, w.last = nil, w.index[:0], -1
			w.known = map[string]int32{}
		}
	}
}

// scan parses the records of p.
func (p *part) scan(l *layout) {
	p.reset(l)
	b, sep, n := p.data, l.separator, len(l.modes)
	line := p.line
	expect := -1 // line that the next record has when records follow each other
	for i := 0; i < len(b); {
		// Blank lines are no records.
		if b[i] == '\n' {
			i++
			line++
			continue
		}
		if b[i] == '\r' && (i+1 == len(b) || b[i+1] == '\n') {
			i = min(i+2, len(b))
			line++
			continue
		}
		if line != expect {
			p.starts = append(p.starts, lineStart{p.rows, line})
		}
		if l.plain {
			if end := p.plainRecord(l, i); end > 0 {
				i = end
				p.rows++
				line++
				expect = line
				continue
			}
		}
		record, lines := i, 1
		bad := false
		for c := range n {
			end := 0
			switch l.modes[c] {
			case number:
				v, e, ok := scanDecimal(b, i, l.point)
				if ok && e < len(b) && (b[e] == sep || b[e] == '\n' || b[e] == '\r' && e+1 < len(b) && b[e+1] == '\n') && sep != l.point {
					end = e
				} else if v, end, ok = p.cell(l, c, i, line, &lines); !ok {
					bad = true
				}
				p.number[c][p.rows] = v
			case skip:
				for end = i; end < len(b) && b[end] != sep && b[end] != '\n' && b[end] != '"' && b[end] != '\r'; {
					end++
				}
				if end < len(b) && (b[end] == '"' || b[end] == '\r') {
					_, end, bad = p.raw(l, c, i, line, &lines)
				}
			default:
				if l.modes[c] == both {
					v, _, ok := p.cell(l, c, i, line, new(int))
					if !ok {
						bad = true
						break
					}
					p.number[c][p.rows] = v
				}
				end, bad = p.special(l, c, i, line, &lines)
			}
			if bad {
				break
			}
			atEnd := end >= len(b) || b[end] != sep
			if c == n-1 && !atEnd || c < n-1 && atEnd {
				p.ragged(l, record, line)
				bad = true
				break
			}
			i = end + 1
			if atEnd && end < len(b) && b[end] == '\r' {
				i++
			}
		}
		if bad {
			if len(p.errs) >= maxErrors {
				return
			}
			i, lines = recordEnd(b, record)
			// What the record had begun is taken back, so that columns stay together;
			// its numbers are written over by the next.
			p.truncate(l)
			line += lines
			expect = -1
			continue
		}
		p.rows++
		line += lines
		if lines == 1 {
			expect = line
		} else {
			expect = -1
		}
	}
	p.next = line
}

// plainRecord reads the record at i if it is what most are: numbers without quotes and
// blanks, one line, as many as there are columns. It returns the index behind it, 0
// when the record must be taken apart cell by cell.
func (p *part) plainRecord(l *layout, i int) int {
	b, row, last := p.data, p.rows, len(p.number)-1
	for c, column := range p.number {
		v, end, ok := scanDecimal(b, i, l.point)
		if !ok || uint(end) >= uint(len(b)) {
			return 0
		}
		column[row] = v
		if c < last {
			if b[end] != l.separator {
				return 0
			}
		} else if b[end] != '\n' {
			if b[end] != '\r' || end+1 >= len(b) || b[end+1] != '\n' {
				return 0
			}
			end++
		}
		i = end + 1
	}
	return i
}

// truncate cuts the columns of words to the records finished.
func (p *part) truncate(l *layout) {
	for c, m := range l.modes {
		if m.worded() {
			p.word[c].index = p.word[c].index[:min(p.rows, len(p.word[c].index))]
		}
	}
}

// recordEnd returns the index behind the record at i and the lines it takes.
func recordEnd(b []byte, i int) (end, lines int) {
	inside := false
	for ; i < len(b); i++ {
		switch b[i] {
		case '"':
			inside = !inside
		case '\n':
			lines++
			if !inside {
				return i + 1, lines
			}
		}
	}
	return i, lines
}

// ragged notes a record with too few or too many cells.
func (p *part) ragged(l *layout, record, line int) {
	b, cells := p.data, 0
	for i := record; ; cells++ {
		_, end, problem := cellAt(b, i, l.separator)
		if problem != "" {
			break
		}
		i = end + 1
		if end >= len(b) || b[end] != l.separator {
			cells++
			break
		}
	}
	hint := ""
	if l.separator == ',' && l.point == '.' && cells > len(l.header) {
		hint = "; if numbers are written with a decimal comma, separate cells by semicolons and say decimal = \"comma\""
	}
	p.fail(&Error{File: l.file, Line: line, Problem: fmt.Sprintf("the record has %s, the header %d%s", plural(cells, "cell"), len(l.header), hint)})
}

func plural(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", n, noun)
}

func (p *part) fail(err error) { p.errs = append(p.errs, err) }

func columnKey(l *layout, c int) string {
	if h := l.header[c]; h != "" {
		return "column " + h
	}
	return fmt.Sprintf("column %d", c+1)
}

// raw takes a cell of any form.
func (p *part) raw(l *layout, c, i, line int, lines *int) (cell []byte, end int, bad bool) {
	cell, end, problem := cellAt(p.data, i, l.separator)
	if problem != "" {
		p.fail(&Error{File: l.file, Line: line, Key: columnKey(l, c), Problem: problem})
		return nil, end, true
	}
	*lines += bytes.Count(p.data[i:end], []byte{'\n'})
	return cell, end, false
}

// isMissing reports whether a trimmed cell stands for a missing value.
func (l *layout) isMissing(cell []byte) bool {
	if len(cell) == 0 {
		return true
	}
	for _, m := range l.missing {
		if string(cell) == m {
			return true
		}
	}
	return false
}

// cell reads a number the long way.
func (p *part) cell(l *layout, c, i, line int, lines *int) (v float64, end int, ok bool) {
	cell, end, bad := p.raw(l, c, i, line, lines)
	if bad {
		return 0, end, false
	}
	cell = bytes.Trim(cell, " \t")
	if l.isMissing(cell) {
		return math.NaN(), end, true
	}
	v, ok, err := parseDecimal(cell, l.point)
	if err != nil {
		p.fail(&Error{File: l.file, Line: line, Key: columnKey(l, c), Err: err,
			Problem: quoted(string(cell)) + " is beyond the range of numbers"})
		return 0, end, false
	}
	if !ok {
		p.fail(&Error{File: l.file, Line: line, Key: columnKey(l, c), Problem: quoted(string(cell)) + " is not a number" + numberHint(l, string(cell))})
	}
	return v, end, ok
}

// numberHint guesses what was meant by a cell that is no number.
func numberHint(l *layout, cell string) string {
	low := strings.ToLower(strings.TrimLeft(cell, "+-"))
	switch {
	case low == "nan" || low == "inf" || low == "infinity" || low == "na" || low == "n/a" || low == "-" || low == "null" || low == "":
		return fmt.Sprintf("; leave the cell empty when a value is missing, or say missing = [%s] in [[readings]] (fit --missing %s)", quoted(cell), quoted(cell))
	case l.point == '.' && strings.Count(cell, ",") == 1 && onlyDecimal(strings.Replace(cell, ",", ".", 1)):
		return "; if this is a decimal comma, say decimal = \"comma\" in [[readings]] (fit --decimal comma)"
	case l.point == ',' && onlyDecimal(cell):
		return "; the bench says that decimals are written with a comma"
	case strings.HasPrefix(low, "0x"):
		return "; write it as a decimal number"
	case strings.IndexFunc(cell, func(r rune) bool { return r >= '0' && r <= '9' }) == 0 && strings.ContainsAny(cell, " abcdfghijklmnopqrstuvwxyzµ%°"):
		return "; the unit belongs in the bench file, the cell holds the number alone"
	}
	return ""
}

func onlyDecimal(s string) bool {
	_, ok, _ := parseDecimal([]byte(s), '.')
	return ok
}

// special reads a cell of words or of times.
func (p *part) special(l *layout, c, i, line int, lines *int) (end int, bad bool) {
	cell, end, bad := p.raw(l, c, i, line, lines)
	if bad {
		return end, true
	}
	cell = bytes.TrimSpace(cell)
	if l.modes[c] == timely {
		if l.isMissing(cell) {
			p.number[c][p.rows] = math.NaN()
			return end, false
		}
		at, nanos, stamped, ok := stamp(cell, l.point)
		if !ok {
			p.fail(&Error{File: l.file, Line: line, Key: columnKey(l, c),
				Problem: quoted(string(cell)) + " is not a time; write seconds or RFC 3339 like 2026-03-04T10:15:00Z"})
			return end, true
		}
		t := &p.times[c]
		if stamped {
			if t.stampLine == 0 {
				t.stampLine = line
			}
			at = math.Float64frombits(uint64(nanos))
		} else if t.numberLine == 0 {
			t.numberLine = line
		}
		p.number[c][p.rows] = at
		return end, false
	}
	w := &p.word[c]
	if w.last >= 0 && string(cell) == w.list[w.last] {
		w.index = append(w.index, w.last)
		return end, false
	}
	k, found := w.known[unsafe.String(unsafe.SliceData(cell), len(cell))]
	if !found {
		if len(cell) > 256 {
			p.fail(&Error{File: l.file, Line: line, Key: columnKey(l, c), Problem: fmt.Sprintf("the word has %d bytes; at most 256 are read", len(cell))})
			return end, true
		}
		s := strings.ToValidUTF8(string(cell), "\uFFFD")
		if s != string(cell) {
			p.fail(&Error{File: l.file, Line: line, Key: columnKey(l, c), Problem: quoted(s) + " is not UTF-8 text; save the file as UTF-8"})
			return end, true
		}
		k = int32(len(w.list))
		w.list = append(w.list, s)
		w.known[s] = k
	}
	w.last = k
	w.index = append(w.index, k)
	return end, false
}
