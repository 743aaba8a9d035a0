package replay

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"net/url"
	"os"
	"path/filepath"
	"slices"
	"strings"
)

// RunPack verifies a pack in a temporary folder, checks its metadata, and replays
// every notebook and record in it. The pack itself is only read.
func RunPack(ctx context.Context, zipPath string, s Settings) ([]*Comparison, error) {
	if s.Inputs != "" {
		return nil, fmt.Errorf("%s brings its own inputs; a folder of inputs is for single records", zipPath)
	}
	dir, err := os.MkdirTemp("", "guardring-pack-")
	if err != nil {
		return nil, err
	}
	defer os.RemoveAll(dir)
	names, err := Unpack(ctx, zipPath, dir)
	if err != nil {
		return nil, err
	}
	if err := checkMetadata(dir, names); err != nil {
		return nil, fmt.Errorf("%s: %w", zipPath, err)
	}
	var all []*Comparison
	for _, name := range names {
		full := filepath.Join(dir, filepath.FromSlash(name))
		var c *Comparison
		switch strings.ToLower(filepath.Ext(name)) {
		case ".ipynb":
			r, err := RunNotebook(ctx, full, s)
			if err != nil {
				return nil, unpackedError(zipPath, dir, err)
			}
			c = r.Comparison
		case ".json":
			data, err := readBounded(full, maxMember)
			if err != nil {
				return nil, unpackedError(zipPath, dir, err)
			}
			if !isRecord(data) {
				continue
			}
			own := s
			own.Set = nil // settings are the notebooks'
			if c, err = RunRecord(ctx, full, own); err != nil {
				return nil, unpackedError(zipPath, dir, err)
			}
		default:
			continue
		}
		c.File = zipPath + ": " + name
		all = append(all, c)
	}
	if len(all) == 0 {
		return nil, fmt.Errorf("%s: there is neither a notebook nor a record in it to replay", zipPath)
	}
	all[0].note("%d files unpacked, every SHA-256 as stated", len(names))
	if note := modulesNote(filepath.Join(dir, modulesFile)); note != "" {
		all[0].note("%s", note)
	}
	return all, nil
}

// packError is an error from inside a pack, told with the names of the pack.
type packError struct {
	text string
	err  error
}

func (e *packError) Error() string { return e.text }
func (e *packError) Unwrap() error { return e.err }

func unpackedError(zipPath, dir string, err error) error {
	return &packError{zipPath + ": " + strings.ReplaceAll(err.Error(), dir+string(filepath.Separator), ""), err}
}

// modulesNote tells modules that are not those of this program.
func modulesNote(file string) string {
	data, err := readBounded(file, 8<<20)
	if err != nil {
		return "the pack holds no go.sum"
	}
	ours, err := moduleSums()
	if err != nil || string(ours) == string(data) {
		return ""
	}
	have := map[string]bool{}
	for _, l := range strings.Split(string(ours), "\n") {
		have[l] = true
	}
	n := 0
	for _, l := range strings.Split(string(data), "\n") {
		if !have[l] {
			n++
		}
	}
	if n == 0 {
		return ""
	}
	return fmt.Sprintf("%d modules of the program that made the pack are not in this one, or in another version", n)
}

// checkMetadata checks that both kinds of metadata parse, hold what their
// specifications require, and name every file with its sum.
func checkMetadata(dir string, names []string) error {
	data, err := readBounded(filepath.Join(dir, sumsFile), 8<<20)
	if err != nil {
		return err
	}
	sums, err := parseSums(data)
	if err != nil {
		return err
	}
	has := func(n string) bool { return slices.Contains(names, n) }
	if !has(crateFile) || !has(packageFile) {
		return fmt.Errorf("%s and %s are due in a pack", crateFile, packageFile)
	}
	if data, err = readBounded(filepath.Join(dir, packageFile), maxDocument); err != nil {
		return err
	}
	if err := checkDataPackage(data, sums); err != nil {
		return fmt.Errorf("%s: %w", packageFile, err)
	}
	if data, err = readBounded(filepath.Join(dir, crateFile), maxDocument); err != nil {
		return err
	}
	if err := checkCrate(data, sums); err != nil {
		return fmt.Errorf("%s: %w", crateFile, err)
	}
	return nil
}

// checkDataPackage checks what is required of datapackage.json; see dataPackage.
// Every file but the metadata themselves must be a resource with its hash.
func checkDataPackage(data []byte, sums map[string]string) error {
	if _, err := parseDocument(data); err != nil {
		return err
	}
	var d dataPackage
	if err := json.Unmarshal(data, &d); err != nil {
		return err
	}
	if len(d.Resources) == 0 {
		return errors.New("resources is missing or empty")
	}
	left := map[string]bool{}
	for name := range sums {
		if name != packageFile && name != crateFile {
			left[name] = true
		}
	}
	seen := map[string]bool{}
	for i, r := range d.Resources {
		switch {
		case !resourceName.MatchString(r.Name):
			return fmt.Errorf("resource %d: the name %q is missing or not of a-z 0-9 . _ - /", i+1, r.Name)
		case seen[r.Name]:
			return fmt.Errorf("resource %d: the name %q stands twice", i+1, r.Name)
		case r.Path == "":
			return fmt.Errorf("resource %s has no path", r.Name)
		case !left[r.Path]:
			return fmt.Errorf("resource %s: %s is not in the pack, or named twice", r.Name, r.Path)
		case r.Hash != "sha256:"+sums[r.Path]:
			return fmt.Errorf("resource %s: the hash is not that of %s", r.Name, r.Path)
		}
		seen[r.Name] = true
		delete(left, r.Path)
		if r.Profile != tableProfile {
			continue
		}
		if r.Schema == nil || len(r.Schema.Fields) == 0 {
			return fmt.Errorf("resource %s: a table needs a schema with fields", r.Name)
		}
		for k, f := range r.Schema.Fields {
			if f.Name == "" {
				return fmt.Errorf("resource %s: field %d has no name", r.Name, k+1)
			}
		}
	}
	return nothingLeft(left)
}

func nothingLeft(left map[string]bool) error {
	var names []string
	for n := range left {
		names = append(names, n)
	}
	slices.Sort(names)
	if len(names) > 0 {
		return fmt.Errorf("it does not name %s", strings.Join(names, ", "))
	}
	return nil
}

// checkCrate checks what is required of ro-crate-metadata.json; see entity. Every
// file but itself must be a part of the root with its SHA-256.
func checkCrate(data []byte, sums map[string]string) error {
	doc, err := parseDocument(data)
	if err != nil {
		return err
	}
	graph := doc.root.get("@graph")
	if doc.root.get("@context") == nil || graph == nil || graph.kind != array {
		return errors.New("@context and @graph are due")
	}
	by := map[string]*value{}
	for i, e := range graph.items {
		id, ok := e.get("@id").str()
		if !ok || e.get("@type") == nil {
			return fmt.Errorf("entity %d has no @id or no @type", i+1)
		}
		if by[id] != nil {
			return fmt.Errorf("the entity %s stands twice", id)
		}
		by[id] = e
	}
	descriptor := by[crateFile]
	if t, _ := descriptor.get("@type").str(); t != "CreativeWork" {
		return fmt.Errorf("the descriptor %s of type CreativeWork is missing", crateFile)
	}
	if v, _ := descriptor.get("conformsTo").get("@id").str(); v != crateVersion {
		return fmt.Errorf("conformsTo is %q; %s is read here", v, crateVersion)
	}
	id, _ := descriptor.get("about").get("@id").str()
	root := by[id]
	if root == nil || !strings.HasSuffix(id, "/") {
		return errors.New("the root data entity is missing, or its @id does not end with /")
	}
	if t, _ := root.get("@type").str(); t != "Dataset" {
		return errors.New("the root data entity is not of type Dataset")
	}
	for _, key := range []string{"name", "description", "datePublished", "license"} {
		if root.get(key) == nil {
			return fmt.Errorf("the root data entity has no %s", key)
		}
	}
	if date, _ := root.get("datePublished").str(); date == "" {
		return errors.New("datePublished is no date")
	}
	left := map[string]bool{}
	for name := range sums {
		if name != crateFile {
			left[name] = true
		}
	}
	parts := root.get("hasPart")
	if parts == nil || parts.kind != array {
		return errors.New("the root data entity has no parts")
	}
	for _, p := range parts.items {
		id, _ := p.get("@id").str()
		name, err := url.PathUnescape(strings.TrimPrefix(id, "./"))
		if err != nil {
			return fmt.Errorf("part %s: %w", id, err)
		}
		e := by[id]
		sum, _ := e.get("sha256").str()
		switch {
		case !left[name]:
			return fmt.Errorf("part %s is not in the pack, or named twice", id)
		case sum != sums[name]:
			return fmt.Errorf("part %s: sha256 is not that of the file", id)
		}
		if t, _ := e.get("@type").str(); t != "File" {
			return fmt.Errorf("part %s is not of type File", id)
		}
		delete(left, name)
	}
	return nothingLeft(left)
}
