package safefile

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
)

// mode is the permission of files written here: readable by all, as results
// and certificates are meant to be read, writable by their owner.
const mode fs.FileMode = 0o644

// bufferSize keeps small writes of callers from becoming system calls.
const bufferSize = 64 << 10

// Write replaces the file at path by what write puts into its writer, or makes
// it when there is none. The folder must exist.
//
// On success the new content is on the disk under its name. On any error, that
// of write included, the temporary file is removed, an old file at path is
// untouched, and the error names path and wraps its cause. The writer is
// buffered and is valid only until write returns. The one exception is a folder
// that can't be flushed after the rename: the new file then stands, whole, and
// the error says that a loss of power might still bring the old one back.
//
// A symbolic link at path is followed, so that the link stays and the file it
// names is replaced. A target that is a folder, a device, a pipe or a socket
// is refused. A panic in write also removes the temporary file.
func Write(path string, write func(io.Writer) error) error {
	return WriteSet([]File{{Path: path, Write: write}})
}

// File is one file of a set: its path and what puts its content into a writer.
type File struct {
	Path  string
	Write func(io.Writer) error
}

// WriteSet replaces several files as Write does one: all contents are on the
// disk before the first takes its name, so that an error in any leaves all old
// files. Two programs that replace the same set at once do not mix: one of them
// takes all names first (on Unix; Windows has no lock of a folder). A program
// that is ended between two renames leaves new files beside old ones, each whole.
func WriteSet(files []File) (err error) {
	staged := make([]*staging, 0, len(files))
	defer func() {
		for _, s := range staged {
			err = errors.Join(err, s.discard())
		}
	}()
	for _, f := range files {
		s, err := stage(f)
		if s != nil {
			staged = append(staged, s)
		}
		if err != nil {
			return fmt.Errorf("write %s: %w", f.Path, err)
		}
	}
	folders := make([]string, len(staged))
	for i, s := range staged {
		folders[i] = filepath.Dir(s.target)
	}
	slices.Sort(folders)
	folders = slices.Compact(folders)
	if len(files) > 1 {
		for _, folder := range folders {
			unlock, err := lockFolder(folder)
			if err != nil {
				return fmt.Errorf("write into %s: %w", folder, err)
			}
			defer unlock()
		}
	}
	for _, s := range staged {
		if err := os.Rename(s.temp, s.target); err != nil {
			return fmt.Errorf("write %s: %w", s.path, err)
		}
		s.done = true
	}
	for _, folder := range folders {
		if err := syncFolder(folder); err != nil {
			return fmt.Errorf("write into %s: the new file stands, but its folder could not be flushed to the disk: %w", folder, err)
		}
	}
	return nil
}

// staging is a new content under a temporary name.
type staging struct {
	path, target, temp string
	file               *os.File
	done               bool
}

// discard removes the temporary file unless it has taken its name.
func (s *staging) discard() error {
	if s.done {
		return nil
	}
	// The first error is what the caller must see; a temporary file that can't
	// be removed is told beside it.
	s.file.Close() // closing twice is harmless: the file is given up
	if err := os.Remove(s.temp); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return fmt.Errorf("remove the temporary file: %w", err)
	}
	return nil
}

// stage writes the content of f under a temporary name and flushes it to the
// disk. What it returns must be discarded, on an error too.
func stage(f File) (s *staging, err error) {
	if f.Path == "" {
		return nil, errors.New("no file name given")
	}
	if f.Write == nil {
		return nil, errors.New("no content given")
	}
	target, err := resolve(f.Path)
	if err != nil {
		return nil, err
	}
	temp, err := os.CreateTemp(filepath.Dir(target), ".guardring-*.tmp")
	if err != nil {
		return nil, err
	}
	s = &staging{path: f.Path, target: target, temp: temp.Name(), file: temp}
	panicked := true
	defer func() {
		if panicked {
			_ = s.discard() // the panic goes on and says more
		}
	}()
	w := bufio.NewWriterSize(temp, bufferSize)
	err = f.Write(w)
	panicked = false
	if err != nil {
		return s, err
	}
	if err := w.Flush(); err != nil {
		return s, err
	}
	if err := temp.Chmod(mode); err != nil && !chmodUnsupported(err) {
		return s, err
	}
	if err := temp.Sync(); err != nil {
		return s, err
	}
	return s, temp.Close()
}

// WriteBytes replaces the file at path by data, as Write does.
func WriteBytes(path string, data []byte) error {
	return Write(path, func(w io.Writer) error {
		_, err := w.Write(data)
		return err
	})
}

// resolve follows symbolic links at path and refuses what can't be replaced by
// an ordinary file.
func resolve(path string) (string, error) {
	info, err := os.Lstat(path)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return path, nil
	case err != nil:
		return "", err
	}
	if info.Mode()&fs.ModeSymlink != 0 {
		target, err := filepath.EvalSymlinks(path)
		if err != nil {
			return "", fmt.Errorf("it is a link that leads nowhere; remove it or mend it: %w", err)
		}
		if info, err = os.Stat(target); err != nil {
			return "", err
		}
		path = target
	}
	switch {
	case info.IsDir():
		return "", errors.New("it is a folder; give the name of a file")
	case !info.Mode().IsRegular():
		return "", fmt.Errorf("it is not an ordinary file (%s); only ordinary files are replaced", kind(info.Mode()))
	}
	return path, nil
}

// kind names what stands at a path that is neither a file nor a folder.
func kind(m fs.FileMode) string {
	switch {
	case m&fs.ModeDevice != 0:
		return "a device"
	case m&fs.ModeNamedPipe != 0:
		return "a pipe"
	case m&fs.ModeSocket != 0:
		return "a socket"
	}
	return m.Type().String()
}
