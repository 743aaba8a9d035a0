package replay

import (
	"strings"
	"testing"
)

const small = `{"cells":[{"cell_type":"code","execution_count":1,"id":"settings","metadata":{"tags":["settings"]},"outputs":[],"source":["dataset := \"../x\"\n","seed, trials := uint64(0), 10000\n","const limit = 3\n","var note string"]},
{"cell_type":"code","execution_count":2,"id":"work","metadata":{"extra":{"kept":1.50}},"outputs":[],"source":"println(seed)"}],"metadata":{"kernelspec":{"name":"guardring"}},"nbformat":4,"nbformat_minor":5}`

func TestSettings(t *testing.T) {
	nb, err := ReadNotebook([]byte(small))
	if err != nil {
		t.Fatal(err)
	}
	set := []Assignment{{"seed", "7"}, {"dataset", "../other bench"}, {"note", `"said"`}}
	if err := nb.apply(set); err != nil {
		t.Fatal(err)
	}
	if len(nb.cells) != 3 || nb.cells[1].source != "seed = 7\ndataset = \"../other bench\"\nnote = \"said\"" ||
		!nb.cells[1].tagged("settings-used") || nb.cells[1].id != "settings-used" {
		t.Fatalf("%+v", nb.cells[1])
	}
	if !strings.Contains(string(nb.Bytes()), `"extra":{"kept":1.50}`) {
		t.Error("an unknown field was not kept")
	}
	// Set again, the cell is replaced.
	if err := nb.apply([]Assignment{{"trials", "5"}}); err != nil {
		t.Fatal(err)
	}
	if len(nb.cells) != 3 || nb.cells[1].source != "trials = 5" || nb.cells[1].id != "settings-used" {
		t.Fatalf("%d cells, %+v", len(nb.cells), nb.cells[1])
	}
}

func TestBadSettings(t *testing.T) {
	for _, c := range []struct {
		set  Assignment
		old  string
		with string
		want string
	}{
		{Assignment{"sed", "7"}, "", "", "did you mean seed?"},
		{Assignment{"nothing_like_it", "7"}, "", "", "there are: dataset, seed, trials"},
		{Assignment{"limit", "7"}, "", "", "constant"},
		{Assignment{"seed", "7 +"}, "", "", "no Go expression"},
		{Assignment{"seed", ""}, "", "", "no Go expression"},
		{Assignment{"seed", "1"}, `["settings"]`, `[]`, `no code cell is tagged "settings"`},
		{Assignment{"seed", "1"}, `{"extra":{"kept":1.50}}`, `{"tags":["settings"]}`, "both tagged"},
		{Assignment{"seed", "1"}, `var note string`, `var var`, "do not parse"},
	} {
		nb, err := ReadNotebook([]byte(strings.Replace(small, c.old, c.with, 1)))
		if err != nil {
			t.Fatal(err)
		}
		if err := nb.apply([]Assignment{c.set}); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v: %v, want %q", c.set, err, c.want)
		}
	}
	if _, err := ParseAssignment("7=x"); err == nil {
		t.Error("7 is taken for a name")
	}
	if _, err := ParseAssignment("x"); err == nil {
		t.Error("no = is missed")
	}
	if a, err := ParseAssignment("x = a=b"); err != nil || a != (Assignment{"x", "a=b"}) {
		t.Errorf("%v %v", a, err)
	}
}

func TestBadNotebooks(t *testing.T) {
	for _, c := range []struct{ in, want string }{
		{`[]`, "no notebook"},
		{`{"nbformat":3,"nbformat_minor":0,"metadata":{},"worksheets":[]}`, "4 with a nbformat_minor is due"},
		{`{"nbformat":4,"nbformat_minor":6,"metadata":{},"cells":[]}`, "up to 4.5"},
		{`{"nbformat":4,"nbformat_minor":5,"cells":[]}`, "no metadata"},
		{`{"nbformat":4,"nbformat_minor":5,"metadata":{}}`, "no list of cells"},
		{`{"nbformat":4,"nbformat_minor":5,"metadata":{},"cells":[{"cell_type":"code","metadata":{},"outputs":[],"source":""}]}`, "cell 1: id is missing"},
		{`{"nbformat":4,"nbformat_minor":5,"metadata":{},"cells":[{"cell_type":"heading","id":"a","metadata":{},"source":""}]}`, `cell_type "heading"`},
		{`{"nbformat":4,"nbformat_minor":5,"metadata":{},"cells":[{"cell_type":"code","id":"a","metadata":{},"source":""}]}`, "outputs is missing"},
		{`{"nbformat":4,"nbformat_minor":5,"metadata":{},"cells":[{"cell_type":"raw","id":"a","metadata":{},"source":7}]}`, "source is missing"},
		{`{"nbformat":4,"nbformat_minor":5,"metadata":{},"cells":[{"cell_type":"raw","id":"a","metadata":{},"source":""},{"cell_type":"raw","id":"a","metadata":{},"source":""}]}`, `"a" stands twice`},
		{`{"nbformat":4,"nbformat_minor":5,"metadata":{},"cells":[{"cell_type":"raw","id":"a","metadata":{"tags":[1]},"source":""}]}`, "no string"},
	} {
		if _, err := ReadNotebook([]byte(c.in)); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", c.in, err, c.want)
		}
	}
	for _, c := range []struct{ meta, want string }{
		{`{"kernelspec":{"name":"python3"}}`, `for the kernel "python3"`},
		{`{}`, "does not say which kernel"},
	} {
		nb, err := ReadNotebook([]byte(`{"nbformat":4,"nbformat_minor":5,"metadata":` + c.meta + `,"cells":[]}`))
		if err != nil {
			t.Fatal(err)
		}
		if err := nb.ours(); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v", c.meta, err)
		}
	}
}
