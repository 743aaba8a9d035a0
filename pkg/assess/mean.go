package assess

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// defaultLevel is the significance level of consistency (Cox 2002, Metrologia
// 39, 589, procedure A).
const defaultLevel = 0.05

// Mean is a weighted mean as reference value, with the test that the results
// are consistent with it.
type Mean struct {
	Results    []Result      `json:"results"` // as used, in the unit of the first
	Covariance *mat.SymDense `json:"-"`       // of Results, unit squared
	Weights    []float64     `json:"weights"` // sum to one; 0 for results left out
	Value      float64       `json:"value"`
	U          float64       `json:"u"`          // standard uncertainty from the stated ones (internal consistency)
	UExternal  float64       `json:"u_external"` // U times the Birge ratio (external consistency)
	ChiSquared float64       `json:"chi_squared"`
	DOF        int           `json:"dof"`
	PValue     float64       `json:"p_value"`     // probability of a larger chi-squared
	BirgeRatio float64       `json:"birge_ratio"` // √(chi-squared/dof)
	Level      float64       `json:"level"`       // significance level of Consistent
	Consistent bool          `json:"consistent"`  // PValue ≥ Level
	Warnings   []error       `json:"-"`
}

// WeightedMean returns the generalised least-squares mean of results with their
// covariance matrix (unit of the first result squared, variances equal to the
// squares of U; nil: independent),
//
//	x̄ = 1ᵀV⁻¹x / 1ᵀV⁻¹1,   u²(x̄) = 1/1ᵀV⁻¹1,   χ² = (x − x̄1)ᵀV⁻¹(x − x̄1)
//
// (Cox 2002, Metrologia 39, 589, eqs 1–4, for independent results; with V,
// JCGM 102:2011 or any text on generalised least squares) and the Birge ratio
// (Birge 1932, Phys. Rev. 40, 207). Nothing is rescaled by it: UExternal stands
// beside U. Consistency is judged at 5 %.
func WeightedMean(results []Result, cov *mat.SymDense) (*Mean, error) {
	rs, err := alike(results, 2, "a weighted mean")
	if err != nil {
		return nil, err
	}
	v, chol, err := covariance(rs, cov)
	if err != nil {
		return nil, err
	}
	return mean(rs, v, chol, nil, defaultLevel)
}

// mean computes the mean of the results listed in members (nil: all), with
// consistency judged at a level; chol factorises the correlation matrix of the
// members.
func mean(rs []Result, v *mat.SymDense, chol *mat.Cholesky, members []int, level float64) (*Mean, error) {
	if members == nil {
		for i := range rs {
			members = append(members, i)
		}
	}
	n := len(members)
	m := &Mean{Results: rs, Covariance: v, Weights: make([]float64, len(rs)), DOF: n - 1, Level: level}
	// Whitened by u and the correlation matrix R: a = 1/u, b = (x − x₀)/u. The
	// shift by x₀ keeps the digits of values that differ little.
	x0 := rs[members[0]].Value
	a, b := mat.NewVecDense(n, nil), mat.NewVecDense(n, nil)
	for k, i := range members {
		a.SetVec(k, 1/rs[i].U)
		b.SetVec(k, (rs[i].Value-x0)/rs[i].U)
	}
	var ra, rr mat.VecDense
	if err := chol.SolveVecTo(&ra, a); err != nil {
		return nil, err
	}
	information := mat.Dot(a, &ra)
	shift := mat.Dot(b, &ra) / information
	m.Value, m.U = x0+shift, 1/math.Sqrt(information)
	negative := false
	for k, i := range members {
		m.Weights[i] = a.AtVec(k) * ra.AtVec(k) / information
		negative = negative || m.Weights[i] < 0
	}
	residual := mat.NewVecDense(n, nil)
	residual.AddScaledVec(b, -shift, a)
	if err := chol.SolveVecTo(&rr, residual); err != nil {
		return nil, err
	}
	m.ChiSquared = math.Max(0, mat.Dot(residual, &rr))
	m.PValue, m.BirgeRatio = math.NaN(), math.NaN()
	if m.DOF > 0 {
		m.PValue = chiTail(m.ChiSquared, m.DOF)
		m.BirgeRatio = math.Sqrt(m.ChiSquared / float64(m.DOF))
	}
	m.UExternal = m.U * m.BirgeRatio
	m.Consistent = m.PValue >= m.Level
	if !m.Consistent {
		m.Warnings = append(m.Warnings, fmt.Errorf("the results are not consistent: chi-squared %.4g for %d degrees of freedom has probability %.2g; the uncertainty of the mean rests on uncertainties that do not explain the scatter", m.ChiSquared, m.DOF, m.PValue))
	}
	if negative {
		m.Warnings = append(m.Warnings, errors.New("a strong correlation gives a result a negative weight: the mean may lie outside the results; check the shared part of the covariance"))
	}
	return m, nil
}

// AsResult returns the mean as a Result with K = 2.
func (m *Mean) AsResult() Result {
	return Result{Name: "weighted mean", Value: m.Value, U: m.U, K: 2, Unit: m.Results[0].Unit}
}

// Degree is a degree of equivalence: a difference with its uncertainty.
type Degree struct {
	A        string  `json:"a"`
	B        string  `json:"b,omitempty"` // "": the reference value
	D        float64 `json:"d"`           // A − B, unit of the results
	U        float64 `json:"u"`           // standard uncertainty of D
	Expanded float64 `json:"expanded"`    // 2U
	En       float64 `json:"en"`          // D/Expanded
}

func degree(a, b string, d, u float64) Degree {
	return Degree{A: a, B: b, D: d, U: u, Expanded: 2 * u, En: d / (2 * u)}
}

// Degrees holds unilateral degrees of equivalence (laboratory minus reference
// value) and bilateral ones (Bilateral[i][j]: i minus j; zero where i = j).
type Degrees struct {
	Unit       string     `json:"unit"`
	Unilateral []Degree   `json:"unilateral"`
	Bilateral  [][]Degree `json:"bilateral"`
}

// Degrees returns the degrees of equivalence with the mean,
//
//	d_i = x_i − x̄,   u²(d_i) = (e_i − w)ᵀV(e_i − w)
//
// which is u_i² − u²(x̄) for a result that took part in the mean (Cox 2002,
// Metrologia 39, 589, eq. 5) and also holds for one that was left out and for
// correlated results; and the bilateral ones, u²(d_ij) = V_ii + V_jj − 2V_ij.
// Expanded uncertainties have k = 2.
func (m *Mean) Degrees() *Degrees {
	n := len(m.Results)
	d := pairs(m.Results, m.Covariance)
	for i, r := range m.Results {
		e := mat.NewVecDense(n, nil)
		for j := range n {
			e.SetVec(j, -m.Weights[j])
		}
		e.SetVec(i, 1-m.Weights[i])
		d.Unilateral = append(d.Unilateral, degree(r.Name, "", r.Value-m.Value, math.Sqrt(mat.Inner(e, m.Covariance, e))))
	}
	return d
}

// DegreesAgainst returns degrees of equivalence with a reference value from
// outside, such as a pilot laboratory's. cov is the covariance of results (nil:
// independent), covReference that of each result with the reference (nil: none),
// both in the unit of the first result squared.
func DegreesAgainst(results []Result, cov *mat.SymDense, reference Result, covReference []float64) (*Degrees, error) {
	rs, err := alike(results, 1, "a degree of equivalence")
	if err != nil {
		return nil, err
	}
	v, _, err := covariance(rs, cov)
	if err != nil {
		return nil, err
	}
	if err := reference.check(false); err != nil {
		return nil, err
	}
	if reference, err = reference.to(rs[0].Unit); err != nil {
		return nil, err
	}
	if covReference != nil && len(covReference) != len(rs) {
		return nil, fmt.Errorf("%d covariances with the reference for %d results", len(covReference), len(rs))
	}
	d := pairs(rs, v)
	for i, r := range rs {
		c := 0.0
		if covReference != nil {
			c = covReference[i]
		}
		zeta, err := Zeta(r, reference, c)
		if err != nil {
			return nil, err
		}
		diff := r.Value - reference.Value
		u := math.Sqrt(r.U*r.U + reference.U*reference.U - 2*c)
		one := degree(r.Name, "", diff, u)
		one.En = zeta / 2
		d.Unilateral = append(d.Unilateral, one)
	}
	return d, nil
}

func pairs(rs []Result, v *mat.SymDense) *Degrees {
	d := &Degrees{Unit: rs[0].Unit, Bilateral: make([][]Degree, len(rs))}
	for i, a := range rs {
		d.Bilateral[i] = make([]Degree, len(rs))
		for j, b := range rs {
			if i == j {
				d.Bilateral[i][j] = Degree{A: a.Name, B: b.Name}
				continue
			}
			d.Bilateral[i][j] = degree(a.Name, b.Name, a.Value-b.Value, math.Sqrt(v.At(i, i)+v.At(j, j)-2*v.At(i, j)))
		}
	}
	return d
}
