// Package gointerp is the kernel's Go: it makes the gomacro interpreter a kernel.Interpreter.
//
// What it adds to the interpreter: errors carry the cell and line they come from; an import that is not linked in is
// refused with the list of those that are, and nothing is downloaded; x := f() with f returning several values is an
// error of the cell; a last expression (T, error) fails the cell when the error is not nil; os.Exit, log.Fatal and
// runtime.Goexit end the cell and not the process; a panic in a goroutine that a cell started becomes a line on
// standard error; time.Sleep ends when the cell is interrupted; a cell that does not compile leaves no names behind,
// and one that fails leaves no variable it did not come to set.
package gointerp
