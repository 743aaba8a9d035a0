package bench

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/model"
)

// Starter returns a commented bench file with every key that the kind takes,
// and the header line of a readings file that fits it. Keys that must be there
// are active, with placeholders that make a valid file; those that may be there
// are commented out: "#key" is a key that is off, "# text" is a comment.
func Starter(kind *model.Kind) (benchTOML, csvHeader []byte) {
	s := starter{kind: kind}
	s.write()
	return s.out.Bytes(), s.header()
}

type starter struct {
	kind *model.Kind
	out  bytes.Buffer
}

// response is the response that the starter takes: the first that the kind
// offers.
func (s *starter) response() string {
	for i := range s.kind.Channels {
		if s.kind.Channels[i].Role == model.Response {
			return s.kind.Channels[i].Name
		}
	}
	return ""
}

// active reports whether the starter gives a channel.
func (s *starter) active(k *model.Channel) bool {
	if k.Role == model.Response {
		return k.Name == s.response()
	}
	return !k.Optional
}

func columnName(k *model.Channel) string {
	if k.Unit.Dim.IsOne() && k.Unit.Symbol == "1" {
		return k.Name
	}
	return k.Name + "/" + k.Unit.ASCII()
}

func (s *starter) header() []byte {
	cells := []string{"t", "kind", "setting"}
	for i := range s.kind.Channels {
		if k := &s.kind.Channels[i]; s.active(k) {
			cells = append(cells, columnName(k))
		}
	}
	var b bytes.Buffer
	w := csv.NewWriter(&b)
	_ = w.Write(cells) // into memory: can't fail
	w.Flush()
	return b.Bytes()
}

func (s *starter) printf(format string, a ...any) { fmt.Fprintf(&s.out, format, a...) }

// comment writes text in lines of comments.
func (s *starter) comment(text string) {
	line := "#"
	for _, w := range strings.Fields(text) {
		if len(line)+1+len(w) > 100 && line != "#" {
			s.printf("%s\n", line)
			line = "#"
		}
		line += " " + w
	}
	s.printf("%s\n", line)
}

// key writes one key with its comment.
func (s *starter) key(on bool, name, value, doc string) {
	line := name + " = " + value
	if !on {
		line = "#" + line
	}
	if doc != "" {
		line = fmt.Sprintf("%-56s # %s", line, doc)
	}
	s.printf("%s\n", line)
}

// title writes the head of a table.
func (s *starter) title(on bool, head, doc string) {
	if !on {
		head = "#" + head
	}
	if doc != "" {
		head = fmt.Sprintf("%-56s # %s", head, doc)
	}
	s.printf("\n%s\n", head)
}

func (s *starter) write() {
	s.comment(s.kind.Title + ". " + s.kind.Doc)
	s.comment("Values are placeholders: put your own in. Keys behind # are optional.")
	for _, k := range table(benchDoc, "").keys {
		value := k.example
		switch k.name {
		case "model":
			value = strconv.Quote(s.kind.Name)
		case "title":
			value = strconv.Quote(s.kind.Title)
		}
		s.key(k.name != "method", k.name, value, k.doc)
	}
	s.options("")

	done := map[string]bool{"": true}
	for _, t := range benchDoc {
		done[t.path] = true
		switch t.path {
		case "", "channels.*.grouped[]":
		case "readings[]", "correlations[]", "exclude[]":
			head := "[[" + strings.TrimSuffix(t.path, "[]") + "]]"
			on := t.path == "readings[]"
			s.title(on, head, t.doc)
			for _, k := range t.keys {
				if k.name == "between" {
					k.example = s.between()
				}
				s.key(on && k.name == "file", k.name, k.example, k.doc)
			}
		case "rows":
			s.title(true, "[rows]", t.doc)
			for _, k := range t.keys {
				s.key(k.name == "time" || k.name == "kind" || k.name == "setting", k.name, k.example, k.doc)
			}
		case "channels.*":
			s.channels(&t)
		case "quantities":
			s.printf("\n")
			s.comment("A quantity is a text with its unit, or a table of these keys:")
			for _, k := range quantityDoc.keys {
				s.printf("#   %-20s %s\n", k.name, k.doc)
			}
			s.table(&t, true)
		case "corrections.*":
			s.corrections()
			s.others(done)
		case "environment":
			s.printf("\n")
			s.comment("A quantity of [environment] may also come from a column of the readings, by these keys:")
			for _, k := range columnDoc.keys {
				s.printf("#   %-20s %s\n", k.name, k.doc)
			}
			s.table(&t, false)
		case "instruments.*":
			s.title(false, "[instruments.NAME]", t.doc)
			for _, k := range t.keys {
				s.key(false, k.name, k.example, k.doc)
			}
		default:
			s.table(&t, false)
		}
	}
}

// between names two inputs of the kind.
func (s *starter) between() string {
	var names []string
	for i := range s.kind.Scalars {
		if k := &s.kind.Scalars[i]; !k.Sought && len(names) == 0 {
			names = append(names, k.Key())
		}
	}
	for i := range s.kind.Channels {
		if k := &s.kind.Channels[i]; len(names) < 2 {
			names = append(names, "channels."+k.Name+".gain")
		}
	}
	return fmt.Sprintf("[%q, %q]", names[0], names[min(1, len(names)-1)])
}

// others writes the tables that only the kind has.
func (s *starter) others(done map[string]bool) {
	for _, t := range benchDoc {
		done[t.path] = true
	}
	for _, name := range s.kindTables() {
		if !done[name] && !strings.HasPrefix(name, "corrections.") {
			done[name] = true
			s.table(&tableDoc{path: name}, false)
		}
	}
}

// kindTables lists the tables that the kind's scalars and options stand in.
func (s *starter) kindTables() []string {
	var names []string
	add := func(name string) {
		if !slices.Contains(names, name) {
			names = append(names, name)
		}
	}
	for i := range s.kind.Scalars {
		add(s.kind.Scalars[i].Table)
	}
	for i := range s.kind.Options {
		if k := strings.LastIndexByte(s.kind.Options[i].Key, '.'); k >= 0 {
			add(s.kind.Options[i].Key[:k])
		}
	}
	return names
}

// optionsOf lists the options in one table.
func (s *starter) optionsOf(path string) []*model.Option {
	var out []*model.Option
	for i := range s.kind.Options {
		o := &s.kind.Options[i]
		k := strings.LastIndexByte(o.Key, '.')
		if k < 0 && path == "" || k >= 0 && o.Key[:k] == path {
			out = append(out, o)
		}
	}
	return out
}

func (s *starter) options(path string) {
	for _, o := range s.optionsOf(path) {
		value, doc := o.Default, o.Doc
		if value == "" && len(o.Values) > 0 {
			value = o.Values[0]
		}
		if value == "" {
			value = "(words)"
		}
		if len(o.Values) > 0 {
			doc += ": " + strings.Join(o.Values, ", ")
		}
		s.key(o.Default == "" && len(o.Values) > 0, o.Key[strings.LastIndexByte(o.Key, '.')+1:], strconv.Quote(value), doc)
	}
}

// table writes a table of the general list with what the kind adds to it.
func (s *starter) table(t *tableDoc, on bool) {
	options := s.optionsOf(t.path)
	own := map[string]bool{}
	for _, o := range options {
		own[o.Key[strings.LastIndexByte(o.Key, '.')+1:]] = true
		on = on || o.Default == "" && len(o.Values) > 0
	}
	for i := range s.kind.Scalars {
		if k := &s.kind.Scalars[i]; k.Table == t.path {
			own[k.Name] = true
			on = on || k.Required
		}
	}
	s.title(on, "["+t.path+"]", t.doc)
	s.options(t.path)
	for i := range s.kind.Scalars {
		if k := &s.kind.Scalars[i]; k.Table == t.path {
			s.scalar(k, k.Required)
		}
	}
	for _, k := range t.keys {
		if !own[k.name] {
			s.key(false, k.name, k.example, k.doc)
		}
	}
}

// scalar writes a quantity of the kind: its default where it has one.
func (s *starter) scalar(k *model.Scalar, on bool) {
	unit, delta := k.Unit.ASCII(), deltaSymbol(k.Unit)
	if unit == "1" {
		unit, delta = "", ""
	}
	quantity := func(x float64, u string) string {
		text := strconv.FormatFloat(x, 'g', 12, 64)
		if u == "" {
			return text
		}
		return strconv.Quote(text + " " + u)
	}
	d := k.Default
	value := ""
	switch {
	case k.Sought:
		value = fmt.Sprintf("{ start = %s }", quantity(1, unit))
	case k.Required || d.IsExact() && d.Value == 0:
		x := 0.0
		if k.Positive || k.Required {
			x = 1
		}
		value = fmt.Sprintf("{ value = %s, u = %s", quantity(x, unit), quantity(0.01, delta))
		if k.Adjustable {
			value += ", adjust = true"
		}
		value += " }"
	case d.IsExact():
		value = quantity(k.Unit.FromSI(d.Value), unit)
	case d.Shape == gum.ShapeNormal || d.Shape == gum.ShapeT || math.IsNaN(d.Half) || d.Half == 0:
		value = fmt.Sprintf("{ value = %s, u = %s }", quantity(k.Unit.FromSI(d.Value), unit), quantity(k.Unit.DeltaFromSI(d.U), delta))
	default:
		value = fmt.Sprintf("{ value = %s, half_width = %s, shape = %q }", quantity(k.Unit.FromSI(d.Value), unit), quantity(k.Unit.DeltaFromSI(d.Half), delta), d.Shape)
	}
	doc := k.Doc
	if k.Sought {
		doc += " (what the fit finds)"
	}
	s.key(on, k.Name, value, doc)
}

func (s *starter) corrections() {
	for i := range s.kind.Corrections {
		c := &s.kind.Corrections[i]
		s.title(true, "[corrections."+c.Name+"]", c.Doc)
		s.key(true, "use", strconv.FormatBool(c.Default), "")
		s.options("corrections." + c.Name)
		for j := range s.kind.Scalars {
			if k := &s.kind.Scalars[j]; k.Table == "corrections."+c.Name {
				s.scalar(k, k.Required && c.Default)
			}
		}
	}
}

func (s *starter) channels(t *tableDoc) {
	for i := range s.kind.Channels {
		k := &s.kind.Channels[i]
		on := s.active(k)
		s.title(on, "[channels."+k.Name+"]", k.Doc)
		unit, delta := k.Unit.ASCII(), deltaSymbol(k.Unit)
		small := func(text string) string {
			if unit == "1" {
				return text
			}
			return strconv.Quote(text + " " + delta)
		}
		for _, key := range t.keys {
			value, active := key.example, false
			switch key.name {
			case "column":
				value, active = strconv.Quote(columnName(k)), true
			case "unit":
				value, active = strconv.Quote(unit), true
			case "noise":
				value, active = small("0.001"), false
				if k.Role == model.Response {
					value, active = `"from-residuals"`, true
				}
			case "resolution":
				value = small("0.001")
			case "offset":
				value = fmt.Sprintf("{ value = %s, u = %s }", small("0"), small("0.001"))
			case "grouped":
				value = fmt.Sprintf(`[{ by = "setting", u = %s, dof = 8, source = "repeated settings" }]`, small("0.001"))
			}
			doc := key.doc
			if i > 0 && !active {
				doc = "" // said for the first channel
			}
			s.key(on && active, key.name, value, doc)
		}
	}
}
