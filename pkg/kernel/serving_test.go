package kernel_test

import (
	"context"
	"fmt"
	"os"
	"testing"
	"time"

	"github.com/go-zeromq/zmq4"

	"example.org/guardring/pkg/kernel"
	"example.org/guardring/pkg/kernel/gointerp"
)

// asKernel, set in the environment, makes the test program a kernel that serves
// the connection file it is given.
const asKernel = "GUARDRING_TEST_AS_KERNEL"

func TestMain(m *testing.M) {
	if os.Getenv(asKernel) == "" {
		os.Exit(m.Run())
	}
	if err := serveFile(os.Args[1]); err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(2)
	}
}

// testLaunch starts the test program as a kernel.
func testLaunch() kernel.Launch {
	return kernel.Launch{Argv: []string{os.Args[0], "{connection_file}"}, Env: []string{asKernel + "=1", "GOROOT="}}
}

// serveFile serves a connection file with the interpreter and plain sockets.
func serveFile(path string) error {
	conn, err := kernel.ReadConnection(path)
	if err != nil {
		return err
	}
	parent := kernel.TakeParent()
	ctx := context.Background()
	s := kernel.Sockets{Shell: zmq4.NewRouter(ctx), Control: zmq4.NewRouter(ctx), Stdin: zmq4.NewRouter(ctx), IOPub: zmq4.NewPub(ctx), Heartbeat: zmq4.NewRep(ctx)}
	for socket, port := range map[kernel.Socket]int{s.Shell: conn.ShellPort, s.Control: conn.ControlPort, s.Stdin: conn.StdinPort, s.IOPub: conn.IOPubPort, s.Heartbeat: conn.HBPort} {
		if err := socket.(zmq4.Socket).Listen(fmt.Sprintf("tcp://%s:%d", conn.IP, port)); err != nil {
			return err
		}
	}
	in, err := gointerp.New(nil, nil)
	if err != nil {
		return err
	}
	server, err := kernel.NewServer(in, kernel.Config{Sockets: s, Key: []byte(conn.Key), Version: "test", Abandon: func() { os.Exit(0) }})
	if err != nil {
		return err
	}
	go func() {
		parent.Await()
		parent.Clean(path)
		os.Exit(0)
	}()
	if err := server.Serve(ctx); err != nil {
		return err
	}
	time.Sleep(100 * time.Millisecond) // the publishing socket sends from a queue of its own
	return nil
}
