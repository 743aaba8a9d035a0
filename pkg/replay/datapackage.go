package replay

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"path"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"unicode"

	"github.com/pelletier/go-toml/v2"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// The descriptor of a data package. Required (Data Package 1, "Metadata":
// resources, at least one; Data Resource 1: name of the characters a-z 0-9 . _ -
// and /, and path or data; Tabular Data Resource 1: also profile and schema; Table
// Schema 1: fields, at least one, each with a name): checkDataPackage checks all of
// them. unit is a property of our own, a UCUM code, as the specification allows.
type dataPackage struct {
	Name        string     `json:"name"`
	Title       string     `json:"title"`
	Description string     `json:"description"`
	Created     string     `json:"created,omitempty"`
	Profile     string     `json:"profile"`
	Licenses    []license  `json:"licenses,omitempty"`
	Resources   []resource `json:"resources"`
}

// license has a name or a path (Data Package 1, "licenses").
type license struct {
	Name string `json:"name,omitempty"`
	Path string `json:"path,omitempty"`
}

type resource struct {
	Name      string       `json:"name"`
	Path      string       `json:"path"`
	Profile   string       `json:"profile"`
	Format    string       `json:"format,omitempty"`
	MediaType string       `json:"mediatype,omitempty"`
	Encoding  string       `json:"encoding,omitempty"`
	Bytes     int          `json:"bytes"`
	Hash      string       `json:"hash"` // "sha256:" and hexadecimal digits (Data Resource 1, "hash")
	Dialect   *dialect     `json:"dialect,omitempty"`
	Schema    *tableSchema `json:"schema,omitempty"`
}

// dialect is how the CSV is written (CSV Dialect 1.2).
type dialect struct {
	Delimiter string `json:"delimiter"`
	Header    bool   `json:"header"`
}

type tableSchema struct {
	Fields        []field  `json:"fields"`
	MissingValues []string `json:"missingValues"`
	delimiter     string
}

type field struct {
	Name        string `json:"name"`
	Title       string `json:"title,omitempty"`
	Type        string `json:"type"`
	Format      string `json:"format,omitempty"`
	DecimalChar string `json:"decimalChar,omitempty"`
	Unit        string `json:"unit,omitempty"` // UCUM
}

const (
	plainProfile = "data-resource"
	tableProfile = "tabular-data-resource"
)

// resourceName is what a resource may be called.
var resourceName = regexp.MustCompile(`^[-a-z0-9._/]+$`)

// dataPackage writes the descriptor.
func (p *Package) dataPackage(s PackSettings) ([]byte, error) {
	d := dataPackage{Name: nameFrom(p.Title), Title: p.Title, Description: p.description(), Created: p.Date + "T00:00:00Z", Profile: "data-package"}
	if s.License != "" {
		l := license{Name: s.License}
		if isURL(s.License) {
			l = license{Path: s.License}
		}
		d.Licenses = []license{l}
	}
	taken := map[string]bool{}
	for _, f := range p.Files {
		r := resource{Name: nameFrom(f.Name), Path: f.Name, Profile: plainProfile, Format: strings.TrimPrefix(path.Ext(f.Name), "."),
			MediaType: mediaType(f.Name), Bytes: f.Bytes, Hash: "sha256:" + f.SHA256}
		for n := 2; taken[r.Name]; n++ {
			r.Name = nameFrom(f.Name) + "-" + strconv.Itoa(n)
		}
		taken[r.Name] = true
		if strings.HasPrefix(r.MediaType, "text/") || strings.HasSuffix(r.MediaType, "json") || strings.HasSuffix(r.MediaType, "toml") {
			r.Encoding = "utf-8"
		}
		if f.table != nil {
			r.Profile, r.Schema = tableProfile, f.table
			r.Dialect = &dialect{Delimiter: f.table.delimiter, Header: true}
		}
		d.Resources = append(d.Resources, r)
	}
	return indented(&d)
}

func isURL(s string) bool { return strings.HasPrefix(s, "https://") || strings.HasPrefix(s, "http://") }

// nameFrom makes a name of a resource.
func nameFrom(s string) string {
	var b strings.Builder
	dash := false
	for _, r := range strings.ToLower(s) {
		if r < unicode.MaxASCII && (unicode.IsLetter(r) || unicode.IsDigit(r) || r == '.' || r == '_' || r == '/') {
			b.WriteRune(r)
			dash = false
		} else if !dash && b.Len() > 0 {
			b.WriteByte('-')
			dash = true
		}
	}
	name := strings.TrimRight(b.String(), "-")
	if name == "" {
		return "file"
	}
	return name
}

// description says what the pack is, for both kinds of metadata.
func (p *Package) description() string {
	return "Inputs, results, checksums and module sums of: " + p.Title + ". Packed by guardring " + reduce.Version +
		"; `guardring replay` verifies the checksums, does the work again and compares the numbers."
}

// mediaType tells what a file is by its name.
func mediaType(name string) string {
	switch strings.ToLower(path.Ext(name)) {
	case ".csv":
		return "text/csv"
	case ".toml":
		return "application/toml"
	case ".json":
		return "application/json"
	case ".ipynb":
		return notebookType
	case ".md":
		return "text/markdown"
	case ".html":
		return "text/html"
	case ".svg":
		return "image/svg+xml"
	case ".png":
		return "image/png"
	case ".pdf":
		return "application/pdf"
	case ".xml":
		return "application/xml"
	case ".tex":
		return "application/x-tex"
	case ".txt", ".sum":
		return "text/plain"
	}
	if path.Base(name) == sumsFile {
		return "text/plain"
	}
	return "application/octet-stream"
}

// benchLayout is what bench.toml says of how its CSV files are written.
type benchLayout struct {
	Readings []struct {
		File      string   `toml:"file"`
		Separator string   `toml:"separator"`
		Decimal   string   `toml:"decimal"`
		Missing   []string `toml:"missing"`
	} `toml:"readings"`
	Rows map[string]any `toml:"rows"`
}

// tables gives the readings of a dataset their schemas.
func (g *gatherer) tables(p *Package, root, dir string, b *bench.Bench) error {
	rel, err := filepath.Rel(root, dir)
	if err != nil {
		return err
	}
	byName := map[string]*PackedFile{}
	for _, f := range p.Files {
		byName[f.Name] = f
	}
	at := func(name string) *PackedFile { return byName[path.Join(filepath.ToSlash(rel), name)] }
	file := at("bench.toml")
	if file == nil {
		return fmt.Errorf("%s: bench.toml is not in the pack", dir)
	}
	var layout benchLayout
	if err := toml.Unmarshal(file.data, &layout); err != nil {
		return fmt.Errorf("%s: %w", file.Name, err)
	}
	units := map[string]si.Unit{}
	titles := map[string]string{}
	for i := range b.Channels {
		units[b.Channels[i].Column], titles[b.Channels[i].Column] = b.Channels[i].Unit, b.Channels[i].Name
	}
	for i := range b.Ambient {
		units[b.Ambient[i].Column] = b.Ambient[i].Unit
	}
	for _, r := range layout.Readings {
		f := at(r.File)
		if f == nil {
			return fmt.Errorf("%s: %s is not in the pack", dir, r.File)
		}
		t := &tableSchema{MissingValues: append([]string{""}, r.Missing...)}
		time, _ := layout.Rows["time"].(string)
		if err := t.read(f.data, csvLayout{r.Separator, r.Decimal == "comma", time, false}, units, titles); err != nil {
			return fmt.Errorf("%s: %w", f.Name, err)
		}
		f.table = t
	}
	return nil
}

// otherTables gives schemas to the CSV files that no bench describes, from headers
// of the form NAME/UNIT. A file that is no table stays a plain resource.
func (p *Package) otherTables() {
	for _, f := range p.Files {
		if f.table != nil || !strings.EqualFold(path.Ext(f.Name), ".csv") {
			continue
		}
		t := &tableSchema{MissingValues: []string{""}}
		if err := t.read(f.data, csvLayout{numbers: true}, nil, nil); err == nil {
			f.table = t
		}
	}
}

// csvLayout is how a CSV file is written.
type csvLayout struct {
	separator string // comma, semicolon or tab; "": found from the header
	comma     bool   // decimal comma
	time      string // column of times
	numbers   bool   // a column of numbers without a unit is one of numbers, not of words
}

// read makes the schema of a CSV file.
func (t *tableSchema) read(data []byte, l csvLayout, units map[string]si.Unit, titles map[string]string) error {
	data = bytes.TrimPrefix(data, []byte("\ufeff"))
	head, _, _ := bytes.Cut(data, []byte("\n"))
	sep := map[string]byte{"comma": ',', "semicolon": ';', "tab": '\t'}[l.separator]
	if sep == 0 { // as bench finds it: the one that the header has most of
		sep = ','
		for _, c := range []byte{';', '\t'} {
			if bytes.Count(head, []byte{c}) > bytes.Count(head, []byte{sep}) {
				sep = c
			}
		}
	}
	t.delimiter = string(sep)
	r := csv.NewReader(bytes.NewReader(data))
	r.Comma, r.ReuseRecord, r.LazyQuotes = rune(sep), true, true
	header, err := r.Read()
	if err != nil {
		return err
	}
	seen := map[string]bool{}
	var open []int // columns whose type the cells tell
	for i, h := range header {
		h = strings.TrimSpace(h)
		if seen[h] || h == "" {
			return fmt.Errorf("column %d: %q is no name of its own", i+1, h)
		}
		seen[h] = true
		f := field{Name: h, Type: "string", Title: titles[h]}
		if u, ok := units[h]; ok {
			f.Type = "number"
			if f.Unit, err = u.UCUM(); err != nil {
				return fmt.Errorf("column %s: %w", h, err)
			}
		} else {
			open = append(open, i)
		}
		t.Fields = append(t.Fields, f)
	}
	numeric := make([]bool, len(header))
	for _, i := range open {
		numeric[i] = true
	}
	some := make([]bool, len(header))
	missing := map[string]bool{}
	for _, m := range t.MissingValues {
		missing[m] = true
	}
	for len(open) > 0 {
		rec, err := r.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return err
		}
		for _, i := range open {
			if i >= len(rec) || missing[strings.TrimSpace(rec[i])] {
				continue
			}
			cell := strings.TrimSpace(rec[i])
			if l.comma {
				cell = strings.Replace(cell, ",", ".", 1)
			}
			some[i] = true
			if _, err := strconv.ParseFloat(cell, 64); err != nil {
				numeric[i] = false
			}
		}
	}
	for _, i := range open {
		f := &t.Fields[i]
		name, unit, stated := strings.Cut(f.Name, "/")
		switch {
		case f.Name == l.time && some[i] && !numeric[i]:
			f.Type, f.Format = "datetime", "any" // RFC 3339
		case f.Name == l.time && some[i]:
			f.Type, f.Unit = "number", "s"
		case numeric[i] && some[i] && stated && name != "":
			if u, err := si.ParseUnit(strings.Trim(unit, "()")); err == nil {
				if code, err := u.UCUM(); err == nil {
					f.Type, f.Unit = "number", code
				}
			}
		case numeric[i] && some[i] && l.numbers:
			f.Type = "number"
		}
	}
	if l.comma {
		for i := range t.Fields {
			if t.Fields[i].Type == "number" {
				t.Fields[i].DecimalChar = ","
			}
		}
	}
	return nil
}
