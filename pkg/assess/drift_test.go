package assess

import (
	"math"
	"testing"
	"time"

	"example.org/guardring/pkg/random"
	"gonum.org/v1/gonum/stat"
)

var start = time.Date(2019, 3, 1, 0, 0, 0, 0, time.UTC)

func day(d float64) time.Time { return start.Add(time.Duration(d * 86400 * float64(time.Second))) }

// JCGM 100:2008 H.3, Table H.6: the line b = y1 + y2 (t − 20 °C) of a
// thermometer, its uncertainties from the scatter; a degree stands for a day.
// Values from memory, full precision computed independently.
func TestThermometerLine(t *testing.T) {
	var in struct{ T, B []float64 }
	var want struct {
		Y1, U1, Y2, U2, S, B30 float64
		UB30                   float64 `json:"u_b30"`
		DOF                    int
	}
	reference(t, "gum.json", "gum-H3", &in, &want)
	h := History{Unit: "degC"}
	for i := range in.T {
		h.Calibrations = append(h.Calibrations, Calibration{Date: day(in.T[i]), Value: in.B[i], U: 0.001})
	}
	l, err := Drift(h, DriftSettings{Scale: true})
	if err != nil {
		t.Fatal(err)
	}
	if !l.Scaled || l.DOF != want.DOF {
		t.Fatalf("scaled %v, dof %d", l.Scaled, l.DOF)
	}
	near(t, "s", 0.001*l.BirgeRatio, want.S, 0.00005)
	near(t, "y2", l.Slope*86400, want.Y2, 0.000005)
	near(t, "u(y2)", l.USlope*86400, want.U2, 0.000005)
	at := func(d, y, u float64) {
		p, err := l.Predict(day(d), 0)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "value", p.Value, y, 0.00005)
		near(t, "u", p.U, u, 0.00005)
		near(t, "k", p.K, 2.32, 0.005) // t for 95.45 % and 9 degrees of freedom, JCGM 100 Table G.2
	}
	at(20, want.Y1, want.U1)
	at(30, want.B30, want.UB30)
	// the scatter alone gives the same t test, scaled or not
	unscaled, err := Drift(h, DriftSettings{})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "p", unscaled.PScatter, l.PSlope, 1e-12)
	near(t, "stated u", unscaled.USlope*l.BirgeRatio, l.USlope, 1e-18)
	if len(unscaled.Warnings) == 0 {
		t.Error("a chi-squared of twelve times its degrees of freedom without a warning")
	}
}

// One simulated instrument after the other, with drift, adjustments and a shared
// standard: pulls of slope and prediction have unit spread, intervals hold what
// they should, and the test of drift raises its stated share of false alarms.
func TestDriftSimulation(t *testing.T) {
	const runs, shared, u, uAdjust = 4000, 0.4, 0.3, 0.2
	slope := 0.5 / Year
	src := random.New(13, "drift", 0)
	var slopePull, levelPull, valuePull, nextPull, latest []float64
	var alarms, held int
	for run := range runs {
		drift := slope
		if run%2 == 1 {
			drift = 0
		}
		standard := shared * src.Normal()
		h := History{Unit: "V", Shared: shared}
		moved := 0.0 // true effect of the adjustments so far
		total := math.Hypot(shared, u)
		for k := range 7 {
			date := day(365 * float64(k))
			truth := 10 + drift*date.Sub(start).Seconds() + moved
			c := Calibration{Date: date, Value: truth + standard + u*src.Normal(), U: total}
			if k == 2 || k == 4 {
				adjust := -1.0
				c.Adjustment, c.UAdjustment = adjust+uAdjust*src.Normal(), uAdjust
				moved += adjust
			}
			h.Calibrations = append(h.Calibrations, c)
		}
		l, err := Drift(h, DriftSettings{})
		if err != nil {
			t.Fatal(err)
		}
		slopePull = append(slopePull, (l.Slope-drift)/l.USlope)
		level := 10 + drift*l.Reference.Sub(start).Seconds() // adjustments taken out
		levelPull = append(levelPull, (l.Level-level)/l.ULevel)
		latest = append(latest, l.Latest.Score)
		if drift == 0 && l.Significant {
			alarms++
		}
		date := day(8 * 365)
		truth := 10 + drift*date.Sub(start).Seconds() + moved
		p, err := l.Predict(date, 0)
		if err != nil {
			t.Fatal(err)
		}
		valuePull = append(valuePull, (p.Value-truth)/p.U)
		found := truth + standard + u*src.Normal()
		nextPull = append(nextPull, (found-p.Value)/((p.Next[1]-p.Next[0])/(2*p.K)))
		if found >= p.Next[0] && found <= p.Next[1] {
			held++
		}
	}
	for name, pulls := range map[string][]float64{"slope": slopePull, "level": levelPull, "value": valuePull, "next": nextPull, "latest": latest} {
		mean, sd := stat.MeanStdDev(pulls, nil)
		near(t, name+": mean of pulls", mean, 0, 0.07)
		near(t, name+": spread of pulls", sd, 1, 0.05)
	}
	near(t, "false alarms", float64(alarms)/(runs/2), 0.05, 0.02)
	near(t, "prediction interval", float64(held)/runs, 0.9545, 0.014)
}

// The residuals' limits of the chart: under the model each standardised residual
// has unit spread, though the points took part in the line.
func TestChart(t *testing.T) {
	src := random.New(17, "chart", 0)
	var ends []float64
	for range 3000 {
		h := History{Unit: "V"}
		for k := range 5 {
			c := Calibration{Date: day(float64(k * k * 100)), Value: 3 + 0.1*src.Normal(), U: 0.1}
			if k == 1 {
				c.Adjustment, c.UAdjustment = 1+0.2*src.Normal(), 0.2
			}
			if k > 1 {
				c.Value++
			}
			h.Calibrations = append(h.Calibrations, c)
		}
		l, err := Drift(h, DriftSettings{})
		if err != nil {
			t.Fatal(err)
		}
		for _, p := range l.Points {
			ends = append(ends, float64(p.Standardised))
		}
	}
	near(t, "spread", stat.StdDev(ends, nil), 1, 0.03)
	h := History{Unit: "V"}
	for k := range 8 {
		h.Calibrations = append(h.Calibrations, Calibration{Date: day(float64(k)), Value: 1, U: 0.1})
	}
	h.Calibrations[7].Value = 1.6
	l, err := Drift(h, DriftSettings{})
	if err != nil {
		t.Fatal(err)
	}
	if p := l.Points[7]; p.Signal != Action || p.Value <= p.Act[1] || l.Latest.Signal != Action || len(l.Warnings) == 0 {
		t.Errorf("a step of six uncertainties: %+v, latest %+v", p, l.Latest)
	}
}

// The date at which a limit is reached, against the interval there.
func TestReaches(t *testing.T) {
	h := History{Unit: "V"}
	for k := range 5 {
		h.Calibrations = append(h.Calibrations, Calibration{Date: day(365 * float64(k)), Value: 10 + 0.1*float64(k), U: 0.02})
	}
	l, err := Drift(h, DriftSettings{})
	if err != nil {
		t.Fatal(err)
	}
	date, found, err := l.Reaches(AtMost(10600, "mV"))
	if err != nil || !found {
		t.Fatal(date, found, err)
	}
	p, err := l.Predict(date, 0)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "upper end there", p.Interval[1], 10.6, 1e-8)
	if _, found, err := l.Reaches(AtMost(20, "V")); found || err != nil {
		t.Error("a far limit is reached", err)
	}
	_, _, err = l.Reaches(AtMost(1, "m"))
	refuses(t, "limits of another dimension", err, "dimension")
	_, err = l.Predict(day(365*60), 0)
	refuses(t, "far future", err, "ten times")
	_, err = l.Predict(day(365*5), math.NaN())
	refuses(t, "no uncertainty", err, "standard uncertainty")
	far, err := l.Predict(day(365*12), 0)
	if err != nil || len(far.Warnings) == 0 {
		t.Error("twice the history ahead without a warning", err)
	}
}

func TestDriftRefuses(t *testing.T) {
	three := func() History {
		h := History{Unit: "V"}
		for k := range 3 {
			h.Calibrations = append(h.Calibrations, Calibration{Date: day(float64(k)), Value: 1, U: 0.1})
		}
		return h
	}
	if _, err := Drift(three(), DriftSettings{}); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		what  string
		edit  func(*History)
		words string
	}{
		{"two calibrations", func(h *History) { h.Calibrations = h.Calibrations[:2] }, "at least three"},
		{"two dates", func(h *History) { h.Calibrations[1].Date = h.Calibrations[0].Date }, "three dates"},
		{"out of order", func(h *History) { h.Calibrations[2].Date = day(-1) }, "in order"},
		{"no date", func(h *History) { h.Calibrations[0].Date = time.Time{} }, "no date"},
		{"no unit", func(h *History) { h.Unit = "" }, "no unit"},
		{"no uncertainty", func(h *History) { h.Calibrations[1].U = 0 }, "larger than"},
		{"shared part too large", func(h *History) { h.Shared = 0.2 }, "share"},
		{"shared part negative", func(h *History) { h.Shared = -1 }, "negative"},
		{"not a number", func(h *History) { h.Calibrations[1].Value = math.NaN() }, "finite"},
		{"adjustment's uncertainty", func(h *History) { h.Calibrations[1].UAdjustment = -1 }, "negative"},
	} {
		h := three()
		c.edit(&h)
		l, err := Drift(h, DriftSettings{})
		refuses(t, c.what, err, c.words)
		if l != nil {
			t.Errorf("%s: a line beside the error", c.what)
		}
	}
	_, err := Drift(three(), DriftSettings{Probability: 95})
	refuses(t, "probability as percent", err, "between 0.5 and 0.999999")
}

// Results scale with the unit: values of 1e-12 are treated as those of 1.
func TestDriftScales(t *testing.T) {
	make := func(f float64) History {
		h := History{Unit: "F", Shared: 0.01 * f}
		for k := range 6 {
			h.Calibrations = append(h.Calibrations, Calibration{Date: day(200 * float64(k)), Value: f * (1 + 0.01*float64(k*k)), U: 0.02 * f, Adjustment: 0.1 * f, UAdjustment: 0.01 * f})
		}
		return h
	}
	a, err := Drift(make(1), DriftSettings{})
	if err != nil {
		t.Fatal(err)
	}
	b, err := Drift(make(1e-12), DriftSettings{})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "slope", b.Slope*1e12, a.Slope, 1e-12*math.Abs(a.Slope))
	near(t, "u", b.USlope*1e12, a.USlope, 1e-12*a.USlope)
	near(t, "chi-squared", b.ChiSquared, a.ChiSquared, 1e-9*a.ChiSquared)
}
