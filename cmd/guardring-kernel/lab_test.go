package main_test

import (
	"fmt"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"example.org/guardring/pkg/kernel"
)

// dataset returns the absolute path of a demonstration bench.
func dataset(t *testing.T, name string) string {
	t.Helper()
	source, err := kernel.FindSource("")
	if err != nil {
		t.Fatal(err)
	}
	return filepath.Join(source, "datasets", name)
}

func TestLabInCells(t *testing.T) {
	s := start(t)
	s.ok("import \"example.org/guardring/pkg/lab\"")
	e := s.ok(fmt.Sprintf("b := lab.Open(%q)\nb", dataset(t, "attracted-disc")))
	if len(e.Outputs) != 1 || e.Outputs[0].Data["text/html"] == nil || e.Result() == "" {
		t.Errorf("a bench: %.300s", dump(e))
	}
	e = s.ok("r := lab.Reduce(b)\nr")
	if len(e.Outputs) != 2 || !strings.Contains(e.Outputs[0].Plain(), "(100 %)") {
		t.Fatalf("a reduction: %.500s", dump(e))
	}
	for _, mime := range []string{"text/plain", "text/html", "text/latex", "application/vnd.guardring.result+json"} {
		if e.Outputs[1].Data[mime] == nil {
			t.Errorf("a result has no %s form", mime)
		}
	}
	e = s.ok("r.Residuals()")
	if len(e.Outputs) != 1 || !strings.Contains(toString(e.Outputs[0].Data["image/svg+xml"]), "<svg") || e.Outputs[0].Data["image/png"] == nil {
		t.Errorf("a figure: %.300s", dump(e))
	}
	s.fails("1\nlab.Open(\"no such folder\")", kernel.CellFailed, "no such folder", "line 2")
	s.value("1+1", "2")
}

func TestLibraryWorkStopsOnInterrupt(t *testing.T) {
	s := start(t)
	s.ok(fmt.Sprintf(`import ("os"; "bufio"; "fmt"; "example.org/guardring/pkg/lab"; "example.org/guardring/pkg/bench"; "example.org/guardring/pkg/reduce"; "example.org/guardring/pkg/cell")
b, err := bench.Open(%q)
if err != nil { cell.Fail(err) }
file, err := os.Create(%q)
if err != nil { cell.Fail(err) }
w := bufio.NewWriter(file)
fmt.Fprintln(w, "x,y")
for i := 1; i <= 200000; i++ { fmt.Fprintf(w, "%%d,%%g\n", i, 2e-3*float64(i)+float64(i*7919%%1000)*1e-4) }
w.Flush()
file.Close()
kept := 3`, dataset(t, "attracted-disc"), filepath.Join(t.TempDir(), "long.csv")))
	for name, code := range map[string]string{
		"Monte Carlo": "mc, err := reduce.Run(cell.Context(), b, reduce.Settings{Trials: 20000000})\nif err != nil { cell.Fail(err) }\nmc.Record.Title",
		"fit":         "for { lab.Fit(file.Name(), lab.FitSettings{Formula: \"a + s*x\", Response: \"y\", Start: map[string]float64{\"a\": 1, \"s\": 1}}) }",
	} {
		e, took := s.interrupted(code, 700*time.Millisecond, s.byMessage)
		if e.EName != kernel.Interrupted {
			t.Errorf("%s: %s %s: %.300s", name, e.Status, e.EName, e.EValue)
		}
		t.Logf("%s: %v to idle", name, took.Round(time.Millisecond))
	}
	s.value("kept", "3")
}
