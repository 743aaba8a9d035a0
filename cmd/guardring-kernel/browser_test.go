package main_test

import (
	"context"
	"encoding/json"
	"fmt"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"

	"example.org/guardring/pkg/kernel"
)

// TestBrowser works in a notebook as a person does: in a real browser, on Debian's Jupyter Notebook 6.
func TestBrowser(t *testing.T) {
	if os.Getenv("GUARDRING_BROWSER") == "" {
		t.Skip("GUARDRING_BROWSER is not set: needs Jupyter Notebook 6 and Chromium, which .ci/run installs")
	}
	needKernel(t)
	shots := os.Getenv("GUARDRING_SCREENSHOTS") // a folder to keep the pictures in
	if shots == "" {
		shots = t.TempDir()
	}
	url := startNotebook(t, map[string][]byte{"check.ipynb": checkNotebook(t)}) + "check.ipynb?token=" + notebookToken
	ctx := startBrowser(t)

	step := func(name string, actions ...chromedp.Action[chromedp.Void]) {
		t.Helper()
		if err := chromedp.Do(ctx, actions...); err != nil {
			shot(t, ctx, shots, "failed-"+name)
			t.Fatalf("%s: %v", name, err)
		}
		shot(t, ctx, shots, name)
	}
	step("open", chromedp.Navigate(url), idle)
	step("run-all", chromedp.Evaluate[chromedp.Void](`Jupyter.notebook.execute_all_cells()`),
		until(`document.querySelectorAll(".output_html table td").length === 4`),
		until(`document.querySelector(".output_svg svg") !== null`),
		until(`Array.from(document.querySelectorAll(".output_html progress")).some(p => p.value === 100)`),
		until(`document.body.innerText.includes("trials: 60 of 60 (100 %)")`), idle)
	step("tooltip", newCell("stat.Mean"), chromedp.KeyEvent("\t", chromedp.KeyModifiers(kb.ModifierShift)),
		until(`document.querySelector("#tooltip") !== null && document.querySelector("#tooltip").style.display !== "none" && document.querySelector("#tooltip").innerText.includes("func Mean(x, weights []float64) float64")`),
		chromedp.Sleep(500*time.Millisecond)) // it fades in
	step("complete", chromedp.KeyEvent("\u001b"), newCell("plate_volt"), chromedp.KeyEvent("\t"),
		until(`Jupyter.notebook.get_selected_cell().get_text() === "plate_voltage"`))
	step("complete-list", newCell("gaps."), chromedp.KeyEvent("\t"),
		until(`document.querySelector("#complete select") !== null && document.querySelector("#complete select").innerText.includes("Dims")`))
	step("interrupt", chromedp.KeyEvent("\u001b"), newCell("for { }"), chromedp.Evaluate[chromedp.Void](`Jupyter.notebook.execute_cell()`),
		until(`document.querySelector("#kernel_indicator_icon.kernel_busy_icon") !== null`), chromedp.Sleep(200*time.Millisecond),
		chromedp.Click(chromedp.CSS(`button[data-jupyter-action="jupyter-notebook:interrupt-kernel"]`)),
		until(`document.body.innerText.includes("Interrupted: the cell was interrupted")`), idle)
	step("alive", newCell("plate_voltage * 2"), chromedp.Evaluate[chromedp.Void](`Jupyter.notebook.execute_cell()`),
		until(`Array.from(document.querySelectorAll(".output_result")).some(o => o.innerText.trim() === "8400")`))
	step("restart", chromedp.Evaluate[chromedp.Void](`Jupyter.notebook.restart_kernel({confirm: false}); null`), chromedp.Sleep(time.Second), idle,
		newCell("plate_voltage"), chromedp.Evaluate[chromedp.Void](`Jupyter.notebook.execute_cell()`),
		until(`document.body.innerText.includes("undefined: plate_voltage")`),
		newCell("20 + 3"), chromedp.Evaluate[chromedp.Void](`Jupyter.notebook.execute_cell()`),
		until(`Array.from(document.querySelectorAll(".output_result")).some(o => o.innerText.trim() === "23")`))
}

// idle waits until the kernel of the page is connected and does nothing.
var idle = until(`typeof Jupyter !== "undefined" && Jupyter.notebook && Jupyter.notebook.kernel && Jupyter.notebook.kernel.is_connected() && !Jupyter.notebook.kernel_busy && document.querySelector("#kernel_indicator_icon.kernel_idle_icon") !== null`)

// notebookToken lets the browser in.
const notebookToken = "c0ffee0123456789"

// newCell adds a cell at the end, with the cursor behind its text, as if it had been typed.
func newCell(text string) chromedp.Action[chromedp.Void] {
	quoted, err := json.Marshal(text)
	if err != nil {
		return chromedp.Func(func(context.Context, *chromedp.Target) error { return err })
	}
	js := fmt.Sprintf(`(() => {
		const n = Jupyter.notebook, c = n.insert_cell_at_bottom("code");
		n.select(n.ncells() - 1); n.edit_mode();
		c.set_text(%s); c.code_mirror.focus(); c.code_mirror.execCommand("goDocEnd");
		c.element[0].scrollIntoView();
		return null;
	})()`, quoted)
	return chromedp.Evaluate[chromedp.Void](js)
}

// until waits until a JavaScript expression is true.
func until(js string) chromedp.Action[chromedp.Void] {
	return func(ctx context.Context, target *chromedp.Target) (chromedp.Void, error) {
		for begin := time.Now(); time.Since(begin) < 30*time.Second; {
			ok, err := chromedp.Evaluate[bool]("Boolean("+js+")")(ctx, target)
			if err != nil {
				return chromedp.Void{}, fmt.Errorf("%s: %w", js, err)
			}
			if ok {
				return chromedp.Void{}, nil
			}
			if _, err := chromedp.Sleep(50*time.Millisecond)(ctx, target); err != nil {
				return chromedp.Void{}, err
			}
		}
		return chromedp.Void{}, fmt.Errorf("not within 30 s: %s", js)
	}
}

func shot(t *testing.T, ctx context.Context, dir, name string) {
	t.Helper()
	png, err := chromedp.Run(ctx, chromedp.CaptureScreenshot())
	if err != nil {
		t.Logf("no screenshot of %s: %v", name, err)
		return
	}
	if err := os.WriteFile(filepath.Join(dir, name+".png"), png, 0o644); err != nil {
		t.Error(err)
	}
}

// checkNotebook is a notebook with a table, a figure and progress.
func checkNotebook(t *testing.T) []byte {
	t.Helper()
	cells := []string{
		"import (\n\t\"gonum.org/v1/gonum/mat\"\n\t\"gonum.org/v1/gonum/stat\"\n\t\"gonum.org/v1/plot\"\n\t\"gonum.org/v1/plot/plotter\"\n\t\"time\"\n\n\t\"example.org/guardring/pkg/cell\"\n)\nplate_voltage := 4200.0\nstat.Mean([]float64{4198, 4202}, nil)",
		"gaps := mat.NewDense(2, 2, []float64{4, 6, 8, 10})\ngaps",
		"p := plot.New()\np.Title.Text = \"Capacitance over gap\"\np.X.Label.Text = \"d/mm\"\np.Y.Label.Text = \"C/pF\"\nline, err := plotter.NewLine(plotter.XYs{{X: 4, Y: 17.4}, {X: 6, Y: 11.6}, {X: 8, Y: 8.7}, {X: 12, Y: 5.8}})\nif err != nil { cell.Fail(err) }\np.Add(line)\np",
		"for i := 1; i <= 60; i++ {\n\tcell.Report(cell.Context(), \"trials\", int64(i), 60)\n\ttime.Sleep(10 * time.Millisecond)\n}",
	}
	var nb struct {
		Cells    []map[string]any `json:"cells"`
		Metadata map[string]any   `json:"metadata"`
		Format   int              `json:"nbformat"`
		Minor    int              `json:"nbformat_minor"`
	}
	nb.Format, nb.Minor = 4, 5
	nb.Metadata = map[string]any{"kernelspec": map[string]any{"name": kernel.KernelName, "display_name": kernel.DisplayName, "language": "go"}}
	for i, c := range cells {
		nb.Cells = append(nb.Cells, map[string]any{"cell_type": "code", "id": fmt.Sprintf("c%d", i), "metadata": map[string]any{}, "outputs": []any{}, "execution_count": nil, "source": c})
	}
	data, err := json.Marshal(nb)
	if err != nil {
		t.Fatal(err)
	}
	return data
}

// startNotebook installs the kernel into a folder of its own, starts Jupyter in a home with the files given, and
// returns the address under which it opens notebooks.
func startNotebook(t *testing.T, files map[string][]byte) string {
	t.Helper()
	jupyter, err := exec.LookPath("/usr/bin/jupyter-notebook")
	if err != nil {
		t.Fatalf("GUARDRING_BROWSER is set, but there is no Jupyter Notebook: %v", err)
	}
	dir := t.TempDir()
	source, err := kernel.FindSource("")
	if err != nil {
		t.Fatal(err)
	}
	if _, _, err := kernel.Install(context.Background(), source, kernel.Location{Prefix: dir}, "test", os.Stderr); err != nil {
		t.Fatal(err)
	}
	home := filepath.Join(dir, "home")
	for name, data := range files {
		path := filepath.Join(home, filepath.FromSlash(name))
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, data, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	port := l.Addr().(*net.TCPAddr).Port
	l.Close()
	cmd := exec.Command(jupyter, "--no-browser", "--allow-root", "--ip=127.0.0.1", fmt.Sprintf("--port=%d", port),
		"--NotebookApp.token="+notebookToken, "--notebook-dir="+home)
	cmd.Env = append(os.Environ(), "HOME="+home, "JUPYTER_PATH="+filepath.Join(dir, "share", "jupyter"),
		"JUPYTER_CONFIG_DIR="+filepath.Join(dir, "config"), "JUPYTER_DATA_DIR="+filepath.Join(dir, "data"), "JUPYTER_RUNTIME_DIR="+filepath.Join(dir, "run"))
	log := &logBuffer{}
	cmd.Stdout, cmd.Stderr = log, log
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = cmd.Process.Signal(os.Interrupt)
		_ = cmd.Process.Kill()
		_ = cmd.Wait()
		if t.Failed() {
			t.Logf("Jupyter said:\n%s", log)
		}
	})
	address := fmt.Sprintf("127.0.0.1:%d", port)
	for begin := time.Now(); ; time.Sleep(100 * time.Millisecond) {
		if c, err := net.Dial("tcp", address); err == nil {
			c.Close()
			break
		}
		if time.Since(begin) > 30*time.Second {
			t.Fatalf("Jupyter does not listen:\n%s", log)
		}
	}
	return "http://" + address + "/notebooks/"
}

func startBrowser(t *testing.T) context.Context {
	t.Helper()
	path := ""
	for _, p := range []string{"chromium", "chromium-browser", "google-chrome"} {
		if found, err := exec.LookPath(p); err == nil {
			path = found
			break
		}
	}
	if path == "" {
		t.Fatal("GUARDRING_BROWSER is set, but there is no Chromium in PATH")
	}
	opts := append(chromedp.DefaultExecAllocatorOptions[:], chromedp.ExecPath(path), chromedp.Flag("no-sandbox", true), chromedp.Flag("disable-gpu", true),
		chromedp.Flag("disable-quic", true), chromedp.Flag("disable-background-networking", true),
		chromedp.Flag("disable-component-update", true), chromedp.UserDataDir(t.TempDir()), chromedp.WindowSize(1100, 1000))
	alloc, cancelAlloc := chromedp.NewExecAllocator(context.Background(), opts...)
	t.Cleanup(cancelAlloc)
	ctx, cancel := chromedp.NewContext(alloc, chromedp.WithErrorf(func(format string, args ...any) {
		if msg := fmt.Sprintf(format, args...); !strings.Contains(msg, "could not unmarshal event") {
			t.Log(msg) // newer events than the library knows are no matter
		}
	}))
	t.Cleanup(cancel)
	if err := chromedp.Do(ctx); err != nil { // starts the browser
		t.Fatalf("starting %s: %v", path, err)
	}
	ctx, cancelTime := context.WithTimeout(ctx, 4*time.Minute)
	t.Cleanup(cancelTime)
	return ctx
}
