package main

import (
	"context"
	"fmt"
	"math"
	"sort"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/assess"
	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/report"
	"example.org/guardring/pkg/si"
)

// historyOptions are the flags of history.
type historyOptions struct {
	assessOptions
	measurand, series string
	predict           []string
	scale             bool
}

// historyDocument is the document of history --json.
type historyDocument struct {
	Format      int                  `json:"format"`
	Guardring   string               `json:"guardring"`
	Run         reduce.RunRecord     `json:"run"`
	Inputs      []reduce.Input       `json:"inputs"`
	Measurand   string               `json:"measurand"`
	Shared      reduce.Number        `json:"shared"` // standard uncertainty common to all calibrations
	Line        *assess.Line         `json:"line"`
	Predictions []*assess.Prediction `json:"predictions"`
	Warnings    []string             `json:"warnings"`
}

func historyCommand() *cobra.Command {
	var o historyOptions
	cmd := &cobra.Command{
		Use:   "history DIR DIR DIR...",
		Short: "Follow an instrument from calibration to calibration",
		Long: `History reduces the benches of one instrument's calibrations, takes the value as
found of each at its date (work.performed), fits a line in time that knows of the
adjustments between, tests whether it drifts, draws control limits, and predicts
the value at the dates asked for. Predictions serve the laboratory's own planning.`,
		Example: `  guardring history 2023 2024 2025 2026 --series "20 kV/m" --predict 2027-03-01`,
		Args:    names("at least three bench folders", 3, -1),
		RunE:    func(cmd *cobra.Command, dirs []string) error { return o.run(cmd, dirs) },
	}
	o.flags(cmd)
	f := cmd.Flags()
	f.StringVar(&o.measurand, "measurand", "", "follow the measurand `NAME`; the first when not given")
	f.StringVar(&o.series, "series", "", "of the series `NAME`, such as a range; the first when not given")
	f.StringArrayVar(&o.predict, "predict", nil, "predict the value at `DATE` (2027-03-01); repeatable")
	f.BoolVar(&o.scale, "scale", false, "multiply uncertainties by the Birge ratio where it is above one")
	return cmd
}

func (o *historyOptions) run(cmd *cobra.Command, dirs []string) error {
	var dates []time.Time
	for _, p := range o.predict {
		d, err := time.Parse(time.DateOnly, p)
		if err != nil {
			return fmt.Errorf("--predict %s: a date such as 2027-03-01 is due", p)
		}
		dates = append(dates, d)
	}
	var all []*found
	for _, dir := range dirs {
		c, err := o.calibration(cmd.Context(), dir)
		if err != nil {
			return err
		}
		all = append(all, c)
	}
	sort.SliceStable(all, func(i, j int) bool { return all[i].Date.Before(all[j].Date) })
	for _, c := range all[1:] {
		if a, b := all[0].item, c.item; a != b {
			return fmt.Errorf("%s calibrates serial number %q, %s %q: a history follows one instrument", all[0].dir, a, c.dir, b)
		}
	}
	h := assess.History{Unit: all[0].record.Measurands[0].Unit}
	doc := historyDocument{Format: 1, Guardring: reduce.Version, Run: reduce.RunRecord{Command: "history", Options: map[string]string{}},
		Measurand: all[0].name, Predictions: []*assess.Prediction{}, Warnings: []string{}}
	var records []*reduce.Record
	for _, c := range all {
		if c.record.Measurands[0].Unit != h.Unit {
			return fmt.Errorf("%s states the %s in %q, %s in %q", all[0].dir, c.name, h.Unit, c.dir, c.record.Measurands[0].Unit)
		}
		h.Calibrations = append(h.Calibrations, c.Calibration)
		records = append(records, c.record)
		doc.Inputs = append(doc.Inputs, c.inputs...)
	}
	shared, err := assess.SharedCovariance(records, nil)
	if err != nil {
		return err
	}
	least := math.Inf(1)
	for i := range records {
		for j := range i {
			least = math.Min(least, shared.Covariance.At(i, j))
		}
	}
	h.Shared = math.Sqrt(math.Max(0, least))
	doc.Shared = reduce.Number(h.Shared)
	line, err := assess.Drift(h, assess.DriftSettings{Scale: o.scale})
	if err != nil {
		return err
	}
	doc.Line = line
	line.Warnings = append(line.Warnings, shared.Warnings...)
	for _, d := range dates {
		p, err := line.Predict(d, 0)
		if err != nil {
			return err
		}
		doc.Predictions = append(doc.Predictions, p)
	}
	for _, w := range line.Warnings {
		doc.Warnings = append(doc.Warnings, w.Error())
	}
	what := figure.Words(all[0].name)
	fig, err := figure.Drift(line, what, doc.Predictions)
	if err != nil {
		return err
	}
	return o.write(cmd.OutOrStdout(), report.Drift(line, what, doc.Predictions), fig, &doc)
}

// found is one calibration of a history with its record, which holds the one
// measurand that is followed.
type found struct {
	assess.Calibration
	dir, name, item string
	record          *reduce.Record
	inputs          []reduce.Input
}

// calibration reduces one bench and takes the value as found.
func (o *historyOptions) calibration(ctx context.Context, dir string) (*found, error) {
	b, err := bench.Open(dir)
	if err != nil {
		return nil, err
	}
	date, err := time.Parse(time.DateOnly, b.Work.Performed)
	if err != nil {
		return nil, fmt.Errorf("%s/bench.toml: work.performed: a history needs the date of the work", dir)
	}
	r, err := reduce.Run(ctx, b, reduce.Settings{LawOnly: true, Command: "history"})
	if err != nil {
		return nil, err
	}
	if r.Record.Fit.Status != "converged" || len(r.Record.Measurands) == 0 {
		return nil, fmt.Errorf("%s: the fit is %s: %s", dir, r.Record.Fit.Status, r.Record.Fit.Reason)
	}
	base, rest := o.measurand, o.series
	first := r.Record.Measurands[0].Name
	if base == "" {
		base, _, _ = strings.Cut(first, " (")
	}
	if rest == "" && len(r.Record.Series) > 0 {
		rest = strings.TrimPrefix(strings.TrimPrefix(r.Record.Series[0].Name, reduce.AsFound), ", ")
	}
	before := reduce.AsFound
	if rest != "" {
		before += ", " + rest
	}
	var m *reduce.Measurand
	for _, name := range []string{reduce.SeriesName(base, before), reduce.SeriesName(base, rest), base} {
		if m == nil {
			m = r.Record.Measurand(name)
		}
	}
	if m == nil {
		var known []string
		for i := range r.Record.Measurands {
			known = append(known, r.Record.Measurands[i].Name)
		}
		return nil, fmt.Errorf("%s states no %s; it states %s", dir, reduce.SeriesName(base, rest), strings.Join(known, "; "))
	}
	if _, err := si.ParseUnit(m.Unit); err != nil {
		return nil, fmt.Errorf("%s: %w", dir, err)
	}
	c := &found{dir: dir, name: reduce.SeriesName(base, rest), item: b.Item.Serial}
	c.Name, c.Date, c.Value, c.U = b.Work.Certificate, date, float64(m.Value), float64(m.U)
	if c.Name == "" {
		c.Name = dir
	}
	if s := r.Record.Measurand(reduce.SeriesName("shift of "+base, rest)); s != nil {
		c.Adjustment, c.UAdjustment = float64(s.Value), float64(s.U)
	}
	rec := r.Record
	rec.Title = c.Name
	rec.Measurands = []reduce.Measurand{*m}
	rec.Measurands[0].Name = c.name
	c.record, c.inputs = &rec, r.Record.Inputs
	for i := range c.inputs {
		c.inputs[i].File = dir + "/" + c.inputs[i].File
	}
	return c, nil
}
