package bench

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/si"
)

// Instrument is equipment the bench names, for traceability and deviations, and
// for what its values may have moved by since its calibration. Dates are ISO 8601
// ("2026-03-04").
type Instrument struct {
	Name                            string // key in [instruments.NAME]
	Description, Maker, Model       string
	Serial, Firmware                string
	Certificate, IssuedBy           string
	Calibrated, Due                 string
	CalibrationTemperature          Quantity // K; where per_kelvin counts from
	DriftPerYear, PerKelvin         string   // limits as written, with unit: "0.002 %", "12 ppm/K"
	DriftPerYearSI, PerKelvinSI     float64
	DriftPerYearUnit, PerKelvinUnit si.Unit
	Line                            int

	// Named lists the keys of the bench that name the instrument: channels.gap,
	// quantities.disc_radius, environment.temperature, spacing.
	Named []string
	// Allowances are what drift_per_year and per_kelvin leave open of every value
	// that the instrument gives, in this order; those that are not stated, or that
	// nothing in the result depends on, are left out.
	Allowances []Allowance
}

// Allowance is one error of an instrument that all values it gives share: the
// readings of channels and the quantities of the bench that name it. A relative one
// multiplies them by 1 + error, like a gain; another one adds to them.
type Allowance struct {
	Name     string           // as budgets call it: instruments.NAME.drift, instruments.NAME.temperature
	Relative bool             // a part of the value, else in SI
	Dist     gum.Distribution // rectangular about zero (JCGM 100:2008 4.3.7), exact when nothing is left open
	Unit     si.Unit          // 1, or the unit of the first value that the instrument gives
	Source   string           // names the certificate or serial number; "" when neither is stated
}

// year is the Julian year in days.
const year = 365.25

// From reports whether the readings of the channel come from the instrument: the
// channel, its gain or its offset names it.
func (c *Channel) From(instrument string) bool {
	return instrument != "" && (c.Instrument == instrument || c.GainInstrument == instrument || c.OffsetInstrument == instrument)
}

// From reports whether the stated value comes from the instrument. A quantity
// without a value that enters (sought, or adjusted without prior knowledge) comes
// from none.
func (s *Scalar) From(instrument string) bool {
	return instrument != "" && s.Instrument == instrument && s.Given && (!s.Adjust || s.HasPrior)
}

// instrumentTables reads [instruments.*] of a bench or a budget.
func (r *reader) instrumentTables() []Instrument {
	t := r.table(r.root, "instruments")
	if t == nil {
		return nil
	}
	var out []Instrument
	for _, name := range t.keys {
		n := r.table(t, name)
		if n == nil {
			continue
		}
		i := Instrument{Name: name, Line: n.line,
			Description: r.text(n, "description"), Maker: r.text(n, "maker"), Model: r.text(n, "model"),
			Serial: r.text(n, "serial"), Firmware: r.text(n, "firmware"), Certificate: r.text(n, "certificate"),
			IssuedBy: r.text(n, "issued_by"), Calibrated: r.date(n, "calibrated"), Due: r.date(n, "due")}
		i.DriftPerYear, i.DriftPerYearSI, i.DriftPerYearUnit = r.limit(n, "drift_per_year")
		i.PerKelvin, i.PerKelvinSI, i.PerKelvinUnit = r.limit(n, "per_kelvin")
		if f := n.field("calibration_temperature"); f != nil {
			q, ok := r.quantity(f, wanted{like: si.MustUnit("degC")})
			switch {
			case ok && (!q.hasValue || q.adjust || q.hasStart):
				r.fail(f, "a value is due, and it is not adjusted")
			case ok:
				i.CalibrationTemperature = Quantity{Given: true, Dist: q.dist, Unit: q.unit, Instrument: q.instrument, Source: q.source}
			}
		}
		if i.Calibrated != "" && i.Due != "" && i.Due < i.Calibrated {
			r.fail(n.field("due"), "%s is before the calibration on %s", i.Due, i.Calibrated)
		}
		out = append(out, i)
	}
	return out
}

// limit reads the most that something changes by, either way.
func (r *reader) limit(n *node, key string) (text string, v float64, u si.Unit) {
	f := n.field(key)
	if f == nil {
		return "", 0, si.Unit{}
	}
	if before, per, cut := strings.Cut(f.text, "/"); cut && key == "drift_per_year" && slices.Contains([]string{"a", "y", "yr", "year"}, strings.TrimSpace(per)) {
		r.fail(f, "%s: the key says that it is the drift of a year; write %s", shown(f), quoted(strings.TrimSpace(before)))
		return "", 0, si.Unit{}
	}
	v, u, ok := r.number(f, wanted{any: true, interval: true})
	if ok && !(v > 0) {
		r.fail(f, "%s where a limit is due, above zero, within which it goes either way; a change that is known belongs into the value or the gain", shown(f))
	}
	return f.text, v, u
}

func (l *loader) instruments() { l.b.Instruments = l.instrumentTables() }

// cite notes which keys name which instrument.
func (l *loader) cite() {
	for i := range l.b.Instruments {
		in := &l.b.Instruments[i]
		for _, n := range l.cited {
			if key := strings.TrimSuffix(n.path, ".instrument"); n.text == in.Name && !slices.Contains(in.Named, key) {
				in.Named = append(in.Named, key)
			}
		}
	}
}

// value is something that an instrument gives and the result depends on.
type value struct {
	key     string
	unit    si.Unit
	squared bool
}

// values lists what an instrument gives.
func (l *loader) values(name string) []value {
	var out []value
	for i := range l.b.Channels {
		if c := &l.b.Channels[i]; c.From(name) {
			out = append(out, value{"channels." + c.Name, c.Unit, false})
		}
	}
	for i := range l.b.Scalars {
		if s, k := &l.b.Scalars[i], &l.kind.Scalars[i]; s.From(name) && l.inUse(k) {
			out = append(out, value{s.Key, s.Unit, k.Squared})
		}
	}
	return out
}

// allowances finds what each instrument may have moved by. The readings and
// conditions have been read.
func (l *loader) allowances() {
	l.cite()
	for i := range l.b.Instruments {
		in := &l.b.Instruments[i]
		n := l.root.field("instruments").field(in.Name)
		values := l.values(in.Name)
		for _, a := range []struct {
			key, name, what string
			unit            si.Unit
			width           func(in *Instrument, n, f *node) (half float64, source string, ok bool)
		}{
			{"drift_per_year", "drift", "drift", in.DriftPerYearUnit, l.drift},
			{"per_kelvin", "temperature", "temperature coefficient", in.PerKelvinUnit, l.warmth},
		} {
			f := n.field(a.key)
			if f == nil {
				continue
			}
			if len(values) == 0 {
				l.warnf(f, "nothing that the result depends on comes from this instrument, so that its %s is in no uncertainty; name it (instrument = %q) with the channels and quantities that it gives", a.what, in.Name)
				continue
			}
			relative, unit, ok := l.acts(f, a.unit, a.key == "per_kelvin", values)
			half, source, known := a.width(in, n, f)
			if !ok || !known {
				continue
			}
			if relative && half >= 1 {
				l.fail(f, "%s comes to %.3g times the value, all of it and more; a part of it is due, like \"0.01 %%\"", shown(f), half)
				continue
			}
			d := gum.Exactly(0)
			if half > 0 {
				d = gum.Rectangular(0, half)
			}
			if err := d.Check(); err != nil {
				l.fail(f, "%v", err)
				continue
			}
			in.Allowances = append(in.Allowances, Allowance{Name: "instruments." + in.Name + "." + a.name, Relative: relative, Dist: d, Unit: unit, Source: source})
		}
	}
}

// acts tells whether a limit in unit u is a part of the values or an offset to
// them, and refuses one that is neither for all of them.
func (l *loader) acts(f *node, u si.Unit, perKelvin bool, values []value) (relative bool, unit si.Unit, ok bool) {
	dim, angle := u.Dim, isAngle(u)
	if perKelvin { // "12 ppm/K", or "12 ppm" since the key says the rest
		if d := dim.Mul(si.Temperature); d.IsOne() || slices.ContainsFunc(values, func(v value) bool { return v.unit.Dim == d }) {
			dim = d
		}
	}
	relative = dim.IsOne() && !angle
	unit = si.One
	if !relative {
		unit = values[0].unit
	}
	ok = true
	instead := `state it as a part of the value (for example "0.01 %"), or `
	if slices.ContainsFunc(values, func(v value) bool { return v.unit.Dim == si.Temperature || isPart(v.unit) }) {
		instead = ""
	}
	for _, v := range values {
		problem := ""
		switch {
		case relative && v.unit.Dim == si.Temperature:
			problem = fmt.Sprintf("is a part of the value, and the instrument gives %s, a temperature, of which no part changes; state it in K", v.key)
		case relative && isPart(v.unit):
			problem = fmt.Sprintf("may be a part of %s or an amount in its unit, %s; leave it out and widen u of %s", v.key, v.unit.Symbol, v.key)
		case relative:
		case v.unit.Dim != dim || isAngle(v.unit) != angle:
			problem = fmt.Sprintf("is %s, and the instrument gives %s, %s; %swrite one table [instruments.NAME] for each kind of value",
				named(dim, angle), v.key, named(v.unit.Dim, isAngle(v.unit)), instead)
		case v.squared:
			problem = fmt.Sprintf("is added to the value, and of %s only the square counts; state it as a part of the value (for example \"0.01 %%\"), or leave the instrument out there", v.key)
		}
		if problem != "" {
			l.fail(f, "%s %s", shown(f), problem)
			ok = false
		}
	}
	return relative, unit, ok
}

// isAngle reports whether u is a unit of plane angle, whose dimension is one.
func isAngle(u si.Unit) bool { return strings.Contains(u.Coherent().Symbol, "rad") }

// isPart reports whether u is a unit of parts: %, ppm.
func isPart(u si.Unit) bool { return u.Dim.IsOne() && u.Factor != 1 && !isAngle(u) }

// named is the word for a dimension.
func named(d si.Dimension, angle bool) string {
	if angle {
		return "an angle"
	}
	return dimensionName(si.Unit{Dim: d})
}

// drift is the half-width of what an instrument may have drifted by between its
// calibration and the work: the limit of a year times the years to that day of the
// work which lies farthest from the calibration.
func (l *loader) drift(in *Instrument, n, f *node) (half float64, source string, ok bool) {
	first, last, known := l.days()
	switch {
	case in.Calibrated == "" && !known:
		l.fail(f, "how long it has drifted is not known: state calibrated, the date of its calibration, and [work] performed, the date of the work")
		return 0, "", false
	case in.Calibrated == "":
		l.fail(f, "how long it has drifted is not known: state the date of its calibration, like calibrated = 2026-01-15")
		return 0, "", false
	case !known:
		l.fail(f, "how long it has drifted is not known: state the date of the work, like [work] performed = 2026-03-04, or name a column with time stamps in [rows] time")
		return 0, "", false
	}
	since, err := time.Parse(time.DateOnly, in.Calibrated)
	if err != nil {
		l.fail(n.field("calibrated"), "%v", err)
		return 0, "", false
	}
	if since.After(first) {
		l.warnf(n.field("calibrated"), "the work began on %s, before this calibration; the drift is reckoned back from it", first.Format(time.DateOnly))
	}
	apart := func(day time.Time) float64 { return math.Abs(float64(day.Unix()-since.Unix())) / (24 * 3600) }
	days := math.Max(apart(first), apart(last))
	return in.DriftPerYearSI * days / year, in.known(fmt.Sprintf("within %s a year since %s", f.text, in.Calibrated)), true
}

// days returns the first and last day of the work: as stated, else by the time
// stamps of the readings, days of UTC.
func (l *loader) days() (first, last time.Time, ok bool) {
	w := &l.b.Work
	from, to := w.Performed, w.Finished
	if from == "" {
		from = to
	}
	if to == "" {
		to = from
	}
	if from != "" {
		first, err1 := time.Parse(time.DateOnly, from)
		last, err2 := time.Parse(time.DateOnly, to)
		return first, last, err1 == nil && err2 == nil
	}
	r := &l.b.Rows
	if r.Epoch.IsZero() {
		return first, last, false
	}
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, t := range r.Time {
		if !math.IsNaN(t) {
			lo, hi = math.Min(lo, t), math.Max(hi, t)
		}
	}
	day := func(s float64) time.Time {
		return time.Unix(r.Epoch.Unix()+int64(math.Floor(s)), 0).UTC().Truncate(24 * time.Hour)
	}
	return day(lo), day(hi), lo <= hi
}

// warmth is the half-width of what an instrument may have changed by because it was
// used at another temperature than it was calibrated at. Its coefficient α is
// rectangular in ±a about zero, the difference of temperatures T − T₀ has the
// expectation t and the variance u(T)² + u(T₀)², independent of α, so that the
// product has expectation zero and the variance (derived)
//
//	E(α²) E((T − T₀)²) = a²/3 · (t² + u(T)² + u(T₀)²),
//
// which is that of a rectangle of half-width a √(t² + u(T)² + u(T₀)²). So a
// temperature that happens to equal that of the calibration leaves something open,
// and the product is uncorrelated with the temperature, as with any other
// instrument that shares it.
func (l *loader) warmth(in *Instrument, _, f *node) (half float64, source string, ok bool) {
	var air *Condition
	for i := range l.b.Environment {
		if l.b.Environment[i].Name == "temperature" {
			air = &l.b.Environment[i]
		}
	}
	switch {
	case !in.CalibrationTemperature.Given && air == nil:
		l.fail(f, `how far from its calibration it was used is not known: state calibration_temperature, like "23 degC", and [environment] temperature`)
		return 0, "", false
	case !in.CalibrationTemperature.Given:
		l.fail(f, `how far from its calibration it was used is not known: state the temperature there, like calibration_temperature = "23 degC"`)
		return 0, "", false
	case air == nil:
		l.fail(f, `how far from its calibration it was used is not known: state [environment] temperature, like { value = "22.4 degC", u = "0.3 degC" }`)
		return 0, "", false
	}
	t0 := &in.CalibrationTemperature.Dist
	away := math.Hypot(air.Dist.Value-t0.Value, math.Hypot(air.Dist.U, t0.U))
	if away == 0 {
		l.warnf(f, "the temperature of the work is stated without uncertainty and equals that of the calibration, so that the coefficient adds nothing; state u of environment.temperature")
	}
	unit := in.CalibrationTemperature.Unit
	at := fmt.Sprintf("%.6g %s", unit.FromSI(t0.Value), unit)
	per := ""
	if in.PerKelvinUnit.Dim.IsOne() || !strings.Contains(in.PerKelvinUnit.Symbol, "/") {
		per = " a kelvin"
	}
	return in.PerKelvinSI * away, in.known(fmt.Sprintf("within %s%s away from %s", f.text, per, at)), true
}

// known puts the certificate, else the serial number, before what is known by it.
// Without either nothing is said: a phrase that fits any instrument would make
// two laboratories' instruments look like one.
func (in *Instrument) known(what string) string {
	switch {
	case in.Certificate != "":
		return "certificate " + in.Certificate + ": " + what
	case in.Serial != "":
		return "serial " + in.Serial + ": " + what
	}
	return ""
}
