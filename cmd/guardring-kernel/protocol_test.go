package main_test

import (
	"context"
	"encoding/json"
	"reflect"
	"strings"
	"sync"
	"testing"
	"unicode/utf8"

	"example.org/guardring/pkg/kernel"
)

// ask sends a request on the shell socket and returns the content of the reply.
func (s *session) ask(msgType string, content any) map[string]any {
	s.t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	m, err := s.c.Request(ctx, msgType, content)
	if err != nil {
		s.t.Fatalf("%s: %v\n%s", msgType, err, s.log)
	}
	if want := strings.TrimSuffix(msgType, "_request") + "_reply"; m.Header.Type != want {
		s.t.Errorf("%s is answered by %s", msgType, m.Header.Type)
	}
	var c map[string]any
	if err := json.Unmarshal(m.Content, &c); err != nil {
		s.t.Fatalf("%s: %v", msgType, err)
	}
	return c
}

func TestKernelInfo(t *testing.T) {
	s := start(t)
	c := s.ask("kernel_info_request", map[string]any{})
	lang, _ := c["language_info"].(map[string]any)
	if c["status"] != "ok" || c["protocol_version"] != "5.3" || c["implementation"] != "guardring" ||
		lang["name"] != "go" || lang["mimetype"] != "text/x-go" || lang["file_extension"] != ".go" ||
		lang["pygments_lexer"] != "go" || lang["codemirror_mode"] != "text/x-go" {
		t.Errorf("kernel_info_reply: %v", c)
	}
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	go s.c.Execute(ctx, "for { }", kernel.ExecuteOptions{})
	if m, err := s.c.Control(ctx, "kernel_info_request", map[string]any{}); err != nil || m.Header.Type != "kernel_info_reply" {
		t.Errorf("kernel_info on the control socket while a cell runs: %v %v", m, err)
	}
}

func TestIsComplete(t *testing.T) {
	s := start(t)
	for code, want := range map[string]string{
		"1+1": "complete", "x := 3": "complete", "func f() {\n\treturn\n}": "complete", "import \"fmt\"": "complete",
		"": "complete", "// note": "complete", "`raw`": "complete", "func() int { return 1 }()": "complete", "type T struct{ A int }": "complete",
		"for i := 0; i < 3; i++ {": "incomplete", "f(1,": "incomplete", "x :=": "incomplete", "1 +": "incomplete",
		"`raw": "incomplete", "/* note": "incomplete", "if x {\n\ty": "incomplete", "import (": "incomplete",
		"f(1))": "invalid", "x := := 3": "invalid", "\"text": "invalid", "func 3() {}": "invalid", "{]": "invalid",
	} {
		if c := s.ask("is_complete_request", map[string]any{"code": code}); c["status"] != want {
			t.Errorf("%q is %v, want %s", code, c["status"], want)
		}
	}
	if c := s.ask("is_complete_request", map[string]any{"code": "func f() {\n\tif a {"}); c["indent"] != "\t\t" {
		t.Errorf("indent %q, want two tabs", c["indent"])
	}
}

func TestCompletion(t *testing.T) {
	s := start(t)
	s.ok(`import ("fmt"; "strings"; "time"; "gonum.org/v1/gonum/mat"; "os")
type Inner struct{ Depth float64; Label string }
func (i *Inner) Move(by float64) {}
type Outer struct { Inner; Near *Inner; List []Inner; Table map[string]Inner }
var outer Outer
func make1() (*Inner, error) { return nil, nil }
voltage, volume := 1.0, 2
dense := mat.NewDense(1, 1, nil)`)
	for _, test := range []struct {
		code string // | is the cursor
		want string // matches, joined
		all  bool   // want lists all
	}{
		{"vol|", "voltage volume", true},
		{"volt|", "voltage", true},
		{"strings.Cont|", "Contains ContainsAny ContainsRune", false},
		{"strings.ToUpper(x); strings.ToL|", "ToLower", false},
		{"outer.|", "Depth Inner Label List Move Near Table", true},
		{"outer.Near.|", "Depth Label Move", true},
		{"outer.Near.D|", "Depth", true},
		{"outer.List[0].|", "Depth Label Move", true},
		{"outer.Table[\"a)\"].L|", "Label", true},
		{"make1().|", "Depth Label Move", true},
		{"dense.T().Di|", "Dims", true},
		{"dense.RawM|", "RawMatrix", true},
		{"dense.RawMatrix().|", "Cols Data From Rows Stride", true},
		{"time.Now().Add(3).Uni|", "Unix UnixMicro UnixMilli UnixNano", true},
		{"\"µ±µ\" + strings.Cont| + \"µ\"", "Contains ContainsAny ContainsRune", false},
		{"// a µ\nx := outer.Near.|\ny", "Depth Label Move", true},
		{"fmt.Println(outer.|)", "Depth Inner Label List Move Near Table", true},
		{"for _, o := range outer.L|", "Label List", true},
		{"\"in a text vol|\"", "", true},
		{"// in a comment vol|", "", true},
		{"nosuch.|", "", true},
		{"1.|", "", true},
		{"ret|", "return", true},
		{"os.Stdi|", "Stdin", true},
		{"(outer).De|", "Depth", true},
		{"outer.Near.|Depth", "Depth Label Move", true},
	} {
		before, after, _ := strings.Cut(test.code, "|")
		c := s.ask("complete_request", map[string]any{"code": before + after, "cursor_pos": utf8.RuneCountInString(before)})
		var got []string
		for _, m := range c["matches"].([]any) {
			got = append(got, m.(string))
		}
		want := strings.Fields(test.want)
		if test.all && strings.Join(got, " ") != test.want {
			t.Errorf("%q: %v, want %v", test.code, got, want)
		}
		for _, w := range want {
			if !strings.Contains(" "+strings.Join(got, " ")+" ", " "+w+" ") {
				t.Errorf("%q: %v lacks %s", test.code, got, w)
			}
		}
		start, end := int(c["cursor_start"].(float64)), int(c["cursor_end"].(float64))
		if end != utf8.RuneCountInString(before) || start > end {
			t.Errorf("%q: replaces %d to %d, the cursor is at %d", test.code, start, end, utf8.RuneCountInString(before))
		}
		if len(got) > 0 {
			typed := string([]rune(before)[start:end])
			if !strings.HasPrefix(got[0], typed) {
				t.Errorf("%q: %q would be replaced by %q", test.code, typed, got[0])
			}
		}
	}
}

func TestInspection(t *testing.T) {
	s := start(t)
	s.ok(`import ("fmt"; "strings"; "gonum.org/v1/gonum/mat"; "gonum.org/v1/gonum/stat"; "gonum.org/v1/plot"; "example.org/guardring/pkg/cell")
reading := 42.5
dense := mat.NewDense(1, 1, nil)
pl := plot.New()
func area(r float64) float64 { return r*r }`)
	for _, test := range []struct {
		code   string
		detail int
		want   []string
	}{
		{"stat.Mean|", 0, []string{"func Mean(x, weights []float64) float64", "weighted mean"}},
		{"stat.Mean(|", 0, []string{"func Mean(x, weights []float64) float64"}},
		{"stat.Mean(reading, |", 0, []string{"func Mean("}},
		{"y := stat.Me|an(x, nil)", 0, []string{"func Mean("}},
		{"dense.Mul|", 0, []string{"func (m *Dense) Mul(a, b Matrix)", "Mul takes the matrix product"}},
		{"mat.Dense|", 0, []string{"type Dense struct", "dense matrix"}},
		{"mat|", 0, []string{"package mat", "gonum.org/v1/gonum/mat"}},
		{"mat|", 1, []string{"NewDense"}},
		{"reading|", 0, []string{"var reading float64"}},
		{"reading|", 1, []string{"Now: 42.5"}},
		{"area|", 0, []string{"func area(", "float64"}},
		{"\"µ±\" + strings.Contains|", 0, []string{"func Contains(s, substr string) bool", "reports whether substr"}},
		{"fmt.Println|", 0, []string{"func Println(a ...any)", "standard output"}},
		{"pl.Title|", 0, []string{"Title"}},
		{"cell.Report|", 0, []string{"func Report(ctx context.Context, label string, done, total int64)"}},
		{"dense|", 1, []string{"*mat.Dense", "RawMatrix"}},
	} {
		before, after, _ := strings.Cut(test.code, "|")
		c := s.ask("inspect_request", map[string]any{"code": before + after, "cursor_pos": utf8.RuneCountInString(before), "detail_level": test.detail})
		data, _ := c["data"].(map[string]any)
		text, _ := data["text/plain"].(string)
		for _, w := range test.want {
			if c["found"] != true || !strings.Contains(text, w) {
				t.Errorf("%q at level %d: found %v, %q lacks %q", test.code, test.detail, c["found"], text, w)
			}
		}
		if data["text/html"] == nil {
			t.Errorf("%q: no HTML form", test.code)
		}
	}
	for _, code := range []string{"nosuch|", "1 + |", "// stat.Mean|", "|"} {
		before, after, _ := strings.Cut(code, "|")
		if c := s.ask("inspect_request", map[string]any{"code": before + after, "cursor_pos": utf8.RuneCountInString(before), "detail_level": 0}); c["found"] != false || c["status"] != "ok" {
			t.Errorf("%q: %v", code, c)
		}
	}
}

func TestHistory(t *testing.T) {
	s := start(t)
	for _, code := range []string{"1+1", "2+2", "x := 3", "1+1"} {
		s.ok(code)
	}
	s.run("\"unseen\"", kernel.ExecuteOptions{NoHistory: true})
	s.run("\"silent\"", kernel.ExecuteOptions{Silent: true})
	for _, test := range []struct {
		request map[string]any
		want    string
	}{
		{map[string]any{"hist_access_type": "tail", "n": 2, "output": false, "raw": true}, `[[1,3,"x := 3"],[1,4,"1+1"]]`},
		{map[string]any{"hist_access_type": "tail", "n": 2, "output": true, "raw": true}, `[[1,3,["x := 3",null]],[1,4,["1+1","2"]]]`},
		{map[string]any{"hist_access_type": "range", "session": 0, "start": 1, "stop": 3, "output": false, "raw": true}, `[[1,1,"1+1"],[1,2,"2+2"]]`},
		{map[string]any{"hist_access_type": "range", "session": 7, "start": 1, "stop": 3, "output": false, "raw": true}, `[]`},
		{map[string]any{"hist_access_type": "search", "pattern": "*+*", "n": 9, "output": false, "raw": true}, `[[1,1,"1+1"],[1,2,"2+2"],[1,4,"1+1"]]`},
		{map[string]any{"hist_access_type": "search", "pattern": "?+?", "unique": true, "output": false, "raw": true}, `[[1,2,"2+2"],[1,4,"1+1"]]`},
	} {
		c := s.ask("history_request", test.request)
		got, err := json.Marshal(c["history"])
		if err != nil {
			t.Fatal(err)
		}
		if string(got) != test.want || c["status"] != "ok" {
			t.Errorf("%v: %s, want %s", test.request, got, test.want)
		}
	}
}

func TestCommInfo(t *testing.T) {
	s := start(t)
	if c := s.ask("comm_info_request", map[string]any{}); c["status"] != "ok" || !reflect.DeepEqual(c["comms"], map[string]any{}) {
		t.Errorf("comm_info_reply: %v", c)
	}
}

func TestExecuteFlags(t *testing.T) {
	s := start(t)
	e := s.run("x := 5\nx", kernel.ExecuteOptions{UserExpressions: map[string]string{"double": "x*2", "bad": "nosuch"}})
	double, _ := e.UserExpressions["double"].(map[string]any)
	bad, _ := e.UserExpressions["bad"].(map[string]any)
	data, _ := double["data"].(map[string]any)
	if double["status"] != "ok" || data["text/plain"] != "10" || bad["status"] != "error" || bad["ename"] != kernel.CompileError {
		t.Errorf("user expressions: %v", e.UserExpressions)
	}
	if e.Count != 1 {
		t.Errorf("the first cell has number %d", e.Count)
	}
	types := map[string]int{}
	e = s.run("x = 6\nx", kernel.ExecuteOptions{Silent: true, Message: func(m *kernel.Message) { types[m.Header.Type]++ }})
	if e.Count != 1 || !reflect.DeepEqual(types, map[string]int{"status": 2}) {
		t.Errorf("a silent cell has number %d and publishes %v", e.Count, types)
	}
	types = map[string]int{}
	e = s.run("x", kernel.ExecuteOptions{NoHistory: true, Message: func(m *kernel.Message) { types[m.Header.Type]++ }})
	if e.Count != 1 || e.Result() != "6" || types["execute_input"] != 1 {
		t.Errorf("a cell outside the history has number %d, value %q, messages %v", e.Count, e.Result(), types)
	}
	if e := s.ok("x"); e.Count != 2 {
		t.Errorf("the second counted cell has number %d", e.Count)
	}
}

func TestErrorsAbortTheQueue(t *testing.T) {
	s := start(t)
	s.ok("import \"time\"\nran := 0")
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	both := func(opt kernel.ExecuteOptions) []string {
		cells := []string{"time.Sleep(100*time.Millisecond)\npanic(\"x\")", "ran++", "ran++"}
		status := make([]string, len(cells))
		var wg sync.WaitGroup
		for i, code := range cells {
			wg.Add(1)
			started := make(chan struct{})
			go func() {
				defer wg.Done()
				close(started)
				e, err := s.c.Execute(ctx, code, opt)
				if err != nil {
					t.Error(err)
					return
				}
				status[i] = e.Status
			}()
			<-started
			// requests leave in order
			sleepShort()
		}
		wg.Wait()
		return status
	}
	if got := both(kernel.ExecuteOptions{}); !reflect.DeepEqual(got, []string{"error", "aborted", "aborted"}) {
		t.Errorf("cells behind a failed one: %v", got)
	}
	s.value("ran", "0")
	if got := both(kernel.ExecuteOptions{GoOn: true}); !reflect.DeepEqual(got, []string{"error", "ok", "ok"}) {
		t.Errorf("cells behind a failed one that does not stop: %v", got)
	}
	s.value("ran", "2")
	s.fails("panic(1)", kernel.Panicked, "1", "line 1")
	s.value("ran", "2") // sent after the error was seen: not aborted
}
