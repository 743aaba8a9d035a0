package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/safefile"
)

// outFile is a file to be written.
type outFile struct {
	path string
	data []byte
}

// drawn adds figures to the files.
func drawn(files []outFile, dir string, all []*figure.Figure) ([]outFile, error) {
	for _, f := range all {
		var b bytes.Buffer
		if err := f.WriteSVG(&b); err != nil {
			return nil, err
		}
		files = append(files, outFile{filepath.Join(dir, f.Name+".svg"), b.Bytes()})
	}
	return files, nil
}

// deliver writes the files and prints the record, or the text when there is no
// record to print. Text holds its warnings; beside a record they go to stderr.
func deliver(stdout, stderr io.Writer, files []outFile, record any, text func(io.Writer) error, warnings []string) error {
	var out bytes.Buffer
	say := func() error { return text(&out) }
	if record != nil {
		say = func() error { return writeJSON(&out, record) }
	}
	if err := say(); err != nil {
		return err
	}
	if err := writeFiles(files); err != nil {
		return err
	}
	if _, err := stdout.Write(out.Bytes()); err != nil {
		return err
	}
	if record != nil {
		for _, w := range warnings {
			fmt.Fprintf(stderr, "guardring: warning: %s\n", cell.Visible(w))
		}
	}
	return nil
}

// writeFiles writes all files or none, each whole, making folders as needed.
func writeFiles(files []outFile) error {
	set := make([]safefile.File, len(files))
	for i, f := range files {
		if dir := filepath.Dir(f.path); dir != "." {
			if err := os.MkdirAll(dir, 0o777); err != nil {
				return err
			}
		}
		set[i] = safefile.File{Path: f.path, Write: func(w io.Writer) error {
			_, err := w.Write(f.data)
			return err
		}}
	}
	return safefile.WriteSet(set)
}

// writeJSON prints a document with indentation and a final newline.
func writeJSON(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetIndent("", "  ")
	e.SetEscapeHTML(false)
	return e.Encode(v)
}
