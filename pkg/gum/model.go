package gum

import (
	"errors"
	"fmt"
)

// A Model is a set of inputs and the outputs made from them.
type Model struct {
	Inputs       []Input
	Outputs      []Output
	Correlations []Pair

	// Serial keeps all evaluation on the calling goroutine, for an Evaluator that is
	// interpreted or otherwise not to be run several at a time.
	Serial bool
}

// An Input is one named quantity.
type Input struct {
	Name  string
	Group string // part of the bench it belongs to, for display
	Unit  string // for display; Dist is in SI
	Dist  Distribution

	// Block marks inputs that were read together: those with the same non-empty Block are
	// one Type A evaluation, all normal or t with the same DOF, drawn from one
	// multivariate t (JCGM 102:2011 5.3.2). JointReadings makes such inputs.
	Block string
}

// A Pair is the correlation coefficient R between inputs A and B.
type Pair struct {
	A, B string
	R    float64
}

// An Output is one measurand.
type Output struct {
	Name    string
	Unit    string // for display; values are SI
	Formula string // as written, for display and to tell runs apart

	// New returns an Evaluator of the output as a function of the model's inputs, in their
	// order. It is called once for every worker, always on the goroutine that called
	// Propagate; the Evaluators are then used at the same time, one goroutine each.
	New func() Evaluator
}

// An Evaluator computes one output from the inputs. Only Block is required. A
// compiled formula's workspace has methods that fit all three.
type Evaluator struct {
	// Block fills out[row] with the output at x[input][row]; a column of length 1 is a
	// constant. It must not change x.
	Block func(x [][]float64, out []float64)

	// Gradient returns the output at x and fills g[i] with its derivative by input i. Nil:
	// central differences over the standard uncertainties (JCGM 100:2008 5.1.3, note 2), with
	// Richardson's extrapolation.
	Gradient func(x []float64, g []float64) float64

	// Hessian is Gradient that also fills h, row by row n×n, with second derivatives. Nil:
	// central differences.
	Hessian func(x []float64, g, h []float64) float64
}

// Settings say how to propagate. The zero Settings are the defaults.
type Settings struct {
	Probability float64 // coverage probability; 0 means 0.9545
	SecondOrder bool    // add the second-order terms of JCGM 100:2008 5.1.2, note
	LawOnly     bool    // no Monte Carlo

	Trials   int64  // of Monte Carlo; 0 means DefaultTrials. Adaptive: the most to spend, 0 means 1e8
	Adaptive bool   // choose the number of trials by JCGM 101:2008 7.9
	Seed     uint64 // 0 is a seed like any other
	Digits   int    // significant digits of u that count, for Compare and Adaptive; 0 means 1

	// Points is how many joint trials of the outputs a result keeps for a scatter plot; 0
	// means 2000, less than 0 none.
	Points int
}

// Sizes that a result depends on; they belong to the version.
const (
	DefaultTrials   = 1_000_000
	BlockTrials     = 10_000                // trials of a block: each input has one stream a block
	PilotTrials     = 4 * BlockTrials       // trials that set the bins of a run that streams
	SelectionTrials = 1 << 20               // up to here intervals are exact by selection
	Bins            = 1 << 16               // of an output in a run that streams
	MaxUndefined    = 1e-4                  // share of trials whose output may be undefined
	MaxTrials       = 1_000_000_000_000_000 // of a run: centuries of work, and far from where counts overflow
)

func (s Settings) withDefaults() (Settings, error) {
	if s.Probability == 0 {
		s.Probability = DefaultCoverage
	}
	if err := CheckCoverage(s.Probability); err != nil {
		return s, err
	}
	if s.Trials < 0 || s.Trials > MaxTrials {
		return s, fmt.Errorf("%d Monte Carlo trials: from 1 to %d can be asked for, and 0 for the default", s.Trials, int64(MaxTrials))
	}
	if s.Trials == 0 {
		s.Trials = DefaultTrials
		if s.Adaptive {
			s.Trials = 100_000_000
		}
	}
	if s.Digits == 0 {
		s.Digits = 1
	}
	if s.Digits < 1 || s.Digits > 6 {
		return s, errors.New("significant digits of the standard uncertainty: 1 or 2 are usual, 6 the most")
	}
	if s.Points == 0 {
		s.Points = 2000
	}
	s.Points = max(s.Points, 0)
	return s, nil
}

// A Result is what Propagate found.
type Result struct {
	Outputs     []OutputResult
	Correlation [][]float64 // of the outputs: from Monte Carlo if it was run, else by the law, to first order
	Covariance  [][]float64 // likewise
	Regions     []Region    // joint coverage regions of all outputs, when there are two or more and Monte Carlo was run
	Points      [][]float64 // Points[output][trial]: the first joint trials, for scatter plots

	Probability float64
	Seed        uint64
	Trials      int64 // of Monte Carlo; 0 when it was not run
	Sequences   int   // of the adaptive procedure; 0 when the number was fixed
	Converged   bool  // the adaptive procedure met its tolerance; true when the number was fixed
	Warnings    []error
}

// An OutputResult is what Propagate found for one output.
type OutputResult struct {
	Name, Unit, Formula string

	Law        *Law        // nil when the law could not be applied; LawError says why
	LawError   error       // why Law is nil; repeated in the result's Warnings
	MonteCarlo *Sample     // nil with LawOnly
	Comparison *Comparison // nil without Law or MonteCarlo
}
