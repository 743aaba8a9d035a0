package kernel

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"strings"
)

// Output is one output of a cell, as a notebook file holds it (nbformat 4.5, "code cell outputs").
type Output struct {
	Type           string // stream, display_data, execute_result, error
	Name           string // stdout or stderr
	Text           string
	Data           map[string]any // MIME type to content
	Metadata       map[string]any
	ExecutionCount int
	EName, EValue  string
	Traceback      []string
}

// MarshalJSON writes the fields that the type of output has.
func (o Output) MarshalJSON() ([]byte, error) {
	m := map[string]any{"output_type": o.Type}
	switch o.Type {
	case "stream":
		m["name"], m["text"] = o.Name, o.Text
	case "error":
		m["ename"], m["evalue"], m["traceback"] = o.EName, o.EValue, o.Traceback
	default:
		m["data"], m["metadata"] = o.Data, orEmpty(o.Metadata)
		if o.Type == "execute_result" {
			m["execution_count"] = o.ExecutionCount
		}
	}
	return json.Marshal(m)
}

// Plain returns what the output says as text.
func (o Output) Plain() string {
	switch o.Type {
	case "stream":
		return o.Text
	case "error":
		return o.EName + ": " + o.EValue
	}
	s, _ := o.Data["text/plain"].(string)
	return s
}

// Execution is what became of a cell.
type Execution struct {
	Status          string // ok, error, aborted
	Count           int
	Outputs         []*Output
	EName, EValue   string
	Traceback       []string
	UserExpressions map[string]any
	Payload         []any
}

// Err returns the error that ended the cell, nil when it is ok.
func (e *Execution) Err() error {
	switch e.Status {
	case "ok":
		return nil
	case "aborted":
		return fmt.Errorf("the cell was not run: an earlier one failed")
	}
	return &CellError{Kind: e.EName, Message: e.EValue}
}

// Text returns what the cell wrote to a stream ("stdout" or "stderr").
func (e *Execution) Text(stream string) string {
	var b strings.Builder
	for _, o := range e.Outputs {
		if o.Type == "stream" && o.Name == stream {
			b.WriteString(o.Text)
		}
	}
	return b.String()
}

// Result returns the plain text of the cell's value, "" when it has none.
func (e *Execution) Result() string {
	for _, o := range e.Outputs {
		if o.Type == "execute_result" {
			return o.Plain()
		}
	}
	return ""
}

// ExecuteOptions say how a cell is run. The zero value is what a notebook does.
type ExecuteOptions struct {
	Silent          bool
	NoHistory       bool
	GoOn            bool // an error does not abort the cells that wait
	UserExpressions map[string]string
	Input           func(prompt string, password bool) (string, error) // nil: the cell can't ask
	Message         func(*Message)                                     // sees every message of the cell as it arrives
}

// Execute runs a cell and collects its outputs until the kernel is idle again. An error of the cell is in the
// Execution; the error returned is one of talking to the kernel.
func (c *Client) Execute(ctx context.Context, code string, opt ExecuteOptions) (*Execution, error) {
	e := &Execution{}
	reply, outputs := make(chan *Message, 4), make(chan *Message, 1024)
	id, err := c.send(c.shell, "execute_request", nil, map[string]any{
		"code": code, "silent": opt.Silent, "store_history": !opt.NoHistory, "stop_on_error": !opt.GoOn,
		"user_expressions": opt.UserExpressions, "allow_stdin": opt.Input != nil,
	}, func(id string) {
		c.mu.Lock()
		defer c.mu.Unlock()
		c.replies[id], c.outputs[id] = reply, outputs
		if opt.Input != nil {
			c.inputs[id] = func(m *Message) { c.answerInput(m, opt.Input) }
		}
	})
	defer func() {
		c.mu.Lock()
		delete(c.replies, id)
		delete(c.outputs, id)
		delete(c.inputs, id)
		c.mu.Unlock()
		for { // the listener must not wait for a reader that is gone
			select {
			case <-outputs:
			default:
				return
			}
		}
	}()
	if err != nil {
		return nil, c.ended(ctx, err)
	}
	idle, replied, clear := false, false, false
	for !idle || !replied {
		select {
		case m := <-reply:
			if err := e.reply(m); err != nil {
				return nil, err
			}
			replied = true
		case m := <-outputs:
			if opt.Message != nil {
				opt.Message(m)
			}
			last, err := c.collect(e, m, &clear)
			if err != nil {
				return nil, err
			}
			idle = idle || last // a goroutine of the cell may print after that
		case <-ctx.Done():
			return nil, ctx.Err()
		case <-c.exited:
			return nil, c.ended(ctx, nil)
		}
	}
	return e, nil
}

func (c *Client) answerInput(m *Message, ask func(string, bool) (string, error)) {
	var q struct {
		Prompt   string `json:"prompt"`
		Password bool   `json:"password"`
	}
	if err := json.Unmarshal(m.Content, &q); err != nil {
		return
	}
	line, err := ask(q.Prompt, q.Password)
	if err != nil {
		return // no answer: the cell waits until it is interrupted, as with a front end that is closed
	}
	_, _ = c.send(c.stdin, "input_reply", m.RawHeader, map[string]any{"status": "ok", "value": line}, nil)
}

func (e *Execution) reply(m *Message) error {
	var r struct {
		Status    string         `json:"status"`
		Count     int            `json:"execution_count"`
		EName     string         `json:"ename"`
		EValue    string         `json:"evalue"`
		Traceback []string       `json:"traceback"`
		User      map[string]any `json:"user_expressions"`
		Payload   []any          `json:"payload"`
	}
	if err := json.Unmarshal(m.Content, &r); err != nil {
		return fmt.Errorf("%s: %w", m.Header.Type, err)
	}
	e.Status, e.Count, e.EName, e.EValue, e.Traceback = r.Status, r.Count, r.EName, r.EValue, r.Traceback
	e.UserExpressions, e.Payload = r.User, r.Payload
	return nil
}

// collect adds one iopub message to the outputs and reports whether the kernel is idle again.
func (c *Client) collect(e *Execution, m *Message, clearLater *bool) (idle bool, err error) {
	var b struct {
		State     string         `json:"execution_state"`
		Name      string         `json:"name"`
		Text      string         `json:"text"`
		Data      map[string]any `json:"data"`
		Metadata  map[string]any `json:"metadata"`
		Count     int            `json:"execution_count"`
		EName     string         `json:"ename"`
		EValue    string         `json:"evalue"`
		Traceback []string       `json:"traceback"`
		Wait      bool           `json:"wait"`
		Transient struct {
			ID string `json:"display_id"`
		} `json:"transient"`
	}
	d := json.NewDecoder(bytes.NewReader(m.Content))
	d.UseNumber() // numbers in Data keep their spelling, and seeds all their digits
	if err := d.Decode(&b); err != nil {
		return false, fmt.Errorf("%s: %w", m.Header.Type, err)
	}
	add := func(o *Output) {
		if *clearLater {
			e.Outputs, *clearLater = nil, false
		}
		e.Outputs = append(e.Outputs, o)
	}
	switch m.Header.Type {
	case "status":
		return b.State == "idle", nil
	case "stream":
		if n := len(e.Outputs); n > 0 && !*clearLater && e.Outputs[n-1].Type == "stream" && e.Outputs[n-1].Name == b.Name {
			e.Outputs[n-1].Text += b.Text
		} else {
			add(&Output{Type: "stream", Name: b.Name, Text: b.Text})
		}
	case "display_data", "execute_result":
		o := &Output{Type: m.Header.Type, Data: b.Data, Metadata: b.Metadata, ExecutionCount: b.Count}
		add(o)
		if b.Transient.ID != "" {
			c.mu.Lock()
			c.displays[b.Transient.ID] = append(c.displays[b.Transient.ID], o)
			c.mu.Unlock()
		}
	case "update_display_data":
		c.mu.Lock()
		for _, o := range c.displays[b.Transient.ID] {
			o.Data, o.Metadata = b.Data, b.Metadata
		}
		c.mu.Unlock()
	case "clear_output":
		if b.Wait {
			*clearLater = true
		} else {
			e.Outputs = nil
		}
	case "error":
		add(&Output{Type: "error", EName: b.EName, EValue: b.EValue, Traceback: b.Traceback})
	}
	return false, nil
}
