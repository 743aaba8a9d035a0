package lab

import (
	"fmt"

	"example.org/guardring/pkg/cell"
)

// fail ends the cell with err; a nil err does nothing.
func fail(err error) { cell.Fail(err) }

// failf ends the cell with a sentence.
func failf(format string, a ...any) { cell.Fail(fmt.Errorf(format, a...)) }
