package assess

import (
	"errors"
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/gonum/integrate/quad"
)

// Population is what is known of the items before any is measured: their true
// values follow a normal distribution (the prior of JCGM 106:2012 6.3). Numbers
// are in the unit of the limits.
type Population struct {
	Mean   float64 `json:"mean"`
	SD     float64 `json:"sd"` // standard deviation of the true values, > 0
	Source string  `json:"source,omitempty"`
}

func (p *Population) to(unit, want string) (*Population, error) {
	if p == nil {
		return nil, nil
	}
	if math.IsNaN(p.Mean) || math.IsInf(p.Mean, 0) || !(p.SD > 0) || math.IsInf(p.SD, 0) {
		return nil, fmt.Errorf("population: mean %v and standard deviation %v: both must be finite and the second above zero", p.Mean, p.SD)
	}
	if unit == want {
		return p, nil
	}
	from, to, err := convertible(unit, want)
	if err != nil {
		return nil, fmt.Errorf("population: %w", err)
	}
	return &Population{Mean: to.FromSI(from.ToSI(p.Mean)), SD: to.DeltaFromSI(from.DeltaToSI(p.SD)), Source: p.Source}, nil
}

// GlobalRisk holds the probabilities of the four outcomes for an item drawn from
// the population, then measured (JCGM 106:2012 9.5). They sum to one.
type GlobalRisk struct {
	Consumer          float64 `json:"consumer"`         // R_C: accepted, though it does not conform
	Producer          float64 `json:"producer"`         // R_P: rejected, though it conforms
	RightlyAccepted   float64 `json:"rightly_accepted"` // accepted, and conforms
	RightlyRejected   float64 `json:"rightly_rejected"` // rejected, and does not conform
	AmongAccepted     float64 `json:"among_accepted"`   // share of accepted items that do not conform
	AmongRejected     float64 `json:"among_rejected"`   // share of rejected items that conform
	PopulationMean    float64 `json:"population_mean"`  // in the result's unit
	PopulationSD      float64 `json:"population_sd"`    // in the result's unit
	MeasurementU      float64 `json:"measurement_u"`    // in the result's unit
	PopulationSource  string  `json:"population_source,omitempty"`
	PopulationConform float64 `json:"population_conform"` // probability that an item conforms before it is measured
}

// GlobalRisks returns the global risks of accepting measured values within
// accept when the true values should lie within limits, for measurements of
// standard uncertainty u (unit of limits) of items from a population:
// JCGM 106:2012 9.5.3,
//
//	R_C = ∫ outside  g₀(η) Pr(η_m in accept | η) dη
//	R_P = ∫ inside   g₀(η) Pr(η_m not in accept | η) dη
//
// with g₀ and the measurement error both normal, so that true and measured value
// are bivariate normal. The inner integral is in closed form, the outer by
// Gauss–Legendre panels; results are good to 1e-12 of themselves or better.
func GlobalRisks(limits, accept Limits, u float64, p Population) (*GlobalRisk, error) {
	lower, upper, err := limits.ends(limits.Unit)
	if err != nil {
		return nil, err
	}
	al, au, err := accept.ends(limits.Unit)
	if err != nil {
		return nil, fmt.Errorf("acceptance %w", err)
	}
	if _, err := p.to(limits.Unit, limits.Unit); err != nil {
		return nil, err
	}
	return global(lower, upper, al, au, u, p)
}

func global(lower, upper, al, au, u float64, p Population) (*GlobalRisk, error) {
	if !(u > 0) || math.IsInf(u, 0) {
		return nil, fmt.Errorf("standard uncertainty %v must be above zero and finite", u)
	}
	inf := math.Inf(1)
	accepted := func(eta float64) float64 { return between((al-eta)/u, (au-eta)/u, inf) }
	rejected := func(eta float64) float64 { return outside((al-eta)/u, (au-eta)/u, inf) }
	over := func(f func(float64) float64, a, b float64) float64 {
		return integrate(f, a, b, p, u, al, au)
	}
	g := &GlobalRisk{
		Consumer:        over(accepted, math.Inf(-1), lower) + over(accepted, upper, inf),
		Producer:        over(rejected, lower, upper),
		RightlyAccepted: over(accepted, lower, upper),
		RightlyRejected: over(rejected, math.Inf(-1), lower) + over(rejected, upper, inf),
		PopulationMean:  p.Mean, PopulationSD: p.SD, PopulationSource: p.Source, MeasurementU: u,
		PopulationConform: between((lower-p.Mean)/p.SD, (upper-p.Mean)/p.SD, inf),
	}
	if a := g.Consumer + g.RightlyAccepted; a > 0 {
		g.AmongAccepted = g.Consumer / a
	}
	if r := g.Producer + g.RightlyRejected; r > 0 {
		g.AmongRejected = g.Producer / r
	}
	return g, nil
}

// reach is how many standard deviations on both sides an integral covers: the
// normal density is below the smallest float64 beyond 38.6.
const reach = 39

// integrate returns ∫ₐᵇ g₀(η) f(η) dη. Panels are one standard deviation of the
// population wide, and one of the measurement wide around the acceptance limits,
// so that no panel sees a step.
func integrate(f func(float64) float64, a, b float64, p Population, u, al, au float64) float64 {
	a, b = math.Max(a, p.Mean-reach*p.SD), math.Min(b, p.Mean+reach*p.SD)
	if a >= b {
		return 0
	}
	edges := []float64{a, b}
	around := func(centre, width float64) {
		for k := -reach; k <= reach; k++ {
			if e := centre + float64(k)*width; e > a && e < b {
				edges = append(edges, e)
			}
		}
	}
	around(p.Mean, p.SD)
	for _, limit := range []float64{al, au} {
		if !math.IsInf(limit, 0) {
			around(limit, u)
		}
	}
	sort.Float64s(edges)
	g := func(eta float64) float64 {
		z := (eta - p.Mean) / p.SD
		return math.Exp(-z*z/2) / (p.SD * math.Sqrt(2*math.Pi)) * f(eta)
	}
	var x, w [24]float64
	quad.Legendre{}.FixedLocations(x[:], w[:], -1, 1)
	sum := 0.0
	for i := 1; i < len(edges); i++ {
		middle, half := (edges[i-1]+edges[i])/2, (edges[i]-edges[i-1])/2
		for k := range x {
			sum += half * w[k] * g(middle+half*x[k])
		}
	}
	return sum
}

func checkRisk(risk float64) error {
	if !(risk > 0 && risk < 0.5) {
		return fmt.Errorf("risk %v must lie between 0 and 0.5 (5 %% is written 0.05)", risk)
	}
	return nil
}

// guardForRisk returns w such that a value on an acceptance limit has the given
// specific risk of false acceptance, both limits counted (JCGM 106:2012 8.3.2).
func guardForRisk(risk float64, r Result, lower, upper float64) (float64, error) {
	if err := checkRisk(risk); err != nil {
		return 0, err
	}
	if math.IsInf(lower, 0) || math.IsInf(upper, 0) {
		return -quantile(risk, r.dof()) * r.U, nil
	}
	half := (upper - lower) / 2
	at := func(w float64) float64 { return outside((w-2*half)/r.U, w/r.U, r.dof()) }
	if least := at(half); least > risk {
		return 0, fmt.Errorf("no guard band keeps the risk of false acceptance at %v: even a value midway between the limits has %.3g; the measurement uncertainty %s is too large for them",
			risk, least, short(r.U, r.Unit))
	}
	return bisect(func(w float64) bool { return at(w) > risk }, 0, half), nil
}

// guardForConsumer returns the smallest w ≥ 0 whose global consumer's risk does
// not exceed risk.
func guardForConsumer(risk, u, lower, upper float64, p Population) (float64, error) {
	if err := checkRisk(risk); err != nil {
		return 0, err
	}
	exceeds := func(w float64) bool {
		g, err := global(lower, upper, lower+w, upper-w, u, p)
		return err != nil || g.Consumer > risk
	}
	if !exceeds(0) {
		return 0, nil
	}
	most := (upper - lower) / 2 * (1 - 1e-9)
	if math.IsInf(most, 0) {
		most = reach * (u + p.SD)
	}
	if exceeds(most) {
		return 0, errors.New("no guard band reaches the global consumer's risk asked for: the measurement uncertainty is too large for these limits")
	}
	return bisect(exceeds, 0, most), nil
}

// bisect returns the smallest x in (a, b] at which high turns false, to the last
// bits; high(a) is true or a is the answer's lower bound, high(b) is false.
func bisect(high func(float64) bool, a, b float64) float64 {
	for range 200 {
		m := a + (b-a)/2
		if m == a || m == b {
			break
		}
		if high(m) {
			a = m
		} else {
			b = m
		}
	}
	return b
}

// Spread is the standard uncertainty of a reading that may depend on the reading
// itself: u(y) = √(U² + (Relative·y)²).
type Spread struct {
	U        float64 // constant part, unit of the reading
	Relative float64 // proportional part, 1
	DOF      float64 // degrees of freedom; 0: infinite
}

// ReadingAt returns the reading for which the true value lies above limit with
// probability p (JCGM 106:2012 8.3.3; the acceptance or rejection limit that
// belongs to p): the root of y − limit = q·u(y), q the quantile of p. It refuses
// a spread so wide that no reading gives that probability.
func (s Spread) ReadingAt(limit, p float64) (float64, error) {
	if !(p > 0 && p < 1) {
		return 0, fmt.Errorf("probability %v must lie between 0 and 1", p)
	}
	if s.U < 0 || s.Relative < 0 || s.U == 0 && s.Relative == 0 || s.DOF < 0 || math.IsNaN(s.U+s.Relative+limit) || math.IsInf(s.U+s.Relative+limit, 0) {
		return 0, fmt.Errorf("limit %v, standard uncertainty %v and relative standard uncertainty %v: finite numbers are wanted, the uncertainties not both zero", limit, s.U, s.Relative)
	}
	q := quantile(p, Result{DOF: s.DOF}.dof())
	a := 1 - (q*s.Relative)*(q*s.Relative)
	if a <= 0 {
		return 0, fmt.Errorf("with a relative standard uncertainty of %v no reading has its true value above %v with probability %v", s.Relative, limit, p)
	}
	// (y − L)² = q²(U² + R²y²), solved for y − L
	root := math.Abs(q) * math.Sqrt(a*s.U*s.U+(s.Relative*limit)*(s.Relative*limit))
	y := limit + (q*q*s.Relative*s.Relative*limit+math.Copysign(root, q))/a
	return y, nil
}
