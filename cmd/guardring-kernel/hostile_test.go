package main_test

import (
	"bytes"
	"context"
	"crypto/hmac"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"example.org/guardring/pkg/kernel"
)

// signed makes the frames of a message from its four parts, with a right signature.
func signed(key string, parts ...string) [][]byte {
	mac := hmac.New(sha256.New, []byte(key))
	frames := [][]byte{[]byte("<IDS|MSG>"), nil}
	for _, p := range parts {
		mac.Write([]byte(p))
		frames = append(frames, []byte(p))
	}
	frames[1] = []byte(hex.EncodeToString(mac.Sum(nil)))
	return frames
}

func header(msgType string) string {
	return fmt.Sprintf(`{"msg_id":"m-%d","session":"s","username":"u","date":"","msg_type":%q,"version":"5.3"}`, time.Now().UnixNano(), msgType)
}

func TestMalformedMessages(t *testing.T) {
	s := start(t)
	key := s.c.Connection().Key
	const exec = "execute_request"
	run := `{"code":"1","silent":false,"store_history":true,"user_expressions":{},"allow_stdin":false,"stop_on_error":true}`
	good := func() [][]byte { return signed(key, header(exec), "{}", "{}", run) }
	edit := func(f func([][]byte) [][]byte) [][]byte { return f(good()) }
	replay := good()
	cases := map[string][][]byte{
		"no frames but an empty one":    {{}},
		"garbage":                       {[]byte("garbage")},
		"delimiter only":                {[]byte("<IDS|MSG>")},
		"delimiter and signature":       good()[:2],
		"three parts":                   good()[:5],
		"no delimiter":                  good()[1:],
		"delimiter last":                edit(func(f [][]byte) [][]byte { return append(f[1:], f[0]) }),
		"many identities":               append(bytes.Split(bytes.Repeat([]byte("i,"), 20), []byte(",")), good()...),
		"60 frames of nothing":          bytes.Split(bytes.Repeat([]byte(","), 60), []byte(",")),
		"empty signature":               edit(func(f [][]byte) [][]byte { f[1] = nil; return f }),
		"short signature":               edit(func(f [][]byte) [][]byte { f[1] = f[1][:10]; return f }),
		"long signature":                edit(func(f [][]byte) [][]byte { f[1] = append(f[1], f[1]...); return f }),
		"signature not hexadecimal":     edit(func(f [][]byte) [][]byte { f[1] = bytes.Repeat([]byte("z"), 64); return f }),
		"signature of zeros":            edit(func(f [][]byte) [][]byte { f[1] = bytes.Repeat([]byte("0"), 64); return f }),
		"signature of another key":      signed("another", header(exec), "{}", "{}", run),
		"signature of an empty key":     signed("", header(exec), "{}", "{}", run),
		"content changed after signing": edit(func(f [][]byte) [][]byte { f[5] = []byte(`{"code":"2"}`); return f }),
		"header and parent swapped":     edit(func(f [][]byte) [][]byte { f[2], f[3] = f[3], f[2]; return f }),
		"header not JSON":               signed(key, "{", "{}", "{}", run),
		"header empty":                  signed(key, "", "{}", "{}", run),
		"header null":                   signed(key, "null", "{}", "{}", run),
		"header a list":                 signed(key, "[]", "{}", "{}", run),
		"header a number":               signed(key, "3", "{}", "{}", run),
		"header without fields":         signed(key, "{}", "{}", "{}", run),
		"message id a number":           signed(key, `{"msg_id":5,"session":"s","msg_type":"execute_request"}`, "{}", "{}", run),
		"message type a list":           signed(key, `{"msg_id":"5","session":"s","msg_type":[]}`, "{}", "{}", run),
		"message type missing":          signed(key, `{"msg_id":"5","session":"s"}`, "{}", "{}", run),
		"session missing":               signed(key, `{"msg_id":"5","msg_type":"execute_request"}`, "{}", "{}", run),
		"another protocol":              signed(key, `{"msg_id":"5","session":"s","msg_type":"execute_request","version":"9.0"}`, "{}", "{}", run),
		"a name of 1 MB":                signed(key, `{"msg_id":"5","session":"s","msg_type":"`+strings.Repeat("x", 1<<20)+`"}`, "{}", "{}", run),
		"an unknown type":               signed(key, header("no_such_request"), "{}", "{}", "{}"),
		"a reply":                       signed(key, header("execute_reply"), "{}", "{}", "{}"),
		"parent not JSON":               signed(key, header(exec), "nope", "{}", run),
		"parent a string":               signed(key, header(exec), `"p"`, "{}", run),
		"parent with numbers":           signed(key, header(exec), `{"msg_id":1}`, "{}", run),
		"metadata a list":               signed(key, header(exec), "{}", "[1]", run),
		"metadata not JSON":             signed(key, header(exec), "{}", "\xff\xfe", run),
		"content empty":                 signed(key, header(exec), "{}", "{}", ""),
		"content a list":                signed(key, header(exec), "{}", "{}", "[]"),
		"content null":                  signed(key, header(exec), "{}", "{}", "null"),
		"content nested deep":           signed(key, header(exec), "{}", "{}", strings.Repeat(`{"a":`, 20000)+"1"+strings.Repeat("}", 20000)),
		"code missing":                  signed(key, header(exec), "{}", "{}", "{}"),
		"code a number":                 signed(key, header(exec), "{}", "{}", `{"code":5}`),
		"code null":                     signed(key, header(exec), "{}", "{}", `{"code":null}`),
		"silent a string":               signed(key, header(exec), "{}", "{}", `{"code":"1","silent":"yes"}`),
		"expressions a list":            signed(key, header(exec), "{}", "{}", `{"code":"1","user_expressions":[]}`),
		"cursor outside":                signed(key, header("complete_request"), "{}", "{}", `{"code":"a","cursor_pos":99}`),
		"cursor negative":               signed(key, header("complete_request"), "{}", "{}", `{"code":"a","cursor_pos":-1}`),
		"cursor a fraction":             signed(key, header("inspect_request"), "{}", "{}", `{"code":"a","cursor_pos":0.5,"detail_level":0}`),
		"cursor beyond integers":        signed(key, header("complete_request"), "{}", "{}", `{"code":"a","cursor_pos":1e300}`),
		"detail level 9":                signed(key, header("inspect_request"), "{}", "{}", `{"code":"a","cursor_pos":0,"detail_level":9}`),
		"history without a kind":        signed(key, header("history_request"), "{}", "{}", `{}`),
		"history from a string":         signed(key, header("history_request"), "{}", "{}", `{"hist_access_type":"range","start":"1"}`),
		"restart a number":              signed(key, header("shutdown_request"), "{}", "{}", `{"restart":3}`),
		"is_complete without code":      signed(key, header("is_complete_request"), "{}", "{}", `{}`),
		"a comm to nothing":             signed(key, header("comm_open"), "{}", "{}", `{"comm_id":7}`),
		"an input nobody asked for":     signed(key, header("input_reply"), "{}", "{}", `{"value":"x"}`),
		"the same message twice":        replay,
	}
	if len(cases) < 40 {
		t.Fatalf("%d malformed messages, 40 or more were meant", len(cases))
	}
	s.ok("alive := 1")
	for name, frames := range cases {
		for _, control := range []bool{false, true} {
			if err := s.c.SendFrames(control, false, frames...); err != nil {
				t.Fatalf("%s: %v", name, err)
			}
		}
		if err := s.c.SendFrames(false, true, frames...); err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		if got := s.ok("alive").Result(); got != "1" {
			t.Errorf("after %q: %q", name, got)
		}
	}
	// The replayed message ran once on the shell socket, not twice.
	before := s.ok("alive").Count
	if err := s.c.SendFrames(false, false, replay...); err != nil {
		t.Fatal(err)
	}
	if after := s.ok("alive").Count; after != before+1 {
		t.Errorf("a recorded message was run again: cell %d follows cell %d", after, before)
	}
	if !strings.Contains(s.log.String(), "dropped") {
		t.Errorf("nothing about drops on standard error:\n%s", s.log)
	}
}

// dial opens a bare TCP connection to a port of the kernel.
func (s *session) dial(port int) net.Conn {
	s.t.Helper()
	c, err := net.Dial("tcp", net.JoinHostPort("127.0.0.1", strconv.Itoa(port)))
	if err != nil {
		s.t.Fatal(err)
	}
	s.t.Cleanup(func() { c.Close() })
	return c
}

// greeting is a right ZMTP 3.0 greeting, NULL mechanism.
func greeting() []byte {
	g := make([]byte, 64)
	g[0], g[9], g[10] = 0xff, 0x7f, 3
	copy(g[12:], "NULL")
	return g
}

// ready is a READY command for a socket type.
func ready(socketType string) []byte {
	body := append([]byte{5}, "READY"...)
	body = append(body, 11)
	body = append(body, "Socket-Type"...)
	body = append(body, 0, 0, 0, byte(len(socketType)))
	body = append(body, socketType...)
	return append([]byte{4, byte(len(body))}, body...)
}

func TestHostileConnections(t *testing.T) {
	s := start(t)
	conn := s.c.Connection()
	ports := []int{conn.ShellPort, conn.ControlPort, conn.StdinPort, conn.IOPubPort, conn.HBPort}
	peers := map[int]string{conn.ShellPort: "DEALER", conn.ControlPort: "DEALER", conn.StdinPort: "DEALER", conn.IOPubPort: "SUB", conn.HBPort: "REQ"}
	huge := []byte{0x02, 0x40, 0, 0, 0, 0, 0, 0, 0}  // a frame of 2^62 bytes
	above := []byte{0x02, 0, 0, 0, 0, 0x10, 0, 0, 0} // one of 256 MB
	for _, port := range ports {
		shaken := append(greeting(), ready(peers[port])...)
		with := func(tail ...byte) []byte { return append(append([]byte(nil), shaken...), tail...) }
		for name, data := range map[string][]byte{
			"nothing":                  nil,
			"an HTTP request":          []byte("GET / HTTP/1.1\r\nHost: localhost\r\n\r\n"),
			"half a greeting":          greeting()[:20],
			"another version":          append(append(greeting()[:10:10], 1), greeting()[11:]...),
			"another mechanism":        append(append(greeting()[:12:12], "CURVE"...), make([]byte, 47)...),
			"a greeting and silence":   greeting(),
			"a message before READY":   append(greeting(), 0, 1, 'x'),
			"READY of 2^62 bytes":      append(greeting(), 0x06, 0x40, 0, 0, 0, 0, 0, 0, 0),
			"READY cut off":            append(greeting(), 4, 200),
			"a property beyond READY":  append(greeting(), 4, 10, 5, 'R', 'E', 'A', 'D', 'Y', 200, 'a', 'b', 'c'),
			"a value beyond READY":     append(greeting(), 4, 12, 5, 'R', 'E', 'A', 'D', 'Y', 1, 'a', 255, 255, 255, 255),
			"another socket type":      append(greeting(), ready("PUSH")...),
			"a frame of 2^62 bytes":    with(huge...),
			"a frame of 256 MB":        with(above...),
			"reserved flags":           with(0xf8, 1, 'x'),
			"an endless message":       with(bytes.Repeat([]byte{1, 0}, 5000)...),
			"a frame cut off":          with(0, 100, 'x'),
			"a message without frames": with(0, 0),
			"a command":                with(4, 5, 4, 'P', 'I', 'N', 'G'),
			"an empty command":         with(4, 0),
			"an unsubscription":        with(0, 1, 0),
		} {
			c := s.dial(port)
			if _, err := c.Write(data); err != nil {
				t.Logf("%s: %v", name, err) // the kernel may have closed it already
			}
			_ = c.SetReadDeadline(time.Now().Add(time.Millisecond))
			_, _ = c.Read(make([]byte, 256))
		}
	}
	s.value("1+1", "2")
	// Connections that say nothing, more than a socket takes.
	for range 400 {
		s.dial(conn.ShellPort)
	}
	s.value("2+2", "4")
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	if _, err := s.c.Control(ctx, "kernel_info_request", map[string]any{}); err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(s.log.String(), "dropped") {
		t.Errorf("nothing about drops on standard error:\n%s", s.log)
	}
	if lines := strings.Count(s.log.String(), "\n"); lines > 60 {
		t.Errorf("%d lines on standard error, one a second and sender at most:\n%s", lines, s.log)
	}
}

func TestFlood(t *testing.T) {
	s := start(t)
	junk := signed("another key", header("execute_request"), "{}", "{}", `{"code":"1"}`)
	for range 5000 {
		if err := s.c.SendFrames(false, false, junk...); err != nil {
			t.Fatal(err)
		}
	}
	s.value("1+1", "2")
	// A subscriber that never reads, while much is printed.
	c := s.dial(s.c.Connection().IOPubPort)
	if _, err := c.Write(append(append(greeting(), ready("SUB")...), 0, 1, 1)); err != nil {
		t.Fatal(err)
	}
	e := s.run("import (\"fmt\"; \"strings\")\nfor i := 0; i < 300; i++ { fmt.Println(strings.Repeat(\"x\", 100000)) }", kernel.ExecuteOptions{})
	if n := len(e.Text("stdout")); n != 300*100001 {
		t.Errorf("%d bytes arrive beside a subscriber that does not read, want %d", n, 300*100001)
	}
}

func TestBadConnectionFiles(t *testing.T) {
	needKernel(t)
	dir := t.TempDir()
	const right = `{"transport":"tcp","ip":"127.0.0.1","shell_port":5551,"control_port":5552,"stdin_port":5553,"iopub_port":5554,"hb_port":5555,"signature_scheme":"hmac-sha256","key":"k"}`
	for name, c := range map[string]struct {
		text string
		mode os.FileMode
		want string
	}{
		"others can read it": {right, 0o644, "permissions"},
		"group can write it": {right, 0o620, "permissions"},
		"all interfaces":     {strings.Replace(right, "127.0.0.1", "0.0.0.0", 1), 0o600, "loopback"},
		"another host":       {strings.Replace(right, "127.0.0.1", "192.0.2.1", 1), 0o600, "loopback"},
		"no key":             {strings.Replace(right, `"key":"k"`, `"key":""`, 1), 0o600, "key is empty"},
		"another scheme":     {strings.Replace(right, "hmac-sha256", "hmac-md5", 1), 0o600, "signature_scheme"},
		"another transport":  {strings.Replace(right, `"tcp"`, `"ipc"`, 1), 0o600, "transport"},
		"no port":            {strings.Replace(right, "5551", "0", 1), 0o600, "shell_port"},
		"a port twice":       {strings.Replace(right, "5552", "5551", 1), 0o600, "both"},
		"not JSON":           {"{", 0o600, "connection file"},
	} {
		path := filepath.Join(dir, strings.ReplaceAll(name, " ", "-"))
		if err := os.WriteFile(path, []byte(c.text), c.mode); err != nil {
			t.Fatal(err)
		}
		if err := os.Chmod(path, c.mode); err != nil {
			t.Fatal(err)
		}
		out, err := exec.Command(binary, path).CombinedOutput()
		if err == nil || !strings.Contains(string(out), c.want) {
			t.Errorf("%s: %v %s, want a refusal about %s", name, err, out, c.want)
		}
	}
	if out, err := exec.Command(binary, filepath.Join(dir, "missing")).CombinedOutput(); err == nil {
		t.Errorf("a missing file: %s", out)
	}
	if out, err := exec.Command(binary).CombinedOutput(); err == nil || !strings.Contains(string(out), "usage") {
		t.Errorf("no file: %v %s", err, out)
	}
}

// TestOrphan checks that a kernel ends when its parent does.
func TestOrphan(t *testing.T) {
	needKernel(t)
	dir := t.TempDir()
	file, pid := filepath.Join(dir, "c.json"), filepath.Join(dir, "pid")
	var ports [5]int
	for i := range ports {
		l, err := net.Listen("tcp", "127.0.0.1:0")
		if err != nil {
			t.Fatal(err)
		}
		defer l.Close()
		ports[i] = l.Addr().(*net.TCPAddr).Port
		l.Close()
	}
	text := fmt.Sprintf(`{"transport":"tcp","ip":"127.0.0.1","shell_port":%d,"control_port":%d,"stdin_port":%d,"iopub_port":%d,"hb_port":%d,"signature_scheme":"hmac-sha256","key":"k"}`,
		ports[0], ports[1], ports[2], ports[3], ports[4])
	if err := os.WriteFile(file, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	// A shell that starts the kernel in the background, waits a little and is gone.
	script := fmt.Sprintf("%q %q & echo $! > %q; sleep 1", binary, file, pid)
	if out, err := exec.Command("sh", "-c", script).CombinedOutput(); err != nil {
		t.Fatalf("%v %s", err, out)
	}
	data, err := os.ReadFile(pid)
	if err != nil {
		t.Fatal(err)
	}
	id := strings.TrimSpace(string(data))
	for begin := time.Now(); time.Since(begin) < patience; time.Sleep(50 * time.Millisecond) {
		if state, err := os.ReadFile("/proc/" + id + "/stat"); err != nil || bytes.Contains(state, []byte(") Z ")) {
			return
		}
	}
	t.Errorf("process %s still runs after its parent is gone", id)
}
