package reduce_test

import (
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
)

// Warnings are for people: they name inputs by the words of the budget table, with
// the key in brackets where it is one of bench.toml, and amounts have units.
func TestWarningsInWords(t *testing.T) {
	find := func(t *testing.T, r *reduce.Record, part string) string {
		t.Helper()
		for _, w := range r.Warnings {
			if strings.Contains(w, part) {
				return w
			}
		}
		t.Fatalf("no warning with %q in %q", part, r.Warnings)
		return ""
	}

	// Two gaps alone: nothing tells a stray length from the permittivity.
	s := openSheet(t, "attracted-disc")
	prior := "value = \"12 um\"\nu = \"8 um\"\nadjust = true"
	if strings.Count(s.toml, prior) != 1 {
		t.Fatal("the prior of the gap offset is not where it was")
	}
	s.toml = strings.Replace(s.toml, prior, "start = \"0 um\"\nadjust = true", 1)
	gap := s.column(t, "gap/mm")
	for i := range s.rows {
		s.rows[i][gap] = s.rows[0][gap]
	}
	r := s.mustRun(t)
	w := find(t, r, "can't be told apart")
	for _, part := range []string{"the permittivity and the gap offset", "the gap offset by +19.9 µm", "; their uncertainties are unknown"} {
		if !strings.Contains(w, part) {
			t.Errorf("%q does not say %q", w, part)
		}
	}

	s = openSheet(t, "dielectric-sample")
	w = find(t, s.mustRun(t), "the air film")
	if want := "guard gap correction (corrections.guard_gap): the air film"; !strings.HasPrefix(w, want) {
		t.Errorf("%q does not begin with %q", w, want)
	}
	if strings.Contains(w, "× guard_gap") || !strings.Contains(w, "guard gap model (corrections.guard_gap.model)") {
		t.Error(w)
	}
}

// A file of readings may be called as a table of the bench is.
func TestWordsLeaveFiles(t *testing.T) {
	s := openSheet(t, "attracted-disc")
	s.toml = strings.Replace(s.toml, `"readings.csv"`, `"channels.csv"`, 1)
	m := s.column(t, "m/g")
	s.rows[20][m] += "e1" // a zero ten times as large, which its neighbours show
	dir := t.TempDir()
	if _, err := s.reduce(dir); err == nil {
		t.Fatal("a missing file of readings was not missed")
	}
	if err := os.Rename(filepath.Join(dir, "readings.csv"), filepath.Join(dir, "channels.csv")); err != nil {
		t.Fatal(err)
	}
	b, err := bench.Open(dir)
	if err != nil {
		t.Fatal(err)
	}
	r, err := reduce.Run(context.Background(), b, reduce.Settings{LawOnly: true})
	if err != nil {
		t.Fatal(err)
	}
	if w := strings.Join(r.Record.Warnings, "\n"); !strings.Contains(w, "reading 22 (channels.csv:23) lies") {
		t.Errorf("warnings %s", w)
	}
}

// mustRun is mustReduce for a sheet whose fit need not succeed.
func (s *sheet) mustRun(t testing.TB) *reduce.Record {
	t.Helper()
	r, err := s.reduce(t.TempDir())
	if err != nil {
		t.Fatalf("%s: %v", s.name, err)
	}
	return &r.Record
}
