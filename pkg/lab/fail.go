package lab

import (
	"errors"
	"fmt"
	"io/fs"
	"os"

	"example.org/guardring/pkg/cell"
)

// fail ends the cell with err; a nil err does nothing.
func fail(err error) { cell.Fail(err) }

// failf ends the cell with a sentence.
func failf(format string, a ...any) { cell.Fail(fmt.Errorf(format, a...)) }

// exists tells whether there is something of that name, or it can't be told.
func exists(path string) bool {
	_, err := os.Lstat(path)
	return !errors.Is(err, fs.ErrNotExist)
}
