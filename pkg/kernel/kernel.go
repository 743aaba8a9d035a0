package kernel

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"runtime"
	"sync"
	"time"

	"github.com/go-zeromq/zmq4"

	"example.org/guardring/pkg/kernel/docindex"
)

// Socket is what the kernel needs of a ZeroMQ socket.
type Socket interface {
	Recv() (zmq4.Msg, error)
	SendMulti(zmq4.Msg) error
	Close() error
}

// Sockets are the five sockets of a kernel, already listening.
type Sockets struct {
	Shell, Control, Stdin, IOPub, Heartbeat Socket
}

// Config says what Serve works with.
type Config struct {
	Sockets Sockets
	Key     []byte          // signing key, not empty
	Docs    *docindex.Index // nil: inspection without documentation
	Version string          // of the implementation
	Stderr  io.Writer       // where drops are counted; nil: the standard error at the time of the call
	// Abandon ends the process when a cell does not stop within AbandonAfter (0: one second) of a shutdown request or
	// of the end of Serve's context.
	Abandon      func()
	AbandonAfter time.Duration
}

const (
	maxQueue = 10000           // shell requests waiting
	stubborn = 5 * time.Second // after that long a cell that does not stop on an interrupt is told about
)

// Server is a running kernel.
type Server struct {
	cfg    Config
	in     Interpreter
	sign   *signer
	drops  *drops
	queue  queue
	stream *streams

	stopOnce sync.Once
	stopped  chan struct{} // closed by a shutdown request

	pub sync.Mutex // publications keep their order

	mu        sync.Mutex
	parent    json.RawMessage    // header of the request that outputs belong to
	cancel    context.CancelFunc // of the running cell, nil when idle
	cellCtx   context.Context
	running   bool
	stopCell  bool // the running cell was interrupted
	told      bool // that it does not stop was said
	askStdin  *Message
	cellCount int

	inputs  chan *Message // replies on the stdin socket
	history history
}

// request is one message waiting on the shell queue.
type request struct {
	msg     *Message
	aborted bool
}

// queue holds the shell requests in order.
type queue struct {
	mu    sync.Mutex
	items []*request
	ready chan struct{}
}

func (q *queue) push(r *request) bool {
	q.mu.Lock()
	defer q.mu.Unlock()
	if len(q.items) >= maxQueue {
		return false
	}
	q.items = append(q.items, r)
	select {
	case q.ready <- struct{}{}:
	default:
	}
	return true
}

func (q *queue) pop() *request {
	q.mu.Lock()
	defer q.mu.Unlock()
	if len(q.items) == 0 {
		return nil
	}
	r := q.items[0]
	q.items = q.items[1:]
	return r
}

// abort marks the execute requests that wait.
func (q *queue) abort() {
	q.mu.Lock()
	defer q.mu.Unlock()
	for _, r := range q.items {
		if r.msg.Header.Type == "execute_request" {
			r.aborted = true
		}
	}
}

// NewServer prepares a kernel. The interpreter belongs to the goroutine that made it, and Serve must be called there.
func NewServer(in Interpreter, cfg Config) (*Server, error) {
	if len(cfg.Key) == 0 {
		return nil, errors.New("kernel: no signing key")
	}
	if cfg.Stderr == nil {
		cfg.Stderr = os.Stderr
	}
	if cfg.Docs == nil {
		cfg.Docs = docindex.New(noFiles{})
	}
	if cfg.AbandonAfter == 0 {
		cfg.AbandonAfter = time.Second
	}
	return &Server{
		cfg: cfg, in: in, sign: newSigner(cfg.Key, "guardring"), drops: newDrops(cfg.Stderr),
		queue: queue{ready: make(chan struct{}, 1)}, stopped: make(chan struct{}), inputs: make(chan *Message, 16),
	}, nil
}

// Serve answers requests until a shutdown request comes or ctx ends; both interrupt the running cell.
func (s *Server) Serve(ctx context.Context) error {
	caught, err := catch(s.publishStream)
	if err != nil {
		return fmt.Errorf("kernel: %w", err)
	}
	s.stream = caught
	defer caught.restore()
	defer s.hostCells()()
	defer context.AfterFunc(ctx, s.quit)()

	go s.receive("shell", s.cfg.Sockets.Shell, s.takeShell)
	go s.receive("control", s.cfg.Sockets.Control, s.takeControl)
	go s.receive("stdin", s.cfg.Sockets.Stdin, s.takeStdin)
	go s.heartbeat()
	s.publish("status", nil, map[string]any{"execution_state": "starting"})

	for {
		for r := s.queue.pop(); r != nil; r = s.queue.pop() {
			if s.ended() {
				return nil
			}
			s.answer(r)
		}
		select {
		case <-s.queue.ready:
		case <-s.stopped:
			return nil
		}
	}
}

func (s *Server) ended() bool {
	select {
	case <-s.stopped:
		return true
	default:
		return false
	}
}

// receive decodes the messages of a socket, each signature once, and hands them on.
func (s *Server) receive(name string, socket Socket, take func(*Message)) {
	seen := newReplays(1 << 14)
	failures := 0
	for {
		raw, err := socket.Recv()
		if err != nil {
			if s.ended() || errors.Is(err, context.Canceled) || errors.Is(err, io.EOF) {
				return
			}
			s.drops.add(name, err)
			if failures++; failures > 10 {
				time.Sleep(10 * time.Millisecond) // a socket that fails again and again must not take a core
			}
			continue
		}
		failures = 0
		m, err := Decode(raw.Frames, s.cfg.Key)
		if err != nil {
			s.drops.add(name, err)
			continue
		}
		if !seen.first(m.Signature) {
			s.drops.add(name, "a message that was received before")
			continue
		}
		s.guarded(name, func() { take(m) })
	}
}

// guarded keeps a fault in handling one message from ending the kernel.
func (s *Server) guarded(where string, work func()) {
	defer func() {
		if fault := recover(); fault != nil {
			buf := make([]byte, 4<<10)
			s.drops.add(where, fmt.Sprintf("a fault: %v\n%s", fault, buf[:runtime.Stack(buf, false)]))
		}
	}()
	work()
}

func (s *Server) takeShell(m *Message) {
	if !s.queue.push(&request{msg: m}) {
		s.drops.add("shell", "more requests waiting than the queue takes")
	}
}

func (s *Server) takeStdin(m *Message) {
	if m.Header.Type != "input_reply" {
		s.drops.add("stdin", fmt.Sprintf("unexpected message type %q", m.Header.Type))
		return
	}
	select {
	case s.inputs <- m:
	default:
		s.drops.add("stdin", "an input nobody asked for")
	}
}

// takeControl answers on the control socket, also while a cell runs.
func (s *Server) takeControl(m *Message) {
	s.status(m, "busy")
	defer s.status(m, "idle")
	switch m.Header.Type {
	case "interrupt_request":
		s.Interrupt()
		s.reply(s.cfg.Sockets.Control, m, "interrupt_reply", map[string]any{"status": "ok"})
	case "shutdown_request":
		s.shutdown(s.cfg.Sockets.Control, m)
	case "kernel_info_request":
		s.reply(s.cfg.Sockets.Control, m, "kernel_info_reply", s.info())
	default:
		s.drops.add("control", fmt.Sprintf("unknown message type %q", m.Header.Type))
	}
}

// heartbeat returns what it is sent.
func (s *Server) heartbeat() {
	failures := 0
	for {
		m, err := s.cfg.Sockets.Heartbeat.Recv()
		if err != nil {
			if s.ended() || errors.Is(err, context.Canceled) || errors.Is(err, io.EOF) {
				return
			}
			s.drops.add("heartbeat", err)
			if failures++; failures > 10 {
				time.Sleep(10 * time.Millisecond)
			}
			continue
		}
		failures = 0
		if err := s.cfg.Sockets.Heartbeat.SendMulti(m); err != nil {
			s.drops.add("heartbeat", err)
		}
	}
}

// shutdown replies, ends the running cell, and lets Serve return.
func (s *Server) shutdown(socket Socket, m *Message) {
	var c struct {
		Restart bool `json:"restart"`
	}
	if err := json.Unmarshal(m.Content, &c); err != nil {
		s.refuse(socket, m, err)
		return
	}
	content := map[string]any{"status": "ok", "restart": c.Restart}
	s.reply(socket, m, "shutdown_reply", content)
	s.publish("shutdown_reply", m.RawHeader, content)
	s.quit()
}

// quit lets Serve return, after the running cell if it stops on an interrupt.
func (s *Server) quit() {
	s.stopOnce.Do(func() {
		close(s.stopped)
		busy := s.Interrupt()
		if busy && s.cfg.Abandon != nil {
			time.AfterFunc(s.cfg.AbandonAfter, s.cfg.Abandon)
		}
	})
}

// Interrupt stops the running cell and reports whether there was one.
func (s *Server) Interrupt() bool {
	s.mu.Lock()
	defer s.mu.Unlock()
	if !s.running {
		return false
	}
	s.stopCell = true
	s.cancel()
	s.in.Interrupt()
	run := s.cellCtx
	time.AfterFunc(stubborn, func() {
		s.mu.Lock()
		goesOn := s.running && s.cellCtx == run && !s.told
		s.told = s.told || goesOn
		s.mu.Unlock()
		if goesOn {
			s.publishStream("stderr", "the cell goes on: it waits for a channel or a lock, or is in compiled code that can't be interrupted; only a restart of the kernel ends it\n")
		}
	})
	return true
}

func (s *Server) info() map[string]any {
	return map[string]any{
		"status":                 "ok",
		"protocol_version":       Protocol,
		"implementation":         "guardring",
		"implementation_version": s.cfg.Version,
		"banner":                 "Guardring " + s.cfg.Version + ": Go cells for electric-field measurements (" + runtime.Version() + ")",
		"language_info": map[string]any{
			"name": "go", "version": runtime.Version()[2:], "mimetype": "text/x-go", "file_extension": ".go",
			"pygments_lexer": "go", "codemirror_mode": "text/x-go", "nbconvert_exporter": "script",
		},
		"help_links": []map[string]any{
			{"text": "The Go Programming Language Specification", "url": "https://go.dev/ref/spec"},
			{"text": "Go packages", "url": "https://pkg.go.dev/std"},
		},
		"debugger": false,
	}
}

// reply answers a request on its socket; an answer that can't be sent becomes an error, since the front end waits.
func (s *Server) reply(socket Socket, to *Message, msgType string, content any) {
	frames, _, err := s.sign.encode(to.Identities, msgType, to.RawHeader, content)
	if err != nil {
		s.drops.add(msgType, err)
		if frames, _, err = s.sign.encode(to.Identities, msgType, to.RawHeader, failure(CellFailed, "the answer can't be sent: "+err.Error(), nil)); err != nil {
			s.drops.add(msgType, err)
			return
		}
	}
	if err := socket.SendMulti(zmq4.NewMsgFrom(frames...)); err != nil {
		s.drops.add(msgType, err)
	}
}

// refuse answers a request whose content is not as the protocol says, and counts it.
func (s *Server) refuse(socket Socket, m *Message, cause error) {
	s.drops.add("request", fmt.Errorf("%s: %w", m.Header.Type, cause))
	s.reply(socket, m, replyType(m.Header.Type), failure(BadRequest, m.Header.Type+": "+cause.Error(), nil))
}

func replyType(request string) string {
	const suffix = "_request"
	if n := len(request) - len(suffix); n > 0 && request[n:] == suffix {
		return request[:n] + "_reply"
	}
	return "error"
}

func failure(name, value string, trace []string) map[string]any {
	if trace == nil {
		trace = []string{name + ": " + value}
	}
	return map[string]any{"status": "error", "ename": name, "evalue": value, "traceback": trace}
}

// publish sends a message to everyone who listens. The first frame is the topic, the message type.
func (s *Server) publish(msgType string, parent json.RawMessage, content any) {
	s.pub.Lock()
	defer s.pub.Unlock()
	frames, _, err := s.sign.encode([][]byte{[]byte(msgType)}, msgType, parent, content)
	if err != nil {
		s.drops.add(msgType, err)
		return
	}
	if err := s.cfg.Sockets.IOPub.SendMulti(zmq4.NewMsgFrom(frames...)); err != nil {
		s.drops.add(msgType, err)
	}
}

func (s *Server) status(m *Message, state string) {
	s.publish("status", m.RawHeader, map[string]any{"execution_state": state})
}

func (s *Server) outputParent() json.RawMessage {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.parent
}

func (s *Server) publishStream(name, text string) {
	s.publish("stream", s.outputParent(), map[string]any{"name": name, "text": text})
}
