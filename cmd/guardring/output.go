package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/safefile"
)

// outFile is a file to be written.
type outFile struct {
	path string
	data []byte
}

// drawn adds figures to the files. Names that are the same but for signs that files
// can't have, for capitals, or beyond the length of a name are told apart by a number.
func drawn(files []outFile, dir string, all []*figure.Figure) ([]outFile, error) {
	taken := map[string]bool{}
	for _, f := range all {
		var b bytes.Buffer
		if err := f.WriteSVG(&b); err != nil {
			return nil, err
		}
		name := f.Name
		for n := 2; taken[strings.ToLower(name)]; n++ {
			name = fmt.Sprintf("%s-%d", f.Name, n)
		}
		taken[strings.ToLower(name)] = true
		files = append(files, outFile{filepath.Join(dir, name+".svg"), b.Bytes()})
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

// outputs are the endings of what the commands write.
var outputs = []string{"", ".html", ".htm", ".svg", ".pdf", ".xml", ".json", ".zip", ".ipynb", ".1"}

// replaceable returns an error when a file stands at path that no command can have
// written, such as readings or a bench: it would be lost.
func replaceable(path string) error {
	target, err := filepath.EvalSymlinks(path)
	if err != nil {
		return nil // nothing stands there, or writing will say what is wrong
	}
	if info, err := os.Stat(target); err != nil || !info.Mode().IsRegular() {
		return nil // likewise
	}
	if ending := strings.ToLower(filepath.Ext(target)); !slices.Contains(outputs, ending) {
		return fmt.Errorf("write %s: a file stands there that by its ending, %s, is no output of this program; choose another name, or remove it", path, ending)
	}
	return nil
}

// spareInputs returns an error when an output is one of the files that a command is
// given to read.
func spareInputs(cmd *cobra.Command, args []string) error {
	if f := cmd.Flags().Lookup("overwrite"); f != nil && f.Value.String() == "true" {
		return nil
	}
	for _, name := range []string{"html", "output", "figure"} {
		f := cmd.Flags().Lookup(name)
		if f == nil {
			continue
		}
		paths := []string{f.Value.String()}
		if list, ok := f.Value.(interface{ GetSlice() []string }); ok {
			paths = list.GetSlice()
		}
		for _, path := range paths {
			out, err := os.Stat(path)
			if err != nil || !out.Mode().IsRegular() {
				continue
			}
			for _, arg := range args {
				if in, err := os.Stat(arg); err == nil && os.SameFile(in, out) {
					return fmt.Errorf("--%s %s: the file is read by this command and would be lost; name another", name, path)
				}
			}
		}
	}
	return nil
}

// watched passes on what is written and keeps the first error, which printing
// does not report everywhere.
type watched struct {
	w   io.Writer
	err error
}

func (o *watched) Write(p []byte) (int, error) {
	n, err := o.w.Write(p)
	if err != nil && o.err == nil {
		o.err = err
	}
	return n, err
}

// writeFiles writes all files or none, each whole, making folders as needed.
func writeFiles(files []outFile) error {
	set := make([]safefile.File, len(files))
	for _, f := range files {
		if err := replaceable(f.path); err != nil {
			return err
		}
	}
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
