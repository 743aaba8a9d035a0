package kernel

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"unicode/utf8"
)

// noFiles is an empty documentation index.
type noFiles struct{}

func (noFiles) Open(name string) (fs.File, error) {
	return nil, &fs.PathError{Op: "open", Path: name, Err: fs.ErrNotExist}
}

// answer handles one request of the shell queue.
func (s *Server) answer(r *request) {
	m := r.msg
	if m.Header.Type == "shutdown_request" {
		s.status(m, "busy")
		defer s.status(m, "idle")
		s.shutdown(s.cfg.Sockets.Shell, m)
		return
	}
	handle := map[string]func(*request) error{
		"kernel_info_request": s.answerInfo, "execute_request": s.execute, "is_complete_request": s.answerIsComplete,
		"complete_request": s.answerComplete, "inspect_request": s.answerInspect, "history_request": s.answerHistory,
		"comm_info_request": s.answerCommInfo, "comm_open": s.refuseComm, "comm_msg": s.ignore, "comm_close": s.ignore,
		"interrupt_request": s.answerInterrupt,
	}[m.Header.Type]
	if handle == nil {
		s.drops.add("shell", fmt.Sprintf("unknown message type %q", m.Header.Type))
		return
	}
	s.status(m, "busy")
	defer s.status(m, "idle")
	s.guarded(m.Header.Type, func() {
		done := false
		defer func() {
			if !done { // a fault of ours: the front end still gets its answer, the fault goes on to be counted
				s.reply(s.cfg.Sockets.Shell, m, replyType(m.Header.Type), failure(Panicked, "a fault in the kernel, see its standard error", nil))
			}
		}()
		if err := handle(r); err != nil {
			s.refuse(s.cfg.Sockets.Shell, m, err)
		}
		done = true
	})
}

func (s *Server) answerInfo(r *request) error {
	s.reply(s.cfg.Sockets.Shell, r.msg, "kernel_info_reply", s.info())
	return nil
}

func (s *Server) answerInterrupt(r *request) error {
	s.reply(s.cfg.Sockets.Shell, r.msg, "interrupt_reply", map[string]any{"status": "ok"})
	return nil
}

// place is what requests about a position in code hold.
type place struct {
	Code   *string `json:"code"`
	Cursor *int    `json:"cursor_pos"`
	Detail int     `json:"detail_level"`
}

func decodePlace(m *Message) (code string, cursor, detail int, err error) {
	var p place
	if err := json.Unmarshal(m.Content, &p); err != nil {
		return "", 0, 0, err
	}
	if p.Code == nil {
		return "", 0, 0, errors.New("code is missing")
	}
	n := utf8.RuneCountInString(*p.Code)
	cursor = n
	if p.Cursor != nil {
		cursor = *p.Cursor
	}
	if cursor < 0 || cursor > n {
		return "", 0, 0, fmt.Errorf("cursor_pos %d is outside the code of %d characters", cursor, n)
	}
	if p.Detail < 0 || p.Detail > 1 {
		return "", 0, 0, fmt.Errorf("detail_level %d, expected 0 or 1", p.Detail)
	}
	return *p.Code, cursor, p.Detail, nil
}

func (s *Server) answerIsComplete(r *request) error {
	code, _, _, err := decodePlace(r.msg)
	if err != nil {
		return err
	}
	status, indent := IsComplete(s.in, code)
	content := map[string]any{"status": status}
	if status == "incomplete" {
		content["indent"] = indent
	}
	s.reply(s.cfg.Sockets.Shell, r.msg, "is_complete_reply", content)
	return nil
}

func (s *Server) answerComplete(r *request) error {
	code, cursor, _, err := decodePlace(r.msg)
	if err != nil {
		return err
	}
	matches, start, end := Complete(s.in, code, cursor)
	texts := make([]string, len(matches))
	types := make([]map[string]any, len(matches))
	for i, m := range matches {
		texts[i] = m.Text
		types[i] = map[string]any{"start": start, "end": end, "text": m.Text, "type": m.Kind, "signature": m.Type}
	}
	s.reply(s.cfg.Sockets.Shell, r.msg, "complete_reply", map[string]any{
		"status": "ok", "matches": texts, "cursor_start": start, "cursor_end": end,
		"metadata": map[string]any{"_jupyter_types_experimental": types},
	})
	return nil
}

func (s *Server) answerInspect(r *request) error {
	code, cursor, detail, err := decodePlace(r.msg)
	if err != nil {
		return err
	}
	forms, found := Inspect(s.in, s.cfg.Docs, code, cursor, detail)
	if forms == nil {
		forms = map[string]any{}
	}
	s.reply(s.cfg.Sockets.Shell, r.msg, "inspect_reply", map[string]any{
		"status": "ok", "found": found, "data": forms, "metadata": map[string]any{},
	})
	return nil
}

func (s *Server) answerHistory(r *request) error {
	var c struct {
		Output  bool   `json:"output"`
		Type    string `json:"hist_access_type"`
		Session int    `json:"session"`
		Start   int    `json:"start"`
		Stop    *int   `json:"stop"`
		N       *int   `json:"n"`
		Pattern string `json:"pattern"`
		Unique  bool   `json:"unique"`
	}
	if err := json.Unmarshal(r.msg.Content, &c); err != nil {
		return err
	}
	var found []entry
	n := 0
	if c.N != nil {
		n = *c.N
	}
	switch c.Type {
	case "tail":
		found = s.history.tail(n)
	case "range":
		stop := 0
		if c.Stop != nil {
			stop = *c.Stop
		}
		found = s.history.between(c.Session, c.Start, stop)
	case "search":
		pattern := c.Pattern
		if pattern == "" {
			pattern = "*"
		}
		found = s.history.search(pattern, n, c.Unique)
	default:
		return fmt.Errorf("hist_access_type %q, expected tail, range or search", c.Type)
	}
	s.reply(s.cfg.Sockets.Shell, r.msg, "history_reply", map[string]any{"status": "ok", "history": rows(found, c.Output)})
	return nil
}

func (s *Server) answerCommInfo(r *request) error {
	s.reply(s.cfg.Sockets.Shell, r.msg, "comm_info_reply", map[string]any{"status": "ok", "comms": map[string]any{}})
	return nil
}

// refuseComm closes a comm that the front end opens: the kernel has no targets. The protocol asks for comm_close.
func (s *Server) refuseComm(r *request) error {
	var c struct {
		ID string `json:"comm_id"`
	}
	if err := json.Unmarshal(r.msg.Content, &c); err != nil {
		s.drops.add("shell", fmt.Errorf("comm_open: %w", err))
		return nil
	}
	s.publish("comm_close", r.msg.RawHeader, map[string]any{"comm_id": c.ID, "data": map[string]any{}})
	return nil
}

func (s *Server) ignore(*request) error { return nil }
