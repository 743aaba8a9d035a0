package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"path/filepath"
	"runtime/debug"
	"syscall"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"example.org/guardring/pkg/cell"
)

// The exit codes.
const (
	exitDone        = 0
	exitDifference  = 1
	exitBad         = 2
	exitInterrupted = 130
)

// differs is the error of work that is done and shows a difference.
type differs struct{ error }

// memoryLimit is where the collector starts to work harder rather than let the
// program grow: a million rows then fit into 250 MB. It is soft, and
// GOMEMLIMIT in the environment takes its place.
const memoryLimit = 200 << 20

// room is the limit for a call with these arguments. Records, notebooks and packs are
// trees in memory, many times as large as their files: under too low a limit the
// collector would never rest.
func room(args []string) int64 {
	var size int64
	for _, a := range args {
		switch filepath.Ext(a) {
		case ".json", ".ipynb", ".zip":
			if info, err := os.Stat(a); err == nil && info.Mode().IsRegular() {
				size += info.Size()
			}
		}
	}
	return max(memoryLimit, 20*size)
}

// run is the command: arguments and streams in, exit code out.
func run(ctx context.Context, args []string, stdin io.Reader, stdout, stderr io.Writer) int {
	if os.Getenv("GOMEMLIMIT") == "" {
		debug.SetMemoryLimit(room(args))
	}
	ctx, stop := signal.NotifyContext(ctx, os.Interrupt, syscall.SIGTERM)
	defer stop()
	// After the first interrupt the next one ends the program the usual way.
	context.AfterFunc(ctx, stop)
	ctx, finish := withProgress(ctx, stderr)
	root := newRoot()
	root.SetArgs(args)
	root.SetIn(stdin)
	out := &watched{w: stdout}
	root.SetOut(out)
	root.SetErr(stderr)
	err := root.ExecuteContext(ctx)
	if err == nil {
		err = out.err
	}
	finish()
	if err == nil {
		return exitDone
	}
	fmt.Fprintf(stderr, "guardring: %s\n", words(err))
	var d differs
	switch {
	case errors.Is(err, context.Canceled) && ctx.Err() != nil:
		return exitInterrupted
	case errors.As(err, &d):
		return exitDifference
	}
	return exitBad
}

// withProgress draws progress on stderr when that is a terminal.
func withProgress(ctx context.Context, stderr io.Writer) (context.Context, func()) {
	f, ok := stderr.(*os.File)
	if !ok || !term.IsTerminal(int(f.Fd())) {
		return ctx, func() {}
	}
	b := &bars{w: f}
	return cell.WithProgress(ctx, b.show), b.finish
}

func newRoot() *cobra.Command {
	root := &cobra.Command{
		Use:   "guardring",
		Short: "Reduce readings of electrostatic benches to results with uncertainty",
		Long: `Guardring turns readings of electrostatic benches (CSV) and a description of the
bench (bench.toml) into results with an uncertainty budget, residuals and a
record that another laboratory can check.

Exit codes: 0 done; 1 the work shows a difference; 2 wrong use, bad input, a fit
that is singular or has not converged, or a failed write; 130 interrupted.`,
		SilenceErrors: true,
		SilenceUsage:  true,
		Args:          nothing,
		RunE:          func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	root.PersistentPreRunE = spareInputs
	root.SetFlagErrorFunc(flagError)
	root.SetHelpCommand(helpCommand())
	root.AddCommand(reduceCommand(), checkCommand(), newCommand(), certificateCommand(), compareCommand(), historyCommand(), simulateCommand(), planCommand(), strayfieldCommand(), fitCommand(), propagateCommand(), mergeCommand(), kernelCommand(), replayCommand(), packCommand(), manCommand(), versionCommand())
	return root
}
