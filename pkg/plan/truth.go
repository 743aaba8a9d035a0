package plan

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"sort"

	"github.com/pelletier/go-toml/v2"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// TruthFile is the name of the file that states the truth of a simulation.
const TruthFile = "simulation.toml"

// Truth is what a simulated bench really is, in SI.
type Truth struct {
	Seed uint64
	// Values holds true scalars by key, and true gains and offsets as
	// "channels.NAME.gain" and "channels.NAME.offset".
	Values map[string]float64
	// ZeroStart and ZeroRate are the zero of the response at the first record,
	// and its drift per second. ZeroSettling is what it had still to lose at the
	// first record, with the time constant ZeroTime (s).
	ZeroStart, ZeroRate, ZeroSettling, ZeroTime float64
	// Blank is what the cycle of a measurement adds to readings and blanks, and
	// not to zeros.
	Blank float64
	// Faults are added to single readings of the response.
	Faults []Fault
	// Defects change the response in a way the model does not know.
	Defects []Defect
}

// Defect changes the response f of the rows of a series to f(1 + Size·h), h being
// +1 or −1 by the word of a row column: positive and negative polarity, rising
// and falling direction.
type Defect struct {
	By     string // "polarity" or "direction"
	Series string // "" for all
	Size   float64
}

// Fault is a disturbance of one reading.
type Fault struct {
	Row int     // data record, from 1
	Add float64 // unit of the response, SI
}

// truthFile is the layout of simulation.toml.
type truthFile struct {
	Format int               `toml:"format"`
	Seed   uint64            `toml:"seed"`
	Truth  map[string]string `toml:"truth"`
	Zero   struct {
		Start        string `toml:"start"`
		PerHour      string `toml:"per_hour"`
		Settling     string `toml:"settling"`
		TimeConstant string `toml:"time_constant"`
	} `toml:"zero"`
	Blank struct {
		Add string `toml:"add"`
	} `toml:"blank"`
	Fault []struct {
		Row int    `toml:"row"`
		Add string `toml:"add"`
	} `toml:"fault"`
	Defect []struct {
		By     string `toml:"by"`
		Series string `toml:"series"`
		Size   string `toml:"size"`
	} `toml:"defect"`
}

// ReadTruth reads simulation.toml in the folder of a bench.
func ReadTruth(b *bench.Bench) (*Truth, error) {
	path := filepath.Join(b.Dir, TruthFile)
	data, err := os.ReadFile(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("%s: there is no such file; a simulation needs the truth stated there", path)
	} else if err != nil {
		return nil, err
	}
	var f truthFile
	if err := toml.Unmarshal(data, &f); err != nil {
		var d *toml.DecodeError
		if errors.As(err, &d) {
			row, col := d.Position()
			return nil, fmt.Errorf("%s:%d:%d: %w", path, row, col, err)
		}
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if f.Format != 1 {
		return nil, fmt.Errorf("%s: format %d is not known; this version reads format = 1", path, f.Format)
	}
	t := &Truth{Seed: f.Seed, Values: map[string]float64{}}
	units := truthUnits(b)
	known := make([]string, 0, len(units))
	for k := range units {
		known = append(known, k)
	}
	sort.Strings(known)
	quantity := func(key, text string, unit si.Unit) (float64, error) {
		v, u, err := si.ParseQuantity(text)
		if err == nil && u.Dim != unit.Dim {
			err = fmt.Errorf("%q is in %s; %s is due", text, u.Dim, unit.Symbol)
		}
		if err != nil {
			return 0, fmt.Errorf("%s: %s: %w", path, key, err)
		}
		return v, nil
	}
	keys := make([]string, 0, len(f.Truth))
	for key := range f.Truth {
		keys = append(keys, key)
	}
	sort.Strings(keys)
	for _, key := range keys {
		unit, ok := units[key]
		if !ok {
			hint := ""
			if s := si.Suggest(key, known); s != "" {
				hint = fmt.Sprintf("; did you mean %q?", s)
			}
			return nil, fmt.Errorf("%s: truth: %q is no input of model %s%s", path, key, b.Kind.Name, hint)
		}
		if t.Values[key], err = quantity("truth."+key, f.Truth[key], unit); err != nil {
			return nil, err
		}
	}
	response := responseUnit(b)
	if f.Zero.Start != "" {
		if t.ZeroStart, err = quantity("zero.start", f.Zero.Start, response); err != nil {
			return nil, err
		}
	}
	if f.Zero.PerHour != "" {
		if t.ZeroRate, err = quantity("zero.per_hour", f.Zero.PerHour, response); err != nil {
			return nil, err
		}
		t.ZeroRate /= 3600
	}
	if f.Zero.Settling != "" {
		if t.ZeroSettling, err = quantity("zero.settling", f.Zero.Settling, response); err != nil {
			return nil, err
		}
		if t.ZeroTime, err = quantity("zero.time_constant", f.Zero.TimeConstant, si.MustUnit("s")); err != nil {
			return nil, err
		}
		if !(t.ZeroTime > 0) {
			return nil, fmt.Errorf("%s: zero.time_constant: %q must be above zero", path, f.Zero.TimeConstant)
		}
	}
	if f.Blank.Add != "" {
		if t.Blank, err = quantity("blank.add", f.Blank.Add, response); err != nil {
			return nil, err
		}
	}
	for _, x := range f.Fault {
		add, err := quantity("fault.add", x.Add, response)
		if err != nil {
			return nil, err
		}
		if x.Row < 1 || x.Row > b.Rows.N {
			return nil, fmt.Errorf("%s: fault.row: %d is not a data record; there are %d, counted from 1", path, x.Row, b.Rows.N)
		}
		t.Faults = append(t.Faults, Fault{Row: x.Row, Add: add})
	}
	for _, x := range f.Defect {
		if x.By != "polarity" && x.By != "direction" {
			return nil, fmt.Errorf("%s: defect.by: %q is not known; use polarity or direction", path, x.By)
		}
		if b.Rows.Labels[x.By] == nil {
			return nil, fmt.Errorf("%s: defect.by: the bench names no column in [rows] %s", path, x.By)
		}
		size, err := quantity("defect.size", x.Size, si.MustUnit("1"))
		if err != nil {
			return nil, err
		}
		t.Defects = append(t.Defects, Defect{By: x.By, Series: x.Series, Size: size})
	}
	return t, nil
}

// truthUnits lists what a truth may name, with a unit of its dimension.
func truthUnits(b *bench.Bench) map[string]si.Unit {
	units := map[string]si.Unit{}
	_, series := reduce.SeriesOf(b)
	for i := range b.Kind.Scalars {
		s := &b.Kind.Scalars[i]
		units[s.Key()] = s.Unit
		for _, name := range series {
			if s.Own {
				units[reduce.SeriesName(s.Key(), name)] = s.Unit
			}
		}
	}
	for i := range b.Channels {
		ch := &b.Channels[i]
		units["channels."+ch.Name+".gain"] = si.MustUnit("1")
		units["channels."+ch.Name+".offset"] = ch.Unit
	}
	return units
}

// responseUnit is the unit of the response that the bench reads.
func responseUnit(b *bench.Bench) si.Unit {
	if i := responseChannel(b); i >= 0 {
		return b.Channels[i].Unit
	}
	return si.MustUnit("1")
}

// responseChannel is the index of the response among the bench's channels.
func responseChannel(b *bench.Bench) int {
	for i := range b.Channels {
		if k := b.Kind.Channel(b.Channels[i].Name); k >= 0 && isResponse(b, k) {
			return i
		}
	}
	return -1
}
