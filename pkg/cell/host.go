package cell

import (
	"context"
	"errors"
	"fmt"
	"sync/atomic"
)

// Host is what a notebook kernel offers to the cells it runs. Every field may be nil, which means silence.
type Host struct {
	// Context returns the context of the running cell. It is cancelled when the cell is interrupted and carries
	// the cell's progress sink.
	Context func() context.Context
	// Display shows a value in its forms, MIME type to content: string for text, []byte for binary forms, anything
	// that encodes as JSON for JSON forms. A display with an id can be replaced later; update replaces all
	// displays of that id.
	Display func(forms map[string]any, id string, update bool)
	// Clear removes the running cell's output, with wait only when new output arrives.
	Clear func(wait bool)
	// Fail ends the running cell with err. It must not return to its caller.
	Fail func(err error)
	// Input asks the person at the notebook for a line of text; password hides what is typed.
	Input func(prompt string, password bool) (string, error)
}

// Failure is what Fail panics with where no host ends the cell. It is an error that wraps the cause.
type Failure struct {
	Err error
}

// Error returns the text of the cause.
func (f Failure) Error() string {
	if f.Err == nil {
		return "failed without a stated cause"
	}
	return f.Err.Error()
}

// Unwrap returns the cause.
func (f Failure) Unwrap() error { return f.Err }

var current atomic.Pointer[Host]

// SetHost makes h the surroundings of all further calls and returns a function that puts the former host back.
// It is for kernels and tests; a nil h is silence.
func SetHost(h *Host) (restore func()) {
	before := current.Swap(h)
	return func() { current.Store(before) }
}

// Context returns the context of the running cell, with the cell's progress sink; context.Background outside a
// notebook.
func Context() context.Context {
	if h := current.Load(); h != nil && h.Context != nil {
		if ctx := h.Context(); ctx != nil {
			return ctx
		}
	}
	return context.Background()
}

// Display shows v under the running cell in all the forms that v has; see Forms.
func Display(v any) { show(v, "", false) }

// DisplayAs is Display under an id, so that Update can replace what it shows.
func DisplayAs(id string, v any) { show(v, id, false) }

// Update replaces everything displayed under id by v.
func Update(id string, v any) { show(v, id, true) }

func show(v any, id string, update bool) {
	if h := current.Load(); h != nil && h.Display != nil {
		h.Display(Forms(v), id, update)
	}
}

// Clear removes what the running cell has displayed and printed so far; with wait only when its next output arrives,
// which avoids flicker.
func Clear(wait bool) {
	if h := current.Load(); h != nil && h.Clear != nil {
		h.Clear(wait)
	}
}

// Input asks the person at the notebook for a line of text. Outside a notebook there is nobody to ask: an error.
func Input(prompt string) (string, error) {
	if h := current.Load(); h != nil && h.Input != nil {
		return h.Input(prompt, false)
	}
	return "", errors.New("nobody to ask for input: not in a notebook")
}

// Fail ends the running cell with err, shown as an ordinary error without a stack. Outside a notebook it panics with
// Failure{err}. A nil err does nothing.
func Fail(err error) {
	if err == nil {
		return
	}
	if h := current.Load(); h != nil && h.Fail != nil {
		h.Fail(err)
	}
	panic(Failure{Err: err})
}

// Forms returns the forms of v, MIME type to content. A value with SimpleRender() map[string]any gives its own; a
// text/plain form is added from String, or from fmt's %v, where there is none. A map[string]any whose keys are all
// MIME types (they contain a slash) is taken as the forms themselves.
func Forms(v any) map[string]any {
	forms := map[string]any{}
	switch x := v.(type) {
	case interface{ SimpleRender() map[string]any }:
		for mime, data := range x.SimpleRender() {
			forms[mime] = data
		}
	case map[string]any:
		if areForms(x) {
			for mime, data := range x {
				forms[mime] = data
			}
		}
	}
	if _, ok := forms["text/plain"]; !ok {
		forms["text/plain"] = fmt.Sprint(v)
	}
	return forms
}

func areForms(m map[string]any) bool {
	for mime := range m {
		slash := false
		for i := 1; i < len(mime)-1; i++ {
			slash = slash || mime[i] == '/'
		}
		if !slash {
			return false
		}
	}
	return len(m) > 0
}
