package reduce

import (
	"encoding/json"
	"fmt"
	"math"
	"strconv"
)

// Number is a float64 that JSON can always hold: NaN and infinities are written
// as null, everything else in full double precision. A null degrees of freedom
// is infinite; any other null is unknown and explained in the warnings.
type Number float64

// MarshalJSON implements json.Marshaler.
func (n Number) MarshalJSON() ([]byte, error) {
	f := float64(n)
	if math.IsNaN(f) || math.IsInf(f, 0) {
		return []byte("null"), nil
	}
	if f == 0 {
		return []byte("0"), nil
	}
	format := byte('f')
	if a := math.Abs(f); a < 1e-4 || a >= 1e15 {
		format = 'e'
	}
	return strconv.AppendFloat(nil, f, format, -1, 64), nil
}

// UnmarshalJSON implements json.Unmarshaler; null becomes NaN.
func (n *Number) UnmarshalJSON(b []byte) error {
	if string(b) == "null" {
		*n = Number(math.NaN())
		return nil
	}
	var f float64
	if err := json.Unmarshal(b, &f); err != nil {
		return err
	}
	*n = Number(f)
	return nil
}

// Record is a reduction as it is written, read again and compared: everything
// another laboratory needs to get the same numbers. Numbers are SI unless a
// unit beside them says otherwise.
type Record struct {
	Format      int          `json:"format"`
	Guardring   string       `json:"guardring"`
	Model       string       `json:"model"`
	Title       string       `json:"title"`
	Run         RunRecord    `json:"run"`
	Inputs      []Input      `json:"inputs"`
	Exclusions  []Exclusion  `json:"exclusions"`
	Corrections []Correction `json:"corrections"`
	Fit         Fit          `json:"fit"`
	Measurands  []Measurand  `json:"measurands"`
	Series      []Series     `json:"series,omitempty"`
	Diagnosis   Diagnosis    `json:"diagnosis"`
	Hazard      Hazard       `json:"hazard"`
	Warnings    []string     `json:"warnings"`
	Rows        []RecordRow  `json:"rows,omitempty"`
}

// Check returns an error, which names the key, when a number that a measurand states
// can't be what it stands for: an uncertainty below zero, degrees of freedom that are
// not above zero, a coverage probability outside 0 to 1, an interval whose ends are
// exchanged. A NaN (null in the file) is a number that could not be stated.
func (r *Record) Check() error {
	for i := range r.Measurands {
		m := &r.Measurands[i]
		bad := func(key string, x Number, due string) error {
			return fmt.Errorf("measurands[%d].%s: %v where %s is due", i, key, float64(x), due)
		}
		switch {
		case m.U < 0:
			return bad("u", m.U, "an uncertainty, not below zero,")
		case m.DOF <= 0:
			return bad("dof", m.DOF, "a number above zero, or null for infinitely many,")
		case m.K <= 0:
			return bad("k", m.K, "a coverage factor above zero")
		case m.Probability <= 0 || m.Probability > 1:
			return bad("probability", m.Probability, "a coverage probability between 0 and 1")
		case m.Interval[0] > m.Interval[1]:
			return bad("interval", m.Interval[0], fmt.Sprintf("a lower end not above the upper, %v,", float64(m.Interval[1])))
		}
	}
	return nil
}

// Measurand returns the measurand of that name, nil when the record states none.
func (r *Record) Measurand(name string) *Measurand {
	for i := range r.Measurands {
		if r.Measurands[i].Name == name {
			return &r.Measurands[i]
		}
	}
	return nil
}

// RunRecord is how the record was made.
type RunRecord struct {
	Command string            `json:"command"`
	Options map[string]string `json:"options"`
	Seed    uint64            `json:"seed"`
	Trials  int               `json:"trials"` // 0: law only
}

// Input is a file that the result depends on.
type Input struct {
	File     string `json:"file"`
	SHA256   string `json:"sha256"`
	Rows     int    `json:"rows,omitempty"`
	Excluded int    `json:"excluded,omitempty"`
}

// Exclusion is a reading left out of the fit, with the reason stated.
type Exclusion struct {
	Row    int    `json:"row"` // data records from 1 over all files
	File   string `json:"file"`
	Line   int    `json:"line"`
	Reason string `json:"reason"`
}

// Correction is one effect of the bench, its mean size over the rows in use and
// the standard uncertainty that remains. Unit "1" means relative to the
// response.
type Correction struct {
	Name string `json:"name"`
	Doc  string `json:"doc"`
	Size Number `json:"size"`
	Unit string `json:"unit"`
	U    Number `json:"u"`
	Used bool   `json:"used"`
}

// Fit is the estimation step.
type Fit struct {
	Method                    string      `json:"method"`
	Status                    string      `json:"status"`
	Reason                    string      `json:"reason"`
	Parameters                []Parameter `json:"parameters"`
	Covariance                [][]Number  `json:"covariance"` // statistical, of the parameters
	ChiSquared                Number      `json:"chi_squared"`
	DOF                       int         `json:"dof"`
	PValue                    Number      `json:"p_value"`
	BirgeRatio                Number      `json:"birge_ratio"`
	ResidualSumOfSquares      Number      `json:"residual_sum_of_squares"`
	ResidualStandardDeviation Number      `json:"residual_standard_deviation"`
	ResponseUnit              string      `json:"response_unit"`
	Condition                 Number      `json:"condition"`
	Iterations                int         `json:"iterations"`
	Rows                      int         `json:"rows"`
	ScaledByResiduals         bool        `json:"scaled_by_residuals"`
}

// Parameter is one estimated scalar. U is its statistical standard uncertainty
// (readings and priors); UTotal adds the shared inputs carried through the fit.
type Parameter struct {
	Name   string `json:"name"`
	Unit   string `json:"unit"`
	Value  Number `json:"value"`
	U      Number `json:"u"`
	UTotal Number `json:"u_total"`
	Start  Number `json:"start"`
	Prior  *Prior `json:"prior,omitempty"`
}

// Prior is the knowledge stated of an adjusted quantity.
type Prior struct {
	Value Number `json:"value"`
	U     Number `json:"u"`
}

// Measurand is one result with its uncertainty.
type Measurand struct {
	Name        string       `json:"name"`
	Doc         string       `json:"doc"`
	Unit        string       `json:"unit"`
	Value       Number       `json:"value"`
	U           Number       `json:"u"`
	DOF         Number       `json:"dof"`
	K           Number       `json:"k"`
	Probability Number       `json:"probability"`
	Interval    [2]Number    `json:"interval"`
	Budget      []BudgetLine `json:"budget"`
	MonteCarlo  *MonteCarlo  `json:"monte_carlo,omitempty"`
}

// BudgetLine is one input of a measurand: the columns of EA-4/02 section 4.
type BudgetLine struct {
	Input        string `json:"input"`
	Group        string `json:"group"` // part of the bench
	Value        Number `json:"value"`
	Unit         string `json:"unit"`
	U            Number `json:"u"`
	Shape        string `json:"shape"`
	DOF          Number `json:"dof"`
	Sensitivity  Number `json:"sensitivity"`  // unit of the measurand per unit of the input, SI
	Contribution Number `json:"contribution"` // |sensitivity| × u, unit of the measurand, SI
	Share        Number `json:"share"`        // of the variance; with correlations the shares sum to one with the cross terms split evenly
	Source       string `json:"source,omitempty"`
}

// MonteCarlo is the check of the law by trials of the whole chain, compared as
// in JCGM 101 clause 8.
type MonteCarlo struct {
	Trials   int       `json:"trials"`
	Failed   int       `json:"failed"` // trials whose fit did not converge, left out
	Value    Number    `json:"value"`
	U        Number    `json:"u"`
	Interval [2]Number `json:"interval"`
	Shortest [2]Number `json:"shortest"`
	Digits   int       `json:"digits"`
	Delta    Number    `json:"delta"`
	DLow     Number    `json:"d_low"`
	DHigh    Number    `json:"d_high"`
	Agrees   bool      `json:"agrees"`
}

// Series is what a bench whose kind states a result at every level found for one
// series of readings: the points, and what sets them apart from a straight line.
type Series struct {
	Name      string  `json:"name"`
	Result    string  `json:"result"` // what is stated at each point
	Unit      string  `json:"unit"`
	Level     string  `json:"level"` // what it is stated against
	LevelUnit string  `json:"level_unit"`
	Points    []Point `json:"points"`
	FullScale Number  `json:"full_scale"`
	// NonLinearity is the largest departure of a point's mean indication from the
	// fit, over full scale; Repeatability the pooled standard deviation of one
	// reading about the mean of its point and mounting, relative to the reading;
	// Reproducibility that of the mountings' means about their common mean.
	NonLinearity     Number   `json:"non_linearity"`
	Repeatability    Number   `json:"repeatability"`
	RepeatabilityDOF int      `json:"repeatability_dof"`
	Reproducibility  Number   `json:"reproducibility"`
	Mountings        int      `json:"mountings"`
	Effects          []Effect `json:"effects"`
}

// Point is one level of a series.
type Point struct {
	Level      Number `json:"level"`
	Rows       int    `json:"rows"`
	Indication Number `json:"indication"` // mean corrected reading of the response
	Fitted     Number `json:"fitted"`     // mean prediction
	Observed   Number `json:"observed"`   // the result from this point alone
	Value      Number `json:"value"`      // the result of the fit at this level
	U          Number `json:"u"`
	K          Number `json:"k"`
	Expanded   Number `json:"expanded"`
}

// Effect is a departure from the model that the readings could show: its
// estimate, relative to the response, with a test of zero.
type Effect struct {
	Name     string `json:"name"`
	Doc      string `json:"doc"`
	Estimate Number `json:"estimate"`
	U        Number `json:"u"`
	PValue   Number `json:"p_value"`
	Passed   bool   `json:"passed"` // at 1 %
}

// Diagnosis holds the tests of the residuals.
type Diagnosis struct {
	Tests  []Test  `json:"tests"`
	Causes []Cause `json:"causes,omitempty"`
}

// Test is one test of the residuals with its verdict at 1 %.
type Test struct {
	Name      string `json:"name"`
	Doc       string `json:"doc"`
	Statistic Number `json:"statistic"`
	PValue    Number `json:"p_value"`
	Passed    bool   `json:"passed"`
}

// Cause is an effect whose signature the residuals carry, with what including it
// would improve; it is never applied by itself.
type Cause struct {
	Name        string `json:"name"`
	Doc         string `json:"doc"`
	Improvement Number `json:"improvement"` // fall of chi-squared for one more parameter
	PValue      Number `json:"p_value"`
	Shift       Number `json:"shift"` // change of the first measurand if it were fitted, SI
}

// Hazard is what the bench stores at its highest setting.
type Hazard struct {
	Voltage     Number `json:"voltage"`      // V
	Energy      Number `json:"energy"`       // J
	Charge      Number `json:"charge"`       // C
	Field       Number `json:"field"`        // V/m at an electrode
	Breakdown   Number `json:"breakdown"`    // V/m expected for air; null when unknown
	EnergyLimit Number `json:"energy_limit"` // J
	ChargeLimit Number `json:"charge_limit"` // C
}

// RecordRow is one reading as it entered the fit (with --rows).
type RecordRow struct {
	Row          int               `json:"row"`
	File         string            `json:"file"`
	Line         int               `json:"line"`
	Kind         string            `json:"kind"`
	Excluded     bool              `json:"excluded,omitempty"`
	Channels     map[string]Number `json:"channels"` // true values, SI
	Response     Number            `json:"response"` // corrected reading
	Fitted       Number            `json:"fitted"`
	U            Number            `json:"u"` // effective standard uncertainty
	Residual     Number            `json:"residual"`
	Standardised Number            `json:"standardised"`
	Leverage     Number            `json:"leverage"`
	Studentised  Number            `json:"studentised"`
}
