package kernel

import (
	"bytes"
	"fmt"
	"os"
	"strings"
	"sync"
	"sync/atomic"
	"time"
	"unicode/utf8"
)

const (
	streamPause = 20 * time.Millisecond // at most one message a stream in that time, unless a flush asks for more
	streamChunk = 1 << 20               // bytes of one stream message at most
)

// streams catches what the process writes to os.Stdout and os.Stderr and publishes it as it comes.
type streams struct {
	out, err       *stream
	oldOut, oldErr *os.File
	publish        func(name, text string)
	mark           [2][]byte // begin and end of the marks that flush writes into a pipe
	flushing       sync.Mutex
	count          uint64
	latest         atomic.Pointer[string] // the stream written last, as far as known
}

// stream is one caught stream. What is written to it goes through a pipe to a goroutine that publishes it.
type stream struct {
	name string
	r, w *os.File
	all  *streams
	done chan struct{}

	mu      sync.Mutex
	pending []byte // read and not yet published
	last    time.Time
	timer   bool
	waiting map[string]chan struct{}
}

// catch puts pipes in the place of os.Stdout and os.Stderr.
func catch(publish func(name, text string)) (*streams, error) {
	s := &streams{publish: publish, oldOut: os.Stdout, oldErr: os.Stderr}
	id := randomID()
	s.mark = [2][]byte{[]byte("\x00\x10" + id + ":"), []byte("\x10\x00")}
	var err error
	if s.out, err = s.open("stdout"); err != nil {
		return nil, err
	}
	if s.err, err = s.open("stderr"); err != nil {
		s.out.close()
		return nil, err
	}
	os.Stdout, os.Stderr = s.out.w, s.err.w
	caughtNow.Store(s)
	return s, nil
}

func (s *streams) open(name string) (*stream, error) {
	r, w, err := os.Pipe()
	if err != nil {
		return nil, fmt.Errorf("a pipe for %s: %w", name, err)
	}
	st := &stream{name: name, r: r, w: w, all: s, done: make(chan struct{}), waiting: map[string]chan struct{}{}}
	go st.run()
	return st, nil
}

// caughtNow are the streams of the kernel that runs in this process.
var caughtNow atomic.Pointer[streams]

// Writing is called before a stream ("stdout" or "stderr") is written where the order between the two can be kept:
// when the other one was written last, what it holds is published first.
func Writing(name string) {
	s := caughtNow.Load()
	if s == nil {
		return
	}
	if before := s.latest.Swap(&name); before != nil && *before != name {
		if *before == "stdout" {
			s.out.flush()
		} else {
			s.err.flush()
		}
	}
}

// restore gives the process its own streams back, after all that was caught is published.
func (s *streams) restore() {
	caughtNow.CompareAndSwap(s, nil)
	os.Stdout, os.Stderr = s.oldOut, s.oldErr
	s.out.close()
	s.err.close()
}

// flush publishes everything written to either stream so far.
func (s *streams) flush() {
	s.out.flush()
	s.err.flush()
}

func (st *stream) close() {
	_ = st.w.Close()
	<-st.done
	_ = st.r.Close()
}

// flush writes a mark into the pipe and waits until everything before it is published. The mark never reaches the
// front end. It is shorter than the bytes a pipe takes at once, so that no other writer cuts it.
func (st *stream) flush() {
	s := st.all
	s.flushing.Lock()
	s.count++
	key := fmt.Sprint(s.count)
	s.flushing.Unlock()
	passed := make(chan struct{})
	st.mu.Lock()
	st.waiting[key] = passed
	st.mu.Unlock()
	mark := string(s.mark[0]) + key + string(s.mark[1])
	if _, err := st.w.WriteString(mark); err != nil {
		return // the pipe was closed: its goroutine publishes what is left
	}
	select {
	case <-passed:
	case <-st.done:
	}
}

func (st *stream) run() {
	defer close(st.done)
	buf := make([]byte, 64<<10)
	for {
		n, err := st.r.Read(buf)
		st.mu.Lock()
		st.pending = append(st.pending, buf[:n]...)
		st.marks()
		if err != nil {
			st.emit(true)
			st.mu.Unlock()
			return
		}
		st.pace()
		st.mu.Unlock()
	}
}

// marks finds the marks among the pending bytes, publishes what stands before each and wakes who waits for it.
func (st *stream) marks() {
	begin, end := st.all.mark[0], st.all.mark[1]
	for {
		i := bytes.Index(st.pending, begin)
		if i < 0 {
			return
		}
		j := bytes.Index(st.pending[i:], end)
		if j < 0 || j < len(begin) {
			if j = bytes.Index(st.pending[i+len(begin):], end); j < 0 {
				return
			}
			j += len(begin)
		}
		key := string(st.pending[i+len(begin) : i+j])
		after := append([]byte(nil), st.pending[i+j+len(end):]...)
		st.pending = st.pending[:i]
		st.emit(false)
		st.pending = append(st.pending, after...)
		if passed := st.waiting[key]; passed != nil {
			delete(st.waiting, key)
			close(passed)
		}
	}
}

// pace publishes what is pending if the last message is long enough ago, and otherwise a little later.
func (st *stream) pace() {
	if len(st.pending) == 0 {
		return
	}
	since := time.Since(st.last)
	if since >= streamPause || len(st.pending) >= streamChunk {
		st.emit(false)
		return
	}
	if !st.timer {
		st.timer = true
		time.AfterFunc(streamPause-since, func() {
			st.mu.Lock()
			defer st.mu.Unlock()
			st.timer = false
			st.emit(false)
		})
	}
}

// emit publishes the pending bytes but for the beginning of a rune or a mark at their end; all takes these too.
func (st *stream) emit(all bool) {
	n := len(st.pending)
	if !all {
		if i := bytes.LastIndexByte(st.pending, 0); i >= 0 && n-i < 64 && couldBeMark(st.pending[i:], st.all.mark[0]) {
			n = i
		}
		n -= partialRune(st.pending[:n])
	}
	if n == 0 {
		return
	}
	text := strings.ToValidUTF8(string(st.pending[:n]), "\uFFFD")
	st.pending = append(st.pending[:0], st.pending[n:]...)
	st.last = time.Now()
	for len(text) > streamChunk {
		cut := streamChunk
		for cut > 0 && !utf8.RuneStart(text[cut]) {
			cut--
		}
		st.all.publish(st.name, text[:cut])
		text = text[cut:]
	}
	st.all.publish(st.name, text)
}

func couldBeMark(tail, begin []byte) bool {
	if len(tail) < len(begin) {
		return bytes.HasPrefix(begin, tail)
	}
	return bytes.HasPrefix(tail, begin)
}

// partialRune returns how many bytes at the end of p begin a rune that is not complete.
func partialRune(p []byte) int {
	for k := 1; k <= utf8.UTFMax-1 && k <= len(p); k++ {
		b := p[len(p)-k]
		if utf8.RuneStart(b) {
			if !utf8.FullRune(p[len(p)-k:]) {
				return k
			}
			return 0
		}
	}
	return 0
}
