package kernel

import (
	"strings"
	"testing"
)

func TestReleaseProgramPages(t *testing.T) {
	for range 3 {
		if err := ReleaseProgramPages(); err != nil {
			t.Fatal(err)
		}
		// Code and constants come back as they were.
		if got := strings.Join(keywords[:3], " "); got != "break case chan" {
			t.Fatalf("constants are %q afterwards", got)
		}
		TestDecode(t)
	}
}
