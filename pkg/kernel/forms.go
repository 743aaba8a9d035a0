package kernel

import (
	"errors"

	"example.org/guardring/pkg/cell"
)

// ShowForms displays forms, MIME type to content, under the running cell.
func ShowForms(forms map[string]any) error {
	if len(forms) == 0 {
		return errors.New("nothing to display: no forms")
	}
	cell.Display(forms)
	return nil
}
