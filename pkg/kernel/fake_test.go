package kernel

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/go-zeromq/zmq4"

	"example.org/guardring/pkg/cell"
)

// fake is an interpreter of a few words, one a line:
//
//	print TEXT, warn TEXT, value TEXT, fail TEXT, panic TEXT, wait, show TEXT, report N, ask, forms
type fake struct {
	interrupted chan struct{}
	names       []Name
	described   map[string]*Description
	values      map[string]string
	forms, page map[string]any // of the word "forms"
}

func newFake() *fake { return &fake{interrupted: make(chan struct{}, 8)} }

func (f *fake) Run(ctx context.Context, c Cell) (*Result, error) {
	res := &Result{}
	for i, line := range strings.Split(c.Code, "\n") {
		word, rest, _ := strings.Cut(line, " ")
		at := []Place{{Cell: c.Count, Line: i + 1}}
		switch word {
		case "", "nothing":
		case "print":
			Writing("stdout")
			fmt.Println(rest)
		case "warn":
			Writing("stderr")
			fmt.Fprintln(os.Stderr, rest)
		case "value":
			res.Forms = map[string]any{"text/plain": rest}
		case "forms":
			res.Forms, res.Page = f.forms, f.page
		case "fail":
			return nil, &CellError{Kind: CellFailed, Message: rest, Places: at}
		case "plainly":
			return nil, errors.New(rest)
		case "panic":
			panic(rest)
		case "show":
			cell.DisplayAs("d", rest)
		case "report":
			cell.Report(cell.Context(), "work", int64(len(rest)), 10)
		case "ask":
			line, err := cell.Input("? ")
			if err != nil {
				return nil, err
			}
			fmt.Println("got " + line)
		case "wait":
			select {
			case <-ctx.Done():
				return nil, ctx.Err()
			case <-time.After(10 * time.Second):
			}
		default:
			return nil, &CellError{Kind: CompileError, Message: "unknown word " + word, Places: at}
		}
	}
	return res, nil
}

func (f *fake) Interrupt() { f.interrupted <- struct{}{} }

func (f *fake) Check(code string) Completeness {
	switch {
	case strings.HasSuffix(code, "…"):
		return CodeIncomplete
	case strings.Contains(code, "!"):
		return CodeInvalid
	}
	return CodeComplete
}

func (f *fake) Names() []Name { return f.names }

func (f *fake) Describe(expr string) (*Description, error) {
	if d := f.described[expr]; d != nil {
		return d, nil
	}
	return nil, fmt.Errorf("undefined: %s", expr)
}

func (f *fake) Value(name string) (string, bool) {
	v, ok := f.values[name]
	return v, ok
}

// pipe is a socket in memory.
type pipe struct {
	in, out chan zmq4.Msg
	once    sync.Once
	done    chan struct{}
}

func newPipe() *pipe {
	return &pipe{in: make(chan zmq4.Msg, 100), out: make(chan zmq4.Msg, 1000), done: make(chan struct{})}
}

func (p *pipe) Recv() (zmq4.Msg, error) {
	select {
	case m := <-p.in:
		return m, nil
	case <-p.done:
		return zmq4.Msg{}, io.EOF
	}
}

func (p *pipe) SendMulti(m zmq4.Msg) error { p.out <- m; return nil }

func (p *pipe) Close() error { p.once.Do(func() { close(p.done) }); return nil }

// bench is a server over pipes, for tests.
type bench struct {
	t                                       *testing.T
	shell, control, stdin, iopub, heartbeat *pipe
	sign                                    *signer
	server                                  *Server
	cancel                                  context.CancelFunc
	ended                                   chan error
}

var testKey = []byte("a key for tests")

func serve(t *testing.T, in Interpreter) *bench {
	t.Helper()
	b := &bench{t: t, shell: newPipe(), control: newPipe(), stdin: newPipe(), iopub: newPipe(), heartbeat: newPipe(),
		sign: newSigner(testKey, "test"), ended: make(chan error, 1)}
	s, err := NewServer(in, Config{
		Sockets: Sockets{Shell: b.shell, Control: b.control, Stdin: b.stdin, IOPub: b.iopub, Heartbeat: b.heartbeat},
		Key:     testKey, Version: "test", Stderr: io.Discard, AbandonAfter: 50 * time.Millisecond, Abandon: func() {},
	})
	if err != nil {
		t.Fatal(err)
	}
	b.server = s
	ctx, cancel := context.WithCancel(context.Background())
	b.cancel = cancel
	go func() { b.ended <- s.Serve(ctx) }()
	t.Cleanup(func() {
		cancel()
		for _, p := range []*pipe{b.shell, b.control, b.stdin, b.iopub, b.heartbeat} {
			_ = p.Close()
		}
		select {
		case <-b.ended:
		case <-time.After(5 * time.Second):
			t.Error("Serve does not end")
		}
	})
	if m := b.next(b.iopub); m.Header.Type != "status" || !strings.Contains(string(m.Content), "starting") {
		t.Fatalf("the first message is %s %s", m.Header.Type, m.Content)
	}
	return b
}

// send sends a request and returns its id.
func (b *bench) send(p *pipe, msgType string, content any) string {
	b.t.Helper()
	frames, id, err := b.sign.encode([][]byte{[]byte("peer")}, msgType, nil, content)
	if err != nil {
		b.t.Fatal(err)
	}
	p.in <- zmq4.NewMsgFrom(frames...)
	return id
}

func (b *bench) next(p *pipe) *Message {
	b.t.Helper()
	select {
	case raw := <-p.out:
		m, err := Decode(raw.Frames, testKey)
		if err != nil {
			b.t.Fatal(err)
		}
		return m
	case <-time.After(5 * time.Second):
		b.t.Fatal("no message within 5 s")
		return nil
	}
}

// published collects what is published for a request until it is idle: types and contents.
func (b *bench) published(id string) []string {
	b.t.Helper()
	var out []string
	for {
		m := b.next(b.iopub)
		if m.Parent.ID != id {
			continue
		}
		var c map[string]any
		if err := json.Unmarshal(m.Content, &c); err != nil {
			b.t.Fatal(err)
		}
		text := ""
		for _, k := range []string{"execution_state", "text", "evalue", "code"} {
			if s, ok := c[k].(string); ok {
				text = strings.TrimSpace(s)
			}
		}
		if d, ok := c["data"].(map[string]any); ok {
			text = fmt.Sprint(d["text/plain"])
		}
		out = append(out, m.Header.Type+":"+text)
		if c["execution_state"] == "idle" {
			return out
		}
	}
}

func content(t *testing.T, m *Message) map[string]any {
	t.Helper()
	var c map[string]any
	if err := json.Unmarshal(m.Content, &c); err != nil {
		t.Fatal(err)
	}
	return c
}
