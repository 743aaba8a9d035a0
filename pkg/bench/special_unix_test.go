//go:build unix

package bench

import (
	"path/filepath"
	"syscall"
	"testing"
)

// TestPipesAreRefused: opening a named pipe would wait for ever.
func TestPipesAreRefused(t *testing.T) {
	dir := dataset(t, map[string]string{"bench.toml": goodBench})
	if err := syscall.Mkfifo(filepath.Join(dir, "readings.csv"), 0o600); err != nil {
		t.Skip("no named pipes here:", err)
	}
	_, err := OpenWith(testKind(), dir)
	wantError(t, err, "this is no regular file")
}
