package main

import (
	"context"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"
)

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){
		"guardring": func() { os.Exit(run(context.Background(), os.Args[1:], os.Stdin, os.Stdout, os.Stderr)) },
	})
}

// TestScripts runs the recorded sessions in testdata/script.
func TestScripts(t *testing.T) {
	root, err := filepath.Abs(filepath.Join("..", ".."))
	if err != nil {
		t.Fatal(err)
	}
	testscript.Run(t, testscript.Params{
		Dir: filepath.Join("testdata", "script"),
		Setup: func(e *testscript.Env) error {
			e.Setenv("DATASETS", filepath.Join(root, "datasets"))
			return nil
		},
		Cmds: map[string]func(ts *testscript.TestScript, neg bool, args []string){
			"exits":   exits,
			"replace": replace,
			"copydir": copyDir,
		},
	})
}

// exits CODE COMMAND ... runs a command and checks its exit code.
func exits(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 2 {
		ts.Fatalf("usage: exits CODE COMMAND ARGS...")
	}
	want, err := strconv.Atoi(args[0])
	if err != nil {
		ts.Fatalf("exits: %v", err)
	}
	code := 0
	if err := ts.Exec(args[1], args[2:]...); err != nil {
		var e *exec.ExitError
		if !errors.As(err, &e) {
			ts.Fatalf("%v", err)
		}
		code = e.ExitCode()
	}
	if code != want {
		ts.Fatalf("exit code %d, want %d", code, want)
	}
}

// replace FILE OLD NEW puts NEW for the one OLD in FILE.
func replace(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) != 3 {
		ts.Fatalf("usage: replace FILE OLD NEW")
	}
	path := ts.MkAbs(args[0])
	text := ts.ReadFile(args[0])
	line := strings.NewReplacer(`\n`, "\n")
	old, with := line.Replace(args[1]), line.Replace(args[2])
	i := indexOnce(text, old)
	if i < 0 {
		ts.Fatalf("replace: %q does not stand once in %s", old, args[0])
	}
	ts.Check(os.WriteFile(path, []byte(text[:i]+with+text[i+len(old):]), 0o666))
}

// indexOnce is where old stands in text, or −1 when it does not stand there once.
func indexOnce(text, old string) int {
	at := -1
	for i := 0; i+len(old) <= len(text); i++ {
		if text[i:i+len(old)] == old {
			if at >= 0 {
				return -1
			}
			at = i
		}
	}
	return at
}

// copyDir FROM TO copies a folder.
func copyDir(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) != 2 {
		ts.Fatalf("usage: copydir FROM TO")
	}
	ts.Check(os.CopyFS(ts.MkAbs(args[1]), os.DirFS(ts.MkAbs(args[0]))))
}
