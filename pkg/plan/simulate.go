package plan

import (
	"bytes"
	"crypto/sha256"
	"encoding/csv"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/random"
	"example.org/guardring/pkg/reduce"
)

// stream names the random streams of simulated readings.
const stream = "simulation"

func isResponse(b *bench.Bench, channel int) bool {
	return b.Kind.Channels[channel].Role == model.Response
}

// Simulate makes the response readings of a bench from its truth: SI, one per
// data record, quantised to the channel's resolution.
func Simulate(b *bench.Bench, t *Truth, seed uint64) ([]float64, error) {
	of, names := reduce.SeriesOf(b)
	var q [][]float64
	for _, name := range names {
		v, err := t.Scalars(b, name)
		if err != nil {
			return nil, err
		}
		q = append(q, v)
	}
	m, err := t.Model(b, q[0])
	if err != nil {
		return nil, err
	}
	x, err := trueValues(b, m, t, seed)
	if err != nil {
		return nil, err
	}
	if err := valid(b, m, q, of, x); err != nil {
		return nil, err
	}
	return response(b, m, q, of, names, x, t, seed)
}

// valid refuses a truth for which the kind's formulas do not hold. Its warnings are
// those of the reduction, which looks at the same readings.
func valid(b *bench.Bench, m *model.Model, q [][]float64, of []int, x [][]float64) error {
	for s := range q {
		var rows []int
		for i, k := range b.Rows.Kind {
			if of[i] == s && (k == bench.Reading || k == bench.Overrange) && !b.Rows.Excluded[i] {
				rows = append(rows, i)
			}
		}
		if len(rows) == 0 {
			continue
		}
		xs, ys := make([][]float64, len(x)), make([]float64, len(rows))
		for p := range x {
			for _, i := range rows {
				xs[p] = append(xs[p], x[p][i])
			}
		}
		qj, xj := jet.Consts(q[s]), make([]jet.Jet, len(x))
		for n := range rows {
			for p := range xs {
				xj[p] = jet.Const(xs[p][n])
			}
			ys[n] = m.Row(qj, xj).V
		}
		_, err := m.Check(q[s], xs, ys)
		if err == nil {
			continue
		}
		truth := filepath.Join(b.Dir, TruthFile)
		var row *model.RowError
		if errors.As(err, &row) {
			file, line := b.Rows.Place(rows[row.Row])
			return fmt.Errorf("%s:%d: with the truth of %s: %w", file, line, truth, err)
		}
		return fmt.Errorf("%s: %w", truth, err)
	}
	return nil
}

// Scalars returns the true scalars of a series of the bench ("" when it has only
// one), SI, in the kind's order, squared where the kind takes squares. A truth
// named "factor (as-left)" is that series' own; one named "factor" holds for
// every series without. A scalar that the truth does not name is what the bench
// states of it, moved by the true errors of its instrument.
func (t *Truth) Scalars(b *bench.Bench, series string) ([]float64, error) {
	k := b.Kind
	q := make([]float64, len(k.Scalars))
	for i := range k.Scalars {
		key := k.Scalars[i].Key()
		v, ok := t.Values[reduce.SeriesName(key, series)]
		if !ok {
			v, ok = t.Values[key]
		}
		if !ok {
			if k.Scalars[i].Sought {
				return nil, fmt.Errorf("%s: truth.%s: a simulation needs the true value of what the bench seeks", filepath.Join(b.Dir, TruthFile), reduce.SeriesName(key, series))
			}
			v = t.stated(b, i)
		}
		if k.Scalars[i].Squared {
			v *= v
		}
		q[i] = v
	}
	return q, nil
}

// Model prepares the kind of a bench at true scalars q.
func (t *Truth) Model(b *bench.Bench, q []float64) (*model.Model, error) {
	k := b.Kind
	setup := &model.Setup{Channels: map[string]bool{}, On: b.Corrections, Options: b.Options, Given: map[string]bool{}, Adjusted: map[string]bool{}, Scalars: q}
	for i := range b.Channels {
		setup.Channels[b.Channels[i].Name] = true
	}
	for i := range k.Scalars {
		key := k.Scalars[i].Key()
		_, ok := t.Values[key]
		setup.Given[key] = b.Scalars[i].Given || ok
		setup.Adjusted[key] = b.Scalars[i].Adjust
	}
	m, err := k.Prepare(k, setup)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", b.Dir, err)
	}
	return m, nil
}

// scale returns the true gain and offset of a channel, moved by the true errors of
// the instruments that give its readings.
func (t *Truth) scale(b *bench.Bench, ch *bench.Channel) (gain, offset float64) {
	gain = 1
	if ch.HasGain {
		gain = ch.Gain.Value
	}
	if ch.HasOffset {
		offset = ch.Offset.Value
	}
	if v, ok := t.Values["channels."+ch.Name+".gain"]; ok {
		gain = v
	}
	if v, ok := t.Values["channels."+ch.Name+".offset"]; ok {
		offset = v
	}
	for i := range b.Instruments {
		if in := &b.Instruments[i]; ch.From(in.Name) {
			factor, add := t.moved(in)
			gain, offset = gain*factor, offset+add
		}
	}
	return gain, offset
}

// moved is by what factor and by how much an instrument has really moved since its
// calibration.
func (t *Truth) moved(in *bench.Instrument) (factor, add float64) {
	factor = 1
	for k := range in.Allowances {
		a := &in.Allowances[k]
		e, ok := t.Values[a.Name]
		switch {
		case !ok:
		case a.Relative:
			factor *= 1 + e
		default:
			add += e
		}
	}
	return factor, add
}

// stated is the true value of scalar i where the truth does not name it: what the
// bench states, moved by the true errors of the instrument that gave it.
func (t *Truth) stated(b *bench.Bench, i int) float64 {
	s := &b.Scalars[i]
	v := s.Dist.Value
	for n := range b.Instruments {
		if in := &b.Instruments[n]; s.From(in.Name) {
			factor, add := t.moved(in)
			v = v*factor + add
		}
	}
	return v
}

// trueValues draws what the predictors really were.
func trueValues(b *bench.Bench, m *model.Model, t *Truth, seed uint64) ([][]float64, error) {
	var x [][]float64
	for _, name := range m.Predictors {
		i := channelNamed(b, name)
		if i < 0 {
			return nil, fmt.Errorf("%s: channels.%s: the model %s needs this channel", b.Dir, name, b.Kind.Name)
		}
		ch := &b.Channels[i]
		src := random.New(seed, stream+" "+name, 0)
		gain, offset := t.scale(b, ch)
		v := make([]float64, b.Rows.N)
		for i, r := range ch.Readings {
			e := math.Hypot(ch.Noise, ch.RelativeNoise*r) * src.Normal()
			if ch.Resolution > 0 {
				e += ch.Resolution * (src.Float64() - 0.5)
			}
			v[i] = gain*(r+e) + offset
		}
		for _, g := range ch.Grouped {
			grouped(&src, &g, v, ch.Readings)
		}
		x = append(x, v)
	}
	if m.TimeDependent {
		x = append(x, b.Rows.Time)
	}
	return x, nil
}

// response predicts the readings and disturbs them.
func response(b *bench.Bench, m *model.Model, q [][]float64, of []int, names []string, x [][]float64, t *Truth, seed uint64) ([]float64, error) {
	ch := &b.Channels[responseChannel(b)]
	gain, offset := t.scale(b, ch)
	src := random.New(seed, stream+" "+ch.Name, 0)
	qj := make([][]jet.Jet, len(q))
	for s := range q {
		qj[s] = jet.Consts(q[s])
	}
	xj := make([]jet.Jet, len(x))
	noise := ch.Noise
	if ch.FromResiduals {
		return nil, fmt.Errorf("%s: channels.%s.noise: a simulation needs the noise as a number, not from the residuals", b.Dir, ch.Name)
	}
	y := make([]float64, b.Rows.N)
	for i := range y {
		for p := range x {
			xj[p] = jet.Const(x[p][i])
		}
		// A zero is read with the cause removed, a blank with everything but the
		// cause: neither holds what the model predicts, not even for what is left
		// at the settings of the row, such as a contact potential.
		var truth float64
		if k := b.Rows.Kind[i]; k == bench.Reading || k == bench.Overrange {
			truth = m.Row(qj[of[i]], xj).V
		}
		f := (truth*(1+t.defect(b, i, names[of[i]])) - offset) / gain
		if b.Rows.Kind[i] != bench.Zero {
			f += t.Blank
		}
		y[i] = f + t.ZeroStart + math.Hypot(noise, ch.RelativeNoise*f)*src.Normal()
		if t.ZeroRate != 0 && b.Rows.HasTime {
			y[i] += t.ZeroRate * (b.Rows.Time[i] - b.Rows.Time[0])
		}
		if t.ZeroSettling != 0 && b.Rows.HasTime {
			y[i] += t.ZeroSettling * math.Exp(-(b.Rows.Time[i]-b.Rows.Time[0])/t.ZeroTime)
		}
	}
	for _, g := range ch.Grouped {
		grouped(&src, &g, y, append([]float64(nil), y...))
	}
	for _, f := range t.Faults {
		y[f.Row-1] += f.Add
	}
	for i, v := range y {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			file, line := b.Rows.Place(i)
			return nil, fmt.Errorf("%s:%d: the model gives %g for this setting; check the truth and the settings", file, line, v)
		}
		if ch.Resolution > 0 {
			y[i] = math.Round(v/ch.Resolution) * ch.Resolution
		}
	}
	return y, nil
}

// grouped adds the errors that the rows of a group share: fixed ones, and ones
// relative to the values of, which change sign with them.
func grouped(src *random.Source, g *bench.Grouped, v, of []float64) {
	errs := make([]float64, g.Count)
	if g.U > 0 {
		src.FillNormal(errs)
		for i := range v {
			v[i] += g.U * errs[g.Group[i]]
		}
	}
	if g.Relative > 0 {
		src.FillNormal(errs)
		for i := range v {
			v[i] += g.Relative * of[i] * errs[g.Group[i]]
		}
	}
}

// defect is the relative change that the stated defects bring to record i.
func (t *Truth) defect(b *bench.Bench, i int, series string) float64 {
	var d float64
	for _, x := range t.Defects {
		if x.Series != "" && x.Series != series {
			continue
		}
		switch b.Rows.Label(x.By, i) {
		case "+", "positive", "up":
			d += x.Size
		case "-", "−", "negative", "down":
			d -= x.Size
		}
	}
	return d
}

// File is a file of a simulated bench, named relative to its folder.
type File struct {
	Name string
	Data []byte
}

// Files returns the files of the bench with the response column of its readings
// replaced, and a pin of their SHA-256 in bench.toml with it. All other values in
// them stay as they are.
func Files(b *bench.Bench, y []float64) ([]File, error) {
	ch := &b.Channels[responseChannel(b)]
	var files []File
	record := 0
	sums := map[string]string{} // of the readings, new by old
	for _, in := range b.Inputs {
		data, err := os.ReadFile(filepath.Join(b.Dir, filepath.FromSlash(in.File)))
		if err != nil {
			return nil, err
		}
		if in.Rows > 0 {
			if data, err = replaceColumn(data, &in, ch, y[record:record+in.Rows]); err != nil {
				return nil, fmt.Errorf("%s: %w", in.File, err)
			}
			record += in.Rows
			sum := sha256.Sum256(data)
			sums[in.SHA256] = hex.EncodeToString(sum[:])
		}
		files = append(files, File{Name: in.File, Data: data})
	}
	// bench.toml is the first of a bench's files.
	files[0].Data = digest.ReplaceAllFunc(files[0].Data, func(old []byte) []byte {
		if sum, ok := sums[strings.ToLower(string(old))]; ok {
			return []byte(sum)
		}
		return old
	})
	truth, err := os.ReadFile(filepath.Join(b.Dir, TruthFile))
	if err != nil {
		return nil, err
	}
	return append(files, File{Name: TruthFile, Data: truth}), nil
}

// digest is a SHA-256 in hexadecimal.
var digest = regexp.MustCompile(`\b[0-9a-fA-F]{64}\b`)

// replaceColumn rewrites the column of a channel in a CSV file, in the way in which
// the file is written.
func replaceColumn(data []byte, in *bench.Input, ch *bench.Channel, y []float64) ([]byte, error) {
	mark := []byte("\xef\xbb\xbf")
	text := bytes.TrimPrefix(data, mark)
	r := csv.NewReader(bytes.NewReader(text))
	r.Comma = rune(in.Separator)
	r.FieldsPerRecord = -1
	var out bytes.Buffer
	if len(text) < len(data) {
		out.Write(mark)
	}
	w := csv.NewWriter(&out)
	w.Comma = r.Comma
	line, _, _ := bytes.Cut(text, []byte("\n"))
	w.UseCRLF = bytes.HasSuffix(line, []byte("\r"))
	column, record := -1, -1
	for {
		fields, err := r.Read()
		if err == io.EOF {
			break
		} else if err != nil {
			return nil, err
		}
		if column < 0 {
			for i, f := range fields {
				if strings.TrimSpace(f) == ch.Column {
					column = i
				}
			}
			if column < 0 {
				return nil, fmt.Errorf("there is no column %q", ch.Column)
			}
		} else {
			record++
			if record >= len(y) || column >= len(fields) {
				return nil, errChanged
			}
			fields[column] = decimal(ch, y[record])
			if in.DecimalComma {
				fields[column] = strings.Replace(fields[column], ".", ",", 1)
			}
		}
		if err := w.Write(fields); err != nil {
			return nil, err
		}
	}
	if record+1 != len(y) {
		return nil, errChanged
	}
	w.Flush()
	return out.Bytes(), w.Error()
}

var errChanged = errors.New("the file has changed since it was read")

// decimal prints a reading in the channel's unit with the digits its resolution
// has; without a resolution, with those its noise leaves meaningful.
func decimal(ch *bench.Channel, v float64) string {
	step := ch.Unit.DeltaFromSI(ch.Resolution)
	if step == 0 {
		step = ch.Unit.DeltaFromSI(math.Hypot(ch.Noise, ch.RelativeNoise*v)) / 10
	}
	digits := 6
	if step > 0 {
		digits = max(0, int(math.Ceil(-math.Log10(step)-1e-9)))
	}
	s := strconv.FormatFloat(ch.Unit.FromSI(v), 'f', digits, 64)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return s
}
