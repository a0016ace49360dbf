package frontends

import (
	"context"
	"fmt"
	"net"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
)

// notebookServer starts the classic notebook server on a folder and returns its address; the test's end stops it.
func notebookServer(t *testing.T, folder string) (url, token string) {
	t.Helper()
	program := need(t, "jupyter-notebook")
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	port := l.Addr().(*net.TCPAddr).Port
	l.Close()
	token = "linewright-test"
	cmd := exec.Command(program, "--no-browser", "--allow-root", "--ip=127.0.0.1", fmt.Sprintf("--port=%d", port),
		"--NotebookApp.token="+token, "--NotebookApp.port_retries=0", "--notebook-dir="+folder)
	cmd.Env = installed
	log, err := os.Create(filepath.Join(t.TempDir(), "server.log"))
	if err != nil {
		t.Fatal(err)
	}
	defer log.Close()
	cmd.Stdout, cmd.Stderr = log, log
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		cmd.Process.Signal(syscall.SIGTERM)
		done := make(chan struct{})
		go func() { cmd.Wait(); close(done) }()
		select {
		case <-done:
		case <-time.After(15 * time.Second):
			cmd.Process.Kill()
			<-done
		}
		noKernelLeft(t)
	})
	url = fmt.Sprintf("http://127.0.0.1:%d", port)
	for range 300 {
		if r, err := http.Get(url + "/api?token=" + token); err == nil {
			r.Body.Close()
			return url, token
		}
		time.Sleep(100 * time.Millisecond)
	}
	text, _ := os.ReadFile(log.Name())
	t.Fatalf("the notebook server did not answer:\n%s", text)
	return "", ""
}

// browser opens a headless Chromium tab; the test's end closes it.
func browser(t *testing.T, limit time.Duration) context.Context {
	t.Helper()
	path := need(t, "chromium")
	ctx, cancel := context.WithTimeout(t.Context(), limit)
	t.Cleanup(cancel)
	ctx, cancel = chromedp.NewExecAllocator(ctx, chromedp.ExecPath(path), chromedp.Headless, chromedp.NoSandbox,
		chromedp.DisableGPU, chromedp.NoFirstRun, chromedp.UserDataDir(t.TempDir()), chromedp.WindowSize(1200, 1600),
		chromedp.Flag("disable-quic", true), chromedp.Flag("disable-background-networking", true),
		chromedp.Flag("disable-component-update", true), chromedp.Flag("disable-sync", true))
	t.Cleanup(cancel)
	ctx, cancel = chromedp.NewContext(ctx)
	t.Cleanup(cancel)
	return ctx
}

// do runs browser actions; on failure it says in which step and, where screenshots are kept, shows the page.
func do(t *testing.T, ctx context.Context, step string, actions ...chromedp.Action[chromedp.Void]) {
	t.Helper()
	if err := chromedp.Do(ctx, actions...); err != nil {
		screenshot(t, ctx, "failed")
		t.Fatalf("%s: %v", step, err)
	}
}

// value evaluates a JavaScript expression of the page.
func value[T any](t *testing.T, ctx context.Context, expression string) T {
	t.Helper()
	v, err := chromedp.Run(ctx, chromedp.Evaluate[T](expression))
	if err != nil {
		t.Fatalf("%s: %v", expression, err)
	}
	return v
}

// screenshot keeps a picture of the page in the folder that LINEWRIGHT_SCREENSHOTS names, if it names one.
func screenshot(t *testing.T, ctx context.Context, name string) {
	t.Helper()
	folder := os.Getenv("LINEWRIGHT_SCREENSHOTS")
	if folder == "" {
		return
	}
	png, err := chromedp.Run(ctx, chromedp.FullScreenshot(100))
	if err != nil {
		t.Log("no screenshot:", err)
		return
	}
	if err := os.WriteFile(filepath.Join(folder, name+".png"), png, 0o644); err != nil {
		t.Log(err)
	}
}

// script runs JavaScript in the page.
func script(text string) chromedp.Action[chromedp.Void] {
	return chromedp.Evaluate[chromedp.Void](text)
}

// until waits for a JavaScript condition of the page.
func until(condition string) chromedp.Action[chromedp.Void] {
	return chromedp.Poll[chromedp.Void](condition, chromedp.WithPollingInterval(100*time.Millisecond), chromedp.WithPollingTimeout(60*time.Second))
}

const (
	connected = `window.Jupyter && Jupyter.notebook && Jupyter.notebook.kernel && Jupyter.notebook.kernel.is_connected()`
	idle      = `Jupyter.notebook.get_cells().every(c => c.cell_type != 'code' || !c.element.find('.input_prompt').text().includes('*'))`
	figures   = `[...document.querySelectorAll('.output_area img, .output_area svg')].map(e => e.getBoundingClientRect().width)`
	last      = `Jupyter.notebook.get_cell(Jupyter.notebook.ncells() - 1).element`
)

// appendCell adds a cell at the end of the notebook and runs it.
func appendCell(code string) chromedp.Action[chromedp.Void] {
	return script(fmt.Sprintf(`
		Jupyter.notebook.insert_cell_at_bottom('code').set_text(%q);
		Jupyter.notebook.select(Jupyter.notebook.ncells() - 1);
		Jupyter.notebook.execute_cell();`, code))
}

// TestClassicNotebook works in the classic notebook as its user does: run all, look at the figure, stop a cell with
// the interrupt button, restart.
func TestClassicNotebook(t *testing.T) {
	folder := t.TempDir()
	source, err := os.ReadFile("testdata/session.ipynb")
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(folder, "session.ipynb"), source, 0o644); err != nil {
		t.Fatal(err)
	}
	url, token := notebookServer(t, folder)
	ctx := browser(t, 3*time.Minute)

	do(t, ctx, "open the notebook", chromedp.Navigate(url+"/notebooks/session.ipynb?token="+token), until(connected))
	do(t, ctx, "run all cells", script(`Jupyter.notebook.execute_all_cells()`), until(figures+`.some(w => w > 50)`), until(idle))
	screenshot(t, ctx, "classic-run-all")
	if width := value[float64](t, ctx, `Math.max(...`+figures+`)`); width < 300 {
		t.Errorf("the inline figure is %.0f px wide", width)
	}
	if !value[bool](t, ctx, `[...document.querySelectorAll('.output_html')].some(e => e.innerText.includes('AMI'))`) {
		t.Error("no card of the code on the page")
	}

	do(t, ctx, "start an endless cell", appendCell("for {\n}"), until(last+`.hasClass('running')`), chromedp.Sleep(500*time.Millisecond))
	do(t, ctx, "press the interrupt button", chromedp.Click(`[data-jupyter-action='jupyter-notebook:interrupt-kernel']`),
		until(last+`.find('.output_error').length > 0`), until(idle))
	screenshot(t, ctx, "classic-interrupted")

	do(t, ctx, "restart the kernel", script(`Jupyter.notebook.kernel.restart()`), chromedp.Sleep(time.Second), until(connected),
		appendCell(`fmt.Println("after the restart")`), until(last+`.find('.output_text').text().includes('after the restart')`))
	if got, want := value[string](t, ctx, last+`.find('.input_prompt').text()`), "In [1]:"; !strings.Contains(strings.ReplaceAll(got, "\u00a0", " "), want) {
		t.Errorf("the first cell after a restart is %q, want %q", got, want)
	}
}
