package main

import (
	"bytes"
	"context"
	"path/filepath"
	"regexp"
	"testing"
	"time"
)

// TestInterrupt: work that is stopped says how far it came and exits with 130.
func TestInterrupt(t *testing.T) {
	datasets := filepath.Join("..", "..", "datasets")
	for _, c := range []struct {
		args []string
		want string
	}{
		{[]string{"propagate", filepath.Join(datasets, "budgets", "plate-permittivity.toml"), "--trials", "1000000000000"}, `interrupted after \d+ of 1000000000000 Monte Carlo trials`},
		{[]string{"fit", filepath.Join(datasets, "fit-example", "capacitance.csv"), "--formula", "c_s + s/(d+d0)", "--response", "c",
			"--start", "c_s=2e-12,s=7e-14,d0=1e-5", "--bootstrap", "10000000"}, `interrupted`},
	} {
		ctx, stop := context.WithCancel(context.Background())
		timer := time.AfterFunc(300*time.Millisecond, stop)
		var out, errs bytes.Buffer
		code := run(ctx, c.args, nil, &out, &errs)
		timer.Stop()
		stop()
		if code != exitInterrupted || out.Len() > 0 || !regexp.MustCompile(c.want).Match(errs.Bytes()) {
			t.Errorf("%s: exit code %d, printed %d bytes, said %q", c.args[0], code, out.Len(), errs.String())
		}
	}
}
