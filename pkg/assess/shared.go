package assess

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
	"gonum.org/v1/gonum/mat"
)

// Shared is what several records have in common: their results and the
// covariance that common inputs cause.
type Shared struct {
	Results    []Result      `json:"results"` // one a record, in the unit of the first
	Covariance *mat.SymDense `json:"-"`       // of Results, unit squared
	Inputs     []SharedInput `json:"inputs"`
	Warnings   []error       `json:"-"`
}

// SharedInput is one input whose error is the same in several records.
type SharedInput struct {
	Input   string    `json:"input"` // as the first of the records calls it
	Source  string    `json:"source,omitempty"`
	Records []int     `json:"records"` // indices, rising
	Share   []float64 `json:"share"`   // its part of the variance of each of those results
}

// SharedCovariance returns the first measurand of each record with the
// covariance of common inputs; see SharedCovarianceOf.
func SharedCovariance(records []*reduce.Record, shared []string) (*Shared, error) {
	return SharedCovarianceOf(records, "", shared)
}

// SharedCovarianceOf returns the named measurand of each record (empty: the
// first) and the covariance matrix that follows from the budgets, JCGM 100
// F.1.2.3 eq. (F.1):
//
//	cov(y_i, y_j) = Σ over common inputs  c_i c_j u²
//
// shared names the inputs that the records have in common, by input ("voltage
// gain" of every budget) or by source (a certificate). With shared nil they are
// found: budget lines with the same input and the same source, not empty. So a
// source has to name one certificate or serial number: under a phrase that fits
// any ("divider certificate") two instruments look like one. Inputs of the result
// says what was taken as common. Where
// two records state different u for a common input the smaller is taken as
// common (a drift allowance that one of them adds is its own), and a warning
// says so. It refuses a name that fewer than two records have.
//
// Correlations between different inputs of different records are not known to
// the budgets and are left out.
func SharedCovarianceOf(records []*reduce.Record, measurand string, shared []string) (*Shared, error) {
	if len(records) < 2 {
		return nil, fmt.Errorf("common inputs need at least two records; got %d", len(records))
	}
	results := make([]Result, len(records))
	budgets := make([][]reduce.BudgetLine, len(records))
	for i, rec := range records {
		m, err := find(rec, measurand)
		if err != nil {
			return nil, fmt.Errorf("record %d: %w", i+1, err)
		}
		if results[i], err = FromRecord(rec, measurand); err != nil {
			return nil, fmt.Errorf("record %d: %w", i+1, err)
		}
		if err := adds(m); err != nil {
			return nil, fmt.Errorf("record %d (%s): %w", i+1, rec.Title, err)
		}
		budgets[i] = m.Budget
	}
	out := &Shared{}
	var err error
	if out.Results, err = alike(results, 2, "a covariance"); err != nil {
		return nil, err
	}
	n := len(records)
	out.Covariance = mat.NewSymDense(n, nil)
	for i, r := range out.Results {
		out.Covariance.SetSym(i, i, r.U*r.U)
	}
	links, err := common(budgets, shared, out)
	if err != nil {
		return nil, err
	}
	for _, k := range links {
		a, b := budgets[k.i][k.a], budgets[k.j][k.b]
		ua, ub := float64(a.U), float64(b.U)
		if ua == 0 || ub == 0 {
			continue
		}
		low := math.Min(ua, ub)
		if math.Abs(ua-ub) > 1e-6*low {
			out.Warnings = append(out.Warnings, fmt.Errorf("%s: %s has u = %.4g, %s %.4g for the same input; the smaller is taken as common",
				a.Input, out.Results[k.i].Name, ua, out.Results[k.j].Name, ub))
		}
		c := relative(a, results[k.i].U) * relative(b, results[k.j].U) * (low / ua) * (low / ub)
		c *= out.Results[k.i].U * out.Results[k.j].U
		out.Covariance.SetSym(k.i, k.j, out.Covariance.At(k.i, k.j)+c)
	}
	if _, _, err := covariance(out.Results, out.Covariance); err != nil {
		return nil, fmt.Errorf("covariance of common inputs (is one record given twice?): %w", err)
	}
	return out, nil
}

// relative returns the signed contribution of a line over the standard
// uncertainty of the measurand, which is free of the unit.
func relative(l reduce.BudgetLine, u float64) float64 {
	return math.Copysign(float64(l.Contribution)/u, float64(l.Sensitivity))
}

// adds refuses a budget that can't be that of its measurand.
func adds(m *reduce.Measurand) error {
	if len(m.Budget) == 0 {
		return fmt.Errorf("measurand %q has no budget to find common inputs in", m.Name)
	}
	sum := 0.0
	for _, l := range m.Budget {
		for _, x := range []reduce.Number{l.U, l.Sensitivity, l.Contribution} {
			if math.IsNaN(float64(x)) || math.IsInf(float64(x), 0) {
				return fmt.Errorf("budget line %q of %q has no finite uncertainty and sensitivity", l.Input, m.Name)
			}
		}
		sum += float64(l.Contribution) * float64(l.Contribution)
	}
	// correlations can raise or lower the sum, not by orders of magnitude
	if r := math.Sqrt(sum) / float64(m.U); !(r > 0.01 && r < 100) {
		return fmt.Errorf("the contributions of %q add up to %.3g, its standard uncertainty is %.3g", m.Name, math.Sqrt(sum), float64(m.U))
	}
	return nil
}

type link struct{ i, a, j, b int } // line a of record i and line b of record j, i < j

// common finds the pairs of lines that hold the same error and lists them in
// out.Inputs.
func common(budgets [][]reduce.BudgetLine, shared []string, out *Shared) ([]link, error) {
	var links []link
	seen := map[link]bool{}
	add := func(k link) {
		if seen[k] {
			return
		}
		seen[k] = true
		links = append(links, k)
		a := budgets[k.i][k.a]
		at := slices.IndexFunc(out.Inputs, func(s SharedInput) bool {
			return s.Input == a.Input && slices.Contains(s.Records, k.i) && s.Source == a.Source
		})
		if at < 0 {
			out.Inputs = append(out.Inputs, SharedInput{Input: a.Input, Source: a.Source})
			at = len(out.Inputs) - 1
		}
		s := &out.Inputs[at]
		for _, end := range [][2]int{{k.i, k.a}, {k.j, k.b}} {
			if !slices.Contains(s.Records, end[0]) {
				r := float64(budgets[end[0]][end[1]].Contribution) / out.unscaledU(end[0], budgets)
				s.Records, s.Share = append(s.Records, end[0]), append(s.Share, r*r)
			}
		}
	}
	pair := func(match func(i, a, j, b int) bool) (found bool) {
		for i := range budgets {
			for j := i + 1; j < len(budgets); j++ {
				for a := range budgets[i] {
					for b := range budgets[j] {
						if match(i, a, j, b) {
							add(link{i, a, j, b})
							found = true
						}
					}
				}
			}
		}
		return found
	}
	if shared == nil {
		pair(func(i, a, j, b int) bool {
			x, y := budgets[i][a], budgets[j][b]
			return x.Source != "" && x.Source == y.Source && x.Input == y.Input
		})
		return links, nil
	}
	for _, name := range shared {
		if name == "" {
			return nil, errors.New("a common input needs a name")
		}
		byInput := pair(func(i, a, j, b int) bool {
			x, y := budgets[i][a], budgets[j][b]
			if x.Input != name || y.Input != name {
				return false
			}
			if x.Source != y.Source && x.Source != "" && y.Source != "" {
				out.Warnings = append(out.Warnings, fmt.Errorf("%s is said to be common, but %s has it from %q, %s from %q",
					name, out.Results[i].Name, x.Source, out.Results[j].Name, y.Source))
			}
			return true
		})
		single := make([]int, len(budgets))
		for i := range budgets {
			for _, l := range budgets[i] {
				if l.Source == name {
					single[i]++
				}
			}
		}
		bySource := pair(func(i, a, j, b int) bool {
			x, y := budgets[i][a], budgets[j][b]
			return x.Source == name && y.Source == name && (x.Input == y.Input || single[i] == 1 && single[j] == 1)
		})
		if !byInput && !bySource {
			return nil, unknownInput(name, budgets)
		}
	}
	return links, nil
}

// unscaledU returns the root sum of squares of a budget, against which shares of
// variance are stated.
func (s *Shared) unscaledU(i int, budgets [][]reduce.BudgetLine) float64 {
	sum := 0.0
	for _, l := range budgets[i] {
		sum += float64(l.Contribution) * float64(l.Contribution)
	}
	return math.Sqrt(sum)
}

func unknownInput(name string, budgets [][]reduce.BudgetLine) error {
	count := 0
	var known []string
	for _, b := range budgets {
		here := false
		for _, l := range b {
			here = here || l.Input == name || l.Source == name
			for _, w := range []string{l.Input, l.Source} {
				if w != "" && !slices.Contains(known, w) {
					known = append(known, w)
				}
			}
		}
		if here {
			count++
		}
	}
	if count > 0 {
		return fmt.Errorf("%q can't be matched between two records: %d of %d name it, or its lines differ; name the input as the budgets do", name, count, len(budgets))
	}
	if near := si.Suggest(name, known); near != "" {
		return fmt.Errorf("no budget has an input or source %q; did you mean %q?", name, near)
	}
	return fmt.Errorf("no budget has an input or source %q; they have %q", name, known)
}
