package bench

import (
	"bytes"
	"errors"
	"io"
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
func (l *loader) openReadings(f *readingsFile) (io.ReadCloser, int64, error) {
	if l.instead == nil {
		file, size, err := l.folder.open(f.name)
		if err != nil {
			return nil, 0, err
		}
		return file, size, nil
	}
	return io.NopCloser(bytes.NewReader(l.instead.data)), int64(len(l.instead.data)), nil
}
