package reduce

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"sort"
	"strconv"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/formula"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/lsq"
	"example.org/guardring/pkg/si"
)

// fitColumn is a column of the table as a formula sees it.
type fitColumn struct {
	name   string
	header string
	at     int // in the table
	unit   si.Unit
	stated bool // whether the header has a unit
}

// fitPlan is a fit understood, before any reading is looked at.
type fitPlan struct {
	s          FitSettings
	file       string
	prog       *formula.Program
	implicit   bool        // the formula is an equation between columns and predicts no response
	response   fitColumn   // none of an equation: its at is −1
	predictors []fitColumn // those in the formula, in its order
	params     []string    // in the formula's order
	units      []string    // of the parameters, coherent SI; "" where unknown
	varOfParam []int       // variable of the program
	varOfPred  []int
	noise      noiseSpec
	noisy      map[int]noiseSpec // by predictor
	weights    *fitColumn
	checked    bool // dimensions were checked
	warnings   []error
}

// noiseSpec is an uncertainty that a column or a value states.
type noiseSpec struct {
	given  bool
	column *fitColumn
	value  float64 // SI
	text   string  // as stated
}

// headerOf takes a header apart.
func headerOf(h string) (name, unit string, stated bool) {
	name, unit, stated = strings.Cut(h, "/")
	name, unit = strings.TrimSpace(name), strings.TrimSpace(unit)
	if stated && strings.HasPrefix(unit, "(") && strings.HasSuffix(unit, ")") && strings.Count(unit, "(") == 1 {
		unit = strings.TrimSpace(unit[1 : len(unit)-1])
	}
	return name, unit, stated
}

// find returns the column of that name or header.
func (p *fitPlan) find(t *bench.Table, word string) (fitColumn, bool, error) {
	at := t.Column(word)
	if at < 0 {
		for i, h := range t.Header {
			if name, _, _ := headerOf(h); name == word {
				if at >= 0 {
					return fitColumn{}, false, &bench.Error{File: t.File, Line: 1, Problem: fmt.Sprintf("%s is the name of two columns, %s and %s; give each its own", word, t.Header[at], h)}
				}
				at = i
			}
		}
	}
	if at < 0 {
		return fitColumn{}, false, nil
	}
	c := fitColumn{header: t.Header[at], at: at, unit: si.One}
	var symbol string
	c.name, symbol, c.stated = headerOf(c.header)
	if c.stated {
		u, err := si.ParseUnit(symbol)
		if err != nil {
			return c, false, &bench.Error{File: t.File, Line: 1, Key: "column " + c.header, Problem: err.Error(), Err: err}
		}
		c.unit = u
	}
	return c, true, nil
}

// columnNames lists the names that a formula may use.
func columnNames(t *bench.Table) []string {
	var out []string
	for _, h := range t.Header {
		name, _, _ := headerOf(h)
		if name == "" || slices.Contains(out, name) {
			continue
		}
		if _, err := formula.Compile("1", []string{name}); err == nil {
			out = append(out, name)
		}
	}
	return out
}

// perhaps is the hint after an unknown word.
func perhaps(word string, known []string) string {
	if s := si.Suggest(word, known); s != "" {
		return fmt.Sprintf("; did you mean %s?", s)
	}
	if len(known) > 0 && len(known) <= 16 {
		return "; there are " + strings.Join(known, ", ")
	}
	return ""
}

// newFitPlan reads the settings against the header of a table.
func newFitPlan(t *bench.Table, s FitSettings) (*fitPlan, error) {
	p := &fitPlan{s: s, file: t.File, noisy: map[int]noiseSpec{}}
	if p.s.Probability == 0 {
		p.s.Probability = gum.DefaultCoverage
	}
	if err := gum.CheckCoverage(p.s.Probability); err != nil {
		return nil, err
	}
	if strings.TrimSpace(s.Formula) == "" {
		return nil, errors.New("no formula is given, such as a + b*x")
	}
	columns := columnNames(t)
	p.implicit = formula.IsEquation(s.Formula)
	p.response = fitColumn{name: sidesName, at: -1, unit: si.One}
	switch {
	case p.implicit && s.Response != "":
		return nil, fmt.Errorf("the formula is an equation, which holds between columns and predicts none: leave the response (%s) out, or write the right side alone", s.Response)
	case p.implicit:
	case s.Response == "":
		return nil, fmt.Errorf("no response is given: name the column that the formula predicts%s; an equation, left = right, needs none", perhaps("", columns))
	default:
		c, ok, err := p.find(t, s.Response)
		if err != nil {
			return nil, err
		}
		if !ok {
			return nil, fmt.Errorf("the response %s is no column of %s%s", s.Response, t.File, perhaps(s.Response, columns))
		}
		p.response = c
	}
	if err := p.variables(t, columns); err != nil {
		return nil, err
	}
	if err := p.stated(columns); err != nil {
		return nil, err
	}
	if err := p.replicates(); err != nil {
		return nil, err
	}
	if err := p.dimensions(); err != nil {
		return nil, err
	}
	return p, p.uncertainties(t, columns)
}

// compile reads the formula or equation.
func (p *fitPlan) compile(vars []string) (*formula.Program, error) {
	if p.implicit {
		return formula.CompileEquation(p.s.Formula, vars)
	}
	return formula.Compile(p.s.Formula, vars)
}

// names lists the names in it.
func (p *fitPlan) names() ([]string, error) {
	if p.implicit {
		return formula.NamesOfEquation(p.s.Formula)
	}
	return formula.Names(p.s.Formula)
}

// variables finds what the formula's names are, and compiles it.
func (p *fitPlan) variables(t *bench.Table, columns []string) error {
	names, err := p.names()
	if err != nil {
		return err
	}
	stated := p.statedNames()
	for _, n := range stated {
		if slices.Contains(columns, n) && slices.Contains(names, n) {
			return fmt.Errorf("%s is a column of %s, not a parameter: it takes no start, bounds or prior", n, t.File)
		}
		if !slices.Contains(columns, n) && !slices.Contains(names, n) {
			var free []string
			for _, m := range names {
				if !slices.Contains(columns, m) {
					free = append(free, m)
				}
			}
			return fmt.Errorf("%s is no parameter of the formula%s", n, perhaps(n, free))
		}
	}
	// Compiling with all names that are known first tells of the others, with
	// their place in the formula.
	var known []string
	for _, n := range append(slices.Clone(columns), stated...) {
		if !slices.Contains(known, n) {
			known = append(known, n)
		}
	}
	if _, err := p.compile(known); err != nil {
		var e *formula.Error
		if errors.As(err, &e) {
			for _, n := range names {
				if !slices.Contains(known, n) {
					more := fmt.Sprintf("if it is a parameter, give it a start (%s=1)", n)
					switch {
					case strings.HasSuffix(e.Hint, "?"):
						more = e.Hint + " I" + more[1:]
					case e.Hint != "":
						more = e.Hint + "; " + more
					}
					return &formula.Error{Source: e.Source, Column: e.Column, Reason: e.Reason, Hint: more}
				}
			}
		}
		return err
	}
	for _, n := range names {
		if !slices.Contains(columns, n) {
			p.params = append(p.params, n)
			continue
		}
		c, _, err := p.find(t, n)
		if err != nil {
			return err
		}
		if c.at == p.response.at {
			return fmt.Errorf("the formula of %s uses %s itself; name only what it depends on", p.response.name, n)
		}
		p.predictors = append(p.predictors, c)
	}
	if p.implicit && len(p.predictors) == 0 {
		return fmt.Errorf("the equation names no column of %s%s", t.File, perhaps("", columns))
	}
	if len(p.params) == 0 {
		return fmt.Errorf("every name in the formula is a column of %s: there is no parameter to estimate", t.File)
	}
	if p.prog, err = p.compile(names); err != nil {
		return err
	}
	for i, n := range names {
		if slices.Contains(p.params, n) {
			p.varOfParam = append(p.varOfParam, i)
		} else {
			p.varOfPred = append(p.varOfPred, i)
		}
	}
	return nil
}

// statedNames are the parameters that the settings name, in the order of the
// alphabet.
func (p *fitPlan) statedNames() []string {
	set := map[string]bool{}
	for n := range p.s.Start {
		set[n] = true
	}
	for n := range p.s.Bounds {
		set[n] = true
	}
	for n := range p.s.Priors {
		set[n] = true
	}
	for _, n := range p.s.Fixed {
		set[n] = true
	}
	out := make([]string, 0, len(set))
	for n := range set {
		out = append(out, n)
	}
	sort.Strings(out)
	return out
}

// stated checks that what is said of parameters is said of these.
func (p *fitPlan) stated(columns []string) error {
	for _, n := range p.statedNames() {
		if !slices.Contains(p.params, n) {
			if slices.Contains(columns, n) {
				return fmt.Errorf("%s is a column, not a parameter of the formula: it takes no start, bounds or prior", n)
			}
			return fmt.Errorf("%s is no parameter of the formula%s", n, perhaps(n, p.params))
		}
	}
	for _, n := range p.params {
		_, start := p.s.Start[n]
		if _, prior := p.s.Priors[n]; !start && !prior {
			return fmt.Errorf("the parameter %s has no start; say where the search begins (%s=1)", n, n)
		}
		if slices.Contains(p.s.Fixed, n) && !start {
			return fmt.Errorf("the parameter %s is fixed, but has no start to be fixed at", n)
		}
	}
	return nil
}

// replicates checks the number of replicates of a bootstrap before anything is
// fitted: intervals that were asked for and can't be had are no matter of a warning.
func (p *fitPlan) replicates() error {
	n, most := p.s.Bootstrap, lsq.MostReplicates(len(p.params))
	if n == 0 || n >= 2 && n <= most {
		return nil
	}
	count := "one parameter"
	if len(p.params) > 1 {
		count = fmt.Sprintf("%d parameters", len(p.params))
	}
	return fmt.Errorf("the number of replicates of a bootstrap (--bootstrap) is %d; 2 to %d can be had of %s, or 0 for none", n, most, count)
}

// dimensions finds the units of the parameters and checks those of the columns.
func (p *fitPlan) dimensions() error {
	p.units = make([]string, len(p.params))
	with, without := 0, ""
	for _, c := range p.columns() {
		if c.stated {
			with++
		} else if without == "" {
			without = c.name
		}
	}
	if without != "" {
		if with > 0 {
			p.warnings = append(p.warnings, fmt.Errorf("column %s has no unit in its header: dimensions are not checked, and its numbers are taken as SI", without))
		}
		return nil
	}
	p.checked = true
	dims := make([]si.Dimension, len(p.varOfParam)+len(p.varOfPred))
	for k, v := range p.varOfPred {
		dims[v] = p.predictors[k].unit.Dim
	}
	var found []si.Dimension
	var known []bool
	var err error
	if p.implicit {
		found, known, err = p.prog.InferAny(dims, p.varOfParam)
	} else {
		found, known, err = p.prog.Infer(dims, p.varOfParam, p.response.unit.Dim)
	}
	if err != nil {
		return err
	}
	for j := range found {
		if known[j] {
			p.units[j] = p.unitFor(found[j])
			dims[p.varOfParam[j]] = found[j]
		}
	}
	if p.implicit && !slices.Contains(known, false) { // the unit of left − right
		d, err := p.prog.Dimension(dims)
		if err != nil {
			return err
		}
		p.response.unit, p.response.stated = d.Unit(), true
	}
	return nil
}

// sidesName is what the rows of an equation call their response.
const sidesName = "left − right side"

// columns are those that the formula is about.
func (p *fitPlan) columns() []fitColumn {
	if p.implicit {
		return p.predictors
	}
	return append([]fitColumn{p.response}, p.predictors...)
}

// unitFor names the coherent unit of a dimension: by its own name, or as that of
// the response over or times powers of a predictor's, or in base units.
func (p *fitPlan) unitFor(d si.Dimension) string {
	u := d.Unit()
	if u.Symbol != d.String() || !strings.ContainsAny(u.Symbol, " ") {
		return u.Symbol
	}
	r := p.response.unit.Dim
	for _, c := range p.predictors {
		x := c.unit.Dim
		if x.IsOne() || r.IsOne() || r == x {
			continue
		}
		for n := 1; n <= 4; n++ {
			power := x.Unit().Symbol
			if strings.ContainsAny(power, " /") {
				break
			}
			if n > 1 {
				power += strconv.Itoa(n)
			}
			for _, try := range []struct {
				dim    si.Dimension
				symbol string
			}{{r.Mul(x.Pow(n, 1)), r.Unit().Symbol + " " + power}, {r.Div(x.Pow(n, 1)), r.Unit().Symbol + "/" + power}} {
				if v, err := si.ParseUnit(try.symbol); try.dim == d && err == nil && v.Dim == d && v.Factor == 1 {
					return try.symbol
				}
			}
		}
	}
	return u.Symbol
}

// uncertainties reads the noise and the weights.
func (p *fitPlan) uncertainties(t *bench.Table, columns []string) error {
	var err error
	if p.noise, err = p.noiseOf(t, columns, "the noise", p.s.Noise, p.response); err != nil {
		return err
	}
	names := make([]string, 0, len(p.s.PredictorNoise))
	for n := range p.s.PredictorNoise {
		names = append(names, n)
	}
	sort.Strings(names)
	var known []string
	for _, c := range p.predictors {
		known = append(known, c.name)
	}
	for _, n := range names {
		k := slices.IndexFunc(p.predictors, func(c fitColumn) bool { return c.name == n || c.header == n })
		if k < 0 {
			return fmt.Errorf("predictor noise: %s is no column in the formula%s", n, perhaps(n, known))
		}
		spec, err := p.noiseOf(t, columns, "the noise of "+n, p.s.PredictorNoise[n], p.predictors[k])
		if err != nil {
			return err
		}
		if !spec.given {
			return fmt.Errorf("predictor noise of %s: a value or a column is missing (%s=0.1)", n, n)
		}
		p.noisy[k] = spec
	}
	if w := p.s.Weights; w != "" {
		c, ok, err := p.find(t, w)
		switch {
		case err != nil:
			return err
		case !ok:
			return fmt.Errorf("the weights %s are no column of %s%s", w, t.File, perhaps(w, columns))
		case p.noise.given:
			return errors.New("give either the noise or the weights of the readings, not both")
		case len(p.noisy) > 0:
			return errors.New("weights say nothing of the size of the noise, which predictor noise has to be compared with: give the noise instead")
		case len(p.s.Priors) > 0:
			return errors.New("weights say nothing of the size of the noise, which priors have to be weighed against: give the noise instead")
		}
		p.weights = &c
	}
	if p.implicit {
		return p.equation()
	}
	zero := p.noise.given && p.noise.column == nil && p.noise.value == 0
	switch {
	case zero && len(p.noisy) == 0:
		return errors.New("the noise must be above zero; leave it out when it is not known")
	case !p.noise.given && len(p.noisy) > 0:
		return errors.New("predictor noise needs the noise of the response too; state 0 for a response that is exact")
	case p.s.EffectiveVariance && len(p.noisy) == 0:
		return errors.New("effective variance is a way to treat predictor noise, and none is given")
	}
	if len(p.noisy) > 0 && !p.s.EffectiveVariance && (p.s.Profile || p.s.Robust || p.s.Bootstrap > 0) {
		return errors.New("profile, robust and bootstrap work on a fit by least squares: with predictor noise ask for effective variance")
	}
	return nil
}

// equation checks what is stated of the noise of an equation's columns.
func (p *fitPlan) equation() error {
	some := false
	for k, c := range p.predictors {
		n, ok := p.noisy[k]
		if !ok {
			return fmt.Errorf("an equation adjusts every column that it names: state the standard uncertainty of %s (--predictor-noise), 0 for one that is exact", c.name)
		}
		some = some || n.column != nil || n.value > 0
	}
	switch {
	case p.noise.given:
		return errors.New("an equation has no response: state the noise of each column (--predictor-noise)")
	case p.weights != nil:
		return errors.New("an equation has no response that weights could be of: state the noise of each column (--predictor-noise)")
	case !some:
		return errors.New("every column is said to be exact; the noise of one at least must be above zero")
	case p.s.EffectiveVariance:
		return errors.New("effective variance is for a formula that predicts a response; an equation is fitted with errors in variables")
	case p.s.Profile || p.s.Robust || p.s.Bootstrap > 0:
		return errors.New("profile, robust and bootstrap work on a fit by least squares, not on an equation")
	}
	return nil
}

// noiseOf reads a column or a value as the uncertainty of column of.
func (p *fitPlan) noiseOf(t *bench.Table, columns []string, what, text string, of fitColumn) (noiseSpec, error) {
	if text == "" {
		return noiseSpec{}, nil
	}
	n := noiseSpec{given: true, text: text}
	c, ok, err := p.find(t, text)
	if err != nil {
		return n, err
	}
	if ok {
		if c.stated && of.stated && c.unit.Dim != of.unit.Dim {
			return n, &bench.Error{File: t.File, Line: 1, Key: "column " + c.header, Problem: fmt.Sprintf("this can't be %s: the unit of %s is %s", what, of.name, of.unit)}
		}
		if c.stated != of.stated {
			return n, &bench.Error{File: t.File, Line: 1, Key: "column " + c.header, Problem: fmt.Sprintf("this column and %s must both have a unit, or neither", of.header)}
		}
		n.column = &c
		return n, nil
	}
	v, u, err := si.ParseInterval(text)
	if err != nil {
		if name, _, _ := headerOf(text); si.Suggest(text, columns) != "" || isName(name) {
			return n, fmt.Errorf("%s: %s is no column of %s and no value%s", what, text, t.File, perhaps(text, columns))
		}
		return n, fmt.Errorf("%s: %w", what, err)
	}
	plain := u.Symbol == "1" || u.Symbol == ""
	switch {
	case plain:
	case !of.stated:
		return n, fmt.Errorf("%s: %s has no unit in its header; write the noise as a number", what, of.name)
	case u.Dim != of.unit.Dim:
		return n, fmt.Errorf("%s: %s is in %s, but %s in %s", what, text, u, of.name, of.unit)
	}
	if !(v >= 0) || math.IsInf(v, 0) {
		return n, fmt.Errorf("%s is %s; a standard uncertainty is above zero", what, text)
	}
	n.value = v
	return n, nil
}

// isName reports whether a text could be the name of a column.
func isName(s string) bool {
	_, err := formula.Compile("1", []string{s})
	return err == nil
}

// headers lists the columns in use.
func (p *fitPlan) headers() []string {
	var out []string
	if !p.implicit {
		out = append(out, p.response.header)
	}
	add := func(c *fitColumn) {
		if c != nil && !slices.Contains(out, c.header) {
			out = append(out, c.header)
		}
	}
	for i := range p.predictors {
		add(&p.predictors[i])
		n := p.noisy[i]
		add(n.column)
	}
	add(p.noise.column)
	add(p.weights)
	return out
}
