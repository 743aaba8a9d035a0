package main

import (
	"context"
	"fmt"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/kernel"
	"example.org/guardring/pkg/reduce"
)

// kernelCommand is `guardring kernel`: build, install, list and remove the notebook kernel.
func kernelCommand() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "kernel",
		Short: "Build, install, list or remove the notebook kernel",
		Long: "Build, install, list or remove the notebook kernel. Jupyter then offers \"" + kernel.DisplayName + "\" for new notebooks.\n" +
			"The kernel is compiled on this machine from a checkout; the first time takes some minutes, a second time with nothing changed none.",
		Args: nothing,
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	cmd.AddCommand(kernelBuildCommand(), kernelInstallCommand(), kernelListCommand(), kernelRemoveCommand())
	return cmd
}

// locationFlags adds the flags that say where Jupyter finds the kernel.
func locationFlags(cmd *cobra.Command, at *kernel.Location) {
	var user bool
	cmd.Flags().BoolVar(&user, "user", false, "in your own Jupyter data folder (the default; JUPYTER_DATA_DIR is honoured)")
	cmd.Flags().StringVar(&at.Prefix, "prefix", "", "under `DIR`/share/jupyter")
	cmd.Flags().BoolVar(&at.SysPrefix, "sys-prefix", false, "under the prefix of the Python in PATH, such as a virtual environment")
	cmd.MarkFlagsMutuallyExclusive("user", "prefix", "sys-prefix")
}

// sourceFlag adds the flag that says from which checkout the kernel is compiled.
func sourceFlag(cmd *cobra.Command, source *string) {
	cmd.Flags().StringVar(source, "source", "", "`DIR` of a checkout (default: the one around the working directory)")
}

// fromSource finds the checkout and has something made from it, with progress.
func fromSource(cmd *cobra.Command, source string, do func(ctx context.Context, dir string) error) error {
	dir, err := kernel.FindSource(source)
	if err != nil {
		return err
	}
	ctx, done := withProgress(cmd.Context(), cmd.ErrOrStderr())
	defer done()
	return do(ctx, dir)
}

func kernelBuildCommand() *cobra.Command {
	var source, output string
	cmd := &cobra.Command{
		Use:     "build -o FILE",
		Short:   "Compile the kernel to a file",
		Example: "  guardring kernel build -o ./guardring-kernel",
		Args:    nothing,
		RunE: func(cmd *cobra.Command, _ []string) error {
			var built bool
			err := fromSource(cmd, source, func(ctx context.Context, dir string) (err error) {
				built, err = kernel.Build(ctx, dir, output, cmd.ErrOrStderr())
				return err
			})
			if err != nil {
				return err
			}
			if !built {
				fmt.Fprintln(cmd.OutOrStdout(), output, "is current: nothing had changed")
				return nil
			}
			fmt.Fprintln(cmd.OutOrStdout(), "built", output)
			return nil
		},
	}
	cmd.Flags().StringVarP(&output, "output", "o", "guardring-kernel", "`FILE` to write")
	sourceFlag(cmd, &source)
	return cmd
}

func kernelInstallCommand() *cobra.Command {
	var at kernel.Location
	var source string
	cmd := &cobra.Command{
		Use:     "install",
		Short:   "Compile the kernel and make it known to Jupyter",
		Example: "  guardring kernel install\n  go run -C CLONE ./cmd/guardring kernel install",
		Args:    nothing,
		RunE: func(cmd *cobra.Command, _ []string) error {
			var where string
			var built bool
			err := fromSource(cmd, source, func(ctx context.Context, dir string) (err error) {
				where, built, err = kernel.Install(ctx, dir, at, reduce.Version, cmd.ErrOrStderr())
				return err
			})
			if err != nil {
				return err
			}
			note := ""
			if !built {
				note = " (nothing had changed)"
			}
			fmt.Fprintf(cmd.OutOrStdout(), "installed %s in %s%s\n", kernel.DisplayName, where, note)
			return nil
		},
	}
	locationFlags(cmd, &at)
	sourceFlag(cmd, &source)
	return cmd
}

func kernelListCommand() *cobra.Command {
	return &cobra.Command{
		Use:     "list",
		Short:   "List where the kernel is installed",
		Example: "  guardring kernel list",
		Args:    nothing,
		RunE: func(cmd *cobra.Command, _ []string) error {
			found, err := kernel.List(cmd.Context())
			if err != nil {
				return err
			}
			if len(found) == 0 {
				fmt.Fprintln(cmd.OutOrStdout(), "no kernel is installed; `guardring kernel install` installs one")
			}
			for _, k := range found {
				line := k.Dir + "  " + k.Version
				if k.Problem != "" {
					line += "  (" + k.Problem + ")"
				}
				fmt.Fprintln(cmd.OutOrStdout(), line)
			}
			return nil
		},
	}
}

func kernelRemoveCommand() *cobra.Command {
	var at kernel.Location
	cmd := &cobra.Command{
		Use:     "remove",
		Short:   "Take the kernel away from Jupyter",
		Example: "  guardring kernel remove",
		Args:    nothing,
		RunE: func(cmd *cobra.Command, _ []string) error {
			dir, err := kernel.Remove(cmd.Context(), at)
			if err != nil {
				return err
			}
			fmt.Fprintln(cmd.OutOrStdout(), "removed", dir)
			return nil
		},
	}
	locationFlags(cmd, &at)
	return cmd
}
