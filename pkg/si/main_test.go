package si

import (
	"flag"
	"fmt"
	"os"
	"testing"
)

// TestMain fixes the seed of the property tests, so that a run is as good as any
// other; -rapid.seed gives another.
func TestMain(m *testing.M) {
	if err := flag.Set("rapid.seed", "20260301"); err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(2)
	}
	flag.Parse()
	os.Exit(m.Run())
}
