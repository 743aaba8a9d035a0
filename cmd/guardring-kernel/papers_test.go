package main_test

import (
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"
)

// TestBrowserPapers opens three working papers in a browser, runs them, and looks at what a person sees: tables with
// units, figures, the tooltip of a verb, and text that can be read on a dark page.
func TestBrowserPapers(t *testing.T) {
	if os.Getenv("GUARDRING_BROWSER") == "" {
		t.Skip("GUARDRING_BROWSER is not set: needs Jupyter Notebook 6 and Chromium, which .ci/run installs")
	}
	needKernel(t)
	shots := os.Getenv("GUARDRING_SCREENSHOTS")
	if shots == "" {
		shots = t.TempDir()
	}
	files := map[string][]byte{}
	root := filepath.Join("..", "..")
	for _, dir := range []string{"notebooks", "datasets"} {
		err := filepath.WalkDir(filepath.Join(root, dir), func(path string, d fs.DirEntry, err error) error {
			if err != nil || d.IsDir() {
				return err
			}
			name, err := filepath.Rel(root, path)
			if err != nil {
				return err
			}
			files[filepath.ToSlash(name)], err = os.ReadFile(path)
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
	}
	base := startNotebook(t, files)
	ctx := startBrowser(t)
	for _, name := range []string{"attracted-disc", "uncertainty-budget", "three-laboratories"} {
		step := func(what string, actions ...chromedp.Action[chromedp.Void]) {
			t.Helper()
			if err := chromedp.Do(ctx, actions...); err != nil {
				shot(t, ctx, shots, "failed-"+name+"-"+what)
				t.Fatalf("%s: %s: %v", name, what, err)
			}
			shot(t, ctx, shots, name+"-"+what)
		}
		step("open", chromedp.Navigate(base+"notebooks/"+name+".ipynb?token="+notebookToken), idle)
		step("run-all", chromedp.Evaluate[chromedp.Void](`Jupyter.notebook.clear_all_output(); Jupyter.notebook.execute_all_cells(); null`),
			until(`Jupyter.notebook.get_cells().filter(c => c.cell_type === "code").every(c => typeof c.input_prompt_number === "number")`), idle)
		step("shown",
			until(`document.querySelectorAll(".output_error").length === 0`),
			until(`document.querySelectorAll(".output_html table td, .output_html table th").length > 20`),
			until(`document.querySelector(".output_svg svg, .output_html svg, .output_png img, .output_html img") !== null`))
		step("tooltip", newCell("lab.Open"), chromedp.KeyEvent("\t", chromedp.KeyModifiers(kb.ModifierShift)),
			until(`document.querySelector("#tooltip") !== null && document.querySelector("#tooltip").style.display !== "none" && document.querySelector("#tooltip").innerText.includes("func Open(")`),
			chromedp.KeyEvent("\u001b"))
		// A dark page: every cell of every table must keep a contrast of 4.5 to 1 (WCAG 2.1, 1.4.3) against it.
		// The last action leaves the page without a question about saving.
		step("dark", chromedp.Evaluate[chromedp.Void](strings.ReplaceAll(darkPage, "\n", " ")), until(darkContrast),
			chromedp.Evaluate[chromedp.Void](`Jupyter.notebook.set_dirty(false); window.onbeforeunload = null; null`))
	}
}

// darkPage turns the page dark as a theme does, by colours of the page and not of what cells show.
const darkPage = `(() => {
	const s = document.createElement("style");
	s.textContent = "body, #notebook, #notebook-container, div.cell, div.output_wrapper, div.output_area, div.output_subarea { background: #111 !important; color: #ddd; }";
	document.head.appendChild(s);
	return null;
})()`

// darkContrast is true when all text of tables can be read on the dark page.
const darkContrast = `(() => {
	const parse = c => (c.match(/[0-9.]+/g) || []).map(Number);
	const lin = v => { v /= 255; return v <= 0.03928 ? v / 12.92 : Math.pow((v + 0.055) / 1.055, 2.4); };
	const lum = c => 0.2126 * lin(c[0]) + 0.7152 * lin(c[1]) + 0.0722 * lin(c[2]);
	const back = e => { for (; e; e = e.parentElement) { const c = parse(getComputedStyle(e).backgroundColor); if (c.length === 3 || (c.length === 4 && c[3] > 0)) return c; } return [255, 255, 255]; };
	return Array.from(document.querySelectorAll(".output_html td, .output_html th")).filter(e => e.innerText.trim() !== "").every(e => {
		const a = lum(parse(getComputedStyle(e).color)), b = lum(back(e));
		return (Math.max(a, b) + 0.05) / (Math.min(a, b) + 0.05) >= 4.5;
	});
})()`
