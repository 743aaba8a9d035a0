package main

import (
	"bytes"
	"context"
	"errors"
	"io"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
)

// Figures of series whose names make the same file name do not replace each other.
func TestFiguresOfOneName(t *testing.T) {
	b, err := bench.Open("../../datasets/attracted-disc")
	if err != nil {
		t.Fatal(err)
	}
	r, err := reduce.Run(context.Background(), b, reduce.Settings{LawOnly: true})
	if err != nil {
		t.Fatal(err)
	}
	fig, err := figure.Residuals(r)
	if err != nil {
		t.Fatal(err)
	}
	var all []*figure.Figure
	for _, name := range []string{"curve-2-kV-m", "curve-2-kv-m", "fit", "curve-2-kV-m"} {
		f := *fig
		f.Name = name
		all = append(all, &f)
	}
	files, err := drawn(nil, "figures", all)
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []string{"curve-2-kV-m.svg", "curve-2-kv-m-2.svg", "fit.svg", "curve-2-kV-m-3.svg"} {
		if got := filepath.Base(files[i].path); got != want {
			t.Errorf("figure %d: %s, want %s", i+1, got, want)
		}
	}
}

// full is standard output on a full disk.
type full struct{}

func (full) Write([]byte) (int, error) { return 0, errors.New("no space left on device") }

// A command whose output could not be written has failed, however it prints.
func TestFullStandardOutput(t *testing.T) {
	for _, args := range [][]string{
		{"version"}, {"help"}, {"help", "reduce"}, {"reduce", "--help"},
		{"check", "../../datasets/attracted-disc"},
		{"reduce", "--law-only", "../../datasets/attracted-disc"},
		{"new", t.TempDir() + "/n", "--model", "attracted-disc"},
	} {
		var stderr bytes.Buffer
		if code := run(context.Background(), args, io.MultiReader(), full{}, &stderr); code != exitBad || !strings.Contains(stderr.String(), "no space left") {
			t.Errorf("%v: exit code %d: %s", args, code, stderr.String())
		}
	}
}

// Names of folders do not steer the terminal from the table of a batch.
func TestBatchNamesAreVisible(t *testing.T) {
	var out bytes.Buffer
	batchTable(&out, []string{"a\x1b[31m\nb"}, []outcome{{err: errors.New("c\x07")}})
	if s := out.String(); !strings.Contains(s, `a\x1b[31m\nb`) || !strings.Contains(s, `c\x07`) {
		t.Errorf("%q", s)
	}
}
