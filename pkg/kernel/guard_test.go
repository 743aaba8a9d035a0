package kernel

import (
	"bytes"
	"errors"
	"io"
	"net"
	"strings"
	"testing"
	"time"
)

// peerHello is what a ZMTP 3.0 peer with NULL security sends first (https://rfc.zeromq.org/spec/23/, "Greeting").
func peerHello(socketType string) []byte {
	g := make([]byte, greetingSize)
	g[0], g[9], g[10] = 0xff, 0x7f, 3
	copy(g[12:], "NULL")
	body := "\x05READY\x0bSocket-Type\x00\x00\x00" + string(rune(len(socketType))) + socketType + "\x08Identity\x00\x00\x00\x00"
	return append(append(g, 4, byte(len(body))), body...)
}

// guarded shakes hands over an in-memory connection whose peer sends hello.
func guarded(t *testing.T, hello []byte) (inner net.Conn, peer net.Conn, drops *[]error, err error) {
	t.Helper()
	a, b := net.Pipe()
	t.Cleanup(func() { a.Close(); b.Close() })
	go func() {
		buf := make([]byte, greetingSize)
		if _, err := io.ReadFull(b, buf); err != nil {
			return
		}
		_, _ = b.Write(hello) // the other side may hang up on a bad greeting
	}()
	var seen []error
	inner, err = guard(a, []string{"DEALER"}, func() {}, func(e error) { seen = append(seen, e) })
	return inner, b, &seen, err
}

func TestGuardReplaysTheHandshake(t *testing.T) {
	hello := peerHello("DEALER")
	c, peer, _, err := guarded(t, hello)
	if err != nil {
		t.Fatal(err)
	}
	if n, err := c.Write(make([]byte, greetingSize)); err != nil || n != greetingSize {
		t.Errorf("the library's greeting: %d %v", n, err)
	}
	got := make([]byte, len(hello))
	if _, err := io.ReadFull(c, got); err != nil || !bytes.Equal(got, hello) {
		t.Errorf("the library reads %q, %v, want what the peer said", got, err)
	}
	// A message in pieces arrives at once; nothing of the second greeting does.
	for _, piece := range [][]byte{{1, 2}, {'a', 'b'}, {0}, {1}, {'c'}} {
		if _, err := c.Write(piece); err != nil {
			t.Fatal(err)
		}
	}
	buf := make([]byte, 32)
	if err := peer.SetReadDeadline(time.Now().Add(5 * time.Second)); err != nil {
		t.Fatal(err)
	}
	if n, err := peer.Read(buf); err != nil || string(buf[:n]) != "\x01\x02ab\x00\x01c" {
		t.Errorf("the peer reads %q, %v", buf[:n], err)
	}
}

func TestGuardRefuses(t *testing.T) {
	good := peerHello("DEALER")
	change := func(at int, b byte) []byte { c := bytes.Clone(good); c[at] = b; return c }
	for name, c := range map[string]struct {
		hello []byte
		want  string
	}{
		"HTTP":            {append([]byte("GET / HTTP/1.1\r\n"), good...), "not a ZeroMQ peer"},
		"old version":     {change(10, 2), "ZMTP version"},
		"mechanism":       {change(12, 'X'), "mechanism"},
		"as-server":       {change(32, 7), "mechanism"},
		"no command":      {change(64, 0), "no command"},
		"not READY":       {change(67, 'X'), "not READY"},
		"property":        {change(72, 250), "cut off"},
		"value":           {change(84, 250), "cut off"},
		"socket type":     {peerHello("PUSH"), "socket of type"},
		"no socket type":  {change(73, 'X'), "socket of type"},
		"another's place": {peerHello("SUB"), "socket of type"},
	} {
		if _, _, _, err := guarded(t, c.hello); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want a refusal about %q", name, err, c.want)
		}
	}
}

func TestGuardEndsAConnectionWithAFrameTooLong(t *testing.T) {
	c, peer, drops, err := guarded(t, peerHello("DEALER"))
	if err != nil {
		t.Fatal(err)
	}
	go func() { _, _ = peer.Write([]byte{2, 0x7f, 0, 0, 0, 0, 0, 0, 0}) }()
	if _, err := io.ReadFull(c, make([]byte, len(peerHello("DEALER"))+9)); !errors.Is(err, io.EOF) && !errors.Is(err, io.ErrUnexpectedEOF) {
		t.Errorf("reading on: %v", err)
	}
	if len(*drops) != 1 {
		t.Errorf("counted: %v", *drops)
	}
}

func TestGuardSendsNoFrameTooLong(t *testing.T) {
	c, peer, drops, err := guarded(t, peerHello("DEALER"))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := c.Write(make([]byte, greetingSize)); err != nil {
		t.Fatal(err)
	}
	for range 2 { // the second time it is closed
		if _, err := c.Write([]byte{2, 0x7f, 0, 0, 0, 0, 0, 0, 0}); !errors.Is(err, io.EOF) {
			t.Errorf("a frame of 2^63 bytes: %v, want the error that makes the library forget the connection", err)
		}
	}
	if len(*drops) == 0 {
		t.Error("not counted")
	}
	if _, err := peer.Read(make([]byte, 1)); !errors.Is(err, io.EOF) {
		t.Errorf("the peer reads %v", err)
	}
}
