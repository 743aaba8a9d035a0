package lab

import (
	"encoding/csv"
	"encoding/json"
	"io"
	"os"
	"strings"

	"github.com/go-gota/gota/dataframe"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
)

// FitSettings say what to fit: Formula, Response and Start must be given; Noise,
// Priors, Bounds, Fixed and the rest may be. A Formula that is an equation (left =
// right) takes no Response and needs the PredictorNoise of every column.
type FitSettings = reduce.FitSettings

// FormulaFit is a fit of a formula to columns of numbers. In a cell it shows the
// parameters, the goodness of the fit, the tests of the residuals and the
// warnings.
type FormulaFit struct {
	// FormulaFit is the fit itself: its Record and its Rows.
	FormulaFit *reduce.FormulaFit

	sheet *report.Sheet
	json  json.RawMessage
}

// Fit fits a formula to columns of a CSV file (its path) or of a gota frame. A
// header NAME/UNIT is the variable NAME, converted to SI; starts are SI; the
// parameters are the names of the formula that are no columns.
//
//	lab.Fit("capacitance.csv", lab.FitSettings{Formula: "c_s + s/(d + d0)", Response: "c",
//		Start: map[string]float64{"c_s": 2e-12, "s": 7e-14, "d0": 1e-5}})
func Fit(what any, s FitSettings) *FormulaFit {
	var from io.Reader
	var name string
	switch w := what.(type) {
	case string:
		f, err := os.Open(w)
		fail(err)
		defer f.Close()
		from, name = f, w
	case dataframe.DataFrame:
		text, err := plainCSV(w)
		fail(err)
		from, name = strings.NewReader(text), frameName
	default:
		failf("a value of type %T can't be fitted: the path of a CSV file or a frame is due", what)
	}
	r, err := reduce.FitCSV(cell.Context(), from, name, s)
	fail(err)
	f := &FormulaFit{FormulaFit: r, sheet: report.FitSheet(r, false)}
	f.json, err = json.Marshal(&r.Record)
	fail(err)
	return f
}

// plainCSV writes all columns of a frame.
func plainCSV(df dataframe.DataFrame) (string, error) {
	if df.Err != nil {
		return "", df.Err
	}
	names := df.Names()
	cells := make([][]string, len(names))
	for k, n := range names {
		cells[k] = seriesText(df.Col(n), func(x float64) float64 { return x })
	}
	return csvOf(names, cells, df.Nrow())
}

// csvOf writes n rows of columns under their headers.
func csvOf(header []string, columns [][]string, n int) (string, error) {
	var out strings.Builder
	w := csv.NewWriter(&out)
	_ = w.Write(header) // Error tells, below
	row := make([]string, len(columns))
	for i := range n {
		for k := range columns {
			row[k] = columns[k][i]
		}
		_ = w.Write(row)
	}
	w.Flush()
	return out.String(), w.Error()
}

// String returns the text form.
func (f *FormulaFit) String() string { return f.sheet.String() }

// SimpleRender gives the forms that a notebook can show, the record among them.
func (f *FormulaFit) SimpleRender() map[string]any {
	forms := f.sheet.SimpleRender()
	forms[ResultMIME] = f.json
	return forms
}

// Record is the fit as it is written and compared.
func (f *FormulaFit) Record() *reduce.FitRecord { return &f.FormulaFit.Record }

// parameter finds a parameter by name.
func (f *FormulaFit) parameter(name string) *reduce.Parameter {
	return parameterOf(f.FormulaFit.Record.Fit.Parameters, name)
}

// parameterOf finds a parameter by name, or ends the cell.
func parameterOf(ps []reduce.Parameter, name string) *reduce.Parameter {
	var known []string
	for i := range ps {
		if ps[i].Name == name {
			return &ps[i]
		}
		known = append(known, ps[i].Name)
	}
	fail(unknown("parameter", name, known))
	return nil
}

// Value is the estimate of a parameter, SI.
func (f *FormulaFit) Value(name string) float64 { return float64(f.parameter(name).Value) }

// U is the standard uncertainty of a parameter, SI.
func (f *FormulaFit) U(name string) float64 { return float64(f.parameter(name).U) }

// Parameters is the table of the estimates with their uncertainties.
func (f *FormulaFit) Parameters() *report.Table { return report.FitParameters(f.Record()) }

// Correlations tells the correlation coefficients of the parameters, under their
// names in the formula.
func (f *FormulaFit) Correlations() *report.Sheet {
	t := report.FitCorrelations(f.Record())
	if t == nil {
		return report.CorrelationSheet(f.Record().Reduction()) // says why there are none
	}
	return report.New("", "").Table(t)
}

// Diagnosis tells the goodness of the fit and the tests of the residuals.
func (f *FormulaFit) Diagnosis() *report.Sheet { return report.Diagnosis(f.Record().Reduction()) }

// Warnings tells what a reader of the fit must know.
func (f *FormulaFit) Warnings() *report.Sheet { return report.Warnings(f.Record().Reduction()) }

// Curve draws the columns with the fitted formula over the standardised
// residuals.
func (f *FormulaFit) Curve() *figure.Figure { return figureOf(figure.Curve(f.FormulaFit)) }

// Residuals draws the standardised residuals four ways on one scale.
func (f *FormulaFit) Residuals() *figure.Figure {
	return figureOf(figure.OfFit(f.FormulaFit).Residuals())
}
