package certificate

import (
	"fmt"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
)

// TestLongTexts: nothing runs off a page, whatever the length of what is stated;
// every word stands in the page once.
func TestLongTexts(t *testing.T) {
	long := func(tag string, n int) string {
		var w []string
		for i := range n {
			w = append(w, fmt.Sprintf("%s%d", tag, i))
		}
		return strings.Join(w, " ")
	}
	for name, change := range map[string]func(b *bench.Bench) string{
		"a remark of three pages": func(b *bench.Bench) string {
			b.Work.Remarks = []string{long("remark", 2500)}
			return b.Work.Remarks[0]
		},
		"a method of two pages": func(b *bench.Bench) string {
			b.Work.Method = long("method", 1500)
			return b.Work.Method
		},
		"traceability of two pages": func(b *bench.Bench) string {
			b.Work.Traceability = long("chain", 1800)
			return b.Work.Traceability
		},
		"four facts of half a page": func(b *bench.Bench) string {
			c := &b.Client
			c.Name, c.Address, c.Contact, c.Reference = long("name", 300), long("address", 300), long("contact", 300), long("order", 300)
			return c.Name + " " + c.Address + " " + c.Contact + " " + c.Reference
		},
		"twelve instruments of many lines": func(b *bench.Bench) string {
			var all []string
			in := b.Instruments[0]
			b.Instruments = nil
			for i := range 12 {
				in.Description = long(fmt.Sprintf("instrument%d-", i), 12)
				b.Instruments = append(b.Instruments, in)
				all = append(all, in.Description)
			}
			return strings.Join(all, " ")
		},
		"an instrument of two pages": func(b *bench.Bench) string {
			b.Instruments[0].Description = long("instrument", 900)
			return b.Instruments[0].Description
		},
	} {
		r := result(t, "field-meter")
		stated := change(r.Bench)
		c := made(t, r)
		for i, p := range c.pages() {
			h := 0.0
			for _, a := range p {
				h += a.height
			}
			if h > bodyBottom-bodyTop {
				t.Errorf("%s: page %d is %.1f points high; %.1f fit", name, i+1, h, bodyBottom-bodyTop)
			}
		}
		page := text(written(t, c, (*Certificate).HTML))
		count := map[string]int{}
		for _, w := range strings.FieldsFunc(page, func(r rune) bool { return r == ' ' || r == '|' || r == '\n' }) {
			count[w]++
		}
		for _, w := range strings.Fields(stated) {
			if count[w] != 1 {
				t.Fatalf("%s: %q stands %d times on the certificate", name, w, count[w])
			}
		}
		written(t, c, (*Certificate).PDF)
	}
}
