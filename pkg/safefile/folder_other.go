//go:build !unix

package safefile

import "errors"

// syncFolder does nothing where folders can't be flushed: on Windows the
// rename is journalled by the file system.
func syncFolder(string) error { return nil }

// lockFolder does nothing where folders can't be locked.
func lockFolder(string) (unlock func(), err error) { return func() {}, nil }

// chmodUnsupported reports whether the system keeps no such permissions:
// Windows has none for an open file.
func chmodUnsupported(err error) bool {
	return errors.Is(err, errors.ErrUnsupported)
}
