package bench

import (
	"unsafe"

	"golang.org/x/sys/unix"
)

// inLargePages asks the system to back a large column by large pages when it is
// first written: a million readings are some 2,000 small pages a column, each of
// them an interruption. It is a hint; nothing depends on its being heard.
func inLargePages(x []float64) {
	const least = 4 << 20 // bytes; two large pages on most machines
	if n := 8 * len(x); n >= least {
		_ = unix.Madvise(unsafe.Slice((*byte)(unsafe.Pointer(&x[0])), n), unix.MADV_HUGEPAGE)
	}
}
