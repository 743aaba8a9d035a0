package main

import (
	"bytes"
	"context"
	"errors"
	"io"
	"strings"
	"testing"
)

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
