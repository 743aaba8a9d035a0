package kernel

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"time"

	"github.com/go-zeromq/zmq4"
)

// Launch says how to start a kernel.
type Launch struct {
	Argv   []string // "{connection_file}" stands for the connection file's path
	Dir    string   // working directory; "" is the caller's
	Env    []string // added to the caller's environment
	Stderr io.Writer
}

// LaunchOf returns the launch of a compiled kernel, as Jupyter starts it.
func LaunchOf(binary string) Launch {
	return Launch{Argv: []string{binary, "{connection_file}"}, Env: []string{"GOROOT="}}
}

// Client is a front end without a face: it starts a kernel, runs cells and collects their outputs. Its methods may be
// called from several goroutines.
type Client struct {
	conn    Connection
	sign    *signer
	key     []byte
	dir     string // of the connection file
	process *exec.Cmd
	exited  chan struct{}
	exitErr error
	life    context.Context
	cancel  context.CancelFunc

	shell, control, stdin, iopub zmq4.Socket

	sending  sync.Mutex
	mu       sync.Mutex
	replies  map[string]chan *Message // by the id of the request
	outputs  map[string]chan *Message // likewise, from iopub
	inputs   map[string]func(*Message)
	displays map[string][]*Output
	heard    chan struct{} // closed when the first iopub message arrives
	heardOne sync.Once
}

// Start starts a kernel and waits until it answers. The kernel ends when Shutdown or Kill is called. The ports are
// free when they are chosen; when another program takes one before the kernel does, others are tried.
func Start(ctx context.Context, l Launch) (*Client, error) {
	for attempt := 0; ; attempt++ {
		said := &tail{next: l.Stderr}
		c, err := start(ctx, l, said)
		if err == nil || attempt == 3 || ctx.Err() != nil || !said.contains("address already in use") {
			if text := said.String(); err != nil && text != "" {
				err = fmt.Errorf("%w; it said: %s", err, text)
			}
			return c, err
		}
	}
}

// tail passes on what a kernel says and keeps the beginning of it.
type tail struct {
	mu   sync.Mutex
	next io.Writer
	kept []byte
}

func (t *tail) Write(p []byte) (int, error) {
	t.mu.Lock()
	defer t.mu.Unlock()
	t.kept = append(t.kept, p[:min(len(p), 4<<10-min(len(t.kept), 4<<10))]...)
	if t.next == nil {
		return len(p), nil
	}
	return t.next.Write(p)
}

func (t *tail) String() string {
	t.mu.Lock()
	defer t.mu.Unlock()
	return strings.TrimSpace(string(t.kept))
}

func (t *tail) contains(text string) bool { return strings.Contains(t.String(), text) }

func start(ctx context.Context, l Launch, stderr io.Writer) (*Client, error) {
	if len(l.Argv) == 0 {
		return nil, errors.New("kernel: an empty command")
	}
	dir, err := os.MkdirTemp("", folderPattern)
	if err != nil {
		return nil, err
	}
	conn, err := freeConnection()
	if err != nil {
		_ = os.RemoveAll(dir)
		return nil, err
	}
	file := filepath.Join(dir, "connection.json")
	data, err := json.Marshal(conn)
	if err == nil {
		err = os.WriteFile(file, data, 0o600)
	}
	if err != nil {
		_ = os.RemoveAll(dir)
		return nil, err
	}
	argv := make([]string, len(l.Argv))
	for i, a := range l.Argv {
		argv[i] = strings.ReplaceAll(a, "{connection_file}", file)
	}
	cmd := exec.Command(argv[0], argv[1:]...)
	cmd.Dir = l.Dir
	cmd.Env = append(append(os.Environ(), l.Env...), parentVariable+"="+strconv.Itoa(os.Getpid()))
	cmd.Stderr = stderr
	if err := cmd.Start(); err != nil {
		_ = os.RemoveAll(dir)
		return nil, err
	}
	c := newClient(*conn)
	c.dir, c.process = dir, cmd
	go func() {
		c.exitErr = cmd.Wait()
		close(c.exited)
		c.cancel()
	}()
	if err := c.connect(ctx); err != nil {
		c.Kill()
		return nil, err
	}
	return c, nil
}

func newClient(conn Connection) *Client {
	// The life is there before anything runs in it: a kernel may end at once.
	life, cancel := context.WithCancel(context.Background())
	return &Client{
		life: life, cancel: cancel,
		conn: conn, key: []byte(conn.Key), sign: newSigner([]byte(conn.Key), "client"), exited: make(chan struct{}),
		replies: map[string]chan *Message{}, outputs: map[string]chan *Message{}, inputs: map[string]func(*Message){},
		displays: map[string][]*Output{}, heard: make(chan struct{}),
	}
}

// freeConnection picks free ports and a random key.
func freeConnection() (*Connection, error) {
	c := &Connection{Transport: "tcp", IP: "127.0.0.1", SignatureScheme: "hmac-sha256", Key: randomID(), KernelName: KernelName}
	var open []net.Listener
	defer func() {
		for _, l := range open {
			_ = l.Close()
		}
	}()
	for _, p := range []*int{&c.ShellPort, &c.ControlPort, &c.StdinPort, &c.IOPubPort, &c.HBPort} {
		l, err := net.Listen("tcp", "127.0.0.1:0")
		if err != nil {
			return nil, err
		}
		open = append(open, l)
		*p = l.Addr().(*net.TCPAddr).Port
	}
	return c, nil
}

func (c *Client) connect(ctx context.Context) error {
	life, cancel := c.life, c.cancel
	id := zmq4.WithID(zmq4.SocketIdentity(c.sign.session))
	retry := []zmq4.Option{zmq4.WithDialerRetry(5 * time.Millisecond), zmq4.WithDialerMaxRetries(-1)}
	c.shell = zmq4.NewDealer(life, append(retry, id)...)
	c.control = zmq4.NewDealer(life, append(retry, id)...)
	c.stdin = zmq4.NewDealer(life, append(retry, id)...)
	c.iopub = zmq4.NewSub(life, retry...)
	stop := context.AfterFunc(ctx, cancel)
	for _, s := range []struct {
		socket zmq4.Socket
		port   int
	}{{c.iopub, c.conn.IOPubPort}, {c.shell, c.conn.ShellPort}, {c.control, c.conn.ControlPort}, {c.stdin, c.conn.StdinPort}} {
		if err := s.socket.Dial("tcp://" + net.JoinHostPort(c.conn.IP, strconv.Itoa(s.port))); err != nil {
			return c.ended(ctx, err)
		}
	}
	if err := c.iopub.SetOption(zmq4.OptionSubscribe, ""); err != nil {
		return err
	}
	go c.listen(c.shell, c.takeReply)
	go c.listen(c.control, c.takeReply)
	go c.listen(c.stdin, c.takeInput)
	go c.listen(c.iopub, c.takeOutput)
	// The kernel answers before the subscription has reached it: ask until something is heard.
	for {
		if _, err := c.Request(ctx, "kernel_info_request", map[string]any{}); err != nil {
			return err
		}
		select {
		case <-c.heard:
			if !stop() {
				return ctx.Err()
			}
			return nil
		case <-time.After(10 * time.Millisecond):
		case <-ctx.Done():
			return ctx.Err()
		}
	}
}

// ended tells why talking to the kernel came to an end.
func (c *Client) ended(ctx context.Context, err error) error {
	select {
	case <-c.exited:
		return fmt.Errorf("the kernel ended: %v", exitText(c.exitErr))
	default:
	}
	if ctx.Err() != nil {
		return ctx.Err()
	}
	return err
}

func exitText(err error) string {
	if err == nil {
		return "exit status 0"
	}
	return err.Error()
}

func (c *Client) listen(s zmq4.Socket, take func(*Message)) {
	for {
		raw, err := s.Recv()
		if err != nil {
			return // the socket was closed, or the kernel went away; requests learn of it by themselves
		}
		if m, err := Decode(raw.Frames, c.key); err == nil {
			take(m)
		}
	}
}

func (c *Client) takeReply(m *Message) {
	c.mu.Lock()
	ch := c.replies[m.Parent.ID]
	c.mu.Unlock()
	if ch != nil {
		ch <- m
	}
}

func (c *Client) takeOutput(m *Message) {
	c.heardOne.Do(func() { close(c.heard) })
	c.mu.Lock()
	ch := c.outputs[m.Parent.ID]
	c.mu.Unlock()
	if ch != nil {
		ch <- m
	}
}

func (c *Client) takeInput(m *Message) {
	c.mu.Lock()
	f := c.inputs[m.Parent.ID]
	c.mu.Unlock()
	if f != nil {
		go f(m)
	}
}

// send signs and sends a message and returns its id. before is called with the id before the message leaves.
func (c *Client) send(s zmq4.Socket, msgType string, parent json.RawMessage, content any, before func(id string)) (string, error) {
	frames, id, err := c.sign.encode(nil, msgType, parent, content)
	if err != nil {
		return "", err
	}
	if before != nil {
		before(id)
	}
	return id, c.SendFrames(s == c.control, s == c.stdin, frames...)
}

// SendFrames sends frames as they are to the shell socket, or to the control or stdin socket: also what no front end
// would send.
func (c *Client) SendFrames(control, stdin bool, frames ...[]byte) error {
	s := c.shell
	switch {
	case control:
		s = c.control
	case stdin:
		s = c.stdin
	}
	c.sending.Lock()
	defer c.sending.Unlock()
	return s.SendMulti(zmq4.NewMsgFrom(frames...))
}

// Connection returns where the kernel listens.
func (c *Client) Connection() Connection { return c.conn }

// Exited is closed when the kernel's process has ended.
func (c *Client) Exited() <-chan struct{} { return c.exited }

// Request sends a request on the shell socket and returns the reply.
func (c *Client) Request(ctx context.Context, msgType string, content any) (*Message, error) {
	return c.request(ctx, c.shell, msgType, content)
}

// Control sends a request on the control socket, which answers while a cell runs, and returns the reply.
func (c *Client) Control(ctx context.Context, msgType string, content any) (*Message, error) {
	return c.request(ctx, c.control, msgType, content)
}

func (c *Client) request(ctx context.Context, s zmq4.Socket, msgType string, content any) (*Message, error) {
	ch := make(chan *Message, 4)
	id, err := c.send(s, msgType, nil, content, func(id string) {
		c.mu.Lock()
		c.replies[id] = ch
		c.mu.Unlock()
	})
	defer func() {
		c.mu.Lock()
		delete(c.replies, id)
		c.mu.Unlock()
	}()
	if err != nil {
		return nil, c.ended(ctx, err)
	}
	select {
	case m := <-ch:
		return m, nil
	case <-ctx.Done():
		return nil, ctx.Err()
	case <-c.exited:
		return nil, c.ended(ctx, nil)
	}
}

// Interrupt asks the kernel to stop the running cell and returns when it has taken the request.
func (c *Client) Interrupt(ctx context.Context) error {
	_, err := c.Control(ctx, "interrupt_request", map[string]any{})
	return err
}

// Signal sends a signal to the kernel's process.
func (c *Client) Signal(s os.Signal) error {
	return c.process.Process.Signal(s)
}

// Shutdown asks the kernel to end, waits until it has, and closes the connection. When ctx ends first, the kernel is
// killed.
func (c *Client) Shutdown(ctx context.Context, restart bool) error {
	defer c.close()
	_, _ = c.Control(ctx, "shutdown_request", map[string]any{"restart": restart}) // it may end before it answers
	select {
	case <-c.exited:
		return nil
	case <-ctx.Done():
		c.Kill()
		return ctx.Err()
	}
}

// Kill ends the kernel's process at once and closes the connection.
func (c *Client) Kill() {
	_ = c.process.Process.Kill() // it may have ended by itself
	<-c.exited
	c.close()
}

func (c *Client) close() {
	c.cancel()
	for _, s := range []zmq4.Socket{c.shell, c.control, c.stdin, c.iopub} {
		if s != nil {
			_ = s.Close() // nothing is lost: what was sent was answered or given up
		}
	}
	_ = os.RemoveAll(c.dir) // a file of ours in the system's temporary folder
}
