package main

import (
	"encoding/json"
	"errors"
	"io"
	"os/exec"
	"strings"
	"testing"
)

// floors is the order of the packages; an import must go to a lower number.
var floors = map[string]int{
	"pkg/cell": 0, "pkg/safefile": 0, "datasets": 0,
	"pkg/si": 1, "pkg/random": 1, "pkg/jet": 1,
	"pkg/field": 2, "pkg/lsq": 2, "pkg/gum": 2, "pkg/formula": 2,
	"pkg/model":       3,
	"pkg/bench":       4,
	"pkg/reduce":      5,
	"pkg/plan":        6,
	"pkg/assess":      6,
	"pkg/figure":      7,
	"pkg/report":      8,
	"pkg/certificate": 9, "pkg/kernel/docindex": 9,
	"pkg/lab":            10,
	"pkg/kernel":         10,
	"pkg/replay":         11,
	"pkg/kernel/symbols": 11, "pkg/kernel/gointerp": 11,
	"cmd/guardring": 12, "cmd/guardring-kernel": 12,
}

// TestImportsGoDown holds the rule of the house: packages import lower floors
// only.
func TestImportsGoDown(t *testing.T) {
	const module = "example.org/guardring/"
	out, err := exec.Command("go", "list", "-json=ImportPath,Imports", module+"...").Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	dec := json.NewDecoder(strings.NewReader(string(out)))
	seen := 0
	for {
		var p struct {
			ImportPath string
			Imports    []string
		}
		if err := dec.Decode(&p); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			t.Fatal(err)
		}
		from := strings.TrimPrefix(p.ImportPath, module)
		floor, known := floors[from]
		if !known {
			if strings.Contains(from, "/internal/") {
				continue // a package's own business
			}
			t.Errorf("%s has no floor: add it to the table here and to the design", from)
			continue
		}
		seen++
		for _, imp := range p.Imports {
			to, ours := strings.CutPrefix(imp, module)
			if !ours || strings.Contains(to, "/internal/") {
				continue
			}
			if f, ok := floors[to]; !ok || f >= floor {
				t.Errorf("%s (floor %d) imports %s (floor %d)", from, floor, to, f)
			}
		}
	}
	if seen != len(floors) {
		t.Errorf("go list showed %d packages of the %d in the table; the table names some that there are not", seen, len(floors))
	}
}
