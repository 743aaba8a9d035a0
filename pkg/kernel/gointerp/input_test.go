package gointerp

import (
	"context"
	"errors"
	"fmt"
	"testing"

	"example.org/guardring/pkg/cell"
)

// TestScanAsksLineByLine: scanning asks for a line when it needs one, keeps what is left
// of it, and ends with the cell.
func TestScanAsksLineByLine(t *testing.T) {
	lines := []string{"3 4", "five"}
	ctx, cancel := context.WithCancel(context.Background())
	defer cell.SetHost(&cell.Host{
		Context: func() context.Context { return ctx },
		Input: func(string, bool) (string, error) {
			if len(lines) == 0 {
				return "", ctx.Err()
			}
			line := lines[0]
			lines = lines[1:]
			return line, nil
		},
	})()
	in := new(cellInput)
	var a, b int
	var word string
	if _, err := fmt.Fscan(in, &a); err != nil || a != 3 || len(lines) != 1 {
		t.Errorf("%d, %v, %d lines left; want 3 of the first line", a, err, len(lines))
	}
	if _, err := fmt.Fscan(in, &b); err != nil || b != 4 || len(lines) != 1 {
		t.Errorf("%d, %v, %d lines left; want 4 of the same line", b, err, len(lines))
	}
	if _, err := fmt.Fscan(in, &word); err != nil || word != "five" {
		t.Errorf("%q, %v", word, err)
	}
	cancel()
	for range 2 {
		if _, err := fmt.Fscan(in, &word); !errors.Is(err, context.Canceled) {
			t.Errorf("scanning in an interrupted cell: %v", err)
		}
	}
}
