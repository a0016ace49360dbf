package frontends

import (
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// TestConformanceSuite runs the kernel test suite of the Jupyter project, every attribute but the pager's set.
func TestConformanceSuite(t *testing.T) {
	needModule(t, "jupyter_kernel_test")
	out := run(t, 3*time.Minute, python, "testdata/suite.py", "-v")
	if !strings.Contains(out, "skipped=1)") { // the pager's test, the only one without a subject
		t.Errorf("the suite skipped another number of tests than the pager's one:\n%s", out)
	}
	noKernelLeft(t)
}

// TestClientLibrary drives the kernel with jupyter_client as a batch tool would.
func TestClientLibrary(t *testing.T) {
	needModule(t, "jupyter_client")
	t.Log(run(t, 2*time.Minute, python, "testdata/client.py"))
	noKernelLeft(t)
}

// TestNbconvertExecutesEveryNotebook runs each notebook through the exporter with this kernel.
func TestNbconvertExecutesEveryNotebook(t *testing.T) {
	need(t, "jupyter-nbconvert")
	for _, path := range notebooks(t) {
		t.Run(filepath.Base(path), func(t *testing.T) {
			run(t, 5*time.Minute, "jupyter-nbconvert", "--to", "html", "--execute", "--output-dir", t.TempDir(), path)
		})
	}
	noKernelLeft(t)
}
