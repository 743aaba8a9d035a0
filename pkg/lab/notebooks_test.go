package lab

import (
	"bytes"
	"encoding/json"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// notebook is what of nbformat 4.5 the test looks at.
type notebook struct {
	Format   int `json:"nbformat"`
	Minor    int `json:"nbformat_minor"`
	Metadata struct {
		Kernelspec struct {
			Name     string `json:"name"`
			Display  string `json:"display_name"`
			Language string `json:"language"`
		} `json:"kernelspec"`
		Language map[string]any `json:"language_info"`
	} `json:"metadata"`
	Cells []struct {
		ID       string          `json:"id"`
		Type     string          `json:"cell_type"`
		Source   json.RawMessage `json:"source"`
		Count    *int            `json:"execution_count"`
		Metadata map[string]any  `json:"metadata"`
		Outputs  []struct {
			Type     string                     `json:"output_type"`
			Count    *int                       `json:"execution_count"`
			Data     map[string]json.RawMessage `json:"data"`
			Metadata map[string]any             `json:"metadata"`
			Name     string                     `json:"name"`
		} `json:"outputs"`
	} `json:"cells"`
}

const mostNotebook = 500 << 10 // bytes, so that a diff can be read and a pack be sent

// Every notebook is executed, ordered, without times, and of a size to send.
func TestNotebooks(t *testing.T) {
	files, err := filepath.Glob("../../notebooks/*.ipynb")
	if err != nil || len(files) == 0 {
		t.Fatal(files, err)
	}
	id := regexp.MustCompile(`^[a-z0-9-]{1,64}$`)
	stamp := regexp.MustCompile(`\d{4}-\d\d-\d\dT\d\d:\d\d`)
	for _, file := range files {
		t.Run(filepath.Base(file), func(t *testing.T) {
			data, err := os.ReadFile(file)
			if err != nil {
				t.Fatal(err)
			}
			if len(data) > mostNotebook {
				t.Errorf("%d bytes; at most %d are due", len(data), mostNotebook)
			}
			if !bytes.HasSuffix(data, []byte("}\n")) {
				t.Error("the file does not end with one line end")
			}
			if m := stamp.Find(data); m != nil {
				t.Errorf("holds a time stamp, %s", m)
			}
			for _, word := range []string{"/work/", "/tmp/", "/root/", "/home/", "0xc0"} {
				if bytes.Contains(data, []byte(word)) {
					t.Errorf("holds %q, which is of one machine or run", word)
				}
			}
			var n notebook
			if err := json.Unmarshal(data, &n); err != nil {
				t.Fatal(err)
			}
			if n.Format != 4 || n.Minor != 5 {
				t.Errorf("nbformat %d.%d", n.Format, n.Minor)
			}
			if k := n.Metadata.Kernelspec; k.Name != "guardring" || k.Display != "Guardring (Go)" || k.Language != "go" {
				t.Errorf("kernelspec %+v", k)
			}
			n.check(t, id)
		})
	}
}

func (n *notebook) check(t *testing.T, id *regexp.Regexp) {
	seen := map[string]bool{}
	settings, count, tables, records := 0, 0, 0, 0
	for _, c := range n.Cells {
		if !id.MatchString(c.ID) || seen[c.ID] {
			t.Errorf("cell id %q: a short name of its own is due", c.ID)
		}
		seen[c.ID] = true
		for key := range c.Metadata {
			if key != "tags" {
				t.Errorf("cell %s: metadata %q", c.ID, key)
			}
		}
		if tags, ok := c.Metadata["tags"].([]any); ok {
			for _, tag := range tags {
				if tag == "settings" {
					settings++
				}
			}
		}
		if c.Type != "code" {
			continue
		}
		count++
		if c.Count == nil || *c.Count != count {
			t.Errorf("cell %s: not executed in order", c.ID)
		}
		for _, o := range c.Outputs {
			if o.Type == "error" || o.Name == "stderr" {
				t.Errorf("cell %s: an %s output", c.ID, o.Type)
			}
			if o.Data != nil && o.Data["text/plain"] == nil {
				t.Errorf("cell %s: an output without text/plain", c.ID)
			}
			if len(o.Metadata) > 0 {
				t.Errorf("cell %s: metadata of an output", c.ID)
			}
			if o.Data["text/html"] != nil {
				tables++
			}
			if o.Data[ResultMIME] != nil {
				records++
			}
		}
	}
	if settings != 1 {
		t.Errorf("%d cells are tagged settings; one is due", settings)
	}
	if tables == 0 {
		t.Error("no table and no figure")
	}
	if records == 0 {
		t.Error("no record that a replay could compare")
	}
	last := n.Cells[len(n.Cells)-1]
	if last.Type != "code" || !strings.Contains(string(last.Source), "lab.Provenance(") {
		t.Errorf("the last cell, %s, does not say where the numbers come from", last.ID)
	}
	for _, o := range last.Outputs {
		text := string(o.Data["text/plain"])
		for _, want := range []string{"guardring", "go1.", "SHA-256", "seed", "gonum.org/v1/gonum", "h1:"} {
			if !strings.Contains(text, want) {
				t.Errorf("the last cell does not tell %q", want)
			}
		}
	}
}
