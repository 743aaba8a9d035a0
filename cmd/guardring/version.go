package main

import (
	"fmt"
	"runtime/debug"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/reduce"
)

func versionCommand() *cobra.Command {
	return &cobra.Command{
		Use:     "version",
		Short:   "Print the version, the Go version and the modules linked in",
		Example: "  guardring version",
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			out := cmd.OutOrStdout()
			fmt.Fprintf(out, "guardring %s\n", reduce.Version)
			info, ok := debug.ReadBuildInfo()
			if !ok {
				return nil
			}
			fmt.Fprintf(out, "built with %s\n", info.GoVersion)
			for _, s := range info.Settings {
				if s.Key == "vcs.revision" || s.Key == "vcs.modified" {
					fmt.Fprintf(out, "%s %s\n", s.Key, s.Value)
				}
			}
			for _, m := range info.Deps {
				fmt.Fprintf(out, "%s %s %s\n", m.Path, m.Version, m.Sum)
			}
			return nil
		},
	}
}
