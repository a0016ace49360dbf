package frontends

import (
	"context"
	_ "embed"
	"fmt"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
)

const (
	connected = `window.Jupyter && Jupyter.notebook && Jupyter.notebook.kernel && Jupyter.notebook.kernel.is_connected()`
	idle      = `Jupyter.notebook.get_cells().every(c => c.cell_type != 'code' || !c.element.find('.input_prompt').text().includes('*'))`
	figures   = `[...document.querySelectorAll('.output_area img, .output_area svg')].map(e => e.getBoundingClientRect().width)`
	last      = `Jupyter.notebook.get_cell(Jupyter.notebook.ncells() - 1).element`
	before    = `Jupyter.notebook.get_cell(Jupyter.notebook.ncells() - 2).element` // the cell before the last
)

// readable is JavaScript that measures a page: window.contrast(element) and window.opaque(picture).
//
//go:embed testdata/readable.js
var readable string

// dark turns the notebook's page dark, as a user's style sheet does.
//
//go:embed testdata/dark.css
var dark string

// appendCell adds a cell at the end of the notebook and runs it.
func appendCell(code string) chromedp.Action[chromedp.Void] {
	return script(fmt.Sprintf(`
		Jupyter.notebook.insert_cell_at_bottom('code').set_text(%q);
		Jupyter.notebook.select(Jupyter.notebook.ncells() - 1);
		Jupyter.notebook.execute_cell();`, code))
}

// openNotebook opens a copy of a notebook in the classic notebook that a program serves.
func openNotebook(t *testing.T, program, path string) context.Context {
	t.Helper()
	folder := t.TempDir()
	copyTo(t, folder, path)
	url := notebookServer(t, program, folder)
	ctx := browser(t, 3*time.Minute)
	name := path[strings.LastIndex(path, "/")+1:]
	do(t, ctx, "open the notebook", chromedp.Navigate(url+"/notebooks/"+name+"?token="+token), until(connected))
	return ctx
}

// TestClassicNotebook works in the classic notebook as its user does: run all, look at the figure, stop a cell with
// the interrupt button, restart.
func TestClassicNotebook(t *testing.T) {
	for _, program := range []string{"jupyter-notebook", "jupyter-nbclassic"} {
		t.Run(program, func(t *testing.T) {
			ctx := openNotebook(t, program, "testdata/session.ipynb")
			do(t, ctx, "run all cells", script(`Jupyter.notebook.execute_all_cells()`), until(figures+`.some(w => w > 50)`), until(idle))
			screenshot(t, ctx, program+"-run-all")
			if width := value[float64](t, ctx, `Math.max(...`+figures+`)`); width < 300 {
				t.Errorf("the inline figure is %.0f px wide", width)
			}
			if !value[bool](t, ctx, `[...document.querySelectorAll('.output_html')].some(e => e.innerText.includes('AMI'))`) {
				t.Error("no card of the code on the page")
			}

			do(t, ctx, "start an endless cell", appendCell("fmt.Println(\"runs\")\nfor {\n}"), until(last+`.find('.output_stdout').text().includes('runs')`))
			do(t, ctx, "press the interrupt button", chromedp.Click(`[data-jupyter-action='jupyter-notebook:interrupt-kernel']`),
				until(last+`.find('.output_error').length > 0`), until(idle))
			screenshot(t, ctx, program+"-interrupted")

			do(t, ctx, "restart the kernel", script(`
				Jupyter.notebook.events.one('kernel_ready.Kernel', () => window.restarted = true);
				Jupyter.notebook.kernel.restart()`), until(`window.restarted`), until(connected),
				appendCell(`fmt.Println("after the restart")`), until(last+`.find('.output_text').text().includes('after the restart')`))
			if got, want := value[string](t, ctx, last+`.find('.input_prompt').text()`), "In [1]:"; !strings.Contains(strings.ReplaceAll(got, "\u00a0", " "), want) {
				t.Errorf("the first cell after a restart is %q, want %q", got, want)
			}
		})
	}
}

// TestClassicPage looks at everything else that a cell puts on the classic notebook's page: a table, an error, a slot
// that is updated in place, a question; and at all of it on a dark page.
func TestClassicPage(t *testing.T) {
	ctx := openNotebook(t, "jupyter-notebook", "testdata/session.ipynb")
	do(t, ctx, "run all cells", script(`Jupyter.notebook.execute_all_cells()`), until(figures+`.some(w => w > 50)`), until(idle))

	do(t, ctx, "show a table", appendCell(`linecode.AMI().Levels()`), until(last+`.find('.output_html table').length > 0`), until(idle))
	if got := value[string](t, ctx, last+`.find('.output_html table').text()`); !strings.Contains(got, "3 numbers") || !strings.Contains(got, "-1") {
		t.Errorf("the table of AMI's levels lacks their number or -1: %q", got)
	}

	do(t, ctx, "fail", appendCell("a := uint8(1)\nb := \"x\"\na + b"), until(last+`.find('.output_error').length > 0`), until(idle))
	failure := value[string](t, ctx, last+`.find('.output_error').text()`)
	if !strings.Contains(failure, "a + b") || !strings.Contains(failure, "^") || strings.ContainsRune(failure, '\x1b') {
		t.Errorf("the error does not show its line with a caret in plain characters:\n%s", failure)
	}

	do(t, ctx, "set a slot", appendCell(`page.Slot("best").Set("one")`), until(last+`.find('.output_text').text().includes('one')`), until(idle))
	do(t, ctx, "set it again in another cell", appendCell(`page.Slot("best").Set("two")`), until(before+`.find('.output_text').text().includes('two')`), until(idle))
	if got := value[string](t, ctx, before+`.find('.output').text()`); strings.Contains(got, "one") {
		t.Errorf("the slot was added to, not updated: %q", got)
	}
	if got := value[string](t, ctx, last+`.find('.output').text()`); strings.TrimSpace(got) != "" {
		t.Errorf("the cell that updates a slot shows %q of its own", got)
	}

	do(t, ctx, "ask", appendCell(`fmt.Println("chosen:", page.Ask("candidate? "))`), until(last+`.find('input.raw_input').length > 0`),
		chromedp.SendKeys(`input.raw_input`, "HDB3\r"), until(last+`.find('.output_stdout').text().includes('chosen: HDB3')`), until(idle))
	screenshot(t, ctx, "classic-page")

	do(t, ctx, "turn the page dark", script(fmt.Sprintf(`document.head.appendChild(document.createElement('style')).textContent = %q`, dark)), script(readable))
	screenshot(t, ctx, "classic-dark")
	const lowest = 4.5 // WCAG 2.1, criterion 1.4.3: contrast of text that can be read
	for _, what := range []string{".output_html th", ".output_html td", ".output_html caption", ".output_stdout pre", ".output_error pre", ".output_text pre"} {
		if got := value[float64](t, ctx, fmt.Sprintf(`Math.min(...[...document.querySelectorAll(%q)].map(contrast))`, what)); !(got >= lowest && got <= 21) {
			t.Errorf("%s: contrast %.2g on a dark page, want at least %v", what, got, lowest)
		}
	}
	do(t, ctx, "look at the figure's background", script(`opaque(document.querySelector('.output_svg svg')).then(o => window.background = String(o))`), until(`window.background`))
	if got := value[string](t, ctx, `window.background`); got != "true" {
		t.Errorf("the figure lets a dark page shine through: opaque = %s", got)
	}
}

// TestClassicNotTrusted opens a notebook with stored outputs that this user has never run: scripts and SVG are kept
// off the page there, and the figures show as PNG, in their nominal size.
func TestClassicNotTrusted(t *testing.T) {
	ctx := openNotebook(t, "jupyter-notebook", worked)
	do(t, ctx, "wait for the figures", until(`[...document.querySelectorAll('.output_area img')].some(e => e.complete && e.naturalWidth > 0)`))
	screenshot(t, ctx, "classic-not-trusted")
	if value[bool](t, ctx, `Jupyter.notebook.trusted`) {
		t.Fatal("the server trusts a notebook that nobody has run")
	}
	if n := value[int](t, ctx, `document.querySelectorAll('.output_svg svg').length`); n > 0 {
		t.Errorf("%d SVG figures in a notebook that is not trusted", n)
	}
	checkScale(t, value[[]float64](t, ctx, `[...document.querySelectorAll('.output_png img')]`+scale))
	if n := value[int](t, ctx, `document.querySelectorAll('.output_html table td').length`); n == 0 {
		t.Error("the cards and tables of the notebook are not on the page")
	}
}
