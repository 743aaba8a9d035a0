//go:build unix

package safefile

import (
	"errors"
	"os"
	"syscall"
)

// syncFolder flushes the folder's entries, so that the rename itself survives
// a loss of power. A file system that knows no such flush says EINVAL or
// ENOTSUP; the file's own content is on the disk by then.
func syncFolder(folder string) error {
	f, err := os.Open(folder)
	if err != nil {
		if errors.Is(err, os.ErrPermission) {
			return nil // a folder one may write to but not list can't be flushed
		}
		return err
	}
	err = f.Sync()
	if errors.Is(err, syscall.EINVAL) || errors.Is(err, syscall.ENOTSUP) {
		err = nil
	}
	return errors.Join(err, f.Close())
}

// lockFolder keeps other programs that call it out until unlock; the system
// unlocks when the program ends. File systems without such locks are let pass.
func lockFolder(folder string) (unlock func(), err error) {
	f, err := os.Open(folder)
	if err != nil {
		if errors.Is(err, os.ErrPermission) {
			return func() {}, nil // it can't be listed, so it can't be locked
		}
		return nil, err
	}
	for {
		err = syscall.Flock(int(f.Fd()), syscall.LOCK_EX)
		if !errors.Is(err, syscall.EINTR) {
			break
		}
	}
	if err != nil && !errors.Is(err, syscall.ENOTSUP) && !errors.Is(err, syscall.ENOLCK) && !errors.Is(err, syscall.EINVAL) {
		return nil, errors.Join(err, f.Close())
	}
	return func() { f.Close() }, nil
}

// chmodUnsupported reports whether the file system keeps no permissions (FAT
// and some network mounts), where there is nothing to set.
func chmodUnsupported(err error) bool {
	return errors.Is(err, syscall.ENOTSUP) || errors.Is(err, syscall.EPERM)
}
