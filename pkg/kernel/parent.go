package kernel

import (
	"os"
	"time"
)

// ExitWithParent calls exit when the process that started this one is gone. It returns only if there is no parent to
// watch: on systems that don't hand orphans on, and where the parent is the first process of the system.
func ExitWithParent(exit func()) {
	parent := os.Getppid()
	if parent <= 1 {
		return
	}
	for {
		time.Sleep(500 * time.Millisecond)
		if os.Getppid() != parent {
			exit()
			return
		}
	}
}
