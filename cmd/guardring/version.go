package main

import (
	_ "embed"
	"fmt"
	"io"
	"runtime/debug"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/reduce"
)

// licences is a line a module (path, version, SPDX expression, separated by tabs)
// and then the texts, see internal/genlicences.
//
//go:embed licences.txt
var licences string

// build says what the program was built from.
type build struct {
	version  string // reduce.Version, or that of the module when it is tagged
	revision string // "" when unknown
	time     string // RFC 3339, "" when unknown
	modified bool
	info     *debug.BuildInfo // nil when unknown
}

func readBuild() build {
	b := build{version: reduce.Version}
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return b
	}
	b.info = info
	for _, s := range info.Settings {
		switch s.Key {
		case "vcs.revision":
			b.revision = s.Value
		case "vcs.time":
			b.time = s.Value
		case "vcs.modified":
			b.modified = s.Value == "true"
		}
	}
	return b
}

// String is the version in one line.
func (b build) String() string {
	s := "guardring " + b.version
	if b.revision != "" {
		s += " (" + b.revision[:min(12, len(b.revision))]
		if b.modified {
			s += ", with changes"
		}
		s += ")"
	}
	return s
}

func versionCommand() *cobra.Command {
	var texts bool
	cmd := &cobra.Command{
		Use:   "version",
		Short: "Print the version, the Go version, the modules linked in and their licences",
		Long: `Version prints what this program is and what it was built from. With --licences it
prints the modules that are linked in with their licences as SPDX expressions, and
then the texts of these.

Files that carry format = 1 (benches, budgets, simulations, records, parts of a
Monte Carlo run, packs) are read by every later version; where one can't be, or
comes from a newer version, it is refused with what to do, never half read.`,
		Example: "  guardring version --licences",
		Args:    nothing,
		RunE: func(cmd *cobra.Command, _ []string) error {
			out := cmd.OutOrStdout()
			if texts {
				return writeLicences(out)
			}
			return readBuild().write(out)
		},
	}
	cmd.Flags().BoolVar(&texts, "licences", false, "print the licences of what is linked in")
	return cmd
}

func (b build) write(w io.Writer) error {
	var s strings.Builder
	fmt.Fprintln(&s, b)
	if b.info != nil {
		fmt.Fprintf(&s, "built with %s\n", b.info.GoVersion)
		if b.revision != "" {
			fmt.Fprintf(&s, "revision %s of %s\n", b.revision, b.time)
		}
		for _, m := range b.info.Deps {
			if m.Replace != nil {
				m = m.Replace
			}
			fmt.Fprintf(&s, "%s %s %s\n", m.Path, m.Version, m.Sum)
		}
	}
	_, err := io.WriteString(w, s.String())
	return err
}

// writeLicences prints the modules with their licences as a table, then the texts.
func writeLicences(w io.Writer) error {
	table, texts, _ := strings.Cut(licences, "\n\n")
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', 0)
	fmt.Fprintln(t, "module\tversion\tlicence")
	fmt.Fprintln(t, "guardring\t"+reduce.Version+"\tBSD-3-Clause")
	fmt.Fprintln(t, table)
	if err := t.Flush(); err != nil {
		return err
	}
	_, err := io.WriteString(w, "\n"+texts)
	return err
}
