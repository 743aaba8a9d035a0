package safefile

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
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
func Write(path string, write func(io.Writer) error) (err error) {
	if path == "" {
		return errors.New("safefile: no file name given")
	}
	if write == nil {
		return fmt.Errorf("write %s: no content given", path)
	}
	defer func() {
		if err != nil {
			err = fmt.Errorf("write %s: %w", path, err)
		}
	}()
	target, err := resolve(path)
	if err != nil {
		return err
	}
	folder := filepath.Dir(target)
	temp, err := os.CreateTemp(folder, ".guardring-*.tmp")
	if err != nil {
		return err
	}
	name := temp.Name()
	done := false
	defer func() {
		if done {
			return
		}
		// The first error is what the caller must see; a temporary file that
		// can't be removed is told beside it.
		temp.Close() // closing twice is harmless: the file is given up
		if e := os.Remove(name); e != nil && !errors.Is(e, fs.ErrNotExist) {
			err = errors.Join(err, fmt.Errorf("remove the temporary file: %w", e))
		}
	}()
	w := bufio.NewWriterSize(temp, bufferSize)
	if err := write(w); err != nil {
		return err
	}
	if err := w.Flush(); err != nil {
		return err
	}
	if err := temp.Chmod(mode); err != nil && !chmodUnsupported(err) {
		return err
	}
	if err := temp.Sync(); err != nil {
		return err
	}
	if err := temp.Close(); err != nil {
		return err
	}
	if err := os.Rename(name, target); err != nil {
		return err
	}
	done = true
	if err := syncFolder(folder); err != nil {
		return fmt.Errorf("the new file stands, but its folder could not be flushed to the disk: %w", err)
	}
	return nil
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
