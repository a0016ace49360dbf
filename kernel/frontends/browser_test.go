package frontends

import (
	"context"
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
)

// browser opens a headless Chromium tab; the test's end closes it.
func browser(t *testing.T, limit time.Duration) context.Context {
	t.Helper()
	path := need(t, "chromium")
	ctx, cancel := context.WithTimeout(t.Context(), limit)
	t.Cleanup(cancel)
	ctx, cancel = chromedp.NewExecAllocator(ctx, chromedp.ExecPath(path), chromedp.Headless, chromedp.NoSandbox,
		chromedp.DisableGPU, chromedp.NoFirstRun, chromedp.UserDataDir(t.TempDir()), chromedp.WindowSize(1200, 1600),
		chromedp.Flag("disable-quic", true), chromedp.Flag("disable-background-networking", true),
		chromedp.Flag("disable-component-update", true), chromedp.Flag("disable-sync", true),
		chromedp.Flag("host-resolver-rules", "MAP * ~NOTFOUND, EXCLUDE 127.0.0.1")) // pages ask for scripts from afar
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
	if os.Getenv("LINEWRIGHT_SCREENSHOTS") == "" {
		return
	}
	png, err := chromedp.Run(ctx, chromedp.FullScreenshot(100))
	if err != nil {
		t.Log("no screenshot:", err)
		return
	}
	keep(t, name+".png", png)
}

// keep writes a file into the folder that LINEWRIGHT_SCREENSHOTS names, if it names one.
func keep(t *testing.T, name string, data []byte) {
	t.Helper()
	folder := os.Getenv("LINEWRIGHT_SCREENSHOTS")
	if folder == "" {
		return
	}
	if err := os.WriteFile(filepath.Join(folder, name), data, 0o644); err != nil {
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
