package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// DielectricSample is a sheet in the guarded gap. With the sheet lying on the
// plate and an air film above it (electrodes = "spaced"),
//
//	Q/V = ε₀A/((d − t)/ε_air + t/ε_r) + C_s
//
// (field.SheetCapacitance; package comment, "Sheet in the gap"); with thin
// electrodes on the sheet itself (electrodes = "contact") the film is what
// roughness leaves under them, and the area that of ASTM D150
// (field.GuardedElectrodeArea). Two thicknesses or more tell the sheet from the
// film.
var DielectricSample = register(&Kind{
	Name:  "dielectric-sample",
	Title: "Dielectric sheet in a guarded gap",
	Doc: "A sheet of known thickness lies in the gap of guarded plates, with an air film, or between electrodes laid on it; " +
		"charge or capacitance gives the relative permittivity of the sheet. Two thicknesses separate it from the film.",
	Channels: []Channel{
		{Name: "voltage", Doc: "voltage of the plate against disc and guard; not needed when the capacitance is read", Unit: si.MustUnit("kV"), Role: Predictor, Optional: true},
		{Name: "gap", Doc: "spacing of the plates as read on the micrometer; only with electrodes = \"spaced\"", Unit: si.MustUnit("mm"), Role: Predictor, Optional: true, Positive: true},
		{Name: "thickness", Doc: "thickness of the sheet in the gap, 0 for none; not needed when sample_thickness is stated", Unit: si.MustUnit("mm"), Role: Predictor, Optional: true},
		{Name: "hold", Doc: "time from the step of the voltage to the reading of the charge", Unit: si.MustUnit("s"), Role: Predictor, Optional: true},
		{Name: "charge", Doc: "charge on the disc; the gain is that of the electrometer's feedback capacitor", Unit: si.MustUnit("nC"), Role: Response},
		{Name: "capacitance", Doc: "capacitance between plate and disc", Unit: si.MustUnit("pF"), Role: Response},
	},
	Scalars: append(append([]Scalar{
		{Table: "quantities", Name: "sample_relative_permittivity", Doc: "relative permittivity of the sheet", Unit: si.MustUnit("1"), Sought: true, Positive: true, Part: "result"},
		{Table: "quantities", Name: "contact_potential", Doc: "contact potential, subtracted from the voltage", Unit: si.MustUnit("V"), Adjustable: true, Part: "electrodes"},
		{Table: "quantities", Name: "gap_offset", Doc: "zero error of the spacing scale, added to the reading", Unit: si.MustUnit("um"), Adjustable: true, Part: "electrodes"},
		{Table: "quantities", Name: "film_thickness", Doc: "air film between sheet and electrodes laid on it, electrodes = \"contact\"", Unit: si.MustUnit("um"), Adjustable: true, Part: "sample"},
		{Table: "quantities", Name: "sample_thickness", Doc: "thickness of the sheet when there is no channel for it", Unit: si.MustUnit("mm"), Positive: true, Part: "sample"},
		{Table: "quantities", Name: "stray_capacitance", Doc: "capacitance between live plate and disc besides the gap", Unit: si.MustUnit("pF"), Adjustable: true, Part: "electrodes"},
	}, guardedScalars...), electrometerScalars...),
	Corrections: append([]Correction{
		{Name: "guard_gap", Doc: "effective area of the disc with its guard gap", Default: true},
		{Name: "wedge", Doc: "plates not parallel"},
		{Name: "coplanarity", Doc: "disc proud of the guard plane"},
		{Name: "air", Doc: "moist air in the film", Default: true},
	}, electrometerCorrections...),
	Options: []Option{{Key: "electrodes", Doc: "spaced: plates at a set spacing, sheet on one of them; contact: thin electrodes on the sheet",
		Values: []string{"spaced", "contact"}, Default: "spaced"}},
	Prepare: prepareDielectricSample,
})

func prepareDielectricSample(k *Kind, s *Setup) (*Model, error) {
	iEr, iOff, iFilm, iThick := k.Scalar("sample_relative_permittivity"), k.Scalar("gap_offset"), k.Scalar("film_thickness"), k.Scalar("sample_thickness")
	contact := s.Options["electrodes"] == "contact"
	var predictors []string
	pGap, pThick := -1, -1
	switch {
	case contact && s.Channels["gap"]:
		return nil, fmt.Errorf("channels.gap: electrodes on the sheet leave no gap to set; leave the channel out and state quantities.film_thickness")
	case contact && (s.On["wedge"] || s.On["coplanarity"]):
		return nil, fmt.Errorf("corrections.wedge, corrections.coplanarity: belong to spaced electrodes; switch them off for electrodes = \"contact\"")
	case contact && s.Given["gap_offset"]:
		return nil, fmt.Errorf("quantities.gap_offset: belongs to spaced electrodes; for electrodes = \"contact\" state quantities.film_thickness")
	case !contact && !s.Channels["gap"]:
		return nil, fmt.Errorf("channels.gap: spaced electrodes need the spacing of every reading; name its column, or state electrodes = \"contact\"")
	case !contact && s.Given["film_thickness"]:
		return nil, fmt.Errorf("quantities.film_thickness: belongs to electrodes = \"contact\"; between spaced electrodes the film is gap less thickness")
	case !contact:
		pGap = 0
		predictors = append(predictors, "gap")
	}
	switch {
	case s.Channels["thickness"] && s.Given["sample_thickness"]:
		return nil, fmt.Errorf("quantities.sample_thickness: the thickness has a channel of its own; state one of the two")
	case s.Channels["thickness"]:
		pThick = len(predictors)
		predictors = append(predictors, "thickness")
	case !s.Given["sample_thickness"]:
		return nil, fmt.Errorf("quantities.sample_thickness: is missing; state it, or name a column in channels.thickness")
	}
	r, response, predictors, err := newPlateReading(k, s, predictors)
	if err != nil {
		return nil, err
	}
	g, err := newGuarded(k, s)
	if err != nil {
		return nil, err
	}
	air := s.On["air"]

	thick := func(q, x []float64) float64 {
		if pThick >= 0 {
			return x[pThick]
		}
		return q[iThick]
	}
	film := func(q, x []float64) float64 {
		if contact {
			return q[iFilm]
		}
		return x[pGap] + q[iOff] - thick(q, x)
	}
	medium := func(q []float64) float64 {
		if !air {
			return 1
		}
		return field.AirPermittivityJet(jet.Const(q[g.iT]), jet.Const(q[g.iP]), jet.Const(q[g.iH])).V
	}
	m := &Model{Response: response, Predictors: predictors}
	m.Row = func(q, x []jet.Jet) jet.Jet {
		t := q[iThick]
		if pThick >= 0 {
			t = x[pThick]
		}
		ea := jet.Const(1)
		if air {
			ea = field.AirPermittivityJet(q[g.iT], q[g.iP], q[g.iH])
		}
		var c jet.Jet
		if contact {
			area := q[g.iR].Sqr().Scale(math.Pi)
			if g.guard {
				area = field.GuardedElectrodeAreaJet(q[g.iR].Scale(2), q[g.iG], t).Mul(q[g.iModel].Plus(1))
			}
			c = field.SheetCapacitanceJet(q[g.iE0], area, t.Add(q[iFilm]), t, q[iEr], ea)
		} else {
			d := x[pGap].Add(q[iOff])
			c = q[g.iE0].Mul(ea).Mul(g.over(q, d.Sub(t).Add(t.Mul(ea).Div(q[iEr]))))
		}
		return r.jet(c, q, x)
	}
	m.Block = func(q []float64, x [][]float64, lo, hi int, wrt []int, f []float64, jac [][]float64) bool {
		for _, j := range wrt {
			if j != iEr && j != iOff && j != iFilm && !r.acts(j) {
				return false
			}
		}
		p := g.prepared(q)
		ea := medium(q)
		eps := q[g.iE0] * ea
		ratio := ea / q[iEr]
		off, t := q[iOff], q[iThick]
		for i := lo; i < hi; i++ {
			if pThick >= 0 {
				t = x[pThick][i]
			}
			// Area over electric spacing, and its derivative by that spacing.
			var over, slope float64
			if contact {
				area := p.radius
				if g.guard {
					area = field.GuardedElectrodeAreaJet(jet.Const(2*q[g.iR]), jet.Const(q[g.iG]), jet.Const(t)).V * (1 + q[g.iModel])
				}
				over = area / (q[iFilm] + t*ratio)
				slope = -over / (q[iFilm] + t*ratio)
			} else {
				over, slope = p.overValue(x[pGap][i] + off - t + t*ratio)
			}
			y := r.value(eps*over, q, x, i)
			f[i] = y.reading
			if jac == nil {
				continue
			}
			for n, j := range wrt {
				var d float64
				switch {
				case j == iEr:
					d = -eps * slope * t * ratio / q[iEr] * y.lever * y.keep
				case j == iOff && !contact, j == iFilm && contact:
					d = eps * slope * y.lever * y.keep
				default:
					d = r.by(j, &y)
				}
				jac[n][i] = d
			}
		}
		return true
	}
	m.Start = func(q []float64, free []int, x [][]float64, y []float64) ([]float64, error) {
		// The response grows steadily with ε_r: bisect on the readings' projection
		// on the voltage, from a gas to a ferroelectric.
		w := append([]float64(nil), q...)
		excess := func(er float64) float64 {
			w[iEr] = er
			var sum float64
			for i, f := range m.predictAll(w, x, len(y)) {
				v := 1.0
				if r.charge {
					v = x[r.voltage][i]
				}
				sum += v * (f - y[i])
			}
			return sum
		}
		lo, hi := 0.5, 1e5
		if excess(lo) > 0 || excess(hi) < 0 {
			what := "less than any sheet gives"
			if excess(hi) < 0 {
				what = "more than any sheet gives"
			}
			return nil, fmt.Errorf("readings of %s: %s in these gaps; check the sign and the zero of the channel, the stray capacitance and the spacing", response, what)
		}
		for range 60 {
			if mid := math.Sqrt(lo * hi); excess(mid) > 0 {
				hi = mid
			} else {
				lo = mid
			}
		}
		return startAt(q, free, iEr, math.Sqrt(lo*hi)), nil
	}
	m.Check = func(q []float64, x [][]float64, y []float64) ([]error, error) {
		row := make([]float64, len(predictors))
		sheets := false
		for i := range y {
			for p := range row {
				row[p] = x[p][i]
			}
			t, f := thick(q, row), film(q, row)
			switch {
			case t < 0:
				return nil, &RowError{Row: i, Err: fmt.Errorf("thickness %.6g mm: can't be below zero; write 0 for a gap without sheet", 1e3*t)}
			case contact && t == 0:
				return nil, &RowError{Row: i, Err: fmt.Errorf("thickness 0: electrodes on the sheet need a sheet; exclude the reading")}
			case contact && f < 0:
				return nil, fmt.Errorf("quantities.film_thickness: %.3g um: a film can't be thinner than nothing", 1e6*f)
			case f < 0:
				return nil, &RowError{Row: i, Err: fmt.Errorf("gap %.6g mm is thinner than the sample, %.6g mm; the gap must be at least the thickness of the sheet", 1e3*(f+t), 1e3*t)}
			case r.hold >= 0 && row[r.hold] < 0:
				return nil, &RowError{Row: i, Err: fmt.Errorf("hold %.6g s: a time from the step of the voltage to the reading can't be below zero", row[r.hold])}
			}
			sheets = sheets || t > 0
		}
		if !sheets {
			return nil, fmt.Errorf("channels.thickness: no reading has a sheet in the gap; there is nothing to find its permittivity from")
		}
		start, err := m.Start(q, []int{iEr}, x, y)
		if err != nil {
			return nil, err
		}
		rough := start[0]
		if rough < 1 {
			return nil, fmt.Errorf("readings of %s: a rough relative permittivity of %.3g for the sheet, below that of vacuum; check the thickness, the stray capacitance and the spacing", response, rough)
		}
		ea := medium(q)
		minFilm, minSpacing := math.Inf(1), math.Inf(1)
		share := 0.0 // the sheet's largest part of the voltage
		for i := range y {
			for p := range row {
				row[p] = x[p][i]
			}
			t, f := thick(q, row), film(q, row)
			if t > 0 {
				minFilm = math.Min(minFilm, f)
				share = math.Max(share, t/rough/(f/ea+t/rough))
			}
			minSpacing = math.Min(minSpacing, f+t*ea/rough)
		}
		var warn []error
		if !contact {
			w, err := g.check(q, minSpacing)
			if err != nil {
				return nil, err
			}
			warn = append(warn, w...)
			if g.guard && minFilm < field.SlotMinimum*q[g.iG] {
				radius, outer := q[g.iR], q[g.iR]+q[g.iG]
				alpha := field.SlotLength(radius, outer)
				size := (outer*outer - radius*radius) / (2 * radius * radius) * alpha / (minSpacing + alpha)
				warn = append(warn, fmt.Errorf("corrections.guard_gap: the air film (%.3g mm) is thinner than 5 × guard_gap, so the sheet enters the field of the slot; the correction there is at most %.2g of the charge: state corrections.guard_gap.model with a standard uncertainty of that order",
					1e3*minFilm, size))
			}
		}
		if share < 0.1 {
			warn = append(warn, fmt.Errorf("the sheet takes at most %.2g %% of the voltage, the air film the rest: the readings hardly depend on the sheet's permittivity; close the gap", 100*share))
		}
		warn = append(warn, dampAir(q[g.iH])...)
		if w := r.check(q, x); w != nil {
			warn = append(warn, w)
		}
		w := append([]float64(nil), q...)
		w[iEr] = rough
		return append(warn, breakdownWarning(m.Hazard(w, x))...), nil
	}
	m.Hazard = func(q []float64, x [][]float64) Hazard {
		h, worst := Hazard{}, -1.0
		if r.voltage < 0 {
			return h // the bench does not say at what voltage its bridge works
		}
		delta, ea := airDensity(q[g.iT], q[g.iP]), medium(q)
		one := make([]float64, len(x))
		for i, v := range x[r.voltage] {
			for p := range one {
				one[p] = x[p][i]
			}
			t, f := thick(q, one), film(q, one)
			s := f + t*ea/q[iEr]
			if !(s > 0) {
				continue
			}
			// The film carries the larger field, V over the electric spacing.
			h.meet(i, v, v/s, f, math.Max(q[g.iCap], si.Eps0*ea*math.Pi*q[g.iR]*q[g.iR]/s), delta, &worst)
		}
		return h
	}
	m.Measurands = []Measurand{
		{Name: "sample_relative_permittivity", Doc: "relative permittivity of the sheet", Unit: si.MustUnit("1"),
			Value: func(q []jet.Jet) jet.Jet { return q[iEr] }},
		{Name: "electric_susceptibility", Doc: "relative permittivity of the sheet less one", Unit: si.MustUnit("1"),
			Value: func(q []jet.Jet) jet.Jet { return q[iEr].Plus(-1) }},
		{Name: "sample_permittivity", Doc: "permittivity of the sheet", Unit: si.MustUnit("pF/m"),
			Value: func(q []jet.Jet) jet.Jet { return q[iEr].Mul(q[g.iE0]) }},
	}
	spacing := func(q, x []float64) float64 { return film(q, x) + thick(q, x)/q[iEr] }
	m.Causes = []Cause{
		{Name: "film_thickness", Doc: "grows as 1/(electric spacing) relative to the reading: film or zero of the spacing scale",
			Signature: func(q, x []float64, f, t float64) float64 { return f / spacing(q, x) }},
		{Name: "wedge", Doc: "grows as 1/(electric spacing)² relative to the reading: plates not parallel",
			Signature: func(q, x []float64, f, t float64) float64 { s := spacing(q, x); return f / (s * s) }},
		{Name: "thickness", Doc: "grows with thickness over electric spacing: thickness of the sheets wrong by one factor",
			Signature: func(q, x []float64, f, t float64) float64 { return f * thick(q, x) / spacing(q, x) }},
		{Name: "drift", Doc: "proportional to time: drift of the zero",
			Signature: withTime},
	}
	if r.charge {
		m.Causes = append(m.Causes, chargeCauses(r.voltage, r.hold, spacing)...)
		if r.hold >= 0 {
			m.Causes = append(m.Causes, Cause{Name: "absorption", Doc: "proportional to charge and the logarithm of the hold time: dielectric absorption of the sheet",
				Signature: func(q, x []float64, f, t float64) float64 {
					if thick(q, x) == 0 || !(x[r.hold] > 0) {
						return 0
					}
					return f * math.Log(x[r.hold])
				}})
		}
	} else {
		m.Causes = append(m.Causes, Cause{Name: "stray_capacitance", Doc: "the same in every gap: capacitance besides the gap",
			Signature: always})
	}
	return m, nil
}
