package lab

import (
	"encoding/json"

	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/plan"
	"example.org/guardring/pkg/report"
)

// Stray is the field of charged fixtures at a meter's place. In a cell it shows
// field and potential with their uncertainty, the share of each body, and the
// places without field.
type Stray struct {
	StrayField *plan.StrayField

	sheet *report.Sheet
	json  json.RawMessage
}

// StrayField finds the field of the charged bodies of a file at its meter's
// place.
//
//	lab.StrayField("../datasets/strayfield/strayfield.toml")
func StrayField(path string) *Stray {
	b, err := plan.OpenStray(path)
	fail(err)
	f, err := plan.Stray(b)
	fail(err)
	s := &Stray{StrayField: f, sheet: report.StrayField(f, nil)}
	s.json, err = json.Marshal(f.Record())
	fail(err)
	return s
}

// String returns the text form.
func (s *Stray) String() string { return s.sheet.String() }

// SimpleRender gives the forms that a notebook can show, the record among them.
func (s *Stray) SimpleRender() map[string]any {
	forms := s.sheet.SimpleRender()
	forms[ResultMIME] = s.json
	return forms
}

// Figure draws field lines and equipotentials around the bodies.
func (s *Stray) Figure() *figure.Figure { return figureOf(figure.StrayField(s.StrayField)) }

// Record is the stray field as it is written and compared.
func (s *Stray) Record() *plan.StrayRecord { return s.StrayField.Record() }
