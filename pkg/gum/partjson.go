package gum

import (
	"encoding/base64"
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"strconv"
)

// number is a float64 in a part's JSON: exact, with NaN and infinities as strings.
type number float64

func (x number) MarshalJSON() ([]byte, error) {
	v := float64(x)
	if v-v != 0 {
		return strconv.AppendQuote(nil, strconv.FormatFloat(v, 'g', -1, 64)), nil
	}
	return strconv.AppendFloat(nil, v, 'g', -1, 64), nil
}

func (x *number) UnmarshalJSON(b []byte) error {
	s := string(b)
	if len(s) > 1 && s[0] == '"' {
		s = s[1 : len(s)-1]
	}
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return fmt.Errorf("%.40q is no number", s)
	}
	*x = number(v)
	return nil
}

func numbers(x []float64) []number {
	y := make([]number, len(x))
	for i, v := range x {
		y[i] = number(v)
	}
	return y
}

func floats(x []number) []float64 {
	y := make([]float64, len(x))
	for i, v := range x {
		y[i] = float64(v)
	}
	return y
}

type wirePart struct {
	Format      int             `json:"format"`
	Part        int             `json:"part"`
	Of          int             `json:"of"`
	Fingerprint string          `json:"fingerprint"`
	Attachment  json.RawMessage `json:"attachment,omitempty"`
	Trials      int64           `json:"trials"`
	Seed        uint64          `json:"seed"`
	Probability number          `json:"probability"`
	SecondOrder bool            `json:"second_order,omitempty"`
	Digits      int             `json:"digits"`
	PointCount  int             `json:"point_count"`
	Outputs     []wireOutput    `json:"outputs"`
	Joint       *wireJoint      `json:"joint,omitempty"`
	Points      [][]number      `json:"points"`
	Warnings    []string        `json:"warnings,omitempty"`
}

type wireOutput struct {
	Name     string    `json:"name"`
	Unit     string    `json:"unit"`
	Formula  string    `json:"formula"`
	Law      *wireLaw  `json:"law,omitempty"`
	LawError string    `json:"law_error,omitempty"`
	Exists   existence `json:"exists"`
	Tally    wireTally `json:"tally"`
}

type wireLaw struct {
	Value       number     `json:"value"`
	U           number     `json:"u"`
	DOF         number     `json:"dof"`
	K           number     `json:"k"`
	Probability number     `json:"probability"`
	Interval    [2]number  `json:"interval"`
	FirstOrderU number     `json:"first_order_u"`
	Shift       number     `json:"shift"`
	Budget      []wireLine `json:"budget"`
	Warnings    []string   `json:"warnings,omitempty"`
}

type wireLine struct {
	Input        string `json:"input"`
	Group        string `json:"group,omitempty"`
	Unit         string `json:"unit,omitempty"`
	Shape        string `json:"shape"`
	Block        string `json:"block,omitempty"`
	Value        number `json:"value"`
	U            number `json:"u"`
	DOF          number `json:"dof"`
	Sensitivity  number `json:"sensitivity"`
	Contribution number `json:"contribution"`
	Share        number `json:"share"`
}

type wireTally struct {
	Low       number   `json:"low"`
	Width     number   `json:"width"`
	Centre    number   `json:"centre"`
	Counts    string   `json:"counts"` // base64 of varints: run of empty bins, count, run, count …
	Below     int64    `json:"below"`
	Above     int64    `json:"above"`
	Min       number   `json:"min"`
	Max       number   `json:"max"`
	Undefined int64    `json:"undefined"`
	N         int64    `json:"n"`
	Huge      bool     `json:"huge,omitempty"`
	S1        exactSum `json:"s1"`
	S2        exactSum `json:"s2"`
}

type wireJoint struct {
	Centre    []number     `json:"centre"`
	Shape     [][]number   `json:"shape"`
	N         int64        `json:"n"`
	S1        []exactSum   `json:"s1"`
	S2        [][]exactSum `json:"s2"`
	Ellipse   wireTally    `json:"ellipse"`
	Rectangle wireTally    `json:"rectangle"`
}

// MarshalJSON writes the part with every bit of its numbers.
func (t *Part) MarshalJSON() ([]byte, error) {
	if t.tallies == nil {
		return nil, errors.New("an empty part: make parts with RunPart")
	}
	s := t.settings
	w := wirePart{Format: 1, Part: t.Index, Of: t.Of, Fingerprint: t.Fingerprint, Attachment: t.Attachment, Trials: s.Trials, Seed: s.Seed,
		Probability: number(s.Probability), SecondOrder: s.SecondOrder, Digits: s.Digits, PointCount: s.Points,
		Warnings: messages(t.result.Warnings)}
	for o, out := range t.result.Outputs {
		x := wireOutput{Name: out.Name, Unit: out.Unit, Formula: out.Formula, Exists: t.exists[o], Tally: t.tallies.output[o].wire()}
		if out.LawError != nil {
			x.LawError = out.LawError.Error()
		}
		if out.Law != nil {
			x.Law = out.Law.wire()
		}
		w.Outputs = append(w.Outputs, x)
	}
	for _, p := range t.tallies.points {
		w.Points = append(w.Points, numbers(p))
	}
	if j := t.tallies.joint; j != nil {
		w.Joint = &wireJoint{Centre: numbers(j.metric.centre), N: j.n, S1: j.s1, S2: j.s2, Ellipse: j.ellipse.wire(), Rectangle: j.rectangle.wire()}
		for _, row := range j.metric.shape {
			w.Joint.Shape = append(w.Joint.Shape, numbers(row))
		}
	}
	return json.Marshal(&w)
}

// UnmarshalJSON reads what MarshalJSON writes, and checks that it is whole.
func (t *Part) UnmarshalJSON(b []byte) error {
	var w wirePart
	if err := json.Unmarshal(b, &w); err != nil {
		return fmt.Errorf("not a part of a Monte Carlo run: %w", err)
	}
	if w.Format != 1 || w.Fingerprint == "" {
		return errors.New("not a part of a Monte Carlo run, or of a version that this one can't read: format 1 with a fingerprint is due")
	}
	s, err := Settings{Trials: w.Trials, Seed: w.Seed, Probability: float64(w.Probability), SecondOrder: w.SecondOrder, Digits: w.Digits, Points: w.PointCount}.withDefaults()
	s.Points = w.PointCount
	if err != nil || w.Trials < 1 || w.Of < 1 || w.Part < 1 || w.Part > w.Of || w.PointCount < 0 || len(w.Outputs) == 0 ||
		len(w.Points) != len(w.Outputs) || (w.Joint != nil) != (len(w.Outputs) > 1) {
		return errors.New("damaged part of a Monte Carlo run: its head contradicts itself")
	}
	p := Part{Index: w.Part, Of: w.Of, Source: t.Source, Attachment: w.Attachment, Fingerprint: w.Fingerprint, settings: s, tallies: &tallies{},
		result: &Result{Probability: s.Probability, Seed: s.Seed, Converged: true, Warnings: errorsOf(w.Warnings)}}
	p.first, p.last = partBlocks(blockCount(s.Trials), p.Index, p.Of)
	due := min(p.last*BlockTrials, s.Trials) - min(p.first*BlockTrials, s.Trials)
	for o, x := range w.Points {
		if len(x) != min(w.PointCount, PilotTrials) {
			return fmt.Errorf("damaged part of a Monte Carlo run: %d points of output %d where %d are due", len(x), o+1, min(w.PointCount, PilotTrials))
		}
	}
	for o, x := range w.Outputs {
		out := OutputResult{Name: x.Name, Unit: x.Unit, Formula: x.Formula}
		if x.LawError != "" {
			out.LawError = errors.New(x.LawError)
		}
		if x.Law != nil {
			out.Law = x.Law.law()
		}
		p.result.Outputs = append(p.result.Outputs, out)
		p.exists = append(p.exists, x.Exists)
		y, err := x.Tally.tally()
		if err != nil {
			return fmt.Errorf("damaged part of a Monte Carlo run, output %s: %w", x.Name, err)
		}
		if y.n+y.undefined != due {
			return fmt.Errorf("damaged part of a Monte Carlo run, output %s: %d trials where %d are due", x.Name, y.n+y.undefined, due)
		}
		p.tallies.output = append(p.tallies.output, y)
		p.tallies.points = append(p.tallies.points, floats(w.Points[o]))
	}
	if w.Joint != nil {
		if p.tallies.joint, err = w.Joint.joint(len(w.Outputs)); err != nil {
			return fmt.Errorf("damaged part of a Monte Carlo run: %w", err)
		}
	}
	*t = p
	return nil
}

func (t *tally) wire() wireTally {
	var b []byte
	run := uint64(0)
	for _, n := range t.counts {
		if n == 0 {
			run++
			continue
		}
		b = binary.AppendUvarint(b, run)
		b = binary.AppendUvarint(b, uint64(n))
		run = 0
	}
	return wireTally{Low: number(t.low), Width: number(t.width), Centre: number(t.centre), Counts: base64.StdEncoding.EncodeToString(b),
		Below: t.below, Above: t.above, Min: number(t.min), Max: number(t.max), Undefined: t.undefined, N: t.n, Huge: t.huge, S1: t.s1, S2: t.s2}
}

// mostCounted bounds the trials of a bin, so that the sum over all stays in 63 bits.
const mostCounted = math.MaxInt64 / (4 * Bins)

func (w *wireTally) tally() (*tally, error) {
	t := newTally(grid{low: float64(w.Low), width: float64(w.Width), centre: float64(w.Centre)})
	t.below, t.above, t.min, t.max = w.Below, w.Above, float64(w.Min), float64(w.Max)
	t.undefined, t.n, t.huge, t.s1, t.s2 = w.Undefined, w.N, w.Huge, w.S1, w.S2
	b, err := base64.StdEncoding.DecodeString(w.Counts)
	if err != nil {
		return nil, fmt.Errorf("its counts can't be read: %w", err)
	}
	sum := t.below + t.above
	i := uint64(0)
	for len(b) > 0 {
		run, k := binary.Uvarint(b)
		if k <= 0 || run >= Bins {
			return nil, errors.New("its counts are cut short")
		}
		n, l := binary.Uvarint(b[k:])
		i += run
		if l <= 0 || n == 0 || n > mostCounted || i >= Bins {
			return nil, errors.New("its counts are cut short")
		}
		t.counts[i] = int64(n)
		sum += int64(n)
		i++
		b = b[k+l:]
	}
	if sum != t.n || t.below < 0 || t.above < 0 || t.below > mostCounted || t.above > mostCounted || t.undefined < 0 || !(t.width > 0) || math.IsInf(t.width, 1) ||
		t.low-t.low != 0 || t.centre-t.centre != 0 {
		return nil, errors.New("its counts do not add up")
	}
	return t, nil
}

func (w *wireJoint) joint(n int) (*jointTally, error) {
	if len(w.Centre) != n || len(w.Shape) != n || len(w.S1) != n || len(w.S2) != n {
		return nil, errors.New("its joint sums have the wrong size")
	}
	shape := make([][]float64, n)
	for i := range shape {
		if len(w.Shape[i]) != n || len(w.S2[i]) != i+1 {
			return nil, errors.New("its joint sums have the wrong size")
		}
		shape[i] = floats(w.Shape[i])
	}
	e, err := w.Ellipse.tally()
	if err != nil {
		return nil, err
	}
	q, err := w.Rectangle.tally()
	if err != nil {
		return nil, err
	}
	if w.N < 0 || q.n != w.N || e.n > w.N {
		return nil, errors.New("its joint sums do not add up")
	}
	t := newJointTally(newMetric(floats(w.Centre), shape), e.grid, q.grid)
	t.n, t.s1, t.s2, t.ellipse, t.rectangle = w.N, w.S1, w.S2, e, q
	return t, nil
}

func (l *Law) wire() *wireLaw {
	w := &wireLaw{Value: number(l.Value), U: number(l.U), DOF: number(l.DOF), K: number(l.K), Probability: number(l.Probability),
		Interval: [2]number{number(l.Interval[0]), number(l.Interval[1])}, FirstOrderU: number(l.FirstOrderU), Shift: number(l.Shift),
		Warnings: messages(l.Warnings)}
	for _, c := range l.Budget {
		w.Budget = append(w.Budget, wireLine{c.Input, c.Group, c.Unit, c.Shape, c.Block, number(c.Value), number(c.U), number(c.DOF),
			number(c.Sensitivity), number(c.Contribution), number(c.Share)})
	}
	return w
}

func (w *wireLaw) law() *Law {
	l := &Law{Value: float64(w.Value), U: float64(w.U), DOF: float64(w.DOF), K: float64(w.K), Probability: float64(w.Probability),
		Interval: [2]float64{float64(w.Interval[0]), float64(w.Interval[1])}, FirstOrderU: float64(w.FirstOrderU), Shift: float64(w.Shift),
		Warnings: errorsOf(w.Warnings)}
	for _, c := range w.Budget {
		l.Budget = append(l.Budget, Contribution{c.Input, c.Group, c.Unit, c.Shape, c.Block, float64(c.Value), float64(c.U), float64(c.DOF),
			float64(c.Sensitivity), float64(c.Contribution), float64(c.Share)})
	}
	return l
}

func messages(errs []error) []string {
	var s []string
	for _, e := range errs {
		s = append(s, e.Error())
	}
	return s
}

func errorsOf(s []string) []error {
	var errs []error
	for _, m := range s {
		errs = append(errs, errors.New(m))
	}
	return errs
}
