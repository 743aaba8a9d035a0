package kernel

import (
	"fmt"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
	"time"

	"github.com/go-zeromq/zmq4"
)

func run(code string) map[string]any { return map[string]any{"code": code} }

func TestExecute(t *testing.T) {
	b := serve(t, newFake())
	id := b.send(b.shell, "execute_request", run("print one\nwarn two\nprint three\nshow four\nprint five\nvalue six"))
	want := []string{"status:busy", "execute_input:" + "print one\nwarn two\nprint three\nshow four\nprint five\nvalue six",
		"stream:one", "stream:two", "stream:three", "display_data:four", "stream:five", "execute_result:six", "status:idle"}
	if got := b.published(id); !reflect.DeepEqual(got, want) {
		t.Errorf("published\n%q, want\n%q", got, want)
	}
	reply := b.next(b.shell)
	if c := content(t, reply); c["status"] != "ok" || c["execution_count"] != 1.0 || reply.Parent.ID != id || string(reply.Identities[0]) != "peer" {
		t.Errorf("reply %s to %s: %v", reply.Header.Type, reply.Parent.ID, c)
	}
}

func TestExecuteErrors(t *testing.T) {
	b := serve(t, newFake())
	for code, want := range map[string][2]string{
		"nothing\nfail no readings": {CellFailed, "no readings"},
		"plainly wrong":             {CellFailed, "wrong"},
		"panic oh":                  {Panicked, "oh"},
		"nonsense":                  {CompileError, "unknown word nonsense"},
	} {
		id := b.send(b.shell, "execute_request", run(code))
		c := content(t, b.next(b.shell))
		b.published(id)
		trace, ok := c["traceback"].([]any)
		if c["status"] != "error" || c["ename"] != want[0] || c["evalue"] != want[1] || !ok || len(trace) == 0 {
			t.Errorf("%q: %v", code, c)
		}
	}
}

func TestRequestsWithBadContentGetAnError(t *testing.T) {
	b := serve(t, newFake())
	for _, r := range []struct {
		msgType string
		content any
	}{
		{"execute_request", map[string]any{}},
		{"execute_request", map[string]any{"code": 3}},
		{"complete_request", map[string]any{"code": "a", "cursor_pos": 2}},
		{"inspect_request", map[string]any{"code": "a", "cursor_pos": 0, "detail_level": 2}},
		{"history_request", map[string]any{"hist_access_type": "all"}},
		{"is_complete_request", map[string]any{"code": []int{}}},
	} {
		b.send(b.shell, r.msgType, r.content)
		m := b.next(b.shell)
		if c := content(t, m); c["status"] != "error" || c["ename"] != BadRequest || m.Header.Type != replyType(r.msgType) {
			t.Errorf("%s %v: %s %v", r.msgType, r.content, m.Header.Type, c)
		}
	}
	if n := b.server.drops.total(); n != 6 {
		t.Errorf("%d refusals counted, want 6", n)
	}
}

func TestInterruptAndAbort(t *testing.T) {
	f := newFake()
	b := serve(t, f)
	first := b.send(b.shell, "execute_request", run("report 1234\nwait"))
	for { // wait until it runs
		if m := b.next(b.iopub); m.Header.Type == "display_data" {
			break
		}
	}
	b.send(b.shell, "execute_request", run("value late"))
	b.send(b.shell, "is_complete_request", run("x"))
	b.send(b.control, "interrupt_request", map[string]any{})
	if m := b.next(b.control); m.Header.Type != "interrupt_reply" {
		t.Errorf("%s answers an interrupt", m.Header.Type)
	}
	<-f.interrupted
	m := b.next(b.shell)
	if c := content(t, m); m.Parent.ID != first || c["ename"] != Interrupted {
		t.Errorf("the interrupted cell: %v", c)
	}
	if c := content(t, b.next(b.shell)); c["status"] != "aborted" {
		t.Errorf("the cell behind it: %v", c)
	}
	if m := b.next(b.shell); m.Header.Type != "is_complete_reply" {
		t.Errorf("another request behind it is answered by %s", m.Header.Type)
	}
	b.send(b.control, "interrupt_request", map[string]any{}) // nothing runs
	b.next(b.control)
	select {
	case <-f.interrupted:
		t.Error("an interrupt reaches the interpreter while nothing runs")
	default:
	}
	b.send(b.shell, "execute_request", run("value on"))
	if c := content(t, b.next(b.shell)); c["status"] != "ok" {
		t.Errorf("the next cell: %v", c)
	}
}

func TestShutdownWhileBusy(t *testing.T) {
	b := serve(t, newFake())
	b.send(b.shell, "execute_request", run("report 1\nwait"))
	for {
		if m := b.next(b.iopub); m.Header.Type == "display_data" {
			break
		}
	}
	b.send(b.control, "shutdown_request", map[string]any{"restart": true})
	if c := content(t, b.next(b.control)); c["restart"] != true {
		t.Errorf("shutdown_reply: %v", c)
	}
	select {
	case err := <-b.ended:
		if err != nil {
			t.Error(err)
		}
		b.ended <- nil
	case <-time.After(5 * time.Second):
		t.Error("Serve goes on after a shutdown request")
	}
}

// TestEndWhileBusy: the end of the context, a signal to the process, stops the running cell as a shutdown does, and
// the end that comes just before a cell runs stops it too.
func TestEndWhileBusy(t *testing.T) {
	f := newFake()
	b := serve(t, f)
	b.send(b.shell, "execute_request", run("wait"))
	for m := b.next(b.iopub); m.Header.Type != "execute_input"; m = b.next(b.iopub) {
	}
	time.Sleep(20 * time.Millisecond)
	b.cancel()
	select {
	case err := <-b.ended:
		b.ended <- err
	case <-time.After(5 * time.Second):
		t.Fatal("Serve waits for the cell")
	}
	if r := content(t, b.next(b.shell)); r["ename"] != Interrupted {
		t.Errorf("reply %v", r)
	}
	if _, err := b.server.run(Cell{Code: "wait", Count: 2}); asCellError(err).Kind != Interrupted {
		t.Errorf("a cell that begins after the end: %v", err)
	}
}

func TestInputRoundTrip(t *testing.T) {
	b := serve(t, newFake())
	id := b.send(b.shell, "execute_request", map[string]any{"code": "ask", "allow_stdin": true})
	q := b.next(b.stdin)
	if q.Header.Type != "input_request" || q.Parent.ID != id || content(t, q)["prompt"] != "? " {
		t.Errorf("%s %s", q.Header.Type, q.Content)
	}
	b.send(b.stdin, "input_reply", map[string]any{"value": "µ"})
	if got := strings.Join(b.published(id), " "); !strings.Contains(got, "stream:got µ") {
		t.Errorf("published %q", got)
	}
}

func TestHeartbeatAndComms(t *testing.T) {
	b := serve(t, newFake())
	b.heartbeat.in <- zmq4.NewMsgFrom([]byte("ping"))
	if m := <-b.heartbeat.out; string(m.Frames[0]) != "ping" {
		t.Errorf("heartbeat returns %q", m.Frames)
	}
	id := b.send(b.shell, "comm_open", map[string]any{"comm_id": "c1", "target_name": "t"})
	if got := strings.Join(b.published(id), " "); got != "status:busy comm_close:<nil> status:idle" {
		t.Errorf("a comm that is opened: %s", got)
	}
}

func TestReplayedAndForeignMessages(t *testing.T) {
	b := serve(t, newFake())
	frames, _, err := b.sign.encode(nil, "execute_request", nil, run("value x"))
	if err != nil {
		t.Fatal(err)
	}
	foreign, _, err := newSigner([]byte("another"), "x").encode(nil, "execute_request", nil, run("value x"))
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range [][][]byte{frames, frames, foreign, {}, {nil}} {
		b.shell.in <- zmq4.NewMsgFrom(f...)
	}
	b.send(b.shell, "is_complete_request", run("x"))
	if m := b.next(b.shell); m.Header.Type != "execute_reply" {
		t.Errorf("first reply %s", m.Header.Type)
	}
	if m := b.next(b.shell); m.Header.Type != "is_complete_reply" {
		t.Errorf("second reply %s: a recorded or foreign message was run", m.Header.Type)
	}
	if n := b.server.drops.total(); n != 4 {
		t.Errorf("%d dropped, want 4", n)
	}
}

func TestQueueIsBounded(t *testing.T) {
	q := queue{ready: make(chan struct{}, 1)}
	for range maxQueue {
		if !q.push(&request{}) {
			t.Fatal("the queue is full too early")
		}
	}
	if q.push(&request{}) {
		t.Error("the queue takes more than its bound")
	}
}

func TestNoKeyNoServer(t *testing.T) {
	if _, err := NewServer(newFake(), Config{}); err == nil {
		t.Error("a server without a signing key")
	}
}

func TestSpecialLines(t *testing.T) {
	f := newFake()
	f.described = map[string]*Description{"r": {Kind: "var", Type: "float64"}}
	b := serve(t, f)
	dir := t.TempDir()
	t.Chdir(dir)
	b.send(b.shell, "execute_request", run("\n%doc r\n%cd ..\nfail here"))
	if c := content(t, b.next(b.shell)); c["evalue"] != "here" || !strings.Contains(c["traceback"].([]any)[1].(string), "line 4") {
		t.Errorf("lines for the kernel shift those of the code: %v", c)
	}
	if wd, err := os.Getwd(); err != nil || wd != filepath.Dir(dir) {
		t.Errorf("%%cd leads to %s, %v", wd, err)
	}
	b.send(b.shell, "execute_request", run("%doc r"))
	payload, _ := content(t, b.next(b.shell))["payload"].([]any)
	if len(payload) != 1 || payload[0].(map[string]any)["source"] != "page" {
		t.Errorf("%%doc pages %v", payload)
	}
	for _, code := range []string{"%doc unknown", "%cd /no/such/folder", "%nothing"} {
		b.send(b.shell, "execute_request", run(code))
		if c := content(t, b.next(b.shell)); c["status"] != "error" {
			t.Errorf("%s: %v", code, c)
		}
	}
	b.send(b.shell, "is_complete_request", run("%help"))
	if c := content(t, b.next(b.shell)); c["status"] != "complete" {
		t.Errorf("%%help is %v", c)
	}
}

// total returns how many were dropped in all.
func (d *drops) total() int64 {
	d.mu.Lock()
	defer d.mu.Unlock()
	return d.count
}

// TestOutputTooLarge: a form or an answer that a message can't hold is said, and the rest is sent.
func TestOutputTooLarge(t *testing.T) {
	f := newFake()
	b := serve(t, f)
	b.server.sign.most = 1 << 20
	f.forms = map[string]any{"text/plain": "short", "text/html": strings.Repeat("x", 1<<20)}
	id := b.send(b.shell, "execute_request", run("forms"))
	said := strings.Join(b.published(id), "\n")
	if !strings.Contains(said, "execute_result:short") || !strings.Contains(said, "stream:the form text/html can't be sent: it has 1048578 bytes as JSON, and 983040 are left") {
		t.Errorf("published %s", said)
	}
	if r := content(t, b.next(b.shell)); r["status"] != "ok" {
		t.Errorf("reply %v", r)
	}
	f.page = map[string]any{"text/plain": strings.Repeat("x", 1<<20)}
	b.send(b.shell, "execute_request", run("forms"))
	if r := content(t, b.next(b.shell)); r["status"] != "error" || !strings.Contains(fmt.Sprint(r["evalue"]), "at most") {
		t.Errorf("reply to a page too large %v", r["evalue"])
	}
}
