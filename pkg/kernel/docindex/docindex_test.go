package docindex_test

import (
	"encoding/json"
	"testing"
	"testing/fstest"

	"example.org/guardring/pkg/kernel/docindex"
)

func TestLookup(t *testing.T) {
	files := fstest.MapFS{}
	for _, p := range []docindex.Package{
		{Path: "lab/a", Entries: map[string]docindex.Entry{
			"F":     {Kind: "func", Decl: "func F()", Doc: "F does."},
			"T.Own": {Kind: "method", Decl: "func (T) Own()", From: "lab/a.base"},
			"T.Far": {Kind: "method", Decl: "func (T) Far()", From: "lab/b.B"},
			"T.Off": {Kind: "method", Decl: "func (T) Off()", From: "lab/none.B"},
		}},
		{Path: "lab/b", Entries: map[string]docindex.Entry{"B.Far": {Kind: "method", Doc: "Far is far."}}},
	} {
		data, err := json.Marshal(p)
		if err != nil {
			t.Fatal(err)
		}
		files[docindex.FileName(p.Path)] = &fstest.MapFile{Data: data}
	}
	files[docindex.FileName("lab/bad")] = &fstest.MapFile{Data: []byte("{")}
	x := docindex.New(files)
	for _, c := range []struct{ path, name, doc string }{
		{"lab/a", "F", "F does."}, {"lab/a", "T.Far", "Far is far."}, {"lab/a", "T.Own", ""}, {"lab/a", "T.Off", ""},
	} {
		if e, ok := x.Lookup(c.path, c.name); !ok || e.Doc != c.doc {
			t.Errorf("%s.%s: %+v %v, want %q", c.path, c.name, e, ok, c.doc)
		}
	}
	for _, c := range [][2]string{{"lab/a", "G"}, {"lab/none", "F"}, {"lab/bad", "F"}} {
		if e, ok := x.Lookup(c[0], c[1]); ok {
			t.Errorf("%s.%s: %+v", c[0], c[1], e)
		}
	}
	for _, path := range []string{"lab/bad", "lab/bad", "lab/none", "lab/none"} { // the second answer comes from memory
		if p, err := x.Package(path); err == nil || p != nil {
			t.Errorf("%s: %v %v", path, p, err)
		}
	}
}
