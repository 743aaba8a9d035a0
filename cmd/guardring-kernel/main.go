//go:build guardring_kernel

package main

import (
	"context"
	"flag"
	"fmt"
	"io/fs"
	"os"
	"os/signal"
	"runtime/debug"
	"syscall"
	"time"

	"github.com/cosmos72/gomacro/xreflect"

	"example.org/guardring/pkg/kernel"
	"example.org/guardring/pkg/kernel/docindex"
	"example.org/guardring/pkg/kernel/gointerp"
	"example.org/guardring/pkg/kernel/symbols"
	"example.org/guardring/pkg/reduce"
)

// What the files of gophernotes expect their main file to define.
const (
	Version         = "0.7.5"
	ProtocolVersion = kernel.Protocol
)

func main() {
	flag.Usage = func() {
		fmt.Fprintln(flag.CommandLine.Output(), "usage: guardring-kernel CONNECTION-FILE")
	}
	flag.Parse()
	if flag.NArg() != 1 {
		flag.Usage()
		os.Exit(2)
	}
	if err := serve(flag.Arg(0)); err != nil {
		fmt.Fprintln(os.Stderr, "guardring-kernel:", err)
		os.Exit(2)
	}
}

func serve(path string) error {
	conn, err := kernel.ReadConnection(path)
	if err != nil {
		return err
	}
	parent := kernel.TakeParent()
	defer parent.Clean(path)
	leave := func() {
		parent.Clean(path)
		os.Exit(0)
	}
	stderr := os.Stderr // before cells get a stream of their own
	if err := kernel.RegisterGuardedTransport(conn, stderr); err != nil {
		return err
	}
	sockets, err := prepareSockets(ConnectionInfo{
		SignatureScheme: conn.SignatureScheme, Transport: kernel.GuardedTransport, IP: conn.IP, Key: conn.Key,
		StdinPort: conn.StdinPort, ControlPort: conn.ControlPort, IOPubPort: conn.IOPubPort, HBPort: conn.HBPort,
		ShellPort: conn.ShellPort,
	})
	if err != nil {
		return err
	}
	docs, err := fs.Sub(symbols.Docs, "docs")
	if err != nil {
		return err
	}
	in, err := gointerp.New(symbols.Linked, nil)
	if err != nil {
		return err
	}
	in.SetRender(renderer(in))
	server, err := kernel.NewServer(in, kernel.Config{
		Sockets: kernel.Sockets{
			Shell: sockets.ShellSocket.Socket, Control: sockets.ControlSocket.Socket, Stdin: sockets.StdinSocket.Socket,
			IOPub: sockets.IOPubSocket.Socket, Heartbeat: sockets.HBSocket.Socket,
		},
		Key: sockets.Key, Docs: docindex.New(docs), Version: reduce.Version, Stderr: stderr,
		Abandon: leave,
	})
	if err != nil {
		return err
	}
	interrupts := make(chan os.Signal, 1)
	signal.Notify(interrupts, os.Interrupt)
	go func() {
		for range interrupts {
			server.Interrupt()
		}
	}()
	ctx, stop := signal.NotifyContext(context.Background(), syscall.SIGTERM)
	defer stop()
	go func() {
		parent.Await()
		leave()
	}()
	if err := kernel.ReleaseProgramPages(); err != nil {
		fmt.Fprintln(stderr, "guardring-kernel: pages of the start stay in memory:", err)
	}
	debug.SetMaxStack(4 << 30) // room for gointerp to notice a recursion without an end
	if err := server.Serve(ctx); err != nil {
		return err
	}
	time.Sleep(100 * time.Millisecond) // the publishing socket sends from a queue of its own
	return nil
}

// renderer draws values that have forms of their own with the renderers of gophernotes, which know compiled types and
// types declared in cells.
func renderer(in *gointerp.Interp) gointerp.Render {
	k := &Kernel{ir: in.Interp(), display: importPackage(in.Interp(), "display", "display")}
	in.Interp().DeclVar("Display", nil, func(d Data) error { return kernel.ShowForms(d.Data) })
	k.initRenderers()
	return func(vals []any, types []xreflect.Type) (map[string]any, map[string]any) {
		if len(vals) != 1 || !k.canAutoRender(vals[0], types[0]) {
			return nil, nil
		}
		d := k.autoRenderResults(vals, types)
		if text, ok := d.Data[MIMETypeText].(string); !ok || text == "" {
			delete(d.Data, MIMETypeText)
		}
		return d.Data, d.Metadata
	}
}
