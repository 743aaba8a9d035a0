package bench

import (
	"errors"

	"example.org/guardring/pkg/model"
)

// Open reads the dataset in folder dir: bench.toml and the readings it names.
func Open(dir string) (*Bench, error) { return nil, errors.New("not ready") }

// OpenWith is Open for a bench of the given kind; bench.toml must name it.
func OpenWith(kind *model.Kind, dir string) (*Bench, error) { return nil, errors.New("not ready") }

// Exclude returns a copy of the bench in which data record row, counted from 1
// over all files, is left out for the given reason.
func (b *Bench) Exclude(row int, reason string) (*Bench, error) { return nil, errors.New("not ready") }

// Starter returns a commented bench file with every key that the kind takes and
// the header line of a readings file that fits it.
func Starter(kind *model.Kind) (benchTOML, csvHeader []byte) { return nil, nil }
