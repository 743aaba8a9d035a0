package bench

import (
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"example.org/guardring/pkg/model"
)

// kindsUnderTest are all kinds there are, and the one of the tests.
func kindsUnderTest(t *testing.T) []*model.Kind {
	kinds := []*model.Kind{testKind()}
	for _, name := range model.Names() {
		k, err := model.Lookup(name)
		if err != nil {
			t.Fatal(err)
		}
		kinds = append(kinds, k)
	}
	return kinds
}

// TestStarterOpens writes the starter of every kind with two invented rows.
func TestStarterOpens(t *testing.T) {
	for _, k := range kindsUnderTest(t) {
		text, header := Starter(k)
		cells := strings.Split(strings.TrimSpace(string(header)), ",")
		csv := string(header)
		for i := range 2 {
			row := []string{fmt.Sprint(i), "reading", "1"}
			for len(row) < len(cells) {
				row = append(row, fmt.Sprint(1+0.1*float64(i)))
			}
			csv += strings.Join(row, ",") + "\n"
		}
		b, err := OpenWith(k, dataset(t, map[string]string{"bench.toml": string(text), "readings.csv": csv}))
		if err != nil {
			t.Errorf("%s: %v\n%s", k.Name, err, text)
			continue
		}
		if b.Rows.N != 2 || len(b.Warnings) != 0 {
			t.Errorf("%s: %d rows, warnings %v", k.Name, b.Rows.N, b.Warnings)
		}
	}
}

// TestStarterHasEveryKey switches all keys on and holds them to the grammar.
func TestStarterHasEveryKey(t *testing.T) {
	off := regexp.MustCompile(`(?m)^#([a-z0-9_\[])`)
	for _, k := range kindsUnderTest(t) {
		text, _ := Starter(k)
		all := off.ReplaceAllString(string(text), "$1")
		root, err := document("bench.toml", []byte(all))
		if err != nil {
			t.Errorf("%s: %v\n%s", k.Name, err, all)
			continue
		}
		r := reader{file: "bench.toml", root: root, grammar: kindGrammar(k)}
		r.check(root, r.grammar)
		if err := r.errs.err(); err != nil {
			t.Errorf("%s: %v", k.Name, err)
		}
		var lacking []string
		var walk func(n *node, g *grammar, path string)
		walk = func(n *node, g *grammar, path string) {
			for name, c := range g.children {
				f := n.fields[name]
				if f == nil {
					lacking = append(lacking, join(path, name))
					continue
				}
				for f.shape == isArray && c.array && len(f.items) > 0 {
					f = f.items[0]
				}
				if !c.leaf && !c.quantity {
					walk(f, c, join(path, name))
				}
			}
			if g.each != nil && n.fields["NAME"] != nil {
				walk(n.fields["NAME"], g.each, path+".NAME")
			}
		}
		walk(root, r.grammar, "")
		slices.Sort(lacking)
		if lacking != nil {
			t.Errorf("%s: the starter lacks %v", k.Name, lacking)
		}
		for _, d := range []tableDoc{quantityDoc, columnDoc} {
			for _, key := range d.keys {
				if !strings.Contains(string(text), "#   "+key.name+" ") {
					t.Errorf("%s: the starter does not tell of %s", k.Name, key.name)
				}
			}
		}
	}
}

// TestStarterIsShown keeps the starter of the kind of the tests as a file to
// look at.
func TestStarterIsShown(t *testing.T) {
	text, header := Starter(testKind())
	golden(t, "starter.toml", text)
	golden(t, "starter.csv", header)
}

func golden(t *testing.T, name string, got []byte) {
	t.Helper()
	path := filepath.Join("testdata", name)
	want, err := os.ReadFile(path)
	if err == nil && string(want) == string(got) {
		return
	}
	if err := os.MkdirAll("testdata", 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path+".got", got, 0o644); err != nil {
		t.Fatal(err)
	}
	t.Errorf("%s differs from %s.got: %v", path, path, err)
}
