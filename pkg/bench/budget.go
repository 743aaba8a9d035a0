package bench

import (
	"errors"
	"fmt"
	"math"
	"path/filepath"
	"slices"

	"example.org/guardring/pkg/formula"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/si"
)

// Budget is a budget file, read and checked: inputs with what is known of them,
// outputs with their formulas, and the model that package gum propagates.
type Budget struct {
	Dir, File string
	Title     string
	Format    int

	Inputs       []Input       // files: the budget first, then readings
	Quantities   []BudgetInput // in the order of the file; Model.Inputs is beside it
	Outputs      []BudgetOutput
	Correlations []Correlation
	Instruments  []Instrument
	Coverage     float64
	Model        *gum.Model
	Warnings     []error
}

// BudgetInput is one input quantity.
type BudgetInput struct {
	Name       string
	Group      string // part of the bench, for display
	Dist       gum.Distribution
	Unit       si.Unit
	Instrument string
	Source     string
	Together   string // inputs with the same word, not empty, were read together
	Line       int

	readings []float64 // SI
}

// BudgetOutput is one output quantity.
type BudgetOutput struct {
	Name    string
	Formula string
	Unit    si.Unit
	Program *formula.Program // its variables are all inputs, in their order
	Line    int
}

// budgetGrammar is everything a budget file may hold.
func budgetGrammar() *grammar {
	g := &grammar{}
	g.add(budgetDoc)
	inputs := quantityDoc
	inputs.keys = nil
	for _, k := range quantityDoc.keys {
		if k.name != "adjust" && k.name != "start" { // nothing is fitted here
			inputs.keys = append(inputs.keys, k)
		}
	}
	g.at("inputs.*").makeQuantity(&inputs)
	for _, k := range table(benchDoc, "instruments.*").keys {
		g.at("instruments.*").child(k.name).leaf = true
	}
	g.at("instruments.*.calibration_temperature").makeQuantity(&quantityDoc)
	return g
}

// OpenBudget reads a budget file and the readings that it names, which must lie
// in its folder. Formulas are compiled and their dimensions checked. Errors are
// *Error, up to ten joined in the order of the file.
func OpenBudget(path string) (*Budget, error) {
	dir, name := filepath.Split(path)
	if name == "" {
		return nil, &Error{File: path, Problem: "this is a folder; name a budget file"}
	}
	if dir == "" {
		dir = "."
	}
	f, err := openFolder(filepath.Clean(dir), name)
	if err != nil {
		return nil, err
	}
	defer f.root.Close()
	data, sum, err := f.document(name)
	if err != nil {
		return nil, err
	}
	return f.budget(name, data, sum)
}

func (f *folder) budget(name string, data []byte, sum string) (*Budget, error) {
	root, err := document(name, data)
	if err != nil {
		return nil, err
	}
	r := &reader{file: name, root: root, grammar: budgetGrammar()}
	b := &Budget{Dir: f.dir, File: name, Format: 1, Inputs: []Input{{File: name, SHA256: sum}}, Coverage: gum.DefaultCoverage}
	if !r.format() {
		return nil, r.errs.err()
	}
	r.check(root, r.grammar)
	b.Title = r.text(root, "title")
	b.Instruments = r.instrumentTables()
	b.Coverage = r.reportCoverage(r.table(root, "report"))
	f.budgetInputs(r, b)
	known := make([]string, len(b.Quantities))
	for i := range b.Quantities {
		known[i] = b.Quantities[i].Name
	}
	if root.fields["outputs"] == nil {
		r.missing(root, "outputs", `write [outputs.NAME] with formula and unit`)
	}
	if root.fields["inputs"] == nil {
		r.missing(root, "inputs", `write [inputs.NAME] with value and u`)
	}
	b.Correlations = r.correlationTables(known)
	pairs := r.joint(b)
	names := make([]string, len(b.Instruments))
	for i := range b.Instruments {
		names[i] = b.Instruments[i].Name
	}
	r.checkCited(names)
	// A formula is looked at once its inputs are known for what they are.
	if err := r.errs.err(); err != nil {
		return nil, err
	}
	r.outputs(b, known)
	if err := r.errs.err(); err != nil {
		return nil, err
	}
	b.model(pairs)
	b.Warnings = append(r.warn, b.idle()...)
	return b, nil
}

// mostInputs bounds the inputs and outputs of a budget.
const mostInputs = 1000

func (f *folder) budgetInputs(r *reader, b *Budget) {
	t := r.table(r.root, "inputs")
	if t == nil {
		return
	}
	if len(t.keys) > mostInputs {
		r.fail(t, "there are %d inputs; at most %d are read", len(t.keys), mostInputs)
		return
	}
	for _, name := range t.keys {
		n := t.field(name)
		if !r.name(n, name) {
			continue
		}
		in := BudgetInput{Name: name, Line: n.line}
		var q stated
		var ok bool
		if n.shape == isTable && (n.fields["file"] != nil || n.fields["column"] != nil) {
			q, ok = f.repeats(r, b, n)
		} else {
			q, ok = r.quantity(n, wanted{any: true, like: si.One})
			if ok && n.shape == isTable {
				if u := n.fields["unit"]; u != nil && n.fields["readings"] == nil {
					r.fail(u, "unit goes with readings or with file and column; write the unit behind the value")
					continue
				}
				for _, k := range []string{"sha256", "decimal"} {
					if x := n.fields[k]; x != nil {
						r.fail(x, "%s goes with file and column", k)
						ok = false
					}
				}
			}
		}
		if !ok {
			continue
		}
		if !q.hasValue {
			r.fail(n, "a value is missing; write value = \"50 mm\"")
			continue
		}
		if n.shape == isTable {
			in.Group = r.text(n, "group")
			in.Together, in.readings = r.text(n, "together"), q.readings
			if in.Together != "" && len(q.readings) == 0 {
				r.fail(n.field("together"), "only inputs with readings can have been read together")
			}
		}
		in.Dist, in.Unit, in.Instrument, in.Source = q.dist, q.unit, q.instrument, q.source
		b.Quantities = append(b.Quantities, in)
	}
}

// name checks that a key can be the name of a variable in a formula.
func (r *reader) name(n *node, name string) bool {
	if _, err := formula.Compile("1", []string{name}); err != nil {
		problem := err.Error()
		var e *formula.Error
		if errors.As(err, &e) {
			problem = e.Reason
			if e.Hint != "" {
				problem += "; " + e.Hint
			}
		}
		r.errs.add(&Error{File: r.file, Line: n.line, Column: n.col, Key: n.path, Problem: problem, Err: err})
		return false
	}
	return true
}

// repeats reads an input whose readings stand in a column of a file.
func (f *folder) repeats(r *reader, b *Budget, n *node) (q stated, ok bool) {
	before := len(r.errs.list)
	allowed := []string{"file", "column", "unit", "sha256", "decimal", "together", "group", "instrument", "source"}
	for _, k := range n.keys {
		if !slices.Contains(allowed, k) {
			r.fail(n.field(k), "%s does not go with file and column", k)
		}
	}
	file, column, pin, s := r.text(n, "file"), r.text(n, "column"), r.pin(n), r.csvSettings(n)
	q.source, q.instrument = r.text(n, "source"), r.instrument(n)
	if n.fields["file"] == nil {
		r.missing(n, "file", "the CSV file that holds the column")
	}
	if n.fields["column"] == nil {
		r.missing(n, "column", "the header of the column in the file")
	}
	unit, hasUnit := r.unit(n, "unit")
	if n.fields["unit"] == nil {
		r.missing(n, "unit", `the unit of the column; write unit = "1" for pure numbers`)
	}
	if len(r.errs.list) > before || !hasUnit {
		return q, false
	}
	in, size, err := f.open(file)
	if err != nil {
		var e *Error
		errors.As(err, &e)
		e2 := r.errorf(n.field("file"), "%s: %s", file, e.Problem)
		e2.Err = err
		r.errs.add(e2)
		return q, false
	}
	defer in.Close()
	s.Numbers = []string{column}
	t, err := readCSV(in, file, size, s, s.Numbers, func(l *layout) error {
		c := slices.Index(l.header, column)
		if c < 0 {
			return r.errorf(n.field("column"), "%s: %s", file, missingColumn(l.header, column))
		}
		l.modes[c] = number
		return nil
	}, maxRecords)
	if err != nil {
		r.errs.add(err)
		return q, false
	}
	if pin != "" && pin != t.SHA256 {
		r.fail(n.field("sha256"), "the pin does not match: %s has SHA-256 %s; restore the file, or put in the new sum if the change is meant", file, t.SHA256)
		return q, false
	}
	b.addFile(Input{File: file, SHA256: t.SHA256, Rows: t.N})
	var xs []float64
	for _, x := range t.Number[t.Column(column)] {
		if !math.IsNaN(x) {
			xs = append(xs, unit.ToSI(x))
		}
	}
	if missing := t.N - len(xs); missing > 0 {
		if n.fields["together"] != nil {
			r.fail(n.field("together"), "%s of column %s has no value; inputs that were read together need all", plural(missing, "reading"), quoted(column))
			return q, false
		}
		r.warnf(n, "%s of column %s without a value left out", plural(missing, "reading"), quoted(column))
	}
	q.unit = unit
	if q.source == "" {
		q.source = fmt.Sprintf("mean of %d readings, %s column %s", len(xs), file, column)
	}
	if len(xs) < 2 {
		r.fail(n.field("column"), "a Type A evaluation needs two readings or more; there are %d", len(xs))
		return q, false
	}
	r.fromReadings(n.field("column"), xs, &q)
	return q, len(r.errs.list) == before
}

// joint evaluates the inputs that were read together, and returns the
// correlations that their readings give.
func (r *reader) joint(b *Budget) []gum.Pair {
	var pairs []gum.Pair
	done := map[string]bool{}
	for i := range b.Quantities {
		word := b.Quantities[i].Together
		if word == "" || done[word] {
			continue
		}
		done[word] = true
		var names []string
		var columns [][]float64
		var members []int
		for j := range b.Quantities {
			if q := &b.Quantities[j]; q.Together == word {
				names, columns, members = append(names, q.Name), append(columns, q.readings), append(members, j)
			}
		}
		at := r.root.fields["inputs"].fields[b.Quantities[i].Name].field("together")
		if len(names) == 1 {
			r.fail(at, "no other input was read together with this one")
			continue
		}
		for _, c := range b.Correlations {
			if slices.Contains(names, c.A) && slices.Contains(names, c.B) {
				r.errs.add(&Error{File: r.file, Line: c.Line, Key: "correlations",
					Problem: fmt.Sprintf("%s and %s were read together; their correlation follows from the readings", c.A, c.B)})
			}
		}
		inputs, more, err := gum.JointReadings(names, columns)
		if err != nil {
			r.fail(at, "%v", err)
			continue
		}
		for k, j := range members {
			b.Quantities[j].Dist = inputs[k].Dist
		}
		pairs = append(pairs, more...)
	}
	return pairs
}

// addFile notes a file once.
func (b *Budget) addFile(in Input) {
	for _, have := range b.Inputs {
		if have.File == in.File && have.SHA256 == in.SHA256 {
			return
		}
	}
	b.Inputs = append(b.Inputs, in)
}

func (r *reader) outputs(b *Budget, known []string) {
	t := r.table(r.root, "outputs")
	if t == nil {
		return
	}
	if len(t.keys) == 0 {
		r.fail(t, "no output is given; write [outputs.NAME] with formula and unit")
	}
	if len(t.keys) > mostInputs {
		r.fail(t, "there are %d outputs; at most %d are read", len(t.keys), mostInputs)
		return
	}
	dims := make([]si.Dimension, len(b.Quantities))
	for i := range b.Quantities {
		dims[i] = b.Quantities[i].Unit.Dim
	}
	for _, name := range t.keys {
		n := r.table(t, name)
		if n == nil {
			continue
		}
		o := BudgetOutput{Name: name, Formula: r.text(n, "formula"), Line: n.line}
		if len(name) > 256 {
			r.fail(n, "the name is longer than 256 bytes")
			continue
		}
		unit, hasUnit := r.unit(n, "unit")
		if n.fields["formula"] == nil {
			r.missing(n, "formula", `like formula = "v/d"`)
		}
		if o.Formula == "" || n.fields["unit"] != nil && !hasUnit {
			continue
		}
		p, err := formula.Compile(o.Formula, known)
		if err != nil {
			r.formulaError(n.field("formula"), err)
			continue
		}
		dim, err := p.Dimension(dims)
		if err != nil {
			r.formulaError(n.field("formula"), err)
			continue
		}
		if !hasUnit {
			unit = dim.Unit()
		} else if unit.Dim != dim {
			r.fail(n.field("unit"), "%s is %s; the formula gives %s (for example %s)", quoted(unit.Symbol), dimensionName(unit),
				dimensionName(dim.Unit()), dim.Unit().Symbol)
			continue
		}
		o.Program, o.Unit = p, unit
		b.Outputs = append(b.Outputs, o)
	}
}

// formulaError places an error of a formula; its own column counts within the
// formula.
func (r *reader) formulaError(n *node, err error) {
	e := r.errorf(n, "%v", err)
	e.Err = err
	r.errs.add(e)
}

// model makes what package gum propagates.
func (b *Budget) model(pairs []gum.Pair) {
	m := &gum.Model{Correlations: pairs}
	for _, q := range b.Quantities {
		m.Inputs = append(m.Inputs, gum.Input{Name: q.Name, Group: q.Group, Unit: q.Unit.Symbol, Dist: q.Dist, Block: q.Together})
	}
	for _, c := range b.Correlations {
		m.Correlations = append(m.Correlations, gum.Pair{A: c.A, B: c.B, R: c.R})
	}
	for i := range b.Outputs {
		o := &b.Outputs[i]
		m.Outputs = append(m.Outputs, gum.Output{Name: o.Name, Unit: o.Unit.Symbol, Formula: o.Formula, New: func() gum.Evaluator {
			w := o.Program.Workspace()
			return gum.Evaluator{Block: w.Block, Gradient: w.Gradient, Hessian: w.Hessian}
		}})
	}
	b.Model = m
}

// idle warns of inputs that no output uses and of correlations that change
// nothing.
func (b *Budget) idle() (warnings []error) {
	exact := map[string]bool{}
	for i, q := range b.Quantities {
		exact[q.Name] = q.Dist.IsExact()
		used := false
		for _, o := range b.Outputs {
			used = used || o.Program.Uses(i)
		}
		if !used {
			warnings = append(warnings, &Error{File: b.File, Line: q.Line, Key: "inputs." + q.Name, Problem: "no output uses this input"})
		}
	}
	for _, in := range b.Instruments {
		for _, k := range []struct{ text, key string }{{in.DriftPerYear, "drift_per_year"}, {in.PerKelvin, "per_kelvin"}} {
			if k.text != "" {
				warnings = append(warnings, &Error{File: b.File, Line: in.Line, Key: "instruments." + in.Name + "." + k.key,
					Problem: "a budget takes only what its formulas name: make it an input of its own (value = 0, with half_width and shape = \"rectangular\")"})
			}
		}
	}
	for _, c := range b.Correlations {
		for _, name := range []string{c.A, c.B} {
			if exact[name] {
				warnings = append(warnings, &Error{File: b.File, Line: c.Line, Key: "correlations",
					Problem: name + " has no uncertainty, so that its correlation changes nothing"})
			}
		}
	}
	return warnings
}
