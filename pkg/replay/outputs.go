package replay

import (
	"fmt"
	"strings"

	"example.org/guardring/pkg/kernel"
	"example.org/guardring/pkg/lab"
)

// figureSlack is what the coordinates of a drawing may differ by, in its own unit
// of a point: they are written to a hundredth and round differently where
// processors fuse multiplication and addition.
const figureSlack = 0.02

// outputValue is an output of the kernel as a notebook stores it (nbformat 4.5,
// "Code cell outputs"), texts as lists of their lines.
func outputValue(o *kernel.Output, count int) (*value, error) {
	v := &value{kind: object}
	switch o.Type {
	case "stream":
		v.set("name", textValue(o.Name))
		v.set("output_type", textValue(o.Type))
		v.set("text", linesValue(o.Text))
		return v, nil
	case "error":
		v.set("ename", textValue(o.EName))
		v.set("evalue", textValue(o.EValue))
		v.set("output_type", textValue(o.Type))
		trace := &value{kind: array}
		for _, line := range o.Traceback {
			trace.items = append(trace.items, textValue(line))
		}
		v.set("traceback", trace)
		return v, nil
	}
	data, err := valueOf(orEmpty(o.Data))
	if err != nil {
		return nil, err
	}
	for i, m := range data.members {
		if s, ok := m.val.str(); ok && !strings.HasPrefix(m.key, "image/png") && !strings.HasPrefix(m.key, "image/jpeg") {
			data.members[i].val = linesValue(s)
		}
	}
	meta, err := valueOf(orEmpty(o.Metadata))
	if err != nil {
		return nil, err
	}
	v.set("data", data)
	v.set("metadata", meta)
	v.set("output_type", textValue(o.Type))
	if o.Type == "execute_result" {
		v.set("execution_count", intValue(count))
	}
	return v, nil
}

func orEmpty(m map[string]any) map[string]any {
	if m == nil {
		return map[string]any{}
	}
	return m
}

// compareCell compares what a cell gives with what was stored of it.
func (c *Comparison) compareCell(cell *cellNode, now []*value) {
	stored := cell.outputs()
	for i := 0; i < len(stored) || i < len(now); i++ {
		place := cell.place()
		if len(stored) > 1 || len(now) > 1 {
			place += fmt.Sprintf(", output %d", i+1)
		}
		switch {
		case i >= len(stored):
			c.words(place, "output", "(nothing)", shown(now[i]))
		case i >= len(now):
			c.words(place, "output", shown(stored[i]), "(nothing)")
		default:
			c.compareOutput(place, stored[i], now[i])
		}
	}
}

// shown tells what an output is.
func shown(o *value) string {
	if s, ok := o.get("text").joined(); ok {
		return strings.TrimSpace(s)
	}
	if s, ok := o.get("data").get("text/plain").joined(); ok {
		return strings.TrimSpace(s)
	}
	if s, ok := o.get("evalue").str(); ok {
		return s
	}
	s, _ := o.get("output_type").str()
	return s
}

func (c *Comparison) compareOutput(place string, stored, now *value) {
	a, _ := stored.get("output_type").str()
	b, _ := now.get("output_type").str()
	if a != b {
		c.words(place, "output", a, b)
		return
	}
	switch a {
	case "stream":
		x, _ := stored.get("name").str()
		y, _ := now.get("name").str()
		if x != y {
			c.words(place, "stream", x, y)
			return
		}
		c.texts(place, stored.get("text"), now.get("text"), 0)
	case "error":
		for _, key := range []string{"ename", "evalue"} {
			c.texts(place, stored.get(key), now.get(key), 0)
		}
	default:
		c.compareForms(place, stored.get("data"), now.get("data"))
	}
}

// compareForms compares the forms of one output: the record leaf by leaf, texts
// number by number. Forms that say the same as the record and the plain text are
// only looked at when those agree, so that one difference is told once.
func (c *Comparison) compareForms(place string, a, b *value) {
	if a == nil || b == nil || a.kind != object || b.kind != object {
		c.words(place, "output", spell(a), spell(b))
		return
	}
	before := c.Different
	both := func(mime string) bool { return a.get(mime) != nil && b.get(mime) != nil }
	for _, m := range a.members {
		if b.get(m.key) == nil {
			c.words(place, m.key, "stored", "(nothing)")
		}
	}
	for _, m := range b.members {
		if a.get(m.key) == nil {
			c.words(place, m.key, "(nothing)", "made")
		}
	}
	if both(lab.ResultMIME) {
		c.records(place, a.get(lab.ResultMIME), b.get(lab.ResultMIME))
	}
	if c.Different == before && both("text/plain") {
		c.texts(place, a.get("text/plain"), b.get("text/plain"), 0)
	}
	for _, m := range a.members {
		if !both(m.key) || m.key == lab.ResultMIME || m.key == "text/plain" || c.Different > before {
			continue
		}
		x, y := m.val, b.get(m.key)
		switch {
		case m.key == "image/svg+xml":
			c.texts(place+", "+m.key, x, y, figureSlack)
		case m.key == "text/html" && a.get("image/svg+xml") != nil:
			c.texts(place+", "+m.key, x, y, figureSlack) // a page with the drawing in it
		case strings.HasPrefix(m.key, "text/"):
			c.texts(place+", "+m.key, x, y, 0)
		case strings.HasPrefix(m.key, "image/") && a.get("image/svg+xml") != nil:
			s, _ := x.joined()
			t, _ := y.joined()
			if strings.TrimSpace(s) != strings.TrimSpace(t) {
				c.note("%s: the bytes of %s differ; its drawing was compared as image/svg+xml", place, m.key)
			}
		case strings.HasPrefix(m.key, "image/"):
			s, _ := x.joined()
			t, _ := y.joined()
			if strings.TrimSpace(s) == strings.TrimSpace(t) {
				c.Identical++
			} else {
				c.words(place, m.key, fmt.Sprintf("%d characters", len(s)), fmt.Sprintf("%d characters, not the same", len(t)))
			}
		case strings.HasSuffix(m.key, "json"):
			c.tree(treeAt{place: place, path: m.key}, x, y)
		default:
			c.texts(place+", "+m.key, x, y, 0)
		}
	}
}

func (c *Comparison) texts(place string, a, b *value, slack float64) {
	x, okX := a.joined()
	y, okY := b.joined()
	if !okX || !okY {
		c.tree(treeAt{place: place}, a, b)
		return
	}
	c.printed(place, x, y, slack)
}
