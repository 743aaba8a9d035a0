package replay

import (
	"archive/zip"
	"bufio"
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"slices"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Bounds of a pack. Deflate can blow a byte up to 1,032; readings and records stay
// far below these.
const (
	maxMembers  = 10_000
	maxMember   = 512 << 20 // bytes of one file
	maxUnpacked = 1 << 30   // bytes of all files
	maxRatio    = 200       // unpacked over packed, once a file has more than fairSize
	fairSize    = 1 << 20
	maxName     = 512 // bytes
)

// checkName reports a name that must not stand in a pack.
func checkName(name string) error {
	bad := func(why string) error { return fmt.Errorf("the name %q %s", name, why) }
	switch {
	case name == "" || !utf8.ValidString(name):
		return bad("is empty or not UTF-8")
	case len(name) > maxName:
		return bad(fmt.Sprintf("is longer than %d bytes", maxName))
	case strings.ContainsRune(name, '\\'):
		return bad("holds a backslash, which some systems take for a slash")
	case strings.HasPrefix(name, "/") || strings.Contains(name, ":"):
		return bad("is an absolute path, or one on some system")
	case path.Clean(name) != name || !filepath.IsLocal(filepath.FromSlash(name)):
		return bad("leads out of its folder, or is not written plainly")
	}
	for _, r := range name {
		if unicode.IsControl(r) {
			return bad("holds a control character")
		}
	}
	return nil
}

// checkMember refuses a file that must not be unpacked, before anything is written.
func checkMember(f *zip.File) error {
	switch {
	case f.Flags&1 != 0:
		return fmt.Errorf("%s is encrypted", f.Name)
	case f.Method != zip.Deflate && f.Method != zip.Store:
		return fmt.Errorf("%s is packed by method %d; only stored and deflated files are read", f.Name, f.Method)
	case f.Mode()&fs.ModeSymlink != 0:
		return fmt.Errorf("%s is a link", f.Name)
	case !f.Mode().IsRegular():
		return fmt.Errorf("%s is not an ordinary file", f.Name)
	case f.UncompressedSize64 > maxMember:
		return fmt.Errorf("%s says that it has %d bytes; up to %d are read", f.Name, f.UncompressedSize64, int64(maxMember))
	case f.UncompressedSize64 > fairSize && f.UncompressedSize64/maxRatio > f.CompressedSize64:
		return fmt.Errorf("%s would unpack to more than %d times its size", f.Name, maxRatio)
	}
	return checkName(f.Name)
}

// checkMembers checks the directory of a pack and returns its files.
func checkMembers(z *zip.Reader, size int64) ([]*zip.File, error) {
	if len(z.File) > maxMembers {
		return nil, fmt.Errorf("%d files; packs hold up to %d", len(z.File), maxMembers)
	}
	var files []*zip.File
	seen := map[string]string{}
	var total uint64
	for _, f := range z.File {
		if name, isDir := strings.CutSuffix(f.Name, "/"); isDir {
			// Folders come by themselves; what names one must still be plain.
			if err := checkName(name); err != nil {
				return nil, err
			}
			continue
		}
		if err := checkMember(f); err != nil {
			return nil, err
		}
		key := strings.ToLower(f.Name)
		if other, ok := seen[key]; ok {
			return nil, fmt.Errorf("%s and %s stand for the same file", other, f.Name)
		}
		seen[key] = f.Name
		if total += f.UncompressedSize64; total > maxUnpacked {
			return nil, fmt.Errorf("the files have more than %d bytes together", int64(maxUnpacked))
		}
		files = append(files, f)
	}
	if total > fairSize && total/maxRatio > uint64(size) {
		return nil, fmt.Errorf("the pack would unpack to more than %d times its size", maxRatio)
	}
	for _, f := range files {
		for dir := path.Dir(strings.ToLower(f.Name)); dir != "."; dir = path.Dir(dir) {
			if other, ok := seen[dir]; ok {
				return nil, fmt.Errorf("%s is both a file and the folder of %s", other, f.Name)
			}
		}
	}
	return files, nil
}

// Unpack reads the pack at zipPath into the empty folder dir and verifies it:
// every file must be named in SHA256SUMS with its sum, and every file named there
// must be in the pack. Nothing is written outside dir. It returns the names of the
// files, sorted. On an error what has been written so far stays in dir for the
// caller to remove.
func Unpack(ctx context.Context, zipPath, dir string) ([]string, error) {
	names, err := unpack(ctx, zipPath, dir)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", zipPath, err)
	}
	return names, nil
}

func unpack(ctx context.Context, zipPath, dir string) ([]string, error) {
	f, info, err := openFile(zipPath)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	z, err := zip.NewReader(f, info.Size())
	if err != nil {
		return nil, fmt.Errorf("this is no pack: %w", err)
	}
	files, err := checkMembers(z, info.Size())
	if err != nil {
		return nil, err
	}
	root, err := os.OpenRoot(dir)
	if err != nil {
		return nil, err
	}
	defer root.Close()
	sums, err := sumsOf(files)
	if err != nil {
		return nil, err
	}
	var names []string
	var errs []error
	for _, f := range files {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		sum, err := extract(root, f)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", f.Name, err)
		}
		names = append(names, f.Name)
		if f.Name == sumsFile {
			continue
		}
		want, ok := sums[f.Name]
		delete(sums, f.Name)
		switch {
		case !ok:
			errs = append(errs, fmt.Errorf("%s is not named in %s", f.Name, sumsFile))
		case want != sum:
			errs = append(errs, fmt.Errorf("%s: SHA-256 %s is stated, the file has %s", f.Name, want, sum))
		}
	}
	var left []string
	for name := range sums {
		left = append(left, name)
	}
	slices.Sort(left)
	for _, name := range left {
		errs = append(errs, fmt.Errorf("%s (SHA-256 %s) is named in %s and not in the pack", name, sums[name], sumsFile))
	}
	if len(errs) > 0 {
		return nil, errors.Join(errs...)
	}
	slices.Sort(names)
	return names, nil
}

// sumsOf reads SHA256SUMS of a pack: lines of the sum, two blanks, the name.
func sumsOf(files []*zip.File) (map[string]string, error) {
	for _, f := range files {
		if f.Name != sumsFile {
			continue
		}
		const most = 8 << 20
		if f.UncompressedSize64 > most {
			return nil, fmt.Errorf("%s has more than %d bytes", sumsFile, most)
		}
		r, err := f.Open()
		if err != nil {
			return nil, err
		}
		defer r.Close()
		data, err := io.ReadAll(io.LimitReader(r, most))
		if err != nil {
			return nil, fmt.Errorf("%s: %w", sumsFile, err)
		}
		return parseSums(data)
	}
	return nil, fmt.Errorf("there is no %s in it: this is no pack of guardring", sumsFile)
}

func parseSums(data []byte) (map[string]string, error) {
	sums := map[string]string{}
	s := bufio.NewScanner(bytes.NewReader(data))
	s.Buffer(nil, 1<<16)
	for line := 1; s.Scan(); line++ {
		sum, name, ok := strings.Cut(s.Text(), "  ")
		raw, err := hex.DecodeString(sum)
		if !ok || err != nil || len(raw) != sha256.Size || sum != strings.ToLower(sum) {
			return nil, fmt.Errorf("%s, line %d: 64 hexadecimal digits, two blanks and a name are due", sumsFile, line)
		}
		if err := checkName(name); err != nil {
			return nil, fmt.Errorf("%s, line %d: %w", sumsFile, line, err)
		}
		if _, ok := sums[name]; ok {
			return nil, fmt.Errorf("%s, line %d: %s stands twice", sumsFile, line, name)
		}
		sums[name] = sum
	}
	if err := s.Err(); err != nil {
		return nil, fmt.Errorf("%s: %w", sumsFile, err)
	}
	return sums, nil
}

// extract writes one file under root and returns its SHA-256. Reading stops at the
// size that the directory states, and archive/zip checks size and CRC-32.
func extract(root *os.Root, f *zip.File) (string, error) {
	if dir := path.Dir(f.Name); dir != "." {
		if err := root.MkdirAll(dir, 0o755); err != nil {
			return "", err
		}
	}
	in, err := f.Open()
	if err != nil {
		return "", err
	}
	defer in.Close()
	out, err := root.OpenFile(f.Name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
	if err != nil {
		return "", err
	}
	h := sha256.New()
	n, err := io.Copy(io.MultiWriter(out, h), io.LimitReader(in, int64(f.UncompressedSize64)+1))
	if err == nil && uint64(n) > f.UncompressedSize64 {
		err = fmt.Errorf("it has more than the %d bytes that are stated", f.UncompressedSize64)
	}
	if e := out.Close(); err == nil {
		err = e
	}
	if err != nil {
		return "", err
	}
	return hex.EncodeToString(h.Sum(nil)), nil
}
