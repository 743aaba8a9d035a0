package model

import (
	"fmt"
	"sort"
	"strings"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// Role says what a channel is for.
type Role int

// The roles of a channel.
const (
	// Predictor channels are set by the operator: voltage, spacing, distance.
	Predictor Role = iota
	// Response channels are read in answer: force, charge, indication. A bench
	// gives exactly one of the responses its kind offers.
	Response
)

// Channel is one column of readings that a kind takes.
type Channel struct {
	Name     string  // key in [channels.NAME]
	Doc      string  // one line for people
	Unit     si.Unit // the unit usual on the bench; fixes the dimension
	Role     Role
	Optional bool // a predictor the kind can do without
	Positive bool // readings must be above zero
}

// Scalar is one number that holds for every row of a bench.
type Scalar struct {
	// Table and Name make the key in bench.toml: [quantities.disc_radius],
	// [environment] temperature, [corrections.wedge] half_difference.
	Table, Name string
	Doc         string           // one line for people
	Unit        si.Unit          // the unit usual on the bench; fixes the dimension
	Default     gum.Distribution // used when the bench is silent and Required is false
	Required    bool             // the bench must state it (only while its correction is in use)
	Sought      bool             // always estimated by the fit, without prior knowledge
	Adjustable  bool             // may be estimated when the bench says adjust = true
	Positive    bool             // must be above zero
	NotNegative bool             // may be zero, which stands for not known, but not below
	Part        string           // part of the bench, for grouping the budget
	// Squared marks an even, one-sided input (a tilt, a misalignment): the bench
	// states the distribution of Δ, and predictions take Δ², whose expectation
	// μ² + u² and standard uncertainty are carried in its place, because the
	// first-order term of an even effect at zero vanishes while the effect does
	// not.
	Squared bool
	// Own marks a scalar of which every series of the bench (Kind.SeriesBy) has its
	// own, estimated together with all others: the factor of a meter as found and
	// as left, on each range.
	Own bool
}

// Key returns the name by which budgets, correlations and messages call the
// scalar: the bare name of a quantity, the dotted key of anything else.
func (s Scalar) Key() string {
	if s.Table == "quantities" {
		return s.Name
	}
	return s.Table + "." + s.Name
}

// Correction is an effect that the bench can switch on or off.
type Correction struct {
	Name    string // key in [corrections.NAME]
	Doc     string // one line for people
	Default bool   // in use when the bench is silent
}

// Option is a key of the bench that takes one of a few words.
type Option struct {
	Key     string // dotted, e.g. "drive.kind"
	Doc     string
	Values  []string
	Default string // "" when the bench must say
}

// Measurand is what a reduction states: a function of the scalars.
type Measurand struct {
	Name string
	Doc  string
	Unit si.Unit // for people
	// Value computes the measurand, in SI, from the scalars in the kind's order.
	Value func(q []jet.Jet) jet.Jet
}

// Setup is what one bench has chosen of what its kind offers.
type Setup struct {
	Channels map[string]bool   // channels that the bench gives
	On       map[string]bool   // corrections in use
	Options  map[string]string // every option of the kind, defaults filled in
	Scalars  []float64         // stated or default values, SI, in the kind's order (Δ² for squared ones)
	Given    map[string]bool   // scalars, by key, that the bench states itself
	Adjusted map[string]bool   // scalars, by key, that the bench has estimated
}

// Hazard is what a bench holds at its highest setting, for the cautions.
type Hazard struct {
	Voltage      float64 // V, largest magnitude between electrodes
	Energy       float64 // J, stored at that voltage
	Charge       float64 // C, at that voltage
	Field        float64 // V/m, largest at an electrode; 0 when the kind has none
	Breakdown    float64 // V/m, expected breakdown of air there; 0 when unknown
	EnergyLimit  float64 // J, the laboratory's limit; filled in by package reduce
	ChargeLimit  float64 // C, likewise
	Row          int     // the reading, counted from 0, at which Field/Breakdown is largest
	HasBreakdown bool
}

// Model predicts the response of one bench.
type Model struct {
	// Response names the channel that is predicted; Predictors those that Row
	// takes, in its order.
	Response   string
	Predictors []string
	// Row gives the true value of the response, SI, from all scalars in the
	// kind's order and the true values of the predictor channels. Time, in
	// seconds, is the last element of x when TimeDependent is set.
	Row           func(q, x []jet.Jet) jet.Jet
	TimeDependent bool
	// Block, when not nil, predicts rows lo to hi−1 without jets: f[i] and, for
	// each k, jac[k][i] = ∂f_i/∂q[wrt[k]] (jac may be nil). x[c][i] are the true
	// values of predictor c. It returns false when it has no derivative by one of
	// wrt; the jets are used then. It must agree with Row; tests compare them.
	Block func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool
	// Start gives starting values for the scalars to be estimated, listed in
	// free, from rough reductions of the readings: q holds the stated values.
	Start func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error)
	// Check refuses a bench outside the validity of its formulas (error) or
	// warns near their limits. x and y are true values of the rows in use; rows
	// are named by index.
	Check func(q []float64, x [][]float64, y []float64) ([]error, error)
	// Hazard gives the stored energy, charge and field at the highest setting.
	Hazard func(q []float64, x [][]float64) Hazard
	// Factors holds, by name, the factor less one of a correction that acts on a
	// measurand and not on the predicted response.
	Factors map[string]func(q []jet.Jet) jet.Jet
	// Measurands are those of the kind that this bench can state.
	Measurands []Measurand
	// Curve, when not nil, is a result that is stated at each level of the
	// predictors and anywhere between: the factor of a meter against field.
	Curve *Curve
	// Causes are effects that leave a known signature in the residuals.
	Causes []Cause
}

// Curve is a result as a function of the level at which it was found.
type Curve struct {
	Name, Doc string
	Unit      si.Unit // of the result, for people
	Level     string  // what the level is called
	LevelUnit si.Unit
	FullScale string // key of the scalar that holds the end of the range, "" when there is none
	Value     func(q []jet.Jet, level jet.Jet) jet.Jet
	LevelOf   func(q, x []float64) float64 // level of a row from true predictors, SI
	// Inverse: the result falls as the response rises (a factor that multiplies
	// the response), else it rises with it.
	Inverse bool
}

// Cause is an effect that is not in the fit and would leave its mark in the
// residuals if it were there.
type Cause struct {
	Name string // as in the bench file where there is a key for it
	Doc  string // the signature in words
	// Signature gives the response change, up to a factor, of row i: q scalars,
	// x true predictors, f prediction (all SI), t seconds (NaN when unknown).
	Signature func(q, x []float64, f, t float64) float64
}

// Kind is one kind of bench.
type Kind struct {
	Name        string // value of `model =`
	Title       string
	Doc         string // a paragraph for the starter file and the help
	Channels    []Channel
	Scalars     []Scalar
	Corrections []Correction
	Options     []Option
	// SeriesBy names the row columns (phase, range) whose words split the readings
	// into series; scalars marked Own are then estimated once a series, and the
	// measurands are stated for each.
	SeriesBy []string
	// Prepare checks the choices of a bench and returns its model.
	Prepare func(k *Kind, s *Setup) (*Model, error)
}

// Scalar returns the index of the scalar with the given key, or −1.
func (k *Kind) Scalar(key string) int {
	for i := range k.Scalars {
		if k.Scalars[i].Key() == key {
			return i
		}
	}
	return -1
}

// Channel returns the index of the channel of that name, or −1.
func (k *Kind) Channel(name string) int {
	for i := range k.Channels {
		if k.Channels[i].Name == name {
			return i
		}
	}
	return -1
}

var kinds = map[string]*Kind{}

// register adds a kind; a name used twice is a mistake in this package.
func register(k *Kind) *Kind {
	if kinds[k.Name] != nil {
		panic("model: " + k.Name + " registered twice")
	}
	k.Corrections = append(k.Corrections,
		Correction{Name: "zero", Doc: "zero of the response, from readings of kind \"zero\""},
		Correction{Name: "blank", Doc: "what the whole cycle reads without the effect, from readings of kind \"blank\""})
	k.Options = append(k.Options,
		Option{Key: "corrections.zero.method",
			Doc:    "how the zero is found between zero readings: interpolate in time (ABA, ABBA), a linear drift, one mean, or a zero that settles exponentially",
			Values: []string{"interpolate", "linear", "mean", "exponential"}, Default: "interpolate"},
		Option{Key: "corrections.blank.method",
			Doc:    "how the blank is found between blank readings, after the zero has been taken off them: as for the zero",
			Values: []string{"interpolate", "linear", "mean", "exponential"}, Default: "mean"})
	kinds[k.Name] = k
	return k
}

// Names lists the kinds in alphabetical order.
func Names() []string {
	names := make([]string, 0, len(kinds))
	for n := range kinds {
		names = append(names, n)
	}
	sort.Strings(names)
	return names
}

// Lookup returns the kind of that name; its error lists the kinds there are and
// names the nearest.
func Lookup(name string) (*Kind, error) {
	if k := kinds[name]; k != nil {
		return k, nil
	}
	names := Names()
	if s := si.Suggest(name, names); s != "" {
		return nil, fmt.Errorf("model %q is not known; did you mean %q? (known: %s)", name, s, strings.Join(names, ", "))
	}
	return nil, fmt.Errorf("model %q is not known (known: %s)", name, strings.Join(names, ", "))
}
