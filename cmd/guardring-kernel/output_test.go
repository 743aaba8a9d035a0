package main_test

import (
	"context"
	"encoding/json"
	"fmt"
	"strings"
	"sync"
	"testing"
	"time"

	"example.org/guardring/pkg/kernel"
)

func TestPrintedLinesArriveWholeAndInOrder(t *testing.T) {
	s := start(t)
	const n = 100000
	e := s.ok(fmt.Sprintf("import \"fmt\"\nfor i := 0; i < %d; i++ { fmt.Println(\"line\", i, \"µ±√\") }", n))
	lines := strings.Split(strings.TrimSuffix(e.Text("stdout"), "\n"), "\n")
	if len(lines) != n {
		t.Fatalf("%d lines arrived, %d were printed", len(lines), n)
	}
	for i, l := range lines {
		if want := fmt.Sprintf("line %d µ±√", i); l != want {
			t.Fatalf("line %d is %q, want %q", i, l, want)
		}
	}
}

func TestStreamsStreamLive(t *testing.T) {
	s := start(t)
	s.ok("import (\"fmt\"; \"time\"; \"os\"; \"log\")")
	var mu sync.Mutex
	var at []time.Duration
	begin := time.Now()
	s.run("for i := 0; i < 4; i++ { fmt.Print(i, \"\\r\"); time.Sleep(80*time.Millisecond) }", kernel.ExecuteOptions{Message: func(m *kernel.Message) {
		if m.Header.Type == "stream" {
			mu.Lock()
			at = append(at, time.Since(begin))
			mu.Unlock()
			if !strings.Contains(string(m.Content), `\r`) {
				t.Errorf("a carriage return got lost: %s", m.Content)
			}
		}
	}})
	if len(at) != 4 {
		t.Errorf("4 prints 80 ms apart came in %d messages at %v", len(at), at)
	}
	// Order between the streams, and between streams and displays.
	e := s.ok(`import "example.org/guardring/pkg/cell"
fmt.Println("one")
fmt.Fprintln(os.Stderr, "two")
fmt.Println("three")
log.SetFlags(0)
log.Print("four")
fmt.Print("five")
cell.Display("six")
fmt.Print("seven")
"eight"`)
	var order []string
	for _, o := range e.Outputs {
		order = append(order, o.Name+":"+strings.TrimSpace(o.Plain()))
	}
	if got, want := strings.Join(order, " "), "stdout:one stderr:two stdout:three stderr:four stdout:five :six stdout:seven :eight"; got != want {
		t.Errorf("outputs in the order\n%s, want\n%s", got, want)
	}
	// A rune in two writes, and bytes that are no UTF-8.
	e = s.ok("b := []byte(\"±\")\nos.Stdout.Write(b[:1])\ntime.Sleep(60*time.Millisecond)\nos.Stdout.Write(b[1:])\nos.Stdout.Write([]byte{0xff, 0, 'z'})\nb = nil")
	if got := e.Text("stdout"); got != "±\uFFFD\x00z" {
		t.Errorf("split and broken UTF-8 arrive as %q", got)
	}
	// What a goroutine prints after its cell belongs to that cell until the next one.
	s.ok("go func() { time.Sleep(30*time.Millisecond); fmt.Println(\"late\") }()")
	time.Sleep(80 * time.Millisecond)
	s.value("1", "1")
}

func TestDisplays(t *testing.T) {
	s := start(t)
	e := s.ok(`import ("example.org/guardring/pkg/cell"; "fmt")
cell.DisplayAs("a", map[string]interface{}{"text/html": "<b>1</b>", "text/plain": "1"})
cell.Display(2)
cell.Update("a", 3)`)
	if len(e.Outputs) != 2 || e.Outputs[0].Plain() != "3" || e.Outputs[1].Plain() != "2" {
		t.Errorf("display, display, update: %s", dump(e))
	}
	first := e
	s.ok("cell.Update(\"a\", 4)")
	if first.Outputs[0].Plain() != "4" {
		t.Error("an update in a later cell does not reach the display")
	}
	e = s.ok("fmt.Println(\"old\")\ncell.Clear(false)\nfmt.Println(\"new\")")
	if got := e.Text("stdout"); got != "new\n" {
		t.Errorf("after a clear: %q", got)
	}
	e = s.ok("fmt.Println(\"old\")\ncell.Clear(true)\nfmt.Println(\"new\")")
	if got := e.Text("stdout"); got != "new\n" {
		t.Errorf("after a clear that waits: %q", got)
	}
	e = s.fails("cell.Fail(fmt.Errorf(\"no readings in %s\", \"a.csv\"))", kernel.CellFailed, "no readings in a.csv", "line 1")
	if len(e.Traceback) != 2 {
		t.Errorf("an ordinary error has a stack: %q", e.Traceback)
	}
	e = s.ok("Display(display.HTML(\"<u>x</u>\"))")
	if len(e.Outputs) != 1 || e.Outputs[0].Data["text/html"] != "<u>x</u>" {
		t.Errorf("Display: %s", dump(e))
	}
	e = s.ok(`import "math"
cell.Display(map[string]interface{}{"application/json": math.NaN(), "text/plain": "kept"})`)
	if !strings.Contains(e.Text("stderr"), "application/json can't be sent") || !strings.Contains(dump(e), "kept") {
		t.Errorf("a form that JSON can't hold: %s", dump(e))
	}
	e = s.ok("display.PNG([]byte{1, 2, 3})")
	if len(e.Outputs) != 1 || e.Outputs[0].Data["image/png"] != "AQID" {
		t.Errorf("a PNG is not in base64: %s", dump(e))
	}
}

func TestProgress(t *testing.T) {
	s := start(t)
	updates := 0
	e := s.run(`import ("example.org/guardring/pkg/cell"; "time")
ctx := cell.Context()
for i := 1; i <= 400; i++ { cell.Report(ctx, "trials", int64(i), 400); time.Sleep(time.Millisecond) }`, kernel.ExecuteOptions{Message: func(m *kernel.Message) {
		if m.Header.Type == "update_display_data" {
			updates++
		}
	}})
	if len(e.Outputs) != 1 || e.Outputs[0].Plain() != "trials: 400 of 400 (100 %)" || !strings.Contains(dump(e), "progress value") {
		t.Errorf("a finished bar: %s", dump(e))
	}
	if updates < 2 || updates > 40 {
		t.Errorf("%d updates of a bar in 0.4 s or more", updates)
	}
	e = s.ok("cell.Report(cell.Context(), \"reading <files>\", 3, 0)")
	if len(e.Outputs) != 1 || e.Outputs[0].Plain() != "reading <files>: 3" || strings.Contains(dump(e), "<files>: 3</div>") {
		t.Errorf("a bar without an end: %s", dump(e))
	}
}

func dump(e *kernel.Execution) string {
	b, err := json.Marshal(e.Outputs)
	if err != nil {
		return err.Error()
	}
	return string(b) + " " + e.Status
}

func TestInput(t *testing.T) {
	s := start(t)
	answers := []string{"12.5 text", "a whole line", "third"}
	ask := func(prompt string, password bool) (string, error) {
		a := answers[0]
		answers = answers[1:]
		return a, nil
	}
	e := s.run(`import ("fmt"; "bufio"; "os"; "example.org/guardring/pkg/cell")
var v float64
var word string
n, err := fmt.Scanln(&v, &word)
sc := bufio.NewScanner(os.Stdin)
if !sc.Scan() { panic("no line") }
line, ierr := cell.Input("name? ")
fmt.Println(n, err, v, word, sc.Text(), line, ierr)`, kernel.ExecuteOptions{Input: ask})
	if got, want := e.Text("stdout"), "2 <nil> 12.5 text a whole line third <nil>\n"; got != want {
		t.Errorf("read %q, want %q (%s)", got, want, dump(e))
	}
	e = s.ok("_, nobody := cell.Input(\"?\")\nnobody.Error()")
	if !strings.Contains(e.Result(), "takes no input") {
		t.Errorf("without a front end that takes input: %s", dump(e))
	}
	// A cell that waits for input can be interrupted.
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	asked := make(chan struct{})
	done := make(chan *kernel.Execution, 1)
	go func() {
		e, err := s.c.Execute(ctx, "fmt.Scan(&word)", kernel.ExecuteOptions{Input: func(string, bool) (string, error) {
			close(asked)
			return "", context.Canceled
		}})
		if err != nil {
			t.Error(err)
		}
		done <- e
	}()
	<-asked
	if err := s.byMessage(); err != nil {
		t.Fatal(err)
	}
	if e := <-done; e == nil || e.EName != kernel.Interrupted {
		t.Errorf("interrupted while it asks: %+v", e)
	}
}
