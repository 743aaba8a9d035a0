package gum

import (
	"errors"
	"fmt"
	"math"
	"strings"
)

// A Contribution is one line of an uncertainty budget, with the columns of EA-4/02
// M:2022 table 4.1 (from memory): quantity, estimate, standard uncertainty,
// distribution, sensitivity coefficient, contribution.
type Contribution struct {
	Input        string  // name of the input
	Group        string  // part of the bench it belongs to, for display
	Unit         string  // of Value and U, for display; the numbers are SI
	Shape        string  // of its distribution
	Block        string  // lines with the same non-empty Block are one Type A evaluation: read together, with common DOF
	Value        float64 // estimate x_i
	U            float64 // standard uncertainty u(x_i)
	DOF          float64 // degrees of freedom of U; +Inf when known, 0 is read as +Inf
	Sensitivity  float64 // c_i = ∂f/∂x_i at the estimates
	Contribution float64 // c_i u(x_i), with its sign, in the output's unit
	Share        float64 // of the variance, covariances split evenly: cov(c_i x_i, y)/u²(y); shares sum to 1
}

// A Correlation is the correlation coefficient R of inputs I and J, counted
// from 0.
type Correlation struct {
	I, J int
	R    float64
}

// A Law is the result of the law of propagation of uncertainty (JCGM 100:2008
// clauses 5 and 6) for one output.
type Law struct {
	Value       float64        // estimate y, in the output's SI unit
	U           float64        // combined standard uncertainty u_c(y)
	DOF         float64        // effective degrees of freedom; +Inf when all u are known, NaN when they can't be stated (a warning says why)
	K           float64        // coverage factor
	Probability float64        // coverage probability p of Interval
	Interval    [2]float64     // Value ∓ K·U
	Budget      []Contribution // the lines in the order given
	FirstOrderU float64        // U without second-order terms; equal to U unless they were asked for
	Shift       float64        // second-order change of the expectation, ½Σ H_ij u_ij; not in Value; 0 unless asked for
	Warnings    []error
}

// ErrCorrelatedDOF is what a warning wraps when no effective degrees of freedom
// are stated because inputs are correlated.
var ErrCorrelatedDOF = errors.New("no effective degrees of freedom: the Welch–Satterthwaite formula holds for independent inputs only (JCGM 100:2008 G.4.1)")

// ErrInfiniteVariance is wrapped by the error of a law that meets a t
// distribution without a variance.
var ErrInfiniteVariance = errors.New("the t distribution has no variance with two degrees of freedom or fewer")

// Combine states the uncertainty of an output of the given value whose budget
// lines have Value, U, DOF and Sensitivity filled in; it fills Contribution and
// Share in a copy of the lines. The variance is Σ_ij c_i c_j r_ij u_i u_j (JCGM
// 100:2008 equation (16)). Effective degrees of freedom follow Welch and
// Satterthwaite (JCGM 100:2008 equation (G.2b)); correlated lines enter as one
// component where that has a meaning: all of known uncertainty, or all of one Type
// A Block. Otherwise the formula is refused: DOF is NaN, K that of a normal, and a
// warning wrapping ErrCorrelatedDOF explains. K covers the probability p under
// Student's t with DOF truncated to an integer, as JCGM 100:2008 G.4.1 allows and its
// examples do (below 1 they are taken as they are).
//
// Combine returns an error for a p outside (0, 1), numbers that are not finite,
// negative uncertainties, impossible correlations, and a t distribution without a
// variance.
func Combine(value float64, lines []Contribution, corr []Correlation, p float64) (*Law, error) {
	if err := CheckCoverage(p); err != nil {
		return nil, err
	}
	if math.IsNaN(value) || math.IsInf(value, 0) {
		return nil, fmt.Errorf("the model gives %v at the estimates of its inputs: it must be finite there", value)
	}
	law := &Law{Value: value, Probability: p, Budget: make([]Contribution, len(lines))}
	copy(law.Budget, lines)
	if err := checkLines(law.Budget); err != nil {
		return nil, err
	}
	if err := checkPairs(corr, namesOf(lines)); err != nil {
		return nil, err
	}
	b := law.Budget
	// cov[i] = cov(c_i x_i, y)
	cov := make([]float64, len(b))
	var scale float64
	for i := range b {
		b[i].Contribution = b[i].Sensitivity * b[i].U
		scale = math.Max(scale, math.Abs(b[i].Contribution))
	}
	var sum float64
	if scale > 0 {
		for i := range b {
			w := b[i].Contribution / scale
			cov[i] = w * w
		}
		for _, c := range corr {
			q := c.R * (b[c.I].Contribution / scale) * (b[c.J].Contribution / scale)
			cov[c.I] += q
			cov[c.J] += q
		}
		for _, q := range cov {
			sum += q
		}
		// Full correlation can cancel to a rounding error on either side of 0.
		if sum <= 1e-15*float64(len(b)) && len(corr) > 0 {
			sum = 0
		}
		law.U = scale * math.Sqrt(sum)
	}
	law.FirstOrderU = law.U
	if sum > 0 {
		for i := range b {
			b[i].Share = cov[i] / sum
		}
	} else if !allExact(b) {
		law.Warnings = append(law.Warnings, errors.New("the law gives no uncertainty to first order: every sensitivity vanishes or the contributions cancel at the estimates; trust Monte Carlo or second-order terms instead"))
	}
	law.degreesOfFreedom(corr)
	law.cover()
	law.warnShape()
	return law, nil
}

// allExact reports that no input has an uncertainty: then neither has the output.
func allExact(b []Contribution) bool {
	for i := range b {
		if b[i].U > 0 {
			return false
		}
	}
	return true
}

// cover sets K and Interval from U, DOF and Probability.
func (l *Law) cover() {
	l.K = CoverageFactor(l.Probability, l.DOF)
	l.Interval = [2]float64{l.Value - l.K*l.U, l.Value + l.K*l.U}
}

// A GroupShare is what one group of budget lines contributes to the variance.
type GroupShare struct {
	Group string
	Lines []int   // positions in the budget
	Share float64 // sum of the lines' shares
}

// Groups sums the shares of the budget by Group, groups in order of their first
// line.
func (l *Law) Groups() []GroupShare {
	var groups []GroupShare
	at := make(map[string]int)
	for i, c := range l.Budget {
		k, ok := at[c.Group]
		if !ok {
			k = len(groups)
			at[c.Group] = k
			groups = append(groups, GroupShare{Group: c.Group})
		}
		groups[k].Lines = append(groups[k].Lines, i)
		groups[k].Share += c.Share
	}
	return groups
}

// degreesOfFreedom sets DOF by the Welch–Satterthwaite formula over independent
// components, or refuses it with a warning.
func (l *Law) degreesOfFreedom(corr []Correlation) {
	b := l.Budget
	l.DOF = math.Inf(1)
	if l.U == 0 {
		return
	}
	root := components(len(b), corr, func(i int) bool { return b[i].Contribution != 0 })
	var inverse float64 // 1/ν_eff
	for i := range b {
		if root[i] != i || b[i].Contribution == 0 {
			continue
		}
		var members []int
		finite := false
		for j := i; j < len(b); j++ {
			if root[j] == i && b[j].Contribution != 0 {
				members = append(members, j)
				finite = finite || !math.IsInf(b[j].DOF, 1)
			}
		}
		if !finite {
			continue
		}
		for _, j := range members[1:] {
			if b[j].Block == "" || b[j].Block != b[i].Block || b[j].DOF != b[i].DOF {
				var names []string
				for _, k := range members {
					names = append(names, fmt.Sprintf("%s (%s)", b[k].Input, dofText(b[k].DOF)))
				}
				l.DOF = math.NaN()
				l.Warnings = append(l.Warnings, fmt.Errorf("%w; correlated here, and not read together in one Type A evaluation: %s. k is that of a normal, which may be too small: prefer the Monte Carlo interval",
					ErrCorrelatedDOF, strings.Join(names, ", ")))
				return
			}
		}
		// Variance of the component over that of the output.
		var share float64
		for _, j := range members {
			share += b[j].Share
		}
		inverse += share * share / b[i].DOF
	}
	l.DOF = 1 / inverse
}

// warnShape says when one or two lines of a bounded shape carry the budget, so
// that the t or normal coverage factor is too large (EA-4/02 M:2022 S9.14 and
// S10.13, from memory; its rule is that all others together stay below 0.3 of them).
func (l *Law) warnShape() {
	var lead []Contribution // the two largest bounded lines, largest first
	for _, c := range l.Budget {
		switch c.Shape {
		case ShapeRectangular, ShapeTriangular, ShapeTrapezoidal, ShapeCurvilinear, ShapeArcsine:
			lead = append(lead, c)
			for k := len(lead) - 1; k > 0 && math.Abs(lead[k].Contribution) > math.Abs(lead[k-1].Contribution); k-- {
				lead[k], lead[k-1] = lead[k-1], lead[k]
			}
			lead = lead[:min(len(lead), 2)]
		}
	}
	const others = 1 / (1 + 0.3*0.3) // share of the leaders at EA-4/02's limit
	switch {
	case len(lead) > 0 && lead[0].Share > others:
		c := lead[0]
		note := ""
		if c.Shape == ShapeRectangular {
			note = fmt.Sprintf(" (k = %.2f for that shape alone)", TrapezoidFactor(l.Probability, 1))
		}
		l.Warnings = append(l.Warnings, fmt.Errorf("%s, of %s shape, carries %.3g %% of the variance: k = %.2f overstates the interval%s; prefer the Monte Carlo interval",
			c.Input, c.Shape, 100*c.Share, l.K, note))
	case len(lead) == 2 && lead[0].Shape == ShapeRectangular && lead[1].Shape == ShapeRectangular && lead[0].Share+lead[1].Share > others:
		a, b := math.Abs(lead[0].Contribution), math.Abs(lead[1].Contribution)
		l.Warnings = append(l.Warnings, fmt.Errorf("%s and %s, both rectangular, carry %.3g %% of the variance: together a trapezoid with k = %.2f, for which k = %.2f overstates the interval; prefer the Monte Carlo interval",
			lead[0].Input, lead[1].Input, 100*(lead[0].Share+lead[1].Share), TrapezoidFactor(l.Probability, (a-b)/(a+b)), l.K))
	}
}

func checkLines(b []Contribution) error {
	for i := range b {
		c := &b[i]
		if c.DOF == 0 {
			c.DOF = math.Inf(1)
		}
		switch {
		case !(c.U >= 0) || math.IsInf(c.U, 1):
			return fmt.Errorf("input %s: standard uncertainty is %v: it must be finite and not negative", c.Input, c.U)
		case math.IsNaN(c.Sensitivity) || math.IsInf(c.Sensitivity, 0):
			return fmt.Errorf("input %s: the sensitivity coefficient is %v: the model has no derivative at the estimates", c.Input, c.Sensitivity)
		case !(c.DOF > 0):
			return fmt.Errorf("input %s: degrees of freedom are %v: they must be positive, or +Inf when the uncertainty is known", c.Input, c.DOF)
		case c.Shape == ShapeT && c.DOF <= 2 && c.Sensitivity != 0:
			return fmt.Errorf("input %s: %w (here %v), so that the law of propagation can't be applied; Monte Carlo still gives an interval", c.Input, ErrInfiniteVariance, c.DOF)
		}
	}
	return nil
}

func namesOf(b []Contribution) []string {
	names := make([]string, len(b))
	for i, c := range b {
		names[i] = c.Input
	}
	return names
}

func dofText(nu float64) string {
	if math.IsInf(nu, 1) {
		return "known uncertainty"
	}
	return fmt.Sprintf("%.4g degrees of freedom", nu)
}
