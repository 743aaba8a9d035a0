package gum

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
)

// A Part is one part of a Monte Carlo run cut into Of parts: parts 1 to Of hold
// contiguous ranges of the run's blocks, and every part has the bins of the same
// pilot. Parts are made by RunPart, written and read as JSON, and joined by Merge.
type Part struct {
	Index, Of int // this is part Index of Of, counted from 1

	// Source says where the part came from, for messages of Merge: a file name. It is not
	// written.
	Source string

	// Attachment is the caller's own JSON, the same in all parts of a run, or null. Merge
	// takes parts with different attachments for parts of different runs.
	Attachment json.RawMessage

	// Fingerprint tells runs apart: a SHA-256 over all that the result depends on.
	Fingerprint string

	settings Settings
	first    int64 // block range
	last     int64
	result   *Result // laws and warnings, no Monte Carlo
	exists   []existence
	tallies  *tallies
}

// An existence says which moments an output has in the limit of many trials.
type existence struct {
	Mean     bool     `json:"mean"`
	Variance bool     `json:"variance"`
	Inputs   []string `json:"inputs,omitempty"`
}

// RunPart does part index of a run of s.Trials trials cut into of parts: with
// parts done anywhere and in any order, Merge gives the result of the run. Adaptive
// and LawOnly are refused.
func RunPart(ctx context.Context, m *Model, s Settings, index, of int) (*Part, error) {
	s, err := s.withDefaults()
	if err != nil {
		return nil, err
	}
	p, err := newPlan(m)
	if err != nil {
		return nil, err
	}
	return p.part(ctx, s, index, of)
}

func (p *plan) part(ctx context.Context, s Settings, index, of int) (*Part, error) {
	switch {
	case s.Adaptive:
		return nil, errAdaptivePart
	case s.LawOnly:
		return nil, errors.New("without Monte Carlo there is nothing to cut into parts")
	case of < 1 || of > 1_000_000 || index < 1 || index > of:
		return nil, fmt.Errorf("part %d of %d: parts are counted from 1 up to their number, of at most a million", index, of)
	}
	t := &Part{Index: index, Of: of, settings: s}
	n := blockCount(s.Trials)
	t.first, t.last = partBlocks(n, index, of)
	t.result = &Result{Probability: s.Probability, Seed: s.Seed, Converged: true}
	if err := p.laws(t.result, s); err != nil {
		return nil, err
	}
	t.result.Warnings = append(t.result.Warnings, p.warnings...)
	run, err := newRunner(p, s)
	if err != nil {
		return nil, err
	}
	for _, e := range run.worker[0].eval {
		mean, variance, names := p.existing(e)
		t.exists = append(t.exists, existence{mean, variance, names})
	}
	if t.tallies, err = run.newTallies(ctx); err != nil {
		return nil, err
	}
	t.Fingerprint = p.fingerprint(s, t.result, t.tallies)
	run.total = min(t.last*BlockTrials, s.Trials) - t.first*BlockTrials
	if t.last > t.first {
		err = t.tallies.run(ctx, run, t.first, t.last, s.Trials)
	}
	return t, err
}

// partBlocks returns the range of n blocks that part index of of holds.
func partBlocks(n int64, index, of int) (first, last int64) {
	// n·of stays far below 2^63: n < 1e15, of ≤ 1e6 would not, so divide first.
	at := func(i int64) int64 { return n/int64(of)*i + n%int64(of)*i/int64(of) }
	return at(int64(index) - 1), at(int64(index))
}

// fingerprint identifies the run: settings, inputs, correlations, outputs, and what
// the pilot gave.
func (p *plan) fingerprint(s Settings, r *Result, t *tallies) string {
	h := sha256.New()
	put := func(format string, args ...any) { fmt.Fprintf(h, format+"\n", args...) }
	put("guardring propagation, bins %d, block %d, pilot %d", Bins, BlockTrials, PilotTrials)
	put("%x %t %d %d %d %d", s.Probability, s.SecondOrder, s.Trials, s.Seed, s.Digits, s.Points)
	for _, in := range p.model.Inputs {
		d := in.Dist
		put("input %q %q %q %q %q %x %x %x %x %x %x %x %x %x", in.Name, in.Group, in.Unit, in.Block, d.Shape, d.Value, d.U, d.dof(),
			d.Half, d.Beta, d.D, d.Gamma, d.drawScale, d.drawDOF)
	}
	for _, c := range p.corr {
		put("correlation %d %d %x", c.I, c.J, c.R)
	}
	for o, out := range p.model.Outputs {
		put("output %q %q %q", out.Name, out.Unit, out.Formula)
		if l := r.Outputs[o].Law; l != nil {
			put("law %x %x %x", l.Value, l.U, l.K)
		}
		g := t.output[o].grid
		put("bins %x %x %x", g.low, g.width, g.centre)
	}
	return hex.EncodeToString(h.Sum(nil))
}

func (t *Part) name() string {
	if t.Source != "" {
		return fmt.Sprintf("part %d of %d (%s)", t.Index, t.Of, t.Source)
	}
	return fmt.Sprintf("part %d of %d", t.Index, t.Of)
}

// A Merger joins the parts of one run as they come, in any order, and keeps none
// of them: memory does not grow with their number. The zero Merger is ready. It
// takes the first part's run for the run.
type Merger struct {
	head *Part
	all  *tallies
	seen map[int]string // name by index
}

// Add takes in a part, which it leaves as it is. A part that is there twice or
// belongs to another run is an error that names it, and is not taken in.
func (m *Merger) Add(t *Part) error {
	if t.tallies == nil {
		return errors.New("an empty part: make parts with RunPart, or read them from JSON")
	}
	if m.head == nil {
		m.lead(t)
	}
	if err := t.foreign(m.head); err != nil {
		return err
	}
	if o, ok := m.seen[t.Index]; ok {
		return fmt.Errorf("%s is there twice: also as %s", o, t.name())
	}
	m.seen[t.Index] = t.name()
	m.all.merge(t.tallies)
	return nil
}

// lead makes the run that of t, without taking t in.
func (m *Merger) lead(t *Part) {
	// Of the first part only what Result needs is kept.
	head := *t
	head.tallies = t.tallies.empty()
	m.head, m.all, m.seen = &head, t.tallies.empty(), make(map[int]string)
}

// Result states what the run found, once all its parts were added. Missing parts
// are an error that names them.
func (m *Merger) Result() (*Result, error) {
	if m.head == nil {
		return nil, errors.New("no parts to merge")
	}
	var missing []string
	for i := 1; i <= m.head.Of && len(missing) < 20; i++ {
		if _, ok := m.seen[i]; !ok {
			missing = append(missing, fmt.Sprint(i))
		}
	}
	if len(missing) > 0 {
		more, verb := "", "is"
		if n := m.head.Of - len(m.seen); n > 1 {
			verb = "are"
			if n > len(missing) {
				more = fmt.Sprintf(" and %d more", n-len(missing))
			}
		}
		return nil, fmt.Errorf("part %s%s of %d %s missing", strings.Join(missing, ", "), more, m.head.Of, verb)
	}
	r := *m.head.result
	r.Outputs = slices.Clone(r.Outputs)
	r.Warnings = slices.Clone(r.Warnings)
	s := m.head.settings
	if err := m.all.fill(&r, s); err != nil {
		return nil, err
	}
	if r.Trials != s.Trials {
		return nil, fmt.Errorf("the parts hold %d trials and the run has %d: a part is incomplete", r.Trials, s.Trials)
	}
	for o := range r.Outputs {
		r.withdraw(o, m.head.exists[o])
		r.compare(o, s.Digits)
	}
	return &r, nil
}

// Merge joins all parts of one run, in any order, into its result: the bytes do
// not depend on how many parts there were. It leaves the parts as they are. A part
// that is missing, there twice or from another run is an error that names it; the run
// is that of most of the parts.
func Merge(parts []*Part) (*Result, error) {
	ordered := slices.Clone(parts)
	slices.SortStableFunc(ordered, func(a, b *Part) int { return a.Index - b.Index })
	var m Merger
	if len(ordered) > 0 && majority(ordered).tallies != nil {
		m.lead(majority(ordered))
	}
	for _, t := range ordered {
		if err := m.Add(t); err != nil {
			return nil, err
		}
	}
	return m.Result()
}

// withdraw takes back the moments of output o that do not exist.
func (r *Result) withdraw(o int, x existence) {
	r.Outputs[o].MonteCarlo.withoutMoments(x.Mean, x.Variance, x.Inputs)
	if x.Variance {
		return
	}
	for k := range r.Covariance {
		r.Covariance[o][k], r.Covariance[k][o] = math.NaN(), math.NaN()
		r.Correlation[o][k], r.Correlation[k][o] = math.NaN(), math.NaN()
	}
}

// majority returns the first part of the run that most parts belong to.
func majority(parts []*Part) *Part {
	type key struct {
		print string
		of    int
	}
	count := make(map[key]int)
	best := parts[0]
	for _, t := range parts {
		count[key{t.Fingerprint, t.Of}]++
	}
	for _, t := range parts {
		if count[key{t.Fingerprint, t.Of}] > count[key{best.Fingerprint, best.Of}] {
			best = t
		}
	}
	return best
}

// foreign reports why t can't be merged with head.
func (t *Part) foreign(head *Part) error {
	a, b := t.settings, head.settings
	var why string
	switch {
	case t.Of != head.Of:
		why = fmt.Sprintf("the run was cut into %d parts", head.Of)
	case a.Trials != b.Trials:
		why = fmt.Sprintf("it has %d trials in all, the others %d", a.Trials, b.Trials)
	case a.Seed != b.Seed:
		why = fmt.Sprintf("its seed is %d, the others' %d", a.Seed, b.Seed)
	case a.Probability != b.Probability:
		why = fmt.Sprintf("its coverage probability is %v, the others' %v", a.Probability, b.Probability)
	case t.Fingerprint != head.Fingerprint:
		why = "its inputs, outputs or settings differ"
	case !bytes.Equal(t.Attachment, head.Attachment):
		why = "what is attached to it differs"
	case len(t.tallies.output) != len(head.tallies.output) || (t.tallies.joint == nil) != (head.tallies.joint == nil):
		why = "its outputs differ"
	default:
		for o := range t.tallies.output {
			if t.tallies.output[o].grid != head.tallies.output[o].grid {
				why = "its bins differ, as on another processor architecture"
			}
		}
	}
	if why == "" {
		return nil
	}
	return fmt.Errorf("%s belongs to another run than %s: %s", t.name(), head.name(), why)
}
