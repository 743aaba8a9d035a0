package replay

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"strings"

	"example.org/guardring/pkg/kernel"
)

// The tags of cells that mean something here. A cell tagged raises-exception is
// meant to fail (nbformat 4.5, "Cell metadata").
const (
	tagSettings = "settings"
	tagUsed     = "settings-used"
	tagRaises   = "raises-exception"
)

// A Notebook is a notebook file of nbformat 4, read so that what is not changed is
// written back as it was: order of keys, unknown fields, spelling of numbers.
// (The Jupyter Notebook Format 4.5, https://nbformat.readthedocs.io.)
type Notebook struct {
	doc   *document
	minor int
	cells []*cellNode
}

// cellNode is one cell.
type cellNode struct {
	v      *value
	number int // from 1
	id     string
	kind   string // code, markdown, raw
	source string
	tags   []string
}

// ReadNotebook reads a notebook. Anything but nbformat 4 up to 4.5 is refused.
func ReadNotebook(data []byte) (*Notebook, error) {
	doc, err := parseDocument(data)
	if err != nil {
		return nil, err
	}
	root := doc.root
	if root.kind != object || root.get("nbformat") == nil {
		return nil, errors.New("this is no notebook: an object with nbformat, metadata and cells is due")
	}
	major, minor := root.get("nbformat").raw, root.get("nbformat_minor")
	if major != "4" || minor == nil || minor.kind != number {
		return nil, fmt.Errorf("notebook format %s: 4 with a nbformat_minor is due; convert the notebook first", major)
	}
	nb := &Notebook{doc: doc, minor: -1}
	for m := 0; m <= 5; m++ {
		if minor.raw == fmt.Sprint(m) {
			nb.minor = m
		}
	}
	if nb.minor < 0 {
		return nil, fmt.Errorf("notebook format 4.%s is not known here: up to 4.5 is; save the notebook in that format, or use a newer guardring", minor.raw)
	}
	if m := root.get("metadata"); m == nil || m.kind != object {
		return nil, errors.New("the notebook has no metadata object")
	}
	list := root.get("cells")
	if list == nil || list.kind != array {
		return nil, errors.New("the notebook has no list of cells")
	}
	ids := map[string]bool{}
	for i, v := range list.items {
		c, err := nb.cell(i+1, v)
		if err != nil {
			return nil, fmt.Errorf("cell %d: %w", i+1, err)
		}
		if c.id != "" && ids[c.id] {
			return nil, fmt.Errorf("cell %d: the id %q stands twice", i+1, c.id)
		}
		ids[c.id] = true
		nb.cells = append(nb.cells, c)
	}
	return nb, nil
}

// cell checks and wraps one cell.
func (nb *Notebook) cell(number int, v *value) (*cellNode, error) {
	c := &cellNode{v: v, number: number}
	var ok bool
	if c.kind, ok = v.get("cell_type").str(); !ok {
		return nil, errors.New("cell_type is missing")
	}
	switch c.kind {
	case "code", "markdown", "raw":
	default:
		return nil, fmt.Errorf("cell_type %q: code, markdown or raw is due", c.kind)
	}
	if c.source, ok = v.get("source").joined(); !ok {
		return nil, errors.New("source is missing, or neither a string nor a list of strings")
	}
	if c.id, ok = v.get("id").str(); !ok && nb.minor >= 5 {
		return nil, errors.New("id is missing, which nbformat 4.5 demands")
	}
	meta := v.get("metadata")
	if meta == nil || meta.kind != object {
		return nil, errors.New("metadata is missing")
	}
	if t := meta.get("tags"); t != nil {
		if t.kind != array {
			return nil, errors.New("metadata.tags is no list")
		}
		for _, x := range t.items {
			s, ok := x.str()
			if !ok {
				return nil, errors.New("metadata.tags holds something that is no string")
			}
			c.tags = append(c.tags, s)
		}
	}
	if c.kind == "code" {
		outs := v.get("outputs")
		if outs == nil || outs.kind != array {
			return nil, errors.New("outputs is missing")
		}
		for _, o := range outs.items {
			if _, ok := o.get("output_type").str(); !ok {
				return nil, errors.New("an output has no output_type")
			}
		}
	}
	return c, nil
}

// OpenNotebook reads a notebook file.
func OpenNotebook(path string) (*Notebook, error) {
	data, err := readBounded(path, maxDocument)
	if err != nil {
		return nil, err
	}
	nb, err := ReadNotebook(data)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return nb, nil
}

// readBounded reads an ordinary file of at most limit bytes.
func readBounded(path string, limit int64) ([]byte, error) {
	f, _, err := openFile(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	var b bytes.Buffer
	n, err := io.Copy(&b, io.LimitReader(f, limit+1))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if n > limit {
		return nil, fmt.Errorf("%s has more than %d bytes, the most that is read here", path, limit)
	}
	return b.Bytes(), nil
}

// openFile opens an ordinary file; opening a pipe would wait for a writer.
func openFile(path string) (*os.File, fs.FileInfo, error) {
	info, err := os.Stat(path)
	if err != nil {
		return nil, nil, err
	}
	if !info.Mode().IsRegular() {
		return nil, nil, fmt.Errorf("%s is not an ordinary file", path)
	}
	f, err := os.Open(path)
	if err != nil {
		return nil, nil, err
	}
	if info, err = f.Stat(); err != nil {
		f.Close()
		return nil, nil, err
	}
	return f, info, nil
}

// Bytes writes the notebook.
func (nb *Notebook) Bytes() []byte { return nb.doc.bytes() }

// ours reports an error for a notebook of another kernel.
func (nb *Notebook) ours() error {
	spec := nb.doc.root.get("metadata").get("kernelspec")
	name, ok := spec.get("name").str()
	if !ok {
		return fmt.Errorf("the notebook does not say which kernel it is for; %q is due in metadata.kernelspec.name", kernel.KernelName)
	}
	if name != kernel.KernelName {
		return fmt.Errorf("the notebook is for the kernel %q; only those for %q are run here", name, kernel.KernelName)
	}
	return nil
}

func (c *cellNode) tagged(tag string) bool {
	for _, t := range c.tags {
		if t == tag {
			return true
		}
	}
	return false
}

// place names the cell in messages.
func (c *cellNode) place() string {
	if c.id != "" {
		return fmt.Sprintf("cell %d %q", c.number, c.id)
	}
	return fmt.Sprintf("cell %d", c.number)
}

// outputs are the stored outputs of a code cell.
func (c *cellNode) outputs() []*value {
	if o := c.v.get("outputs"); o != nil {
		return o.items
	}
	return nil
}

// blank reports whether there is nothing to run.
func (c *cellNode) blank() bool { return strings.TrimSpace(c.source) == "" }

// copyNotebook returns a notebook that shares nothing with nb.
func (nb *Notebook) copyNotebook() (*Notebook, error) { return ReadNotebook(nb.Bytes()) }
