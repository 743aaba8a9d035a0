package kernel

import (
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"net"
	"slices"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"github.com/go-zeromq/zmq4"
	"github.com/go-zeromq/zmq4/transport"
)

// GuardedTransport is the name of a ZeroMQ transport over TCP that looks at the bytes of every connection before the
// socket library does. The library shakes hands on its accept loop, trusts the lengths that a peer announces and
// waits for ever for a peer that stops reading; behind this transport none of that can hold up or end the kernel.
const GuardedTransport = "guarded"

const (
	handshakeTime  = 5 * time.Second  // a peer that has not shaken hands by then is dropped
	writeTime      = 10 * time.Second // a peer that takes no bytes for that long is dropped
	maxConnections = 256              // at one socket; a front end needs a handful
	maxCommand     = 4 << 10          // bytes of the READY command
	maxUnsent      = 32 << 20         // bytes that wait for a peer to read
	greetingSize   = 64               // ZMTP 3.0, section "Greeting"
)

var registerOnce sync.Once

// RegisterGuardedTransport makes GuardedTransport known to the socket library for a kernel that listens at conn.
// Drops are counted on w.
func RegisterGuardedTransport(conn *Connection, w io.Writer) error {
	err := errors.New("kernel: the guarded transport is registered already")
	registerOnce.Do(func() {
		routers := []string{"DEALER", "REQ", "ROUTER"}
		err = zmq4.RegisterTransport(GuardedTransport, guardedTransport{tcp: transport.New("tcp"), drops: newDrops(w), peers: map[string][]string{
			strconv.Itoa(conn.ShellPort): routers, strconv.Itoa(conn.ControlPort): routers, strconv.Itoa(conn.StdinPort): routers,
			strconv.Itoa(conn.IOPubPort): {"SUB", "XSUB"}, strconv.Itoa(conn.HBPort): {"REQ", "DEALER"},
		}})
	})
	return err
}

type guardedTransport struct {
	tcp   transport.Transport
	drops *drops
	peers map[string][]string // by port: the socket types that may connect
}

func (t guardedTransport) Dial(ctx context.Context, d transport.Dialer, addr string) (net.Conn, error) {
	return t.tcp.Dial(ctx, d, addr)
}

func (t guardedTransport) Addr(ep string) (string, error) { return t.tcp.Addr(ep) }

func (t guardedTransport) Listen(ctx context.Context, addr string) (net.Listener, error) {
	host, port, err := net.SplitHostPort(addr)
	if err != nil {
		return nil, err
	}
	if ip := net.ParseIP(host); ip == nil || !ip.IsLoopback() {
		return nil, fmt.Errorf("%s is not a loopback address", host)
	}
	l, err := t.tcp.Listen(ctx, addr)
	if err != nil {
		return nil, err
	}
	g := &guardedListener{Listener: l, drops: t.drops, peers: t.peers[port], ready: make(chan net.Conn), done: make(chan struct{})}
	go g.run()
	return g, nil
}

// guardedListener hands on connections that have shaken hands.
type guardedListener struct {
	net.Listener
	drops *drops
	peers []string
	ready chan net.Conn
	done  chan struct{}
	close sync.Once
	open  atomic.Int64
}

func (l *guardedListener) Accept() (net.Conn, error) {
	select {
	case c := <-l.ready:
		return c, nil
	case <-l.done:
		return nil, net.ErrClosed
	}
}

func (l *guardedListener) Close() error {
	l.close.Do(func() { close(l.done) })
	return l.Listener.Close()
}

func (l *guardedListener) run() {
	for {
		c, err := l.Listener.Accept()
		if err != nil {
			select {
			case <-l.done:
				return
			case <-time.After(50 * time.Millisecond): // out of file descriptors, most likely: let some close
				continue
			}
		}
		where := l.Addr().String()
		if l.open.Add(1) > maxConnections {
			l.open.Add(-1)
			l.drops.add(where, fmt.Sprintf("more than %d connections", maxConnections))
			_ = c.Close()
			continue
		}
		go func() {
			g, err := guard(c, l.peers, func() { l.open.Add(-1) }, func(reason error) { l.drops.add(where, reason) })
			if err != nil {
				l.drops.add(where, err)
				return
			}
			select {
			case l.ready <- g:
			case <-l.done:
				_ = g.Close()
			}
		}()
	}
}

// guard shakes hands with the peer of c as far as a ZMTP server with NULL security does, checks what it says, and
// returns a connection on which the library can do the same again without waiting: it reads the recorded bytes, and
// its own greeting is not sent a second time.
func guard(c net.Conn, peers []string, onClose func(), drop func(error)) (net.Conn, error) {
	g := &guardedConn{Conn: c, onClose: onClose, drop: drop}
	g.sent = sync.NewCond(&g.mu)
	fail := func(err error) (net.Conn, error) {
		_ = g.Close()
		return nil, err
	}
	if err := c.SetDeadline(time.Now().Add(handshakeTime)); err != nil {
		return fail(err)
	}
	var hello [greetingSize]byte
	hello[0], hello[9], hello[10] = 0xff, 0x7f, 3
	copy(hello[12:32], "NULL")
	if _, err := c.Write(hello[:]); err != nil {
		return fail(fmt.Errorf("handshake: %w", err))
	}
	record := make([]byte, greetingSize, greetingSize+256)
	// The first bytes tell a ZMTP peer from anything else that connects.
	if _, err := io.ReadFull(c, record[:11]); err != nil {
		return fail(fmt.Errorf("handshake: %w", err))
	}
	if record[0] != 0xff || record[9] != 0x7f {
		return fail(errors.New("handshake: not a ZeroMQ peer"))
	}
	if record[10] < 3 {
		return fail(fmt.Errorf("handshake: ZMTP version %d, expected 3", record[10]))
	}
	if _, err := io.ReadFull(c, record[11:]); err != nil {
		return fail(fmt.Errorf("handshake: %w", err))
	}
	if string(record[12:17]) != "NULL\x00" || record[32] > 1 {
		return fail(errors.New("handshake: a security mechanism other than NULL"))
	}
	ready, peer, err := readReady(c)
	if err != nil {
		return fail(fmt.Errorf("handshake: %w", err))
	}
	if !slices.Contains(peers, peer) {
		return fail(fmt.Errorf("handshake: a socket of type %.20q, expected %s", peer, strings.Join(peers, ", ")))
	}
	if err := c.SetDeadline(time.Time{}); err != nil {
		return fail(err)
	}
	g.replay = append(record, ready...)
	g.swallow = greetingSize
	return g, nil
}

// readReady reads the peer's READY command, checks its properties, lengths above all, and returns it with the peer's
// socket type.
func readReady(r io.Reader) (command []byte, socketType string, err error) {
	head := make([]byte, 2, 9)
	if _, err := io.ReadFull(r, head); err != nil {
		return nil, "", err
	}
	size := uint64(head[1])
	switch head[0] {
	case 0x04:
	case 0x06:
		head = head[:9]
		if _, err := io.ReadFull(r, head[2:]); err != nil {
			return nil, "", err
		}
		size = binary.BigEndian.Uint64(head[1:])
	default:
		return nil, "", errors.New("no command follows the greeting")
	}
	if size > maxCommand {
		return nil, "", fmt.Errorf("a command of %d bytes, at most %d are taken", size, maxCommand)
	}
	body := make([]byte, size)
	if _, err := io.ReadFull(r, body); err != nil {
		return nil, "", err
	}
	if len(body) < 6 || body[0] != 5 || string(body[1:6]) != "READY" {
		return nil, "", errors.New("the command is not READY")
	}
	for p := body[6:]; len(p) > 0; {
		n := int(p[0])
		if n == 0 || len(p) < 1+n+4 {
			return nil, "", errors.New("READY has a property that is cut off")
		}
		name := string(p[1 : 1+n])
		p = p[1+n:]
		v := binary.BigEndian.Uint32(p)
		if uint64(v) > uint64(len(p)-4) {
			return nil, "", errors.New("READY has a value that is cut off")
		}
		if strings.EqualFold(name, "Socket-Type") {
			socketType = string(p[4 : 4+v])
		}
		p = p[4+v:]
	}
	return append(head, body...), socketType, nil
}

// guardedConn checks frames as they pass.
type guardedConn struct {
	net.Conn
	onClose func()
	drop    func(error)
	once    sync.Once

	replay []byte // bytes already read from the peer
	in     frameScan

	writing sync.Mutex
	swallow int // bytes of the library's greeting still to be thrown away
	out     frameScan
	buffer  []byte // a message not yet complete

	mu     sync.Mutex
	sent   *sync.Cond // something was sent, or the connection is broken
	queue  [][]byte   // complete messages
	unsent int        // bytes in the queue and on their way
	sender bool       // a goroutine is sending
	broken bool
}

func (c *guardedConn) Close() error {
	err := c.Conn.Close()
	c.once.Do(c.onClose)
	c.mu.Lock()
	c.broken = true
	c.sent.Broadcast()
	c.mu.Unlock()
	return err
}

func (c *guardedConn) Read(p []byte) (int, error) {
	if len(c.replay) > 0 {
		n := copy(p, c.replay)
		c.replay = c.replay[n:]
		return n, nil
	}
	n, err := c.Conn.Read(p)
	if n > 0 {
		if bad := c.in.pass(p[:n]); bad != nil {
			c.drop(bad)
			_ = c.Close()
			return 0, io.EOF // the one error after which the library always forgets a connection
		}
	}
	return n, err
}

// Write gathers the pieces of a message and hands complete ones to a goroutine that sends them, so that a peer that
// is slow to read holds up no other. It waits only when the peer has not read maxUnsent bytes.
func (c *guardedConn) Write(p []byte) (int, error) {
	c.writing.Lock()
	defer c.writing.Unlock()
	n := len(p)
	if k := min(c.swallow, len(p)); k > 0 {
		c.swallow -= k
		p = p[k:]
	}
	c.buffer = append(c.buffer, p...)
	if err := c.out.pass(p); err != nil { // what follows can't be told apart any more
		c.drop(err)
		_ = c.Close()
		return 0, io.EOF // the one error after which the library always forgets a connection
	}
	if !c.out.between() || len(c.buffer) == 0 {
		return n, nil
	}
	message := c.buffer
	c.buffer = nil
	c.mu.Lock()
	defer c.mu.Unlock()
	for c.unsent > maxUnsent && !c.broken {
		c.sent.Wait()
	}
	if c.broken {
		return 0, io.EOF // the one error after which the library always forgets a connection
	}
	c.queue = append(c.queue, message)
	c.unsent += len(message)
	if !c.sender {
		c.sender = true
		go c.send()
	}
	return n, nil
}

// send writes what is queued and ends when there is nothing more.
func (c *guardedConn) send() {
	c.mu.Lock()
	defer c.mu.Unlock()
	defer func() { c.sender = false }()
	for len(c.queue) > 0 && !c.broken {
		batch := net.Buffers(c.queue)
		c.queue = nil
		c.mu.Unlock()
		size, err := 0, c.Conn.SetWriteDeadline(time.Now().Add(writeTime))
		for _, m := range batch {
			size += len(m)
		}
		if err == nil {
			_, err = batch.WriteTo(c.Conn)
		}
		c.mu.Lock()
		c.unsent -= size
		if err != nil && !c.broken {
			c.broken = true
			c.drop(fmt.Errorf("a peer that takes no bytes: %w", err))
			_ = c.Conn.Close() // its reader then ends, and closes the rest
		}
		c.sent.Broadcast()
	}
}

// frameScan follows ZMTP traffic after the greeting: it knows where frames begin and end, and how long a message has
// become.
type frameScan struct {
	head    [9]byte
	headLen int
	body    uint64 // bytes of the current frame still to come
	more    bool   // the current message has further frames
	total   uint64 // bytes of the current message
	count   int    // frames of the current message
}

// between reports whether the traffic so far ends with a complete message.
func (f *frameScan) between() bool { return f.headLen == 0 && f.body == 0 && !f.more }

// pass looks at the next bytes and reports a frame that must not go through.
func (f *frameScan) pass(p []byte) error {
	for len(p) > 0 {
		if f.body > 0 {
			n := min(f.body, uint64(len(p)))
			f.body -= n
			p = p[n:]
			continue
		}
		f.head[f.headLen] = p[0]
		f.headLen++
		p = p[1:]
		flags := f.head[0]
		if flags > 7 {
			return fmt.Errorf("a frame with the reserved flags %#x", flags)
		}
		long := flags&2 != 0
		if f.headLen < 2 || long && f.headLen < 9 {
			continue
		}
		size := uint64(f.head[1])
		if long {
			size = binary.BigEndian.Uint64(f.head[1:])
		}
		f.headLen = 0
		f.count++
		if size > MaxMessage || f.total+size > MaxMessage {
			return fmt.Errorf("a message of more than %d bytes", MaxMessage)
		}
		if f.count > maxFrames {
			return fmt.Errorf("a message of more than %d frames", maxFrames)
		}
		f.total += size
		f.body = size
		f.more = flags&1 != 0
		if !f.more {
			f.total, f.count = 0, 0
		}
	}
	return nil
}
