// Guardring-kernel is the notebook kernel that Jupyter starts with a connection file. It joins pkg/kernel and
// pkg/kernel/gointerp with the sockets and renderers of gophernotes.
//
// gophernotes is a command that nothing can import, so this one is built with its source files laid over this
// folder: `guardring kernel install` does that, with `go build -overlay` and the build tag guardring_kernel. Without
// the tag a stub takes its place that says so.
package main
