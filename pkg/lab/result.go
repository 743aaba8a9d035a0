package lab

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"path/filepath"
	"strings"

	"github.com/go-gota/gota/dataframe"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
	"example.org/guardring/pkg/safefile"
	"example.org/guardring/pkg/si"
)

// ResultMIME is the type under which a result shows its record in a notebook.
const ResultMIME = "application/vnd.guardring.result+json"

// Settings say how to reduce: Seed, Trials, LawOnly, Probability, Digits, Rows.
// The zero Settings are the defaults: seed 0, 10,000 trials, the coverage that
// the bench states.
type Settings = reduce.Settings

// Result is a reduction. In a cell it shows the result, the parameters, the
// goodness of the fit, the budget and the warnings; its methods show the rest.
// Every method returns one value and changes nothing.
type Result struct {
	// Result is the reduction itself: its Record, its Rows, its Trials.
	Result *reduce.Result

	told  bool // the cautions stand with the bench it was made from
	sheet *report.Sheet
	json  json.RawMessage
}

// Reduce turns readings into a result. What it reduces is a *Bench from Open, the
// folder of a dataset, a *Result (its bench is reduced again), or a gota frame
// with the bench or folder that says what its columns are. Settings may follow.
//
//	lab.Reduce(b)
//	lab.Reduce("../datasets/attracted-disc", lab.Settings{Seed: 7, Trials: 100000})
//	lab.Reduce(df, b)
func Reduce(what any, more ...any) *Result {
	var s Settings
	stated := false
	var with *Bench
	told := false
	for _, m := range more {
		switch m := m.(type) {
		case Settings:
			if stated {
				failf("settings are given twice")
			}
			s, stated = m, true
		case *Settings:
			if m == nil {
				failf("the settings are nil")
			}
			if stated {
				failf("settings are given twice")
			}
			s, stated = *m, true
		case *Bench, string:
			if with != nil {
				failf("a bench is given twice")
			}
			with, told = benchOf(m)
		default:
			failf("a value of type %T is neither settings nor a bench", m)
		}
	}
	var b *Bench
	switch w := what.(type) {
	case *Bench, string, *Result:
		if with != nil {
			failf("a second bench is given; only a frame needs one beside it")
		}
		if r, ok := w.(*Result); ok && r != nil && !stated {
			s = r.Result.Settings
		}
		b, told = benchOf(w)
	case dataframe.DataFrame:
		if with == nil {
			failf("a frame needs the bench that says what its columns are: lab.Reduce(frame, bench)")
		}
		b = with.withFrame(w)
	default:
		failf("a value of type %T can't be reduced: a *lab.Bench from lab.Open, the folder of a dataset, a *lab.Result, or a frame with its bench is due", what)
	}
	return run(b.Bench, s, told)
}

// benchOf finds the bench of what a verb was given; told says that its cautions
// have been shown with it.
func benchOf(x any) (b *Bench, told bool) {
	switch x := x.(type) {
	case *Bench:
		if x == nil || x.Bench == nil {
			failf("the bench is nil; lab.Open opens one")
		}
		return x, true
	case *Result:
		if x == nil || x.Result == nil || x.Result.Bench == nil {
			failf("the result has no bench")
		}
		return newBench(x.Result.Bench), x.told
	case string:
		return Open(x), false
	}
	failf("a value of type %T is no bench", x)
	return nil, false
}

// run reduces and lays out.
func run(b *bench.Bench, s Settings, told bool) *Result {
	r, err := reduce.Run(cell.Context(), b, s)
	fail(err)
	return laidOut(r, told)
}

// laidOut makes everything that a cell shows of a reduction.
func laidOut(r *reduce.Result, told bool) *Result {
	out := &Result{Result: r, told: told, sheet: report.Summary(&r.Record, !told)}
	var err error
	out.json, err = json.Marshal(&r.Record)
	fail(err)
	return out
}

// Save writes the result to a file in the form that the end of its name asks for:
// .json the record, .html the report as one page with its figures, .md, .tex and
// .txt the report without. It returns the path.
func (r *Result) Save(path string) string {
	write := map[string]func(io.Writer) error{
		".json": func(w io.Writer) error {
			var b bytes.Buffer
			if err := json.Indent(&b, r.json, "", "  "); err != nil {
				return err
			}
			b.WriteByte('\n')
			_, err := w.Write(b.Bytes())
			return err
		},
		".html": func(w io.Writer) error { return report.HTML(w, r.Result) },
		".md":   func(w io.Writer) error { return report.Markdown(w, r.Result) },
		".tex":  func(w io.Writer) error { return report.LaTeX(w, r.Result) },
		".txt":  func(w io.Writer) error { return report.Text(w, r.Result) },
	}[filepath.Ext(path)]
	if write == nil {
		failf("%s: the name of a result ends in .json, .html, .md, .tex or .txt", path)
	}
	fail(safefile.Write(path, write))
	return path
}

// String returns the text form.
func (r *Result) String() string { return r.sheet.String() }

// SimpleRender gives the forms that a notebook can show, the record among them.
func (r *Result) SimpleRender() map[string]any {
	forms := r.sheet.SimpleRender()
	forms[ResultMIME] = r.json
	return forms
}

// Record is the reduction as it is written and compared: everything another
// laboratory needs to get the same numbers.
func (r *Result) Record() *reduce.Record { return &r.Result.Record }

// Value is the value of a measurand in SI; without a name, of the first.
func (r *Result) Value(name ...string) float64 { return float64(r.measurand(name).Value) }

// U is the standard uncertainty of a measurand in SI; without a name, of the
// first.
func (r *Result) U(name ...string) float64 { return float64(r.measurand(name).U) }

// Interval is the coverage interval of a measurand in SI; without a name, of the
// first.
func (r *Result) Interval(name ...string) []float64 {
	m := r.measurand(name)
	return []float64{float64(m.Interval[0]), float64(m.Interval[1])}
}

// Estimate is the estimate of a parameter in SI.
func (r *Result) Estimate(name string) float64 {
	return float64(parameterOf(r.Result.Record.Fit.Parameters, name).Value)
}

// measurand finds a measurand by name, the first without one.
func (r *Result) measurand(name []string) *reduce.Measurand {
	ms := r.Result.Record.Measurands
	if len(ms) == 0 {
		failf("the fit ended as %s and states no measurand", r.Result.Record.Fit.Status)
	}
	if len(name) > 1 {
		failf("%d names are given; one is due", len(name))
	}
	if len(name) == 0 || name[0] == "" {
		return &ms[0]
	}
	var known []string
	for i := range ms {
		if ms[i].Name == name[0] {
			return &ms[i]
		}
		known = append(known, ms[i].Name)
	}
	fail(unknown("measurand", name[0], known))
	return nil
}

// unknown is the error for a name that does not exist.
func unknown(what, name string, known []string) error {
	if s := si.Suggest(name, known); s != "" {
		return fmt.Errorf("there is no %s %q; did you mean %q?", what, name, s)
	}
	return fmt.Errorf("there is no %s %q; there are: %s", what, name, strings.Join(known, ", "))
}

// figureOf ends the cell when a figure can't be drawn.
func figureOf(f *figure.Figure, err error) *figure.Figure {
	fail(err)
	return f
}

// Fit draws the readings with the fitted model over the standardised residuals.
func (r *Result) Fit() *figure.Figure { return figureOf(figure.Fit(r.Result)) }

// Residuals draws the standardised residuals four ways on one scale: in the order
// of acquisition, against the fitted value, against leverage, against a normal
// distribution.
func (r *Result) Residuals() *figure.Figure { return figureOf(figure.Residuals(r.Result)) }

// Order draws the standardised residuals in the order of acquisition, where drift
// shows.
func (r *Result) Order() *figure.Figure { return figureOf(figure.Order(r.Result)) }

// Quantiles draws the ordered residuals against those of a normal distribution.
func (r *Result) Quantiles() *figure.Figure { return figureOf(figure.Quantiles(r.Result)) }

// Shares draws what each input contributes to the variance of a measurand;
// without a name, of the first.
func (r *Result) Shares(name ...string) *figure.Figure {
	return figureOf(figure.Shares(r.Result, r.measurand(name).Name))
}

// Histogram draws the Monte Carlo values of a measurand beside the law; without a
// name, of the first.
func (r *Result) Histogram(name ...string) *figure.Figure {
	return figureOf(figure.Histogram(r.Result, r.measurand(name).Name))
}

// Budget is the uncertainty budget of a measurand; without a name, of the first.
func (r *Result) Budget(name ...string) *report.Table {
	m := r.measurand(name)
	t := report.Budget(m)
	t.Caption = "Uncertainty budget of the " + report.Words(m.Name)
	return t
}

// Parameters tells the estimates with their uncertainties, starts and priors.
func (r *Result) Parameters() *report.Sheet { return report.ParameterSheet(&r.Result.Record) }

// Correlations tells the correlation coefficients of the estimates.
func (r *Result) Correlations() *report.Sheet { return report.CorrelationSheet(&r.Result.Record) }

// Corrections tells every correction with its size and what remains of it.
func (r *Result) Corrections() *report.Sheet { return report.CorrectionSheet(&r.Result.Record) }

// Diagnosis tells the goodness of the fit, the tests of the residuals and what
// the residuals point at.
func (r *Result) Diagnosis() *report.Sheet { return report.Diagnosis(&r.Result.Record) }

// Series tells what the bench states point by point, with what sets the points
// apart from a straight line.
func (r *Result) Series() *report.Sheet { return report.Series(&r.Result.Record) }

// Curve draws what the bench states at every level, a correction factor against
// the field, in its band of expanded uncertainty. A bench with several ranges has
// a figure for each: Curve(1), Curve(2) …; without a number, the first.
func (r *Result) Curve(number ...int) *figure.Figure {
	all, err := figure.Curves(r.Result)
	fail(err)
	n := 1
	if len(number) > 0 {
		n = number[0]
	}
	switch {
	case len(number) > 1:
		failf("%d numbers are given; one is due", len(number))
	case len(all) == 0:
		failf("a bench of kind %s states no result point by point", r.Result.Record.Model)
	case n < 1 || n > len(all):
		failf("there is no curve %d; they are numbered from 1 to %d", n, len(all))
	}
	return all[n-1]
}

// Warnings tells what a reader of the result must know.
func (r *Result) Warnings() *report.Sheet { return report.Warnings(&r.Result.Record) }

// Exclusions tells the readings that were left out, and why.
func (r *Result) Exclusions() *report.Sheet { return report.Exclusions(&r.Result.Record) }

// Rows is the table of all readings as they entered the fit, with the lines of
// the CSV file, residuals and leverage.
func (r *Result) Rows() *report.Table {
	return report.Readings(r.Result, channelUnits(r.Result.Bench), 0)
}

// Exclude reduces again without data record row, counted from 1 over all files,
// for the given reason. The result itself does not change.
func (r *Result) Exclude(row int, reason string) *Result {
	b, err := r.Result.Bench.Exclude(row, reason)
	fail(err)
	return run(b, r.Result.Settings, r.told)
}

// channelUnits are the units of a bench's channels by name.
func channelUnits(b *bench.Bench) map[string]si.Unit {
	units := map[string]si.Unit{}
	for i := range b.Channels {
		units[b.Channels[i].Name] = b.Channels[i].Unit
	}
	return units
}
