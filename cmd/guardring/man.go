package main

import (
	"bytes"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"github.com/spf13/cobra/doc"
)

func manCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "man DIR",
		Short: "Write the manual pages, one a command",
		Long: `Man writes the manual pages into DIR: guardring.1 and one page a command. They are
dated by SOURCE_DATE_EPOCH, else by the revision that the program was built from.`,
		Example: `  guardring man /usr/local/share/man/man1`,
		Args:    names("one folder for the pages", 1, 1),
		RunE: func(cmd *cobra.Command, args []string) error {
			pages, err := manual(cmd.Root())
			if err != nil {
				return err
			}
			for i := range pages {
				pages[i].path = filepath.Join(args[0], pages[i].path)
			}
			return writeFiles(pages)
		},
	}
}

// manual makes the page of a command and those below it.
func manual(cmd *cobra.Command) ([]outFile, error) {
	date, err := manualDate()
	if err != nil {
		return nil, err
	}
	cmd.DisableAutoGenTag = true
	var pages []outFile
	var page func(c *cobra.Command) error
	page = func(c *cobra.Command) error {
		name := strings.ReplaceAll(c.CommandPath(), " ", "-")
		header := &doc.GenManHeader{Title: strings.ToUpper(name), Section: "1", Date: &date, Source: "guardring " + readBuild().version, Manual: "guardring"}
		var out bytes.Buffer
		if err := doc.GenMan(c, header, &out); err != nil {
			return fmt.Errorf("manual page of %s: %w", c.CommandPath(), err)
		}
		pages = append(pages, outFile{name + ".1", out.Bytes()})
		for _, sub := range c.Commands() {
			if sub.IsAvailableCommand() {
				if err := page(sub); err != nil {
					return err
				}
			}
		}
		return nil
	}
	return pages, page(cmd)
}

// manualDate is what the pages are dated by: never the time at which they are made.
func manualDate() (time.Time, error) {
	if s := os.Getenv("SOURCE_DATE_EPOCH"); s != "" {
		n, err := strconv.ParseInt(s, 10, 64)
		if err != nil {
			return time.Time{}, fmt.Errorf("SOURCE_DATE_EPOCH: %q is no number of seconds", s)
		}
		return time.Unix(n, 0).UTC(), nil
	}
	if t, err := time.Parse(time.RFC3339, readBuild().time); err == nil {
		return t.UTC(), nil
	}
	return time.Unix(0, 0).UTC(), nil
}
