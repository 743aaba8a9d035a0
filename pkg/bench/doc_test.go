package bench

import (
	"fmt"
	"os"
	"strings"
	"testing"
	"unicode/utf8"
)

// keyReference is the list of all keys as it stands in the package comment.
func keyReference() string {
	var b strings.Builder
	line := func(s string) { fmt.Fprintf(&b, "//\t%s\n", s) }
	wrap := func(name, doc string) {
		// The name, then the text in a column of its own.
		const at, most = 22, 100
		text := fmt.Sprintf("  %-*s", at-2, name)
		used := utf8.RuneCountInString(text)
		for _, w := range strings.Fields(doc) {
			if used+1+utf8.RuneCountInString(w) > most && used > at {
				line(text)
				text, used = strings.Repeat(" ", at), at
			}
			text += " " + w
			used += 1 + utf8.RuneCountInString(w)
		}
		line(strings.TrimRight(text, " "))
	}
	section := func(heading string, docs ...tableDoc) {
		fmt.Fprintf(&b, "//\n// # %s\n//\n", heading)
		for i, t := range docs {
			if i > 0 {
				b.WriteString("//\n")
			}
			head := t.doc
			if t.path != "" {
				name := strings.ReplaceAll(t.path, "*", "NAME")
				if array, ok := strings.CutSuffix(name, "[]"); ok {
					head = "[[" + array + "]] " + t.doc
				} else {
					head = "[" + name + "] " + t.doc
				}
			}
			line(head)
			for _, k := range t.keys {
				wrap(k.name, k.doc)
			}
		}
	}
	section("Keys of a bench file", benchDoc...)
	quantity, column := quantityDoc, columnDoc
	quantity.path, column.path = "", ""
	section("Keys of a quantity", quantity, column)
	section("Keys of a budget file", budgetDoc...)
	return b.String()
}

// TestPackageCommentHoldsEveryKey: what the decoder accepts is what the package
// comment says, word for word.
func TestPackageCommentHoldsEveryKey(t *testing.T) {
	doc, err := os.ReadFile("doc.go")
	if err != nil {
		t.Fatal(err)
	}
	want := keyReference()
	if strings.Contains(string(doc), want) {
		return
	}
	if err := os.WriteFile("testdata/keys.got", []byte(want), 0o644); err != nil {
		t.Fatal(err)
	}
	t.Error("doc.go does not hold the list of keys as in testdata/keys.got")
}

// TestEveryKeyIsRead gives every key of the general lists, one table at a time,
// and checks that the decoder has asked for it: no key is accepted and then
// ignored.
func TestEveryKeyIsRead(t *testing.T) {
	kind := testKind()
	for _, d := range benchDoc {
		for _, k := range d.keys {
			path := strings.TrimSuffix(d.path, "[]")
			if path != "" {
				path += "."
			}
			// As root of one table each, so that keys which exclude each other
			// do not meet.
			var b strings.Builder
			b.WriteString("format = 1\ntitle = \"x\"\nmodel = \"test-disc\"\n")
			head := strings.NewReplacer("channels.*", "channels.force", "instruments.*", "instruments.x", "corrections.*", "corrections.wedge").Replace(d.path)
			array := strings.HasSuffix(head, "[]")
			head = strings.TrimSuffix(head, "[]")
			switch {
			case d.path == "":
				if k.name == "format" || k.name == "title" || k.name == "model" {
					continue // read by all others
				}
			case d.path == "channels.*.grouped[]":
				b.WriteString("[channels.force]\n")
				head = "channels.force.grouped"
				fallthrough
			case array:
				fmt.Fprintf(&b, "[[%s]]\n", head)
			default:
				fmt.Fprintf(&b, "[%s]\n", head)
			}
			if k.name == "quality_reject" {
				b.WriteString("quality = \"q\"\n")
			}
			fmt.Fprintf(&b, "%s = %s\n", k.name, k.example)
			if d.path == "limits" && k.name != "unit" || d.path == "limits.population" {
				if d.path == "limits.population" {
					b.WriteString("[limits]\n")
				}
				b.WriteString("unit = \"1\"\n")
				if d.path == "limits" && k.name == "guard" {
					b.WriteString("rule = \"guard-band\"\n")
				}
			}
			root, err := document("bench.toml", []byte(b.String()))
			if err != nil {
				t.Fatalf("%s%s: %v\n%s", path, k.name, err, b.String())
			}
			l := &loader{reader: reader{file: "bench.toml", root: root, grammar: kindGrammar(kind)}, kind: kind, roles: map[string]string{"setting": "s"}}
			l.b = &Bench{Kind: kind, Options: map[string]string{}, Corrections: map[string]bool{}}
			if _, err := l.header(kind); err != nil {
				t.Fatal(err)
			}
			l.instruments()
			l.readings()
			l.rowColumns()
			l.options()
			l.channels()
			l.corrections()
			l.scalars()
			l.correlations()
			l.job()
			l.exclusions()
			var unread func(n *node) string
			unread = func(n *node) string {
				for _, name := range n.keys {
					f := n.fields[name]
					if !f.used && name == k.name {
						return f.path
					}
					if s := unread(f); s != "" {
						return s
					}
				}
				for _, e := range n.items {
					if s := unread(e); s != "" {
						return s
					}
				}
				return ""
			}
			if s := unread(root); s != "" {
				t.Errorf("%s is accepted but not read", s)
			}
		}
	}
}
