package kernel

import (
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"time"

	"github.com/go-zeromq/zmq4"
)

func TestStartFailures(t *testing.T) {
	if runtime.GOOS == "windows" {
		t.Skip("the stand-ins for a kernel are shell scripts")
	}
	ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
	defer cancel()
	count := filepath.Join(t.TempDir(), "count")
	for name, c := range map[string]struct {
		argv []string
		want string
	}{
		"nothing to run":   {nil, "empty command"},
		"no such program":  {[]string{"/no/such/kernel"}, "no such file"},
		"ends at once":     {[]string{"sh", "-c", "echo no licence >&2; exit 3"}, "exit status 3; it said: no licence"},
		"port always used": {[]string{"sh", "-c", "echo x >> " + count + "; echo listen: address already in use >&2; exit 2"}, "address already in use"},
	} {
		if client, err := Start(ctx, Launch{Argv: c.argv}); client != nil || err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want an error with %q", name, err, c.want)
		}
	}
	if data, err := os.ReadFile(count); err != nil || strings.Count(string(data), "x") != 4 {
		t.Errorf("a used port was tried %d times, %v, want 4", strings.Count(string(data), "x"), err)
	}
}

func TestOutputsAsNotebooksHoldThem(t *testing.T) {
	for want, o := range map[string]Output{
		`{"name":"stdout","output_type":"stream","text":"a"}`:                                          {Type: "stream", Name: "stdout", Text: "a"},
		`{"ename":"E","evalue":"v","output_type":"error","traceback":["t"]}`:                           {Type: "error", EName: "E", EValue: "v", Traceback: []string{"t"}},
		`{"data":{"text/plain":"1"},"execution_count":3,"metadata":{},"output_type":"execute_result"}`: {Type: "execute_result", Data: map[string]any{"text/plain": "1"}, ExecutionCount: 3},
		`{"data":{"text/plain":"1"},"metadata":{"isolated":true},"output_type":"display_data"}`:        {Type: "display_data", Data: map[string]any{"text/plain": "1"}, Metadata: map[string]any{"isolated": true}},
	} {
		if got, err := json.Marshal(o); err != nil || string(got) != want {
			t.Errorf("%s, %v, want %s", got, err, want)
		}
	}
}

// sink is a socket that keeps what is sent.
type sink struct {
	zmq4.Socket
	sent chan zmq4.Msg
}

func (s sink) SendMulti(m zmq4.Msg) error { s.sent <- m; return nil }

// TestOutputAfterIdle: a goroutine that prints when its cell is done does not keep the client from seeing that it is,
// also where the reply comes last.
func TestOutputAfterIdle(t *testing.T) {
	c := newClient(Connection{Key: string(testKey)})
	s := sink{sent: make(chan zmq4.Msg, 1)}
	c.shell = s
	ctx, cancel := context.WithTimeout(context.Background(), 10*time.Second)
	defer cancel()
	go func() {
		m, err := Decode((<-s.sent).Frames, testKey)
		if err != nil {
			t.Error(err)
			return
		}
		about := func(msgType, content string) *Message {
			return &Message{Header: Header{Type: msgType}, Parent: Header{ID: m.Header.ID}, Content: json.RawMessage(content)}
		}
		c.mu.Lock()
		outputs := c.outputs[m.Header.ID]
		c.mu.Unlock()
		c.takeOutput(about("status", `{"execution_state":"idle"}`))
		c.takeOutput(about("stream", `{"name":"stdout","text":"late"}`))
		for len(outputs) > 0 {
			time.Sleep(time.Millisecond)
		}
		time.Sleep(10 * time.Millisecond) // the last one is looked at
		c.takeReply(about("execute_reply", `{"status":"ok","execution_count":1}`))
	}()
	e, err := c.Execute(ctx, "x", ExecuteOptions{})
	if err != nil || e.Status != "ok" || e.Text("stdout") != "late" {
		t.Fatalf("%+v, %v", e, err)
	}
}
