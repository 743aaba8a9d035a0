package lsq

import (
	"fmt"
	"math"
)

// LackOfFit splits the residual sum of squares of a fit into what replicates
// scatter about their own mean (pure error) and what their means scatter about
// the model (Draper and Smith, Applied Regression Analysis, 3rd ed., section
// 2.1). A small p-value says that the model misses the means by more than the
// replicates' scatter explains.
type LackOfFit struct {
	ModelSS  float64 // of the groups' means about the model, weighted
	PureSS   float64 // of replicates about their group's mean, weighted
	ModelDOF int
	PureDOF  int
	F        float64
	PValue   float64
}

// LackOfFit tests r against replicates: rows with the same group number were
// read at the same true setting. Readings must be independent.
func (r *Result) LackOfFit(group []int) (*LackOfFit, error) {
	if len(group) != len(r.Fitted) {
		return nil, fmt.Errorf("lsq: %d group numbers for %d readings", len(group), len(r.Fitted))
	}
	if !r.white.diagonal() {
		return nil, fmt.Errorf("lsq: lack of fit against replicates needs independent readings; these are correlated")
	}
	type sums struct{ w, wy float64 }
	at := map[int]int{}
	var g []sums
	index := make([]int, len(group))
	for i, k := range group {
		s, ok := at[k]
		if !ok {
			s = len(g)
			at[k] = s
			g = append(g, sums{})
		}
		index[i] = s
		w := r.weight(i)
		g[s].w += w
		g[s].wy += w * r.Residuals[i] // replicates share their true setting, not always their fitted value
	}
	l := &LackOfFit{}
	total := 0.0
	for i, s := range index {
		w := r.weight(i)
		d := r.Residuals[i] - g[s].wy/g[s].w
		l.PureSS += w * d * d
		total += w * r.Residuals[i] * r.Residuals[i]
	}
	l.ModelSS = math.Max(0, total-l.PureSS)
	l.PureDOF = len(group) - len(g)
	l.ModelDOF = len(g) - len(r.factor)
	if l.PureDOF <= 0 {
		return nil, fmt.Errorf("lsq: there are no replicates: every reading is a group of its own")
	}
	if l.ModelDOF <= 0 {
		return nil, fmt.Errorf("lsq: %d groups can't test a model with %d parameters", len(g), len(r.factor))
	}
	if l.PureSS <= 1e-28*total {
		return nil, fmt.Errorf("lsq: replicates are all equal, so that they show no scatter to judge the model by; the resolution of the readings may hide it")
	}
	l.F = (l.ModelSS / float64(l.ModelDOF)) / (l.PureSS / float64(l.PureDOF))
	l.PValue = fTail(l.F, float64(l.ModelDOF), float64(l.PureDOF))
	return l, nil
}

// Nested is the comparison of a model with one that has more free parameters.
type Nested struct {
	ExtraParameters int
	F               float64 // reduction of chi-squared per extra parameter over that left per degree of freedom
	PValueF         float64 // holds whether or not the uncertainties are known
	DeltaChi2       float64 // reduction of chi-squared; NaN when uncertainties are unknown
	PValueChi2      float64 // its probability from chi-squared; NaN when uncertainties are unknown
}

// CompareNested tests whether the larger model describes the readings better
// than the smaller one by more than chance (Draper and Smith, 3rd ed., section
// 6.1). Both fits must be of the same readings with the same weights, and the
// smaller model a special case of the larger.
func CompareNested(small, large *Result) (*Nested, error) {
	if len(small.Fitted) != len(large.Fitted) {
		return nil, fmt.Errorf("lsq: the fits are of %d and %d readings; they must be of the same", len(small.Fitted), len(large.Fitted))
	}
	extra := small.DOF - large.DOF
	if extra <= 0 {
		return nil, fmt.Errorf("lsq: the second model must have more free parameters than the first; degrees of freedom are %d and %d", small.DOF, large.DOF)
	}
	if small.ScaledByResiduals != large.ScaledByResiduals {
		return nil, fmt.Errorf("lsq: one fit has known uncertainties and the other not; they can't be compared")
	}
	for i := range small.Fitted {
		v := small.white.variance(i)
		if math.Abs(v-large.white.variance(i)) > 2e-6*v {
			return nil, fmt.Errorf("lsq: the fits weigh reading %d differently; compare fits with the same frozen weights", i+1)
		}
	}
	c := &Nested{ExtraParameters: extra, DeltaChi2: math.NaN(), PValueChi2: math.NaN(), F: math.NaN(), PValueF: math.NaN()}
	diff := small.ChiSquared - large.ChiSquared
	if large.DOF > 0 {
		c.F = (diff / float64(extra)) / (large.ChiSquared / float64(large.DOF))
		c.PValueF = fTail(math.Max(c.F, 0), float64(extra), float64(large.DOF))
	}
	if !large.ScaledByResiduals {
		c.DeltaChi2 = diff
		c.PValueChi2 = chiSquaredTail(math.Max(diff, 0), extra)
	}
	return c, nil
}

// AICc is Akaike's information criterion with the correction for small samples
// (Hurvich and Tsai, Biometrika 76 (1989) 297), up to a constant that is the
// same for all models of the same readings: smaller is better. With unknown
// uncertainties the noise counts as one more parameter; beside priors or effects
// its likelihood is that at the noise found. Weights that Reweight changed are
// taken as known, so that only models with like weights compare. NaN when there
// are too few readings for the correction.
func (r *Result) AICc() float64 {
	n, k := float64(len(r.Fitted)), float64(len(r.factor))
	dev := r.ChiSquared
	switch {
	case r.noiseFound: // chi-squared is DOF there, whatever the model
		dev += r.white.logDeterminant() - n
		k++
	case r.ScaledByResiduals:
		dev = n * math.Log(r.ChiSquared/n)
		k++
	}
	if n-k-1 <= 0 {
		return math.NaN()
	}
	return dev + 2*k + 2*k*(k+1)/(n-k-1)
}
