package frontends

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
)

// npm fetches what TestLab drives.
const npm = "npm ci --ignore-scripts --no-audit --no-fund --prefix kernel/frontends/testdata/lab"

// TestLab shows output in JupyterLab's own client, output area and renderer, on the newer notebook server: text, a
// figure, a table, an error, a slot that is updated in place, a question.
func TestLab(t *testing.T) {
	bundler, err := filepath.Abs("testdata/lab/node_modules/.bin/esbuild")
	if err != nil {
		t.Fatal(err)
	}
	need(t, "node")
	if _, err := os.Stat(bundler); err != nil {
		absent(t, "JupyterLab's parts are not installed; from the top of the tree: "+npm)
	}
	folder := t.TempDir()
	run(t, time.Minute, bundler, "testdata/lab/main.js", "--bundle", "--outfile="+filepath.Join(folder, "lab.js"), "--loader:.svg=text", "--log-level=warning")
	url := notebookServer(t, "jupyter-nbclassic", folder)
	ctx := browser(t, 2*time.Minute)
	do(t, ctx, "load the client", chromedp.Navigate(url+"/tree?token="+token), script(`
		document.head.append(Object.assign(document.createElement('link'), {rel: 'stylesheet', href: '/files/lab.css'}));
		document.head.append(Object.assign(document.createElement('script'), {src: '/files/lab.js'}))`), until(`window.lab`))
	do(t, ctx, "start a kernel", script(fmt.Sprintf(`lab.start('linewright', %q).then(() => lab.started = true, e => lab.failed = String(e))`, token)), until(`lab.started || lab.failed`))
	if failed := value[bool](t, ctx, `Boolean(lab.failed)`); failed {
		t.Fatal(value[string](t, ctx, `lab.failed`))
	}

	start := func(code string, trusted bool) chromedp.Action[chromedp.Void] {
		return script(fmt.Sprintf(`lab.done = false; lab.run(%q, %t).then(() => lab.done = true)`, code, trusted))
	}
	const (
		last = `[...document.querySelectorAll('.jp-OutputArea')].at(-1)`
		text = last + `.innerText`
	)
	cell := func(code string) {
		t.Helper()
		do(t, ctx, code, start(code, true), until(`lab.done`))
	}
	expect := func(what, expression, want string) {
		t.Helper()
		if got := value[string](t, ctx, expression); !strings.Contains(got, want) {
			t.Errorf("%s: %q does not contain %q", what, got, want)
		}
	}

	cell(`fmt.Println("levels", linecode.AMI().Levels())`)
	expect("text", text, "levels [-1 0 1]")
	cell(`linecode.HDB3()`)
	expect("card", last+`.querySelector('.jp-RenderedHTML table').innerText`, "HDB3")
	cell(`[]float64{-1, 0, 1}`)
	expect("table", last+`.querySelector('.jp-RenderedHTML table').innerText`, "3 numbers")

	cell("p, err := spectrum.Exact(linecode.AMI(), pulse.Train{SymbolRate: 1e6})\nplotting.Spectrum(p)")
	const picture = last + `.querySelector('.jp-RenderedSVG img')`
	do(t, ctx, "wait for the figure", until(picture+`?.complete`), script(readable))
	if width := value[float64](t, ctx, picture+`.naturalWidth`); width < 300 || width != value[float64](t, ctx, picture+`.getBoundingClientRect().width`) {
		t.Errorf("the figure is %v px wide by itself and %v on the page", width, value[float64](t, ctx, picture+`.getBoundingClientRect().width`))
	}
	do(t, ctx, "look at the figure's background", script(`opaque(`+picture+`).then(o => window.background = String(o))`), until(`window.background`))
	expect("opaque background", `window.background`, "true")
	const png = last + `.querySelector('.jp-RenderedImage img')`
	do(t, ctx, "show the figure in an area that is not trusted", start(`plotting.Spectrum(p)`, false), until(`lab.done`), until(png+`?.complete`))
	if got := value[float64](t, ctx, `[`+png+`]`+scale+`[0]`); !(got > 1.99 && got < 2.01) {
		t.Errorf("the figure has %.3g pixels for a pixel of the page, want 2", got)
	}

	cell(`uint8(1) + "x"`)
	expect("error", last+`.querySelector('[data-mime-type="application/vnd.jupyter.stderr"]').innerText`, "mismatched types")
	cell(`page.Slot("best").Set("one")`)
	cell(`page.Slot("best").Set("two")`)
	const areas = `[...document.querySelectorAll('.jp-OutputArea')].slice(-2).map(e => e.innerText.trim()).join('|')`
	if got := value[string](t, ctx, areas); got != "two|" {
		t.Errorf("the cells of the slot show %q, want the update in the first one's place", got)
	}
	do(t, ctx, "ask", start(`fmt.Println("chosen:", page.Ask("candidate? "))`, true), until(`document.querySelector('.jp-Stdin-input')`),
		chromedp.SendKeys(`.jp-Stdin-input`, "HDB3\r"), until(`lab.done`))
	expect("answer", text, "chosen: HDB3")
	screenshot(t, ctx, "lab")
}
