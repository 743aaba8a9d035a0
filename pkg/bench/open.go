package bench

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"example.org/guardring/pkg/model"
)

// benchFile is the name of the file that makes a folder a dataset.
const benchFile = "bench.toml"

// Open reads the dataset in folder dir: bench.toml and the readings it names,
// which must lie in the folder. Everything is checked before anything is
// returned; errors are *Error, up to ten joined in the order of the file, each
// with its place and what would be right.
func Open(dir string) (*Bench, error) { return open(nil, dir, nil) }

// OpenWith is Open for a bench of the given kind, which need not be registered;
// bench.toml must name it.
func OpenWith(kind *model.Kind, dir string) (*Bench, error) {
	if kind == nil {
		return nil, errors.New("bench: no kind given")
	}
	return open(kind, dir, nil)
}

func open(kind *model.Kind, dir string, given *givenReadings) (*Bench, error) {
	f, err := openFolder(dir, benchFile)
	if err != nil {
		return nil, err
	}
	defer f.root.Close()
	data, sum, err := f.document(benchFile)
	if err != nil {
		return nil, err
	}
	return f.load(kind, dir, data, sum, given)
}

// folder is a dataset's folder; nothing outside it can be opened through it.
type folder struct {
	root *os.Root
	dir  string
}

func openFolder(dir, file string) (*folder, error) {
	info, err := os.Stat(dir)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return nil, &Error{File: dir, Problem: fmt.Sprintf("there is no such folder; name the folder that holds %s", file), Err: err}
	case err != nil:
		return nil, &Error{File: dir, Problem: cause(err), Err: err}
	case !info.IsDir():
		return nil, &Error{File: dir, Problem: fmt.Sprintf("this is no folder; name the folder that holds %s", file)}
	}
	root, err := os.OpenRoot(dir)
	if err != nil {
		return nil, &Error{File: dir, Problem: cause(err), Err: err}
	}
	return &folder{root, dir}, nil
}

// cause is the reason of a failure without the path that the place already
// names.
func cause(err error) string {
	var p *fs.PathError
	if errors.As(err, &p) {
		return p.Err.Error()
	}
	return err.Error()
}

// open opens a regular file within the folder and returns its size.
func (f *folder) open(name string) (*os.File, int64, error) {
	fail := func(format string, a ...any) (*os.File, int64, error) {
		return nil, 0, &Error{File: name, Problem: fmt.Sprintf(format, a...)}
	}
	if strings.ContainsRune(name, '\\') {
		return fail("write the path with forward slashes")
	}
	if strings.ContainsRune(name, 0) || len(name) > 1024 {
		return fail("this is no name of a file")
	}
	if filepath.IsAbs(name) || strings.HasPrefix(name, "/") || !filepath.IsLocal(filepath.FromSlash(name)) {
		return fail("the file must lie in the folder of the bench: no absolute path, no .. and no device")
	}
	local := filepath.FromSlash(name)
	// Looked at before it is opened: opening a named pipe would wait for a writer.
	before, err := f.root.Stat(local)
	if errors.Is(err, fs.ErrNotExist) {
		e := &Error{File: name, Problem: "there is no such file in " + f.dir + f.near(name), Err: err}
		return nil, 0, e
	}
	if err != nil {
		if strings.Contains(err.Error(), "escapes") {
			return nil, 0, &Error{File: name, Problem: "the file must lie in the folder of the bench; this link leads out of it", Err: err}
		}
		return nil, 0, &Error{File: name, Problem: cause(err), Err: err}
	}
	if before.IsDir() {
		return fail("this is a folder; a file is due")
	}
	if !before.Mode().IsRegular() {
		return fail("this is no regular file but a device, a pipe or a socket")
	}
	file, err := f.root.Open(local)
	if err != nil {
		return nil, 0, &Error{File: name, Problem: cause(err), Err: err}
	}
	after, err := file.Stat()
	if err != nil || !after.Mode().IsRegular() {
		file.Close()
		return fail("the file changed while it was opened")
	}
	return file, after.Size(), nil
}

// near suggests a file of the folder with a similar name.
func (f *folder) near(name string) string {
	dir, err := f.root.Open(".")
	if err != nil {
		return ""
	}
	defer dir.Close()
	names, err := dir.Readdirnames(1000)
	if err != nil && len(names) == 0 {
		return ""
	}
	if s := suggest(name, names); s != "" && s != name {
		return "; did you mean " + s + "?"
	}
	return ""
}

// document reads the whole of a bench or budget file and hashes it.
func (f *folder) document(name string) (data []byte, sum string, err error) {
	file, _, err := f.open(name)
	if err != nil {
		var e *Error
		if errors.As(err, &e) && errors.Is(err, fs.ErrNotExist) {
			e.Problem = "there is no such file in " + f.dir + f.near(name)
			if name == benchFile {
				e.Problem = "there is no such file in " + f.dir + "; a dataset is a folder with " + benchFile + f.near(name)
			}
		}
		return nil, "", err
	}
	defer file.Close()
	data, err = io.ReadAll(io.LimitReader(file, maxDocument+1))
	if err != nil {
		return nil, "", &Error{File: name, Problem: "reading failed: " + cause(err), Err: err}
	}
	if len(data) > maxDocument {
		return nil, "", &Error{File: name, Problem: fmt.Sprintf("the file is larger than %d bytes, the most that is read", maxDocument)}
	}
	h := sha256.Sum256(data)
	return data, hex.EncodeToString(h[:]), nil
}
