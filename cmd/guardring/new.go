package main

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"example.org/guardring/datasets"
	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/model"
)

func newCommand() *cobra.Command {
	var name string
	var demo bool
	cmd := &cobra.Command{
		Use:   "new DIR --model NAME",
		Short: "Write a commented bench to start from",
		Long: `New makes the folder DIR with a bench.toml that holds every key the model takes,
commented, and a readings.csv with its header. With --demo it copies the invented
demonstration bench of that model with its readings. Existing files are left
alone: the folder must be new or empty.

Models: ` + strings.Join(model.Names(), ", "),
		Example: `  guardring new my-bench --model attracted-disc
  guardring new demo --model attracted-disc --demo`,
		Args: names("one new folder", 1, 1),
		RunE: func(cmd *cobra.Command, args []string) error {
			kind, err := model.Lookup(name)
			if err != nil {
				return fmt.Errorf("--model: %w", err)
			}
			var files []outFile
			if demo {
				files, err = demoFiles(args[0], kind.Name)
				if err != nil {
					return err
				}
			} else {
				toml, csv := bench.Starter(kind)
				files = []outFile{{filepath.Join(args[0], "bench.toml"), toml}, {filepath.Join(args[0], "readings.csv"), csv}}
			}
			if err := mustBeEmpty(args[0]); err != nil {
				return err
			}
			if err := writeFiles(files); err != nil {
				return err
			}
			for _, f := range files {
				fmt.Fprintln(cmd.OutOrStdout(), cell.Visible(f.path))
			}
			return nil
		},
	}
	cmd.Flags().StringVar(&name, "model", "", "kind of bench, `NAME`: "+strings.Join(model.Names(), ", "))
	cmd.Flags().BoolVar(&demo, "demo", false, "copy the invented demonstration bench with its readings")
	if err := cmd.MarkFlagRequired("model"); err != nil {
		panic(err) // the flag is defined two lines above
	}
	return cmd
}

// demoFiles are the files of the embedded dataset of a model.
func demoFiles(dir, name string) ([]outFile, error) {
	var files []outFile
	err := fs.WalkDir(datasets.Files, name, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := datasets.Files.ReadFile(path)
		if err != nil {
			return err
		}
		files = append(files, outFile{filepath.Join(dir, filepath.FromSlash(strings.TrimPrefix(path, name+"/"))), data})
		return nil
	})
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("--demo: there is no demonstration bench for model %s", name)
	}
	return files, err
}

// mustBeEmpty refuses a folder that holds anything.
func mustBeEmpty(dir string) error {
	if dir == "" {
		return errors.New("the name of the new folder is empty; name one")
	}
	entries, err := os.ReadDir(dir)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return nil
	case err != nil:
		return err
	case len(entries) > 0:
		return fmt.Errorf("%s is not empty; name a new folder", dir)
	}
	return nil
}
