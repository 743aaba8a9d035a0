package gum_test

import (
	"encoding/json"
	"math"
	"os"
	"testing"
)

// reference reads the item of testdata/refs/FILE.json with the given id into item.
func reference(t testing.TB, file, id string, item any) {
	t.Helper()
	b, err := os.ReadFile("../../testdata/refs/" + file + ".json")
	if err != nil {
		t.Fatal(err)
	}
	var all []json.RawMessage
	if err := json.Unmarshal(b, &all); err != nil {
		t.Fatal(err)
	}
	for _, raw := range all {
		var head struct{ ID string }
		if err := json.Unmarshal(raw, &head); err != nil {
			t.Fatal(err)
		}
		if head.ID == id {
			if err := json.Unmarshal(raw, item); err != nil {
				t.Fatal(err)
			}
			return
		}
	}
	t.Fatalf("no item %s in %s", id, file)
}

// near reports a got that differs from want by more than tolerance.
func near(t testing.TB, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s is %.10g, want %.10g ± %.2g", what, got, want, tolerance)
	}
}
