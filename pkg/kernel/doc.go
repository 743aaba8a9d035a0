// Package kernel is the notebook kernel: it answers a Jupyter front end over ZeroMQ, runs cells through an
// interpreter, and builds, installs, lists and removes itself as a kernel that Jupyter can start. It also holds the
// Client that starts a kernel and drives it, for tests and for running notebooks again.
//
// # How it is put together
//
// Decode and Encode are the wire: frames in, a checked Message out, or an error that is counted and otherwise
// ignored. Serve holds one goroutine a socket and a queue of shell requests; cells run one at a time on the goroutine
// that called Serve, while the control socket goes on answering. An Interpreter is all the package knows of the
// language: it runs code, can be interrupted, lists names and describes expressions. Completion, inspection and the
// judgement whether a cell is complete are written over it and tested with a small one. The real one is
// pkg/kernel/gointerp; cmd/guardring-kernel joins both with the sockets and renderers of gophernotes.
//
// # Protocol
//
// Jupyter messaging protocol 5.3 (https://jupyter-client.readthedocs.io/en/stable/messaging.html), ZMTP 3.0
// (https://rfc.zeromq.org/spec/23/). Positions count Unicode code points, as the protocol says.
//
// # What it refuses
//
// Only loopback addresses, only signed messages (HMAC-SHA256 with a key that is not empty), only connection files
// that nobody else can read. Connections that do not finish their handshake, frames over MaxMessage, messages that
// do not decode, signatures that are wrong or seen before, and queues over their bound are dropped and counted; the
// counts go to standard error, at most one line a second.
package kernel
