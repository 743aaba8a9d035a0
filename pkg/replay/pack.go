package replay

import (
	"archive/zip"
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"path"
	"path/filepath"
	"runtime/debug"
	"sort"
	"strconv"
	"strings"
	"time"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
)

// The files that a pack adds.
const (
	sumsFile     = "SHA256SUMS"
	crateFile    = "ro-crate-metadata.json"
	packageFile  = "datapackage.json"
	modulesFile  = "go.sum"
	resultFile   = "result.json"
	dateLayout   = "2006-01-02"
	notebookType = "application/x-ipynb+json"
)

// PackSettings say how to pack. The zero PackSettings are the defaults.
type PackSettings struct {
	With    []string // files and folders to take in besides those that are found
	Date    string   // of publication, ISO 8601 (2026-03-04); "": SOURCE_DATE_EPOCH, else the newest file's
	License string   // SPDX identifier, URL or words; "": none is stated, and the pack says so
	Reduce  reduce.Settings
	Output  string // where the pack will be written, which is not packed itself
}

// A PackedFile is one file of a pack.
type PackedFile struct {
	Name   string `json:"name"` // slashes forward, relative to the pack
	SHA256 string `json:"sha256"`
	Bytes  int    `json:"bytes"`

	data  []byte
	role  role
	table *tableSchema
}

// role is what a file is in its pack.
type role uint8

const (
	roleOther role = iota
	roleInput
	roleResult
	roleNotebook
	roleMeta
)

// A Package is what a pack will hold.
type Package struct {
	Title string
	Main  string // notebook or dataset that it is about
	Date  string
	Files []*PackedFile // in the order of their names
}

// Pack gathers a dataset (a folder with bench.toml) or a notebook with all that it
// needs to be replayed: the inputs that it names, results, checksums, the sums of
// the modules of this tool, and the metadata. A dataset without a record is
// reduced, and its record becomes result.json of the pack. Nothing is written.
func Pack(ctx context.Context, source string, s PackSettings) (*Package, error) {
	info, err := os.Stat(source)
	if err != nil {
		return nil, err
	}
	g := &gatherer{settings: s, found: map[string]bool{}, inputs: map[string]bool{}, benches: map[string]*bench.Bench{}}
	switch {
	case info.IsDir():
		err = g.dataset(ctx, source)
	case strings.EqualFold(filepath.Ext(source), ".ipynb"):
		err = g.notebook(source)
	default:
		err = fmt.Errorf("%s: a folder with bench.toml or a notebook (.ipynb) is due", source)
	}
	if err != nil {
		return nil, err
	}
	for _, w := range s.With {
		if err := g.with(w); err != nil {
			return nil, err
		}
	}
	if err := g.fromFolders(); err != nil {
		return nil, err
	}
	return g.pack(ctx)
}

// pack reads what was gathered and adds the rest.
func (g *gatherer) pack(ctx context.Context) (*Package, error) {
	root, names := common(g.paths)
	p := &Package{Title: g.title}
	var total int64
	newest := time.Time{}
	for i, full := range g.paths {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		info, err := os.Lstat(full)
		if err != nil {
			return nil, err
		}
		if !info.Mode().IsRegular() {
			return nil, fmt.Errorf("%s is not an ordinary file; packs hold no links and devices", full)
		}
		total += info.Size()
		if total > maxUnpacked || info.Size() > maxMember {
			return nil, fmt.Errorf("%s: packs hold up to %d MiB, and files of up to %d MiB", full, maxUnpacked>>20, maxMember>>20)
		}
		if info.ModTime().After(newest) {
			newest = info.ModTime()
		}
		data, err := readBounded(full, maxMember)
		if err != nil {
			return nil, err
		}
		if err := checkName(names[i]); err != nil {
			return nil, fmt.Errorf("%s: %w", full, err)
		}
		f := packed(names[i], data, roleOther)
		switch {
		case strings.EqualFold(path.Ext(f.Name), ".ipynb"):
			f.role = roleNotebook
		case strings.EqualFold(path.Ext(f.Name), ".json") && isRecord(data):
			f.role = roleResult
		case g.inputs[full]:
			f.role = roleInput
		}
		p.Files = append(p.Files, f)
		if full == g.main {
			p.Main = f.Name
		}
	}
	if len(p.Files) > maxMembers {
		return nil, fmt.Errorf("%d files; packs hold up to %d", len(p.Files), maxMembers)
	}
	if g.record != nil {
		p.Files = append(p.Files, packed(resultFile, g.record, roleResult))
	}
	if err := g.holdsInputs(p, root); err != nil {
		return nil, err
	}
	for dir, b := range g.benches {
		if err := g.tables(p, root, dir, b); err != nil {
			return nil, err
		}
	}
	p.otherTables()
	var err error
	if p.Date, err = publicationDate(g.settings.Date, newest); err != nil {
		return nil, err
	}
	return p, p.finish(g.settings)
}

// finish adds the metadata and the checksums.
func (p *Package) finish(s PackSettings) error {
	sums, err := moduleSums()
	if err != nil {
		return err
	}
	p.Files = append(p.Files, packed(modulesFile, sums, roleMeta))
	p.sort()
	data, err := p.dataPackage(s)
	if err != nil {
		return err
	}
	p.Files = append(p.Files, packed(packageFile, data, roleMeta))
	p.sort()
	if data, err = p.crate(s); err != nil {
		return err
	}
	p.Files = append(p.Files, packed(crateFile, data, roleMeta))
	p.sort()
	var list bytes.Buffer
	seen := map[string]string{}
	for _, f := range p.Files {
		// Names that differ in case alone would overwrite each other on some systems.
		if other, ok := seen[strings.ToLower(f.Name)]; ok {
			return fmt.Errorf("%s and %s stand for the same file in a pack; rename one", other, f.Name)
		}
		seen[strings.ToLower(f.Name)] = f.Name
		fmt.Fprintf(&list, "%s  %s\n", f.SHA256, f.Name)
	}
	if other, ok := seen[strings.ToLower(sumsFile)]; ok {
		return fmt.Errorf("%s: the pack makes a file of that name itself; rename yours", other)
	}
	p.Files = append(p.Files, packed(sumsFile, list.Bytes(), roleMeta))
	p.sort()
	return nil
}

func packed(name string, data []byte, r role) *PackedFile {
	return &PackedFile{Name: name, SHA256: sumOf(data), Bytes: len(data), data: data, role: r}
}

func (p *Package) sort() {
	sort.SliceStable(p.Files, func(i, j int) bool { return p.Files[i].Name < p.Files[j].Name })
}

// Write writes the pack as a zip archive. Its times are all the earliest that the
// form knows, so that the same files give the same bytes.
func (p *Package) Write(w io.Writer) error {
	z := zip.NewWriter(w)
	for _, f := range p.Files {
		h := &zip.FileHeader{Name: f.Name, Method: zip.Deflate, Modified: time.Date(1980, 1, 1, 0, 0, 0, 0, time.UTC)}
		h.SetMode(0o644)
		out, err := z.CreateHeader(h)
		if err != nil {
			return err
		}
		if _, err := out.Write(f.data); err != nil {
			return err
		}
	}
	return z.Close()
}

// publicationDate settles the date of publication.
func publicationDate(given string, newest time.Time) (string, error) {
	if given != "" {
		if _, err := time.Parse(dateLayout, given); err != nil {
			return "", fmt.Errorf("date %q: a day such as 2026-03-04 is due", given)
		}
		return given, nil
	}
	// https://reproducible-builds.org/specs/source-date-epoch/
	if e := os.Getenv("SOURCE_DATE_EPOCH"); e != "" {
		n, err := strconv.ParseInt(e, 10, 64)
		if err != nil {
			return "", fmt.Errorf("SOURCE_DATE_EPOCH is %q; seconds since 1970 are due", e)
		}
		return time.Unix(n, 0).UTC().Format(dateLayout), nil
	}
	return newest.UTC().Format(dateLayout), nil
}

// moduleSums lists the modules linked into this program in the form of go.sum.
func moduleSums() ([]byte, error) {
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return nil, errors.New("this program holds no record of its modules, so that go.sum can't be packed; build it with go build")
	}
	var lines []string
	for _, m := range info.Deps {
		if m.Replace != nil {
			m = m.Replace
		}
		if m.Sum != "" {
			lines = append(lines, fmt.Sprintf("%s %s %s\n", m.Path, m.Version, m.Sum))
		}
	}
	sort.Strings(lines)
	return []byte(strings.Join(lines, "")), nil
}

// indented writes JSON for a file.
func indented(v any) ([]byte, error) {
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	if err := e.Encode(v); err != nil {
		return nil, err
	}
	return b.Bytes(), nil
}
