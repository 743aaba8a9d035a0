package figure

import (
	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// Of takes what the figures need from a reduction.
func Of(r *reduce.Result) *Data {
	if r == nil {
		return nil
	}
	d := &Data{Record: &r.Record, Rows: &r.Rows, Trials: r.Trials, Units: unitsOf(r.Record.Model)}
	if r.Bench == nil {
		return d
	}
	d.Units = benchUnits(r.Bench, d.Units)
	if r.Bench.Rows.Labels["setting"] != nil && len(r.Rows.Record) == r.Rows.N {
		for _, i := range r.Rows.Record {
			d.Groups = append(d.Groups, r.Bench.Rows.Label("setting", i))
		}
	}
	return d
}

// benchUnits prefers the units of the bench's own columns.
func benchUnits(b *bench.Bench, units map[string]si.Unit) map[string]si.Unit {
	for _, c := range b.Channels {
		units[c.Name] = c.Unit
	}
	return units
}

// Fit is Data.Fit of a reduction.
func Fit(r *reduce.Result) (*Figure, error) { return Of(r).Fit() }

// Residuals is Data.Residuals of a reduction.
func Residuals(r *reduce.Result) (*Figure, error) { return Of(r).Residuals() }

// Order is Data.Order of a reduction.
func Order(r *reduce.Result) (*Figure, error) { return Of(r).Order() }

// Quantiles is Data.Quantiles of a reduction.
func Quantiles(r *reduce.Result) (*Figure, error) { return Of(r).Quantiles() }

// Shares is Data.Shares of a reduction; "" is its first measurand.
func Shares(r *reduce.Result, measurand string) (*Figure, error) { return Of(r).Shares(measurand) }

// Histogram is Data.Histogram of a reduction; "" is its first measurand.
func Histogram(r *reduce.Result, measurand string) (*Figure, error) {
	return Of(r).Histogram(measurand)
}

// All draws every figure that a reduction has: those that need trials or more
// than one input are left out where there are none.
func (d *Data) All() ([]*Figure, error) {
	draw := []func() (*Figure, error){d.Fit, d.Residuals, d.Order, d.Quantiles}
	for i := range d.Record.Measurands {
		m := &d.Record.Measurands[i]
		if len(m.Budget) > 0 {
			draw = append(draw, func() (*Figure, error) { return named(d.Shares(m.Name))("shares-" + m.Name) })
		}
		if m.MonteCarlo != nil && i < len(d.Trials) {
			draw = append(draw, func() (*Figure, error) { return named(d.Histogram(m.Name))("histogram-" + m.Name) })
		}
	}
	out, err := d.Curves()
	if err != nil {
		return nil, err
	}
	for _, f := range draw {
		g, err := f()
		if err != nil {
			return nil, err
		}
		out = append(out, g)
	}
	return out, nil
}

// named gives a figure another base of its file name.
func named(f *Figure, err error) func(string) (*Figure, error) {
	return func(name string) (*Figure, error) {
		if err != nil {
			return nil, err
		}
		f.Name = fileName(name)
		return f, nil
	}
}

// All is Data.All of a reduction.
func All(r *reduce.Result) ([]*Figure, error) { return Of(r).All() }
