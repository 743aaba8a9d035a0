//go:build !guardring_kernel

package main

import (
	"fmt"
	"os"
)

func main() {
	fmt.Fprintln(os.Stderr, "guardring-kernel: this build has no interpreter; `guardring kernel install` builds the kernel and makes it known to Jupyter")
	os.Exit(2)
}
