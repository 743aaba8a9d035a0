package cell

import (
	"context"
	"errors"
)

// Stopped is the error of work that its context has ended: far says how far it
// came ("after 3 of 5 benches"), cause is what the context gives as its error, and
// is wrapped.
func Stopped(far string, cause error) error {
	why := "interrupted "
	if errors.Is(cause, context.DeadlineExceeded) {
		why = "out of time: stopped "
	} else if !errors.Is(cause, context.Canceled) {
		why = cause.Error() + ": stopped "
	}
	return &stopped{why + far, cause}
}

type stopped struct {
	text  string
	cause error
}

// Error says that the work was interrupted, and how far it came.
func (s *stopped) Error() string { return s.text }

// Unwrap returns the cause.
func (s *stopped) Unwrap() error { return s.cause }
