package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"reflect"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/assess"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
)

// assessOptions are the flags of the output of compare and history.
type assessOptions struct {
	html, figures string
	json          bool
}

func (o *assessOptions) flags(cmd *cobra.Command) {
	f := cmd.Flags()
	f.StringVar(&o.html, "html", "", "write the report as one HTML `FILE`")
	f.StringVar(&o.figures, "figures", "", "write the figure as SVG into folder `DIR`")
	f.BoolVar(&o.json, "json", false, "print the assessment as JSON and nothing else")
}

// write makes every form before it writes any.
func (o *assessOptions) write(stdout io.Writer, sheet *report.Sheet, fig *figure.Figure, doc any) error {
	var files []outFile
	text := sheet.String()
	if o.figures != "" {
		var err error
		if files, err = drawn(files, o.figures, []*figure.Figure{fig}); err != nil {
			return err
		}
	}
	if o.html != "" {
		var page bytes.Buffer
		if err := sheet.Head("Figure").Figure(fig).Page(&page); err != nil {
			return err
		}
		files = append(files, outFile{o.html, page.Bytes()})
	}
	if !o.json {
		doc = nil
	}
	return deliver(stdout, io.Discard, files, doc, func(w io.Writer) error {
		_, err := io.WriteString(w, text)
		return err
	}, nil)
}

// comparison is the document of compare --json.
type comparison struct {
	Format     int               `json:"format"`
	Guardring  string            `json:"guardring"`
	Run        reduce.RunRecord  `json:"run"`
	Inputs     []reduce.Input    `json:"inputs"`
	Measurand  string            `json:"measurand"`
	Agreement  *assess.Agreement `json:"agreement"`
	Covariance [][]reduce.Number `json:"covariance"` // of the results, unit squared
	Warnings   []string          `json:"warnings"`
}

func compareCommand() *cobra.Command {
	var o assessOptions
	var s assess.AgreementSettings
	cmd := &cobra.Command{
		Use:   "compare RESULT.json RESULT.json...",
		Short: "Say whether the results of several laboratories agree",
		Long: `Compare reads records that reduce --json wrote, finds the inputs that they have in
common (the same input with the same source, such as one divider's certificate),
and states the weighted mean with its consistency, the degrees of equivalence and
E_n of each result and each pair, all with the covariance of what is common.

Exit code 1 says that the results do not agree.`,
		Example: "  guardring compare one.json two.json three.json --html comparison.html",
		Args:    names("at least two records that reduce --json wrote", 2, -1),
		RunE: func(cmd *cobra.Command, paths []string) error {
			var records []*reduce.Record
			doc := comparison{Format: 1, Guardring: reduce.Version, Run: reduce.RunRecord{Command: "compare", Options: map[string]string{}}, Warnings: []string{}}
			for _, p := range paths {
				rec, in, err := readRecord(p)
				if err != nil {
					return err
				}
				for i := range doc.Inputs {
					if doc.Inputs[i].SHA256 == in.SHA256 {
						return fmt.Errorf("%s and %s are the same record; a laboratory is compared with others", doc.Inputs[i].File, p)
					}
				}
				records, doc.Inputs = append(records, rec), append(doc.Inputs, in)
			}
			a, err := assess.Compare(cmd.Context(), records, s)
			if err != nil {
				return err
			}
			doc.Measurand = s.Measurand
			if doc.Measurand == "" {
				doc.Measurand = records[0].Measurands[0].Name
			}
			doc.Agreement = a
			n := len(records)
			for i := range n {
				row := make([]reduce.Number, n)
				for j := range n {
					row[j] = reduce.Number(a.Shared.Covariance.At(i, j))
				}
				doc.Covariance = append(doc.Covariance, row)
			}
			for _, w := range a.Warnings {
				doc.Warnings = append(doc.Warnings, w.Error())
			}
			fig, err := figure.Agreement(a, doc.Measurand)
			if err != nil {
				return err
			}
			if err := o.write(cmd.OutOrStdout(), report.Agreement(a, doc.Measurand), fig, &doc); err != nil {
				return err
			}
			if !a.Agrees {
				return differs{errors.New("the results do not agree")}
			}
			return nil
		},
	}
	o.flags(cmd)
	f := cmd.Flags()
	f.StringVar(&s.Measurand, "measurand", "", "compare the measurand `NAME`; the first when not given")
	f.StringArrayVar(&s.Shared, "shared", nil, "take the input or source `NAME` as common; repeatable; found in the budgets when not given")
	f.BoolVar(&s.Independent, "independent", false, "take nothing as common")
	return cmd
}

// notRecord says where a file stops being a record, and what is due there.
func notRecord(data []byte, err error) error {
	if bytes.HasPrefix(data, []byte("\xff\xfe")) || bytes.HasPrefix(data, []byte("\xfe\xff")) {
		return errors.New("this is UTF-16 text, as some shells redirect it; save the file as UTF-8")
	}
	offset, key, what := int64(-1), "", err.Error()
	var syntax *json.SyntaxError
	var kind *json.UnmarshalTypeError
	switch {
	case errors.As(err, &syntax):
		offset = syntax.Offset
	case errors.As(err, &kind):
		offset = kind.Offset
		if kind.Field != "" {
			key = kind.Field + ": "
		}
		due := "a whole number"
		switch kind.Type.Kind() {
		case reflect.String:
			due = "a string"
		case reflect.Struct, reflect.Map:
			due = "an object"
		case reflect.Slice, reflect.Array:
			due = "an array"
		case reflect.Bool:
			due = "true or false"
		case reflect.Float64:
			due = "a number"
		}
		what = kind.Value + " where " + due + " is due"
	}
	if offset < 0 {
		return fmt.Errorf("no record of reduce --json: %s", what)
	}
	head := data[:min(int(offset), len(data))]
	line := 1 + bytes.Count(head, []byte{'\n'})
	column := len(head) - bytes.LastIndexByte(head, '\n') - 1
	return fmt.Errorf("line %d, column %d: no record of reduce --json: %s%s", line, max(column, 1), key, what)
}

// largestRecord bounds a record that is read, in bytes.
const largestRecord = 1 << 30

// readDocument reads a JSON file or pipe, but no device, which may never end.
func readDocument(path string) ([]byte, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return nil, err
	}
	if info.Mode()&fs.ModeDevice != 0 {
		return nil, fmt.Errorf("%s: this is a device; name a file", path)
	}
	data, err := io.ReadAll(io.LimitReader(f, largestRecord+1))
	if err != nil {
		return nil, err
	}
	if len(data) > largestRecord {
		return nil, fmt.Errorf("%s: larger than 1 GiB", path)
	}
	return data, nil
}

// readRecord reads a record with its hash.
func readRecord(path string) (*reduce.Record, reduce.Input, error) {
	data, err := readDocument(path)
	if err != nil {
		return nil, reduce.Input{}, err
	}
	rec := new(reduce.Record)
	if err := json.Unmarshal(bytes.TrimPrefix(data, []byte("\xef\xbb\xbf")), rec); err != nil {
		return nil, reduce.Input{}, fmt.Errorf("%s: %w", path, notRecord(data, err))
	}
	if rec.Format != 1 {
		return nil, reduce.Input{}, fmt.Errorf("%s: no record of reduce --json: format %d where 1 is due", path, rec.Format)
	}
	if err := rec.Check(); err != nil {
		return nil, reduce.Input{}, fmt.Errorf("%s: %w", path, err)
	}
	if len(rec.Measurands) == 0 {
		return nil, reduce.Input{}, fmt.Errorf("%s: the record states no measurand (its fit is %s)", path, rec.Fit.Status)
	}
	sum := sha256.Sum256(data)
	return rec, reduce.Input{File: filepath.ToSlash(path), SHA256: hex.EncodeToString(sum[:])}, nil
}
