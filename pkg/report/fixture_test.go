package report

import (
	"encoding/json"
	"os"
	"testing"

	"example.org/guardring/pkg/reduce"
)

// fixture reads the invented reduction that the tests of package figure use.
func fixture(t testing.TB) *reduce.Record {
	t.Helper()
	b, err := os.ReadFile("../figure/testdata/record.json")
	if err != nil {
		t.Fatal(err)
	}
	rec := new(reduce.Record)
	if err := json.Unmarshal(b, rec); err != nil {
		t.Fatal(err)
	}
	return rec
}
