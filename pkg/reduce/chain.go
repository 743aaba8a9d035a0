package reduce

import (
	"errors"
	"fmt"
	"math"
	"runtime"
	"strconv"
	"strings"
	"sync"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/si"
)

// chain is a bench prepared for fitting: numbers only, in SI, rows in use
// first to last.
type chain struct {
	b     *bench.Bench // with the scalars of every series
	kind  *model.Kind  // as registered
	setup *model.Setup
	m     *model.Model
	one   *model.Model // of one series

	q     []float64 // scalars in the kind's order, as predictions take them
	free  []int     // indices of the estimated ones
	start []float64 // their starting values

	pred []int // index into b.Channels of each predictor the model takes
	resp int   // likewise of the response

	record []int       // data record of each row in use
	xr     [][]float64 // predictor readings [predictor][row]
	x      [][]float64 // their true values at the stated gains and offsets
	y      []float64   // response readings, after the zero correction
	zero   *zeroModel  // nil when there is none
	series *series     // nil when all rows are one

	fitU []float64 // standard uncertainties of the estimates, from the fit

	// What was read, when errors in variables have moved x, xr and y to where the
	// fit linearises; nil otherwise.
	readX [][]float64
	readY []float64

	inputs []input     // shared inputs and priors: what the budget lists by name
	comps  []component // what varies between rows
	fitted []float64   // predictions at the last weights, where components need them
	scale  float64     // noise of the response when it is unknown: the current estimate

	warnings []error
}

// inputKind says where an input enters.
type inputKind int

const (
	scalarInput inputKind = iota
	gainInput
	offsetInput
	priorInput
	instrumentInput
)

// input is one shared input or prior.
type input struct {
	kind    inputKind
	name    string
	group   string
	source  string
	unit    si.Unit
	index   int // scalar, or channel: −1 the response, else the predictor
	squared bool
	dist    gum.Distribution // as stated
	value   float64          // as it enters (Δ² when squared)
	u       float64
	dof     float64

	// Of an instrument: what its error moves, and whether it is a part of that.
	targets  []target
	relative bool
}

// lineOf returns the line, as "17:", of the value or table whose key the error of a
// model begins with, nothing when the file does not state it.
func lineOf(b *bench.Bench, err error) string {
	key, _, _ := strings.Cut(err.Error(), ":")
	for _, s := range b.Scalars {
		if s.Line > 0 && (s.Key == key || strings.HasPrefix(s.Key, key+".")) {
			return strconv.Itoa(s.Line) + ":"
		}
	}
	return ""
}

// newChain prepares a bench.
func newChain(b *bench.Bench) (*chain, error) {
	c := &chain{b: b, scale: math.NaN()}
	k := b.Kind
	c.kind = k
	c.setup = &model.Setup{Channels: map[string]bool{}, On: b.Corrections, Options: b.Options, Given: map[string]bool{}, Adjusted: map[string]bool{}}
	for _, ch := range b.Channels {
		c.setup.Channels[ch.Name] = true
	}
	c.q = make([]float64, len(k.Scalars))
	for i, s := range b.Scalars {
		c.setup.Given[s.Name] = s.Given
		c.setup.Adjusted[s.Name] = s.Adjust
		c.q[i] = s.Dist.Value
		if k.Scalars[i].Squared {
			c.q[i], _ = squareMoments(s.Dist)
		}
	}
	c.setup.Scalars = append([]float64(nil), c.q...)
	var err error
	if c.m, err = k.Prepare(k, c.setup); err != nil {
		return nil, fmt.Errorf("%s/bench.toml:%s %w", b.Dir, lineOf(b, err), err)
	}
	c.one = c.m
	c.expandSeries()
	k, b = c.b.Kind, c.b
	if err := c.findChannels(); err != nil {
		return nil, err
	}
	for i, s := range b.Scalars {
		if s.Adjust || k.Scalars[i].Sought {
			if !c.active(i) {
				return nil, fmt.Errorf("%s/bench.toml:%d: %s: adjust = true, but its correction is off; switch the correction on, or leave adjust out", b.Dir, s.Line, s.Key)
			}
			c.free = append(c.free, i)
		}
	}
	if err := c.takeRows(); err != nil {
		return nil, err
	}
	c.correctReadings()
	if c.zero, err = c.fitZero(); err != nil {
		return nil, err
	}
	c.applyZero()
	if err := c.checkAir(); err != nil {
		return nil, err
	}
	warn, err := c.m.Check(c.q, c.x, c.y)
	if err != nil {
		return nil, c.locate(err)
	}
	c.warnings = append(c.warnings, warn...)
	c.listInputs()
	if err := c.listComponents(); err != nil {
		return nil, err
	}
	if err := c.starts(); err != nil {
		return nil, err
	}
	return c, nil
}

// findChannels resolves the channels of the model.
func (c *chain) findChannels() error {
	find := func(name string) (int, error) {
		for i := range c.b.Channels {
			if c.b.Channels[i].Name == name {
				return i, nil
			}
		}
		return 0, fmt.Errorf("%s/bench.toml: channels.%s: the model %s needs this channel", c.b.Dir, name, c.b.Kind.Name)
	}
	var err error
	if c.resp, err = find(c.m.Response); err != nil {
		return err
	}
	for _, name := range c.m.Predictors {
		i, err := find(name)
		if err != nil {
			return err
		}
		c.pred = append(c.pred, i)
	}
	return nil
}

// takeRows selects the readings that enter the fit.
func (c *chain) takeRows() error {
	r := &c.b.Rows
	for i := range r.N {
		if r.Excluded[i] || r.Kind[i] != bench.Reading {
			continue
		}
		for _, p := range append([]int{c.resp}, c.pred...) {
			if math.IsNaN(c.b.Channels[p].Readings[i]) {
				return fmt.Errorf("%s: column %s: the value is missing; fill it in or exclude data record %d with a reason",
					c.place(i), c.b.Channels[p].Column, i+1)
			}
		}
		c.record = append(c.record, i)
	}
	n := len(c.record)
	need := len(c.free)
	for _, f := range c.free {
		if c.b.Scalars[f].HasPrior {
			need--
		}
	}
	if n < need || n == 0 {
		return c.tooFew(n, need)
	}
	pick := func(all []float64) []float64 {
		v := make([]float64, n)
		for k, i := range c.record {
			v[k] = all[i]
		}
		return v
	}
	for _, p := range c.pred {
		c.xr = append(c.xr, pick(c.b.Channels[p].Readings))
	}
	c.y = pick(c.b.Channels[c.resp].Readings)
	if c.m.TimeDependent {
		for k := range c.record {
			if math.IsNaN(c.seconds(k)) {
				return fmt.Errorf("%s: the model %s needs the time of every reading; name its column in [rows] time", c.place(c.record[k]), c.b.Kind.Name)
			}
		}
	}
	return nil
}

// tooFew says why there are not enough rows, and what would be right.
func (c *chain) tooFew(n, need int) error {
	r := &c.b.Rows
	if n > 0 || r.N == 0 {
		return fmt.Errorf("%s: %s in use for %s to estimate; take more readings or fix parameters in bench.toml", c.b.Dir, plural(n, "row"), plural(need, "parameter"))
	}
	file := strings.Join(r.Files, ", ")
	readings := 0
	for i := range r.N {
		if r.Kind[i] == bench.Reading {
			readings++
		}
	}
	if readings > 0 {
		return fmt.Errorf("%s: no row is in use: %s of kind \"reading\", and all of them excluded; take back an exclusion in bench.toml", file, plural(readings, "row"))
	}
	return fmt.Errorf("%s: column %s: no row is a reading: all %s are zeros, blanks or beyond the range; mark the readings \"reading\" there", file, r.Columns["kind"], plural(r.N, "row"))
}

// plural counts things.
func plural(n int, one string) string {
	if n == 1 {
		return "1 " + one
	}
	return fmt.Sprintf("%d %ss", n, one)
}

// seconds is the time of row i in use, s; NaN when unknown.
func (c *chain) seconds(i int) float64 {
	if r := &c.b.Rows; r.HasTime {
		return r.Time[c.record[i]]
	}
	return math.NaN()
}

// place names a data record by file and line.
func (c *chain) place(record int) string {
	file, line := c.b.Rows.Place(record)
	return fmt.Sprintf("%s:%d", file, line)
}

// locate gives an error about a row in use its file and line, and one about a key of
// the bench the line of that.
func (c *chain) locate(err error) error {
	var re *model.RowError
	if errors.As(err, &re) {
		return fmt.Errorf("%s: %w", c.place(c.record[re.Row]), err)
	}
	return fmt.Errorf("%s/bench.toml:%s %w", c.b.Dir, lineOf(c.b, err), err)
}

// gainOffset returns the stated gain and offset of a channel.
func gainOffset(ch *bench.Channel) (gain, offset float64) {
	gain = 1
	if ch.HasGain {
		gain = ch.Gain.Value
	}
	if ch.HasOffset {
		offset = ch.Offset.Value
	}
	return gain, offset
}

// correctReadings applies the stated gains and offsets to the predictors.
func (c *chain) correctReadings() {
	for p, ci := range c.pred {
		g, o := gainOffset(&c.b.Channels[ci])
		if g == 1 && o == 0 {
			c.x = append(c.x, c.xr[p])
			continue
		}
		v := make([]float64, len(c.xr[p]))
		for i, r := range c.xr[p] {
			v[i] = g*r + o
		}
		c.x = append(c.x, v)
	}
	if c.m.TimeDependent {
		t := make([]float64, len(c.record))
		for i := range t {
			t[i] = c.seconds(i)
		}
		c.x = append(c.x, t)
	}
	if c.series != nil {
		s := make([]float64, len(c.record))
		for i, rec := range c.record {
			s[i] = float64(c.series.of[rec])
		}
		c.x = append(c.x, s)
	}
}

// listInputs gathers the shared inputs and the priors with their knowledge.
func (c *chain) listInputs() {
	k := c.b.Kind
	isFree := make([]bool, len(k.Scalars))
	for _, f := range c.free {
		isFree[f] = true
	}
	for i, s := range c.b.Scalars {
		in := input{kind: scalarInput, name: s.Name, group: k.Scalars[i].Part, source: s.Source, unit: s.Unit, index: i,
			dist: s.Dist, value: s.Dist.Value, u: s.Dist.U, dof: s.Dist.DOF}
		switch {
		case isFree[i] && s.HasPrior:
			in.kind = priorInput
		case isFree[i] || s.Dist.U == 0 || !c.active(i):
			continue
		}
		if k.Scalars[i].Squared {
			in.squared = true
			in.value, in.u = squareMoments(s.Dist)
			in.name += " (squared)"
			in.unit = si.Unit{Symbol: s.Unit.Symbol + "²", Dim: s.Unit.Dim.Pow(2, 1), Factor: s.Unit.Factor * s.Unit.Factor}
			in.dof = math.Inf(1)
		}
		c.inputs = append(c.inputs, in)
	}
	add := func(kind inputKind, index int, ch *bench.Channel) {
		d, name, source, unit := ch.Gain, "gain", ch.GainSource, si.MustUnit("1")
		if kind == offsetInput {
			d, name, source, unit = ch.Offset, "offset", ch.OffsetSource, ch.Unit
		}
		if d.U == 0 {
			return
		}
		c.inputs = append(c.inputs, input{kind: kind, name: "channels." + ch.Name + "." + name, group: ch.Name, source: source,
			unit: unit, index: index, dist: d, value: d.Value, u: d.U, dof: d.DOF})
	}
	channels := append([]int{c.resp}, c.pred...)
	for n, ci := range channels {
		ch := &c.b.Channels[ci]
		if ch.HasGain {
			add(gainInput, n-1, ch)
		}
		if ch.HasOffset {
			add(offsetInput, n-1, ch)
		}
	}
	c.listInstruments(isFree)
}

// active reports whether scalar i can matter: the inputs of a correction that
// is off cannot.
func (c *chain) active(i int) bool {
	const prefix = "corrections."
	table := c.b.Kind.Scalars[i].Table
	if len(table) > len(prefix) && table[:len(prefix)] == prefix {
		return c.b.Corrections[table[len(prefix):]]
	}
	return true
}

// squareMoments returns expectation and standard uncertainty of Δ² for Δ of the
// given symmetric distribution about μ: E = μ² + u², var = 4μ²u² + (κ−1)u⁴
// with κ the kurtosis E(δ⁴)/u⁴ of the shape (derived).
func squareMoments(d gum.Distribution) (value, u float64) {
	mu, s := d.Value, d.U
	return mu*mu + s*s, math.Sqrt(4*mu*mu*s*s + (kurtosis(d)-1)*s*s*s*s)
}

// kurtosis is E(δ⁴)/u⁴ of the symmetric shapes: textbook moments.
func kurtosis(d gum.Distribution) float64 {
	switch d.Shape {
	case gum.ShapeRectangular:
		return 9.0 / 5
	case gum.ShapeTriangular:
		return 12.0 / 5
	case gum.ShapeArcsine:
		return 3.0 / 2
	case gum.ShapeTrapezoidal:
		// The sum of two independent rectangles of half-widths (1±β)/2.
		a, b := (1+d.Beta)/2, (1-d.Beta)/2
		v := (a*a + b*b) / 3
		return (a*a*a*a/5 + b*b*b*b/5 + 6*a*a*b*b/9) / (v * v)
	}
	return 3
}

// starts finds where the fit begins: what the bench says, else what the kind
// makes of the readings.
func (c *chain) starts() error {
	q := append([]float64(nil), c.q...)
	y := c.y
	if g, o := gainOffset(&c.b.Channels[c.resp]); g != 1 || o != 0 {
		y = make([]float64, len(c.y))
		for i, v := range c.y {
			y[i] = g*v + o
		}
	}
	var err error
	if c.start, err = c.m.Start(q, c.free, c.x, y); err != nil {
		return fmt.Errorf("%s: %w", c.b.Dir, err)
	}
	for k, f := range c.free {
		if c.b.Scalars[f].HasStart {
			c.start[k] = c.b.Scalars[f].Start
		}
	}
	return nil
}

// parallel runs do over n items in chunks of the given size, on all cores; the
// chunks are fixed by n and size alone.
func parallel(n, size int, do func(lo, hi int)) {
	workers := runtime.GOMAXPROCS(0)
	if n <= size || workers == 1 {
		for lo := 0; lo < n; lo += size {
			do(lo, min(lo+size, n))
		}
		return
	}
	var wg sync.WaitGroup
	next := make(chan int)
	for range workers {
		wg.Add(1)
		go func() {
			defer wg.Done()
			for lo := range next {
				do(lo, min(lo+size, n))
			}
		}()
	}
	for lo := 0; lo < n; lo += size {
		next <- lo
	}
	close(next)
	wg.Wait()
}
