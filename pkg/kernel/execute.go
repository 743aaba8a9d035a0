package kernel

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"maps"
	"os"
	"slices"
	"sort"
	"time"

	"github.com/go-zeromq/zmq4"

	"example.org/guardring/pkg/cell"
)

// settle is how long the kernel waits after a failed cell before it aborts the queue: the requests of "run all" that
// are still on the wire belong to the queue.
const settle = 5 * time.Millisecond

// besides is what a message holds besides the forms of a value: its header, the names of the forms, the metadata.
const besides = 64 << 10

type executeRequest struct {
	Code            *string           `json:"code"`
	Silent          bool              `json:"silent"`
	StoreHistory    *bool             `json:"store_history"`
	UserExpressions map[string]string `json:"user_expressions"`
	AllowStdin      bool              `json:"allow_stdin"`
	StopOnError     *bool             `json:"stop_on_error"`
}

// execute runs a cell.
func (s *Server) execute(r *request) error {
	m := r.msg
	var c executeRequest
	if err := json.Unmarshal(m.Content, &c); err != nil {
		return err
	}
	if c.Code == nil {
		return errors.New("code is missing")
	}
	if r.aborted {
		s.reply(s.cfg.Sockets.Shell, m, "execute_reply", map[string]any{
			"status": "aborted", "execution_count": s.cellCount, "user_expressions": map[string]any{}, "payload": []any{},
		})
		return nil
	}
	store := !c.Silent && (c.StoreHistory == nil || *c.StoreHistory)
	if store {
		s.cellCount++
	}
	count := s.cellCount
	s.begin(m, c.AllowStdin)
	if !c.Silent {
		s.publish("execute_input", m.RawHeader, map[string]any{"code": *c.Code, "execution_count": count})
	}
	res, err := s.run(Cell{Code: *c.Code, Count: count})
	for _, w := range warnings(res) {
		fmt.Fprintln(os.Stderr, w)
	}
	s.stream.flush()
	content := map[string]any{"execution_count": count, "user_expressions": map[string]any{}, "payload": []any{}}
	plain := ""
	if err != nil {
		e := asCellError(err)
		trace := traceback(e)
		for k, v := range failure(e.Kind, e.Message, trace) {
			content[k] = v
		}
		if !c.Silent {
			s.publish("error", m.RawHeader, map[string]any{"ename": e.Kind, "evalue": e.Message, "traceback": trace})
		}
		if c.StopOnError == nil || *c.StopOnError {
			time.Sleep(settle)
			s.queue.abort()
		}
	} else {
		content["status"] = "ok"
		if len(res.Forms) > 0 && !c.Silent {
			forms := s.encodable(res.Forms)
			plain, _ = forms["text/plain"].(string)
			s.publish("execute_result", m.RawHeader, map[string]any{
				"execution_count": count, "data": forms, "metadata": orEmpty(res.Metadata),
			})
		}
		if res.Page != nil {
			content["payload"] = []any{map[string]any{"source": "page", "data": res.Page, "start": 0}}
		}
		content["user_expressions"] = s.expressions(c.UserExpressions)
		s.stream.flush()
	}
	s.end()
	if store {
		s.history.add(count, *c.Code, plain)
	}
	s.reply(s.cfg.Sockets.Shell, m, "execute_reply", content)
	return nil
}

func warnings(r *Result) []string {
	if r == nil {
		return nil
	}
	return r.Warnings
}

// begin makes a request the one that outputs belong to.
func (s *Server) begin(m *Message, stdin bool) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.parent = m.RawHeader
	s.askStdin = nil
	if stdin {
		s.askStdin = m
	}
	s.stopCell, s.told = false, false
}

func (s *Server) end() {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.askStdin = nil
}

// run runs code with a context of its own, a progress bar and an open ear for interrupts.
func (s *Server) run(c Cell) (res *Result, err error) {
	ctx, cancel := context.WithCancel(context.Background())
	id := fmt.Sprintf("progress-%d", c.Count)
	b := &bar{show: func(forms map[string]any, update bool) { s.display(forms, id, update) }}
	ctx = cell.WithProgress(ctx, b.report)
	s.mu.Lock()
	s.cancel, s.cellCtx, s.running = cancel, ctx, true
	if s.ended() { // an end that came before it could find this cell running
		s.stopCell = true
		cancel()
	}
	s.mu.Unlock()
	defer func() {
		fault := recover()
		s.mu.Lock()
		s.running, s.cancel, s.cellCtx = false, nil, nil
		stopped := s.stopCell
		s.mu.Unlock()
		cancel()
		b.finish()
		if fault != nil {
			err = &CellError{Kind: Panicked, Message: fmt.Sprint(fault)}
		}
		if err != nil && stopped {
			e := *asCellError(err)
			if e.Kind != CompileError {
				err = &CellError{Kind: Interrupted, Message: "the cell was interrupted", Places: e.Places, Cause: err}
			}
		}
		if err == nil && res == nil {
			res = &Result{}
		}
	}()
	return s.runCell(ctx, c)
}

// expressions evaluates the user expressions of an execute request.
func (s *Server) expressions(exprs map[string]string) map[string]any {
	out := map[string]any{}
	names := make([]string, 0, len(exprs))
	for n := range exprs {
		names = append(names, n)
	}
	sort.Strings(names)
	for _, n := range names {
		res, err := s.run(Cell{Code: exprs[n]})
		if err != nil {
			e := asCellError(err)
			out[n] = failure(e.Kind, e.Message, traceback(e))
			continue
		}
		out[n] = map[string]any{"status": "ok", "data": s.encodable(res.Forms), "metadata": orEmpty(res.Metadata)}
	}
	return out
}

func orEmpty(m map[string]any) map[string]any {
	if m == nil {
		return map[string]any{}
	}
	return m
}

// asCellError gives every error a kind.
func asCellError(err error) *CellError {
	var e *CellError
	if errors.As(err, &e) {
		return e
	}
	if errors.Is(err, context.Canceled) {
		return &CellError{Kind: Interrupted, Message: "the cell was interrupted", Cause: err}
	}
	return &CellError{Kind: CellFailed, Message: err.Error(), Cause: err}
}

// traceback writes an error for the front end: its kind and message, then where it happened.
func traceback(e *CellError) []string {
	lines := []string{"\x1b[31m" + e.Kind + "\x1b[0m: " + e.Message}
	for i, p := range e.Places {
		if i == 20 && len(e.Places) > 24 {
			lines = append(lines, fmt.Sprintf("    … %d more", len(e.Places)-i))
			break
		}
		if at := p.String(); at != "" {
			lines = append(lines, "    at "+at)
		}
	}
	return lines
}

// encodable leaves out the forms that JSON or a message can't hold, and says so on standard error.
func (s *Server) encodable(forms map[string]any) map[string]any {
	out := make(map[string]any, len(forms))
	room := s.sign.most - besides
	for _, mime := range slices.Sorted(maps.Keys(forms)) {
		data, err := encoded(forms[mime])
		if err == nil && len(data) > room {
			err = fmt.Errorf("it has %d bytes as JSON, and %d are left in the message", len(data), room)
		}
		if err != nil {
			fmt.Fprintf(os.Stderr, "the form %s can't be sent: %v\n", mime, err)
			continue
		}
		room -= len(data)
		out[mime] = forms[mime]
	}
	s.stream.flush()
	return out
}

// encoded is a value as a message holds it.
func encoded(v any) ([]byte, error) {
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	err := enc.Encode(v)
	return bytes.TrimRight(b.Bytes(), "\n"), err
}

// display publishes forms at once, after everything printed before.
func (s *Server) display(forms map[string]any, id string, update bool) {
	s.stream.flush()
	transient := map[string]any{}
	if id != "" {
		transient["display_id"] = id
	}
	kind := "display_data"
	if update {
		kind = "update_display_data"
	}
	s.publish(kind, s.outputParent(), map[string]any{
		"data": s.encodable(forms), "metadata": map[string]any{}, "transient": transient,
	})
}

// hostCells gives pkg/cell its surroundings.
func (s *Server) hostCells() (restore func()) {
	return cell.SetHost(&cell.Host{
		Context: func() context.Context {
			s.mu.Lock()
			defer s.mu.Unlock()
			return s.cellCtx
		},
		Display: s.display,
		Clear: func(wait bool) {
			s.stream.flush()
			s.publish("clear_output", s.outputParent(), map[string]any{"wait": wait})
		},
		Fail:  func(err error) { panic(cell.Failure{Err: err}) },
		Input: s.input,
	})
}

// input asks the front end for a line.
func (s *Server) input(prompt string, password bool) (string, error) {
	s.mu.Lock()
	m, ctx := s.askStdin, s.cellCtx
	s.mu.Unlock()
	if m == nil || ctx == nil {
		return "", errors.New("this front end takes no input for a cell")
	}
	s.stream.flush()
	for drained := false; !drained; { // replies to questions of interrupted cells
		select {
		case <-s.inputs:
		default:
			drained = true
		}
	}
	frames, _, err := s.sign.encode(m.Identities, "input_request", m.RawHeader, map[string]any{"prompt": prompt, "password": password})
	if err != nil {
		return "", err
	}
	if err := s.cfg.Sockets.Stdin.SendMulti(zmq4.NewMsgFrom(frames...)); err != nil {
		return "", err
	}
	select {
	case reply := <-s.inputs:
		var c struct {
			Value string `json:"value"`
		}
		if err := json.Unmarshal(reply.Content, &c); err != nil {
			return "", fmt.Errorf("input reply: %w", err)
		}
		return c.Value, nil
	case <-ctx.Done():
		return "", ctx.Err()
	}
}
