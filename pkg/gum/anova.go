package gum

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// A Nested is the analysis of variance of readings taken in groups, one group a
// day or a mounting (JCGM 100:2008 H.5): J groups of K readings.
type Nested struct {
	Mean    float64      // grand mean
	SA      float64      // standard deviation of a reading from the scatter of the group means: s_a² = K Σ(V̄_j − V̄)²/(J−1)
	SB      float64      // standard deviation of a reading within its group, pooled
	Effect  float64      // standard deviation s_B of the group effect, s_B² = (s_a² − s_b²)/K; 0 when that is negative
	F       float64      // s_a²/s_b²
	PValue  float64      // probability of an F at least as large without a group effect
	DOFA    float64      // J − 1
	DOFB    float64      // J(K − 1)
	Between Distribution // the mean when there is a group effect: u = s_a/√(JK), J − 1 degrees of freedom
	Pooled  Distribution // the mean when there is none: all readings pooled, JK − 1 degrees of freedom
}

// AnalyseGroups does the analysis of variance of readings by group. There must be
// two groups or more, all of one size, of two readings or more.
func AnalyseGroups(groups [][]float64) (*Nested, error) {
	var means, sds []float64
	for j, g := range groups {
		if len(g) != len(groups[0]) {
			return nil, fmt.Errorf("group %d has %d readings and the first has %d: this analysis needs groups of one size", j+1, len(g), len(groups[0]))
		}
		if len(g) < 2 {
			return nil, fmt.Errorf("group %d has %d readings: two or more are needed", j+1, len(g))
		}
		var mean, ss float64
		for i, v := range g {
			if v-v != 0 {
				return nil, fmt.Errorf("group %d, reading %d is %v: it must be finite", j+1, i+1, v)
			}
			d := v - mean
			mean += d / float64(i+1)
			ss += d * (v - mean)
		}
		means = append(means, mean)
		sds = append(sds, math.Sqrt(ss/float64(len(g)-1)))
	}
	if len(groups) == 0 {
		return nil, errors.New("no groups")
	}
	return AnalyseMeans(means, sds, len(groups[0]))
}

// AnalyseMeans does the same from the mean and standard deviation of each group
// of k readings.
func AnalyseMeans(means, sds []float64, k int) (*Nested, error) {
	j := len(means)
	if j < 2 || len(sds) != j || k < 2 {
		return nil, fmt.Errorf("%d means and %d standard deviations of groups of %d readings: two groups or more are needed, with one of each, of two readings or more", j, len(sds), k)
	}
	n := &Nested{DOFA: float64(j - 1), DOFB: float64(j * (k - 1))}
	for i := range means {
		if !(sds[i] >= 0) || math.IsInf(sds[i], 1) || means[i]-means[i] != 0 {
			return nil, fmt.Errorf("group %d has mean %v and standard deviation %v: they must be finite, and the latter not negative", i+1, means[i], sds[i])
		}
		n.SB += sds[i] * sds[i] / float64(j)
	}
	var ss float64
	for i, m := range means {
		d := m - n.Mean
		n.Mean += d / float64(i+1)
		ss += d * (m - n.Mean)
	}
	a, b := float64(k)*ss/n.DOFA, n.SB
	if !(a > 0 && b > 0) {
		return nil, errors.New("the readings do not scatter between the groups, or not within them: there is no variance to compare")
	}
	n.SA, n.SB = math.Sqrt(a), math.Sqrt(b)
	n.F = a / b
	n.PValue = distuv.F{D1: n.DOFA, D2: n.DOFB}.Survival(n.F)
	n.Effect = math.Sqrt(math.Max(0, (a-b)/float64(k)))
	all := float64(j * k)
	n.Between = Distribution{Shape: ShapeNormal, Value: n.Mean, U: n.SA / math.Sqrt(all), DOF: n.DOFA}
	n.Pooled = Distribution{Shape: ShapeNormal, Value: n.Mean, U: math.Sqrt((n.DOFA*a+n.DOFB*b)/(all-1)) / math.Sqrt(all), DOF: all - 1}
	return n, nil
}
