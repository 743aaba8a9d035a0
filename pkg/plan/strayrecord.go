package plan

import (
	"math"

	"example.org/guardring/pkg/reduce"
)

// StrayRecord is a stray field as a document: what `guardring strayfield --json`
// prints. Numbers are SI.
type StrayRecord struct {
	Format    int            `json:"format"`
	Guardring string         `json:"guardring"`
	Title     string         `json:"title"`
	Run       StrayRun       `json:"run"`
	Inputs    []reduce.Input `json:"inputs"`
	Place     Triple         `json:"place"`     // m
	Direction *Triple        `json:"direction"` // null: the magnitude is stated
	Potential reduce.Number  `json:"potential"` // V
	Field     Triple         `json:"field"`     // V/m
	Magnitude reduce.Number  `json:"magnitude"` // V/m
	// Standard uncertainties of the three.
	PotentialU reduce.Number `json:"potential_u"` // V
	FieldU     Triple        `json:"field_u"`     // V/m
	MagnitudeU reduce.Number `json:"magnitude_u"` // V/m
	// Measurand is the field along the direction, or the magnitude, with its budget.
	Measurand reduce.Measurand  `json:"measurand"`
	Bodies    []StrayBodyRecord `json:"bodies"`
	Zeros     []StrayZeroRecord `json:"zeros"`
	Bench     *StrayShare       `json:"bench,omitempty"`
	Warnings  []string          `json:"warnings"`
}

// StrayRun says how the record was made.
type StrayRun struct {
	Command string            `json:"command"`
	Options map[string]string `json:"options"`
}

// Triple is a place or a field in Cartesian components.
type Triple [3]reduce.Number

// StrayBodyRecord is the share of one body.
type StrayBodyRecord struct {
	Name      string        `json:"name"`
	Shape     string        `json:"shape"`
	Charge    reduce.Number `json:"charge"`    // C
	ChargeU   reduce.Number `json:"charge_u"`  // C
	Field     Triple        `json:"field"`     // V/m, with its image
	Component reduce.Number `json:"component"` // V/m
	// Standard uncertainties of Field and Component.
	FieldU     Triple        `json:"field_u"`     // V/m
	ComponentU reduce.Number `json:"component_u"` // V/m
}

// StrayZeroRecord is a place without field.
type StrayZeroRecord struct {
	Place     Triple        `json:"place"`     // m
	Potential reduce.Number `json:"potential"` // V
	Slope     reduce.Number `json:"slope"`     // V/m², along the steepest direction
	Gradient  Triple        `json:"gradient"`  // V/m², along the axes
	Axes      [3]Triple     `json:"axes"`
	FieldU    reduce.Number `json:"field_u"` // V/m, for one standard uncertainty of the meter's place
	Curve     bool          `json:"curve"`   // one place of a whole curve
}

// StrayShare is the part of a stray field in a bench's own.
type StrayShare struct {
	Field    reduce.Number `json:"field"`    // V/m, of the bench
	Relative reduce.Number `json:"relative"` // component over it
	U        reduce.Number `json:"u"`        // standard uncertainty of that, once it is taken off
	// Left is the standard uncertainty that the stray field brings when it is not
	// taken off: rectangular between ± its largest likely size |E| + U.
	Left reduce.Number `json:"u_if_left"`
}

// Share is the part of the stray field in the bench's own field; nil when the
// bench does not state that.
func (s *StrayField) Share() *StrayShare {
	e := s.Bench.BenchField
	if e == 0 {
		return nil
	}
	half := math.Abs(s.Component) + s.Law.K*s.Law.U
	return &StrayShare{Field: reduce.Number(e), Relative: reduce.Number(s.Component / e), U: reduce.Number(s.Law.U / e), Left: reduce.Number(half / math.Sqrt(3) / e)}
}

// MeasurandName says which field is stated.
func (s *StrayField) MeasurandName() string {
	if s.Bench.Direction == nil {
		return "stray_field"
	}
	return "stray_field_component"
}

// Record is the stray field as a document.
func (s *StrayField) Record() *StrayRecord {
	b, l := s.Bench, s.Law
	r := &StrayRecord{Format: 1, Guardring: reduce.Version, Title: b.Title, Run: StrayRun{Command: "strayfield", Options: map[string]string{}},
		Inputs: []reduce.Input{{File: b.File, SHA256: b.SHA256}}, Place: triple(b.At), Potential: reduce.Number(s.Potential),
		Field: triple(s.Field), Magnitude: reduce.Number(s.Magnitude),
		PotentialU: reduce.Number(s.PotentialU), FieldU: triple(s.FieldU), MagnitudeU: reduce.Number(s.MagnitudeU), Bodies: []StrayBodyRecord{}, Zeros: []StrayZeroRecord{}, Bench: s.Share(), Warnings: []string{}}
	if b.Direction != nil {
		d := triple(*b.Direction)
		r.Direction = &d
	}
	doc := "magnitude of the field at the meter"
	if b.Direction != nil {
		doc = "field at the meter along its direction"
	}
	r.Measurand = reduce.Measurand{Name: s.MeasurandName(), Doc: doc, Unit: "V/m", Value: reduce.Number(l.Value), U: reduce.Number(l.U), DOF: reduce.Number(l.DOF),
		K: reduce.Number(l.K), Probability: reduce.Number(l.Probability), Interval: [2]reduce.Number{reduce.Number(l.Interval[0]), reduce.Number(l.Interval[1])}, Budget: []reduce.BudgetLine{}}
	for _, c := range l.Budget {
		if c.Contribution == 0 {
			continue // such as a place out of the plane of everything
		}
		dof := c.DOF
		if dof == 0 {
			dof = math.Inf(1)
		}
		r.Measurand.Budget = append(r.Measurand.Budget, reduce.BudgetLine{Input: c.Input, Group: c.Group, Value: reduce.Number(c.Value), Unit: c.Unit, U: reduce.Number(c.U),
			Shape: c.Shape, DOF: reduce.Number(dof), Sensitivity: reduce.Number(c.Sensitivity), Contribution: reduce.Number(math.Abs(c.Contribution)), Share: reduce.Number(c.Share)})
	}
	for i, p := range s.Parts {
		r.Bodies = append(r.Bodies, StrayBodyRecord{Name: p.Name, Shape: b.Bodies[i].Shape, Charge: reduce.Number(p.Charge), ChargeU: reduce.Number(p.ChargeU), Field: triple(p.Field), Component: reduce.Number(p.Component),
			FieldU: triple(p.FieldU), ComponentU: reduce.Number(p.ComponentU)})
	}
	for _, z := range s.Zeros {
		zero := StrayZeroRecord{Place: triple(z.At), Potential: reduce.Number(z.Phi), Slope: reduce.Number(z.Slope()), Gradient: triple(z.Gradient), FieldU: reduce.Number(z.FieldU), Curve: z.Line}
		for k := range zero.Axes {
			zero.Axes[k] = triple(z.Axes[k])
		}
		r.Zeros = append(r.Zeros, zero)
	}
	for _, w := range s.Warnings {
		r.Warnings = append(r.Warnings, w.Error())
	}
	return r
}

func triple(v [3]float64) Triple {
	return Triple{reduce.Number(v[0]), reduce.Number(v[1]), reduce.Number(v[2])}
}
