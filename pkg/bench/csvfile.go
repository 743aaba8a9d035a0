package bench

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"math"
	"os"
	"runtime"
	"slices"
	"sync"
	"time"
)

// partSize is how many bytes a part holds: small enough for the cache of a
// core, large enough that handing it over costs nothing.
const partSize = 256 << 10

// ReadCSV reads a CSV file (RFC 4180: cells may be quoted; lines may end with
// CR LF or LF; a UTF-8 byte order mark is skipped; blank lines are skipped). The
// first record is the header. Numbers are the doubles nearest to the decimal
// text, the bits that strconv.ParseFloat gives. The file is hashed as it is
// parsed, in one read. Errors are *Error, up to ten joined, with file, line and
// column. name stands for the file in them.
func ReadCSV(r io.Reader, name string, s CSVSettings) (*Table, error) {
	var size int64
	if f, ok := r.(*os.File); ok {
		if info, err := f.Stat(); err == nil && info.Mode().IsRegular() {
			size = info.Size()
		}
	}
	return readCSV(r, name, size, s, append(append([]string(nil), s.Numbers...), s.Words...), func(l *layout) error {
		if s.Numbers == nil && s.Words == nil {
			for c := range l.modes {
				l.modes[c] = number
			}
			return nil
		}
		var errs errorList
		set := func(list []string, m mode) {
			for _, h := range list {
				if c := slices.Index(l.header, h); c >= 0 {
					l.modes[c], _ = l.modes[c].also(m)
				} else {
					errs.add(&Error{File: name, Line: 1, Problem: missingColumn(l.header, h)})
				}
			}
		}
		set(s.Numbers, number)
		set(s.Words, wordy)
		return errs.err()
	}, maxRecords)
}

// source reads a file in order: it hashes what it reads and cuts it into parts
// at ends of records.
type source struct {
	r    io.Reader
	name string
	sum  interface {
		io.Writer
		Sum([]byte) []byte
	}
	size  int64  // read so far
	known int64  // size of the file; 0: not known
	carry []byte // read, but not yet handed out
	eof   bool
}

// fill reads into b until it is full or the file ends, and hashes what came.
func (s *source) fill(b []byte) (int, error) {
	n := 0
	for n < len(b) && !s.eof {
		k, err := s.r.Read(b[n:])
		n += k
		if err == io.EOF {
			s.eof = true
		} else if err != nil {
			return n, &Error{File: s.name, Problem: "reading failed: " + err.Error(), Err: err}
		}
	}
	s.size += int64(n)
	if s.size > maxFile {
		return n, &Error{File: s.name, Problem: fmt.Sprintf("the file is larger than %d GiB, the most that is read", maxFile>>30)}
	}
	s.sum.Write(b[:n])
	return n, nil
}

// next fills p with whole records: as many as its storage holds, at least one.
// It returns false when the file is at its end.
func (s *source) next(p *part) (bool, error) {
	if cap(p.buf) < partSize {
		room := partSize
		if s.known > 0 && s.known < partSize/2 { // a small file needs no more than itself
			room = int(s.known) + 512
		}
		p.buf = make([]byte, room)
	}
	p.buf = p.buf[:cap(p.buf)]
	n := copy(p.buf, s.carry)
	s.carry = s.carry[n:]
	for {
		k, err := s.fill(p.buf[n:])
		if err != nil {
			return false, err
		}
		n += k
		if s.eof {
			p.data, p.last, s.carry = p.buf[:n], true, nil
			return n > 0, nil
		}
		if end := lastRecordEnd(p.buf[:n]); end > 0 {
			p.data, p.last = p.buf[:end], false
			s.carry = append(s.carry[:0:0], p.buf[end:n]...)
			return true, nil
		}
		if n > maxLine {
			// Handed out as it is: whoever scans it says what is wrong.
			p.data, p.last, s.carry = p.buf[:n], false, nil
			return true, nil
		}
		p.buf = append(p.buf, make([]byte, len(p.buf))...)
	}
}

// lastRecordEnd returns the index behind the last line end of b that is not
// within a quoted cell; b starts at a record.
func lastRecordEnd(b []byte) int {
	if bytes.IndexByte(b, '"') < 0 {
		return bytes.LastIndexByte(b, '\n') + 1
	}
	end, inside := 0, false
	for i, c := range b {
		if c == '"' {
			inside = !inside
		} else if c == '\n' && !inside {
			end = i + 1
		}
	}
	return end
}

// readCSV is ReadCSV with the caller's choice of columns. size is the size of
// the file, 0 when it is not known; limit the greatest number of records.
func readCSV(r io.Reader, name string, size int64, s CSVSettings, wanted []string, plan func(*layout) error, limit int) (*Table, error) {
	src := &source{r: r, name: name, sum: sha256.New(), known: size}
	first := newPart(&layout{})
	if more, err := src.next(first); err != nil {
		return nil, err
	} else if !more {
		return nil, &Error{File: name, Problem: "the file is empty; a header and data records are due"}
	}
	// The header, behind an optional byte order mark.
	data := bytes.TrimPrefix(first.data, []byte("\xef\xbb\xbf"))
	blank := 0
	for len(data) > 0 && (data[0] == '\n' || data[0] == '\r' && len(data) > 1 && data[1] == '\n') {
		data = data[bytes.IndexByte(data, '\n')+1:]
		blank++
	}
	if len(data) == 0 {
		return nil, &Error{File: name, Problem: "the file holds blank lines only; a header and data records are due"}
	}
	end, lines := recordEnd(data, 0)
	if end > maxLine {
		return nil, tooLong(name, 1+blank)
	}
	l, err := readHeader(name, data[:end], s, wanted)
	if err != nil {
		return nil, err
	}
	if err := plan(l); err != nil {
		return nil, err
	}
	l.plain = l.separator != l.point && !slices.ContainsFunc(l.modes, func(m mode) bool { return m != number })
	t := &Table{File: name, separator: l.separator, Header: l.header, Number: make([][]float64, len(l.header)), Word: make([]*Labels, len(l.header)),
		times: make([]timeColumn, len(l.header))}
	m := &merger{t: t, l: l, limit: limit, size: size}
	first.data, first.line = data[end:], 1+blank+max(lines, 1)
	first.shape(l)
	first.ends = bytes.Count(first.data, []byte{'\n'})

	if first.last {
		if err := checkLines(first, name); err != nil {
			return nil, err
		}
		first.scan(l)
		m.add(first)
	} else {
		m.parallel(src, first)
	}
	if err := m.finish(); err != nil {
		return nil, err
	}
	t.SHA256 = hex.EncodeToString(src.sum.Sum(nil))
	return t, nil
}

func tooLong(name string, line int) error {
	return &Error{File: name, Line: line, Problem: fmt.Sprintf("the line is longer than %d bytes, the most that is read; is this a CSV file?", maxLine)}
}

// checkLines refuses records longer than maxLine. A shorter part can't hold one.
func checkLines(p *part, name string) error {
	if len(p.data) <= maxLine {
		return nil
	}
	for b, line := p.data, p.line; len(b) > maxLine; {
		end, lines := recordEnd(b, 0)
		if end > maxLine {
			return tooLong(name, line)
		}
		b, line = b[end:], line+lines
	}
	return nil
}

// merger puts parts together in their order.
type merger struct {
	t     *Table
	l     *layout
	limit int
	size  int64 // of the file; 0: not known
	errs  errorList
	ended bool // enough errors, or a failure to read

	column [][]float64 // beside the header: the columns of the whole file; nil: their length is not known
	room   int         // numbers that each holds

	number []partTimes
}

// parallel scans the parts of src on all cores and merges them in order, so
// that the outcome does not depend on the cores.
func (m *merger) parallel(src *source, first *part) {
	workers := runtime.GOMAXPROCS(0)
	var (
		work = make(chan *part, workers)
		done = make(chan *part, workers)
		free = make(chan *part, 2*workers+3)
		quit = make(chan struct{})
		wg   sync.WaitGroup
		fail error // of reading; set before work is closed
	)
	for range cap(free) - 1 { // first is one more
		free <- newPart(m.l)
	}
	go func() { // reads in order
		defer close(work)
		p, line, at := first, first.line, 0
		for seq := 0; ; seq++ {
			p.seq, p.line = seq, line
			if fail = checkLines(p, src.name); fail != nil {
				return
			}
			p.ends = bytes.Count(p.data, []byte{'\n'})
			m.place(p, at)
			line += p.ends
			at += p.ends
			last := p.last
			select {
			case work <- p:
			case <-quit:
				return
			}
			if last {
				return
			}
			select {
			case p = <-free:
			case <-quit:
				return
			}
			var more bool
			if more, fail = src.next(p); fail != nil || !more {
				return
			}
		}
	}()
	for range workers {
		wg.Add(1)
		go func() {
			defer wg.Done()
			for p := range work {
				p.scan(m.l)
				done <- p
			}
		}()
	}
	go func() {
		wg.Wait()
		close(done)
	}()
	waiting := map[int]*part{}
	next, stopped := 0, false
	for p := range done {
		waiting[p.seq] = p
		for q := waiting[next]; q != nil; q = waiting[next] {
			delete(waiting, next)
			next++
			if !m.ended {
				m.add(q)
			}
			if m.ended && !stopped {
				stopped = true
				close(quit)
			}
			if !stopped {
				free <- q // never blocks: there is room for all parts
			}
		}
	}
	if !stopped {
		close(quit)
	}
	if fail != nil && !m.ended {
		m.errs.add(fail)
	}
}

// add appends the records of p.
func (m *merger) add(p *part) {
	t := m.t
	if t.N+p.rows > m.limit {
		m.errs.add(&Error{File: m.l.file, Problem: fmt.Sprintf("there are more than %d data records, the most that is read", m.limit)})
		m.ended = true
		return
	}
	for _, s := range p.starts {
		s.record += t.N
		if k := len(t.starts); k > 0 && t.starts[k-1].line+s.record-t.starts[k-1].record == s.line {
			continue // follows on without a break
		}
		t.starts = append(t.starts, s)
	}
	for c, md := range m.l.modes {
		if md.numeric() {
			t.Number[c] = m.join(t.Number[c], p, p.number[c][:p.rows])
		}
		if md.worded() {
			m.addWords(c, p)
		}
		if md == timely {
			m.addTimes(c, p)
		}
	}
	t.N += p.rows
	for _, e := range p.errs {
		m.errs.add(e)
	}
	m.ended = len(m.errs.list) >= maxErrors
}

// place decides where the numbers of p go: to their place in the columns of the
// whole file, if it is known how large those get, and to storage of p otherwise.
// at is the number of line feeds in the parts before: no fewer than the records
// there. Where there are fewer, join moves the numbers up.
func (m *merger) place(p *part, at int) {
	if p.seq == 0 {
		m.makeRoom(p)
	}
	p.at = -1
	if m.column == nil || at+p.most() > m.room {
		return
	}
	p.at = at
	for c, md := range m.l.modes {
		if md.numeric() {
			p.number[c] = m.column[c][at : at+p.most()]
		}
	}
}

// makeRoom makes columns for what the whole file will hold, judged by its first
// part.
func (m *merger) makeRoom(p *part) {
	if m.size <= int64(len(p.data)) || p.ends == 0 {
		return
	}
	rows := float64(m.size) / float64(len(p.data)) * float64(p.ends) * 1.02
	m.room = int(min(rows+16, float64(m.limit)))
	m.column = make([][]float64, len(m.l.modes))
	for c, md := range m.l.modes {
		if md.numeric() {
			m.column[c] = make([]float64, m.room)
			inLargePages(m.column[c])
			m.t.Number[c] = m.column[c][:0]
		}
	}
}

// join appends the numbers of p to dst. Those that stand there already, since no
// line before was blank or broken, stay where they are.
func (m *merger) join(dst []float64, p *part, src []float64) []float64 {
	n := len(dst)
	if len(src) > 0 && cap(dst) >= n+len(src) && &dst[:n+1][n] == &src[0] {
		return dst[:n+len(src)]
	}
	if dst == nil && m.room > 0 {
		dst = make([]float64, 0, m.room)
	}
	return append(dst, src...)
}

func (m *merger) addTimes(c int, p *part) {
	tc := &m.t.times[c]
	pt := p.times[c]
	if m.number == nil {
		m.number = make([]partTimes, len(m.l.modes))
	}
	seen := &m.number[c]
	if seen.numberLine == 0 {
		seen.numberLine = pt.numberLine
	}
	if seen.stampLine == 0 {
		seen.stampLine = pt.stampLine
	}
	if seen.numberLine > 0 && seen.stampLine > 0 && !m.ended {
		m.errs.add(&Error{File: m.l.file, Line: max(seen.numberLine, seen.stampLine), Key: columnKey(m.l, c),
			Problem: fmt.Sprintf("times are written as seconds in line %d and as time stamps in line %d; use one form", seen.numberLine, seen.stampLine)})
		m.ended = true
	}
	tc.read, tc.stamped = true, seen.stampLine > 0
	tc.at = m.join(tc.at, p, p.number[c][:p.rows])
}

func (m *merger) addWords(c int, p *part) {
	w := m.t.Word[c]
	if w == nil {
		w = &Labels{Column: m.l.header[c]}
		m.t.Word[c] = w
		if rows := cap(m.anyNumber()); rows > 0 {
			w.Index = make([]int32, 0, rows)
		}
	}
	into := make([]int32, len(p.word[c].list))
	for i, s := range p.word[c].list {
		into[i] = w.intern(s)
	}
	for _, k := range p.word[c].index {
		w.Index = append(w.Index, into[k])
	}
}

// anyNumber is a column of numbers, for its capacity.
func (m *merger) anyNumber() []float64 {
	for _, x := range m.t.Number {
		if x != nil {
			return x
		}
	}
	return nil
}

// intern returns the index of a word, adding it when it is new.
func (l *Labels) intern(s string) int32 {
	if l.known == nil {
		l.known = make(map[string]int32, len(l.Words))
		for i, w := range l.Words {
			l.known[w] = int32(i)
		}
	}
	k, ok := l.known[s]
	if !ok {
		k = int32(len(l.Words))
		l.Words = append(l.Words, s)
		l.known[s] = k
	}
	return k
}

func (m *merger) finish() error {
	for _, w := range m.t.Word {
		if w != nil {
			w.known = nil
		}
	}
	if err := m.errs.err(); err != nil {
		return err
	}
	if m.t.N == 0 {
		return &Error{File: m.l.file, Problem: "there is a header but no data record"}
	}
	return nil
}

// seconds turns the times of a column into seconds: since the first time stamp
// when the file has those. missing times are NaN.
func (c *timeColumn) seconds(epoch *time.Time) []float64 {
	if !c.stamped {
		return c.at
	}
	for i, x := range c.at {
		if math.IsNaN(x) {
			continue
		}
		n := int64(math.Float64bits(x))
		if epoch.IsZero() {
			*epoch = time.Unix(0, n).UTC()
		}
		d := n - epoch.UnixNano()
		// Whole and broken seconds apart, so that a second stays a second.
		c.at[i] = float64(d/1e9) + float64(d%1e9)/1e9
	}
	c.stamped = false
	return c.at
}
