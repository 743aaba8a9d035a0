package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/certificate"
	"example.org/guardring/pkg/reduce"
)

// certificateOptions are the flags of certificate.
type certificateOptions struct {
	out      []string
	replace  bool
	settings reduce.Settings
}

func certificateCommand() *cobra.Command {
	var o certificateOptions
	cmd := &cobra.Command{
		Use:   "certificate DIR -o FILE...",
		Short: "Write the calibration certificate of a bench",
		Long: `Certificate reduces DIR and writes its calibration certificate; -o may be given
several times, and the ending chooses the form: .html (prints on A4), .pdf, or
.xml (the open Digital Calibration Certificate schema 3.3.0). All forms come from
one record and agree digit for digit.

A certificate that lacks an item is refused with the list of what is missing and
the keys of bench.toml that fill it. An existing file is refused unless --replace
is given: then bench.toml must state an amendment (work.replaces, work.reason and
a new work.certificate); the old file stays beside the new one under the name
FILE.superseded-HASH and its SHA-256 stands in the new certificate.`,
		Example: `  guardring certificate datasets/field-meter -o certificate.html -o certificate.pdf -o certificate.xml`,
		Args:    names("one bench folder", 1, 1),
		RunE:    func(cmd *cobra.Command, args []string) error { return o.run(cmd, args[0]) },
	}
	f := cmd.Flags()
	f.StringArrayVarP(&o.out, "output", "o", nil, "write the certificate to `FILE` (.html, .pdf or .xml); repeatable")
	f.BoolVar(&o.replace, "replace", false, "replace existing files by an amendment and keep the old ones")
	f.Uint64Var(&o.settings.Seed, "seed", 0, "seed `N` of the Monte Carlo check")
	countFlag(cmd, &o.settings.Trials, "trials", reduce.DefaultTrials, "number `N` of Monte Carlo trials")
	return cmd
}

func (o *certificateOptions) run(cmd *cobra.Command, dir string) error {
	if len(o.out) == 0 {
		return fmt.Errorf("say where the certificate goes, such as -o certificate.pdf")
	}
	if o.settings.Trials < 1 {
		return fmt.Errorf("--trials %d: at least 1 is needed", o.settings.Trials)
	}
	seen := map[string]bool{}
	var s certificate.Settings
	for _, path := range o.out {
		if seen[filepath.Clean(path)] {
			return fmt.Errorf("-o %s is given twice", path)
		}
		seen[filepath.Clean(path)] = true
		if _, err := form(path); err != nil {
			return err
		}
		old, err := os.ReadFile(path)
		switch {
		case errors.Is(err, fs.ErrNotExist):
		case err != nil:
			return err
		case !o.replace:
			return fmt.Errorf("%s exists; a certificate is never overwritten: choose another name, or use --replace for an amendment", path)
		default:
			s.Replaced = append(s.Replaced, certificate.Replaced{File: path, Data: old})
		}
	}
	b, err := bench.Open(dir)
	if err != nil {
		return err
	}
	o.settings.Command = "certificate"
	r, err := reduce.Run(cmd.Context(), b, o.settings)
	if err != nil {
		return err
	}
	c, err := certificate.New(r, s)
	if err != nil {
		return err
	}
	// All forms are made before any is written.
	var files []outFile
	for _, old := range s.Replaced {
		sum := sha256.Sum256(old.Data)
		kept := superseded(old.File, hex.EncodeToString(sum[:]))
		if now, err := os.ReadFile(kept); err == nil && !bytes.Equal(now, old.Data) {
			return fmt.Errorf("%s exists and is another file; move it away", kept)
		}
		files = append(files, outFile{kept, old.Data})
	}
	for _, path := range o.out {
		write, err := form(path)
		if err != nil {
			return err
		}
		var out bytes.Buffer
		if err := write(c, &out); err != nil {
			return err
		}
		files = append(files, outFile{path, out.Bytes()})
	}
	if err := writeFiles(files); err != nil {
		return err
	}
	_, err = io.WriteString(cmd.OutOrStdout(), cell.Visible(certified(c, o.out, s.Replaced)))
	return err
}

// certified tells what was written and what it states.
func certified(c *certificate.Certificate, out []string, replaced []certificate.Replaced) string {
	var b strings.Builder
	fmt.Fprintf(&b, "certificate %s, %d pages: %s\n", c.Identification, c.Pages(), strings.Join(out, ", "))
	for i := range c.Results {
		r := &c.Results[i]
		name := r.Value.Name
		if r.Name != "" {
			name += ", " + r.Name
		}
		fmt.Fprintf(&b, "  %s: %s", name, r.Value.Text())
		if r.Conformity != nil {
			fmt.Fprintf(&b, ": %s", r.Conformity.Verdict)
		}
		b.WriteByte('\n')
	}
	for _, old := range replaced {
		sum := sha256.Sum256(old.Data)
		fmt.Fprintf(&b, "  kept: %s\n", superseded(old.File, hex.EncodeToString(sum[:])))
	}
	return b.String()
}

// superseded is the name under which a replaced certificate stays.
func superseded(path, hash string) string {
	ext := filepath.Ext(path)
	return strings.TrimSuffix(path, ext) + ".superseded-" + hash[:8] + ext
}

// form chooses the form of a certificate by the ending of its file.
func form(path string) (func(*certificate.Certificate, io.Writer) error, error) {
	switch strings.ToLower(filepath.Ext(path)) {
	case ".html":
		return (*certificate.Certificate).HTML, nil
	case ".pdf":
		return (*certificate.Certificate).PDF, nil
	case ".xml":
		return (*certificate.Certificate).XML, nil
	}
	return nil, fmt.Errorf("-o %s: the ending must be .html, .pdf or .xml", path)
}
