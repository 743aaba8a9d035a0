package replay

import (
	"archive/zip"
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"time"

	"example.org/guardring/pkg/reduce"
)

func writePack(t testing.TB, p *Package) string {
	t.Helper()
	var b bytes.Buffer
	if err := p.Write(&b); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "pack.zip")
	if err := os.WriteFile(path, b.Bytes(), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func packDataset(t testing.TB, dir string) *Package {
	t.Helper()
	p, err := Pack(context.Background(), dir, PackSettings{Date: "2026-03-04", License: "CC-BY-4.0", Reduce: reduce.Settings{Trials: 200}})
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func TestPackDataset(t *testing.T) {
	dir := t.TempDir()
	if err := os.CopyFS(dir, os.DirFS(filepath.Join("..", "..", "datasets", "attracted-disc"))); err != nil {
		t.Fatal(err)
	}
	p := packDataset(t, dir)
	path := writePack(t, p)
	first := read(t, path)
	for _, procs := range []int{1, 2} {
		old := runtime.GOMAXPROCS(procs)
		again := read(t, writePack(t, packDataset(t, dir)))
		runtime.GOMAXPROCS(old)
		if !bytes.Equal(first, again) {
			t.Errorf("GOMAXPROCS=%d: other bytes", procs)
		}
	}
	all, err := RunPack(context.Background(), path, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	if len(all) != 1 || !all[0].Same() || all[0].Within != 0 || !strings.HasSuffix(all[0].File, ": result.json") || !strings.Contains(strings.Join(all[0].Notes, " "), "every SHA-256 as stated") {
		t.Errorf("%+v", all)
	}
	if _, err := os.Stat(filepath.Join(dir, "result.json")); err == nil {
		t.Error("packing wrote into the dataset")
	}
	names := map[string]*PackedFile{}
	for _, f := range p.Files {
		names[f.Name] = f
	}
	for _, n := range []string{"bench.toml", "readings.csv", "README.md", "result.json", "SHA256SUMS", "go.sum", "ro-crate-metadata.json", "datapackage.json"} {
		if names[n] == nil {
			t.Errorf("%s is missing", n)
		}
	}

	// Table Schema with UCUM codes (The Unified Code for Units of Measure 2.1,
	// published: kV, mm, g, s).
	var d dataPackage
	if err := json.Unmarshal(names["datapackage.json"].data, &d); err != nil {
		t.Fatal(err)
	}
	var fields []string
	for _, r := range d.Resources {
		if r.Path == "readings.csv" {
			if r.Profile != "tabular-data-resource" || r.Dialect == nil || r.Dialect.Delimiter != "," || r.Encoding != "utf-8" {
				t.Errorf("%+v", r)
			}
			for _, f := range r.Schema.Fields {
				fields = append(fields, f.Name+"|"+f.Type+"|"+f.Unit)
			}
		}
	}
	if s := strings.Join(fields, " "); s != "t/s|number|s kind|string| gap_no|string| polarity|string| V/kV|number|kV gap/mm|number|mm m/g|number|g" {
		t.Errorf("fields %s", s)
	}

	// With a record that was made from other readings nothing is packed.
	swap(t, filepath.Join(dir, "readings.csv"), "2.9986,3.9822,2.0143", "2.9986,3.9822,2.0153")
	write(t, filepath.Join(dir, "result.json"), names["result.json"].data)
	if _, err := Pack(context.Background(), dir, PackSettings{}); err == nil || !strings.Contains(err.Error(), names["readings.csv"].SHA256) {
		t.Errorf("a stale record: %v", err)
	}
}

// TestPackAll: every dataset of the tree packs, with metadata that hold.
func TestPackAll(t *testing.T) {
	dirs, err := filepath.Glob(filepath.Join("..", "..", "datasets", "*", "bench.toml"))
	if err != nil || len(dirs) < 2 {
		t.Fatal(dirs, err)
	}
	for _, toml := range dirs {
		dir := filepath.Dir(toml)
		p, err := Pack(context.Background(), dir, PackSettings{Reduce: reduce.Settings{LawOnly: true}})
		if err != nil {
			t.Errorf("%s: %v", dir, err)
			continue
		}
		to := t.TempDir()
		names, err := Unpack(context.Background(), writePack(t, p), to)
		if err != nil {
			t.Errorf("%s: %v", dir, err)
			continue
		}
		if err := checkMetadata(to, names); err != nil {
			t.Errorf("%s: %v", dir, err)
		}
	}
}

// TestPackNotebook: what the cells name is taken in, and of a folder of datasets
// only those that the records were made from.
func TestPackNotebook(t *testing.T) {
	_, record := recorded(t, reduce.Settings{LawOnly: true})
	dir := t.TempDir()
	for _, n := range []string{"one", "other"} {
		if err := os.CopyFS(filepath.Join(dir, "datasets", n), os.DirFS(filepath.Join("..", "..", "datasets", "attracted-disc"))); err != nil {
			t.Fatal(err)
		}
	}
	other := filepath.Join(dir, "datasets", "other", "bench.toml")
	write(t, other, append(read(t, other), "# another\n"...))
	write(t, filepath.Join(dir, "datasets", "gap.csv"), []byte("d/um,label,E/(kV/m),n\n1,a,2,3\n2,b,4,5\n"))
	cells := fmt.Sprintf(`{"cell_type":"code","execution_count":1,"id":"a","metadata":{},"source":"dir := \"../datasets\"; csv := \"../datasets/gap.csv\"; none := \"../nowhere\"",
"outputs":[{"output_type":"display_data","metadata":{},"data":{"application/vnd.guardring.result+json":%s}}]}`, read(t, record))
	nb := filepath.Join(dir, "notebooks", "n.ipynb")
	if err := os.MkdirAll(filepath.Dir(nb), 0o755); err != nil {
		t.Fatal(err)
	}
	write(t, nb, []byte(`{"cells":[`+cells+`],"metadata":{"kernelspec":{"name":"guardring"}},"nbformat":4,"nbformat_minor":5}`))
	p, err := Pack(context.Background(), nb, PackSettings{})
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	var schema *tableSchema
	for _, f := range p.Files {
		names = append(names, f.Name)
		if f.Name == "datasets/gap.csv" {
			schema = f.table
		}
	}
	if s := strings.Join(names, " "); s != "SHA256SUMS datapackage.json datasets/gap.csv datasets/one/README.md datasets/one/bench.toml datasets/one/readings.csv datasets/one/simulation.toml go.sum notebooks/n.ipynb ro-crate-metadata.json" {
		t.Errorf("%s", s)
	}
	if p.Main != "notebooks/n.ipynb" || p.Title != "n.ipynb" {
		t.Errorf("%q %q", p.Main, p.Title)
	}
	// UCUM 2.1 (published): um, kV.m-1.
	var fields []string
	for _, f := range schema.Fields {
		fields = append(fields, f.Name+"|"+f.Type+"|"+f.Unit)
	}
	if s := strings.Join(fields, " "); s != "d/um|number|um label|string| E/(kV/m)|number|kV.m-1 n|number|" {
		t.Errorf("%s", s)
	}
}

func TestPublicationDate(t *testing.T) {
	t.Setenv("SOURCE_DATE_EPOCH", "")
	newest := time.Date(2026, 3, 4, 23, 59, 0, 0, time.UTC)
	if d, err := publicationDate("", newest); d != "2026-03-04" || err != nil {
		t.Error(d, err)
	}
	t.Setenv("SOURCE_DATE_EPOCH", "86400")
	if d, err := publicationDate("", newest); d != "1970-01-02" || err != nil {
		t.Error(d, err)
	}
	if d, err := publicationDate("2025-12-31", newest); d != "2025-12-31" || err != nil {
		t.Error(d, err)
	}
	if _, err := publicationDate("31.12.2025", newest); err == nil {
		t.Error("31.12.2025 is taken")
	}
}

func TestBadPackSources(t *testing.T) {
	dir := t.TempDir()
	demo := filepath.Join("..", "..", "datasets", "attracted-disc")
	linked := filepath.Join(dir, "linked")
	if err := os.CopyFS(linked, os.DirFS(demo)); err != nil {
		t.Fatal(err)
	}
	if err := os.Symlink("/etc/passwd", filepath.Join(linked, "notes.txt")); err != nil {
		t.Skip(err)
	}
	write(t, filepath.Join(dir, "abs.ipynb"), []byte(strings.Replace(small, `../x`, filepath.ToSlash(linked), 1)))
	write(t, filepath.Join(dir, "x.txt"), nil)
	for _, c := range []struct{ source, want string }{
		{filepath.Join(dir, "nowhere"), "no such file"},
		{dir, "bench.toml"},
		{filepath.Join(dir, "x.txt"), "a notebook (.ipynb) is due"},
		{linked, "not an ordinary file"},
		{filepath.Join(dir, "abs.ipynb"), "absolute path"},
		{filepath.Join("testdata", "other.ipynb"), `for the kernel "python3"`},
	} {
		if _, err := Pack(context.Background(), c.source, PackSettings{}); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", c.source, err, c.want)
		}
	}
	if _, err := Pack(context.Background(), demo, PackSettings{Date: "soon"}); err == nil {
		t.Error("a date that is none is taken")
	}
}

// made is a zip written by hand.
type made struct {
	name string
	data []byte
	mode fs.FileMode
	edit func(h *zip.FileHeader)
}

func zipOf(t testing.TB, files ...made) []byte {
	t.Helper()
	var b bytes.Buffer
	z := zip.NewWriter(&b)
	for _, f := range files {
		h := &zip.FileHeader{Name: f.name, Method: zip.Deflate}
		if f.mode != 0 {
			h.SetMode(f.mode)
		}
		if f.edit != nil {
			f.edit(h)
		}
		w, err := z.CreateHeader(h)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := w.Write(f.data); err != nil {
			t.Fatal(err)
		}
	}
	if err := z.Close(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func sumsLine(name string, data []byte) string { return sumOf(data) + "  " + name + "\n" }

// TestBadPacks: what a pack must not be, and that nothing is written beside the
// target.
func TestBadPacks(t *testing.T) {
	a := []byte("a")
	good := made{name: "a.txt", data: a}
	sums := func(s string) made { return made{name: "SHA256SUMS", data: []byte(s)} }
	ok := sums(sumsLine("a.txt", a))
	zeros := make([]byte, 4<<20)
	many := []made{ok}
	for i := range maxMembers {
		many = append(many, made{name: fmt.Sprint(i)})
	}
	for _, c := range []struct {
		name string
		zip  []byte
		want string
	}{
		{"not a zip", []byte("PK nothing"), "this is no pack"},
		{"no sums", zipOf(t, good), "no SHA256SUMS"},
		{"parent", zipOf(t, good, ok, made{name: "../out.txt", data: a}), "leads out of its folder"},
		{"parent inside", zipOf(t, good, ok, made{name: "x/../../out.txt", data: a}), "leads out of its folder"},
		{"dotted", zipOf(t, good, ok, made{name: "./b.txt", data: a}), "not written plainly"},
		{"absolute", zipOf(t, good, ok, made{name: "/tmp/out.txt", data: a}), "absolute path"},
		{"drive", zipOf(t, good, ok, made{name: "C:out.txt", data: a}), "absolute path"},
		{"backslash", zipOf(t, good, ok, made{name: `..\out.txt`, data: a}), "backslash"},
		{"control", zipOf(t, good, ok, made{name: "a\nb", data: a}), "control character"},
		{"folder outside", zipOf(t, good, ok, made{name: "../out/"}), "leads out of its folder"},
		{"long name", zipOf(t, good, ok, made{name: strings.Repeat("n", 600)}), "longer than"},
		{"link", zipOf(t, ok, made{name: "a.txt", data: []byte("/etc/passwd"), mode: fs.ModeSymlink | 0o777}), "a.txt is a link"},
		{"device", zipOf(t, ok, made{name: "a.txt", mode: fs.ModeDevice | 0o666}), "not an ordinary file"},
		{"twice", zipOf(t, good, good, ok), "stand for the same file"},
		{"case", zipOf(t, good, ok, made{name: "A.TXT", data: a}), "stand for the same file"},
		{"file and folder", zipOf(t, good, ok, made{name: "a.txt/b", data: a}), "both a file and the folder"},
		{"bomb", zipOf(t, good, ok, made{name: "zeros", data: zeros}), "200 times its size"},
		{"too many", zipOf(t, many...), "packs hold up to"},
		{"encrypted", zipOf(t, ok, made{name: "a.txt", data: a, edit: func(h *zip.FileHeader) { h.Flags |= 1 }}), "encrypted"},
		{"wrong sum", zipOf(t, good, sums(sumsLine("a.txt", []byte("b")))), "the file has " + sumOf(a)},
		{"not named", zipOf(t, good, ok, made{name: "b.txt", data: a}), "b.txt is not named"},
		{"gone", zipOf(t, good, sums(sumsLine("a.txt", a)+sumsLine("b.txt", a))), "b.txt (SHA-256 " + sumOf(a) + ") is named"},
		{"bad sums", zipOf(t, good, sums("abc  a.txt\n")), "SHA256SUMS, line 1"},
		{"sums twice", zipOf(t, good, sums(sumsLine("a.txt", a)+sumsLine("a.txt", a))), "line 2: a.txt stands twice"},
		{"sums outside", zipOf(t, good, sums(sumsLine("../../a.txt", a))), "leads out of its folder"},
		{"no metadata", zipOf(t, good, ok), "are due in a pack"},
	} {
		dir := t.TempDir()
		target := filepath.Join(dir, "in", "target")
		if err := os.MkdirAll(target, 0o755); err != nil {
			t.Fatal(err)
		}
		path := filepath.Join(dir, "pack.zip")
		write(t, path, c.zip)
		_, err := Unpack(context.Background(), path, target)
		if err == nil {
			t.Setenv("TMPDIR", dir)
			_, err = RunPack(context.Background(), path, Settings{})
		}
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", c.name, err, c.want)
		}
		nothingBeside(t, c.name, dir, target)
		if !bytes.Equal(read(t, path), c.zip) {
			t.Errorf("%s: the pack was changed", c.name)
		}
	}
}

// nothingBeside fails when dir holds more than the pack and the target, or the
// target anything but files and folders.
func nothingBeside(t *testing.T, name, dir, target string) {
	t.Helper()
	err := filepath.WalkDir(dir, func(p string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		switch inside := strings.HasPrefix(p, target+string(filepath.Separator)); {
		case inside && !d.IsDir() && !d.Type().IsRegular():
			t.Errorf("%s: wrote %s, which is no file", name, p)
		case !inside && p != dir && p != filepath.Dir(target) && p != target && p != filepath.Join(dir, "pack.zip"):
			t.Errorf("%s: wrote %s", name, p)
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}

// TestLyingSizes: a directory that states other sizes than the data have.
func TestLyingSizes(t *testing.T) {
	a := []byte(strings.Repeat("abc", 1000))
	whole := zipOf(t, made{name: "a.txt", data: a}, made{name: "SHA256SUMS", data: []byte(sumsLine("a.txt", a))})
	at := bytes.LastIndex(whole, []byte("PK\x01\x02"))
	at = bytes.LastIndex(whole[:at], []byte("PK\x01\x02")) // of a.txt
	for _, size := range []byte{0, 1, 255} {
		bad := bytes.Clone(whole)
		bad[at+24], bad[at+25] = size, 0
		dir := t.TempDir()
		path := filepath.Join(dir, "pack.zip")
		write(t, path, bad)
		target := filepath.Join(dir, "target")
		if err := os.Mkdir(target, 0o755); err != nil {
			t.Fatal(err)
		}
		if names, err := Unpack(context.Background(), path, target); err == nil {
			t.Errorf("size %d is believed: %v", size, names)
		}
	}
}

// TestTamperedPack: a pack whose files were changed with their sums is found out by
// its metadata, and one whose record was changed throughout by the replay.
func TestTamperedPack(t *testing.T) {
	dir := t.TempDir()
	if err := os.CopyFS(dir, os.DirFS(filepath.Join("..", "..", "datasets", "attracted-disc"))); err != nil {
		t.Fatal(err)
	}
	p, err := Pack(context.Background(), dir, PackSettings{Reduce: reduce.Settings{LawOnly: true}})
	if err != nil {
		t.Fatal(err)
	}
	content := map[string][]byte{}
	for _, f := range p.Files {
		content[f.Name] = f.data
	}
	rebuilt := func(edit map[string][]byte) string {
		var files []made
		var sums strings.Builder
		for _, f := range p.Files {
			if f.Name == sumsFile {
				continue
			}
			data := f.data
			if e, ok := edit[f.Name]; ok {
				data = e
			}
			files = append(files, made{name: f.Name, data: data})
			sums.WriteString(sumsLine(f.Name, data))
		}
		path := filepath.Join(t.TempDir(), "pack.zip")
		write(t, path, zipOf(t, append(files, made{name: sumsFile, data: []byte(sums.String())})...))
		return path
	}
	if all, err := RunPack(context.Background(), rebuilt(nil), Settings{}); err != nil || !all[0].Same() {
		t.Errorf("unchanged: %v", err)
	}
	edit := func(name, old, with string) []byte {
		data := content[name]
		if bytes.Count(data, []byte(old)) != 1 {
			t.Fatalf("%q stands %d times in %s", old, bytes.Count(data, []byte(old)), name)
		}
		return bytes.Replace(data, []byte(old), []byte(with), 1)
	}
	csv := edit("readings.csv", "2.9986,3.9822,2.0143", "2.9986,3.9822,2.0153")
	through := func(file string, data []byte) map[string][]byte {
		all := map[string][]byte{file: data}
		old, now := sumOf(content[file]), sumOf(data)
		all[packageFile] = bytes.ReplaceAll(content[packageFile], []byte(old), []byte(now))
		crate := bytes.ReplaceAll(content[crateFile], []byte(old), []byte(now))
		all[crateFile] = bytes.ReplaceAll(crate, []byte(sumOf(content[packageFile])), []byte(sumOf(all[packageFile])))
		return all
	}
	for _, c := range []struct {
		name string
		edit map[string][]byte
		want string
	}{
		{"readings", map[string][]byte{"readings.csv": csv}, "datapackage.json: resource readings.csv: the hash is not that"},
		{"crate without a licence", map[string][]byte{crateFile: bytes.Replace(content[crateFile], []byte(`"license": {`), []byte(`"licence": {`), 1)}, "no license"},
		{"crate of another version", map[string][]byte{crateFile: bytes.Replace(content[crateFile], []byte(`"@id": "`+crateVersion+`"`), []byte(`"@id": "`+crateVersion+`0"`), 1)}, "conformsTo"},
		{"no resources", map[string][]byte{packageFile: []byte(`{"resources":[]}`)}, "resources is missing"},
		{"broken metadata", map[string][]byte{crateFile: []byte(`{`)}, "line 1"},
	} {
		if _, err := RunPack(context.Background(), rebuilt(c.edit), Settings{}); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", c.name, err, c.want)
		}
	}
	all, err := RunPack(context.Background(), rebuilt(through("readings.csv", csv)), Settings{})
	if err != nil || all[0].Same() || !all[0].names()["inputs.readings.csv.sha256"] {
		t.Errorf("readings changed throughout: %v %+v", err, all)
	}
	doc, err := parseDocument(content["result.json"])
	if err != nil {
		t.Fatal(err)
	}
	doc.root.get("fit").set("dof", intValue(1))
	all, err = RunPack(context.Background(), rebuilt(through("result.json", doc.bytes())), Settings{})
	if err != nil || len(all[0].Differences) != 1 || all[0].Differences[0].Name != "fit.dof" {
		t.Errorf("a result changed throughout: %v %+v", err, all)
	}
}

func FuzzUnpack(f *testing.F) {
	a := []byte("a")
	ok := made{name: "SHA256SUMS", data: []byte(sumsLine("a.txt", a))}
	f.Add(zipOf(f, made{name: "a.txt", data: a}, ok))
	f.Add(zipOf(f, made{name: "../a.txt", data: a}, ok))
	f.Add(zipOf(f, made{name: "b/a.txt", data: a}, made{name: "b/", mode: fs.ModeDir | 0o755}, ok))
	f.Add(zipOf(f, made{name: "a.txt", data: []byte("/tmp"), mode: fs.ModeSymlink | 0o777}, ok))
	f.Fuzz(func(t *testing.T, data []byte) {
		dir := t.TempDir()
		target := filepath.Join(dir, "in", "target")
		if err := os.MkdirAll(target, 0o755); err != nil {
			t.Fatal(err)
		}
		path := filepath.Join(dir, "pack.zip")
		write(t, path, data)
		names, err := Unpack(context.Background(), path, target)
		if err != nil && names != nil {
			t.Fatal("names came with an error")
		}
		nothingBeside(t, "fuzz", dir, target)
		for _, n := range names {
			in, err := os.Open(filepath.Join(target, filepath.FromSlash(n)))
			if err != nil {
				t.Fatal(err)
			}
			if _, err := io.Copy(io.Discard, in); err != nil {
				t.Fatal(err)
			}
			in.Close()
		}
	})
}
