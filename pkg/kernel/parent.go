package kernel

import (
	"errors"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"time"
)

// parentVariable is the variable of the environment by which Start tells a kernel
// the number of the process it belongs to: one that is killed while its kernel
// starts is gone before the kernel can look.
const parentVariable = "GUARDRING_KERNEL_PARENT"

// folderPattern names the folders that Start makes for connection files.
const folderPattern = "guardring-kernel-"

// Parent is the process that a kernel belongs to.
type Parent struct {
	pid  int // of what started this process; at most 1: nothing to watch
	told int // of the process that Start ran in; 0: something else started this kernel
}

// TakeParent finds the process that this one, a kernel, belongs to. It is called
// once, before any cell runs: what cells start does not belong to that process.
func TakeParent() Parent {
	told, _ := strconv.Atoi(os.Getenv(parentVariable))
	_ = os.Unsetenv(parentVariable)
	return Parent{pid: os.Getppid(), told: told}
}

// Await returns when the process is gone. Where there is none to watch, on systems
// that don't hand orphans on and where the parent is the first process of the
// system, it does not return.
func (p Parent) Await() {
	for {
		if p.pid > 1 && os.Getppid() != p.pid || p.told > 1 && gone(p.told) {
			return
		}
		time.Sleep(500 * time.Millisecond)
	}
}

// Clean removes the folder of a connection file, if Start made it for this kernel.
func (p Parent) Clean(connectionFile string) {
	if dir := filepath.Dir(connectionFile); p.told > 1 && strings.HasPrefix(filepath.Base(dir), folderPattern) {
		_ = os.RemoveAll(dir) // a file of ours in the system's temporary folder
	}
}

// gone reports whether there is no process of that number.
func gone(pid int) bool {
	p, err := os.FindProcess(pid)
	if err != nil {
		return true // on Windows
	}
	defer p.Release()
	err = p.Signal(syscall.Signal(0))
	return errors.Is(err, os.ErrProcessDone) || errors.Is(err, syscall.ESRCH)
}
