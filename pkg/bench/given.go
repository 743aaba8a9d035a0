package bench

import (
	"bytes"
	"errors"
	"io/fs"
	"time"
)

// givenReadings stand in for the files that a bench names.
type givenReadings struct {
	name string
	data []byte
}

// OpenReadings is Open with other readings: bench.toml comes from folder dir, and
// the readings from csv instead of the files that it names. They are comma
// separated with a decimal point, empty where missing, under the headers that
// bench.toml expects. name stands for them in errors and in Bench.Inputs, with
// the SHA-256 of csv; pins of the files do not apply.
func OpenReadings(dir, name string, csv []byte) (*Bench, error) {
	if name == "" {
		return nil, errors.New("bench: the readings have no name")
	}
	return open(nil, dir, &givenReadings{name, csv})
}

// openReadings opens a file of readings, or what stands in for it.
func (l *loader) openReadings(f *readingsFile) (fs.File, int64, error) {
	if l.instead == nil {
		file, size, err := l.folder.open(f.name)
		if err != nil {
			return nil, 0, err
		}
		return file, size, nil
	}
	return &memoryFile{bytes.NewReader(l.instead.data), l.instead}, int64(len(l.instead.data)), nil
}

// memoryFile is given readings as a file.
type memoryFile struct {
	*bytes.Reader
	of *givenReadings
}

func (m *memoryFile) Close() error               { return nil }
func (m *memoryFile) Stat() (fs.FileInfo, error) { return m.of, nil }

// The methods of fs.FileInfo.
func (g *givenReadings) Name() string       { return g.name }
func (g *givenReadings) Size() int64        { return int64(len(g.data)) }
func (g *givenReadings) Mode() fs.FileMode  { return 0o444 }
func (g *givenReadings) ModTime() time.Time { return time.Time{} }
func (g *givenReadings) IsDir() bool        { return false }
func (g *givenReadings) Sys() any           { return nil }
