package lab

import (
	"fmt"
	"runtime"
	"runtime/debug"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
)

// Provenance says what another laboratory needs to get the same numbers: the
// versions of the tool, of Go and of every module linked in with its sum, and
// for each result its inputs with their SHA-256, its seed and trials.
func Provenance(results ...*Result) *report.Sheet {
	s := report.New("", "")
	s.Fact("guardring", reduce.Version)
	s.Fact("Go", fmt.Sprintf("%s for %s/%s", runtime.Version(), runtime.GOOS, runtime.GOARCH))
	for i, r := range results {
		if r == nil || r.Result == nil {
			failf("result %d is nil", i+1)
		}
		s.Head(r.Result.Record.Title)
		s.Part(report.Inputs(&r.Result.Record))
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
