package lab

import (
	"fmt"
	"runtime"
	"runtime/debug"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
)

// Provenance says what another laboratory needs to get the same numbers: the
// versions of the tool, of Go and of every module linked in with its sum, and for
// each result (a *Result, a *Propagation or a *FormulaFit) its inputs with their
// SHA-256, its seed and trials.
func Provenance(of ...any) *report.Sheet {
	s := report.New("", "")
	s.Fact("guardring", reduce.Version)
	s.Fact("Go", fmt.Sprintf("%s for %s/%s", runtime.Version(), runtime.GOOS, runtime.GOARCH))
	for i, x := range of {
		var rec *reduce.Record
		switch x := x.(type) {
		case *Result:
			if x != nil && x.Result != nil {
				rec = &x.Result.Record
			}
		case *Propagation:
			if x != nil && x.Propagation != nil {
				p := &x.Propagation.Record
				rec = &reduce.Record{Title: p.Title, Guardring: p.Guardring, Run: p.Run, Inputs: p.Inputs}
			}
		case *FormulaFit:
			if x != nil && x.FormulaFit != nil {
				rec = x.Record().Reduction()
			}
		case nil:
		default:
			failf("a value of type %T has no record; a *lab.Result, *lab.Propagation or *lab.FormulaFit is due", x)
		}
		if rec == nil {
			failf("result %d is nil", i+1)
		}
		s.Head(rec.Title)
		s.Part(report.Inputs(rec))
	}
	info, ok := debug.ReadBuildInfo()
	if !ok || len(info.Deps) == 0 {
		return s.Notice("The binary holds no record of its modules; it was not built as a Go module.")
	}
	t := &report.Table{Columns: []report.Column{{Name: "module", Most: 60}, {Name: "version", Most: 50}, {Name: "sum", Most: 60}}}
	for _, m := range info.Deps {
		if m.Replace != nil {
			m = m.Replace
		}
		t.Rows = append(t.Rows, []string{m.Path, m.Version, m.Sum})
	}
	return s.Head("Modules").Table(t)
}
