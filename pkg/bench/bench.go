package bench

import (
	"time"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/si"
)

// Bench is one dataset, read and checked: what bench.toml says, with the
// readings of the files it names. Everything is in SI; the units that the files
// used stand beside the numbers.
type Bench struct {
	Dir    string // folder of the dataset
	Title  string
	Method string // "least-squares" or "errors-in-variables"
	Kind   *model.Kind
	Format int

	Inputs       []Input           // bench.toml first, then the readings in order
	Channels     []Channel         // those the bench gives, in the kind's order
	Scalars      []Scalar          // all of Kind.Scalars in the kind's order, defaults filled in
	Options      map[string]string // every option of the kind, defaults filled in
	Corrections  map[string]bool   // every correction of the kind: in use or not
	Correlations []Correlation
	Rows         Rows
	Coverage     float64 // coverage probability of intervals; 0.9545 when the bench is silent

	Limits      *Limits      // nil when the bench states none
	Safety      Safety       // the laboratory's limits of stored energy and charge
	Instruments []Instrument // in the order of the file
	Environment []Condition  // conditions that the bench states, in the order of the file
	Ambient     []Ambient    // columns of the readings that conditions were taken from
	Drive       Drive
	Mounting    Mounting
	Spacing     Spacing
	Capability  *Capability // nil when the bench states none
	Client      Client
	Item        Item
	Work        Work
	Report      Report

	// Warnings must be shown with any result: rows that were left out because a
	// value is missing, words that look like a slip, and the like.
	Warnings []error
}

// Input is a file that the result depends on.
type Input struct {
	File     string // name as it stands in bench.toml, slashes forward
	SHA256   string // lower-case hexadecimal, of the bytes that were parsed
	Rows     int    // data records; 0 for bench.toml
	Excluded int    // of them left out

	// How a CSV file is written; zero for others.
	Separator    byte // ',', ';' or '\t'
	DecimalComma bool // numbers are written 1,5
}

// Channel is one column of readings.
type Channel struct {
	Name     string    // of the kind's channel
	Column   string    // header in the CSV
	Unit     si.Unit   // unit of the column
	Readings []float64 // SI, one per data record; NaN where missing

	// Noise (SI) and RelativeNoise (times |reading|) are standard uncertainties of
	// one reading, independent from row to row; they add in quadrature. NoiseDOF
	// is +Inf when the bench does not say. FromResiduals: unknown, to be taken
	// from the scatter of the fit.
	Noise, RelativeNoise, NoiseDOF float64
	FromResiduals                  bool

	// Resolution is the width of the last digit, SI; its standard uncertainty is
	// Resolution/√12 (GUM F.2.2.1), once per reading or once per setting.
	Resolution    float64
	ResolutionPer string // "reading" or "setting"

	// Gain and Offset hold for every row: true value = gain × reading + offset.
	// Gain is a number, Offset is in SI. Without them they are exactly 1 and 0.
	Gain, Offset             gum.Distribution
	HasGain, HasOffset       bool
	GainSource, OffsetSource string
	// The instruments the gain and offset come from; "" when none is named.
	GainInstrument, OffsetInstrument string

	// Instrument gives the readings; "" when none is named.
	Instrument string

	Grouped []Grouped
}

// Grouped is an error of a channel that is the same for all rows with the same
// word in a row column: one setting, one mounting, one day.
type Grouped struct {
	By       string   // setting, polarity, direction, mount, range, phase or quality
	U        float64  // standard uncertainty, SI
	Relative float64  // standard uncertainty relative to the reading; 0 when U is given
	DOF      float64  // +Inf when not stated
	Group    []int32  // of each data record: 0 to Count−1; shared between channels, not to be changed
	Labels   []string // the words, in order of first appearance
	Count    int
}

// Scalar is one number of the bench with what is known of it.
type Scalar struct {
	Name     string           // as budgets call it: Kind.Scalars[i].Key()
	Dist     gum.Distribution // SI; exact and zero for a sought quantity without a start
	Unit     si.Unit          // as the bench wrote it, else the kind's usual unit
	Adjust   bool             // to be estimated (always so when the kind seeks it)
	Given    bool             // stated in the file, not a default
	HasPrior bool             // estimated with Dist as prior knowledge
	Start    float64          // SI, where the fit begins, when HasStart
	HasStart bool
	// Instrument is a name in Bench.Instruments or "".
	Instrument string
	Source     string // where the value comes from, in words
	Key        string // place in bench.toml: "quantities.disc_radius"
	Line       int    // line in bench.toml; 0 when not Given
}

// Correlation is a correlation coefficient stated between two inputs: names of
// scalars, "channels.NAME.gain" and "channels.NAME.offset", or those of allowances.
type Correlation struct {
	A, B string
	R    float64
	Line int // in the bench or budget file
}

// Condition is a quantity of the environment that the bench states.
type Condition struct {
	Name       string // temperature, pressure, humidity, gravity, …
	Dist       gum.Distribution
	Unit       si.Unit
	Instrument string
	Source     string
}

// Quantity is a number with unit and knowledge of it, as a table of the bench
// file states it; the zero value is one not given.
type Quantity struct {
	Given      bool
	Dist       gum.Distribution // SI
	Unit       si.Unit
	Instrument string
	Source     string
}

// Limits are the limits of a conformity statement.
type Limits struct {
	Lower, Upper       float64 // in SI; meaningful when HasLower, HasUpper
	HasLower, HasUpper bool
	Unit               si.Unit
	Measurand          string // which measurand; "" is the first
	Source             string // the specification
	Rule               string // "simple", "guard-band" or "non-binary"
	// The guard band: GuardFactor × U, or GuardWidth (SI) when above 0; the guard
	// that keeps the risk of false acceptance below FalseAccept when above 0.
	GuardFactor, GuardWidth float64
	FalseAccept             float64
	Population              *Population
}

// Population is what is known of the items before measuring, for global risks
// (JCGM 106).
type Population struct {
	Mean, SD float64 // SI
	Source   string
}

// Safety holds the laboratory's own limits. The zero value never occurs in a
// Bench: limits not stated are the usual ones, 350 mJ and 50 µC (from memory;
// local codes and licensed practice prevail).
type Safety struct {
	Energy float64 // J
	Charge float64 // C
	Source string
	Stated bool // by the bench
}

// Drive is how the voltage is applied.
type Drive struct {
	Kind      string   // option of the kind where it has one: "balanced", "one-side-earthed"
	Value     string   // "dc", "rms" or "peak": what the voltages are
	Frequency Quantity // Hz
	THD       Quantity // total harmonic distortion or ripple, relative
	Waveform  string
}

// Mounting is how the item sits in the field.
type Mounting struct {
	Kind           string // "free-body" or "flush"
	ReferencePlane string
	Orientation    string
	SignConvention string
	Description    string
}

// Spacing is how the distance between the electrodes was found.
type Spacing struct {
	Points      []float64 // m, as measured
	Centre      Quantity  // m
	Method      string
	Instrument  string
	Description string
}

// Capability is the laboratory's best capability for the measurand: an expanded
// uncertainty below which none is stated.
type Capability struct {
	U, Relative  float64 // SI and relative; one of them is 0
	K            float64
	Unit         si.Unit
	Lower, Upper Quantity // range in which it holds
	Scope        string
	Source       string
}

// Client is who asked for the work.
type Client struct {
	Name, Address, Contact, Reference string
}

// Item is what was calibrated.
type Item struct {
	Description, Maker, Model, Serial string
	Identification, Firmware          string
	Condition                         string
	Range                             string
	Accessories                       string
}

// Work is the job as the certificate tells it. Dates are ISO 8601.
type Work struct {
	Laboratory, Address, Place    string
	Country                       string // two capitals, ISO 3166-1
	Title                         string
	Certificate                   string // unique identification
	Received, Performed, Finished string
	Issued                        string
	Method, Procedure             string
	PerformedBy, CheckedBy        string
	AuthorisedBy                  string
	Function                      string // of who authorised
	Traceability                  string
	Deviations                    []string
	Remarks                       []string
	Adjusted                      bool
	Adjustment                    string // what was done
	Recalibration                 string // date; only with Agreed
	Agreed                        bool
	Replaces, Reason              string // an amendment: what it replaces and why
}

// Report says how results are stated, besides their coverage (Bench.Coverage).
type Report struct {
	Digits     int    // significant digits for the comparison of JCGM 101 clause 8; 0 is the default
	Definition string // definition of the factor stated, where the kind offers a choice
}

// Rows are what the readings say of themselves, one entry a data record over
// all files, in acquisition order.
type Rows struct {
	N        int
	Kind     []RowKind
	Time     []float64 // s; since Epoch when the file has time stamps; NaN where unknown
	Epoch    time.Time // first time stamp; zero when times are seconds
	HasTime  bool
	Labels   map[string]*Labels // by role: setting, polarity, direction, mount, range, phase, quality
	Excluded []bool
	Files    []string // names of the readings files
	// Columns holds the header of each row column by role, time and kind
	// included; roles that the bench does not name are missing.
	Columns map[string]string
	reasons map[int]string
	spans   []span
}

// RowKind says what a record is.
type RowKind uint8

// The kinds of record.
const (
	Reading   RowKind = iota // a reading for the fit
	Zero                     // a reading with the cause removed: the instrument's zero
	Blank                    // a reading of the whole cycle without the effect
	Overrange                // the instrument was over its range
)

// String returns the word used in the file.
func (k RowKind) String() string {
	switch k {
	case Reading:
		return "reading"
	case Zero:
		return "zero"
	case Blank:
		return "blank"
	case Overrange:
		return "overrange"
	}
	return "unknown"
}

// Ambient is a column of the readings that holds a condition.
type Ambient struct {
	Column   string    // header in the CSV
	Unit     si.Unit   // of the column
	Readings []float64 // in Unit, one per data record; NaN where missing
}

// Labels is a column of words, each distinct word stored once.
type Labels struct {
	Column string   // header in the CSV
	Words  []string // in order of first appearance
	Index  []int32  // of each data record, into Words

	known map[string]int32 // while reading
}

// At returns the word of data record i, counted from 0.
func (l *Labels) At(i int) string { return l.Words[l.Index[i]] }

// Label returns the word that data record i (from 0) has in the column with
// that role, or "" when the bench names no such column.
func (r *Rows) Label(role string, i int) string {
	if l := r.Labels[role]; l != nil {
		return l.At(i)
	}
	return ""
}

// Reason returns why data record i (from 0) is excluded, "" when it is not.
func (r *Rows) Reason(i int) string { return r.reasons[i] }

// span holds the place of the records from first on, up to the next span, as
// long as each takes one line.
type span struct {
	first int // record, from 0
	file  int
	line  int // of that record
}

// Place returns the file and line of data record i, counted from 0.
func (r *Rows) Place(i int) (file string, line int) {
	lo, hi := 0, len(r.spans)
	for lo < hi {
		m := (lo + hi) / 2
		if r.spans[m].first <= i {
			lo = m + 1
		} else {
			hi = m
		}
	}
	if lo == 0 {
		return "", 0
	}
	s := r.spans[lo-1]
	return r.Files[s.file], s.line + i - s.first
}
