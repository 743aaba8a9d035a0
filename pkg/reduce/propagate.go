package reduce

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"strconv"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/si"
)

// PropagateSettings say how to propagate a budget. The zero PropagateSettings
// are the defaults.
type PropagateSettings struct {
	Seed        uint64  // of the random streams; 0 is a seed
	Trials      int64   // Monte Carlo trials; 0: gum.DefaultTrials. Adaptive: the most to spend, 0: 1e8
	Adaptive    bool    // choose the number of trials by JCGM 101:2008 7.9
	LawOnly     bool    // no Monte Carlo
	SecondOrder bool    // add the second-order terms of JCGM 100:2008 5.1.2, note
	Probability float64 // coverage probability; 0: what the budget says, else 0.9545
	Digits      int     // significant digits of u that count, for the comparison of JCGM 101 clause 8 and for Adaptive; 0: 1
	Command     string  // what the record calls the run; "": "propagate"
}

// Propagation is what Propagate found: its record, and the numbers behind the
// figures.
type Propagation struct {
	Record PropagationRecord
	Result *gum.Result // histograms, joint regions, points; nil when read from a record
}

// PropagationRecord is a propagation as it is written: inputs and outputs with
// law, budget and Monte Carlo. Numbers are SI unless a unit beside them says
// otherwise.
type PropagationRecord struct {
	Format      int            `json:"format"`
	Guardring   string         `json:"guardring"`
	Title       string         `json:"title"`
	Run         RunRecord      `json:"run"`
	Inputs      []Input        `json:"inputs"`
	Outputs     []BudgetResult `json:"outputs"`
	Correlation [][]Number     `json:"correlation"` // of the outputs: from Monte Carlo if it was run, else by the law
	Covariance  [][]Number     `json:"covariance"`  // likewise
	Regions     []JointRegion  `json:"regions,omitempty"`
	Sequences   int            `json:"sequences,omitempty"` // of the adaptive procedure
	Warnings    []string       `json:"warnings"`
}

// BudgetResult is one output of a budget. Law is nil where the law can't be
// applied; a warning says why.
type BudgetResult struct {
	Name       string      `json:"name"`
	Formula    string      `json:"formula"`
	Unit       string      `json:"unit"`        // of all numbers here: the coherent SI unit
	StatedUnit string      `json:"stated_unit"` // the unit that the budget asks for, for display
	Law        *LawRecord  `json:"law"`
	MonteCarlo *MonteCarlo `json:"monte_carlo,omitempty"`
}

// Measurand is the output in the form of a reduction's, for what reads those; its
// budget is empty where the law can't be applied.
func (o *BudgetResult) Measurand() Measurand {
	unknown := Number(math.NaN())
	m := Measurand{Name: o.Name, Doc: o.Formula, Unit: o.Unit, Value: unknown, U: unknown, DOF: unknown, K: unknown, Probability: unknown,
		Interval: [2]Number{unknown, unknown}, Budget: []BudgetLine{}, MonteCarlo: o.MonteCarlo}
	if l := o.Law; l != nil {
		m.Value, m.U, m.DOF, m.K, m.Probability, m.Interval = l.Value, l.U, l.DOF, l.K, l.Probability, l.Interval
		for _, b := range l.Budget {
			m.Budget = append(m.Budget, b.BudgetLine)
		}
	}
	return m
}

// LawRecord is the result of the law of propagation for one output.
type LawRecord struct {
	Value       Number       `json:"value"`
	U           Number       `json:"u"`
	DOF         Number       `json:"dof"`                   // null: infinite
	DOFUnknown  bool         `json:"dof_unknown,omitempty"` // dof is null because none can be stated; a warning says why
	K           Number       `json:"k"`
	Probability Number       `json:"probability"`
	Interval    [2]Number    `json:"interval"`
	SecondOrder *HigherTerm  `json:"second_order,omitempty"` // when it was asked for
	Budget      []StatedLine `json:"budget"`
}

// HigherTerm is what the second-order terms of JCGM 100:2008 5.1.2, note, do.
type HigherTerm struct {
	FirstOrderU Number `json:"first_order_u"` // u without them
	Shift       Number `json:"shift"`         // change of the expectation, not in the value
}

// StatedLine is a line of a budget with the unit in which the budget states the
// input.
type StatedLine struct {
	BudgetLine
	StatedUnit string `json:"stated_unit"`
}

// JointRegion is a joint coverage region of all outputs (JCGM 102:2011 7.7).
type JointRegion struct {
	Kind        string     `json:"kind"` // "ellipse" or "rectangle"
	Probability Number     `json:"probability"`
	Centre      []Number   `json:"centre"`
	Shape       [][]Number `json:"shape"`
	K           Number     `json:"k"`
}

// Propagate states the uncertainty of every output of a budget by the law and by
// Monte Carlo.
func Propagate(ctx context.Context, b *bench.Budget, s PropagateSettings) (*Propagation, error) {
	r, err := gum.Propagate(ctx, b.Model, s.gum(b))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", b.File, err)
	}
	h := newPropagationHead(b, s)
	return h.join(r), nil
}

// PropagatePart does part index of the run cut into of parts. Written as JSON and
// read again anywhere, all parts give by a PartMerger the result that part 1 of 1
// gives, to the bit.
func PropagatePart(ctx context.Context, b *bench.Budget, s PropagateSettings, index, of int) (*gum.Part, error) {
	p, err := gum.RunPart(ctx, b.Model, s.gum(b), index, of)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", b.File, err)
	}
	if p.Attachment, err = json.Marshal(newPropagationHead(b, s)); err != nil {
		return nil, err
	}
	return p, nil
}

// A PartMerger joins the parts of one run one after another, and keeps none of
// them. The zero PartMerger is ready.
type PartMerger struct {
	merger gum.Merger
	head   *propagationHead
}

// Add takes in a part; its Source names it in messages.
func (m *PartMerger) Add(p *gum.Part) error {
	if err := m.merger.Add(p); err != nil {
		return err
	}
	if m.head == nil {
		h := &propagationHead{}
		if err := json.Unmarshal(p.Attachment, h); err != nil || h.Format != 1 || h.Budget == nil {
			return fmt.Errorf("%s is no part of a budget's propagation", p.Source)
		}
		m.head = h
	}
	return nil
}

// Result states what the run found, once all its parts were added. Missing parts
// are an error that names them.
func (m *PartMerger) Result() (*Propagation, error) {
	r, err := m.merger.Result()
	if err != nil {
		return nil, err
	}
	if m.head == nil {
		return nil, errors.New("no part of a budget's propagation was added")
	}
	return m.head.join(r), nil
}

// gum are the settings of package gum.
func (s PropagateSettings) gum(b *bench.Budget) gum.Settings {
	p := s.Probability
	if p == 0 {
		p = b.Coverage
	}
	return gum.Settings{Probability: p, SecondOrder: s.SecondOrder, LawOnly: s.LawOnly, Trials: s.Trials, Adaptive: s.Adaptive, Seed: s.Seed, Digits: s.Digits}
}

// propagationHead is what a result says besides what package gum found; it
// travels with every part.
type propagationHead struct {
	Format   int               `json:"format"`
	Version  string            `json:"guardring"`
	Title    string            `json:"title"`
	Run      RunRecord         `json:"run"`
	Inputs   []Input           `json:"inputs"`
	Budget   map[string]Origin `json:"budget"`
	Outputs  []string          `json:"outputs"` // stated units
	Second   bool              `json:"second"`
	Warnings []string          `json:"warnings"`
}

// Origin is where an input comes from.
type Origin struct {
	Unit   string `json:"unit"`
	Source string `json:"source,omitempty"`
}

func newPropagationHead(b *bench.Budget, s PropagateSettings) *propagationHead {
	h := &propagationHead{Format: 1, Version: Version, Title: b.Title, Second: s.SecondOrder, Budget: map[string]Origin{}, Warnings: []string{},
		Run: RunRecord{Command: s.Command, Options: map[string]string{}, Seed: s.Seed}}
	if h.Run.Command == "" {
		h.Run.Command = "propagate"
	}
	if s.LawOnly {
		h.Run.Options["law-only"] = "true"
	}
	if s.Adaptive {
		h.Run.Options["trials"] = "adaptive"
	}
	if s.SecondOrder {
		h.Run.Options["second-order"] = "true"
	}
	if s.Digits > 1 {
		h.Run.Options["digits"] = strconv.Itoa(s.Digits)
	}
	if s.Probability != 0 {
		h.Run.Options["probability"] = strconv.FormatFloat(s.Probability, 'g', -1, 64)
	}
	for _, in := range b.Inputs {
		h.Inputs = append(h.Inputs, Input{File: in.File, SHA256: in.SHA256, Rows: in.Rows, Excluded: in.Excluded})
	}
	for _, q := range b.Quantities {
		h.Budget[q.Name] = Origin{Unit: q.Unit.Symbol, Source: q.Source}
	}
	for _, o := range b.Outputs {
		h.Outputs = append(h.Outputs, o.Unit.Symbol)
	}
	for _, w := range b.Warnings {
		h.Warnings = append(h.Warnings, w.Error())
	}
	return h
}

// join makes the record.
func (h *propagationHead) join(r *gum.Result) *Propagation {
	rec := PropagationRecord{Format: 1, Guardring: h.Version, Title: h.Title, Run: h.Run, Inputs: h.Inputs,
		Correlation: numbers(r.Correlation), Covariance: numbers(r.Covariance), Sequences: r.Sequences, Warnings: append([]string{}, h.Warnings...)}
	rec.Run.Trials = int(r.Trials)
	for i, o := range r.Outputs {
		out := BudgetResult{Name: o.Name, Formula: o.Formula, Unit: coherent(o.Unit), StatedUnit: o.Unit}
		if i < len(h.Outputs) {
			out.StatedUnit = h.Outputs[i]
		}
		if l := o.Law; l != nil {
			out.Law = h.law(l)
			for _, w := range l.Warnings {
				rec.warn(o.Name, w, len(r.Outputs))
			}
		}
		if m := o.MonteCarlo; m != nil {
			mc := &MonteCarlo{Trials: m.Trials, Failed: m.Undefined, Value: Number(m.Value), U: Number(m.U),
				Interval: [2]Number{Number(m.Interval[0]), Number(m.Interval[1])}, Shortest: [2]Number{Number(m.Shortest[0]), Number(m.Shortest[1])},
				Delta: Number(math.NaN()), DLow: Number(math.NaN()), DHigh: Number(math.NaN())}
			if c := o.Comparison; c != nil {
				mc.Digits, mc.Delta, mc.DLow, mc.DHigh, mc.Agrees = c.Digits, Number(c.Delta), Number(c.DLow), Number(c.DHigh), c.Agrees
				if !c.Agrees {
					rec.warn(o.Name, mc.disagrees(m.Probability), len(r.Outputs))
				}
			}
			out.MonteCarlo = mc
			for _, w := range m.Warnings {
				rec.warn(o.Name, w, len(r.Outputs))
			}
		}
		rec.Outputs = append(rec.Outputs, out)
	}
	for _, g := range r.Regions {
		j := JointRegion{Kind: g.Kind, Probability: Number(g.Probability), Shape: numbers(g.Shape), K: Number(g.K)}
		for _, c := range g.Centre {
			j.Centre = append(j.Centre, Number(c))
		}
		rec.Regions = append(rec.Regions, j)
	}
	for _, w := range r.Warnings {
		rec.Warnings = append(rec.Warnings, w.Error())
	}
	return &Propagation{Record: rec, Result: r}
}

// warn adds a warning about one output; where there are several it names it.
func (r *PropagationRecord) warn(output string, w error, outputs int) {
	s := w.Error()
	if outputs > 1 {
		s = output + ": " + s
	}
	r.Warnings = append(r.Warnings, s)
}

func (h *propagationHead) law(l *gum.Law) *LawRecord {
	out := &LawRecord{Value: Number(l.Value), U: Number(l.U), DOF: Number(l.DOF), K: Number(l.K), Probability: Number(l.Probability),
		Interval: [2]Number{Number(l.Interval[0]), Number(l.Interval[1])}, Budget: []StatedLine{}, DOFUnknown: math.IsNaN(l.DOF)}
	if h.Second {
		out.SecondOrder = &HigherTerm{FirstOrderU: Number(l.FirstOrderU), Shift: Number(l.Shift)}
	}
	for _, c := range l.Budget {
		from := h.Budget[c.Input]
		out.Budget = append(out.Budget, StatedLine{StatedUnit: from.Unit, BudgetLine: BudgetLine{Input: c.Input, Group: c.Group, Value: Number(c.Value),
			Unit: coherent(c.Unit), U: Number(c.U), Shape: c.Shape, DOF: Number(c.DOF), Sensitivity: Number(c.Sensitivity),
			Contribution: Number(math.Abs(c.Contribution)), Share: Number(c.Share), Source: from.Source}})
	}
	return out
}

func numbers(m [][]float64) [][]Number {
	out := make([][]Number, len(m))
	for i := range m {
		out[i] = make([]Number, len(m[i]))
		for j, v := range m[i] {
			out[i][j] = Number(v)
		}
	}
	return out
}

// coherent names the coherent SI unit of a unit's dimension.
func coherent(symbol string) string {
	u, err := si.ParseUnit(symbol)
	if err != nil {
		return symbol
	}
	return siSymbol(u)
}
