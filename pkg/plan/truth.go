package plan

import (
	"bytes"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"sort"
	"strconv"
	"strings"

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
	// Values holds true scalars by key, true gains and offsets (of the day of the
	// calibration) as "channels.NAME.gain" and "channels.NAME.offset", and what
	// instruments have moved by since as "instruments.NAME.drift" and
	// "instruments.NAME.temperature".
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

// truthFile is the layout of simulation.toml. What is a quantity is read as it
// stands, so that a number without a unit is told in our words.
type truthFile struct {
	Format int            `toml:"format"`
	Seed   any            `toml:"seed"`
	Truth  map[string]any `toml:"truth"`
	Zero   struct {
		Start        any `toml:"start"`
		PerHour      any `toml:"per_hour"`
		Settling     any `toml:"settling"`
		TimeConstant any `toml:"time_constant"`
	} `toml:"zero"`
	Blank struct {
		Add any `toml:"add"`
	} `toml:"blank"`
	Fault []struct {
		Row int `toml:"row"`
		Add any `toml:"add"`
	} `toml:"fault"`
	Defect []struct {
		By     string `toml:"by"`
		Series string `toml:"series"`
		Size   any    `toml:"size"`
	} `toml:"defect"`
}

// truthKeys are the keys of the file but for those of [truth], for hints.
var truthKeys = []string{"format", "seed", "truth", "zero", "start", "per_hour", "settling", "time_constant", "blank", "add", "fault", "row", "defect", "by", "series", "size"}

// ReadTruth reads simulation.toml in the folder of a bench.
func ReadTruth(b *bench.Bench) (*Truth, error) {
	path := filepath.Join(b.Dir, TruthFile)
	data, err := os.ReadFile(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("%s: there is no such file; a simulation needs the truth stated there", path)
	} else if err != nil {
		return nil, err
	}
	places, err := bench.FindPlaces(path, data)
	if err != nil {
		return nil, err
	}
	var f truthFile
	d := toml.NewDecoder(bytes.NewReader(bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))))
	d.DisallowUnknownFields()
	if err := d.Decode(&f); err != nil {
		return nil, places.Undecoded(err, truthKeys)
	}
	if f.Format != 1 {
		return nil, places.Errorf("format", "format", "format %d is not known; this version reads format = 1", f.Format)
	}
	t := &Truth{Values: map[string]float64{}}
	switch n, ok := f.Seed.(int64); {
	case f.Seed == nil:
	case !ok || n < 0:
		return nil, places.Errorf("seed", "seed", "%#v is no seed; write a whole number, zero or above", f.Seed)
	default:
		t.Seed = uint64(n)
	}
	inputs := truthInputs(b)
	known := make([]string, 0, len(inputs))
	for k := range inputs {
		known = append(known, k)
	}
	sort.Strings(known)
	// at is the key in the file where it is not the one that messages show.
	quantity := func(key, at string, value any, unit si.Unit) (float64, error) {
		text, ok := value.(string)
		switch value.(type) {
		case int64, float64:
			if unit.Dim.IsOne() {
				text, ok = fmt.Sprint(value), true
				break
			}
			return 0, places.Errorf(at, key, "%v has no unit; write it with its unit (for example \"%v %s\")", value, value, unit.Symbol)
		}
		if !ok {
			return 0, places.Errorf(at, key, "want a text with a unit, such as \"1 %s\"", unit.Symbol)
		}
		v, u, err := si.ParseQuantity(text)
		if err != nil {
			return 0, places.Errorf(at, key, "%v", err)
		}
		if u.Dim != unit.Dim {
			return 0, places.Errorf(at, key, "%s", bench.WrongDimension(text, u, unit))
		}
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return 0, places.Errorf(at, key, "%q is not a finite number", text)
		}
		return v, nil
	}
	keys := make([]string, 0, len(f.Truth))
	for key := range f.Truth {
		keys = append(keys, key)
	}
	sort.Strings(keys)
	for _, key := range keys {
		in, ok := inputs[key]
		at := "truth." + key
		if strings.Trim(key, bareKey) != "" {
			at = "truth." + strconv.Quote(key)
		}
		if !ok {
			hint := ""
			if s := si.Suggest(key, known); s != "" {
				hint = fmt.Sprintf("; did you mean %q?", s)
			}
			return nil, places.Errorf(at, "truth", "%q is no input of model %s%s", key, b.Kind.Name, hint)
		}
		v, err := quantity("truth."+key, at, f.Truth[key], in.unit)
		switch {
		case err != nil:
			return nil, err
		case in.positive && !(v > 0):
			return nil, places.Errorf(at, "truth."+key, "%q must be above zero: %s", fmt.Sprint(f.Truth[key]), in.doc)
		case in.gain && v == 0:
			return nil, places.Errorf(at, "truth."+key, "a gain of zero leaves nothing of the readings")
		}
		t.Values[key] = v
	}
	response := responseUnit(b)
	if f.Zero.Start != nil {
		if t.ZeroStart, err = quantity("zero.start", "zero.start", f.Zero.Start, response); err != nil {
			return nil, err
		}
	}
	if f.Zero.PerHour != nil {
		if t.ZeroRate, err = quantity("zero.per_hour", "zero.per_hour", f.Zero.PerHour, response); err != nil {
			return nil, err
		}
		t.ZeroRate /= 3600
	}
	if f.Zero.Settling != nil {
		if t.ZeroSettling, err = quantity("zero.settling", "zero.settling", f.Zero.Settling, response); err != nil {
			return nil, err
		}
		if t.ZeroTime, err = quantity("zero.time_constant", "zero.time_constant", f.Zero.TimeConstant, si.MustUnit("s")); err != nil {
			return nil, err
		}
		if !(t.ZeroTime > 0) {
			return nil, places.Errorf("zero.time_constant", "zero.time_constant", "%q must be above zero", fmt.Sprint(f.Zero.TimeConstant))
		}
	}
	if f.Blank.Add != nil {
		if t.Blank, err = quantity("blank.add", "blank.add", f.Blank.Add, response); err != nil {
			return nil, err
		}
	}
	for i, x := range f.Fault {
		at := fmt.Sprintf("fault[%d].", i+1)
		add, err := quantity("fault.add", at+"add", x.Add, response)
		if err != nil {
			return nil, err
		}
		if x.Row < 1 || x.Row > b.Rows.N {
			return nil, places.Errorf(at+"row", "fault.row", "%d is not a data record; there are %d, counted from 1", x.Row, b.Rows.N)
		}
		t.Faults = append(t.Faults, Fault{Row: x.Row, Add: add})
	}
	for i, x := range f.Defect {
		at := fmt.Sprintf("defect[%d].", i+1)
		if x.By != "polarity" && x.By != "direction" {
			return nil, places.Errorf(at+"by", "defect.by", "%q is not known; use polarity or direction", x.By)
		}
		if b.Rows.Labels[x.By] == nil {
			return nil, places.Errorf(at+"by", "defect.by", "the bench names no column in [rows] %s", x.By)
		}
		size, err := quantity("defect.size", at+"size", x.Size, si.MustUnit("1"))
		if err != nil {
			return nil, err
		}
		t.Defects = append(t.Defects, Defect{By: x.By, Series: x.Series, Size: size})
	}
	return t, nil
}

// bareKey holds the characters of a key of TOML that needs no quotes.
const bareKey = "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789_-"

// truthInput is one number that a truth may name.
type truthInput struct {
	unit     si.Unit // a unit of its dimension
	doc      string
	positive bool // must be above zero
	gain     bool // must not be zero
}

// truthInputs lists what a truth may name.
func truthInputs(b *bench.Bench) map[string]truthInput {
	inputs := map[string]truthInput{}
	_, series := reduce.SeriesOf(b)
	for i := range b.Kind.Scalars {
		s := &b.Kind.Scalars[i]
		in := truthInput{unit: s.Unit, doc: s.Doc, positive: s.Positive}
		inputs[s.Key()] = in
		for _, name := range series {
			if s.Own {
				inputs[reduce.SeriesName(s.Key(), name)] = in
			}
		}
	}
	for i := range b.Channels {
		ch := &b.Channels[i]
		inputs["channels."+ch.Name+".gain"] = truthInput{unit: si.MustUnit("1"), gain: true}
		inputs["channels."+ch.Name+".offset"] = truthInput{unit: ch.Unit}
	}
	for i := range b.Instruments {
		for _, a := range b.Instruments[i].Allowances {
			inputs[a.Name] = truthInput{unit: a.Unit}
		}
	}
	return inputs
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
