package replay

import (
	"bytes"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// notebooks are those that stand in the tree and the fixtures.
func notebooks(t testing.TB) []string {
	t.Helper()
	var all []string
	for _, pattern := range []string{filepath.Join("testdata", "*.ipynb"), filepath.Join("..", "..", "notebooks", "*.ipynb"), filepath.Join("..", "..", ".ci", "*.ipynb")} {
		found, err := filepath.Glob(pattern)
		if err != nil {
			t.Fatal(err)
		}
		for _, f := range found {
			if !strings.HasSuffix(f, ".replayed.ipynb") {
				all = append(all, f)
			}
		}
	}
	if len(all) < 3 {
		t.Fatalf("only %d notebooks found", len(all))
	}
	return all
}

// TestNotebookBytes: what is read is written back byte for byte.
func TestNotebookBytes(t *testing.T) {
	for _, path := range notebooks(t) {
		data, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		nb, err := ReadNotebook(data)
		if err != nil {
			t.Errorf("%s: %v", path, err)
			continue
		}
		if got := nb.Bytes(); !bytes.Equal(got, data) {
			t.Errorf("%s: written back with other bytes", path)
		}
	}
}

func TestDocumentKeepsSpelling(t *testing.T) {
	for _, s := range []string{
		`{"b":1.0,"a":1e-05,"µ":"\u00b5 µ \/","x":{"y":[]},"z":{}}`,
		"{\n  \"b\": [\n    1.50,\n    \"two\\n\"\n  ],\n  \"a\": null\n}\n",
		"[]", "-0.0", "true\n", "{\n\t\"a\": 12345678901234567890\n}",
	} {
		d, err := parseDocument([]byte(s))
		if err != nil {
			t.Fatalf("%s: %v", s, err)
		}
		if got := string(d.bytes()); got != s {
			t.Errorf("%q became %q", s, got)
		}
	}
}

// TestBadDocuments: RFC 8259 and the bounds.
func TestBadDocuments(t *testing.T) {
	for _, c := range []struct{ in, want string }{
		{`{"a":1,"a":2}`, "stands twice"},
		{`{"a":1} x`, "more after the end"},
		{`{"a":`, "unexpected EOF"},
		{"{\n\"a\": tru}", "line 2, column"},
		{"\xff", "not UTF-8"},
		{strings.Repeat("[", 300) + strings.Repeat("]", 300), "deeper than"},
		{``, "unexpected EOF"},
		{`[1,]`, "line 1, column"},
	} {
		d, err := parseDocument([]byte(c.in))
		if err == nil || d != nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%.20q: %v, want %q", c.in, err, c.want)
		}
	}
}

func FuzzNotebook(f *testing.F) {
	for _, path := range notebooks(f) {
		data, err := os.ReadFile(path)
		if err != nil {
			f.Fatal(err)
		}
		if len(data) < 20_000 { // long seeds slow the search down and reach nothing new
			f.Add(data)
		}
	}
	f.Add([]byte(`{"cells":[],"metadata":{},"nbformat":4,"nbformat_minor":5}`))
	f.Add([]byte(`{"cells":[{"cell_type":"code","id":"a","metadata":{"tags":["settings"]},"outputs":[],"source":["x := 1\n","const y = \"\""]}],"metadata":{"kernelspec":{"name":"guardring"}},"nbformat":4,"nbformat_minor":5}`))
	f.Fuzz(func(t *testing.T, data []byte) {
		nb, err := ReadNotebook(data)
		if err != nil {
			if nb != nil {
				t.Fatal("a notebook came with an error")
			}
			return
		}
		once := nb.Bytes()
		again, err := ReadNotebook(once)
		if err != nil {
			t.Fatalf("what was written does not read: %v", err)
		}
		if twice := again.Bytes(); !bytes.Equal(once, twice) {
			t.Fatalf("written twice, two texts:\n%q\n%q", once, twice)
		}
		cmp, err := newComparison("x", 0)
		if err != nil {
			t.Fatal(err)
		}
		for _, c := range nb.cells {
			if c.kind == "code" {
				cmp.compareCell(c, c.outputs())
			}
		}
		if cmp.Different != 0 {
			t.Fatalf("outputs differ from themselves: %+v", cmp.Differences)
		}
		if err := nb.apply([]Assignment{{"x", "2"}}); err == nil {
			if _, err := ReadNotebook(nb.Bytes()); err != nil {
				t.Fatalf("with settings it does not read: %v", err)
			}
		}
	})
}
