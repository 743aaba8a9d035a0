package main

import (
	"bytes"
	"context"
	"os"
	"os/exec"
	"regexp"
	"strings"
	"testing"

	"github.com/spf13/cobra"
)

// Every module that is linked into the command, for each system it is built for,
// stands in licences.txt with its version, a licence and a text.
func TestLicencesCoverWhatIsLinked(t *testing.T) {
	table, texts, _ := strings.Cut(licences, "\n\n")
	id := map[string]string{}
	for line := range strings.Lines(table) {
		f := strings.Split(strings.TrimSpace(line), "\t")
		if len(f) != 3 || f[2] == "" {
			t.Fatalf("no licence in %q", line)
		}
		id[f[0]+" "+f[1]] = f[2]
	}
	for _, system := range []string{"linux/amd64", "linux/arm64", "darwin/arm64", "windows/amd64"} {
		goos, goarch, _ := strings.Cut(system, "/")
		c := exec.Command("go", "list", "-deps", "-f", "{{with .Module}}{{if not .Main}}{{.Path}} {{.Version}}{{end}}{{end}}", ".")
		c.Env = append(os.Environ(), "GOOS="+goos, "GOARCH="+goarch, "CGO_ENABLED=0")
		out, err := c.Output()
		if err != nil {
			t.Fatalf("go list: %v", err)
		}
		modules := strings.Fields(strings.ReplaceAll(string(out), " ", "@"))
		if len(modules) < 100 {
			t.Fatalf("%s: only %d packages are linked?", system, len(modules))
		}
		for _, m := range modules {
			name := strings.Replace(m, "@", " ", 1)
			if id[name] == "" {
				t.Errorf("%s: %s has no licence in licences.txt; run go run ./cmd/guardring/internal/genlicences", system, name)
				id[name] = "said"
			}
			if !strings.Contains(texts, "==== "+name+": ") {
				t.Errorf("%s: the text of the licence of %s is missing", system, name)
			}
		}
	}
}

// The manual has a page for every command, the same bytes each time, and the
// shells can complete.
func TestManualAndCompletion(t *testing.T) {
	t.Setenv("SOURCE_DATE_EPOCH", "1767225600")
	pages, err := manual(newRoot())
	if err != nil {
		t.Fatal(err)
	}
	again, err := manual(newRoot())
	if err != nil {
		t.Fatal(err)
	}
	byName := map[string]string{}
	for i, p := range pages {
		byName[p.path] = string(p.data)
		if !bytes.Equal(p.data, again[i].data) {
			t.Errorf("%s differs from one run to the next", p.path)
		}
	}
	var visit func(c *cobra.Command)
	visit = func(c *cobra.Command) {
		name := strings.ReplaceAll(c.CommandPath(), " ", "-") + ".1"
		if text := byName[name]; !strings.Contains(text, ".TH") || !strings.Contains(text, "Jan 2026") || !strings.Contains(text, c.Short) {
			t.Errorf("%s: %.200s", name, text)
		}
		for _, sub := range c.Commands() {
			if sub.IsAvailableCommand() {
				visit(sub)
			}
		}
	}
	visit(newRoot())
	for shell, mark := range map[string]string{"bash": "__start_guardring", "zsh": "#compdef guardring", "fish": "complete -c guardring", "powershell": "Register-ArgumentCompleter"} {
		var out, bad bytes.Buffer
		if code := run(context.Background(), []string{"completion", shell}, nil, &out, &bad); code != 0 || !strings.Contains(out.String(), mark) {
			t.Errorf("completion %s: exit code %d: %s", shell, code, bad.String())
		}
	}
}

// TestPackageCommentListsCommands holds the manual that `go doc` shows to the
// commands that there are.
func TestPackageCommentListsCommands(t *testing.T) {
	text, err := os.ReadFile("main.go")
	if err != nil {
		t.Fatal(err)
	}
	listed := map[string]bool{}
	for _, m := range regexp.MustCompile(`(?m)^//\tguardring (\w+) `).FindAllStringSubmatch(string(text), -1) {
		listed[m[1]] = true
	}
	for _, c := range newRoot().Commands() {
		if c.IsAvailableCommand() && !listed[c.Name()] {
			t.Errorf("the package comment does not list %s", c.Name())
		}
		delete(listed, c.Name())
	}
	for name := range listed {
		t.Errorf("the package comment lists %s, which is no command", name)
	}
}
